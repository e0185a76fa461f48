package ensemble

import (
	"errors"
	"fmt"
	"math"
	"regexp"
	"strconv"
)

// A Scalar is a value of a scenario as it stands in YAML: a number with or without a
// unit, a word, or in quotes a group of keys or null.
type Scalar string

// UnmarshalText takes any text.
func (s *Scalar) UnmarshalText(text []byte) error { *s = Scalar(text); return nil }

// MarshalText returns the text.
func (s Scalar) MarshalText() ([]byte, error) { return []byte(s), nil }

// Want says what to write.
func (Scalar) Want() string { return "a value of the scenario, such as 12 km/s" }

// A quantity is a number and what follows it, blank included.
type quantity struct {
	number float64
	unit   string
}

var quantityText = regexp.MustCompile(`^([-+]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][-+]?[0-9]+)?)( *[^ 0-9].*)?$`)

func parseQuantity(s string) (quantity, error) {
	m := quantityText.FindStringSubmatch(s)
	if m == nil {
		return quantity{}, fmt.Errorf("%q is not a number with a unit", s)
	}
	x, err := strconv.ParseFloat(m[1], 64)
	if err != nil {
		return quantity{}, fmt.Errorf("%q is too large a number", s)
	}
	return quantity{x, m[2]}, nil
}

// text has eight digits: more than any input means, and few enough for processors that
// round the last ones differently to agree.
func (q quantity) text() string { return strconv.FormatFloat(q.number, 'g', 8, 64) + q.unit }

// A span is the range of a parameter.
type span struct{ from, to quantity }

// scalars reads values that share one unit.
func scalars(keys []string, values ...Scalar) (qs []quantity, key string, err error) {
	for i, s := range values {
		q, err := parseQuantity(string(s))
		if err == nil && i > 0 && q.unit != qs[0].unit {
			err = fmt.Errorf("%q is not in the unit of %q", s, values[0])
		}
		if err != nil {
			return nil, keys[i], err
		}
		qs = append(qs, q)
	}
	return qs, "", nil
}

// check returns the first mistake and the key below the parameter where it stands.
func (p *Parameter) check() (key string, err error) {
	if p.Values != nil {
		if len(p.Values) == 0 {
			return ".values", errors.New("the list is empty")
		}
		return "", nil
	}
	_, key, err = p.distribution()
	return key, err
}

// distribution returns the quantile function of the parameter's numbers.
func (p *Parameter) distribution() (of func(u float64) quantity, key string, err error) {
	name, ends, positive := p.ends()
	keys := []string{name + ".from", name + ".to"}
	qs, key, err := scalars(keys, ends...)
	if err != nil {
		return nil, key, err
	}
	s := span{qs[0], qs[1]}
	switch {
	case !(s.from.number < s.to.number):
		return nil, keys[1], fmt.Errorf("%s is not above %s", ends[1], ends[0])
	case positive && !(s.from.number > 0):
		return nil, keys[0], fmt.Errorf("%s has no logarithm; it must be more than 0", ends[0])
	}
	within := func(x float64) quantity { return quantity{min(max(x, s.from.number), s.to.number), s.from.unit} }
	switch {
	case p.Uniform != nil:
		return func(u float64) quantity { return within(s.from.number + float64(u*(s.to.number-s.from.number))) }, "", nil
	case p.LogUniform != nil:
		low, high := math.Log(s.from.number), math.Log(s.to.number)
		return func(u float64) quantity { return within(math.Exp(low + float64(u*(high-low)))) }, "", nil
	case p.Normal != nil:
		qs, key, err := scalars([]string{"", name + ".mean", name + ".deviation"}, ends[0], p.Normal.Mean, p.Normal.Deviation)
		if err != nil {
			return nil, key, err
		}
		if !(qs[2].number > 0) {
			return nil, name + ".deviation", fmt.Errorf("%s must be more than 0", p.Normal.Deviation)
		}
		of, err := truncated(qs[1].number, qs[2].number, s.from.number, s.to.number)
		return func(u float64) quantity { return within(of(u)) }, name, err
	}
	qs, key, err = scalars([]string{"", name + ".median"}, ends[0], p.LogNormal.Median)
	if err != nil {
		return nil, key, err
	}
	if !(qs[1].number > 0) {
		return nil, name + ".median", fmt.Errorf("%s has no logarithm; it must be more than 0", p.LogNormal.Median)
	}
	log, err := truncated(math.Log(qs[1].number), p.LogNormal.Deviation, math.Log(s.from.number), math.Log(s.to.number))
	return func(u float64) quantity { return within(math.Exp(log(u))) }, name, err
}

// ends returns the key and the two ends of the parameter's range.
func (p *Parameter) ends() (name string, ends []Scalar, positive bool) {
	switch {
	case p.Uniform != nil:
		return ".uniform", []Scalar{p.Uniform.From, p.Uniform.To}, false
	case p.LogUniform != nil:
		return ".log_uniform", []Scalar{p.LogUniform.From, p.LogUniform.To}, true
	case p.Normal != nil:
		return ".normal", []Scalar{p.Normal.From, p.Normal.To}, false
	case p.LogNormal != nil:
		return ".log_normal", []Scalar{p.LogNormal.From, p.LogNormal.To}, true
	}
	panic("ensemble: a parameter without variation")
}

// truncated returns the quantile function of a normal distribution between two ends.
func truncated(mean, deviation, from, to float64) (func(u float64) float64, error) {
	below := func(x float64) float64 { return 0.5 * math.Erfc((mean-x)/(deviation*math.Sqrt2)) }
	low, high := below(from), below(to)
	if !(high-low > 1e-6) {
		return nil, errors.New("the range holds almost nothing of the distribution")
	}
	return func(u float64) float64 {
		return mean + float64(deviation*math.Sqrt2*math.Erfinv(2*(low+float64(u*(high-low)))-1))
	}, nil
}

// at returns the value of the parameter at u in [0, 1).
func (p *Parameter) at(u float64) string {
	if n := len(p.Values); n > 0 {
		return string(p.Values[min(int(u*float64(n)), n-1)])
	}
	of, _, err := p.distribution()
	if err != nil {
		panic("ensemble: " + err.Error())
	}
	return of(u).text()
}

// A sample is a value that the parameter may take and its key below the parameter.
type sample struct{ key, text string }

// samples returns every value of a list, or the ends of a range.
func (p *Parameter) samples() (ss []sample) {
	for i, v := range p.Values {
		ss = append(ss, sample{"values." + strconv.Itoa(i), string(v)})
	}
	if p.Values == nil {
		name, ends, _ := p.ends()
		ss = append(ss, sample{name[1:] + ".from", string(ends[0])}, sample{name[1:] + ".to", string(ends[1])})
	}
	return ss
}
