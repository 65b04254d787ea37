package report

import (
	"fmt"
	"io"
	"slices"
	"strings"

	"realpart/models/quantity"
)

// WriteSummary writes one line for each sweep, for a terminal: its values with
// three digits, the first self-resonance, the residual and the number of
// warnings. Sweeps with the same circuit stand together under its values'
// names, in the order in which the circuits first appear; failed ones come
// last, with their error. An asterisk marks what is not determined.
func WriteSummary(w io.Writer, fits []*Fit, o TextOptions) error {
	t := &text{width: max(60, o.Width), colour: o.Colour}
	if o.Width == 0 {
		t.width = 80
	}
	groups := map[string][]*Fit{}
	var order []string
	var failed []*Fit
	for _, f := range fits {
		if f.Status == FitFailed {
			failed = append(failed, f)
			continue
		}
		if groups[f.Circuit.Expression] == nil {
			order = append(order, f.Circuit.Expression)
		}
		groups[f.Circuit.Expression] = append(groups[f.Circuit.Expression], f)
	}
	for i, expression := range order {
		if i > 0 {
			t.line("")
		}
		t.group(groups[expression])
	}
	if len(failed) > 0 {
		if len(order) > 0 {
			t.line("")
		}
		t.line(t.set(bold+yellow, "No result"))
		for _, f := range failed {
			t.paragraph("  ", "    ", f.Error.Location()+f.Error.Text)
		}
	}
	_, err := io.WriteString(w, t.b.String())
	return err
}

// group writes the table of sweeps with one circuit.
func (t *text) group(fits []*Fit) {
	c := fits[0].Circuit
	heading := c.Expression
	if c.Name != "" {
		heading = c.Name + ": " + heading
	}
	t.line(t.set(bold, clean(heading)))
	lots := slices.ContainsFunc(fits, func(f *Fit) bool { return f.Sweep.Lot != fits[0].Sweep.Lot })
	header := []string{"part", ""}
	align := "ll"
	if lots {
		header[1] = "lot"
	}
	for _, p := range fits[0].Parameters {
		header, align = append(header, p.Name), align+"r"
	}
	// A column that no sweep fills keeps its name to itself: it takes no room.
	named := func(name string, filled func(*Fit) bool) string {
		if slices.ContainsFunc(fits, filled) {
			return name
		}
		return ""
	}
	header = append(header,
		named("resonance", func(f *Fit) bool { return len(f.SelfResonance) > 0 }), "rms",
		named("warnings", func(f *Fit) bool { return len(f.AllWarnings()) > 0 }))
	align += "rrr"
	rows := [][]string{header}
	open := false
	for _, f := range fits {
		row := []string{f.Sweep.Part, ""}
		if lots {
			row[1] = f.Sweep.Lot
		}
		for _, p := range f.Parameters {
			cell := p.Short()
			if !p.Determined {
				cell += " *"
				open = true
			}
			row = append(row, cell)
		}
		resonance, warnings := "", ""
		if len(f.SelfResonance) > 0 {
			resonance = quantity.Format(f.SelfResonance[0].FHz, "Hz", 3)
		}
		if n := len(f.AllWarnings()); n > 0 {
			warnings = fmt.Sprint(n)
		}
		rows = append(rows, append(row, resonance, FormatPercent(f.Residuals.RMSRelative), warnings))
	}
	if tableWidth(rows) > t.width {
		t.records(rows)
	} else {
		t.table(rows, align)
	}
	if open {
		t.paragraph("  ", "  ", "* not determined by the sweep")
	}
}

// records writes a table that is too wide for the terminal as a paragraph for
// each row.
func (t *text) records(rows [][]string) {
	for _, row := range rows[1:] {
		var parts []string
		for i, cell := range row[2:] {
			if cell != "" {
				// Joined by a space that does not break.
				parts = append(parts, strings.ReplaceAll(rows[0][i+2]+" "+cell, " ", "\u00a0"))
			}
		}
		name := row[0]
		if row[1] != "" {
			name += " (" + row[1] + ")"
		}
		t.paragraph("  ", "    ", name+"  "+strings.Join(parts, ", "))
	}
}

func tableWidth(rows [][]string) int {
	total := 2
	for i := range rows[0] {
		width := 0
		for _, row := range rows {
			width = max(width, textWidth(clean(row[i])))
		}
		if width > 0 {
			total += width + 2
		}
	}
	return total - 2
}
