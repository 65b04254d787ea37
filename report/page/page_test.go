package page

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"regexp"
	"strings"
	"testing"

	"realpart/fit"
	"realpart/models"
	"realpart/report"
)

// simulated fits a circuit to a sweep that it gives, with noise, and makes the
// part of a page from it.
func simulated(t testing.TB, part, lot, circuit, truth string, values []float64, from, to float64, points int, noise float64, accuracy fit.MeterAccuracy, seed uint64) Part {
	t.Helper()
	m, ok := models.Lookup(circuit)
	if !ok {
		t.Fatalf("no circuit %q", circuit)
	}
	c, err := models.Parse(truth)
	if err != nil {
		t.Fatal(err)
	}
	freq := make([]float64, points)
	for i := range freq {
		freq[i] = from * math.Pow(to/from, float64(i)/float64(points-1))
	}
	z := make([]complex128, points)
	c.NewEvaluator(freq).Impedance(z, values)
	random := rand.New(rand.NewPCG(seed, 3))
	for i := range z {
		z[i] *= complex(1+noise*random.NormFloat64(), noise*random.NormFloat64())
	}
	r, err := fit.Fit(freq, z, m.Circuit, &fit.Settings{Accuracy: accuracy})
	if err != nil {
		t.Fatal(err)
	}
	a := &fit.Analysis{Kind: m.Kind, Name: m.Name, Result: r, Candidates: []fit.Candidate{
		{Name: "cap-esr", Circuit: m.Circuit, Result: r, AICc: -1200.1, Reason: "AICc 812.3 above the best"},
		{Name: m.Name, Circuit: m.Circuit, Result: r, AICc: -2012.4, Chosen: true, Reason: "lowest AICc of those whose parameters are all determined"},
	}}
	if r.Structured {
		a.Warnings = append(a.Warnings, fit.Warning{Code: "structured-residual", Text: "the residuals run in one direction over wide ranges of frequency: this circuit does not describe the part to the accuracy of the points"})
	}
	s := report.Sweep{File: lot + "/" + part + ".csv", Part: part, Lot: lot, Points: points, UsedPoints: points, FMin: from, FMax: to,
		SHA256: strings.Repeat("9f86d081", 8)}
	return Part{
		Fit:      report.New(s, a, report.Options{AccuracyStated: accuracy != nil}),
		Traces:   report.NewTraces(r, accuracy),
		Settings: []Entry{{"columns", "frequency (Hz), |Z| (Ω), phase (°)"}},
	}
}

func meter(f, z float64) (float64, float64, bool) { return 0.001 + f/5e9, 0.001 + f/5e9, true }

var made = []Entry{{"program", "realpart test"}, {"command", "realpart fit --accuracy 0.1% lot-heron"}, {"weight", "relative"}}

// single is a page with one capacitor.
func single(t testing.TB) Page {
	return Page{Made: made, Parts: []Part{
		simulated(t, "c017", "lot-heron", "cap-leak", "ESR + ESL + (C || Rp)", []float64{0.0213, 4.1e-9, 9.87e-6, 2e5}, 100, 1e7, 201, 0.002, meter, 1),
	}}
}

// lot is a page with n parts of two lots, of several kinds, among them a
// failed one and one whose name is an attack.
func lot(t testing.TB, n int) Page {
	p := Page{Made: made}
	random := rand.New(rand.NewPCG(5, 5))
	for i := range n - 3 {
		name, of := fmt.Sprintf("c%03d", i+1), "lot-heron"
		if i%2 == 1 {
			of = "lot-otter"
		}
		scale := 1 + 0.05*random.NormFloat64()
		p.Parts = append(p.Parts, simulated(t, name, of, "cap-esr-esl", "ESR + ESL + C", []float64{0.0213 * scale, 4.1e-9 / scale, 9.87e-6 * scale}, 100, 1e7, 201, 0.002, meter, uint64(i)))
	}
	p.Parts = append(p.Parts,
		simulated(t, hostile, "lot-heron", "ind-cp", "(DCR + L + (R1 || L1)) || Cp", []float64{0.12, 200e-6, 50, 20e-6, 3.5e-12}, 100, 2e7, 1601, 0.001, nil, 7),
		simulated(t, "no accuracy stated", "lot-otter", "bead", "DCR + (L || R || C)", []float64{0.2, 1.2e-6, 600, 0.6e-12}, 1e6, 1e9, 101, 0.01, nil, 8),
		Part{Fit: report.Failed(report.Sweep{File: "lot-otter/c999.csv", Part: "c999", Lot: "lot-otter"}, report.Error{Line: 14, Column: 3, Text: `expected a number, found "O.5"`})},
	)
	return p
}

const hostile = `<script>document.title="broken"</script>"><img src=x onerror=alert(1)>`

func render(t testing.TB, p Page) string {
	t.Helper()
	var b bytes.Buffer
	if err := Write(&b, p, 2); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// Nothing in the page points outside it, and the order of work leaves no
// trace.
func TestSelfContained(t *testing.T) {
	p := lot(t, 6)
	html := render(t, p)
	for _, m := range regexp.MustCompile(`(?i)(?:src|href|srcset|action|xlink:href)\s*=\s*["']?([^"'\s>]*)`).FindAllStringSubmatch(strings.ReplaceAll(html, "&lt;script&gt;", ""), -1) {
		if target := m[1]; !strings.HasPrefix(target, "#") && target != "data:," && target != "x" {
			t.Errorf("the page points to %q", target)
		}
	}
	for _, word := range []string{"http:", "https:", "//cdn", "@import", "url("} {
		for _, line := range strings.Split(html, "\n") {
			if strings.Contains(strings.ReplaceAll(line, "http://www.w3.org/2000/svg", ""), word) {
				t.Errorf("the page has %q: %.200s", word, line)
			}
		}
	}
	var b bytes.Buffer
	if err := Write(&b, p, 1); err != nil {
		t.Fatal(err)
	}
	if b.String() != html {
		t.Error("the page depends on the number of workers")
	}
}

// A lot of 200 parts with 1601 points each stays below 10 MB.
func TestSize(t *testing.T) {
	p := Page{Made: made}
	one := simulated(t, "c001", "lot-heron", "cap-esr-esl", "ESR + ESL + C", []float64{0.0213, 4.1e-9, 9.87e-6}, 100, 1e7, 1601, 0.002, meter, 1)
	for range 200 {
		p.Parts = append(p.Parts, one)
	}
	html := render(t, p)
	t.Logf("%.1f MB", float64(len(html))/1e6)
	if len(html) > 10e6 {
		t.Errorf("%d bytes, want at most 10 MB", len(html))
	}
	if !strings.Contains(html, "of the 1601 points are drawn and read out here") {
		t.Error("the page does not say that points were left out")
	}
}

// A record that came as JSON has no points: its numbers are shown without
// figures.
func TestWithoutTraces(t *testing.T) {
	p := single(t)
	p.Parts[0].Traces = nil
	html := render(t, p)
	if strings.Contains(html, `class="plot"`) || strings.Contains(html, `type="application/json"`) {
		t.Error("figures without points")
	}
	for _, want := range []string{"4.10", "ESR + ESL + (C || Rp)", "Figures at stated frequencies", "How this was made"} {
		if !strings.Contains(html, want) {
			t.Errorf("no %q", want)
		}
	}
}

func TestWriteErrors(t *testing.T) {
	p := single(t)
	p.Parts[0].Fit.Circuit.Expression = "C +"
	var b bytes.Buffer
	if err := Write(&b, p, 1); err == nil || b.Len() > 0 {
		t.Errorf("error %v, %d bytes written; want an error and none", err, b.Len())
	}
}

func BenchmarkWrite(b *testing.B) {
	p := lot(b, 10)
	b.ReportAllocs()
	for b.Loop() {
		render(b, p)
	}
}
