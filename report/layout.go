package report

// Layout gathers text for a terminal, for reports on more than one sweep: the
// same titles, paragraphs and tables as those of [WriteText].
type Layout struct{ t text }

// NewLayout starts a text of a width in columns, with bold titles and yellow
// warnings if colour is set.
func NewLayout(width int, colour bool) *Layout {
	return &Layout{text{width: max(60, width), colour: colour}}
}

// Title starts a section.
func (l *Layout) Title(s string) { l.t.title(clean(s)) }

// Heading writes a line in bold.
func (l *Layout) Heading(s string) { l.t.line(l.t.set(bold, clean(s))) }

// Line writes a line as it is.
func (l *Layout) Line(s string) { l.t.line(clean(s)) }

// Paragraph wraps a text, with indents for its first and its other lines.
func (l *Layout) Paragraph(first, rest, s string) { l.t.paragraph(first, rest, s) }

// Warn wraps a text, in yellow.
func (l *Layout) Warn(s string) { l.t.warn(s) }

// Table writes rows in columns two spaces apart; align has l or r for each.
// Empty columns are left out, and the last column wraps. A table too wide for
// the terminal runs on: a statistic is no use in pieces.
func (l *Layout) Table(rows [][]string, align string) { l.t.table(rows, align) }

// String returns the text.
func (l *Layout) String() string { return l.t.b.String() }
