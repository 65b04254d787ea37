package residual

import (
	"math"
	"math/rand/v2"
	"testing"
)

func check(t *testing.T, name string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %.12g, want %.12g ± %g", name, got, want, tol)
	}
}

func TestByHand(t *testing.T) {
	// Worked by hand from the formulas in the doc comments.
	check(t, "Lag1 of 1 2 3 4", Lag1([]float64{1, 2, 3, 4}), 0.25, 1e-15)
	check(t, "Lag1 alternating", Lag1([]float64{1, -1, 1, -1}), -0.75, 1e-15)
	// ++++ −−− +++ −− ++++++ −−− ++++: 17 of +, 8 of −, 7 runs: μ = 11.88, σ = 2.116, z = −2.306.
	var r []float64
	for i, n := range []int{4, 3, 3, 2, 6, 3, 4} {
		for range n {
			r = append(r, float64(1-2*(i%2)))
		}
	}
	z, p := Runs(r)
	check(t, "Runs z", z, -2.306, 5e-4)
	check(t, "Runs p", p, 0.01056, 2e-5) // tables of the normal distribution: Φ(−2.306)
	check(t, "MAD", MAD([]float64{1, 1, 2, 2, 4, 6, 9}), 1.482602218505602, 1e-15)
	check(t, "MAD wild", MAD([]float64{1, 2, 3, 4, 1e300}), 1.482602218505602, 1e-15)
}

func TestNoise(t *testing.T) {
	src := rand.New(rand.NewPCG(1, 2))
	low := 0
	const trials = 2000
	for range trials {
		r := make([]float64, 200)
		for i := range r {
			r[i] = src.NormFloat64()
		}
		if _, p := Runs(r); p < 0.05 {
			low++
		}
		if l := Lag1(r); !(math.Abs(l) < 5/math.Sqrt(200)) {
			t.Errorf("Lag1 of noise %g", l)
		}
		if m := MAD(r); !(m > 0.7 && m < 1.4) {
			t.Errorf("MAD of unit noise %g", m)
		}
	}
	check(t, "rate of p < 5 %", float64(low)/trials, 0.05, 0.02)
}

func TestEdges(t *testing.T) {
	isNaN := func(name string, v float64) {
		t.Helper()
		if !math.IsNaN(v) {
			t.Errorf("%s: got %g, want NaN", name, v)
		}
	}
	isNaN("Lag1 short", Lag1([]float64{1, 2}))
	isNaN("Lag1 constant", Lag1([]float64{1, 1, 1}))
	isNaN("MAD of nothing", MAD(nil))
	isNaN("MAD with NaN", MAD([]float64{1, math.NaN(), 2}))
	_, p := Runs([]float64{1, 1, 1})
	isNaN("Runs of three", p)
	_, p = Runs([]float64{1, -1, math.NaN(), 1, -1})
	isNaN("Runs with NaN", p)
	r := make([]float64, 30)
	for i := range r {
		r[i] = 1
	}
	if z, p := Runs(r); !math.IsInf(z, -1) || p != 0 {
		t.Errorf("Runs of one sign: z %g, p %g", z, p)
	}
	in := []float64{3, 1, 2}
	MAD(in)
	if in[0] != 3 || in[1] != 1 {
		t.Error("MAD changed its argument")
	}
}
