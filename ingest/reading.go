package ingest

import (
	"fmt"
	"io"
	"strings"
)

// Reading says how a file was understood.
type Reading struct {
	File       string
	Format     string // "delimited text", "Touchstone 1.1", "spreadsheet, sheet …"
	Encoding   string
	Delimiter  string
	Decimal    string // decimal sign: point or comma
	HeaderLine int    // 0 if there is none
	UnitLine   int    // line of units below the header, 0 if there is none
	Columns    []ColumnReading
	Notes      []string // choices made, and why
	Metadata   Metadata
	Parts      []string
	RowsUsed   int
	Dropped    []Dropped
	Faults     []*Error // all faults, in the order found
	MoreFaults int      // those beyond the first thousand

	plan *plan // that Columns describe
}

// ColumnReading is one column of the first table.
type ColumnReading struct {
	Number  int    // from 1
	Header  string // as written
	Role    string // what it was taken for
	Unit    string // as stated; in brackets if it was assumed
	Part    string // where parts stand side by side
	Used    bool
	Compare bool // read to compare only
}

// reading starts the report of a source.
func (s *source) reading() Reading {
	r := Reading{File: s.name, Format: "delimited text", Encoding: s.encoding, Delimiter: s.delimiterName(), Decimal: s.decimalName()}
	if s.sheet != "" {
		r.Format, r.Encoding, r.Delimiter, r.Decimal = "spreadsheet, sheet "+s.sheet, "", "", ""
	}
	return r
}

// fill takes over what the reader found.
func (r *Reading) fill(p *parsed, rd *reader) {
	r.Metadata = p.meta
	var pl *plan
	if len(rd.segments) > 0 {
		pl = rd.segments[0].plan
	}
	if pl == nil {
		return
	}
	r.setPlan(rd.source, pl)
	for _, seg := range rd.segments {
		r.RowsUsed += len(seg.line)
	}
}

func (r *Reading) setPlan(s *source, pl *plan) {
	if pl.head >= 0 {
		r.HeaderLine = int(s.lines[pl.head].num)
	}
	if pl.unit >= 0 {
		r.UnitLine = int(s.lines[pl.unit].num)
	}
	r.plan = pl
	r.Columns = make([]ColumnReading, 0, len(pl.cols))
	for i, c := range pl.cols {
		cr := ColumnReading{Number: i + 1, Header: c.text, Role: roles[c.role].name, Unit: c.unit.text, Part: strings.TrimPrefix(c.label, "\x00"),
			Used: c.role == rolePart}
		if c.port != 0 {
			cr.Role = strings.Replace(cr.Role, "S", fmt.Sprintf("S%d", c.port), 1)
		}
		if cr.Unit == "" && roles[c.role].dim != "" && roles[c.role].dim != "1" {
			cr.Unit = "(" + roles[c.role].dim + ")"
		}
		r.Columns = append(r.Columns, cr)
	}
	for _, g := range pl.groups {
		r.Columns[g.freq].Used = true
	}
	for _, i := range pl.need {
		r.Columns[i].Used = true
	}
	for _, i := range pl.also {
		r.Columns[i].Compare = true
	}
}

// markUsed corrects what setPlan expected once it is known which way to Z was
// taken.
func (r *Reading) markUsed(pl *plan, w measured) {
	if r.plan != pl || len(pl.groups) != 1 {
		return
	}
	for i := range r.Columns {
		c := &r.Columns[i]
		if (c.Used || c.Compare) && i != pl.groups[0].freq && pl.cols[i].role != rolePart {
			c.Used = i == w.a || i == w.b
			c.Compare = !c.Used
		}
	}
}

// close adds what is known only at the end.
func (r *Reading) close(p *parsed) {
	r.Dropped, r.Faults, r.MoreFaults = p.dropped, p.faults, p.more
	r.Metadata = p.meta
	for _, d := range p.parts {
		if d.label != "" {
			r.Parts = append(r.Parts, d.label)
		}
	}
	for _, w := range p.warnings {
		r.Notes = append(r.Notes, w.Text)
	}
}

// WriteText prints the reading for people.
func (r Reading) WriteText(w io.Writer) error {
	var b strings.Builder
	line := func(name, format string, args ...any) {
		fmt.Fprintf(&b, "  %-10s %s\n", name, oneLine(fmt.Sprintf(format, args...)))
	}
	fmt.Fprintf(&b, "%s\n", r.File)
	line("format", "%s", r.Format)
	if r.Encoding != "" {
		line("encoding", "%s", r.Encoding)
	}
	if r.Delimiter != "" {
		line("delimiter", "%s, decimal %s", r.Delimiter, r.Decimal)
	}
	switch {
	case r.HeaderLine > 0 && r.UnitLine > 0:
		line("header", "line %d, units in line %d", r.HeaderLine, r.UnitLine)
	case r.HeaderLine > 0:
		line("header", "line %d", r.HeaderLine)
	case len(r.Columns) > 0:
		line("header", "none")
	}
	for _, c := range r.Columns {
		text := c.Role
		if c.Unit != "" {
			text += " in " + strings.Trim(c.Unit, "()")
			if strings.HasPrefix(c.Unit, "(") {
				text += " (not stated)"
			}
		}
		if c.Part != "" {
			text += ", part " + c.Part
		}
		switch {
		case c.Compare:
			text += ", to compare only"
		case !c.Used && c.Role != roles[roleNone].name:
			text += ", not used"
		}
		name := fmt.Sprintf("column %d", c.Number)
		if c.Header != "" {
			text = fmt.Sprintf("%q: %s", c.Header, text)
		}
		line(name, "%s", text)
	}
	m := r.Metadata
	for _, kv := range [][2]string{{"part", m.Part}, {"serial", m.Serial}, {"lot", m.Lot}, {"test level", m.TestLevel}, {"bias", m.Bias}, {"temperature", m.Temperature}, {"date", m.Date}} {
		if kv[1] != "" {
			line(kv[0], "%s", kv[1])
		}
	}
	if len(r.Parts) > 1 {
		line("parts", "%s", strings.Join(r.Parts, ", "))
	}
	for _, n := range r.Notes {
		line("note", "%s", n)
	}
	line("rows", "%d read, %d dropped", r.RowsUsed, len(r.Dropped))
	for _, d := range r.Dropped {
		line("dropped", "line %d: %s", d.Line, d.Reason)
	}
	for _, f := range r.Faults {
		line("fault", "line %d, column %d: %s", f.Line, f.Column, f.Text())
	}
	if r.MoreFaults > 0 {
		line("fault", "and %d more", r.MoreFaults)
	}
	_, err := io.WriteString(w, b.String())
	return err
}
