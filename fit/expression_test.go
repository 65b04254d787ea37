package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"realpart/models"
)

// A user's own expressions of up to eight elements are recovered without a
// start, to the noise.
func TestExpressions(t *testing.T) {
	for _, c := range []struct {
		expression string
		values     []float64
		from, to   float64
	}{
		{"ESR + cpe(Q, n)", []float64{0.5, 1e-4, 0.8}, 1, 1e5},
		{"R1 + (R2 || cpe(Q, n))", []float64{10, 200, 2e-6, 0.85}, 1, 1e6},
		{"ESR + ESL + (C || (Rp + C1))", []float64{0.01, 10e-9, 10e-6, 100, 1e-6}, 10, 1e7},
		{"DCR + skin(K) + (L || Rp || Cp)", []float64{0.05, 1e-4, 47e-6, 20e3, 8e-12}, 100, 3e7},
		{"(R + L1) || (C + R1 + L2)", []float64{0.3, 10e-6, 1e-6, 0.05, 5e-9}, 1e3, 1e8},
		{"ESR + ESL + C + (R1 || C1) + (R2 || C2)", []float64{0.02, 12e-9, 1e-3, 0.3, 1e-3, 0.08, 20e-6}, 10, 1e7},
		{"(DCR + L + (R1 || L1) + (R2 || L2)) || Cp", []float64{0.1, 20e-6, 200, 8e-6, 3, 10e-6, 10e-12}, 100, 1e8},
		{"ESR + ESL + (C || Rp) + (R1 || C1 || (R2 + C2))", []float64{0.02, 12e-9, 470e-6, 300, 0.3, 50e-6, 0.1, 400e-6}, 0.5, 1e7},
	} {
		circuit, err := models.Parse(c.expression)
		if err != nil {
			t.Fatal(err)
		}
		freq := make([]float64, 201)
		for i := range freq {
			freq[i] = c.from * math.Pow(c.to/c.from, float64(i)/200)
		}
		z := make([]complex128, len(freq))
		circuit.NewEvaluator(freq).Impedance(z, c.values)
		const noise = 0.001
		addNoise(rand.New(rand.NewPCG(1, 9)), z, noise)
		r, err := Fit(freq, z, circuit, nil)
		if err != nil {
			t.Fatal(err)
		}
		if !(r.RMSRelative < 1.1*noise*math.Sqrt2) {
			t.Errorf("%s: rms %.3g, want the noise %.3g", c.expression, r.RMSRelative, noise*math.Sqrt2)
		}
		for i, q := range r.Parameters {
			if d := math.Abs(q.Value-c.values[i]) / q.StdError; !(d < 5) {
				t.Errorf("%s: %s = %.5g ± %.2g, truth %.5g", c.expression, q.Name, q.Value, q.StdError, c.values[i])
			}
		}
	}
}

// Two fits of the same input agree to the bit.
func TestDeterministic(t *testing.T) {
	for _, name := range []string{"cap-two-branch", "ind-eddy", "bead-two"} {
		p := simulatePart(rand.New(rand.NewPCG(3, 9)), name, 101, 0.01)
		saved := append([]complex128(nil), p.z...)
		a, err := Analyse(p.freq, p.z, Request{})
		if err != nil {
			t.Fatal(err)
		}
		b, err := Analyse(p.freq, p.z, Request{})
		if err != nil {
			t.Fatal(err)
		}
		if a.Name != b.Name {
			t.Errorf("%s: %s, then %s", name, a.Name, b.Name)
			continue
		}
		for i, q := range a.Result.Parameters {
			if q.Value != b.Result.Parameters[i].Value || math.Float64bits(q.StdError) != math.Float64bits(b.Result.Parameters[i].StdError) {
				t.Errorf("%s: %s differs the second time", name, q.Name)
			}
		}
		for i := range saved {
			if saved[i] != p.z[i] {
				t.Fatalf("%s: the sweep was changed", name)
			}
		}
	}
}
