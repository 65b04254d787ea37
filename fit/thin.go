package fit

import (
	"math"
	"math/cmplx"
	"slices"
)

// thin chooses up to n points of a sweep that show its shape: the ends, the
// extremes of |Z|, and between them points at equal steps of a measure that
// grows with ln f and with the way that ln Z goes, so that a narrow resonance
// keeps its points. The indices rise.
func thin(freq []float64, z []complex128, n int) []int {
	if len(freq) <= n {
		all := make([]int, len(freq))
		for i := range all {
			all[i] = i
		}
		return all
	}
	// The way from point to point in ln f and in ln Z, about: for steps far
	// below 1 these are the differences of the logarithms, and no step counts
	// for more than 2.
	wayF, wayZ := 0.0, 0.0
	steps := borrow(2 * len(freq))
	defer floats.Put(steps)
	clear(*steps)
	stepF, stepZ := (*steps)[:len(freq)], (*steps)[len(freq):]
	for i, v := range z {
		if i == 0 {
			continue
		}
		d, sum := v-z[i-1], v+z[i-1]
		if s := real(sum)*real(sum) + imag(sum)*imag(sum); s > 0 {
			stepZ[i] = 2 * min(1, math.Sqrt((real(d)*real(d)+imag(d)*imag(d))/s))
		}
		stepF[i] = 2 * (freq[i] - freq[i-1]) / (freq[i] + freq[i-1])
		wayF += stepF[i]
		wayZ += stepZ[i]
	}
	shareF, shareZ := 1/wayF, 0.0
	if wayZ > 0 {
		shareZ = 1 / wayZ
	}
	reach := 0.0
	step := stepF
	for i := range step {
		reach += stepF[i]*shareF + stepZ[i]*shareZ
		step[i] = reach
	}
	low, high := extremes(z)
	chosen := make([]int, 0, n+4)
	chosen = append(chosen, 0, len(freq)-1, low, high)
	for k := 1; k < n-3; k++ {
		i, _ := slices.BinarySearch(step, reach*float64(k)/float64(n-3))
		chosen = append(chosen, min(i, len(freq)-1))
	}
	slices.Sort(chosen)
	return slices.Compact(chosen)
}

// spread chooses n points of a sweep evenly by their number, which costs next
// to nothing, and around the extremes of |Z| six more, so that a narrow
// resonance keeps its points. The indices rise.
func spread(z []complex128, n int) []int {
	last := len(z) - 1
	chosen := make([]int, 0, n+6)
	low, high := extremes(z)
	for _, at := range []int{low, high} {
		for _, step := range []int{-2, 0, 2} {
			chosen = append(chosen, min(max(at+step, 0), last))
		}
	}
	for k := range n {
		chosen = append(chosen, k*last/(n-1))
	}
	slices.Sort(chosen)
	return slices.Compact(chosen)
}

// extremes returns the indices of the least and the largest |Z|.
func extremes(z []complex128) (low, high int) {
	least, most := math.Inf(1), 0.0
	for i, v := range z {
		squares := real(v)*real(v) + imag(v)*imag(v)
		if squares < least {
			low, least = i, squares
		}
		if squares > most {
			high, most = i, squares
		}
	}
	return low, high
}

// tame returns the indices of the points that lie near the middle of their
// neighbours, for a search that single wild points must not lead: ln Z of a
// point may be off the median of the five around it by a tenth, or by ten
// times what is usual in the sweep.
func tame(freq []float64, z []complex128) []int {
	n := len(z)
	logs := make([][2]float64, n)
	for i, v := range z {
		logs[i] = [2]float64{math.Log(cmplx.Abs(v)), cmplx.Phase(v)}
	}
	off := make([]float64, n)
	for i := range z {
		for part := range 2 {
			var near []float64
			for k := max(0, i-2); k <= min(n-1, i+2); k++ {
				near = append(near, logs[k][part])
			}
			off[i] = max(off[i], math.Abs(logs[i][part]-middle(near)))
		}
	}
	limit := max(0.1, 10*middle(off))
	var kept []int
	for i := range z {
		if off[i] <= limit {
			kept = append(kept, i)
		}
	}
	if len(kept) < n/2 {
		return thin(freq, z, n)
	}
	return kept
}
