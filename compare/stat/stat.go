// Package stat holds the order statistics of the verdict. A bias is reported as
// a median with percentiles, because the tails of a phase speed are not Gaussian.
//
// Values that are not finite stand for pixels without a value: every function
// skips them, by contract, and returns NaN where nothing is left.
package stat

import (
	"bytes"
	"encoding/json"
	"math"
	"slices"
)

// Quantile returns the sample quantile of x at probability p (0..1), linear
// between order statistics: definition 7 of Hyndman & Fan 1996, Am. Stat. 50,
// 361. x is left as it is and need not be sorted.
func Quantile(p float64, x []float64) float64 {
	if !(p >= 0 && p <= 1) {
		panic("stat: probability outside 0..1")
	}
	return quantile(p, sorted(x))
}

// Median returns the middle of x: the mean of the two middle values if their
// number is even.
func Median(x []float64) float64 { return Quantile(0.5, x) }

// A Summary is what is said of one sample: its median, the percentiles that
// enclose the middle 68 and 95 per cent, and how many values it holds. With no
// value at all every number but Count is NaN.
type Summary struct {
	Median float64
	P2_5   float64
	P16    float64
	P84    float64
	P97_5  float64
	Count  int

	Interval *Interval // of the median; nil: not asked for. Summarise leaves it nil.
}

// Summarise returns the Summary of x, which it leaves as it is.
func Summarise(x []float64) Summary {
	s := sorted(x)
	return Summary{
		Median: quantile(0.5, s),
		P2_5:   quantile(0.025, s),
		P16:    quantile(0.16, s),
		P84:    quantile(0.84, s),
		P97_5:  quantile(0.975, s),
		Count:  len(s),
	}
}

// summaryJSON fixes key names and their order in summary.json.
type summaryJSON struct {
	Median Number  `json:"median"`
	P2_5   Number  `json:"p2_5"`
	P16    Number  `json:"p16"`
	P84    Number  `json:"p84"`
	P97_5  Number  `json:"p97_5"`
	Count  int     `json:"count"`
	Low    *Number `json:"median_low,omitempty"`
	High   *Number `json:"median_high,omitempty"`
	Blocks *int    `json:"blocks,omitempty"`
}

// MarshalJSON writes the keys median, p2_5, p16, p84, p97_5 and count, and if there is an
// Interval median_low, median_high and blocks; NaN is null.
func (s Summary) MarshalJSON() ([]byte, error) {
	j := summaryJSON{Median: Number(s.Median), P2_5: Number(s.P2_5), P16: Number(s.P16), P84: Number(s.P84), P97_5: Number(s.P97_5), Count: s.Count}
	if i := s.Interval; i != nil {
		j.Low, j.High, j.Blocks = (*Number)(&i.Low), (*Number)(&i.High), &i.Blocks
	}
	return json.Marshal(j)
}

// UnmarshalJSON reads what MarshalJSON writes.
func (s *Summary) UnmarshalJSON(b []byte) error {
	n := Number(math.NaN())
	j := summaryJSON{Median: n, P2_5: n, P16: n, P84: n, P97_5: n}
	if err := json.Unmarshal(b, &j); err != nil {
		return err
	}
	*s = Summary{float64(j.Median), float64(j.P2_5), float64(j.P16), float64(j.P84), float64(j.P97_5), j.Count, nil}
	if j.Blocks != nil {
		s.Interval = &Interval{math.NaN(), math.NaN(), *j.Blocks}
		if j.Low != nil && j.High != nil { // null is NaN
			s.Interval.Low, s.Interval.High = float64(*j.Low), float64(*j.High)
		}
	}
	return nil
}

// A Number is a float64 whose JSON form is null where it is not finite.
type Number float64

// MarshalJSON writes the shortest decimal that reads back the same, or null.
func (n Number) MarshalJSON() ([]byte, error) {
	if v := float64(n); !finite(v) {
		return []byte("null"), nil
	}
	return json.Marshal(float64(n))
}

// UnmarshalJSON reads a number; null becomes NaN.
func (n *Number) UnmarshalJSON(b []byte) error {
	if bytes.Equal(b, []byte("null")) {
		*n = Number(math.NaN())
		return nil
	}
	return json.Unmarshal(b, (*float64)(n))
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

// sorted returns the finite values of x in ascending order, in a new slice.
func sorted(x []float64) []float64 {
	s := make([]float64, 0, len(x))
	for _, v := range x {
		if finite(v) {
			s = append(s, v)
		}
	}
	slices.Sort(s)
	return s
}

// quantile is Quantile of sorted finite values.
func quantile(p float64, s []float64) float64 {
	n := len(s)
	if n == 0 {
		return math.NaN()
	}
	h := p * float64(n-1)
	i := int(h)
	if i >= n-1 {
		return s[n-1]
	}
	t := h - float64(i)
	a, b := s[i], s[i+1]
	// From the nearer end, so that t = 0 and t = 1 are exact.
	if t < 0.5 {
		return a + float64((b-a)*t)
	}
	return b - float64((b-a)*(1-t))
}
