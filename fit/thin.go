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
	step := make([]float64, len(freq))
	wayF, wayZ := math.Log(freq[len(freq)-1]/freq[0]), 0.0
	for i := 1; i < len(freq); i++ {
		step[i] = cmplx.Abs(cmplx.Log(z[i] / z[i-1]))
		wayZ += step[i]
	}
	reach := 0.0
	for i := 1; i < len(freq); i++ {
		reach += math.Log(freq[i]/freq[i-1]) / wayF
		if wayZ > 0 {
			reach += step[i] / wayZ
		}
		step[i] = reach
	}
	low, high := 0, 0
	for i := range z {
		if cmplx.Abs(z[i]) < cmplx.Abs(z[low]) {
			low = i
		}
		if cmplx.Abs(z[i]) > cmplx.Abs(z[high]) {
			high = i
		}
	}
	chosen := []int{0, len(freq) - 1, low, high}
	for k := 1; k < n-3; k++ {
		i, _ := slices.BinarySearch(step, reach*float64(k)/float64(n-3))
		chosen = append(chosen, min(i, len(freq)-1))
	}
	slices.Sort(chosen)
	return slices.Compact(chosen)
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
