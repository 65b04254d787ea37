package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"realpart/fit/lm"
)

// A fit that can go no further because it has reached the noise along a flat
// valley has converged, whatever the solver's tests say: sweeps of a resistor
// that end far below its resonance.
func TestStallAtNoise(t *testing.T) {
	failed := 0
	for seed := range 300 {
		r := rand.New(rand.NewPCG(uint64(seed), 21))
		v, from, to := realistic(r, "res-full")
		p := exact(t, "res-full", v, from, math.Sqrt(from*to), 61)
		result, err := Fit(p.freq, p.noisy(r, 0.003), p.circuit, nil)
		if err != nil {
			t.Fatal(err)
		}
		if result.Status == lm.Stalled {
			t.Logf("seed %d: %v: %s, rms %.3g", seed, result.Status, result.Reason, result.RMSRelative)
			failed++
		}
	}
	if failed > 0 {
		t.Errorf("%d of 300 stalled", failed)
	}
}
