package report

import (
	"math"
	"math/rand/v2"
	"testing"

	"realpart/fit"
	"realpart/models"
)

// logGrid returns n frequencies, equally spaced on a log axis.
func logGrid(from, to float64, n int) []float64 {
	f := make([]float64, n)
	for i := range f {
		f[i] = from * math.Pow(to/from, float64(i)/float64(n-1))
	}
	f[n-1] = to
	return f
}

// sample is a sweep with noise and the analysis of it.
type sample struct {
	sweep    Sweep
	freq     []float64
	z        []complex128
	analysis *fit.Analysis
}

// simulated fits a library circuit to a sweep that it would give, with noise
// of a relative standard deviation on real and imaginary part of ln Z.
func simulated(t testing.TB, name string, values []float64, freq []float64, noise float64, settings *fit.Settings) sample {
	t.Helper()
	m, ok := models.Lookup(name)
	if !ok {
		t.Fatalf("no circuit %q", name)
	}
	z := make([]complex128, len(freq))
	m.Circuit.NewEvaluator(freq).Impedance(z, values)
	random := rand.New(rand.NewPCG(7, 11))
	for i := range z {
		z[i] *= complex(1+noise*random.NormFloat64(), noise*random.NormFloat64())
	}
	r, err := fit.Fit(freq, z, m.Circuit, settings)
	if err != nil {
		t.Fatal(err)
	}
	return sample{
		sweep: Sweep{File: "bench/" + name + ".csv", Part: name, Points: len(freq), UsedPoints: len(freq),
			FMin: freq[0], FMax: freq[len(freq)-1], SHA256: "0f"},
		freq: freq, z: z,
		analysis: &fit.Analysis{Kind: m.Kind, Name: m.Name, Result: r},
	}
}
