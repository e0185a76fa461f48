package camera

import (
	"math"

	"offplane/scenarios"
	"offplane/synth/random"
)

// A Schedule says when what is exposed. The time of a frame is that of the middle of
// its first exposure; the motion within one exposure is left out (a wave of 12 mHz
// loses 0.15 % of its amplitude in 2.5 s).
type Schedule struct {
	// Delay of each tuning after the time of its frame [s], in order of wavelength.
	Delay []float64
	// Second holds the slots (frames of the first line) with a frame of the second
	// line, ascending.
	Second []int
	// After is the time of a frame of the second line after its slot [s].
	After float64
	// Lost frames of each line; those of the first line that gave way to the second
	// are lost.
	Lost [2][]bool
}

// delays returns the delay of each tuning in order of wavelength, and the time that
// all of them take [s].
func delays(c scenarios.Camera) ([]float64, float64) {
	n := len(c.Tunings)
	d := make([]float64, n)
	if !c.Sequential {
		return d, float64(c.Exposure + c.DeadTime)
	}
	step := float64(c.TuningTime)
	if step == 0 {
		step = float64(c.Cadence) / float64(n)
		if c.Switching == "interleaved" {
			step /= 2
		}
	}
	for i := range d {
		k := i
		if len(c.Order) == n {
			k = c.Order[i]
		}
		d[k] = float64(i) * step
	}
	return d, float64(n) * step
}

// Latest returns the latest time of an exposure after the start of its slot [s].
func Latest(c scenarios.Camera) float64 {
	d, all := delays(c)
	last := 0.0
	for _, x := range d {
		last = max(last, x)
	}
	if c.Switching == "interleaved" {
		last += all
	}
	return last
}

// NewSchedule returns the schedule of an observation of that many slots. Lost frames
// are addressed by (seed, line, frame).
func NewSchedule(c scenarios.Camera, slots int, seed uint64) *Schedule {
	s := &Schedule{}
	var all float64
	s.Delay, all = delays(c)
	n := min(c.SecondLine, slots)
	switch c.Switching {
	case "blocks":
		blocks := min(c.Blocks, n)
		for b := range blocks {
			length := n*(b+1)/blocks - n*b/blocks
			first := (2*b+1)*slots/(2*blocks) - length/2
			for i := range length {
				s.Second = append(s.Second, first+i)
			}
		}
	case "interleaved":
		s.After = all
		fallthrough
	default: // each in the middle of its share of the time
		for i := range n {
			s.Second = append(s.Second, (2*i+1)*slots/(2*n))
		}
	}
	s.Lost[0], s.Lost[1] = make([]bool, slots), make([]bool, n)
	if c.Switching == "blocks" {
		for _, t := range s.Second {
			s.Lost[0][t] = true
		}
	}
	for line, lost := range s.Lost {
		key := random.NewKey(seed, 0x6c6f7374, uint64(line)) // "lost"
		for f := range lost {
			lost[f] = lost[f] || key.Uniform(uint64(f)) < c.Lost
			t := s.Time(line, f, float64(c.Cadence))
			for _, g := range c.Gaps {
				lost[f] = lost[f] || t >= float64(g.From) && t < float64(g.From+g.Length)
			}
		}
	}
	return s
}

// Slot returns the slot of a frame.
func (s *Schedule) Slot(line, frame int) int {
	if line == 1 {
		return s.Second[frame]
	}
	return frame
}

// Time returns the time of a frame after the start [s].
func (s *Schedule) Time(line, frame int, cadence float64) float64 {
	t := float64(s.Slot(line, frame)) * cadence
	if line == 1 {
		t += s.After
	}
	return t
}

// A pointing moves the image on the detector.
type pointing struct {
	jitter, driftX, driftY float64 // rms [pixels], drift [pixels/s]
	middle                 float64 // when the drift is zero [s]
	seed                   uint64
}

func newPointing(c scenarios.Camera, pixel float64, seed uint64) *pointing {
	p := c.Pointing
	if p == nil {
		return nil
	}
	return &pointing{p.Jitter.Rad() / pixel, p.DriftX.Rad() / pixel / 3600, p.DriftY.Rad() / pixel / 3600, float64(c.Duration) / 2, seed}
}

// at returns where the image stands at an exposure [pixels]; jitter is addressed by
// (seed, line, frame, tuning).
func (p *pointing) at(line, frame, tuning int, time float64) (dx, dy float64) {
	key := random.NewKey(p.seed, 0x6a6974, uint64(line), uint64(frame), uint64(tuning)) // "jit"
	return p.jitter*key.Normal(0) + p.driftX*(time-p.middle), p.jitter*key.Normal(1) + p.driftY*(time-p.middle)
}

// cubic returns the weights of the four samples around the fraction f of the way from
// the second to the third: cubic convolution (Keys 1981, IEEE Trans. ASSP 29, 1153,
// from memory). They add up to one.
func cubic(f float64) [4]float64 {
	f2, f3 := f*f, f*f*f
	return [4]float64{(-f + 2*f2 - f3) / 2, (2 - 5*f2 + 3*f3) / 2, (f + 4*f2 - 3*f3) / 2, (f3 - f2) / 2}
}

// A Move is the resampling of one image: the value at a pixel is the sum of the image
// at X+i, Y+j of it with the weights wx[i] wy[j], i and j from 0 to 3.
type Move struct {
	X, Y   int
	Wx, Wy [4]float32
}

// Moves returns the resampling of each frame of a line at one tuning, and how far any
// of them reaches [pixels]; nil if the pointing is perfect.
func (c *Camera) Moves(s *Schedule, line, tuning, frames int) (moves []Move, reach int) {
	p := c.pointing
	if p == nil {
		return nil, 0
	}
	for f := range frames {
		dx, dy := p.at(line, f, tuning, s.Time(line, f, c.cadence)+s.Delay[tuning])
		// The image has moved by (dx, dy): a pixel sees what was at (-dx, -dy) of it.
		x, y := math.Floor(-dx), math.Floor(-dy)
		m := Move{X: int(x) - 1, Y: int(y) - 1}
		for i, w := range cubic(-dx - x) {
			m.Wx[i] = float32(w)
		}
		for i, w := range cubic(-dy - y) {
			m.Wy[i] = float32(w)
		}
		moves = append(moves, m)
		reach = max(reach, -m.X, m.X+3, -m.Y, m.Y+3)
	}
	return moves, reach
}

// Reach returns how many pixels from the field light may come into it, at most: by the
// compact point spread and the pointing. Pixel is the pitch [rad].
func Reach(c scenarios.Camera, pixel float64) int {
	r := most
	if !c.Diffraction && c.Seeing == 0 {
		r = len(gaussianSpread(c.PointSpread.Rad(), pixel)) / 2
	}
	if p := newPointing(c, pixel, 0); p != nil {
		// Among 2^53 normal numbers none is beyond 8.3.
		r += 3 + int(math.Ceil(8.3*p.jitter+max(math.Abs(p.driftX), math.Abs(p.driftY))*(p.middle+float64(c.Cadence))))
	}
	return r
}
