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
