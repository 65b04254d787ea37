package fit

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// Measuring what is advised gives the interval that was predicted, within
// 20 %.
func TestAdvise(t *testing.T) {
	for _, c := range []struct {
		part
		parameter string
		undecided bool // the present sweep does not determine it
	}{
		{exact(t, "cap-esr-esl", map[string]float64{"ESR": 20e-3, "ESL": 5e-9, "C": 10e-6}, 100, 1e5, 101), "ESL", false},
		{exact(t, "cap-esr-esl", map[string]float64{"ESR": 20e-3, "ESL": 5e-9, "C": 10e-6}, 100, 5e3, 101), "ESL", true},
		{exact(t, "ind-core", map[string]float64{"DCR": 62e-3, "L": 46e-6, "Rp": 8.3e3, "Cp": 9.6e-12}, 1e4, 1e6, 51), "Cp", false},
		{exact(t, "cap-loss", map[string]float64{"ESR": 3e-3, "ESL": 1e-9, "C": 9e-6, "tand": 0.02}, 1e4, 3e6, 101), "ESR", false},
	} {
		const noise = 0.001
		name := c.name + " " + c.parameter
		rng := rand.New(rand.NewPCG(1, 7))
		a, err := Analyse(c.freq, c.noisy(rng, noise), Request{Circuit: c.circuit})
		if err != nil {
			t.Fatal(err)
		}
		i, _ := c.circuit.Index(c.parameter)
		if c.undecided == a.Result.Parameters[i].Determined {
			t.Errorf("%s: determined %v, want %v", name, a.Result.Parameters[i].Determined, !c.undecided)
		}
		advice, err := a.Result.Advise(c.parameter)
		if err != nil || len(advice) < 3 {
			t.Fatalf("%s: %d pieces of advice, error %v", name, len(advice), err)
		}
		for _, tip := range advice[:3] {
			t.Logf("%s: %v", name, tip)
			// measure it: the present points and the added ones, of a part
			// with the value that the advice assumes
			freq := slices.Clone(c.freq)
			count := tip.Points
			for k := range count {
				f := tip.From * math.Pow(tip.To/tip.From, float64(k)/float64(count-1))
				if !slices.Contains(freq, f) {
					freq = append(freq, f)
				}
			}
			slices.Sort(freq)
			values := slices.Clone(c.values)
			values[i] = tip.Assumed
			z := make([]complex128, len(freq))
			c.circuit.NewEvaluator(freq).Impedance(z, values)
			addNoise(rng, z, noise)
			r, err := Fit(freq, z, c.circuit, nil)
			if err != nil {
				t.Fatal(err)
			}
			q := r.Parameters[i]
			got := math.Log(q.High95/q.Low95) / 2
			if ratio := got / tip.Then; !(ratio > 0.8 && ratio < 1.2) {
				t.Errorf("%s: %v: measured, the interval is ± %.3g %%, %.2f times the prediction", name, tip, 100*got, ratio)
			}
			if !(tip.Then < tip.Now) || c.undecided != math.IsInf(tip.Now, 1) {
				t.Errorf("%s: %v: from %v to %v", name, tip, tip.Now, tip.Then)
			}
		}
	}
}

// Who asks for advice on an element that the sweep hardly shows gets it,
// though the circuit that describes the sweep best lacks the element.
func TestAdviseForAbsentElement(t *testing.T) {
	p := exact(t, "cap-esr-esl", map[string]float64{"ESR": 20e-3, "ESL": 5e-9, "C": 10e-6}, 100, 5e3, 101)
	for seed := range uint64(6) {
		a, err := Analyse(p.freq, p.noisy(rand.New(rand.NewPCG(seed, 21)), 0.001), Request{Advise: "ESL"})
		if err != nil {
			t.Fatal(err)
		}
		if a.Name != "cap-esr" || warning(a, "advice-for-other-circuit") == "" {
			t.Errorf("seed %d: %s chosen, warnings %v", seed, a.Name, a.Warnings)
		}
		// The farther up, the more ESL shows; the resonance is at 712 kHz.
		if len(a.Advice) == 0 || !(a.Advice[0].To > 100e3) || !math.IsInf(a.Advice[0].Now, 1) || !(a.Advice[0].Assumed > 5e-9) {
			t.Errorf("seed %d: advice %v", seed, a.Advice)
		}
	}
}
