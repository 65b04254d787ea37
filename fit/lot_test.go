package fit

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"realpart/models"
)

// lotSweep simulates a part of a library circuit with noise.
func lotSweep(t *testing.T, name string, values []float64, noise float64, seed uint64) ([]float64, []complex128) {
	t.Helper()
	m, ok := models.Lookup(name)
	if !ok {
		t.Fatalf("no circuit %s", name)
	}
	freq := make([]float64, 41)
	for i := range freq {
		freq[i] = 100 * math.Pow(10, float64(i)/8)
	}
	z := make([]complex128, len(freq))
	m.Circuit.NewEvaluator(freq).Impedance(z, values)
	r := rand.New(rand.NewPCG(seed, 0))
	for i := range z {
		z[i] *= complex(1+noise*r.NormFloat64(), noise*r.NormFloat64())
	}
	return freq, z
}

// A lot whose parts disagree on their own gets one circuit, whose values are
// those of a fit that asks for it.
func TestLotChoice(t *testing.T) {
	var tally Tally
	type part struct {
		freq  []float64
		z     []complex128
		trial *Trial
	}
	var parts []part
	own := map[string]int{}
	for seed := range uint64(6) {
		// Rp is at the edge of what the sweep shows.
		freq, z := lotSweep(t, "cap-leak", []float64{0.05, 10e-9, 1e-6, 400e3}, 0.002, seed+1)
		trial, err := Try(freq, z, Request{})
		if err != nil {
			t.Fatal(err)
		}
		tally.Add(trial)
		parts = append(parts, part{freq, z, trial})
		a, err := Analyse(freq, z, Request{})
		if err != nil {
			t.Fatal(err)
		}
		own[a.Name]++
	}
	t.Logf("chosen part by part: %v", own)
	choice := tally.Choose()
	if choice.Kind != models.CapacitorPart || len(choice.Circuits) != 1 {
		t.Fatalf("kind %s, %d circuits", choice.Kind, len(choice.Circuits))
	}
	name := choice.Circuits[choice.Kind].Model.Name
	for _, p := range parts {
		a, err := choice.Analyse(p.freq, p.z, Request{}, p.trial)
		if err != nil {
			t.Fatal(err)
		}
		m, _ := models.Lookup(name)
		asked, err := Analyse(p.freq, p.z, Request{Circuit: m.Circuit, Name: name})
		if err != nil {
			t.Fatal(err)
		}
		if a.Name != name || !slices.Equal(a.Result.Values(), asked.Result.Values()) {
			t.Errorf("%s: got %s %v, want %v", name, a.Name, a.Result.Values(), asked.Result.Values())
		}
		chosen := 0
		for _, c := range a.Candidates {
			if c.Chosen {
				chosen++
			}
			if c.Reason == "" {
				t.Errorf("no reason for %s", c.Name)
			}
		}
		if chosen != 1 || len(a.Candidates) != len(models.OfKind(models.CapacitorPart)) {
			t.Errorf("%d candidates, %d chosen", len(a.Candidates), chosen)
		}
	}
}

// The sum decides, and a circuit that most parts do not determine is out.
func TestTally(t *testing.T) {
	v := func(x float64) *float64 { return &x }
	trial := func(esr, leak float64, determined bool) *Trial {
		return &Trial{Kind: models.CapacitorPart, Candidates: []TrialCandidate{
			{Name: "cap-esr-esl", AICc: v(esr), Determined: true},
			{Name: "cap-leak", AICc: v(leak), Determined: determined},
		}}
	}
	choose := func(trials ...*Trial) *LotCircuit {
		var tally Tally
		for _, tr := range trials {
			tally.Add(tr)
		}
		return tally.Choose().Circuits[models.CapacitorPart]
	}
	if c := choose(trial(-100, -104, true), trial(-100, -98, true), trial(-100, -103, true)); c.Model.Name != "cap-leak" {
		t.Errorf("got %s, want cap-leak by a sum of −305 against −300", c.Model.Name)
	}
	if c := choose(trial(-100, -101, true), trial(-100, -100.5, true)); c.Model.Name != "cap-esr-esl" {
		t.Errorf("got %s, want the simpler of two that are as good", c.Model.Name)
	}
	c := choose(trial(-100, -150, false), trial(-100, -150, false), trial(-100, -150, true))
	if c.Model.Name != "cap-esr-esl" || !strings.Contains(c.Reasons["cap-leak"], "2 of 3") {
		t.Errorf("got %s (%v), want the one that is determined", c.Model.Name, c.Reasons)
	}
	if new(Tally).Choose() != nil {
		t.Error("an empty tally chooses")
	}
}

// A choke among capacitors is fitted as a choke, with a warning; the lot's
// circuit is that of the capacitors.
func TestLotOtherKind(t *testing.T) {
	var tally Tally
	var last *Trial
	var freq []float64
	var z []complex128
	for seed := range uint64(3) {
		f, c := lotSweep(t, "cap-esr-esl", []float64{0.05, 10e-9, 10e-6}, 0.002, seed)
		trial, err := Try(f, c, Request{})
		if err != nil {
			t.Fatal(err)
		}
		tally.Add(trial)
	}
	freq, z = lotSweep(t, "ind-dcr", []float64{0.05, 40e-6}, 0.002, 9)
	last, err := Try(freq, z, Request{})
	if err != nil {
		t.Fatal(err)
	}
	tally.Add(last)
	choice := tally.Choose()
	if choice.Kind != models.CapacitorPart {
		t.Fatalf("kind %s", choice.Kind)
	}
	a, err := choice.Analyse(freq, z, Request{}, last)
	if err != nil {
		t.Fatal(err)
	}
	if a.Kind != models.InductorPart || !slices.ContainsFunc(a.Warnings, func(w Warning) bool { return w.Code == WarnOtherKind }) {
		t.Errorf("got a %s with warnings %v", a.Kind, a.Warnings)
	}
	// A sweep that only looks like another kind takes the lot's circuit: a
	// large capacitor seen above its resonance alone.
	mistaken := *last
	f, c := lotSweep(t, "cap-esr-esl", []float64{0.05, 10e-9, 10e-6}, 0.002, 7)
	inductor, err := Try(f, c, Request{Kind: models.InductorPart})
	if err != nil {
		t.Fatal(err)
	}
	mistaken.Kind, mistaken.Candidates = models.InductorPart, inductor.Candidates
	if a, err = choice.Analyse(f, c, Request{}, &mistaken); err != nil {
		t.Fatal(err)
	}
	if a.Name != choice.Circuits[choice.Kind].Model.Name {
		t.Errorf("got %s, want the lot's circuit", a.Name)
	}
}
