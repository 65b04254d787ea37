package fit

import (
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"

	"realpart/models"
)

// shareOf returns the sweep of n points over a share of the logarithmic range
// that shows every element, with noise.
func shareOf(t *testing.T, name string, seed uint64, from, to float64, n int, noise float64) part {
	r := rand.New(rand.NewPCG(seed, 16))
	named, low, high := realistic(r, name)
	ratio := high / low
	p := exact(t, name, named, low*math.Pow(ratio, from), low*math.Pow(ratio, to), n)
	p.z = p.noisy(r, noise)
	return p
}

// A sweep that does not show every element of the part is still described:
// what it shows has values, the rest bounds. Leaving out an element that is
// seen because its neighbour in the circuit is not, would miss by decades.
func TestPartialSweepIsDescribed(t *testing.T) {
	const noise = 0.001
	for _, c := range []struct {
		name, seen string
		from, to   float64
	}{
		{"cap-leak", "Rp", 0, 0.5},    // ESR and ESL are far above
		{"cap-loss", "tand", 0, 0.5},  // so are they here
		{"ind-skin", "K", 0, 0.5},     // Cp is
		{"ind-eddy", "R1", 0, 0.5},    // Cp is
		{"cap-esr-esl", "C", 0, 0.5},  // all of what is chosen is seen
		{"cap-line", "ESL", 0.3, 1},   // C is seen at the low end alone
		{"bead", "R", 0.4, 1},         // DCR is far below
		{"ind-core", "Rp", 0.3, 1},    // DCR is far below
		{"res-series-l", "R", 0, 0.9}, // all is seen
	} {
		for seed := range uint64(5) {
			p := shareOf(t, c.name, seed, c.from, c.to, 101, noise)
			a, err := Analyse(p.freq, p.z, Request{})
			if err != nil {
				t.Fatal(err)
			}
			if !(a.Result.RMSRelative < 1.5*noise*math.Sqrt2) {
				t.Errorf("%s, seed %d: %s chosen with rms %.3g, noise %.3g", c.name, seed, a.Name, a.Result.RMSRelative, noise*math.Sqrt2)
			}
			i, ok := a.Result.Circuit.Index(c.seen)
			if a.Name != c.name {
				continue // a simpler circuit that serves
			}
			truth, _ := p.circuit.Index(c.seen)
			if q := a.Result.Parameters[i]; !ok || !q.Determined || !(math.Abs(math.Log(q.Value/p.values[truth])) < 5*q.StdError/q.Value) {
				t.Errorf("%s, seed %d: %s = %.4g (determined: %v), truth %.4g", c.name, seed, c.seen, q.Value, q.Determined, p.values[truth])
			}
			for _, q := range a.Result.Parameters {
				if !q.Determined && warning(a, "no-candidate-determined") == "" {
					t.Errorf("%s, seed %d: %s is not determined and nothing says so", c.name, seed, q.Name)
				}
			}
		}
	}
}

// Numbers that were saved with four digits and hundredths of a degree bring
// no elements, no structure and no level steps into a sweep.
func TestRoundedSweep(t *testing.T) {
	digits := func(v float64, n int) float64 {
		rounded, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', n-1, 64), 64)
		return rounded
	}
	for _, m := range models.Library() {
		if m.Kind == models.AnyPart {
			continue
		}
		for seed := range uint64(2) {
			p := simulatePart(rand.New(rand.NewPCG(seed, 17)), m.Name, 201, 0)
			for i, v := range p.z {
				phase := math.Round(18000/math.Pi*math.Atan2(imag(v), real(v))) / 100 * math.Pi / 180
				size := digits(abs(v), 4)
				p.z[i] = complex(size*math.Cos(phase), size*math.Sin(phase))
			}
			a, err := Analyse(p.freq, p.z, Request{})
			if err != nil {
				t.Fatal(err)
			}
			if a.Name != m.Name || len(a.Warnings) > 0 || a.Result.Structured {
				t.Errorf("%s, seed %d: %s chosen, structured %v, warnings %v", m.Name, seed, a.Name, a.Result.Structured, a.Warnings)
			}
			if seed > 0 {
				continue
			}
			j, err := Check(p.freq, p.z, nil)
			if err != nil {
				t.Fatal(err)
			}
			for _, w := range j.Warnings {
				if !strings.HasPrefix(w.Code, "few-points") {
					t.Errorf("%s: check says %s: %s", m.Name, w.Code, w.Text)
				}
			}
		}
	}
}

func TestRoundingSquares(t *testing.T) {
	const n = 50
	r := rand.New(rand.NewPCG(1, 18))
	exact, polar, cartesian := make([]complex128, n), make([]complex128, n), make([]complex128, n)
	places := 0.0
	for i := range exact {
		size, phase := span(r, 1, 10), 60+30*r.Float64()
		exact[i] = complex(size*math.Cos(phase*math.Pi/180), size*math.Sin(phase*math.Pi/180))
		// three decimals of 1 … 10 Ω are four digits
		size, phase = math.Round(1000*size)/1000, math.Round(100*phase)/100*math.Pi/180
		polar[i] = complex(size*math.Cos(phase), size*math.Sin(phase))
		cartesian[i] = complex(math.Round(1000*real(exact[i]))/1000, math.Round(1000*imag(exact[i]))/1000)
		places += math.Pow(0.0005/size, 2)
	}
	degree := math.Pi / 180
	for _, c := range []struct {
		name string
		z    []complex128
		want float64
	}{
		{"as computed", exact, 0},
		{"magnitude and phase", polar, places + n*math.Pow(0.005*degree, 2)},
		{"resistance and reactance", cartesian, 2 * places},
	} {
		if got := roundingSquares(c.z); !(math.Abs(got-c.want) <= 0.01*c.want) {
			t.Errorf("%s: %.4g, want %.4g", c.name, got, c.want)
		}
		missed := 0.0
		for i, v := range c.z {
			missed += math.Pow(abs(v-exact[i])/abs(exact[i]), 2)
		}
		if !(missed <= roundingSquares(c.z)*1.001) {
			t.Errorf("%s: the rounding itself is %.4g, above the bound", c.name, missed)
		}
	}
}

// With so few points that a resonance passes between two of them, an inductor
// is still told from a bead.
func TestKindOfCoarseSweep(t *testing.T) {
	for _, name := range []string{"ind-cp", "ind-core", "ind-skin", "ind-eddy", "bead", "cap-esr-esl", "cap-two-branch"} {
		m, _ := models.Lookup(name)
		for seed := range uint64(20) {
			p := simulatePart(rand.New(rand.NewPCG(seed, 19)), name, 20, 0.003)
			if kind, why := TellKind(p.freq, p.z); kind != m.Kind {
				t.Errorf("%s, seed %d: taken for %s (%s)", name, seed, article(kind), why)
			}
		}
	}
}

// Where no circuit of the kind comes near, the kind may be wrong, and the
// warning says which would do.
func TestOtherKindIsNamed(t *testing.T) {
	p := simulatePart(rand.New(rand.NewPCG(1, 20)), "res-bvd", 201, 0.001)
	a, err := Analyse(p.freq, p.z, Request{Kind: models.CapacitorPart})
	if err != nil {
		t.Fatal(err)
	}
	text := warning(a, "structured-residual")
	if !strings.Contains(text, "res-bvd for a resonator does (rms") || !strings.Contains(text, "--kind") {
		t.Errorf("the resonator is not named: %q", text)
	}
}

// A lot measured over too small a range gets the circuit that describes it,
// as a single part does.
func TestPartialLotIsDescribed(t *testing.T) {
	var tally Tally
	for seed := range uint64(4) {
		p := shareOf(t, "cap-leak", 3*seed, 0, 0.5, 101, 0.001)
		trial, err := Try(p.freq, p.z, Request{})
		if err != nil {
			t.Fatal(err)
		}
		tally.Add(trial)
	}
	choice := tally.Choose()
	if got := choice.Circuits[choice.Kind].Model.Name; got != "cap-leak" {
		t.Errorf("the lot gets %s (%s), want cap-leak", got, choice.Circuits[choice.Kind].Reason)
	}
}

// A bound in words is never tighter than the bound.
func TestLimitIsRoundedOutwards(t *testing.T) {
	nan := math.NaN()
	q := Parameter{Parameter: models.Parameter{Name: "ESL", Unit: "H"}, Low95: nan, High95: 12.4e-9}
	if got := q.Limit(); got != "ESL < 13 nH" {
		t.Errorf("%s, want ESL < 13 nH", got)
	}
	q.Low95, q.High95 = 12.6e-9, nan
	if got := q.Limit(); got != "ESL > 12 nH" {
		t.Errorf("%s, want ESL > 12 nH", got)
	}
}

func TestStartOfFixedParameter(t *testing.T) {
	p := shareOf(t, "cap-esr", 1, 0, 1, 20, 0.001)
	_, err := Fit(p.freq, p.z, p.circuit, &Settings{Fixed: map[string]float64{"ESR": 1}, Start: map[string]float64{"ESR": 2}})
	if err == nil || !strings.Contains(err.Error(), "--start: expected a parameter that --fix does not hold at 1, found ESR=2") {
		t.Errorf("error %v", err)
	}
}

// Far below its resonance a resistor shows of L and C one combination alone,
// L − R²C. A fit in which L has vanished gives C to a few percent, without
// account of what L could be; the interval must hold all the same.
func TestIntervalBesideVanishedElement(t *testing.T) {
	const cases = 60
	covered, vanished := 0, 0
	for seed := range uint64(cases) {
		p := shareOf(t, "res-full", seed, 0, 0.5, 101, 0.001)
		a, err := Analyse(p.freq, p.z, Request{Circuit: p.circuit})
		if err != nil {
			t.Fatal(err)
		}
		all := true
		for i, q := range a.Result.Parameters {
			if q.AtBound {
				vanished++
			}
			all = all && !(q.Low95 > p.values[i]) && !(q.High95 < p.values[i])
		}
		if all {
			covered++
		}
	}
	t.Logf("all three intervals cover the truth in %d of %d cases; in %d an element has vanished", covered, cases, vanished)
	// All three intervals at once: at least 1 − 3·5 %.
	if !(covered >= cases*85/100) || vanished == 0 {
		t.Errorf("all intervals cover the truth in %d of %d cases, vanished in %d", covered, cases, vanished)
	}
}
