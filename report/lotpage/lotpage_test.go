package lotpage

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"regexp"
	"strings"
	"testing"

	"realpart/models"
	"realpart/report"
	"realpart/report/accept"
	"realpart/report/lots"
	"realpart/report/page"
)

// lot makes an invented lot with the circuit ESR + ESL + C.
func lot(name string, n int, esr float64) *lots.Lot {
	r := rand.New(rand.NewPCG(uint64(n), 1))
	var fits []*report.Fit
	for i := range n {
		p := func(name, unit string, v float64) report.Parameter {
			v *= 1 + 0.02*r.NormFloat64()
			low, high := v*0.999, v*1.001
			return report.Parameter{Name: name, Unit: unit, Value: v, Low95: &low, High95: &high, Determined: true}
		}
		fits = append(fits, &report.Fit{
			Schema: report.Schema, Kind: models.CapacitorPart, Status: report.Converged,
			Sweep:      report.Sweep{File: fmt.Sprint(i), Part: fmt.Sprintf("%s-%02d", name, i+1), UsedPoints: 61, FMin: 100, FMax: 1e7},
			Circuit:    &report.Circuit{Expression: "ESR + ESL + C"},
			Parameters: []report.Parameter{p("ESR", "Ω", esr), p("ESL", "H", 5e-9), p("C", "F", 10e-6)},
			Residuals:  &report.Residuals{},
		})
	}
	return lots.New(name, fits)
}

// svgs returns the figures of a page by their labels.
func svgs(html string) map[string]string {
	out := map[string]string{}
	for _, m := range regexp.MustCompile(`(?s)aria-label="([^"]*)">(<svg.*?</svg>)`).FindAllStringSubmatch(html, -1) {
		out[m[1]] = m[2]
	}
	return out
}

func TestComparisonPage(t *testing.T) {
	a, b, c := lot("heron", 12, 0.02), lot("otter", 15, 0.025), lot("<teal>", 2, 0.02)
	b.Fits[3].Parameters[2].Value = 5e-6 // an outlier
	all := []*lots.Lot{a, b, c}
	comparison, err := lots.Compare(all, lots.Options{})
	if err != nil {
		t.Fatal(err)
	}
	var first, second bytes.Buffer
	for _, w := range []*bytes.Buffer{&first, &second} {
		if err := WriteComparison(w, comparison, all, []page.Entry{{Name: "Command", Value: "realpart <compare>"}}); err != nil {
			t.Fatal(err)
		}
	}
	html := first.String()
	if html != second.String() {
		t.Error("the page is not the same twice")
	}
	for _, want := range []string{
		"<h2>otter (15 parts) against heron (12 parts)</h2>", "ESR: otter is ", "no difference shown", "otter-04 in C",
		"otter less heron", "&lt;teal&gt;", "realpart &lt;compare&gt;", "a lot below 3", "discharge a capacitor", "tolerance interval",
	} {
		if !strings.Contains(html, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	for _, never := range []string{"<teal>", "http://www.w3.org/1999", "src=", "<script", "NaN", "#0000"} {
		if strings.Contains(html, never) {
			t.Errorf("the page has %q", never)
		}
	}
	figures := svgs(html)
	// ESR, ESL, C; bands and relative bands of two lots each.
	if len(figures) != 3+4 {
		t.Fatalf("%d figures, want 7", len(figures))
	}
	found := false
	for label, svg := range figures {
		if !strings.HasPrefix(label, "C. ") {
			continue
		}
		found = true
		// One path of dots has a diamond, four lines and a move, for each part
		// but the outlier.
		if n := strings.Count(longest(svg), "m"); n != 12+15+2-1 {
			t.Errorf("%d dots in the strips of C, want 28", n)
		}
		if !strings.Contains(label, "otter: 15 parts, mean ") {
			t.Errorf("label %q", label)
		}
		for _, name := range []string{"heron", "otter", "&lt;teal&gt;"} {
			if !strings.Contains(svg, ">"+name+"<") {
				t.Errorf("the strips lack the name %s", name)
			}
		}
	}
	if !found {
		t.Error("no strips of C")
	}
}

// longest returns the longest path of a figure.
func longest(svg string) string {
	best := ""
	for _, m := range regexp.MustCompile(` d="([^"]*)"`).FindAllStringSubmatch(svg, -1) {
		if len(m[1]) > len(best) {
			best = m[1]
		}
	}
	return best
}

func TestAcceptancePage(t *testing.T) {
	l := lot("heron", 5, 0.02)
	limits := []accept.Limit{{Figure: lots.Figure{Name: "ESR", Unit: "Ω"}, Low: math.NaN(), High: 0.0202}}
	var parts []accept.Part
	for _, f := range l.Fits {
		parts = append(parts, accept.Judge(f, limits, accept.Guarded))
	}
	judged := Judged{Lot: l, Verdict: accept.JudgeLot("heron", parts, 0), Parts: parts,
		Samples: []lots.Sample{l.Sample(limits[0].Figure, "ESR + ESL + C", false)}}
	var b bytes.Buffer
	if err := WriteAcceptance(&b, []Judged{judged}, accept.Guarded, limits, nil); err != nil {
		t.Fatal(err)
	}
	html := b.String()
	for _, want := range []string{"Lot heron: ", "5 parts: ", "≤ 20.2 mΩ", "Guarded acceptance", "Cpk", "i class=\"mark dashed\"></i>limit"} {
		if !strings.Contains(html, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	if n := len(svgs(html)); n != 3 { // strips of ESR, overlay and deviations
		t.Errorf("%d figures, want 3", n)
	}
}

// Curves are those of the circuit: at 100 Hz |Z| is 1/(2πfC) of the part.
func TestCurves(t *testing.T) {
	l := lot("heron", 3, 0.02)
	freq, curves, notes := common([]*lots.Lot{l})
	if len(curves) != 1 || len(curves[0].Parts) != 3 || len(notes) != 0 || freq[0] != 100 || freq[len(freq)-1] != 1e7 {
		t.Fatalf("%d curves from %g to %g Hz, notes %v", len(curves), freq[0], freq[len(freq)-1], notes)
	}
	for i, f := range l.Fits {
		want := 1 / (2 * math.Pi * 100 * f.Parameters[2].Value)
		if got := curves[0].Parts[i][0]; math.Abs(got-want) > 1e-5*want {
			t.Errorf("%s: %g Ω at 100 Hz, want %g", f.Sweep.Part, got, want)
		}
	}
	l.Fits[1].Circuit = &report.Circuit{Expression: "no circuit +"}
	if _, curves, notes = common([]*lots.Lot{l}); len(curves[0].Parts) != 2 || len(notes) != 1 {
		t.Errorf("a record without a circuit: %d curves, notes %v", len(curves[0].Parts), notes)
	}
	l.Fits[1].Sweep.FMin = 2e7
	if _, curves, notes = common([]*lots.Lot{l}); curves != nil || len(notes) != 1 {
		t.Errorf("no range in common: %d curves", len(curves))
	}
}
