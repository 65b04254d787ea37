// Package lotpage writes lots as self-contained HTML pages in the style of
// report/page: the answer in words, strips of every figure side by side, the
// curves of |Z|, and the tables. Curves are those of the fitted circuits, so
// that records without sweeps make the same page.
package lotpage

import (
	"bytes"
	_ "embed"
	"fmt"
	"html/template"
	"io"
	"math"
	"math/cmplx"
	"strings"
	"sync"

	"realpart/models"
	"realpart/report"
	"realpart/report/accept"
	"realpart/report/figure"
	"realpart/report/lots"
	"realpart/report/page"
)

//go:embed lotpage.html
var source string

var parsed = sync.OnceValue(func() *template.Template {
	return template.Must(template.New("lotpage").Parse(source))
})

// view is what the template shows.
type view struct {
	Title    string
	CSS      template.CSS
	Answers  []lots.Answer
	Warnings []lots.Caution
	Sections []section
	Cautions []string
	Made     []page.Entry
}

// section is a part of a page: figures, then tables, with a note.
type section struct {
	ID, Title string
	Panels    []panel
	Tables    []table
	Notes     []string
}

type panel struct {
	figure.Panel
	SVG template.HTML
}

// table has a header and rows; a column without a heading is left out.
type table struct {
	Title  string
	Header []string
	Rows   [][]string
}

func newTable(title string, rows [][]string) table {
	t := table{Title: title}
	var kept []int
	for i, h := range rows[0] {
		if h != "" {
			kept = append(kept, i)
			t.Header = append(t.Header, h)
		}
	}
	for _, row := range rows[1:] {
		var cells []string
		for _, i := range kept {
			cells = append(cells, row[i])
		}
		t.Rows = append(t.Rows, cells)
	}
	return t
}

// Size of a figure in points.
const (
	curveWidth  = 340
	curveHeight = 200
	stripHeight = 180
)

func drawn(p figure.Panel, height float64) panel {
	svg, _ := p.SVG(curveWidth, height)
	return panel{p, template.HTML(svg)}
}

// WriteComparison writes the page of a comparison; all are its lots. Nothing is
// written if there is an error.
func WriteComparison(w io.Writer, c *lots.Comparison, all []*lots.Lot, made []page.Entry) error {
	var names []string
	for _, l := range all {
		names = append(names, l.Name)
	}
	v := view{Title: "Lots " + strings.Join(names, ", "), Answers: c.Answers(), Warnings: c.Cautions, Made: made}
	s := section{ID: "figures", Title: "Every figure, part by part"}
	for k := range c.Samples[0] {
		var strips []figure.Strip
		for i := range c.Samples {
			strips = append(strips, strip(c.Lots[i].Name, c.Samples[i][k]))
		}
		f := c.Samples[0][k].Figure
		s.Panels = append(s.Panels, drawn(figure.Strips(f.String(), f.Unit, strips, math.NaN(), math.NaN(), figure.Page), stripHeight))
	}
	v.Sections = append(v.Sections, s)
	s = section{ID: "curves", Title: "Impedance of the lots", Notes: []string{"Curves are those of the fitted circuits."}}
	for i := range all[1:] {
		freq, curves, left := common([]*lots.Lot{all[0], all[i+1]})
		if curves != nil {
			for _, p := range figure.Bands(freq, curves[0], curves[1], figure.Page) {
				s.Panels = append(s.Panels, drawn(p, curveHeight))
			}
		}
		s.Notes = append(s.Notes, left...)
	}
	v.Sections = append(v.Sections, s)
	s = section{ID: "comparison", Title: "Comparison", Notes: []string{c.CircuitNote(), lots.TestNote}}
	for i, l := range c.Lots[1:] {
		s.Tables = append(s.Tables, newTable(l.Name+" less "+c.Lots[0].Name, c.Table(i+1, true)))
	}
	v.Sections = append(v.Sections, s)
	for i, l := range c.Lots {
		v.Sections = append(v.Sections, lotTables(fmt.Sprintf("lot-%d", i+1), l.Name, l.N, c.Samples[i], nil))
	}
	return write(w, v)
}

// WriteAcceptance writes the page of judged lots.
func WriteAcceptance(w io.Writer, judged []Judged, rule accept.Rule, limits []accept.Limit, made []page.Entry) error {
	var names []string
	v := view{Made: made}
	for i, j := range judged {
		names = append(names, j.Verdict.Lot)
		v.Answers = append(v.Answers, lots.Answer{Title: j.Verdict.Answer(), Sentences: j.Verdict.Sentences()})
		v.Warnings = append(v.Warnings, j.Verdict.Cautions...)
		s := section{ID: fmt.Sprintf("parts-%d", i+1), Title: "Lot " + j.Verdict.Lot + ": parts against limits", Notes: []string{accept.RuleNote(rule)}}
		var of []lots.Limits
		for k, sample := range j.Samples {
			of = append(of, lots.Limits{Low: limits[k].Low, High: limits[k].High})
			s.Panels = append(s.Panels, drawn(figure.Strips(sample.Figure.String(), sample.Unit,
				[]figure.Strip{strip(j.Verdict.Lot, sample)}, limits[k].Low, limits[k].High, figure.Page), stripHeight))
		}
		panels, notes := overlay(j.Lot)
		s.Panels = append(s.Panels, panels...)
		s.Notes = append(s.Notes, notes...)
		s.Tables = append(s.Tables, newTable("Parts", accept.Table(j.Parts, false)))
		v.Sections = append(v.Sections, s)
		if len(j.Samples) > 0 {
			v.Sections = append(v.Sections, lotTables(fmt.Sprintf("lot-%d", i+1), j.Verdict.Lot, j.Verdict.Parts, j.Samples, of))
		}
	}
	v.Title = "Acceptance of " + strings.Join(names, ", ")
	return write(w, v)
}

// Judged is a lot with its verdicts; Samples are those of the limits.
type Judged struct {
	Lot     *lots.Lot
	Verdict accept.Lot
	Parts   []accept.Part
	Samples []lots.Sample
}

// Sections gives the statistics, strips and curves of lots for a page of
// report/page; at as in [lots.CommonFigures].
func Sections(all []*lots.Lot, at []float64) (template.HTML, error) {
	var b bytes.Buffer
	for i, l := range all {
		samples := l.Samples(at)
		if len(samples) == 0 {
			continue
		}
		s := lotTables(fmt.Sprintf("lot-%d", i+1), l.Name, len(l.Fits), samples, nil)
		for _, sample := range samples {
			s.Panels = append(s.Panels, drawn(figure.Strips(sample.Figure.String(), sample.Unit,
				[]figure.Strip{strip(l.Name, sample)}, math.NaN(), math.NaN(), figure.Page), stripHeight))
		}
		panels, notes := overlay(l)
		s.Panels = append(panels, s.Panels...)
		s.Notes = append(s.Notes, notes...)
		for _, caution := range l.Cautions() {
			s.Notes = append(s.Notes, caution.Text)
		}
		if err := parsed().ExecuteTemplate(&b, "section", s); err != nil {
			return "", fmt.Errorf("lotpage: %w", err)
		}
	}
	return template.HTML(b.String()), nil
}

func lotTables(id, name string, n int, samples []lots.Sample, limits []lots.Limits) section {
	parts := "parts"
	if n == 1 {
		parts = "part"
	}
	values, spread := lots.Tables(samples, limits)
	return section{ID: id, Title: fmt.Sprintf("Lot %s: %d %s", name, n, parts),
		Tables: []table{newTable("Values", values), newTable("Spread", spread)}, Notes: []string{lots.ToleranceNote}}
}

func strip(name string, s lots.Sample) figure.Strip {
	t := figure.Strip{Lot: name, Values: s.Values, Mean: s.Mean, Low: s.ToleranceLow, High: s.ToleranceHigh}
	for _, o := range s.Outliers {
		t.Outliers = append(t.Outliers, o.Value)
	}
	return t
}

// overlay draws the curves of one lot.
func overlay(l *lots.Lot) (panels []panel, notes []string) {
	freq, curves, notes := common([]*lots.Lot{l})
	if curves == nil {
		return nil, notes
	}
	for _, p := range figure.Overlay(freq, curves[0], figure.Page) {
		panels = append(panels, drawn(p, curveHeight))
	}
	return panels, append(notes, "Curves are those of the fitted circuits.")
}

// gridPoints is the number of frequencies of a curve.
const gridPoints = 121

// common computes |Z| of all parts of lots over the range of frequencies that
// they have in common, and says which parts have none. curves is nil if there
// is nothing to draw.
func common(all []*lots.Lot) (freq []float64, curves []figure.Curves, notes []string) {
	low, high := 0.0, math.Inf(1)
	for _, l := range all {
		for _, f := range l.Fits {
			low, high = max(low, f.Sweep.FMin), min(high, f.Sweep.FMax)
		}
	}
	if !(low > 0 && low < high && !math.IsInf(high, 1)) {
		return nil, nil, []string{"The sweeps have no range of frequencies in common; no curves are drawn."}
	}
	for i := range gridPoints {
		freq = append(freq, low*math.Pow(high/low, float64(i)/(gridPoints-1)))
	}
	freq[gridPoints-1] = high
	for _, l := range all {
		c := figure.Curves{Lot: l.Name}
		for _, f := range l.Fits {
			if z := magnitude(f, freq); z != nil {
				c.Parts = append(c.Parts, z)
			}
		}
		if n := len(l.Fits) - len(c.Parts); n > 0 {
			notes = append(notes, fmt.Sprintf("%s: %d of the curves cannot be drawn.", l.Name, n))
		}
		if len(c.Parts) == 0 {
			return nil, nil, notes
		}
		curves = append(curves, c)
	}
	return freq, curves, notes
}

// magnitude is |Z| of a record's circuit; nil for a record that has none.
func magnitude(f *report.Fit, freq []float64) []float64 {
	c, err := models.Parse(f.Circuit.Expression)
	if err != nil || len(c.Parameters()) != len(f.Parameters) {
		return nil
	}
	z := make([]complex128, len(freq))
	c.NewEvaluator(freq).Impedance(z, f.Values())
	out := make([]float64, len(freq))
	for i, v := range z {
		out[i] = cmplx.Abs(v)
		if !(out[i] > 0) || math.IsInf(out[i], 1) {
			return nil
		}
	}
	return out
}

func write(w io.Writer, v view) error {
	v.CSS, v.Cautions = page.StyleSheet(), report.Cautions()
	var b bytes.Buffer
	if err := parsed().Execute(&b, v); err != nil {
		return fmt.Errorf("lotpage: %w", err)
	}
	_, err := b.WriteTo(w)
	return err
}
