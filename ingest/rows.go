package ingest

import (
	"fmt"
	"math"
	"math/cmplx"
	"strings"

	"realpart/models/quantity"
)

// segment is rows that belong together: below one header, without a break.
type segment struct {
	plan *plan
	meta Metadata // of the lines since the segment before
	line []int32  // of each row
	vals [][]float64
	cplx map[int][]complex128 // columns of complex literals
	slot []int                // column → index in vals, -1
	part []string             // value of the part column of each row, nil without one
}

// maxFaults and maxDropped bound what is remembered of a bad file.
const (
	maxFaults  = 1000
	maxDropped = 1 << 20
)

// reader goes through the lines of delimited text.
type reader struct {
	*source
	opt      Options
	segments []*segment
	meta     Metadata // of the file: what stands above the first table
	pending  Metadata // since the last row
	dropped  []Dropped
	faults   []*Error
	more     int // faults beyond maxFaults

	title     string // a line of words on its own since the last row
	titleLine int32

	names []string        // of the part column, in order
	named map[string]bool // the same

	angle angleUnit // of phases without a unit, once told from the values

	// Answers of ahead, valid for lines from aheadFrom−1 up to the nearer one.
	aheadFrom, aheadHeader, aheadData int
}

func (r *reader) fault(e *Error) {
	e.File = r.name
	if len(r.faults) < maxFaults {
		r.faults = append(r.faults, e)
	} else {
		r.more++
	}
}

func (r *reader) drop(l line, reason string) {
	if len(r.dropped) < maxDropped {
		r.dropped = append(r.dropped, Dropped{int(l.num), reason})
	}
}

// readTables reads all tables of the text into segments.
func (r *reader) readTables() *Error {
	if err := r.checkDecimal(); err != nil {
		return err
	}
	t, err := r.findTable(0, r.opt)
	if err != nil {
		return err
	}
	top := t.first
	for _, i := range []int{t.head, t.group} {
		if i >= 0 {
			top = min(top, i)
		}
	}
	for i := 0; i < top; i++ {
		r.readMetadata(&r.meta, r.lines[i])
	}
	var p *plan
	var seg *segment
	for {
		if p != nil && t.key == p.key && t.unit < 0 == (p.unit < 0) {
			// The same header again: a page break, or the next part.
			p.first = t.first
		} else {
			var err *Error
			if p, err = r.plan(t, r.opt, r.pending.merge(r.meta)); err != nil {
				return err
			}
			seg = nil
		}
		next, last, ok := r.readRows(p, seg)
		if !ok {
			return nil
		}
		t, seg = next, last
	}
}

func (r *reader) readMetadata(m *Metadata, l line) bool {
	l = r.uncomment(l)
	text := r.lineText(l)
	if r.sheet != "" {
		text = strings.ReplaceAll(text, string(rune(cellMark)), "\t")
	}
	return m.read(text)
}

// newSegment begins a segment for a plan.
func (r *reader) newSegment(p *plan) *segment {
	g := &segment{plan: p, meta: r.pending, slot: make([]int, len(p.cols))}
	r.pending = Metadata{}
	for i := range g.slot {
		g.slot[i] = -1
	}
	add := func(i int) {
		if g.slot[i] < 0 {
			g.slot[i] = len(g.vals)
			g.vals = append(g.vals, nil)
		}
		switch p.cols[i].role {
		case roleZ, roleY, roleS:
			if g.cplx == nil {
				g.cplx = map[int][]complex128{}
			}
			g.cplx[i] = nil
		}
	}
	for _, q := range p.groups {
		add(q.freq)
		if q.part >= 0 {
			g.part = []string{}
		}
	}
	for _, i := range append(append([]int{}, p.need...), p.also...) {
		add(i)
	}
	r.segments = append(r.segments, g)
	return g
}

// readRows reads rows until the end or the next header, which it returns. The
// rows go on with seg, the last segment below the same header, if their
// frequencies do.
func (r *reader) readRows(p *plan, seg *segment) (table, *segment, bool) {
	var cells []span
	broken := true // something stood between: the next row may start a new part
	lastNum := int32(-1)
	var plain *plainRow
	if !r.opt.general {
		plain = newPlainRow(r.source, p)
	}
	// A row is read into these and stored when all its cells are good.
	row := make([]float64, len(p.cols))
	crow := make([]complex128, len(p.cols))

	for i := p.first; i < len(r.lines); i++ {
		l := r.lines[i]
		if lastNum >= 0 && l.num != lastNum+1 {
			broken = true
		}
		lastNum = l.num
		if plain != nil && plain.read(r.text, l) {
			if broken {
				seg, broken = r.segmentFor(p, seg, plain.vals[0], len(r.lines)-i), false
			}
			n := plain.store(seg, r.source, i)
			i += n - 1
			lastNum += int32(n - 1)
			continue
		}
		if r.isComment(l) {
			if t, ok := r.headerBelow(i); ok {
				return t, seg, true
			}
			broken = r.readMetadata(&r.pending, l) || broken
			continue
		}
		cells = r.split(l, cells)
		f, kind := r.frequency(cells, p)
		if kind != isNumber {
			switch r.structure(i, cells, kind) {
			case lineHeader:
				if t, ok := r.headerBelow(i); ok {
					return t, seg, true
				}
			case lineBreak:
				broken = true
				continue
			case lineSkip:
				continue
			}
		}
		if !r.readRow(l, cells, f, kind, p, row, crow) {
			continue
		}
		if broken {
			seg, broken = r.segmentFor(p, seg, f, len(r.lines)-i), false
		}
		seg.store(l, row, crow)
		if c := p.groups[0].part; c >= 0 {
			seg.part = append(seg.part, r.partCell(cells, c))
		}
	}
	return table{}, seg, false
}

// frequency reads the cell that tells a row from everything else.
func (r *reader) frequency(cells []span, p *plan) (float64, cellKind) {
	c := p.groups[0].freq
	f, kind := 0.0, isEmpty
	if c < len(cells) {
		f, kind = parseNumber(r.cell(cells[c]), r.decimal)
		switch kind {
		case isNumber:
			f = scale(f, p.cols[c].unit.exp)
		case isText:
			f, kind = r.suffixed(r.cell(cells[c]), p.cols[c])
		}
	}
	if kind == isEmpty && len(p.groups) > 1 && r.look(cells).numbers > 0 {
		return math.NaN(), isNumber // another part's column may be longer
	}
	return f, kind
}

// readRow reads all cells that the plan needs; false means that the row was
// dropped or is at fault.
func (r *reader) readRow(l line, cells []span, f float64, kind cellKind, p *plan, row []float64, crow []complex128) bool {
	if n := r.surplus(cells, p); n > 0 {
		r.fault(&Error{Line: int(l.num), Column: r.column(l, cells, len(p.cols)), bare: true, Found: fmt.Sprintf("a row of %d", n),
			Expected: fmt.Sprintf("%d cells, as the header has", len(p.cols)), Hint: surplusHint(r.delim)})
		return false
	}
	if c := p.groups[0].part; c >= 0 {
		if name := r.partCell(cells, c); !r.named[name] {
			if r.named == nil {
				r.named = map[string]bool{}
			}
			r.named[name] = true
			r.names = append(r.names, name)
		}
	}
	freq := p.groups[0].freq
	switch kind {
	case isOverload:
		r.drop(l, "overload or no number in "+roles[p.cols[freq].role].name)
		return false
	case isEmpty:
		r.drop(l, "empty cell in "+roles[p.cols[freq].role].name)
		return false
	case isText:
		r.badCell(l, cells, freq, p)
		return false
	}
	row[freq] = f
	if len(p.groups) > 1 {
		if !r.readGroups(l, cells, p, row, crow) {
			return false
		}
	} else {
		for _, c := range p.need {
			if !r.readCell(l, cells, c, p, row, crow) {
				return false
			}
		}
	}
	for _, c := range p.also {
		row[c] = math.NaN()
		if c < len(cells) {
			if v, kind := parseNumber(r.cell(cells[c]), r.decimal); kind == isNumber {
				row[c] = scale(v, p.cols[c].unit.exp)
			}
		}
	}
	return true
}

// partCell is the part's name in a row, "" where the row ends before it.
func (r *reader) partCell(cells []span, c int) string {
	if c >= len(cells) {
		return ""
	}
	return strings.ReplaceAll(r.cell(cells[c]), `""`, `"`)
}

// store appends a row.
func (g *segment) store(l line, row []float64, crow []complex128) {
	g.line = append(g.line, l.num)
	for c, s := range g.slot {
		if s < 0 {
			continue
		}
		if z, ok := g.cplx[c]; ok {
			g.cplx[c] = append(z, crow[c])
			continue
		}
		g.vals[s] = append(g.vals[s], row[c])
	}
}

// segmentFor returns the segment for a row at frequency f after a break: the
// same one if the frequencies go on and no other part was named. rows is at most
// how many follow.
func (r *reader) segmentFor(p *plan, seg *segment, f float64, rows int) *segment {
	if seg != nil && seg.continues(f) && r.pending.Part == "" && r.pending.Serial == "" {
		r.meta = r.pending.merge(r.meta)
		r.pending = Metadata{}
		if r.title != "" {
			r.drop(line{num: r.titleLine}, "a line of words between the rows")
			r.title = ""
		}
		return seg
	}
	if r.pending.Part == "" {
		r.pending.Part = r.title
	}
	r.title = ""
	seg = r.newSegment(p)
	// Where there is one table, this is its size; many blocks grow theirs.
	if len(r.segments) == 1 {
		seg.line = make([]int32, 0, rows)
		for _, g := range p.groups { // frequencies become those of the sweep
			if k := seg.slot[g.freq]; seg.vals[k] == nil {
				seg.vals[k] = make([]float64, 0, rows)
			}
		}
		for k, v := range seg.vals {
			if v == nil {
				seg.vals[k] = r.scratch.column(rows, len(seg.vals)-1)
			}
		}
	}
	return seg
}

// surplus is the number of cells of a row that has more than the header, 0 for
// one that has not. Empty ones at the end do not count. Columns given by number
// need no header.
func (r *reader) surplus(cells []span, p *plan) int {
	if p.loose {
		return 0
	}
	for n := len(cells); n > len(p.cols); n-- {
		if r.cell(cells[n-1]) != "" {
			return n
		}
	}
	return 0
}

func surplusHint(delim byte) string {
	if delim == ',' {
		return "save numbers with a decimal point, or another delimiter than the comma; or --columns with the columns' numbers"
	}
	return "a heading for each column, or --columns with the columns' numbers"
}

// continues reports whether a frequency goes on where the segment stopped: then
// a repeated header or a blank line is only a page break.
func (g *segment) continues(f float64) bool {
	fs := g.vals[g.slot[g.plan.groups[0].freq]]
	n := len(fs)
	if n == 0 {
		return true
	}
	if n == 1 {
		return f > fs[0]
	}
	if fs[n-1] >= fs[0] {
		return f > fs[n-1]
	}
	return f < fs[n-1]
}

// readCell reads cell c of a row into row or crow; a row that cannot be used
// for a harmless reason is dropped, anything else is a fault.
func (r *reader) readCell(l line, cells []span, c int, p *plan, row []float64, crow []complex128) bool {
	h := &p.cols[c]
	if c >= len(cells) {
		if r.sheet != "" {
			r.drop(l, "empty cell in "+roles[h.role].name)
			return false
		}
		r.fault(&Error{Line: int(l.num), Column: r.column(l, cells, c), bare: true,
			Found: fmt.Sprintf("a row of %d", len(cells)), Expected: fmt.Sprintf("at least %d cells", c+1), Hint: "complete or remove the row"})
		return false
	}
	text := r.cell(cells[c])
	if h.role == roleZ || h.role == roleY || h.role == roleS {
		if z, ok := parseComplex(text); ok {
			s := math.Pow10(h.unit.exp)
			crow[c] = complex(real(z)*s, imag(z)*s)
			return true
		}
		if v, kind := parseNumber(text, r.decimal); kind == isNumber && h.role != roleS {
			crow[c] = complex(scale(v, h.unit.exp), 0)
			return true
		} else if kind == isEmpty || kind == isOverload {
			r.drop(l, "overload or empty cell in "+roles[h.role].name)
			return false
		}
		r.fault(&Error{Line: int(l.num), Column: r.column(l, cells, c), Found: text, Expected: "a complex number such as 1.2-3.4j",
			Hint: "save real and imaginary part in two columns"})
		return false
	}
	v, kind := parseNumber(text, r.decimal)
	if kind == isNumber {
		v = scale(v, h.unit.exp)
	} else if kind == isText {
		v, kind = r.suffixed(text, *h)
	}
	switch kind {
	case isNumber:
		if v < 0 && h.role.neverNegative() {
			r.fault(&Error{Line: int(l.num), Column: r.column(l, cells, c), Found: text, Expected: "a magnitude that is not negative",
				Hint: "--columns to name the columns"})
			return false
		}
		row[c] = v
		return true
	case isEmpty:
		r.drop(l, "empty cell in "+columnName(*h))
	case isOverload:
		r.drop(l, "overload or no number in "+columnName(*h))
	default:
		r.badCell(l, cells, c, p)
	}
	return false
}

// readGroups reads the cells of parts that stand side by side. What one part
// lacks becomes NaN and costs the others nothing; a fault costs the row.
func (r *reader) readGroups(l line, cells []span, p *plan, row []float64, crow []complex128) bool {
	for gi := range p.groups {
		g := &p.groups[gi]
		cols := g.columns()
		empty := true
		for _, c := range cols {
			if c < len(cells) && r.cell(cells[c]) != "" {
				empty = false
			}
		}
		for _, c := range cols {
			if c == p.groups[0].freq && (gi > 0 || !math.IsNaN(row[c])) {
				continue
			}
			faults := len(r.faults) + r.more
			if empty || !r.readCell(l, cells, c, p, row, crow) {
				if len(r.faults)+r.more > faults {
					return false
				}
				row[c], crow[c] = math.NaN(), cmplx.NaN()
			}
		}
	}
	return true
}

func columnName(h heading) string {
	if h.role == roleNone {
		return fmt.Sprintf("%q", h.text)
	}
	return roles[h.role].name
}

// badCell is the fault of text in a number cell.
func (r *reader) badCell(l line, cells []span, c int, p *plan) {
	text := r.cell(cells[c])
	e := &Error{Line: int(l.num), Column: r.column(l, cells, c), Found: text, Expected: "a number"}
	h := p.cols[c]
	if h.role != roleNone {
		e.Expected = "a number for " + roles[h.role].name
		if h.unit.text != "" {
			e.Expected += " in " + h.unit.text
		}
	}
	switch {
	case strings.IndexByte(text, ',') >= 0 && strings.IndexByte(text, '.') >= 0, thousands(text):
		e.Hint, e.Err = "save without thousands separators", ErrAmbiguous
	case strings.IndexByte(text, ',') >= 0 && r.decimal == '.':
		e.Hint = "save with a decimal point, or with a decimal comma in all columns"
	case strings.IndexByte(text, '.') >= 0 && r.decimal == ',':
		e.Hint = "this file has decimal commas: save all numbers with the same decimal sign"
	default:
		e.Hint = "remove the row, or leave the cell empty"
	}
	r.fault(e)
}

// suffixed reads a cell with its own prefix or unit: "4.7k", "1.2 MHz". A
// prefix alone below a header that has one too could mean either.
func (r *reader) suffixed(text string, h heading) (float64, cellKind) {
	dim := roles[h.role].dim
	if dim == "" || dim == "dB" || text == "" {
		return 0, isText
	}
	if c := text[0]; !('0' <= c && c <= '9' || c == '-' || c == '+' || c == '.' || c >= 0x80) {
		return 0, isText
	}
	if r.decimal == ',' {
		t, ok := pointForComma(text)
		if !ok {
			return 0, isText
		}
		text = t
	}
	if h.role.isAngle() && h.unit.dim != "" {
		dim = h.unit.dim
	}
	v, err := quantity.Parse(text, dim)
	if err != nil {
		return 0, isText
	}
	last := strings.TrimRight(text, " ")
	if _, _, lone := lonePrefix(lastRune(last)); lone && h.unit.exp != 0 {
		return 0, isText
	}
	if h.role.isAngle() && h.unit.dim == "" {
		// The cell says its unit; the column must then be in it throughout.
		return 0, isText
	}
	if math.Abs(v) >= overload {
		return 0, isOverload
	}
	return v, isNumber
}

func lastRune(s string) string {
	for i := len(s) - 1; i >= 0; i-- {
		if s[i] < 0x80 || s[i] >= 0xc0 {
			return s[i:]
		}
	}
	return s
}

// What a line is that does not begin with a frequency.
type structureKind uint8

const (
	lineFault  structureKind = iota // a row with text where a number should be, or a gap
	lineHeader                      // the header of the next table, or words above it
	lineBreak                       // a blank row, a mark, metadata
	lineSkip                        // a footer
)

// structure says what line i is, given that its frequency cell is no number.
func (r *reader) structure(i int, cells []span, kind cellKind) structureKind {
	l := r.lines[i]
	k := r.look(cells)
	if k.cells == 0 {
		return lineBreak
	}
	if k.numbers >= 1 && kind != isText {
		return lineFault // an empty or overloaded frequency
	}
	text := r.lineText(l)
	if isRule(text) && k.cells <= 1 {
		return lineBreak
	}
	if t, ok := r.tryHeader(i); ok && t.head == i {
		return lineHeader
	}
	first := strings.ToUpper(r.cell(cells[0]))
	if strings.HasPrefix(first, "BEGIN") || strings.HasPrefix(first, "END") || first == "EOF" || first == "STOP" {
		return lineBreak
	}
	if k.numbers <= 1 && r.readMetadata(&r.pending, l) {
		return lineBreak
	}
	next, data := r.ahead(i)
	switch {
	case next >= 0 && (data < 0 || next < data):
		return lineHeader
	case k.cells == 1 && k.numbers == 0 && data < 0:
		r.drop(l, "text below the last row")
		return lineSkip
	case k.cells == 1 && k.numbers == 0 && (i == 0 || r.lines[i-1].num != l.num-1 || i+1 < len(r.lines) && r.lines[i+1].num != l.num+1):
		// A title on its own after a blank line names the block below.
		r.title, r.titleLine = r.cell(cells[0]), l.num
		return lineBreak
	}
	return lineFault
}

// headerBelow returns the header at line i or, where i is a title, the next one.
func (r *reader) headerBelow(i int) (table, bool) {
	if t, ok := r.tryHeader(i); ok {
		return t, true
	}
	if r.isComment(r.lines[i]) {
		return table{}, false
	}
	next, _ := r.ahead(i)
	if next < 0 {
		return table{}, false
	}
	for j := i; j < next; j++ {
		r.readMetadata(&r.pending, r.lines[j])
	}
	return r.tryHeader(next)
}

// ahead returns the index of the next header and of the next row of numbers
// after line i, -1 where there is none. The answer holds until one of them is
// passed, so that going through a file stays linear.
func (r *reader) ahead(i int) (header, data int) {
	if r.aheadFrom > 0 && i >= r.aheadFrom-1 && (r.aheadData < 0 || i < r.aheadData) && (r.aheadHeader < 0 || i < r.aheadHeader) {
		return r.aheadHeader, r.aheadData
	}
	r.aheadFrom, r.aheadHeader, r.aheadData = i+1, -1, -1
	var cells []span
	for j := i + 1; j < len(r.lines); j++ {
		if !r.isComment(r.lines[j]) {
			cells = r.split(r.lines[j], cells)
			if r.look(cells).isData() {
				r.aheadData = j
				break
			}
		}
		if _, ok := r.tryHeader(j); ok {
			r.aheadHeader = j
			break
		}
	}
	return r.aheadHeader, r.aheadData
}
