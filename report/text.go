package report

import (
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"
	"unicode"

	"github.com/rivo/uniseg"

	"realpart/models"
	"realpart/models/quantity"
)

// TextOptions steer [WriteText].
type TextOptions struct {
	// Width in columns; 0 means 80. Less than 60 is taken as 60.
	Width int
	// Quiet leaves the cautions out.
	Quiet bool
	// All adds the table of candidates.
	All bool
	// Colour sets headings and warnings off with ANSI attributes. Nothing is
	// said by colour alone.
	Colour bool
	// Reading holds lines on how the file was understood, shown under the
	// heading "Reading"; nil: none.
	Reading []string
}

// Cautions are shown with every result that may end up in a decision.
func Cautions() []string {
	return []string{
		"Stored charge: discharge a capacitor, and wait for dielectric absorption, before touching or measuring it.",
		"A small-signal sweep at one bias and one temperature is not the part in service: capacitance, inductance and losses change with both, with signal level and with age.",
		"Ratings are not in a sweep. The data sheet, local codes and a qualified person decide.",
	}
}

// WriteText writes a record for a person to read: warnings first, then the
// circuit with its values, self-resonances, residuals and figures.
func WriteText(w io.Writer, f *Fit, o TextOptions) error {
	t := &text{width: max(60, o.Width), colour: o.Colour}
	if o.Width == 0 {
		t.width = 80
	}
	t.heading(f)
	if f.Status == FitFailed {
		t.warn("No result: " + f.Error.Location() + f.Error.Text)
		_, err := io.WriteString(w, t.b.String())
		return err
	}
	t.warnings(f)
	if o.Reading != nil {
		t.title("Reading")
		for _, line := range o.Reading {
			t.paragraph("  ", "  ", line)
		}
	}
	t.circuit(f)
	t.parameters(f)
	t.resonances(f)
	t.residuals(f)
	t.figures(f)
	if len(f.Advice) > 0 {
		t.title("What the next sweep would give")
		for _, a := range f.Advice {
			t.paragraph("  ", "    ", a.Text)
		}
	}
	if o.All {
		t.candidates(f)
	}
	if !o.Quiet {
		t.title("Cautions")
		for _, c := range Cautions() {
			t.paragraph("  ", "  ", c)
		}
	}
	_, err := io.WriteString(w, t.b.String())
	return err
}

// Location gives "file:line:column: " as far as it is known.
func (e *Error) Location() string {
	s := e.File
	if e.Line > 0 {
		s += fmt.Sprintf(":%d", e.Line)
		if e.Column > 0 {
			s += fmt.Sprintf(":%d", e.Column)
		}
	}
	if s == "" {
		return ""
	}
	return s + ": "
}

// text gathers lines for a terminal.
type text struct {
	b      strings.Builder
	width  int
	colour bool
}

// line writes a line; no-break spaces have done their work by now.
func (t *text) line(s string) {
	t.b.WriteString(strings.TrimRight(strings.ReplaceAll(s, "\u00a0", " "), " ") + "\n")
}

// ANSI attributes (ECMA-48, SGR): bold, and yellow foreground.
const (
	bold   = "\x1b[1m"
	yellow = "\x1b[33m"
	reset  = "\x1b[0m"
)

func (t *text) set(attribute, s string) string {
	if !t.colour {
		return s
	}
	return attribute + s + reset
}

func (t *text) title(s string) {
	t.line("")
	t.line(t.set(bold, s))
}

func (t *text) warn(s string) {
	for _, line := range wrap(clean(s), t.width) {
		t.line(t.set(yellow, line))
	}
}

// paragraph wraps a text, with indents for its first and its other lines.
func (t *text) paragraph(first, rest, s string) {
	for i, line := range wrap(clean(s), t.width-uniseg.StringWidth(first)) {
		if i == 0 {
			t.line(first + line)
		} else {
			t.line(rest + line)
		}
	}
}

func (t *text) heading(f *Fit) {
	name := clean(f.Sweep.Part)
	if name == "" {
		name = clean(f.Sweep.File)
	}
	s := t.set(bold, name)
	if f.Sweep.Lot != "" {
		s += "  (lot " + clean(f.Sweep.Lot) + ")"
	}
	t.line(s)
	if f.Sweep.File != "" && f.Sweep.File != f.Sweep.Part {
		t.line(clean(f.Sweep.File))
	}
	if f.Sweep.Points > 0 {
		points := quantity.Count(f.Sweep.Points, "point")
		if f.Sweep.UsedPoints != f.Sweep.Points {
			points = fmt.Sprintf("%d of %s used", f.Sweep.UsedPoints, quantity.Count(f.Sweep.Points, "point"))
		}
		t.line(points + ", " + FormatFrequency(f.Sweep.FMin) + " to " + FormatFrequency(f.Sweep.FMax))
	}
	for _, key := range slices.Sorted(maps.Keys(f.Sweep.Metadata)) {
		t.paragraph("", "  ", key+": "+f.Sweep.Metadata[key])
	}
}

func (t *text) warnings(f *Fit) {
	all := f.AllWarnings()
	if len(all) == 0 {
		return
	}
	t.line("")
	t.line(t.set(bold+yellow, "Warnings"))
	for i, w := range all {
		number := fmt.Sprintf("%3d  ", i+1)
		t.paragraph(number, strings.Repeat(" ", len(number)), w.Code+": "+w.Text)
	}
}

func (t *text) circuit(f *Fit) {
	heading := "Circuit"
	if f.Circuit.Name != "" {
		heading += " " + f.Circuit.Name
	}
	if f.Kind != "" && f.Kind != models.AnyPart {
		heading += " (" + string(f.Kind) + ")"
	}
	t.title(heading)
	t.paragraph("  ", "    ", f.Circuit.Expression)
	c, err := models.Parse(f.Circuit.Expression)
	if err != nil || len(c.Parameters()) != len(f.Parameters) {
		return // a record from outside; the values below stand on their own
	}
	labels := make([]string, len(f.Parameters))
	for i, p := range f.Parameters {
		labels[i] = p.Short()
	}
	for _, labels := range [][]string{labels, make([]string, len(labels))} {
		drawing := drawLabelled(c, labels)
		if textWidth(drawing) <= t.width-2 {
			t.line("")
			for line := range strings.Lines(drawing) {
				t.line("  " + strings.TrimRight(line, "\n"))
			}
			return
		}
	}
}

func (t *text) parameters(f *Fit) {
	t.title("Values")
	rows := [][]string{{"", "", "95 % interval", "", ""}}
	for _, p := range f.Parameters {
		value, interval, relative := p.Texts()
		row := []string{p.Name, value, interval, relative, ""}
		if t.width >= 100 {
			row[4] = meaning(f.Circuit.Expression, p.Name)
		}
		rows = append(rows, row)
	}
	t.table(rows, "lllrl")
	switch {
	case f.AccuracyStated():
		t.paragraph("  ", "  ", "Intervals cover the scatter of the points and the meter's stated accuracy.")
	default:
		t.paragraph("  ", "  ", "Meter accuracy not stated: intervals cover scatter only.")
	}
}

// meaning gives the trade's word for a parameter.
func meaning(expression, name string) string {
	c, err := models.Parse(expression)
	if err != nil {
		return ""
	}
	if i, ok := c.Index(name); ok {
		return c.Parameters()[i].Quantity
	}
	return ""
}

func (t *text) resonances(f *Fit) {
	t.title("Self-resonance")
	if len(f.SelfResonance) == 0 {
		t.line("  none from a decade below to a decade above the sweep")
		return
	}
	rows := [][]string{{"", "95 % interval", "kind", "Z there", ""}}
	for _, r := range f.SelfResonance {
		freq, interval, impedance := r.Texts()
		where := "in the sweep"
		if !r.InSweep {
			where = "outside the sweep: from the circuit alone"
			if t.width < 100 {
				where = "outside the sweep"
			}
		}
		rows = append(rows, []string{freq, interval, string(r.Kind), impedance, where})
	}
	t.table(rows, "lllll")
}

func (t *text) residuals(f *Fit) {
	t.title("Residuals")
	r := f.Residuals
	s := fmt.Sprintf("rms %s, worst %s at %s", FormatPercent(r.RMSRelative), FormatPercent(r.MaxRelative), FormatFrequency(r.MaxAtHz))
	if r.Lag1 != nil {
		s += fmt.Sprintf(", correlation of neighbours %s", signed(*r.Lag1))
	}
	t.paragraph("  ", "  ", s)
	if r.Structured && !f.warned("structured-residual") {
		t.paragraph("  ", "  ", "Structured: neighbours deviate alike, so this circuit does not describe the part to the accuracy of the points.")
	}
}

func signed(v float64) string {
	return strings.Replace(fmt.Sprintf("%.2f", v), "-0.00", "0.00", 1)
}

// shown lists the figures that a text gives of a kind of part; JSON has all.
var shown = map[models.Kind][]models.Figure{
	models.CapacitorPart: {models.Cs, models.ESR, models.D, models.Zabs},
	models.InductorPart:  {models.Ls, models.ESR, models.Q, models.Zabs},
	models.BeadPart:      {models.Zabs, models.ESR, models.X, models.Phase},
	models.ResistorPart:  {models.ESR, models.X, models.Zabs, models.Phase},
	models.ResonatorPart: {models.Zabs, models.Phase, models.ESR, models.X},
}

// ShownFigures returns the figures that a report for people gives of a kind of
// part, in their order.
func ShownFigures(kind models.Kind) []models.Figure {
	if figures, ok := shown[kind]; ok {
		return slices.Clone(figures)
	}
	return []models.Figure{models.Zabs, models.Phase, models.ESR, models.X}
}

func (t *text) figures(f *Fit) {
	wanted := ShownFigures(f.Kind)
	rows := [][]string{{"at", "", "fitted", "95 % interval", "measured", ""}}
	last, below := 0.0, false
	for _, v := range f.Figures {
		if !slices.Contains(wanted, v.Name) {
			continue
		}
		value, interval, measured := v.Texts()
		row := []string{"", string(v.Name), value, interval, measured, ""}
		if v.AtHz != last {
			row[0] = FormatFrequency(v.AtHz)
			last = v.AtHz
		}
		if v.BelowResolution != nil && *v.BelowResolution && v.Name == models.ESR {
			row[5] = "*"
			below = true
		}
		rows = append(rows, row)
	}
	if len(rows) == 1 {
		return
	}
	t.title("Figures")
	t.table(rows, "rlllll")
	if below {
		t.paragraph("  * ", "    ", "below the meter's resolution there: |Z| times the stated phase accuracy is more")
	}
}

func (t *text) candidates(f *Fit) {
	if len(f.Candidates) == 0 {
		return
	}
	t.title("Candidates")
	if f.KindReason != "" {
		t.paragraph("  ", "  ", "Kind "+string(f.Kind)+": "+f.KindReason)
	}
	rows := [][]string{{"", "circuit", "AICc", "rms", "why"}}
	for _, c := range f.Candidates {
		row := []string{"", c.Name, "", "", c.Reason}
		if c.Name == "" {
			row[1] = c.Expression
		}
		if c.Chosen {
			row[0] = "→"
		}
		if c.AICc != nil {
			row[2] = fmt.Sprintf("%.1f", *c.AICc)
		}
		if c.RMSRelative != nil {
			row[3] = FormatPercent(*c.RMSRelative)
		}
		rows = append(rows, row)
	}
	t.table(rows, "llrrl")
}

// table writes rows in columns two spaces apart; align has l or r for each.
// The last column wraps.
func (t *text) table(rows [][]string, align string) {
	width := make([]int, len(align))
	for _, row := range rows {
		for i, cell := range row {
			row[i] = clean(cell)
			width[i] = max(width[i], uniseg.StringWidth(row[i]))
		}
	}
	last := len(align) - 1
	indent := 2
	for _, w := range width[:last] {
		if w > 0 {
			indent += w + 2
		}
	}
	for _, row := range rows {
		s := "  "
		for i, cell := range row[:last] {
			if width[i] == 0 {
				continue
			}
			pad := strings.Repeat(" ", width[i]-uniseg.StringWidth(cell))
			if align[i] == 'r' {
				s += pad + cell + "  "
			} else {
				s += cell + pad + "  "
			}
		}
		tail := row[last]
		if align[last] == 'r' {
			tail = strings.Repeat(" ", width[last]-uniseg.StringWidth(tail)) + tail
		}
		room := max(t.width-indent, 16)
		for k, part := range wrap(tail, room) {
			if k > 0 {
				s = strings.Repeat(" ", indent)
			}
			t.line(s + part)
		}
	}
}

// wrap breaks a text at spaces, other than no-break spaces, into lines of a
// width; a longer word stays whole. There is always one line.
func wrap(s string, width int) []string {
	var lines []string
	line, used := "", 0
	for _, word := range strings.FieldsFunc(s, func(r rune) bool { return r == ' ' || r == '\t' || r == '\n' }) {
		w := uniseg.StringWidth(word)
		if used > 0 && used+1+w > width {
			lines = append(lines, line)
			line, used = "", 0
		}
		if used > 0 {
			line += " "
			used++
		}
		line += word
		used += w
	}
	return append(lines, line)
}

// clean makes text from a file harmless on a terminal: control characters and
// those that change the direction of writing become "·".
func clean(s string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case r == '\t' || r == '\n' || r == '\r':
			return ' '
		case unicode.IsControl(r), unicode.Is(unicode.Bidi_Control, r), r == '\u2028', r == '\u2029':
			return '·'
		}
		return r
	}, s)
}

func textWidth(s string) int {
	width := 0
	for line := range strings.Lines(s) {
		width = max(width, uniseg.StringWidth(strings.TrimRight(line, "\n")))
	}
	return width
}
