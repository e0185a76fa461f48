package line

// equilibrium solves statistical equilibrium for n levels. rate[i*n+j] is the
// rate [s^-1] from level i to level j; the diagonal is not read. On return p holds
// populations that sum to 1 and rate is overwritten.
//
// The elimination of Grassmann, Taksar & Heyman (1985, Operations Research 33,
// 1107) adds, multiplies and divides positive numbers only: no cancellation, so
// every population, however small, is positive and good to a few n rounding
// errors. Eliminating a level is the same as folding its cascades into the levels
// below it.
//
// Every level above the first needs a way to some level before it in the list,
// directly or through levels after it; otherwise the populations are NaN.
func equilibrium(n int, rate, p []float64) {
	for k := n - 1; k > 0; k-- {
		out := rate[k*n : k*n+k]
		var sum float64
		for _, q := range out {
			sum += q
		}
		for i := range k {
			f := rate[i*n+k] / sum
			rate[i*n+k] = f
			row := rate[i*n : i*n+k]
			for j, q := range out {
				row[j] += f * q // the diagonal collects rubbish that nobody reads
			}
		}
	}
	p[0] = 1
	total := 1.0
	for k := 1; k < n; k++ {
		var s float64
		for i := range k {
			s += p[i] * rate[i*n+k]
		}
		p[k] = s
		total += s
	}
	for k := range n {
		p[k] /= total
	}
}
