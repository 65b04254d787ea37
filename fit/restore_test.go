package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"realpart/models"
)

// recorded is what a record keeps of a result.
func recorded(r *Result) (parameters []Parameter, correlation [][]float64) {
	for i := range r.Free {
		row := make([]float64, len(r.Free))
		for k := range row {
			row[k] = min(max(r.Correlation.At(i, k), -1), 1)
		}
		correlation = append(correlation, row)
	}
	return r.Parameters, correlation
}

func near(got, want, tolerance float64) bool {
	return math.Abs(got-want) <= tolerance*math.Abs(want)
}

// A restored result has the values, covariance, figures and resonances of the
// one that was recorded.
func TestRestore(t *testing.T) {
	const tolerance = 1e-12
	random := rand.New(rand.NewPCG(3, 5))
	constantPhase := exact(t, "cap-esr-esl", map[string]float64{"ESR": 20e-3, "ESL": 5e-9, "C": 10e-6}, 1e3, 1e7, 81)
	c, err := models.Parse("R + L + cpe(Q, n)")
	if err != nil {
		t.Fatal(err)
	}
	constantPhase.name, constantPhase.circuit = "with an exponent", c
	for _, part := range append(coverageParts(t, 101), constantPhase) {
		for _, fixed := range []bool{false, true} {
			settings := &Settings{}
			if part.name == "with an exponent" {
				constant := []float64{20e-3, 5e-9, 10e-6, 0.95}
				part.circuit.NewEvaluator(part.freq).Impedance(part.z, constant)
			}
			if fixed {
				first := part.circuit.Parameters()[0].Name
				settings.Fixed = map[string]float64{first: 20e-3}
			}
			r, err := Fit(part.freq, part.noisy(random, 0.003), part.circuit, settings)
			if err != nil {
				t.Fatal(err)
			}
			parameters, correlation := recorded(r)
			n := len(part.freq)
			got, err := Restore(part.circuit, parameters, correlation, n, part.freq[0], part.freq[n-1])
			if err != nil {
				t.Fatalf("%s: %v", part.name, err)
			}
			if got.DegreesOfFreedom != r.DegreesOfFreedom || len(got.Free) != len(r.Free) || got.MeterCovariance != nil {
				t.Errorf("%s: %d degrees of freedom, %d free, meter %v", part.name, got.DegreesOfFreedom, len(got.Free), got.MeterCovariance)
			}
			for a := range r.Free {
				if got.Free[a] != r.Free[a] {
					t.Errorf("%s: free %v, want %v", part.name, got.Free, r.Free)
				}
				for b := range r.Free {
					if v, want := got.Covariance.At(a, b), r.Covariance.At(a, b); !near(v, want, tolerance) {
						t.Errorf("%s: covariance %d, %d is %v, want %v", part.name, a, b, v, want)
					}
				}
			}
			// Inside the sweep, at its ends, and beyond it.
			for _, freq := range []float64{part.freq[0] / 3, part.freq[0], 12.3e3, part.freq[n-1], 3 * part.freq[n-1]} {
				for _, f := range models.Figures() {
					v, want := got.Figure(f, freq), r.Figure(f, freq)
					if v.Value != want.Value || !near(v.Low95, want.Low95, 1e-9) || !near(v.High95, want.High95, 1e-9) {
						t.Errorf("%s: %s at %v Hz is %v (%v to %v), want %v (%v to %v)", part.name, f, freq, v.Value, v.Low95, v.High95, want.Value, want.Low95, want.High95)
					}
					if !math.IsNaN(v.Measured) || !math.IsNaN(v.Resolution) || v.BelowResolution {
						t.Errorf("%s: %s at %v Hz has measured %v, resolution %v", part.name, f, freq, v.Measured, v.Resolution)
					}
				}
			}
			resonances, want := got.Resonances(), r.Resonances()
			if len(resonances) != len(want) {
				t.Fatalf("%s: %d resonances, want %d", part.name, len(resonances), len(want))
			}
			for i, q := range resonances {
				if q.Freq != want[i].Freq || !near(q.StdError, want[i].StdError, 1e-9) || q.InSweep != want[i].InSweep {
					t.Errorf("%s: resonance %+v, want %+v", part.name, q, want[i])
				}
			}
		}
	}
}

// The meter's part is never less than that of the result, of which the record
// has no correlation, and the same where there is only one free parameter.
func TestRestoreMeter(t *testing.T) {
	random := rand.New(rand.NewPCG(8, 13))
	accuracy := func(_, _ float64) (magnitude, phase float64, ok bool) { return 0.001, 0.002, true }
	for _, part := range coverageParts(t, 101) {
		all := map[string]float64{}
		for i, p := range part.circuit.Parameters()[1:] {
			all[p.Name] = part.values[i+1]
		}
		for _, fixed := range []map[string]float64{nil, all} {
			r, err := Fit(part.freq, part.noisy(random, 0.001), part.circuit, &Settings{Accuracy: accuracy, Fixed: fixed})
			if err != nil {
				t.Fatal(err)
			}
			parameters, correlation := recorded(r)
			n := len(part.freq)
			got, err := Restore(part.circuit, parameters, correlation, n, part.freq[0], part.freq[n-1])
			if err != nil {
				t.Fatal(err)
			}
			for _, freq := range []float64{200, 10e3, 1e6, 9e6} {
				_, dz := r.at(freq)
				for _, part := range []func(complex128) float64{func(z complex128) float64 { return real(z) }, func(z complex128) float64 { return imag(z) }} {
					derivative := func(k int) float64 { return part(dz[k]) }
					_, want := r.variance(derivative)
					_, meter := got.variance(derivative)
					if len(r.Free) == 1 && !near(meter, want, 1e-9) || !(meter >= want*(1-1e-9)) {
						t.Errorf("%d free, %v Hz: the meter's variance is %v, want %v or more", len(r.Free), freq, meter, want)
					}
				}
			}
		}
	}
}

func TestRestoreErrors(t *testing.T) {
	p := exact(t, "cap-esr-esl", map[string]float64{"ESR": 20e-3, "ESL": 5e-9, "C": 10e-6}, 1e3, 1e7, 41)
	r, err := Fit(p.freq, p.noisy(rand.New(rand.NewPCG(1, 2)), 0.003), p.circuit, nil)
	if err != nil {
		t.Fatal(err)
	}
	for name, spoil := range map[string]func(q []Parameter, c [][]float64, points *int, fMin *float64){
		"range":           func(_ []Parameter, _ [][]float64, _ *int, f *float64) { *f = 0 },
		"points":          func(_ []Parameter, _ [][]float64, n *int, _ *float64) { *n = 0 },
		"name":            func(q []Parameter, _ [][]float64, _ *int, _ *float64) { q[1].Name = "L" },
		"value":           func(q []Parameter, _ [][]float64, _ *int, _ *float64) { q[1].Value = -1 },
		"uncertainty":     func(q []Parameter, _ [][]float64, _ *int, _ *float64) { q[1].StdError = -1 },
		"correlation":     func(_ []Parameter, c [][]float64, _ *int, _ *float64) { c[0][1], c[1][0] = 2, 2 },
		"symmetry":        func(_ []Parameter, c [][]float64, _ *int, _ *float64) { c[0][1] = c[1][0] + 0.1 },
		"a row":           func(_ []Parameter, c [][]float64, _ *int, _ *float64) { c[2] = c[2][:1] },
		"one not free":    func(q []Parameter, _ [][]float64, _ *int, _ *float64) { q[0].Fixed = true },
		"no number":       func(q []Parameter, _ [][]float64, _ *int, _ *float64) { q[0].Value = math.NaN() },
		"no correlations": func(_ []Parameter, c [][]float64, _ *int, _ *float64) { c[0] = nil },
	} {
		parameters, correlation := recorded(r)
		parameters = append([]Parameter(nil), parameters...)
		points, fMin := len(p.freq), p.freq[0]
		spoil(parameters, correlation, &points, &fMin)
		if _, err := Restore(p.circuit, parameters, correlation, points, fMin, p.freq[len(p.freq)-1]); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
	parameters, correlation := recorded(r)
	if _, err := Restore(p.circuit, parameters[1:], correlation, 41, 1e3, 1e7); err == nil {
		t.Error("a missing parameter: no error")
	}
	if _, err := Restore(p.circuit, parameters, correlation[1:], 41, 1e3, 1e7); err == nil {
		t.Error("a missing row: no error")
	}
}
