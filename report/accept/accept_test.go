package accept

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"realpart/models"
	"realpart/report"
	"realpart/report/lots"
)

var nan = math.NaN()

// record is a part with one parameter C, symmetric in its logarithm, of
// relative half-width h.
func record(value, h float64) *report.Fit {
	low, high := value*math.Exp(-h), value*math.Exp(h)
	return &report.Fit{
		Schema: report.Schema, Status: report.Converged, Kind: models.CapacitorPart,
		Sweep:      report.Sweep{Part: "p", UsedPoints: 5000, FMin: 100, FMax: 1e6},
		Circuit:    &report.Circuit{Expression: "C"},
		Parameters: []report.Parameter{{Name: "C", Unit: "F", Value: value, Low95: &low, High95: &high, Determined: true}},
	}
}

func c(low, high float64) []Limit {
	return []Limit{{lots.Figure{Name: "C", Unit: "F"}, low, high}}
}

// JCGM 106:2012, 8.3: acceptance inside the limits by the guard band w = U,
// rejection outside by more than U, and simple acceptance.
func TestRules(t *testing.T) {
	const u = 0.01 // of 100 µF: 1 µF
	for _, row := range []struct {
		name             string
		value, low, high float64
		guarded, simple  Verdict
	}{
		{"well inside", 100e-6, 90e-6, 110e-6, Pass, Pass},
		{"inside by less than U", 109.5e-6, 90e-6, 110e-6, Undecided, Pass},
		{"outside by less than U", 110.5e-6, 90e-6, 110e-6, Undecided, Fail},
		{"well outside", 112e-6, 90e-6, 110e-6, Fail, Fail},
		{"below by less than U", 89.5e-6, 90e-6, nan, Undecided, Fail},
		{"well below", 88e-6, 90e-6, nan, Fail, Fail},
		{"upper limit alone", 50e-6, nan, 110e-6, Pass, Pass},
		{"limits closer than U", 100e-6, 99.9e-6, 100.1e-6, Undecided, Pass},
	} {
		f := record(row.value, u)
		if got := Judge(f, c(row.low, row.high), Guarded); got.Verdict != row.guarded {
			t.Errorf("%s, guarded: %s, want %s", row.name, got.Verdict, row.guarded)
		}
		got := Judge(f, c(row.low, row.high), Simple)
		if got.Verdict != row.simple {
			t.Errorf("%s, simple: %s, want %s", row.name, got.Verdict, row.simple)
		}
		if want := row.value * math.Expm1(u); math.Abs(*got.Limits[0].ExpandedUncertainty-want) > 1e-12*want {
			t.Errorf("%s: U = %g, want %g", row.name, *got.Limits[0].ExpandedUncertainty, want)
		}
	}
}

// JCGM 106:2012, 7.4 table 1 (from memory; it is the normal distribution):
// with one limit at z standard uncertainties from the value the probability of
// conformity is Φ(z): 0.80, 0.90, 0.95, 0.99, 0.999 for z = 0.84, 1.28, 1.64,
// 2.33, 3.09. With 10 000 data Student's t is that to three digits.
func TestConformity(t *testing.T) {
	const u = 0.001
	for _, row := range []struct{ z, want float64 }{{0, 0.5}, {0.84, 0.80}, {1.28, 0.90}, {1.64, 0.95}, {2.33, 0.99}, {3.09, 0.999}} {
		f := record(1e-6, u*1.96)
		for _, limits := range [][]Limit{c(nan, 1e-6*math.Exp(u*row.z)), c(1e-6*math.Exp(-u*row.z), nan)} {
			got := *Judge(f, limits, Guarded).Limits[0].Conformity
			if !(math.Abs(got-row.want) <= 1e-3) {
				t.Errorf("limit at %g standard uncertainties: %g, want %g", row.z, got, row.want)
			}
		}
	}
	// A limit at the end of the 95 % interval leaves 2.5 %, whatever the
	// degrees of freedom; limits at both ends leave 5 %.
	for _, points := range []int{2, 5, 61} {
		f := record(1e-6, 0.2)
		f.Sweep.UsedPoints = points
		p := f.Parameters[0]
		if got := *Judge(f, c(nan, *p.High95), Guarded).Limits[0].Conformity; !(math.Abs(got-0.975) <= 1e-6) {
			t.Errorf("%d points: %g, want 0.975", points, got)
		}
		if got := *Judge(f, c(*p.Low95, *p.High95), Guarded).Limits[0].Conformity; !(math.Abs(got-0.95) <= 1e-6) {
			t.Errorf("%d points: %g, want 0.95", points, got)
		}
	}
	if got := *Judge(record(1e-6, 0.1), c(0, nan), Guarded).Limits[0].Conformity; got != 1 {
		t.Errorf("a lower limit of 0: %g, want 1", got)
	}
}

// The probability of conformity is right: of parts drawn with their limits at
// random, those said to conform with p do so in p of the cases.
func TestConformityIsCalibrated(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 0))
	const runs, u = 40000, 0.05
	var said, were [10]float64
	for range runs {
		// A flat prior: the true value lies about the measured one as the
		// measured one about the true value.
		measured := math.Exp(0.5 * (2*r.Float64() - 1))
		truth := measured * math.Exp(u*r.NormFloat64())
		p := *Judge(record(measured, u*1.959964), c(0.8, 1.25), Guarded).Limits[0].Conformity
		bin := min(int(10*p), 9)
		said[bin] += p
		if truth >= 0.8 && truth <= 1.25 {
			were[bin]++
		}
	}
	for i := range said {
		if math.Abs(said[i]-were[i]) > 4*math.Sqrt(said[i])+2 {
			t.Errorf("conformity about %.2f: %g said, %g were", (float64(i)+0.5)/10, said[i], were[i])
		}
	}
}

func TestNotDetermined(t *testing.T) {
	bound := func(low, high float64) *report.Fit {
		f := record(1e-9, 0.1)
		p := &f.Parameters[0]
		p.Determined = false
		p.Low95, p.High95 = finite(low), finite(high)
		return f
	}
	for _, row := range []struct {
		name                string
		low, high           float64
		limitLow, limitHigh float64
		want                Verdict
	}{
		{"below the limit for certain", nan, 0.3e-9, nan, 5e-9, Pass},
		{"perhaps above", nan, 8e-9, nan, 5e-9, Undecided},
		{"above for certain", 6e-9, nan, nan, 5e-9, Fail},
		{"no lower bound known", nan, 0.3e-9, 0.1e-9, 5e-9, Undecided},
		{"below the lower limit for certain", nan, 0.05e-9, 0.1e-9, nan, Fail},
		{"nothing known", nan, nan, nan, 5e-9, Undecided},
	} {
		got := Judge(bound(row.low, row.high), c(row.limitLow, row.limitHigh), Guarded)
		if got.Verdict != row.want || got.Limits[0].Value != nil || got.Limits[0].Reason == "" {
			t.Errorf("%s: %+v, want %s without a value", row.name, got, row.want)
		}
	}
	f := record(1e-6, 0.01)
	if got := Judge(f, []Limit{{lots.Figure{Name: "Rp", Unit: "Ω"}, 1e6, nan}}, Guarded); got.Verdict != Undecided || got.Limits[0].Reason == "" {
		t.Errorf("a parameter that the circuit has not: %+v", got)
	}
	// A sweep up to 1 MHz without a resonance in it: SRF is above.
	if got := Judge(f, []Limit{{lots.Figure{Name: lots.SRF, Unit: "Hz"}, 0.5e6, nan}}, Guarded); got.Verdict != Pass {
		t.Errorf("SRF beyond the sweep: %+v", got)
	}
	if got := Judge(f, []Limit{{lots.Figure{Name: lots.SRF, Unit: "Hz"}, 2e6, nan}}, Guarded); got.Verdict != Undecided {
		t.Errorf("SRF beyond the sweep, limit too: %+v", got)
	}
	if got := Judge(report.Failed(report.Sweep{Part: "x"}, report.Error{Text: "bad"}), c(0, 1), Guarded); got.Verdict != Undecided || got.Error != "bad" {
		t.Errorf("a failed sweep: %+v", got)
	}
}

// The worst limit decides.
func TestPartVerdict(t *testing.T) {
	f := record(100e-6, 0.01)
	l := func(low, high float64) Limit { return c(low, high)[0] }
	pass, fail, open := l(90e-6, 110e-6), l(nan, 50e-6), l(nan, 100.2e-6)
	for _, row := range []struct {
		limits []Limit
		want   Verdict
	}{
		{nil, Pass}, {[]Limit{pass}, Pass}, {[]Limit{pass, open}, Undecided}, {[]Limit{open, fail}, Fail}, {[]Limit{fail, open, pass}, Fail},
	} {
		if got := Judge(f, row.limits, Guarded).Verdict; got != row.want {
			t.Errorf("%d limits: %s, want %s", len(row.limits), got, row.want)
		}
	}
}

func TestJudgeLot(t *testing.T) {
	parts := []Part{{Verdict: Pass}, {Verdict: Pass}, {Verdict: Undecided}, {Verdict: Fail}}
	for accept, want := range []string{Rejected, Rejected, Accepted} {
		l := JudgeLot("heron", parts, accept)
		if l.Verdict != want || l.Pass != 2 || l.Fail != 1 || l.Undecided != 1 || l.Parts != 4 {
			t.Errorf("at most %d: %+v, want %s", accept, l, want)
		}
	}
	if JudgeLot("empty", nil, 3).Verdict != Rejected {
		t.Error("an empty lot is accepted")
	}
}

// A figure outside the sweep is the circuit's word alone, which is not enough.
func TestOutsideSweep(t *testing.T) {
	f := record(1e-6, 0.01)
	low, high := 0.0999, 0.1001
	f.Figures = []report.Figure{{Name: models.ESR, AtHz: 2e6, Value: 0.1, Unit: "Ω", Low95: &low, High95: &high}}
	limit := []Limit{{lots.Figure{Name: "ESR", AtHz: 2e6, Unit: "Ω"}, nan, 1}}
	if got := Judge(f, limit, Simple); got.Verdict != Undecided || got.Limits[0].Value == nil || got.Limits[0].Reason == "" {
		t.Errorf("outside: %+v, want undecided with a value and a reason", got)
	}
	f.Sweep.FMax = 2e6
	if got := Judge(f, limit, Simple); got.Verdict != Pass {
		t.Errorf("at the end of the sweep: %+v, want pass", got)
	}
}

// Verdicts without the meter's accuracy say so; with it they don't.
func TestCaution(t *testing.T) {
	has := func(f *report.Fit) bool {
		l := JudgeLot("heron", nil, 0)
		l.Caution(lots.New("heron", []*report.Fit{f}), Guarded)
		return len(l.Cautions) > 0 && l.Cautions[0].Code == "accuracy-not-stated"
	}
	f := record(1e-6, 0.01)
	f.Residuals = &report.Residuals{}
	if !has(f) {
		t.Error("without an accuracy: nothing is said")
	}
	f.Parameters[0].MeterError = finite(1e-9)
	if has(f) {
		t.Error("with an accuracy: it is said all the same")
	}
}

// The operating characteristic against gonum's binomial distribution, and the
// rule of common practice that n = 22 without a failure shows 10 % (1 −
// 0.9^22 = 0.9015): exactly 1 − 0.1^(1/n) for acceptance number 0.
func TestOperatingCharacteristic(t *testing.T) {
	for _, n := range []int{1, 5, 22, 24, 200, 500} {
		if got, want := LimitingQuality(n, 0, 0.1), 1-math.Pow(0.1, 1/float64(n)); math.Abs(got-want) > 1e-9*want {
			t.Errorf("n = %d, none: %g, want %g", n, got, want)
		}
		for accept := range min(n, 4) {
			p := LimitingQuality(n, accept, 0.1)
			if got := (distuv.Binomial{N: float64(n), P: p}).CDF(float64(accept)); math.Abs(got-0.1) > 1e-8 {
				t.Errorf("n = %d, at most %d, share %g: accepted with %g, want 0.1", n, accept, p, got)
			}
			if got := Acceptance(n, accept, p); math.Abs(got-0.1) > 1e-8 {
				t.Errorf("n = %d, at most %d: Acceptance gives %g, want 0.1", n, accept, got)
			}
		}
	}
	if Acceptance(5, 0, 0) != 1 || Acceptance(5, 0, 1) != 0 || LimitingQuality(3, 3, 0.1) != 1 {
		t.Error("wrong at the ends")
	}
}

func TestJSONFields(t *testing.T) {
	data, err := json.Marshal(Judge(record(1e-6, 0.01), c(0.9e-6, 1.1e-6), Guarded))
	if err != nil {
		t.Fatal(err)
	}
	var got struct {
		Schema, Part, Verdict string
		Limits                []map[string]any
	}
	if err := json.Unmarshal(data, &got); err != nil {
		t.Fatal(err)
	}
	if got.Schema != "realpart.accept/1" || got.Part != "p" || got.Verdict != "pass" {
		t.Errorf("got %s", data)
	}
	for _, name := range []string{"figure", "low", "high", "value", "expanded_uncertainty", "verdict", "conformity"} {
		if _, ok := got.Limits[0][name]; !ok {
			t.Errorf("limits[] lacks %q: %s", name, data)
		}
	}
	if _, ok := got.Limits[0]["at_hz"]; ok {
		t.Errorf("at_hz of a parameter: %s", data)
	}
}
