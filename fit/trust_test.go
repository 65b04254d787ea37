package fit

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"realpart/models"
)

// warning returns the text of the warning with a code, "" if there is none.
func warning(a *Analysis, code string) string {
	for _, w := range a.Warnings {
		if w.Code == code {
			return w.Text
		}
	}
	return ""
}

// Two-section beads whose sections are broad and near each other can pair
// their halves in two ways. Where the fit finds other values than the truth,
// it gives the truth as the alternative.
func TestSecondSolution(t *testing.T) {
	const cases = 40
	first, either, warned := 0, 0, 0
	for seed := range cases {
		r := rand.New(rand.NewPCG(uint64(seed), 11))
		f1 := span(r, 2e7, 6e7)
		f2 := f1 * span(r, 1.2, 4)
		r1, r2 := span(r, 100, 600), span(r, 100, 600)
		q1, q2 := span(r, 0.2, 0.6), span(r, 0.2, 0.6)
		p := exact(t, "bead-two", map[string]float64{"DCR": 0.1,
			"R1": r1, "L1": r1 / q1 / (2 * math.Pi * f1), "C1": q1 / r1 / (2 * math.Pi * f1),
			"R2": r2, "L2": r2 / q2 / (2 * math.Pi * f2), "C2": q2 / r2 / (2 * math.Pi * f2),
		}, 1e6, 1e9, 101)
		order(p.circuit, p.values, &Settings{})
		a, err := Analyse(p.freq, p.noisy(r, 0.001), Request{Circuit: p.circuit, Name: p.name})
		if err != nil {
			t.Fatal(err)
		}
		near := func(values []float64) bool {
			if values == nil {
				return false
			}
			for k, i := range a.Result.Free {
				if !a.Result.Parameters[i].Determined {
					continue
				}
				limit := max(0.03, 5*math.Sqrt(a.Result.Covariance.At(k, k)))
				if !(math.Abs(math.Log(values[i]/p.values[i])) < limit) {
					return false
				}
			}
			return true
		}
		if (warning(a, "second-solution") != "") != (a.Alternative != nil) {
			t.Errorf("seed %d: alternative %v, warning %q", seed, a.Alternative, warning(a, "second-solution"))
		}
		if a.Alternative != nil {
			warned++
		}
		if near(a.Result.Values()) {
			first++
		}
		if near(a.Result.Values()) || near(a.Alternative) {
			either++
		}
	}
	t.Logf("truth found as the result in %d, as result or alternative in %d of %d cases; %d warnings", first, either, cases, warned)
	if !(either >= cases*9/10) || warned == 0 {
		t.Errorf("truth found as result or alternative in %d of %d cases, %d warnings", either, cases, warned)
	}
}

// The parameters that cannot be told apart are named, with where.
func TestConfusion(t *testing.T) {
	// R1·C1 relaxes at 1/(2π·0.05 Ω·80 µF) = 40 kHz; the sweep ends far below.
	p := exact(t, "cap-two-branch", map[string]float64{"ESR": 30e-3, "ESL": 14e-9, "C": 470e-6, "R1": 50e-3, "C1": 80e-6}, 10, 500, 101)
	z := p.noisy(rand.New(rand.NewPCG(2, 12)), 0.001)
	a, err := Analyse(p.freq, z, Request{Circuit: p.circuit, Name: p.name})
	if err != nil {
		t.Fatal(err)
	}
	all := ""
	for _, w := range a.Warnings {
		t.Logf("%s: %s", w.Code, w.Text)
		all += w.Text + "\n"
	}
	if !strings.Contains(all, "ESR and R1 cannot be told apart") && !strings.Contains(all, "R1 and ESR cannot be told apart") {
		t.Error("the confusion of ESR and R1 is not named")
	}
	i, _ := p.circuit.Index("ESL")
	if q := a.Result.Parameters[i]; q.Determined || !(q.High95 > 14e-9) || !math.IsNaN(q.Low95) {
		t.Errorf("ESL = %+v, want an upper bound", q)
	}
}

// A circuit that does not describe the part is said to be so, with where it
// deviates and what would take up the deviation.
func TestStructureIsSaid(t *testing.T) {
	p := coverageParts(t, 201)[1] // relaxation at 11 kHz
	z := p.noisy(rand.New(rand.NewPCG(2, 12)), 0.001)
	m, _ := models.Lookup("cap-esr-esl")
	a, err := Analyse(p.freq, z, Request{Circuit: m.Circuit, Name: m.Name})
	if err != nil {
		t.Fatal(err)
	}
	text := warning(a, "structured-residual")
	t.Log(text)
	if !a.Result.Structured || !strings.Contains(text, "ESR + ESL + C does not describe the part") || !strings.Contains(text, "cap-two-branch takes up") {
		t.Errorf("structured %v, warning %q", a.Result.Structured, text)
	}
	if from, to, _ := a.Result.deviation(); !(from < 12e3 && to > 200 && to < 1e6) {
		t.Errorf("deviates from %g to %g Hz, the relaxation is at 11 kHz", from, to)
	}
	right, err := Analyse(p.freq, z, Request{Circuit: p.circuit, Name: p.name})
	if err != nil {
		t.Fatal(err)
	}
	if right.Result.Structured || len(right.Warnings) != 0 {
		t.Errorf("the right circuit gets warnings: %v", right.Warnings)
	}
}

// With a stated accuracy the simplest circuit whose residual is inside it is
// preferred, and an ESR that the meter cannot resolve is flagged, with the
// frequency from which it can.
func TestStatedAccuracy(t *testing.T) {
	p := exact(t, "cap-loss", map[string]float64{"ESR": 3e-3, "ESL": 1e-9, "C": 9e-6, "tand": 0.002}, 1e3, 1e7, 101)
	z := p.noisy(rand.New(rand.NewPCG(3, 12)), 0.0003)
	free, err := Analyse(p.freq, z, Request{})
	if err != nil {
		t.Fatal(err)
	}
	stated, err := Analyse(p.freq, z, Request{Settings: &Settings{Accuracy: func(_, _ float64) (float64, float64, bool) { return 0.005, 0.005, true }}})
	if err != nil {
		t.Fatal(err)
	}
	if free.Name != "cap-loss" || stated.Name != "cap-esr-esl" {
		t.Errorf("chosen %s without and %s with a stated accuracy, want cap-loss and cap-esr-esl", free.Name, stated.Name)
	}
	// Re Z = |Z|·0.005 where 3 mΩ ≈ 0.005/(ωC): 29 kHz.
	text := warning(stated, "below-resolution")
	t.Log(text)
	if from, below := stated.Result.resolvedFrom(); !below || !(from > 20e3 && from < 40e3) || !strings.Contains(text, "resolved from") {
		t.Errorf("resolved from %g Hz (below: %v), want about 29 kHz: %q", from, below, text)
	}
	v := stated.Result.Figure(models.ESR, 2e3)
	w := stated.Result.Figure(models.ESR, 300e3)
	if !v.BelowResolution || w.BelowResolution {
		t.Errorf("ESR below resolution: %v at 2 kHz, %v at 300 kHz", v.BelowResolution, w.BelowResolution)
	}
	for _, q := range stated.Result.Parameters {
		if !(q.MeterError > 0) {
			t.Errorf("%s: meter error %v", q.Name, q.MeterError)
		}
	}
	// A common relative error of magnitude scales C by itself: rectangular
	// with half-width 0.5 % has the standard uncertainty 0.005/√3 (GUM 4.3.7).
	i, _ := stated.Result.Circuit.Index("C")
	q := stated.Result.Parameters[i]
	if got, want := q.MeterError/q.Value, 0.005/math.Sqrt(3); !(math.Abs(got/want-1) < 0.01) {
		t.Errorf("relative meter error of C %.5g, want %.5g", got, want)
	}
}
