package budget

import (
	"errors"
	"math"
	"slices"

	"offplane/compare"
	"offplane/compare/stat"
	"offplane/model"
)

// A game is what is averaged over orders.
type game struct {
	players []player
	average Average
	sets    []Set // whose value is needed
}

func newGame(ps []player, a Average) game { return game{ps, a, a.Sets()} }

// need adds sets.
func (g *game) need(sets ...Set) {
	g.sets = append(g.sets, sets...)
	slices.Sort(g.sets)
	g.sets = slices.Compact(g.sets)
}

// at returns the number of the player with a key, or -1.
func (g *game) at(key string) int {
	return slices.IndexFunc(g.players, func(p player) bool { return p.key == key })
}

// A tally turns the values of both games into terms.
type tally struct {
	*world
	all         []assumption
	on          []bool
	wave, light game
	mu          float64 // 1/2 ln(mu/mu_true)

	lines map[Set][]float32 // of the light game
	chain map[Set]*values   // of the wave game

	regions []region // all that is used, then by height
	edges   []float64
}

// A region lists the positions in pixels that are used, by piece.
type region [][]int

// pixels returns the number of positions in at least one piece, and of all.
func (g region) pixels() (pixels, samples int) {
	have := map[int]bool{}
	for _, of := range g {
		samples += len(of)
		for _, i := range of {
			have[i] = true
		}
	}
	return len(have), samples
}

func newTally(w *world) *tally {
	s := &w.base.scenario
	t := &tally{world: w, all: assumptions(), mu: 0.5 * math.Log(s.Inversion.Mu/model.Mu(s.Corona.Helium))}
	for _, a := range t.all {
		t.on = append(t.on, a.present(s) && (a.key != temperatureKey || w.misjudged()))
	}
	t.light = newGame(cast(t.all, t.on, light), Exact(len(cast(t.all, t.on, light))))
	ps := cast(t.all, t.on, waves)
	average := Exact(len(ps))
	orders := w.o.Orders
	if orders == 0 && len(ps) > exactPlayers {
		orders = ordersByDefault
	}
	if orders > 0 && orders*(len(ps)-1) < 1<<len(ps) { // else all orders take less
		average = Sampled(len(ps), orders/2, s.Seed)
	}
	t.wave = newGame(ps, average)
	all := average.all()
	t.wave.need(0, all)
	for i := range ps {
		t.wave.need(1<<i, all&^(1<<i))
	}
	for _, s := range t.wave.sets {
		t.light.need(t.still(s))
	}
	return t
}

// misjudged reports whether the temperature that the inversion assumes is wrong
// anywhere.
func (w *world) misjudged() bool {
	for i := range w.pixels {
		if !w.likely(i) {
			return true
		}
	}
	return false
}

// still returns the set of the light game that has the light of a set of the wave game.
func (t *tally) still(s Set) Set {
	var out Set
	for i, p := range t.light.players {
		key := p.key
		if key == emissionKey {
			key = wavesKey
		}
		if k := t.wave.at(key); k < 0 || s>>k&1 == 1 {
			out |= 1 << i
		}
	}
	return out
}

// piece returns the values of one piece of a set.
func piece(x [][]float32, r int) []float32 {
	if len(x) == 1 {
		return x[0]
	}
	return x[r]
}

// half is a value of the wave game, at a piece and position.
type half func(s Set, r, i int) float64

func (t *tally) speed(s Set, r, i int) float64 { return float64(piece(t.chain[s].speed, r)[i]) }

// rest is what waves and noise add to the density of the light game.
func (t *tally) rest(s Set, r, i int) float64 {
	return float64(piece(t.chain[s].density, r)[i]) - float64(t.lines[t.still(s)][i])
}

// use finds what is used: pixels that have a field in a piece of the scenario as it is
// and in the ideal world. It divides them by height.
func (t *tally) use() error {
	t.edges = compare.Edges(slices.Min(t.heights), slices.Max(t.heights), 20)
	last := len(t.edges) - 2
	t.regions = make([]region, last+2)
	for k := range t.regions {
		t.regions[k] = make(region, t.o.Pieces)
	}
	all := t.wave.average.all()
	for i, height := range t.heights {
		h := 0
		for h < last && height >= t.edges[h+1] {
			h++
		}
		for r := range t.o.Pieces {
			x := t.speed(0, r, i) + t.rest(0, r, i) + t.speed(all, r, i) + t.rest(all, r, i)
			for _, s := range t.light.sets {
				x += float64(t.lines[s][i])
			}
			if x == x {
				t.regions[0][r] = append(t.regions[0][r], i)
				t.regions[h+1][r] = append(t.regions[h+1][r], i)
			}
		}
	}
	for r := range t.o.Pieces {
		if len(t.regions[0][r]) == 0 {
			return errors.New("no pixel has a field both in the scenario as it is and in the ideal world: a longer observation or a wider field would do")
		}
	}
	return nil
}

// mean returns the mean of f over the positions at which it has a value, and their share.
func mean(of []int, f func(i int) float64) (m, share float64) {
	n := 0.0
	for _, i := range of {
		if x := f(i); x == x {
			m += x
			n++
		}
	}
	return m / n, n / float64(len(of))
}

// spreadOf returns mean and standard deviation of x.
func spreadOf(x []float64) (m, sd float64) {
	for _, v := range x {
		m += v / float64(len(x))
	}
	for _, v := range x {
		sd += (v - m) * (v - m)
	}
	return m, math.Sqrt(sd / float64(len(x)-1))
}

// A charge is what the terms of one half come to in one region.
type charge struct {
	share, err, ideal, full []float64 // by term
	method, total           float64
	methodErr, totalErr     float64
}

// chargeWaves charges one half of the wave game in a region.
func (t *tally) chargeWaves(f half, g region) *charge {
	pieces := t.o.Pieces
	n := math.Sqrt(float64(pieces))
	value := map[Set][]float64{}
	for _, s := range t.wave.sets {
		for r := range pieces {
			m, _ := mean(g[r], func(i int) float64 { return f(s, r, i) })
			value[s] = append(value[s], m)
		}
	}
	average := func(s Set) float64 { m, _ := spreadOf(value[s]); return m }
	c := t.newCharge()
	share, sampled := t.wave.average.Shares(average)
	by := make([][]float64, pieces)
	for r := range by {
		by[r], _ = t.wave.average.Shares(func(s Set) float64 { return value[s][r] })
	}
	all := t.wave.average.all()
	for k, p := range t.wave.players {
		x := make([]float64, pieces)
		for r := range x {
			x[r] = by[r][k]
		}
		_, sd := spreadOf(x)
		if p.key != durationKey {
			// Pieces differ where the duration is finite, which is half of the average; the
			// other half has the same chance without showing it.
			sd *= 2
		}
		c.share[p.of], c.err[p.of] = share[k], math.Hypot(sd/n, sampled[k])
		c.ideal[p.of] = average(1<<k) - average(0)
		c.full[p.of] = average(all) - average(all&^(1<<k))
	}
	var sd float64
	c.method = average(0)
	_, sd = spreadOf(value[1<<t.wave.at(durationKey)])
	c.methodErr = sd / n
	c.total, sd = spreadOf(value[all])
	c.totalErr = sd / n
	return c
}

// chargeLines charges the light game.
func (t *tally) chargeLines(g region) *charge {
	value := map[Set]float64{}
	for _, s := range t.light.sets {
		for _, of := range g {
			m, _ := mean(of, func(i int) float64 { return float64(t.lines[s][i]) })
			value[s] += m / float64(len(g))
		}
	}
	c := t.newCharge()
	share, _ := t.light.average.Shares(func(s Set) float64 { return value[s] })
	all := t.light.average.all()
	for k, p := range t.light.players {
		c.share[p.of], c.ideal[p.of], c.full[p.of] = share[k], value[1<<k]-value[0], value[all]-value[all&^(1<<k)]
	}
	c.method, c.total = value[0], value[all]
	return c
}

func (t *tally) newCharge() *charge {
	n := len(t.all)
	return &charge{share: make([]float64, n), err: make([]float64, n), ideal: make([]float64, n), full: make([]float64, n)}
}

// plus returns the charge of the sum of two halves.
func (c *charge) plus(d *charge) *charge {
	e := charge{method: c.method + d.method, total: c.total + d.total,
		methodErr: math.Hypot(c.methodErr, d.methodErr), totalErr: math.Hypot(c.totalErr, d.totalErr)}
	for i := range c.share {
		e.share = append(e.share, c.share[i]+d.share[i])
		e.err = append(e.err, math.Hypot(c.err[i], d.err[i]))
		e.ideal = append(e.ideal, c.ideal[i]+d.ideal[i])
		e.full = append(e.full, c.full[i]+d.full[i])
	}
	return &e
}

// open returns what method and shares leave of the total.
func (c *charge) open() float64 {
	x := c.total - c.method
	for _, s := range c.share {
		x -= s
	}
	return x
}

// budget makes terms of the values.
func (t *tally) budget() (*Budget, error) {
	if err := t.use(); err != nil {
		return nil, err
	}
	b := &Budget{Pixels: Pixels{Total: len(t.pixels), Least: 1}}
	b.Pixels.Used, b.Pixels.Samples = t.regions[0].pixels()
	both := func(s Set, r, i int) float64 { return t.speed(s, r, i) + t.rest(s, r, i) }
	for _, s := range t.wave.sets {
		for r, of := range t.regions[0] {
			_, share := mean(of, func(i int) float64 { return both(s, r, i) })
			b.Pixels.Least = min(b.Pixels.Least, stat.Number(share))
		}
	}
	for h, g := range t.regions {
		lines := t.chargeLines(g)
		speed := t.chargeWaves(t.speed, g)
		density := lines.plus(t.chargeWaves(t.rest, g))
		field := lines.plus(t.chargeWaves(both, g))
		if h == 0 {
			t.terms(b, field, speed, density)
		} else {
			n, _ := g.pixels()
			t.height(b, h-1, n, field, speed, density)
		}
		for _, c := range []*charge{field, speed, density} {
			if x := math.Abs(c.open()); x > float64(b.Closure) { // false for a bin without values
				b.Closure = stat.Number(x)
			}
		}
	}
	t.scatter(b)
	var ln []float64
	all := t.wave.average.all()
	for r, of := range t.regions[0] {
		for _, i := range of {
			ln = append(ln, t.mu+t.speed(all, r, i)+float64(piece(t.chain[all].density, r)[i]))
		}
	}
	b.MedianRatio = stat.Number(stat.Median(ln))
	return b, nil
}

// muTerm returns the term of mu: a factor of the field alone.
func (t *tally) muTerm() Term {
	m := stat.Number(t.mu)
	return Term{Key: "mu", Name: "mass per electron", Off: "the inversion knows the corona's mass per electron", On: t.mu != 0, Field: Effect{Share: m, FromIdeal: m, FromFull: m}}
}

// terms fills in the terms of the whole field of view.
func (t *tally) terms(b *Budget, field, speed, density *charge) {
	none := stat.Number(math.NaN())
	end := func(key, name string, of func(*charge) (x, err float64)) Term {
		e := func(c *charge) Effect {
			x, err := of(c)
			return Effect{Share: stat.Number(x), Error: stat.Number(err), FromIdeal: none, FromFull: none}
		}
		return Term{Key: key, Name: name, On: true, Field: e(field), Speed: e(speed), Density: e(density)}
	}
	b.Method = end("method", "the method itself", func(c *charge) (x, err float64) { return c.method, c.methodErr })
	b.Total = end("total", "total", func(c *charge) (x, err float64) { return c.total, c.totalErr })
	b.Total.Field.Share += stat.Number(t.mu)
	for i, a := range t.all {
		e := func(c *charge) Effect {
			return Effect{Share: stat.Number(c.share[i]), Error: stat.Number(c.err[i]), FromIdeal: stat.Number(c.ideal[i]), FromFull: stat.Number(c.full[i])}
		}
		b.Terms = append(b.Terms, Term{Key: a.key, Name: a.name, Off: a.about, On: t.on[i], Field: e(field), Speed: e(speed), Density: e(density)})
	}
	b.Terms = append(b.Terms, t.muTerm())
}

// height adds a height bin.
func (t *tally) height(b *Budget, h, pixels int, field, speed, density *charge) {
	n := func(x float64) stat.Number { return stat.Number(x) }
	bin := Height{From: n(t.edges[h]), To: n(t.edges[h+1]), Pixels: pixels,
		Method: Shares{"method", n(field.method), n(field.methodErr), n(speed.method), n(density.method)},
		Total:  Shares{"total", n(field.total + t.mu), n(field.totalErr), n(speed.total), n(density.total)}}
	for i, a := range t.all {
		bin.Terms = append(bin.Terms, Shares{a.key, n(field.share[i]), n(field.err[i]), n(speed.share[i]), n(density.share[i])})
	}
	mu := t.muTerm()
	bin.Terms = append(bin.Terms, Shares{Key: mu.Key, Field: mu.Field.Share})
	b.Heights = append(b.Heights, bin)
}

// moments gathers the shares of the pixels in one half.
type moments struct{ n, sum, squares, within, with float64 }

// add takes the shares of one pixel in all pieces, and the pixel's total.
func (m *moments) add(x, total []float64) {
	mean, sd := spreadOf(x)
	all, _ := spreadOf(total)
	m.n++
	m.sum += mean
	m.squares += mean * mean
	m.within += sd * sd
	for r := range x {
		m.with += (x[r] - mean) * (total[r] - all) / float64(len(x)-1)
	}
}

// put writes scatter and spread into an effect; total is the variance of the total.
func (m *moments) put(e *Effect, pieces int, total float64) {
	within := m.within / m.n
	e.Scatter = stat.Number(math.Sqrt(within))
	e.ScatterShare = 0
	if total > 0 {
		e.ScatterShare = stat.Number(m.with / m.n / math.Sqrt(total))
	}
	between := m.squares/m.n - m.sum*m.sum/m.n/m.n - within/float64(pieces)
	e.Spread = stat.Number(math.Sqrt(max(between, 0)))
}

// A scattering holds the shares of one pixel in all pieces: by half (speed, density,
// field), line of the budget (terms, method, total) and piece.
type scattering [3][][]float64

func newScattering(lines, pieces int) *scattering {
	var x scattering
	for h := range x {
		x[h] = make([][]float64, lines)
		for k := range x[h] {
			x[h][k] = make([]float64, pieces)
		}
	}
	return &x
}

// pixel fills in the shares at a position and reports whether it has a field in every
// state.
func (t *tally) pixel(x *scattering, i int) bool {
	n := len(t.all)
	all := t.wave.average.all()
	lines, _ := t.light.average.Shares(func(s Set) float64 { return float64(t.lines[s][i]) })
	for r := range t.o.Pieces {
		for h := range x {
			for k := range x[h] {
				x[h][k][r] = 0
			}
		}
		for k, p := range t.light.players {
			x[1][p.of][r] = lines[k]
		}
		speed, _ := t.wave.average.Shares(func(s Set) float64 { return t.speed(s, r, i) })
		rest, _ := t.wave.average.Shares(func(s Set) float64 { return t.rest(s, r, i) })
		for k, p := range t.wave.players {
			x[0][p.of][r] = speed[k]
			x[1][p.of][r] += rest[k]
		}
		x[0][n][r], x[1][n][r] = t.speed(0, r, i), t.rest(0, r, i)+float64(t.lines[0][i])
		x[0][n+1][r], x[1][n+1][r] = t.speed(all, r, i), float64(piece(t.chain[all].density, r)[i])
		for k := range x[2] {
			x[2][k][r] = x[0][k][r] + x[1][k][r]
			if math.IsNaN(x[2][k][r]) {
				return false
			}
		}
	}
	return true
}

// scatter fills in what differs between pieces and between pixels.
func (t *tally) scatter(b *Budget) {
	n := len(t.all)
	sums := make([][3]moments, n+2)
	x := newScattering(n+2, t.o.Pieces)
	for _, i := range t.regions[0][0] { // those without a value in another piece fall out
		if !t.pixel(x, i) {
			continue
		}
		b.Pixels.Scatter++
		for h := range x {
			for k := range x[h] {
				sums[k][h].add(x[h][k], x[h][n+1])
			}
		}
	}
	few := b.Pixels.Scatter < fewest
	for k := range sums {
		term := &b.Method
		switch {
		case k < n:
			term = &b.Terms[k]
		case k == n+1:
			term = &b.Total
		}
		for h, e := range []*Effect{&term.Speed, &term.Density, &term.Field} {
			total := sums[n+1][h]
			sums[k][h].put(e, t.o.Pieces, total.within/total.n)
			if few {
				e.Scatter, e.ScatterShare, e.Spread = stat.Number(math.NaN()), stat.Number(math.NaN()), stat.Number(math.NaN())
			}
		}
	}
}

// fewest is the number of pixels below which nothing is said of their scatter.
const fewest = 10
