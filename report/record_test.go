package report

import (
	"bytes"
	"encoding/json"
	"math"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"realpart/fit"
	"realpart/fit/lm"
	"realpart/models"
)

func p(v float64) *float64 { return &v }

// heron is a record as data, so that the views are tested apart from the fit.
func heron() *Fit {
	yes, no := true, false
	return &Fit{
		Schema: Schema,
		Sweep: Sweep{File: "lot-heron/c017.csv", Part: "c017", Lot: "lot-heron", Points: 201, UsedPoints: 198,
			FMin: 100, FMax: 1e7, SHA256: "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08"},
		Kind: models.CapacitorPart, Circuit: &Circuit{"cap-leak", "ESR + ESL + (C || Rp)"}, Status: Converged,
		Parameters: []Parameter{
			{Name: "ESR", Unit: "Ω", Value: 0.0213127, StdError: p(1e-4), Low95: p(0.0209), High95: p(0.0217), MeterError: p(9e-5), Determined: true},
			{Name: "ESL", Unit: "H", Value: 2.3e-10, High95: p(3.04e-10)},
			{Name: "C", Unit: "F", Value: 9.87312e-6, StdError: p(1.1e-8), Low95: p(9.8512e-6), High95: p(9.8952e-6), MeterError: p(5.7e-9), Determined: true},
			{Name: "Rp", Unit: "Ω", Value: 47e6, StdError: p(0), Low95: p(47e6), High95: p(47e6), Determined: true, Fixed: true},
		},
		Correlation: [][]float64{{1, 0.1, 0}, {0.1, 1, 0}, {0, 0, 1}},
		Residuals:   &Residuals{RMSRelative: 0.0011, MaxRelative: 0.0042, MaxAtHz: 3.2e6, Lag1: p(0.05)},
		SelfResonance: []Resonance{{FHz: 7.0812e5, StdErrorHz: p(320), MeterErrorHz: p(100), Low95Hz: p(7.0746e5), High95Hz: p(7.0878e5),
			Kind: models.SeriesResonance, InSweep: true, ImpedanceOhm: 0.0213}},
		Figures: []Figure{
			{Name: models.ESR, AtHz: 120, Value: 0.0213, Unit: "Ω", Low95: p(0.002), High95: p(0.21), Measured: p(0.13), BelowResolution: &yes},
			{Name: models.Cs, AtHz: 120, Value: 9.8731e-6, Unit: "F", Low95: p(9.851e-6), High95: p(9.895e-6), Measured: p(9.88e-6)},
			{Name: models.ESR, AtHz: 1e5, Value: 0.02131, Unit: "Ω", Low95: p(0.0209), High95: p(0.0217), Measured: p(0.0214), BelowResolution: &no},
			{Name: models.Lp, AtHz: 1e5, Value: -2.5e-7, Unit: "H"},
			{Name: models.Zabs, AtHz: 2e7, Value: 0.05, Unit: "Ω", Low95: p(0.04), High95: p(0.06)},
		},
		Candidates: []Candidate{
			{Name: "cap-esr", Expression: "ESR + C", AICc: p(-1200.1), RMSRelative: p(0.21), Reason: "AICc 812.3 above the best"},
			{Name: "cap-leak", Expression: "ESR + ESL + (C || Rp)", AICc: p(-2012.4), RMSRelative: p(0.0011), Chosen: true, Reason: "lowest AICc"},
			{Expression: "C || R", Reason: "the fit was not possible"},
		},
		Warnings: []Warning{{"no-header", "the file has no header: read as frequency in Hz, |Z| in Ω, phase in degrees"},
			{"not-determined", "ESL: the sweep ends below the frequency at which it would show; extend it upwards, or choose a circuit without it"}},
	}
}

func otter() *Fit {
	return Failed(Sweep{File: "lot-otter/c003.csv", Part: "c003"}, Error{Line: 14, Column: 3, Text: `expected a number, found "O.5"`})
}

func TestText(t *testing.T) {
	write := func(f *Fit, o TextOptions) string {
		var b bytes.Buffer
		if err := WriteText(&b, f, o); err != nil {
			t.Fatal(err)
		}
		return b.String()
	}
	notConverged := heron()
	notConverged.Status = NotConverged
	notConverged.Circuit = &Circuit{Expression: "ESR + ESL + (C || Rp)"}
	notConverged.Parameters[0].MeterError, notConverged.Parameters[2].MeterError = nil, nil
	for i := range notConverged.Figures {
		notConverged.Figures[i].BelowResolution = nil
	}
	notConverged.SelfResonance = []Resonance{}
	notConverged.Residuals.Structured = true
	summary := func(width int) string {
		var fits []*Fit
		for _, lot := range []string{"lot-heron", "lot-otter"} {
			a, b := heron(), heron()
			a.Sweep.Lot, b.Sweep.Lot = lot, lot
			b.Sweep.Part = "c018 with a long name"
			b.Parameters, b.Circuit = b.Parameters[:1], &Circuit{Expression: "ESR"}
			b.Warnings, b.SelfResonance = []Warning{}, []Resonance{}
			fits = append(fits, a, b, otter())
		}
		var b bytes.Buffer
		if err := WriteSummary(&b, fits, TextOptions{Width: width}); err != nil {
			t.Fatal(err)
		}
		return b.String()
	}
	for name, got := range map[string]string{
		"text-80.txt":            write(heron(), TextOptions{}),
		"text-120-all.txt":       write(heron(), TextOptions{Width: 120, All: true, Quiet: true, Reading: []string{"columns: f = 1, z = 2, phase = 3"}}),
		"text-not-converged.txt": write(notConverged, TextOptions{Quiet: true}),
		"text-failed.txt":        write(otter(), TextOptions{}),
		"summary-80.txt":         summary(80),
		"summary-60.txt":         summary(60),
	} {
		golden(t, name, got)
		limit := 80
		if strings.Contains(name, "120") {
			limit = 120
		}
		if w := textWidth(got); w > limit {
			t.Errorf("%s is %d columns wide, want at most %d", name, w, limit)
		}
		if strings.Contains(got, "\x1b") {
			t.Errorf("%s has colour that was not asked for", name)
		}
	}
	coloured := write(heron(), TextOptions{Colour: true})
	plain := strings.NewReplacer(bold, "", yellow, "", reset, "").Replace(coloured)
	if plain == coloured || plain != write(heron(), TextOptions{}) {
		t.Error("with its attributes removed, a coloured text is not the plain one")
	}
}

// Names come from files and must not reach the terminal as commands.
func TestTextIsHarmless(t *testing.T) {
	f := heron()
	f.Sweep.Part = "c\x1b[2J017\u202e"
	f.Sweep.File = "a\nb"
	f.Warnings[0].Text = "\x07bell"
	var b bytes.Buffer
	if err := WriteText(&b, f, TextOptions{}); err != nil {
		t.Fatal(err)
	}
	if strings.ContainsAny(b.String(), "\x1b\x07\u202e") {
		t.Errorf("a control character came through: %q", b.String())
	}
}

// The rounding is that of GUM 7.2.6 (JCGM 100:2008): "if y = 10,057 62 Ω with
// u_c(y) = 27 mΩ, y should be rounded to 10,058 Ω"; "r(x_i, x_j)" apart, an
// input estimate is rounded to agree with its uncertainty (text from memory).
// 7.2.2: m_S = 100,021 47 g with u_c = 0,35 mg.
func TestRounding(t *testing.T) {
	check := func(value, u float64, unit, wantValue, wantInterval string) {
		t.Helper()
		v, i := valueText(value, p(value-u), p(value+u), unit)
		if v != wantValue || i != wantInterval {
			t.Errorf("%v ± %v %s: got %q, %q, want %q, %q", value, u, unit, v, i, wantValue, wantInterval)
		}
	}
	check(10.05762, 0.027, "Ω", "10.058 Ω", "10.031 … 10.085")
	check(100.02147, 0.00035, "g", "100.02147 g", "100.02112 … 100.02182")
	bound := func(low, high *float64, want string) {
		t.Helper()
		if got := boundText(low, high, "H"); got != want {
			t.Errorf("got %q, want %q", got, want)
		}
	}
	bound(nil, p(3.01e-10), "< 310 pH") // rounded outwards
	bound(nil, p(3e-10), "< 300 pH")
	bound(p(3.09e-10), nil, "> 300 pH")
	bound(p(1.01e-9), p(9.95e-9), "1.0 nH … 10 nH")
	bound(nil, nil, "")
	for v, want := range map[float64]string{100: "100 Hz", 120: "120 Hz", 1e3: "1 kHz", 1.5e6: "1.5 MHz", 123456: "123.5 kHz", 0.001: "1 mHz", 20.5e6: "20.5 MHz"} {
		if got := FormatFrequency(v); got != want {
			t.Errorf("FormatFrequency(%v) = %q, want %q", v, got, want)
		}
	}
}

// contractFields lists the fields of the contract's example with the type of each.
var contractFields = map[string]string{
	"schema": "string", "sweep": "object", "kind": "string", "circuit": "object", "status": "string", "parameters": "array", "correlation": "array",
	"residuals": "object", "self_resonance": "array", "figures": "array", "candidates": "array", "warnings": "array",
	"sweep.file": "string", "sweep.part": "string", "sweep.lot": "string", "sweep.points": "number", "sweep.used_points": "number",
	"sweep.f_min_hz": "number", "sweep.f_max_hz": "number", "sweep.sha256": "string",
	"circuit.name": "string", "circuit.expression": "string",
	"parameters.name": "string", "parameters.unit": "string", "parameters.value": "number", "parameters.std_error": "number",
	"parameters.low95": "number", "parameters.high95": "number", "parameters.meter_error": "number", "parameters.determined": "bool", "parameters.fixed": "bool",
	"residuals.rms_relative": "number", "residuals.max_relative": "number", "residuals.max_at_hz": "number", "residuals.lag1": "number", "residuals.structured": "bool",
	"self_resonance.f_hz": "number", "self_resonance.std_error_hz": "number", "self_resonance.kind": "string", "self_resonance.in_sweep": "bool", "self_resonance.impedance_ohm": "number",
	"figures.name": "string", "figures.at_hz": "number", "figures.value": "number", "figures.unit": "string", "figures.low95": "number", "figures.high95": "number",
	"figures.measured": "number", "figures.below_resolution": "bool",
	"candidates.name": "string", "candidates.expression": "string", "candidates.aicc": "number", "candidates.rms_relative": "number", "candidates.chosen": "bool", "candidates.reason": "string",
	"warnings.code": "string", "warnings.text": "string",
}

// extraFields lists the fields that a record has beyond the contract's example.
var extraFields = map[string]string{
	"self_resonance.meter_error_hz": "number", "self_resonance.low95_hz": "number", "self_resonance.high95_hz": "number",
}

func jsonType(v any) string {
	switch v.(type) {
	case string:
		return "string"
	case float64:
		return "number"
	case bool:
		return "bool"
	case []any:
		return "array"
	case map[string]any:
		return "object"
	}
	return "null"
}

func fields(prefix string, v any, found map[string]string) {
	switch v := v.(type) {
	case map[string]any:
		for k, child := range v {
			name := strings.TrimPrefix(prefix+"."+k, ".")
			found[name] = jsonType(child)
			fields(name, child, found)
		}
	case []any:
		for _, child := range v {
			if _, list := child.([]any); !list {
				fields(prefix, child, found)
			}
		}
	}
}

func TestJSON(t *testing.T) {
	var b bytes.Buffer
	for _, f := range []*Fit{heron(), otter()} {
		if err := WriteJSON(&b, f); err != nil {
			t.Fatal(err)
		}
	}
	lines := strings.Split(strings.TrimSuffix(b.String(), "\n"), "\n")
	if len(lines) != 2 {
		t.Fatalf("%d lines for two records", len(lines))
	}
	golden(t, "fit.jsonl", b.String())
	var object map[string]any
	if err := json.Unmarshal([]byte(lines[0]), &object); err != nil {
		t.Fatal(err)
	}
	found, want := map[string]string{}, map[string]string{}
	fields("", object, found)
	for _, m := range []map[string]string{contractFields, extraFields} {
		for k, v := range m {
			want[k] = v
		}
	}
	if diff := cmp.Diff(want, found); diff != "" {
		t.Errorf("fields (-contract +got):\n%s", diff)
	}
	object = nil
	if err := json.Unmarshal([]byte(lines[1]), &object); err != nil {
		t.Fatal(err)
	}
	for k := range object {
		switch k {
		case "schema", "sweep", "status", "error":
		default:
			t.Errorf("a failed sweep has the field %q", k)
		}
	}
	back, err := ReadJSON(&b, "x.jsonl")
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff([]*Fit{heron(), otter()}, back); diff != "" {
		t.Errorf("round trip (-want +got):\n%s", diff)
	}
}

func TestReadJSONErrors(t *testing.T) {
	check := func(text, want string) {
		t.Helper()
		_, err := ReadJSON(strings.NewReader(text), "x.jsonl")
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: error %v, want one with %q", text, err, want)
		}
	}
	check("\n{", "x.jsonl:2: ")
	check(`{"schema":"realpart.accept/1"}`, `found "realpart.accept/1"`)
	check(`{"schema":"realpart.fit/1"}`, `"status"`)
	check(`{"schema":"realpart.fit/1","status":"converged"}`, "incomplete")
	check(`{"schema":"realpart.fit/1","status":"failed"}`, `"error"`)
	check(`{"schema":"realpart.fit/1","status":1}`, "x.jsonl:1: ")
}

// New passes an analysis on: no number is lost, and none that does not exist
// is invented.
func TestNew(t *testing.T) {
	s := simulated(t, "cap-esr-esl", []float64{0.0213, 4.1e-9, 9.87e-6}, logGrid(100, 1e7, 61), 0.002, nil)
	s.analysis.Warnings = []fit.Warning{{Code: "b", Text: "of the analysis"}}
	s.sweep.Warnings = []fit.Warning{{Code: "a", Text: "of reading"}}
	s.analysis.Candidates = []fit.Candidate{{Name: "cap-ideal", Reason: "not possible", AICc: math.NaN()}}
	r := s.analysis.Result
	r.Parameters[1].Determined, r.Parameters[1].Low95, r.Parameters[1].StdError = false, math.NaN(), math.NaN()
	s.analysis.KindReason = "the phase"
	s.analysis.Advice = []fit.Advice{{Parameter: "C", From: 10, To: 90, Points: 9, Now: math.Inf(1), Then: 0.01}}
	f := New(s.sweep, s.analysis, Options{})
	if len(f.Advice) != 1 || f.Advice[0].HalfWidthNow != nil || f.Advice[0].HalfWidthThen != 0.01 || f.Advice[0].Text == "" || f.KindReason != "the phase" {
		t.Errorf("advice %+v, reason %q", f.Advice, f.KindReason)
	}
	if diff := cmp.Diff(r.Values(), f.Values()); diff != "" {
		t.Error(diff)
	}
	if q := f.Parameters[1]; q.Low95 != nil || q.StdError != nil || q.High95 == nil || q.Determined {
		t.Errorf("a bound came out as %+v", q)
	}
	if f.AccuracyStated() || f.Parameters[0].MeterError != nil || f.Figures[0].BelowResolution != nil {
		t.Error("an accuracy appears that was not stated")
	}
	if len(f.SelfResonance) != 1 || f.SelfResonance[0].Low95Hz == nil || !(*f.SelfResonance[0].Low95Hz < f.SelfResonance[0].FHz) {
		t.Errorf("self-resonances %+v", f.SelfResonance)
	}
	var at []float64
	for _, v := range f.Figures {
		if v.Name == models.ESR {
			at = append(at, v.AtHz)
		}
	}
	if diff := cmp.Diff([]float64{100, 120, 1e3, 1e4, 1e5, 1e6, 1e7}, at); diff != "" {
		t.Errorf("frequencies of the figures: %s", diff)
	}
	if len(f.Warnings) != 2 || f.Warnings[0].Code != "a" || f.Warnings[1].Code != "b" {
		t.Errorf("warnings %v", f.Warnings)
	}
	if f.Candidates[0].AICc != nil {
		t.Error("a candidate without a fit has an AICc")
	}
	if f.Status != Converged {
		t.Errorf("status %s, solver %s", f.Status, r.Status)
	}
	var b bytes.Buffer
	if err := WriteJSON(&b, f); err != nil {
		t.Fatal(err)
	}
	if back, err := ReadJSON(&b, ""); err != nil || !cmp.Equal(back[0].Parameters, f.Parameters) {
		t.Errorf("round trip: %v", err)
	}
	r.Status = lm.IterationLimit
	f = New(s.sweep, s.analysis, Options{})
	if f.Status != NotConverged {
		t.Errorf("status %s for %s", f.Status, r.Status)
	}
	// That a fit did not converge is said once, whoever says it.
	said := append(slices.Clone(f.Warnings), Warning{string(NotConverged), "by the analysis"})
	if n := len(f.AllWarnings()); n != 3 {
		t.Errorf("%d warnings, want 3", n)
	}
	if f.Warnings = said; len(f.AllWarnings()) != 3 {
		t.Errorf("%d warnings, want 3", len(f.AllWarnings()))
	}

	accuracy := func(f, z float64) (float64, float64, bool) { return 0.001, 0.001, true }
	s = simulated(t, "cap-esr-esl", []float64{0.0213, 4.1e-9, 9.87e-6}, logGrid(100, 1e7, 61), 0.002, &fit.Settings{Accuracy: accuracy})
	f = New(s.sweep, s.analysis, Options{AccuracyStated: true, At: []float64{120, 1e5, 2e7}})
	below := map[float64]bool{}
	for _, v := range f.Figures {
		if v.Name == models.ESR && v.BelowResolution != nil {
			below[v.AtHz] = *v.BelowResolution
		}
	}
	for _, v := range New(s.sweep, s.analysis, Options{}).Figures {
		if v.BelowResolution != nil {
			t.Errorf("%s at %v Hz is judged by an accuracy that was not stated", v.Name, v.AtHz)
		}
	}
	// 1/(ωC)·0.001 is 134 mΩ at 120 Hz, more than ESR, and 0.16 mΩ at 100 kHz;
	// 20 MHz is outside the sweep.
	if diff := cmp.Diff(map[float64]bool{120: true, 1e5: false}, below); diff != "" {
		t.Errorf("below resolution: %s", diff)
	}
}

// The half-width of the interval of a parameter, as package fit makes it, is
// that of the same variances here.
func TestHalfWidth(t *testing.T) {
	s := simulated(t, "cap-esr", []float64{0.0213, 9.87e-6}, logGrid(100, 1e5, 4), 0.002, nil)
	r := s.analysis.Result
	for _, q := range r.Parameters {
		want := math.Log(q.High95 / q.Value)
		if got := halfWidth95(q.StdError/q.Value, q.MeterError, r.DegreesOfFreedom); !(math.Abs(got-want) <= 1e-9*want) {
			t.Errorf("%s: half-width %v, want %v", q.Name, got, want)
		}
	}
}

func TestCSV(t *testing.T) {
	bead := heron()
	bead.Sweep.Part, bead.Sweep.Lot, bead.Sweep.File = "=1+2", "-lot", "\tx"
	bead.Circuit = &Circuit{Expression: "R || L"}
	bead.Parameters = []Parameter{{Name: "R", Unit: "Ω", Value: 600, Determined: true}}
	bead.Figures = []Figure{{Name: models.X, AtHz: 100, Value: -5, Unit: "Ω"}, {Name: models.Cs, AtHz: 100, Value: -5e-9, Unit: "F"}}
	var b bytes.Buffer
	if err := WriteCSV(&b, []*Fit{heron(), otter(), bead}); err != nil {
		t.Fatal(err)
	}
	golden(t, "fit.csv", b.String())
	got := b.String()
	for _, want := range []string{"'=1+2", "'-lot", "'\tx", ",-5e-09,"} {
		if !strings.Contains(got, want) {
			t.Errorf("no %q in\n%s", want, got)
		}
	}
	for text, want := range map[string]string{"": "", "c017": "c017", "µ": "µ", "a=1": "a=1", "+1": "'+1", "@a": "'@a", "＝1": "'＝1", "\n=1": "'\n=1"} {
		if got := harmless(text); got != want {
			t.Errorf("%q became %q, want %q", text, got, want)
		}
	}
}
