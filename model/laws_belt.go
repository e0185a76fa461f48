package model

import "math"

var _ = register("guhathakurta-1996", guhathakurtaBelt)

// Guhathakurta, Holzer & MacQueen 1996, ApJ 458, 817 (from memory): a belt on a hole,
// Gaussian in the angle from the current sheet; its width falls from 70 deg at the
// surface to 12 deg at 2 solar radii.
func guhathakurtaBelt(r, latitude float64) float64 {
	l := math.Log(r)
	w := (16.3*math.Exp(-0.5*l) + 10.0*math.Exp(-7.31*l) + 43.2*math.Exp(-7.52*l)) * math.Pi / 180
	x := latitude / w
	pole := guhathakurtaPole(r, latitude)
	return pole + (guhathakurtaSheet(r, latitude)-pole)*math.Exp(-x*x)
}
