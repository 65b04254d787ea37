package lots

import (
	"math"
	"slices"
)

// exactRanks is the number of values up to which the distribution of
// Mann–Whitney's U is counted out.
const exactRanks = 60

// MannWhitney tests whether values of x tend to be larger or smaller than
// those of y, without assuming a distribution (Mann and Whitney 1947). It
// returns the statistic of x, U = Σ(ranks of x) − n_x(n_x+1)/2, and the
// two-sided probability of one at least as far from n_x·n_y/2 by chance. Up to
// 60 values without ties it is exact; else it is that of the normal
// distribution with the corrections for ties and continuity. NaN if either
// sample is empty.
func MannWhitney(x, y []float64) (u, p float64) {
	nx, ny := len(x), len(y)
	if nx == 0 || ny == 0 {
		return math.NaN(), math.NaN()
	}
	type value struct {
		v     float64
		fromX bool
	}
	all := make([]value, 0, nx+ny)
	for _, v := range x {
		all = append(all, value{v, true})
	}
	for _, v := range y {
		all = append(all, value{v, false})
	}
	slices.SortFunc(all, func(a, b value) int {
		switch {
		case a.v < b.v:
			return -1
		case a.v > b.v:
			return 1
		}
		return 0
	})
	ranks, ties := 0.0, 0.0
	for i := 0; i < len(all); {
		j := i
		for j < len(all) && all[j].v == all[i].v {
			j++
		}
		t := float64(j - i)
		ties += t*t*t - t
		for _, v := range all[i:j] {
			if v.fromX {
				ranks += float64(i+j+1) / 2 // the mean of the ranks i+1 … j
			}
		}
		i = j
	}
	u = ranks - float64(nx*(nx+1))/2
	if ties == 0 && nx+ny <= exactRanks {
		return u, exactMannWhitney(nx, ny, int(max(u, float64(nx*ny)-u)))
	}
	n, product := float64(nx+ny), float64(nx*ny)
	variance := product / 12 * (n + 1 - ties/(n*(n-1)))
	if !(variance > 0) {
		return u, 1 // all values are equal
	}
	z := max(math.Abs(u-product/2)-0.5, 0) / math.Sqrt(variance)
	return u, math.Erfc(z / math.Sqrt2) // distuv's Survival is 1 − CDF, which is 0 far out
}

// exactMannWhitney returns the two-sided probability of U ≥ u, u at least
// n_x·n_y/2. The number of arrangements with a given U is the coefficient of
// the Gaussian binomial
//
//	∏_{i=1}^{n_x} (1 − q^{n_y+i})/(1 − q^i).
func exactMannWhitney(nx, ny, u int) float64 {
	count := make([]float64, nx*ny+1)
	count[0] = 1
	for i := 1; i <= nx; i++ {
		for k := len(count) - 1; k >= ny+i; k-- { // times 1 − q^(n_y+i)
			count[k] -= count[k-ny-i]
		}
		for k := i; k < len(count); k++ { // over 1 − q^i
			count[k] += count[k-i]
		}
	}
	// The differences above cancel for large U; the distribution is symmetric,
	// so the sum of the tail is taken from the small counts at its low end.
	tail, total := 0.0, 0.0
	for k, c := range count {
		total += c
		if k <= nx*ny-u {
			tail += c
		}
	}
	return min(1, 2*tail/total)
}
