package model

import (
	"math"

	"offplane/scenarios"
)

// A lawTable is a density law that knows no latitude, tabulated: ln n over ln r, by cubics
// through four nodes, good to 1e-7 of n (tested). The law is the exact, slow way.
type lawTable struct {
	law Law
	lnN []float64 // node i at ln r = (i-1) lawStep; nil: the law depends on latitude
}

const lawStep = 0.005

// newLawTable builds the law that l describes, tabulated to a distance [solar radii].
func newLawTable(l scenarios.Law, helium, outer float64) (*lawTable, error) {
	law, err := NewLaw(l, helium)
	if err != nil {
		return nil, err
	}
	p := &lawTable{law: law}
	for _, r := range []float64{1, 1.3, 2} {
		for _, lat := range []float64{0.4, math.Pi / 2} {
			if law(r, lat) != law(r, 0) {
				return p, nil
			}
		}
	}
	for i := range int(math.Log(max(outer, 1))/lawStep) + 4 {
		p.lnN = append(p.lnN, math.Log(law(math.Exp(float64(i-1)*lawStep), 0)))
	}
	return p, nil
}

// at returns ln n [cm^-3] at distance r [solar radii] and latitude [rad]; lnR is ln r.
func (p *lawTable) at(r, lnR, latitude float64) float64 {
	u := lnR / lawStep
	i := int(u)
	if p.lnN == nil || u < 0 || i+4 > len(p.lnN) {
		return math.Log(p.law(r, latitude))
	}
	y := (*[4]float64)(p.lnN[i:])
	u -= float64(i)
	a, b, c := u+1, u-1, u-2
	return (b*c*(3*a*y[1]-u*y[0]) + a*u*(b*y[3]-3*c*y[2])) / 6
}
