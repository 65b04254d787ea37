package rational

import (
	"fmt"
	"math"
	"math/cmplx"

	"realpart/fit/residual"
)

// PointNoise estimates, from neighbouring points alone and without any model, the standard deviation of the relative error of |Z| and of
// the phase in radians of one point (both taken together).
//
// Every window of q+1 neighbouring points gives the combination of ln Z that vanishes for polynomials of degree q−1 in ln f,
//
//	Σ w_i·ln Z_i,  w_i ∝ 1/Π_{j≠i}(ln f_i − ln f_j),  Σ w_i² = 1,
//
// so that the response drops out and noise of standard deviation σ keeps it. The spread over all windows is the median absolute deviation,
// which a resonance or a step in a few windows does not move. Of q = 2…8 the smallest q within 10 % of the best is taken: a low
// order leaves curvature, a high one correlates its windows and wastes data.
//
// It needs 16 points, finite and not zero, at rising frequencies. A resonance that covers most of a coarse sweep makes the estimate
// too large, never too small; values rounded so coarsely that neighbours repeat make it too small.
func PointNoise(freq []float64, z []complex128) (float64, error) {
	if err := checkSweep(freq, z, 16); err != nil {
		return 0, err
	}
	const lowest, highest = 2, 8
	var spread [highest + 1]float64
	best := math.Inf(1)
	for q := lowest; q <= highest; q++ {
		spread[q] = residual.MAD(differences(freq, z, q))
		best = min(best, spread[q])
	}
	for q := lowest; q <= highest; q++ {
		if spread[q] <= 1.1*best {
			return spread[q], nil
		}
	}
	return 0, fmt.Errorf("rational: no noise estimate from %d points; a difference of neighbours is not finite", len(freq))
}

// differences returns the real and the imaginary parts of the normalised divided differences of order q.
func differences(freq []float64, z []complex128, q int) []float64 {
	n := len(freq)
	out := make([]float64, 0, 2*n)
	x, w := make([]float64, q+1), make([]float64, q+1)
	for k := 0; k+q < n; k++ {
		for i := range x {
			x[i] = math.Log(freq[k+i] / freq[k+q/2])
		}
		norm := 0.0
		for i := range w {
			v := 1.0
			for j := range x {
				if j != i {
					// Scaled by the window, so that nothing over- or underflows.
					v *= (x[i] - x[j]) / (x[q] - x[0])
				}
			}
			w[i] = 1 / v
			norm += w[i] * w[i]
		}
		var sum complex128
		for i := range w {
			// Against the middle point the phase does not wrap within a window.
			sum += complex(w[i]/math.Sqrt(norm), 0) * cmplx.Log(z[k+i]/z[k+q/2])
		}
		out = append(out, real(sum), imag(sum))
	}
	return out
}
