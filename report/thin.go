package report

import (
	"math"
	"math/cmplx"
	"slices"
)

// Thin chooses up to n points of a sweep to be drawn, n at least 4: the ends,
// the largest residual of magnitude and of phase, so that no fault is hidden,
// and between them points at equal steps of a measure that grows with ln f and
// with the way that ln Z goes, so that a narrow resonance keeps its points. The
// indices rise.
func Thin(t *Traces, n int) []int {
	last := len(t.Freq) - 1
	if last < n {
		all := make([]int, last+1)
		for i := range all {
			all[i] = i
		}
		return all
	}
	reach := make([]float64, last+1)
	wayF, wayZ := math.Log(t.Freq[last]/t.Freq[0]), 0.0
	for i := 1; i <= last; i++ {
		// Of the model: noise goes a long way.
		reach[i] = cmplx.Abs(cmplx.Log(t.Model[i] / t.Model[i-1]))
		wayZ += reach[i]
	}
	for i := 1; i <= last; i++ {
		step := math.Log(t.Freq[i]/t.Freq[i-1]) / wayF
		if wayZ > 0 {
			step += reach[i] / wayZ
		}
		reach[i] = reach[i-1] + step
	}
	worstZ, worstP := 0, 0
	for i, r := range t.Residual {
		if math.Abs(real(r)) > math.Abs(real(t.Residual[worstZ])) {
			worstZ = i
		}
		if math.Abs(imag(r)) > math.Abs(imag(t.Residual[worstP])) {
			worstP = i
		}
	}
	pick := []int{0, last, worstZ, worstP}
	for k := 1; k < n-3; k++ {
		i, _ := slices.BinarySearch(reach, reach[last]*float64(k)/float64(n-3))
		pick = append(pick, min(i, last))
	}
	slices.Sort(pick)
	return slices.Compact(pick)
}
