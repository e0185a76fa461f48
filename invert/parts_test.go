package invert

import (
	"context"
	"math"
	"slices"
	"testing"

	"offplane/synth/obs"
)

// An observation in parts, some of whose announced pixels never come, has the maps and
// series of the observation without these pixels.
func TestInversionInParts(t *testing.T) {
	q := defaultPatch()
	q.nx, q.ny, q.frames, q.tunings, q.electrons = 30, 24, 120, true, 3000
	o := q.observe()
	some := func(keep func(p int) bool) *obs.Observation {
		part := *o
		part.Pixels, part.Mean = nil, [2][][]float32{make([][]float32, 3), make([][]float32, 3)}
		cube := obs.Cube{Tunings: 3, Frames: q.frames}
		for p, at := range o.Pixels {
			if !keep(p) {
				continue
			}
			part.Pixels = append(part.Pixels, at)
			cube.Pixels++
			for k := range 3 {
				cube.Data = append(cube.Data, o.Frames[0].Series(p, k)...)
				for l := range part.Mean {
					part.Mean[l][k] = append(part.Mean[l][k], o.Mean[l][k][p])
				}
			}
		}
		part.Frames[0] = &cube
		return &part
	}
	dark := func(p int) bool { return p%30 < 3 && p/30 < 5 }
	e, ctx := powerLaw{1.4, 1.8}, context.Background()
	want, err := Invert(ctx, some(func(p int) bool { return !dark(p) }), e, Default(), 1, nil)
	if err != nil {
		t.Fatal(err)
	}
	head := *o
	head.Frames[0] = &obs.Cube{Pixels: len(o.Pixels), Tunings: 3, Frames: q.frames}
	v, err := Begin(&head, e, Default())
	if err != nil {
		t.Fatal(err)
	}
	for from := 0; from < 24; from += 7 {
		part := some(func(p int) bool { return !dark(p) && p/30 >= from && p/30 < from+7 })
		if err := v.Take(ctx, part, 2); err != nil {
			t.Fatal(err)
		}
		clear(part.Frames[0].Data) // nothing of it is kept
	}
	if err := v.Take(ctx, some(func(p int) bool { return p == 100 }), 1); err == nil {
		t.Error("a pixel again: no error")
	}
	got, err := v.Finish(ctx, 2, nil)
	if err != nil {
		t.Fatal(err)
	}
	same := func(a, b float32) bool { return math.Float32bits(a) == math.Float32bits(b) }
	for i, m := range want.Maps {
		if !slices.EqualFunc(m.Data, got.Maps[i].Data, same) || !slices.Equal(m.Ints, got.Maps[i].Ints) {
			t.Errorf("%s differs", m.Name)
		}
	}
	if !slices.EqualFunc(want.Series.Data, got.Series.Data, same) {
		t.Error("series differ")
	}
}
