package report

import (
	"encoding/csv"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"

	"realpart/models"
)

// WriteCSV writes the result table: one row a sweep, plain SI numbers, units
// in brackets in the header. All sweeps share one header, which has the
// parameters of every circuit that occurs, in the order of their first
// appearance, and the figures of [ShownFigures] for every kind of part that
// occurs; a cell without a number is empty. The value of
// a parameter that is not determined is empty, its bounds are not.
//
// The columns vary with the circuits, so that there is no struct to map them
// to. A text that a spreadsheet would take for a formula is given a leading
// apostrophe.
func WriteCSV(w io.Writer, fits []*Fit) error {
	t := newTable(fits)
	out := csv.NewWriter(w)
	if err := out.Write(t.header()); err != nil {
		return err
	}
	for _, f := range fits {
		if err := out.Write(t.row(f)); err != nil {
			return err
		}
	}
	out.Flush()
	return out.Error()
}

// column is a parameter with its unit, or a figure at a frequency.
type column struct{ name, unit string }

type figureColumn struct {
	name models.Figure
	at   float64
}

type table struct {
	parameters []column
	figures    []figureColumn
	resonances int
}

func newTable(fits []*Fit) *table {
	t := new(table)
	for _, f := range fits {
		for _, p := range f.Parameters {
			if c := (column{p.Name, p.Unit}); !slices.Contains(t.parameters, c) {
				t.parameters = append(t.parameters, c)
			}
		}
		wanted := ShownFigures(f.Kind)
		for _, v := range f.Figures {
			if c := (figureColumn{v.Name, v.AtHz}); slices.Contains(wanted, v.Name) && !slices.Contains(t.figures, c) {
				t.figures = append(t.figures, c)
			}
		}
		t.resonances = max(t.resonances, len(f.SelfResonance))
	}
	order := models.Figures()
	slices.SortStableFunc(t.figures, func(a, b figureColumn) int {
		switch {
		case a.at < b.at:
			return -1
		case a.at > b.at:
			return 1
		}
		return slices.Index(order, a.name) - slices.Index(order, b.name)
	})
	return t
}

func (t *table) header() []string {
	h := []string{"file", "part", "lot", "kind", "circuit", "expression", "status", "points", "used points", "f min (Hz)", "f max (Hz)"}
	for _, c := range t.parameters {
		unit := " (" + c.unit + ")"
		h = append(h, c.name+unit, c.name+" low95"+unit, c.name+" high95"+unit, c.name+" std error"+unit, c.name+" meter error"+unit)
	}
	h = append(h, "residual rms (1)", "residual max (1)", "residual max at (Hz)", "structured")
	for i := range t.resonances {
		n := fmt.Sprintf("SRF%d", i+1)
		h = append(h, n+" (Hz)", n+" std error (Hz)", n+" kind")
	}
	for _, c := range t.figures {
		name := string(c.name) + " at " + strconv.FormatFloat(c.at, 'f', -1, 64) + " Hz"
		unit := " (" + c.name.Unit() + ")"
		h = append(h, name+unit, name+" low95"+unit, name+" high95"+unit)
	}
	return append(h, "warnings", "error")
}

func (t *table) row(f *Fit) []string {
	s := f.Sweep
	row := []string{harmless(s.File), harmless(s.Part), harmless(s.Lot), string(f.Kind)}
	if f.Circuit != nil {
		row = append(row, f.Circuit.Name, f.Circuit.Expression)
	} else {
		row = append(row, "", "")
	}
	row = append(row, string(f.Status))
	if s.Points > 0 {
		row = append(row, strconv.Itoa(s.Points), strconv.Itoa(s.UsedPoints), number(s.FMin), number(s.FMax))
	} else {
		row = append(row, "", "", "", "")
	}
	for _, c := range t.parameters {
		i := slices.IndexFunc(f.Parameters, func(p Parameter) bool { return p.Name == c.name && p.Unit == c.unit })
		if i < 0 {
			row = append(row, "", "", "", "", "")
			continue
		}
		p := f.Parameters[i]
		value := ""
		if p.Determined {
			value = number(p.Value)
		}
		row = append(row, value, optional(p.Low95), optional(p.High95), optional(p.StdError), optional(p.MeterError))
	}
	if r := f.Residuals; r != nil {
		row = append(row, number(r.RMSRelative), number(r.MaxRelative), number(r.MaxAtHz), strconv.FormatBool(r.Structured))
	} else {
		row = append(row, "", "", "", "")
	}
	for i := range t.resonances {
		if i < len(f.SelfResonance) {
			r := f.SelfResonance[i]
			row = append(row, number(r.FHz), optional(r.StdErrorHz), string(r.Kind))
		} else {
			row = append(row, "", "", "")
		}
	}
	for _, c := range t.figures {
		i := slices.IndexFunc(f.Figures, func(v Figure) bool { return v.Name == c.name && v.AtHz == c.at })
		if i < 0 {
			row = append(row, "", "", "")
			continue
		}
		v := f.Figures[i]
		row = append(row, number(v.Value), optional(v.Low95), optional(v.High95))
	}
	var codes []string
	for _, w := range f.Warnings {
		codes = append(codes, w.Code)
	}
	failure := ""
	if f.Error != nil {
		failure = f.Error.Location() + f.Error.Text
	}
	return append(row, harmless(strings.Join(codes, " ")), harmless(failure))
}

// number writes a number with the fewest digits that give it back.
func number(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

func optional(v *float64) string {
	if v == nil {
		return ""
	}
	return number(*v)
}

// harmless keeps a spreadsheet from taking a text for a formula: one that
// begins with a sign of a formula, in East Asian full width too (common
// practice, no source).
func harmless(s string) string {
	if s != "" && strings.ContainsAny(string([]rune(s)[:1]), "=+-@＝＋－＠\t\r\n") {
		return "'" + s
	}
	return s
}
