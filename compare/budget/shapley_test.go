package budget

import (
	"math"
	"testing"

	"offplane/synth/random"
)

// synthetic is a synthetic game of 9 players with effects of one, two and three players:
// players 2 and 5 are interchangeable, player 7 changes nothing.
func synthetic(s Set) float64 {
	in := func(i int) float64 { return float64(s >> i & 1) }
	v := 0.3
	for i, w := range []float64{0.2, -0.15, 0.05, 0.4, -0.3, 0.05, 0.01, 0, 0.12} {
		v += w * in(i)
	}
	twins := in(2) + in(5)
	v += 0.3*in(0)*in(1) - 0.2*twins*in(3) + 0.5*in(2)*in(5)*in(4) - 0.1*in(8)*in(6)*in(0)
	return math.Tanh(v)
}

const players = 9

// The axioms (Shapley 1953): shares add up, a player that changes nothing gets exactly
// 0, interchangeable players get the same; and the definition by all orders itself.
func TestExactShares(t *testing.T) {
	a := Exact(players)
	if n := len(a.Sets()); n != 1<<players {
		t.Errorf("%d sets", n)
	}
	share, errs := a.Shares(synthetic)
	sum := 0.0
	for i, x := range share {
		sum += x
		if errs[i] != 0 {
			t.Errorf("player %d: an exact share has the error %g", i, errs[i])
		}
	}
	if total := synthetic(a.all()) - synthetic(0); math.Abs(sum-total) > 1e-12 {
		t.Errorf("shares add up to %.15g, not %.15g", sum, total)
	}
	if share[7] != 0 {
		t.Errorf("a player that changes nothing gets %g", share[7])
	}
	if math.Abs(share[2]-share[5]) > 1e-12 {
		t.Errorf("interchangeable players get %.15g and %.15g", share[2], share[5])
	}
	// Five players by their 120 orders, one by one.
	five := Exact(5)
	got, _ := five.Shares(synthetic)
	want := make([]float64, 5)
	var permute func(left []int, s Set)
	permute = func(left []int, s Set) {
		for k, i := range left {
			rest := append(append([]int{}, left[:k]...), left[k+1:]...)
			orders := 1.0
			for j := 2; j <= len(rest); j++ {
				orders *= float64(j)
			}
			want[i] += (synthetic(s|1<<i) - synthetic(s)) * orders / 120
			permute(rest, s|1<<i)
		}
	}
	permute([]int{0, 1, 2, 3, 4}, 0)
	for i := range want {
		if math.Abs(got[i]-want[i]) > 1e-12 {
			t.Errorf("player %d of 5: %.15g, by its orders %.15g", i, got[i], want[i])
		}
	}
}

// Sampled shares add up too, need only the sets they say, and agree with the exact ones
// within three of their standard errors, which hold what they claim: over many samples
// the deviations are as large as the errors.
func TestSampledShares(t *testing.T) {
	exact := Exact(players)
	want, _ := exact.Shares(synthetic)
	a := Sampled(players, 64, 1)
	known := map[Set]bool{}
	for _, s := range a.Sets() {
		known[s] = true
	}
	got, errs := a.Shares(func(s Set) float64 {
		if !known[s] {
			t.Fatalf("set %b is not among Sets", s)
		}
		return synthetic(s)
	})
	sum := 0.0
	for i := range got {
		sum += got[i]
		if d := math.Abs(got[i] - want[i]); d > 3*errs[i] {
			t.Errorf("player %d: %.4f, exactly %.4f, standard error %.4f", i, got[i], want[i], errs[i])
		}
	}
	if total := synthetic(a.all()) - synthetic(0); math.Abs(sum-total) > 1e-12 {
		t.Errorf("shares add up to %.15g, not %.15g", sum, total)
	}
	if got[7] != 0 || errs[7] != 0 {
		t.Errorf("a player that changes nothing gets %g +- %g", got[7], errs[7])
	}
	chi, n := 0.0, 0.0
	for k := range 60 {
		b := Sampled(players, 32, random.Hash(7, uint64(k)))
		got, errs := b.Shares(synthetic)
		for i := range got {
			if i != 7 {
				chi += math.Pow((got[i]-want[i])/errs[i], 2)
				n++
			}
		}
	}
	if r := math.Sqrt(chi / n); r < 0.85 || r > 1.2 {
		t.Errorf("deviations are %.2f times the stated errors", r)
	}
}
