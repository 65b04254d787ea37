package fit

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"
)

// The fast logarithm of a ratio agrees with math/cmplx to a few units of the
// last place, near 1 and far from it, on both sides of where the series ends.
func TestLogRatio(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 19))
	for range 200_000 {
		size := math.Pow(10, -9*rng.Float64())
		q := cmplx.Exp(complex(size*rng.NormFloat64(), size*rng.NormFloat64()))
		a, b := logRatio(q)
		// ln|q| from ln(1+x) of |q|² − 1, which does not cancel near 1
		x := (real(q)-1)*(real(q)+1) + imag(q)*imag(q)
		wantA, wantB := math.Log1p(x)/2, math.Atan2(imag(q), real(q))
		if x < -0.5 || x > 1 {
			wantA = math.Log(cmplx.Abs(q))
		}
		tolerance := 4e-15 * math.Hypot(wantA, wantB)
		if !(math.Abs(a-wantA) <= tolerance && math.Abs(b-wantB) <= tolerance) {
			t.Fatalf("ln %v = %v, %v, want %v, %v", q, a, b, wantA, wantB)
		}
	}
}
