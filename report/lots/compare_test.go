package lots

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"realpart/models"
	"realpart/report"
)

// part makes the record of an invented part with the circuit ESR + ESL + C.
func part(name string, c, esr, esl float64) *report.Fit {
	p := func(name, unit string, v float64) report.Parameter {
		low, high := v*0.999, v*1.001
		return report.Parameter{Name: name, Unit: unit, Value: v, Low95: &low, High95: &high, Determined: true}
	}
	srf := 1 / (2 * math.Pi * math.Sqrt(c*esl))
	low, high := srf*0.999, srf*1.001
	elow, ehigh := esr*0.999, esr*1.001
	return &report.Fit{
		Schema: report.Schema, Kind: models.CapacitorPart, Status: report.Converged,
		Sweep:         report.Sweep{File: name + ".csv", Part: name, Points: 61, UsedPoints: 61, FMin: 100, FMax: 1e7, SHA256: name},
		Circuit:       &report.Circuit{Name: "cap-esr-esl", Expression: "ESR + ESL + C"},
		Parameters:    []report.Parameter{p("ESR", "Ω", esr), p("ESL", "H", esl), p("C", "F", c)},
		Residuals:     &report.Residuals{RMSRelative: 0.001},
		SelfResonance: []report.Resonance{{FHz: srf, Low95Hz: &low, High95Hz: &high, Kind: "series", InSweep: true}},
		Figures: []report.Figure{
			{Name: models.ESR, AtHz: 1e5, Value: esr, Unit: "Ω", Low95: &elow, High95: &ehigh},
		},
	}
}

// invented makes a lot with a normal spread of 2 %, 3 % and 1 %.
func invented(name string, n int, esrFactor float64, r *rand.Rand) *Lot {
	var fits []*report.Fit
	for i := range n {
		fits = append(fits, part(fmt.Sprintf("%s-%02d", name, i+1), 10e-6*(1+0.02*r.NormFloat64()),
			0.02*esrFactor*(1+0.03*r.NormFloat64()), 5e-9*(1+0.01*r.NormFloat64())))
	}
	return New(name, fits)
}

func row(t *testing.T, c *Comparison, figure string, at float64) Row {
	t.Helper()
	for _, r := range c.Comparisons {
		if r.Figure == figure && r.AtHz == at {
			return r
		}
	}
	t.Fatalf("no row for %s at %g", figure, at)
	return Row{}
}

func hasCaution(c *Comparison, code string) bool {
	return slices.ContainsFunc(c.Cautions, func(x Caution) bool { return x.Code == code })
}

func compare(t *testing.T, o Options, lots ...*Lot) *Comparison {
	t.Helper()
	c, err := Compare(lots, o)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// False alarms: lots from one population are called different in any figure in
// at most 5 % of all comparisons, with figures that depend on each other and
// with a skewed one.
func TestFalseAlarms(t *testing.T) {
	const runs, n, figures = 4000, 12, 8
	r := rand.New(rand.NewPCG(5, 0))
	alarms := 0
	for range runs {
		var rows []Row
		var samples [2][figures][]float64
		for lot := range samples {
			for range n {
				common := r.NormFloat64()
				for f := range figures {
					v := 10 + 0.2*r.NormFloat64()
					switch {
					case f < 3:
						v += 0.3 * common
					case f == 3:
						v = math.Exp(0.3 * r.NormFloat64())
					}
					samples[lot][f] = append(samples[lot][f], v)
				}
			}
		}
		for f := range figures {
			one, other := newSample(samples[0][f]), newSample(samples[1][f])
			rows = append(rows, newRow("a", "b", one, other, nil))
		}
		judge(rows)
		if slices.ContainsFunc(rows, func(r Row) bool { return r.Verdict == Different }) {
			alarms++
		}
	}
	share := float64(alarms) / runs
	t.Logf("false alarms in %.4f of the comparisons", share)
	if !(share <= 0.05+3*math.Sqrt(0.05*0.95/runs)) || !(share > 0.02) {
		t.Errorf("false alarms in %.4f of the comparisons, want at most 0.05, and not much less", share)
	}
}

func newSample(values []float64) Sample {
	return Sample{Values: values, Summary: Summary{N: len(values), Mean: mean(slices.Sorted(slices.Values(values)))}}
}

// Power: a difference of the size that is called detectable is called
// different in 90 % of the comparisons or a little more, since Holm's later
// steps are easier.
func TestPower(t *testing.T) {
	const runs, n, figures = 3000, 12, 6
	r := rand.New(rand.NewPCG(6, 0))
	// The detectable difference for the true spread, with both lots' as known
	// here: SE = σ√(2/n), ν = 2n − 2.
	sigma := 0.2
	d := Difference{Value: 0, StdError: sigma * math.Sqrt(2.0/n), DF: 2*n - 2}
	shift := d.Detectable(significance/figures, power)
	seen := 0
	for range runs {
		var rows []Row
		for f := range figures {
			var a, b []float64
			for range n {
				a, b = append(a, 10+sigma*r.NormFloat64()), append(b, 10+sigma*r.NormFloat64())
			}
			if f == 0 {
				for i := range b {
					b[i] += shift
				}
			}
			rows = append(rows, newRow("a", "b", newSample(a), newSample(b), nil))
		}
		judge(rows)
		if rows[0].Verdict == Different {
			seen++
		}
	}
	share := float64(seen) / runs
	t.Logf("seen in %.4f of the comparisons", share)
	if !(math.Abs(share-power) <= 3*math.Sqrt(power*(1-power)/runs)+0.005) {
		t.Errorf("a detectable difference is seen in %.4f of the comparisons, want about %g", share, power)
	}
}

// Equivalence is claimed for lots that differ by the margin in at most 5 % of
// the comparisons.
func TestEquivalenceLevel(t *testing.T) {
	const runs, n = 6000, 15
	r := rand.New(rand.NewPCG(7, 0))
	claimed := 0
	for range runs {
		var a, b []float64
		for range n {
			a, b = append(a, 10+0.2*r.NormFloat64()), append(b, 10.5+0.2*r.NormFloat64())
		}
		if Welch(b, a).Equivalence(0.5) <= significance {
			claimed++
		}
	}
	if share := float64(claimed) / runs; !(math.Abs(share-0.05) <= 0.012) {
		t.Errorf("equivalence claimed in %.4f of lots at the margin, want about 0.05", share)
	}
}

func TestVerdicts(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 0))
	heron, otter := invented("heron", 24, 1, r), invented("otter", 24, 1.12, r)
	c := compare(t, Options{Margins: map[string]float64{"C": 0.05, "ESR": 0.05}}, heron, otter)
	if got := row(t, c, "ESR", 0); got.Verdict != Different || *got.Equivalent || !(*got.Difference > 0) {
		t.Errorf("ESR: %+v, want different and higher", got)
	}
	if got := row(t, c, "C", 0); got.Verdict != Same || !*got.Equivalent {
		t.Errorf("C: %s, want same", got.Verdict)
	}
	if got := row(t, c, "ESL", 0); got.Verdict != Undecided || got.Equivalent != nil || got.Detectable == nil {
		t.Errorf("ESL: %+v, want undecided without a margin", got)
	}
	if row(t, c, "ESR", 1e5).Verdict != Different || row(t, c, "SRF", 0).Verdict == Different {
		t.Error("ESR at 100 kHz must differ, SRF must not")
	}
	if c.AllSame() {
		t.Error("not all figures with a margin are the same")
	}
	words := strings.Join(c.Answers()[0].Sentences, "\n")
	for _, want := range []string{"ESR at 100 kHz: otter is 1", "% higher", "beyond the 5 % margin", "C: otter is", " at 90 %), inside the 5 % margin", "ESL, SRF: no difference shown", "At n = 24 a difference of", "90 % power"} {
		if !strings.Contains(words, want) {
			t.Errorf("the answer lacks %q:\n%s", want, words)
		}
	}
	// Several lots: the first is the reference of all.
	c = compare(t, Options{}, heron, otter, invented("teal", 24, 1, r))
	if len(c.Comparisons) != 10 || c.Comparisons[9].Lot != "teal" || c.Comparisons[9].Reference != "heron" {
		t.Errorf("three lots: %d rows", len(c.Comparisons))
	}
	if !(*c.Comparisons[0].PHolm >= *c.Comparisons[0].P) {
		t.Error("Holm lowers p")
	}
}

// A real difference inside the margin is the same (contract).
func TestRealButInsideMargin(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 0))
	c := compare(t, Options{Margins: map[string]float64{"ESR": 0.3}}, invented("a", 30, 1, r), invented("b", 30, 1.12, r))
	got := row(t, c, "ESR", 0)
	if got.Verdict != Same || !(*got.PHolm < 0.05) || !c.AllSame() {
		t.Errorf("got %s with p = %g, want same", got.Verdict, *got.PHolm)
	}
	if words := strings.Join(c.Answers()[0].Sentences, " "); !strings.Contains(words, "a real difference but inside the 30 % margin") {
		t.Errorf("got %q", words)
	}
}

func TestOutlierFlaggedAndExcluded(t *testing.T) {
	r := rand.New(rand.NewPCG(10, 0))
	heron, otter := invented("heron", 24, 1, r), invented("otter", 24, 1, r)
	otter.Fits[16].Parameters[2].Value = 6e-6
	c := compare(t, Options{}, heron, otter)
	s := c.Samples[1][2]
	if s.Name != "C" || len(s.Outliers) != 1 || s.Outliers[0].Part != "otter-17" || s.N != 24 || s.Excluded {
		t.Errorf("got %+v, want otter-17 flagged and kept", s.Outliers)
	}
	if !hasCaution(c, "outliers") {
		t.Error("the outlier is not said")
	}
	c = compare(t, Options{ExcludeOutliers: true}, heron, otter)
	if s = c.Samples[1][2]; s.N != 23 || !s.Excluded || len(s.Outliers) != 1 || slices.Contains(s.Parts, "otter-17") {
		t.Errorf("excluded: n = %d", s.N)
	}
	if c.Lots[1].N != 24 {
		t.Error("the lot has lost a part")
	}
}

// It refuses to mislead: everything that makes lots incomparable is said, and
// nothing is said of lots that are comparable.
func TestCautions(t *testing.T) {
	fresh := func(seed uint64) (*Lot, *Lot) {
		r := rand.New(rand.NewPCG(seed, 0))
		return invented("a", 12, 1, r), invented("b", 12, 1, r)
	}
	all := func(l *Lot, change func(f *report.Fit)) {
		for _, f := range l.Fits {
			change(f)
		}
	}
	a, b := fresh(1)
	for _, code := range []string{"different-circuits", "different-frequencies", "different-bias", "different-temperature", "few-parts", "different-kinds", "failed-sweeps", "not-determined", "shared-sweeps", "copied-sweeps", "no-spread", "repeated-sweeps", "outside-sweep"} {
		if hasCaution(compare(t, Options{}, a, b), code) {
			t.Errorf("%s said of lots that are comparable", code)
		}
	}
	a, b = fresh(1)
	all(b, func(f *report.Fit) { f.Circuit = &report.Circuit{Expression: "ESL + C + ESR"} })
	c := compare(t, Options{}, a, b)
	if !hasCaution(c, "different-circuits") || row(t, c, "C", 0).P != nil || row(t, c, "ESR", 1e5).P == nil {
		t.Error("different circuits: parameters must not be compared, figures must, and it must be said")
	}
	a, b = fresh(1)
	all(b, func(f *report.Fit) { f.Sweep.FMax = 1e6 })
	if !hasCaution(compare(t, Options{}, a, b), "different-frequencies") {
		t.Error("different frequency ranges are not said")
	}
	a, b = fresh(1)
	all(b, func(f *report.Fit) { f.Sweep.Metadata = map[string]string{"bias": "5 V", "temperature": "23 °C"} })
	c = compare(t, Options{}, a, b)
	if !hasCaution(c, "different-bias") || !hasCaution(c, "different-temperature") {
		t.Error("different bias or temperature is not said")
	}
	a, b = fresh(1)
	b.Fits = b.Fits[:2]
	c = compare(t, Options{Margins: map[string]float64{"C": 0.5}}, a, b)
	if got := row(t, c, "C", 0); !hasCaution(c, "few-parts") || got.P != nil || got.Verdict != Undecided || got.Difference == nil || c.AllSame() {
		t.Errorf("two parts: %+v", got)
	}
	if words := strings.Join(c.Answers()[0].Sentences, " "); !strings.Contains(words, "Not tested") {
		t.Errorf("two parts: %q", words)
	}
	a, b = fresh(1)
	all(b, func(f *report.Fit) { f.Sweep.FMax = 5e4 })
	if c = compare(t, Options{}, a, b); !hasCaution(c, "outside-sweep") {
		t.Error("figures outside the sweeps are not said")
	}
	a, b = fresh(1)
	b.Fits[4] = a.Fits[4]
	c = compare(t, Options{}, a, b)
	if !hasCaution(c, "shared-sweeps") {
		t.Error("a sweep that is in both lots is not said")
	}
	a, b = fresh(1)
	b.Fits[5].Sweep.SHA256 = b.Fits[4].Sweep.SHA256
	if c = compare(t, Options{}, a, b); !hasCaution(c, "copied-sweeps") {
		t.Error("a copied sweep is not said")
	}
	a, b = fresh(1)
	all(b, func(f *report.Fit) { f.Parameters[2].Value = 1e-5 })
	if c = compare(t, Options{}, a, b); !hasCaution(c, "no-spread") {
		t.Error("a lot without spread is not said")
	}
	a, b = fresh(1)
	b.Fits[3].Parameters[1].Determined = false
	b.Failed = 1
	c = compare(t, Options{}, a, b)
	if s := c.Samples[1][1]; s.NotDetermined != 1 || s.N != 11 || !hasCaution(c, "not-determined") || !hasCaution(c, "failed-sweeps") {
		t.Errorf("not determined: %+v", s)
	}
}

func TestCompareErrors(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 0))
	a, b := invented("a", 5, 1, r), invented("b", 5, 1, r)
	for _, c := range []struct {
		want string
		lots []*Lot
		o    Options
	}{
		{"two lots", []*Lot{a}, Options{}},
		{"none", []*Lot{a, New("empty", nil)}, Options{}},
		{"twice", []*Lot{a, a}, Options{}},
		{"found 47 kHz", []*Lot{a, b}, Options{At: []float64{1e5, 47e3}}},
		{`found "Cx"`, []*Lot{a, b}, Options{Margins: map[string]float64{"Cx": 0.1}}},
	} {
		if _, err := Compare(c.lots, c.o); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("got %v, want an error with %q", err, c.want)
		}
	}
}

// The order of the records, and a record that is there twice, change no byte.
func TestSameBytesInAnyOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 0))
	a, b := invented("a", 20, 1, r), invented("b", 20, 1.05, r)
	render := func(a, b *Lot) string {
		c := compare(t, Options{Margins: map[string]float64{"C": 0.05}}, a, b)
		var out bytes.Buffer
		if err := c.WriteText(&out, TextOptions{Width: 100}); err != nil {
			t.Fatal(err)
		}
		if err := json.NewEncoder(&out).Encode(c); err != nil {
			t.Fatal(err)
		}
		return out.String()
	}
	want := render(a, b)
	fits := slices.Clone(b.Fits)
	r.Shuffle(len(fits), func(i, j int) { fits[i], fits[j] = fits[j], fits[i] })
	if got := render(a, New("b", fits)); got != want {
		t.Error("the order of the records matters")
	}
	twice := New("b", append(fits, fits[3]))
	if twice.Repeated != 1 || len(twice.Fits) != 20 {
		t.Errorf("a record that is there twice: %d parts, %d repeated", len(twice.Fits), twice.Repeated)
	}
}

// Fields of the contract in JSON.
func TestJSONFields(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 0))
	c := compare(t, Options{Margins: map[string]float64{"C": 0.05}}, invented("a", 10, 1, r), invented("b", 10, 1, r))
	data, err := json.Marshal(c)
	if err != nil {
		t.Fatal(err)
	}
	var got struct {
		Schema      string
		Circuit     map[string]any
		Lots        []struct{ Figures []map[string]any }
		Comparisons []map[string]any
	}
	if err := json.Unmarshal(data, &got); err != nil {
		t.Fatal(err)
	}
	if got.Schema != "realpart.compare/1" || got.Circuit["expression"] != "ESR + ESL + C" {
		t.Errorf("schema %s, circuit %v", got.Schema, got.Circuit)
	}
	for _, name := range strings.Fields("name unit n mean sd median min max tolerance_low tolerance_high") {
		if _, ok := got.Lots[0].Figures[0][name]; !ok {
			t.Errorf("lots[].figures[] lacks %q", name)
		}
	}
	for _, r := range got.Comparisons {
		if r["figure"] != "C" {
			continue
		}
		for _, name := range strings.Fields("lot reference difference low95 high95 welch_t df p p_holm mann_whitney_p brown_forsythe_p equivalent detectable verdict") {
			if _, ok := r[name]; !ok {
				t.Errorf("comparisons[] lacks %q", name)
			}
		}
		if _, ok := r["at_hz"]; ok {
			t.Error("a parameter's row has at_hz")
		}
	}
}

// The figures of data sheets: at frequencies that nobody chose, those usual for
// the kind of part, and none above a capacitor's resonance; at chosen ones all.
func TestCommonFigures(t *testing.T) {
	names := func(figures []Figure) string {
		var out []string
		for _, f := range figures {
			out = append(out, f.String())
		}
		return strings.Join(out, ", ")
	}
	with := func(fMin, fMax float64, at []float64, cs float64) []*report.Fit {
		f := part("x", 10e-6, 0.02, 5e-9)
		f.Sweep.FMin, f.Sweep.FMax, f.Figures = fMin, fMax, nil
		for _, freq := range at {
			for _, name := range models.Figures() {
				v := 0.02
				if name == models.Cs && freq >= 1e6 {
					v = cs
				}
				f.Figures = append(f.Figures, report.Figure{Name: name, AtHz: freq, Value: v, Unit: name.Unit(), Low95: &v, High95: &v})
			}
		}
		return []*report.Fit{f}
	}
	const parameters = "ESR, ESL, C, SRF"
	fits := with(100, 1e7, report.DefaultAt(100, 1e7), -1)
	for _, c := range []struct {
		fits []*report.Fit
		at   []float64
		more []string
		want string
	}{
		{fits, nil, nil, parameters + ", Cs at 120 Hz, D at 120 Hz, ESR at 100 kHz, Z at 100 kHz"},
		{fits, nil, []string{"X"}, parameters + ", Cs at 120 Hz, D at 120 Hz, X at 120 Hz, ESR at 100 kHz, Z at 100 kHz, X at 100 kHz"},
		{fits, []float64{1e4}, nil, parameters + ", Cs at 10 kHz, ESR at 10 kHz, D at 10 kHz, Z at 10 kHz"},
		{with(1e4, 1e7, report.DefaultAt(1e4, 1e7), -1), nil, nil, parameters + ", ESR at 100 kHz, Z at 100 kHz"},
		{with(1e4, 1e7, report.DefaultAt(1e4, 1e7), 1), nil, nil, parameters + ", Cs at 1 MHz, D at 1 MHz, ESR at 100 kHz, Z at 100 kHz"},
		{with(100, 1e7, []float64{47e3}, -1), nil, nil, parameters + ", Cs at 47 kHz, ESR at 47 kHz, D at 47 kHz, Z at 47 kHz"},
	} {
		if got := names(CommonFigures(c.fits, "ESR + ESL + C", c.at, c.more)); got != c.want {
			t.Errorf("got %s, want %s", got, c.want)
		}
	}
}

// The first self-resonance is that inside the sweep; without one the sweep
// bounds it.
func TestReadSRF(t *testing.T) {
	f := part("x", 10e-6, 0.02, 5e-9)
	if r, _ := Read(f, Figure{Name: SRF}); !r.Determined || math.Abs(r.Value-711762.5)/711762.5 > 1e-6 { // 1/(2π√(LC)), by hand
		t.Errorf("got %+v", r)
	}
	f.SelfResonance[0].InSweep = false
	f.SelfResonance[0].FHz = 2e7
	if r, _ := Read(f, Figure{Name: SRF}); r.Determined || r.Low != 1e7 || !math.IsNaN(r.High) {
		t.Errorf("above the sweep: %+v", r)
	}
	f.SelfResonance[0].FHz = 50
	if r, _ := Read(f, Figure{Name: SRF}); r.Determined || r.High != 100 || !math.IsNaN(r.Low) {
		t.Errorf("below the sweep: %+v", r)
	}
}
