package budget

import (
	"math"
	"math/bits"
	"slices"

	"offplane/synth/random"
)

// A Set is a coalition of players: bit i stands for player i.
type Set uint32

// An Average is over the orders in which the players of a game may come in. What each
// adds to the value as it comes in, averaged over the orders, is its share; the shares
// add up to the value of all players less that of none (Shapley 1953, Contributions to
// the Theory of Games II, 307).
type Average struct {
	players int
	orders  [][]int // in pairs of one and its reverse; nil: all orders, exactly
}

// Exact is the average over all orders. It needs the value of every set of players.
func Exact(players int) Average { return Average{players: players} }

// Sampled is the average over pairs of random orders, each with its reverse: what two
// players do to each other is then shared evenly within a pair (antithetic sampling,
// Hammersley & Morton 1956, Math. Proc. Camb. Phil. Soc. 52, 449, from memory). At
// least two pairs.
func Sampled(players, pairs int, seed uint64) Average {
	if pairs < 2 {
		panic("budget: fewer than two pairs of orders have no error")
	}
	a := Average{players: players}
	for k := range pairs {
		r := random.At(seed, 0x6f72646572, uint64(k)) // "order"
		order := make([]int, players)
		for i := range order { // the inside-out shuffle
			j := min(int(r.Uniform()*float64(i+1)), i)
			order[i] = order[j]
			order[j] = i
		}
		back := slices.Clone(order)
		slices.Reverse(back)
		a.orders = append(a.orders, order, back)
	}
	return a
}

// all returns the set of all players.
func (a *Average) all() Set { return 1<<a.players - 1 }

// Sets returns the sets whose value the average needs, ascending.
func (a *Average) Sets() []Set {
	var sets []Set
	if a.orders == nil {
		for s := Set(0); s <= a.all(); s++ {
			sets = append(sets, s)
		}
		return sets
	}
	for _, order := range a.orders {
		s := Set(0)
		sets = append(sets, s)
		for _, i := range order {
			s |= 1 << i
			sets = append(sets, s)
		}
	}
	slices.Sort(sets)
	return slices.Compact(sets)
}

// Shares returns each player's share and its sampling error (one standard error; 0 if
// exact). A player who never changes the value gets exactly 0.
func (a *Average) Shares(value func(Set) float64) (share, err []float64) {
	share, err = make([]float64, a.players), make([]float64, a.players)
	if a.orders == nil {
		weights := make([]float64, a.players)
		for k := range weights {
			weights[k] = weight(a.players, k)
		}
		for s := Set(0); s <= a.all(); s++ {
			for i := range a.players {
				if s>>i&1 == 0 {
					share[i] += weights[bits.OnesCount32(uint32(s))] * (value(s|1<<i) - value(s))
				}
			}
		}
		return share, err
	}
	pairs := float64(len(a.orders) / 2)
	squares := make([]float64, a.players)
	added := make([]float64, a.players)
	for k, order := range a.orders {
		if k%2 == 0 {
			clear(added)
		}
		s := Set(0)
		for _, i := range order {
			added[i] += (value(s|1<<i) - value(s)) / 2
			s |= 1 << i
		}
		if k%2 == 1 {
			for i, x := range added {
				share[i] += x / pairs
				squares[i] += x * x / pairs
			}
		}
	}
	for i := range err {
		// Pairs that all agree leave rounding.
		v := squares[i] - share[i]*share[i]
		if v > 1e-15*squares[i] {
			err[i] = math.Sqrt(v / (pairs - 1))
		}
	}
	return share, err
}

// weight is the share of the orders in which exactly k given of n players come before
// another given one: k! (n-k-1)! / n!.
func weight(n, k int) float64 {
	w := 1 / float64(n)
	for j := 1; j <= k; j++ {
		w *= float64(j) / float64(n-j)
	}
	return w
}
