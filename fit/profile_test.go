package fit

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// Where the problem is nearly linear, profile intervals are the linear ones.
func TestProfileNearlyLinear(t *testing.T) {
	for _, p := range coverageParts(t, 101) {
		z := p.noisy(rand.New(rand.NewPCG(1, 8)), 0.001)
		linear, err := Fit(p.freq, z, p.circuit, nil)
		if err != nil {
			t.Fatal(err)
		}
		profiled, err := Analyse(p.freq, z, Request{Circuit: p.circuit, Profile: true})
		if err != nil {
			t.Fatal(err)
		}
		for i, q := range profiled.Result.Parameters {
			l := linear.Parameters[i]
			width := math.Log(l.High95 / l.Low95)
			for _, d := range []float64{math.Log(q.Low95/l.Low95) / width, math.Log(q.High95/l.High95) / width} {
				if !(math.Abs(d) < 0.01) {
					t.Errorf("%s %s: profile %.6g … %.6g, linear %.6g … %.6g", p.name, q.Name, q.Low95, q.High95, l.Low95, l.High95)
				}
			}
		}
	}
}

// Where it is not, a lopsided profile interval agrees with the parametric
// bootstrap (Efron and Tibshirani 1993, An Introduction to the Bootstrap,
// 14: the distribution of the estimate under the fitted model) better than
// the linear one. For a parameter whose sampling distribution depends on its
// value as strongly as here, the profile's ends are those values at which the
// estimate at hand is an extreme of 2.5 %: that is checked by simulating at
// the ends.
func TestProfileLopsided(t *testing.T) {
	p := exact(t, "cap-esr-esl", map[string]float64{"ESR": 20e-3, "ESL": 5e-9, "C": 10e-6}, 100, 2.2e4, 101)
	z := p.noisy(rand.New(rand.NewPCG(2, 8)), 0.001)
	r, err := Fit(p.freq, z, p.circuit, nil)
	if err != nil {
		t.Fatal(err)
	}
	i, _ := p.circuit.Index("ESL")
	linear := r.Parameters[i]
	if err := r.profileIntervals(func(*Parameter) bool { return true }); err != nil {
		t.Fatal(err)
	}
	q := r.Parameters[i]
	below, above := math.Log(q.Value/q.Low95), math.Log(q.High95/q.Value)
	t.Logf("ESL = %.3g nH: profile %.3g … %.3g, linear %.3g … %.3g", q.Value*1e9, q.Low95*1e9, q.High95*1e9, linear.Low95*1e9, linear.High95*1e9)
	if !(below > 1.3*above) {
		t.Fatalf("the profile interval is not lopsided: %.2g below, %.2g above in ln ESL", below, above)
	}
	const draws = 1000
	// share returns how often a part with that ESL gives an estimate at
	// least as high as the one at hand.
	share := func(esl float64) float64 {
		values := r.Values()
		values[i] = esl
		rng := rand.New(rand.NewPCG(3, 8))
		high := 0
		for range draws {
			z := make([]complex128, len(p.freq))
			p.circuit.NewEvaluator(p.freq).Impedance(z, values)
			addNoise(rng, z, r.Sigma)
			b, err := Fit(p.freq, z, p.circuit, nil)
			if err != nil {
				t.Fatal(err)
			}
			if b.Parameters[i].Value >= q.Value {
				high++
			}
		}
		return float64(high) / draws
	}
	for _, end := range []struct {
		name            string
		profile, linear float64
		want            float64
	}{{"low", q.Low95, linear.Low95, 0.025}, {"high", q.High95, linear.High95, 0.975}} {
		got, other := share(end.profile), share(end.linear)
		t.Logf("%s end: the estimate is exceeded in %.1f %% at the profile's, %.1f %% at the linear end", end.name, 100*got, 100*other)
		// three standard errors of a share of 2.5 % in 1000 draws
		if !(math.Abs(got-end.want) < 3*math.Sqrt(0.025*0.975/draws)) {
			t.Errorf("%s end: %.1f %%, want %.1f %%", end.name, 100*got, 100*end.want)
		}
	}
}

// The interval of a profile contains the estimate and is the same when asked
// for twice.
func TestProfileRepeats(t *testing.T) {
	p := coverageParts(t, 51)[1]
	z := p.noisy(rand.New(rand.NewPCG(4, 8)), 0.01)
	var before []Parameter
	for range 2 {
		a, err := Analyse(p.freq, z, Request{Circuit: p.circuit, Profile: true})
		if err != nil {
			t.Fatal(err)
		}
		for _, q := range a.Result.Parameters {
			if !(q.Low95 < q.Value && q.Value < q.High95) {
				t.Errorf("%s = %g is not inside %g … %g", q.Name, q.Value, q.Low95, q.High95)
			}
		}
		if before != nil && !slices.EqualFunc(before, a.Result.Parameters, func(a, b Parameter) bool { return a.Low95 == b.Low95 && a.High95 == b.High95 && a.Value == b.Value }) {
			t.Error("another interval the second time")
		}
		before = a.Result.Parameters
	}
}
