package fit

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"realpart/models"
)

// fault spoils a sweep: what goes wrong in measurements.
type fault struct {
	name  string
	spoil func(r *rand.Rand, p part, size float64) (z []complex128)
	// sizes of the table, and the one at which detection is demanded; 0 for
	// faults without a size.
	sizes  []float64
	demand float64
}

var faults = []fault{
	{name: "none", spoil: func(_ *rand.Rand, p part, _ float64) []complex128 { return p.z }, sizes: []float64{0}},
	{name: "range step", spoil: func(r *rand.Rand, p part, size float64) []complex128 {
		z := append([]complex128(nil), p.z...)
		at := len(z)/4 + r.IntN(len(z)/2)
		for i := at; i < len(z); i++ {
			z[i] *= complex(1+size, 0)
		}
		return z
	}, sizes: []float64{0.001, 0.002, 0.005}, demand: 0.005},
	{name: "columns swapped", spoil: func(_ *rand.Rand, p part, _ float64) []complex128 {
		z := make([]complex128, len(p.z))
		for i, v := range p.z {
			z[i] = complex(imag(v), real(v))
		}
		return z
	}, sizes: []float64{0}},
	{name: "phase reversed", spoil: func(_ *rand.Rand, p part, _ float64) []complex128 {
		z := make([]complex128, len(p.z))
		for i, v := range p.z {
			z[i] = complex(real(v), -imag(v))
		}
		return z
	}, sizes: []float64{0}},
	// Heating by the test current or the hand: one element drifts over the
	// last third of the points, which is also the last third of the time.
	{name: "warming up", spoil: func(r *rand.Rand, p part, size float64) []complex128 {
		z := append([]complex128(nil), p.z...)
		drifting := p.mainParameter()
		values := append([]float64(nil), p.values...)
		e := p.circuit.NewEvaluator(p.freq[:1])
		from := len(z) - len(z)/3
		var before, after [1]complex128
		for i := from; i < len(z); i++ {
			e.SetFrequencies(p.freq[i : i+1])
			e.Impedance(before[:], p.values)
			values[drifting] = p.values[drifting] * (1 + size*float64(i-from+1)/float64(len(z)-from))
			e.Impedance(after[:], values)
			z[i] *= after[0] / before[0]
		}
		return z
	}, sizes: []float64{0.01, 0.02, 0.03}, demand: 0.03},
}

// mainParameter is the parameter that the impedance in the last third of the
// sweep depends on most: the one whose drift is a drift of what is measured.
func (p part) mainParameter() int {
	n := len(p.values)
	columns := make([][]complex128, n)
	for k := range columns {
		columns[k] = make([]complex128, len(p.freq))
	}
	z := make([]complex128, len(p.freq))
	p.circuit.NewEvaluator(p.freq).Jacobian(z, columns, p.values)
	best, most := 0, 0.0
	for k := range columns {
		sum := 0.0
		for i := len(z) * 2 / 3; i < len(z); i++ {
			sum += math.Pow(abs(columns[k][i])/abs(z[i]), 2)
		}
		if sum > most {
			best, most = k, sum
		}
	}
	return best
}

// detected: the sweep is said to be inconsistent.
func detected(t testing.TB, freq []float64, z []complex128) (bool, *Judgement) {
	j, err := Check(freq, z, nil)
	if err != nil {
		t.Fatal(err)
	}
	return !j.Consistent, j
}

// Faults of 0.5 % and more of a step, 3 % of warming up, reversed phases and
// swapped columns are found in at least 95 % of seeded cases of all library
// circuits at 0.1 % noise, with fewer than 2 % false alarms. The table of
// detection over the size of the fault is printed.
func TestCheckDetection(t *testing.T) {
	library := models.Library()
	for _, f := range faults {
		for _, size := range f.sizes {
			perCircuit := 1
			switch {
			case f.name == "none":
				perCircuit = 6
			case size == 0:
				perCircuit = 2
			case size == f.demand:
				perCircuit = 3
			}
			type outcome struct {
				name    string
				found   bool
				visible bool
				said    string
			}
			found, cases := 0, 0
			var missed []string
			err := InOrder(context.Background(), perCircuit*len(library), 0, func(i int) outcome {
				m := library[i/perCircuit]
				r := rand.New(rand.NewPCG(uint64(i%perCircuit), 13))
				p := simulatePart(r, m.Name, 201, 0.001)
				z := f.spoil(r, p, size)
				hit, j := detected(t, p.freq, z)
				o := outcome{name: m.Name, found: hit, visible: f.visibleIn(p)}
				for _, w := range j.Warnings {
					o.said += w.Code + " "
				}
				return o
			}, func(_ int, o outcome) error {
				if !o.visible {
					return nil
				}
				cases++
				if o.found {
					found++
				} else {
					missed = append(missed, o.name)
				}
				return nil
			})
			if err != nil {
				t.Fatal(err)
			}
			share := float64(found) / float64(cases)
			label := f.name
			if size > 0 {
				label += fmt.Sprintf(" %.1f %%", 100*size)
			}
			t.Logf("%-18s found in %5.1f %% of %d", label, 100*share, cases)
			switch {
			case f.name == "none":
				if !(share < 0.02) {
					t.Errorf("false alarms in %.1f %%, want fewer than 2 %%", 100*share)
				}
			case size == f.demand:
				if !(share >= 0.95) {
					t.Errorf("%s: found in %.1f %%, want at least 95 %%; missed %s", label, 100*share, strings.Join(missed, " "))
				}
			}
		}
	}
}

// visibleIn tells whether the fault changes the sweep of a part at all beyond
// its noise. The sign of a phase that is nowhere above the noise is beyond
// any test, and so are two columns of which the imaginary one is the noise of
// zero.
func (f fault) visibleIn(p part) bool {
	switch f.name {
	case "phase reversed", "columns swapped":
		sum := 0.0
		for _, v := range p.z {
			phase := imag(v) / abs(v)
			sum += phase * phase
		}
		return math.Sqrt(sum/float64(len(p.z))) > 0.01
	case "warming up":
		// of an ideal element the drift is a slope of the level that poles
		// outside the sweep can mimic
		return len(p.values) > 1
	}
	return true
}

// What the check says of mistakes that can be named.
func TestCheckWords(t *testing.T) {
	p := coverageParts(t, 201)[0]
	clean := p.noisy(rand.New(rand.NewPCG(1, 14)), 0.001)
	change := func(f func(i int, v complex128) complex128) []complex128 {
		z := make([]complex128, len(clean))
		for i, v := range clean {
			z[i] = f(i, v)
		}
		return z
	}
	for _, c := range []struct {
		name, code string
		z          []complex128
		s          *CheckSettings
	}{
		{"reversed", "phase-reversed", change(func(_ int, v complex128) complex128 { return complex(real(v), -imag(v)) }), nil},
		{"radians as degrees", "phase-unit", change(func(_ int, v complex128) complex128 {
			a, ph := math.Hypot(real(v), imag(v)), math.Atan2(imag(v), real(v))*math.Pi/180
			return complex(a*math.Cos(ph), a*math.Sin(ph))
		}), nil},
		{"swapped", "columns-swapped", change(func(_ int, v complex128) complex128 { return complex(imag(v), real(v)) }), nil},
		{"step", "level-step", change(func(i int, v complex128) complex128 {
			if i > 80 {
				v *= 1.01
			}
			return v
		}), nil},
		{"S above 1", "reflection-above-one", clean, &CheckSettings{S: append(make([]complex128, 200), 1.01), Connection: Reflection}},
	} {
		j, err := Check(p.freq, c.z, c.s)
		if err != nil {
			t.Fatal(err)
		}
		said := ""
		for _, w := range j.Warnings {
			said += w.Code + ": " + w.Text + "\n"
		}
		t.Logf("%s: %s", c.name, said)
		if !strings.Contains(said, c.code) {
			t.Errorf("%s: %q is not said", c.name, c.code)
		}
		if (c.s == nil) == j.Consistent {
			t.Errorf("%s: consistent %v", c.name, j.Consistent)
		}
	}
	j, err := Check(p.freq, clean, nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, w := range j.Warnings {
		if w.Code != "non-passive-points" { // ESR far below |Z| at the low end
			t.Errorf("clean: %s", w.Text)
		}
	}
	if !j.Consistent || !(math.Abs(j.Noise/0.001-1) < 0.15) {
		t.Errorf("clean: consistent %v, noise %.4g, warnings %v", j.Consistent, j.Noise, j.Warnings)
	}
	// Up to 20 kHz, far below its self-resonance of 712 kHz.
	short := exact(t, "cap-esr-esl", map[string]float64{"ESR": 20e-3, "ESL": 5e-9, "C": 10e-6}, 100, 2e4, 101)
	j, err = Check(short.freq, short.noisy(rand.New(rand.NewPCG(1, 14)), 0.001), nil)
	if err != nil {
		t.Fatal(err)
	}
	if len(j.Next) != 1 || j.Next[0] != "go on to 200 kHz to see ESL and the self-resonance" {
		t.Errorf("next: %q", j.Next)
	}
	// Wild points at the harmonics of 50 Hz.
	mains := exact(t, "cap-esr", map[string]float64{"ESR": 1, "C": 1e-6}, 20, 2e4, 301)
	z := mains.noisy(rand.New(rand.NewPCG(1, 14)), 0.001)
	for i, f := range mains.freq {
		for _, h := range []float64{50, 100, 150} {
			if math.Abs(f/h-1) < 0.01 {
				z[i] *= 1.03
			}
		}
	}
	j, err = Check(mains.freq, z, nil)
	if err != nil {
		t.Fatal(err)
	}
	said := ""
	for _, w := range j.Warnings {
		said += w.Code + " "
	}
	if !strings.Contains(said, "mains-pick-up") {
		t.Errorf("mains pick-up not found: %s", said)
	}
}

// A Debye relaxation is a Kramers–Kronig pair in closed form (Debye 1929,
// Polar Molecules; from memory): Z = R∞ + ΔR/(1 + jωτ) is consistent, and the
// same real part with an imaginary part 5 % too large is not.
func TestCheckDebye(t *testing.T) {
	freq := make([]float64, 101)
	good, bad := make([]complex128, 101), make([]complex128, 101)
	for i := range freq {
		freq[i] = math.Pow(10, 2+4*float64(i)/100)
		x := 2 * math.Pi * freq[i] * 1e-5
		re, im := 10+100/(1+x*x), -100*x/(1+x*x)
		good[i], bad[i] = complex(re, im), complex(re, 1.05*im)
	}
	r := rand.New(rand.NewPCG(1, 15))
	addNoise(r, good, 0.001)
	addNoise(r, bad, 0.001)
	if inconsistent, j := detected(t, freq, good); inconsistent {
		t.Errorf("the exact pair is called inconsistent: %v", j.Warnings)
	}
	if inconsistent, j := detected(t, freq, bad); !inconsistent {
		t.Errorf("an imaginary part 5 %% too large passes: rms %.3g", j.RMS)
	}
}
