package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"realpart/models"
)

// Where an element is not determined, a figure that rests on it says so: its
// interval is no false precision and holds the truth. Where two elements cannot be told apart but their sum can, the
// figure of the sum stays sharp.
func TestFigureOfUndetermined(t *testing.T) {
	const cases = 40
	for _, c := range []struct {
		part
		noise  float64
		at     float64
		figure models.Figure
		sharp  bool
	}{
		// 10 nF with 1 mΩ: far below the noise of |Z|
		{exact(t, "cap-leak", map[string]float64{"ESR": 1e-3, "ESL": 1e-12, "C": 10e-9, "Rp": 1e13}, 1e3, 1e6, 61), 0.005, 1e5, models.ESR, false},
		{exact(t, "cap-leak", map[string]float64{"ESR": 1e-3, "ESL": 1e-12, "C": 10e-9, "Rp": 1e13}, 1e3, 1e6, 61), 0.005, 1e5, models.D, false},
		// ESR and R1 add below their corner at 40 kHz
		{exact(t, "cap-two-branch", map[string]float64{"ESR": 30e-3, "ESL": 14e-9, "C": 470e-6, "R1": 50e-3, "C1": 80e-6}, 10, 500, 61), 0.001, 300, models.ESR, true},
	} {
		held, wide := 0, 0
		for seed := range cases {
			z := c.noisy(rand.New(rand.NewPCG(uint64(seed), 20)), c.noise)
			a, err := Analyse(c.freq, z, Request{Circuit: c.circuit, Name: c.name})
			if err != nil {
				t.Fatal(err)
			}
			truth, _, _ := c.figure.Of(c.at, c.circuit.At(c.at, c.values))
			v := a.Result.Figure(c.figure, c.at)
			if v.Low95 <= truth && truth <= v.High95 {
				held++
			}
			if v.High95/v.Low95 > determinedFactor {
				wide++
			}
		}
		t.Logf("%s of %s at %g Hz: holds in %d, wider than a factor of 4 in %d of %d", c.figure, c.name, c.at, held, wide, cases)
		if held < cases*9/10 { // 95 %, less 1.5 standard errors of a share in 40
			t.Errorf("%s of %s: the interval holds in %d of %d", c.figure, c.name, held, cases)
		}
		if c.sharp && wide > cases/20 || !c.sharp && wide < cases*9/10 {
			t.Errorf("%s of %s: wider than a factor of 4 in %d of %d, sharp expected: %v", c.figure, c.name, wide, cases, c.sharp)
		}
	}
	// An interval of a sharp fit is not touched.
	p := coverageParts(t, 61)[0]
	a, err := Analyse(p.freq, p.noisy(rand.New(rand.NewPCG(1, 20)), 0.001), Request{Circuit: p.circuit})
	if err != nil {
		t.Fatal(err)
	}
	if v := a.Result.Figure(models.ESR, 1e5); !(math.Log(v.High95/v.Low95) < 0.01) || len(a.Result.extremes) > 0 {
		t.Errorf("ESR %+v, %d extremes", v, len(a.Result.extremes))
	}
}
