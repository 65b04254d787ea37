// Package page writes the results of one sweep, or of a whole lot, as one
// self-contained HTML page: nothing is fetched, by the page or by its script.
//
// Everything is there without the script; it adds a readout that follows the
// pointer over the figures, and sorting and filtering of the index. The page
// follows the reader's choice of light or dark, and prints on A4 and Letter.
package page

import (
	"bytes"
	_ "embed"
	"fmt"
	"html/template"
	"io"
	"math"
	"math/cmplx"
	"slices"
	"strconv"
	"strings"
	"sync"

	"golang.org/x/sync/errgroup"

	"realpart/models"
	"realpart/report"
	"realpart/report/figure"
	"realpart/report/schematic"
)

// Page is what a page shows.
type Page struct {
	Title string // "" means the part's or lot's name
	// Made says how the page was made: version, command, settings. The
	// hashes of the inputs stand with their parts.
	Made  []Entry
	Parts []Part
	// Lots is what is said of lots, below the index; see report/lotpage.
	Lots template.HTML
}

// Entry is a name and a value.
type Entry struct{ Name, Value string }

// Part is one sweep. Traces is nil for a failed one.
type Part struct {
	Fit    *report.Fit
	Traces *report.Traces
	// Settings tell how this sweep was read and fitted, where that is worth
	// saying.
	Settings []Entry
}

// pointBudget is the number of points drawn in all figures of a page: it
// keeps a page of 200 parts below 10 MB. A part gets mostPoints at most and
// fewestPoints at least.
const (
	pointBudget  = 14000
	mostPoints   = 800
	fewestPoints = 40
)

// Size of a figure in points.
const (
	figureWidth  = 340
	figureHeight = 200
)

//go:embed page.html
var pageHTML string

//go:embed page.css
var pageCSS string

//go:embed page.js
var pageJS string

var parsed = sync.OnceValue(func() *template.Template {
	return template.Must(template.New("page").Parse(pageHTML))
})

// Write writes a page. Figures are drawn in parallel, by so many workers as
// jobs says, at least one; the result does not depend on it. Nothing is
// written if there is an error.
func Write(w io.Writer, p Page, jobs int) error {
	v := view{
		Title: p.Title, Made: p.Made, Cautions: report.Cautions(),
		CSS: template.CSS(pageCSS), JS: template.JS(pageJS), Lots: p.Lots,
		Parts: make([]partView, len(p.Parts)),
	}
	if v.Title == "" {
		v.Title = title(p.Parts)
	}
	points := min(mostPoints, max(fewestPoints, pointBudget/max(1, len(p.Parts))))
	var group errgroup.Group
	group.SetLimit(max(1, jobs))
	for i, part := range p.Parts {
		group.Go(func() error {
			view, err := newPart(part, i, points)
			v.Parts[i] = view
			return err
		})
	}
	if err := group.Wait(); err != nil {
		return err
	}
	if len(p.Parts) > 1 {
		v.Index = newIndex(p.Parts)
	}
	var b bytes.Buffer
	if err := parsed().Execute(&b, v); err != nil {
		return fmt.Errorf("page: %w", err)
	}
	_, err := b.WriteTo(w)
	return err
}

// title names the part, or the lots.
func title(parts []Part) string {
	if len(parts) == 1 {
		return parts[0].Fit.Sweep.Part
	}
	var lots []string
	for _, p := range parts {
		if l := p.Fit.Sweep.Lot; l != "" && !slices.Contains(lots, l) {
			lots = append(lots, l)
		}
	}
	s := fmt.Sprintf("%d parts", len(parts))
	if len(lots) > 0 && len(lots) <= 4 {
		s = strings.Join(lots, ", ") + ": " + s
	}
	return s
}

// view is what the template shows.
type view struct {
	Title    string
	CSS      template.CSS
	JS       template.JS
	Index    *index
	Lots     template.HTML
	Parts    []partView
	Made     []Entry
	Cautions []string
}

type partView struct {
	ID        string
	Fit       *report.Fit
	Failure   string
	Warnings  []report.Warning
	Schematic template.HTML
	Values    []valueRow
	Accuracy  bool
	Resonance []resonanceRow
	Figures   figureTable
	Panels    []panelView
	Note      string
	Data      *data
	FMin      float64
	FMax      float64
	Sweep     []Entry
}

type valueRow struct{ Name, Meaning, Value, Interval, Relative string }

type resonanceRow struct{ Freq, Interval, Kind, Impedance, Where string }

// figureTable has a row for each frequency and a column for each figure.
type figureTable struct {
	Names []models.Figure
	Rows  []figureRow
	Below bool // some ESR is below the meter's resolution
}

type figureRow struct {
	At    string
	Cells []figureCell
}

type figureCell struct {
	Value, Interval, Measured string
	Below                     bool
}

type panelView struct {
	figure.Panel
	SVG  template.HTML
	Area string // left, right, top, bottom, fractions
}

// data are the numbers of the readout: frequency in Hz, |Z| in Ω and phase in
// degrees, measured and of the fitted circuit.
type data struct {
	F  []number `json:"f"`
	Z  []number `json:"z"`
	P  []number `json:"p"`
	MZ []number `json:"mz"`
	MP []number `json:"mp"`
}

// number is written with six significant digits.
type number float64

// MarshalJSON writes the number.
func (n number) MarshalJSON() ([]byte, error) {
	return strconv.AppendFloat(nil, float64(n), 'g', 6, 64), nil
}

func newPart(p Part, i, points int) (partView, error) {
	f := p.Fit
	v := partView{ID: fmt.Sprintf("part-%d", i+1), Fit: f, FMin: f.Sweep.FMin, FMax: f.Sweep.FMax}
	v.Sweep = append([]Entry{{"file", f.Sweep.File}}, p.Settings...)
	if f.Sweep.SHA256 != "" {
		v.Sweep = append(v.Sweep, Entry{"SHA-256", f.Sweep.SHA256})
	}
	if f.Status == report.FitFailed {
		v.Failure = f.Error.Location() + f.Error.Text
		return v, nil
	}
	c, err := models.Parse(f.Circuit.Expression)
	if err != nil {
		return v, fmt.Errorf("page: part %s: %w", f.Sweep.Part, err)
	}
	if len(c.Parameters()) != len(f.Parameters) {
		return v, fmt.Errorf("page: part %s: %d values for the circuit %s", f.Sweep.Part, len(f.Parameters), c)
	}
	v.Warnings = f.AllWarnings()
	labels := make([]string, len(f.Parameters))
	alt := "Circuit " + f.Circuit.Expression + " with"
	for i, q := range f.Parameters {
		labels[i] = q.Short()
		alt += " " + q.Name + " = " + labels[i] + ","
		value, interval, relative := q.Texts()
		v.Values = append(v.Values, valueRow{q.Name, c.Parameters()[i].Quantity, value, interval, relative})
	}
	v.Schematic = template.HTML(schematic.SVG(c, labels, strings.TrimSuffix(alt, ",")))
	v.Accuracy = f.AccuracyStated()
	for _, r := range f.SelfResonance {
		freq, interval, impedance := r.Texts()
		where := "in the sweep"
		if !r.InSweep {
			where = "outside the sweep, from the circuit alone"
		}
		v.Resonance = append(v.Resonance, resonanceRow{freq, interval, string(r.Kind), impedance, where})
	}
	v.Figures = newFigureTable(f)
	if t := p.Traces; t != nil {
		v.trace(t, points)
	}
	return v, nil
}

func newFigureTable(f *report.Fit) figureTable {
	t := figureTable{Names: report.ShownFigures(f.Kind)}
	last := math.NaN()
	for _, q := range f.Figures {
		column := slices.Index(t.Names, q.Name)
		if column < 0 {
			continue
		}
		if q.AtHz != last {
			t.Rows = append(t.Rows, figureRow{report.FormatFrequency(q.AtHz), make([]figureCell, len(t.Names))})
			last = q.AtHz
		}
		value, interval, measured := q.Texts()
		below := q.BelowResolution != nil && *q.BelowResolution && q.Name == models.ESR
		t.Rows[len(t.Rows)-1].Cells[column] = figureCell{value, interval, measured, below}
		t.Below = t.Below || below
	}
	return t
}

// trace adds figures and the numbers of the readout.
func (v *partView) trace(t *report.Traces, points int) {
	pick := report.Thin(t, points)
	for _, panel := range figure.Panels(t, figure.Page, pick) {
		svg, area := panel.SVG(figureWidth, figureHeight)
		v.Panels = append(v.Panels, panelView{panel, template.HTML(svg), fmt.Sprintf("%.4f %.4f %.4f %.4f", area.Left, area.Right, area.Top, area.Bottom)})
	}
	if len(pick) < len(t.Freq) {
		v.Note = fmt.Sprintf("%d of the %d points are drawn and read out here; the fit used all.", len(pick), len(t.Freq))
	}
	v.Data = new(data)
	for _, i := range pick {
		v.Data.F = append(v.Data.F, number(t.Freq[i]))
		v.Data.Z = append(v.Data.Z, number(cmplx.Abs(t.Measured[i])))
		v.Data.P = append(v.Data.P, number(report.Phase(t.Measured[i])))
		v.Data.MZ = append(v.Data.MZ, number(cmplx.Abs(t.Model[i])))
		v.Data.MP = append(v.Data.MP, number(report.Phase(t.Model[i])))
	}
}

// index is the table of a lot: one row a part, a column for each of the
// parameters that most parts have. Others are named below it.
type index struct {
	Parameters []string
	Others     []string
	Lots       bool // parts are of more than one
	Rows       []indexRow
}

type indexRow struct {
	ID, Part, Lot, Circuit string
	Failed                 bool
	Values                 []cell
	Resonance, Residual    cell
	Warnings               int
}

// indexColumns is how many parameters fit beside the rest: all of any circuit
// of the library.
const indexColumns = 7

// cell is a text and the number it is sorted by; Sort is "" where there is
// none.
type cell struct{ Text, Sort string }

func newCell(text string, v float64) cell {
	return cell{text, strconv.FormatFloat(v, 'g', -1, 64)}
}

func newIndex(parts []Part) *index {
	x := new(index)
	var all []string
	count := map[string]int{}
	for _, p := range parts {
		for _, q := range p.Fit.Parameters {
			if count[q.Name] == 0 {
				all = append(all, q.Name)
			}
			count[q.Name]++
		}
		x.Lots = x.Lots || p.Fit.Sweep.Lot != parts[0].Fit.Sweep.Lot
	}
	// The commonest, in the order of their first appearance.
	common := slices.Clone(all)
	slices.SortStableFunc(common, func(a, b string) int { return count[b] - count[a] })
	common = common[:min(len(common), indexColumns)]
	for _, name := range all {
		if slices.Contains(common, name) {
			x.Parameters = append(x.Parameters, name)
		} else {
			x.Others = append(x.Others, name)
		}
	}
	for i, p := range parts {
		f := p.Fit
		row := indexRow{ID: fmt.Sprintf("part-%d", i+1), Part: f.Sweep.Part, Lot: f.Sweep.Lot, Failed: f.Status == report.FitFailed, Warnings: len(f.AllWarnings())}
		if row.Part == "" {
			row.Part = f.Sweep.File
		}
		row.Values = make([]cell, len(x.Parameters))
		for _, q := range f.Parameters {
			value, _, _ := q.Texts()
			c := cell{Text: value}
			if q.Determined {
				c = newCell(value, q.Value)
			}
			if column := slices.Index(x.Parameters, q.Name); column >= 0 {
				row.Values[column] = c
			}
		}
		if f.Circuit != nil {
			row.Circuit = f.Circuit.Name
			if row.Circuit == "" {
				row.Circuit = f.Circuit.Expression
			}
		}
		if len(f.SelfResonance) > 0 {
			freq, _, _ := f.SelfResonance[0].Texts()
			row.Resonance = newCell(freq, f.SelfResonance[0].FHz)
		}
		if f.Residuals != nil {
			row.Residual = newCell(report.FormatPercent(f.Residuals.RMSRelative), f.Residuals.RMSRelative)
		}
		x.Rows = append(x.Rows, row)
	}
	return x
}

// Percent and Hertz are for the template.
func (v partView) Percent(x float64) string { return report.FormatPercent(x) }

// Hertz gives a frequency for people.
func (v partView) Hertz(f float64) string { return report.FormatFrequency(f) }

// AICc gives the criterion with one decimal, "" for none.
func (v partView) AICc(x *float64) string {
	if x == nil {
		return ""
	}
	return strconv.FormatFloat(*x, 'f', 1, 64)
}

// RMS gives a relative residual in percent, "" for none.
func (v partView) RMS(x *float64) string {
	if x == nil {
		return ""
	}
	return report.FormatPercent(*x)
}
