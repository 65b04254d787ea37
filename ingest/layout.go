package ingest

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"unicode"
)

// table is a header and where its rows begin.
type table struct {
	head, unit int // indices into source.lines, -1 if there is none
	group      int // the line above the header that names parts or S-parameters, -1
	first      int // index of the first line below
	cols       []heading
	key        string // normalised header, to recognise its repetition
}

// headerScan is how many rows of numbers are passed over in search of a header
// before the file is taken to have none.
const headerScan = 30

// maxColumns and maxHeaderCells bound the work on headers: columns of one, and
// cells looked at in all lines of a file that could be one.
const (
	maxColumns     = 16384
	maxHeaderCells = 1 << 19
)

// lineKind is a quick look at a line.
type lineKind struct {
	cells   int // not empty
	numbers int // numbers and marks
	texts   int
	letters bool
}

func (s *source) look(cells []span) lineKind {
	var k lineKind
	for _, c := range cells {
		t := s.cell(c)
		if t == "" {
			continue
		}
		k.cells++
		if looksNumber(t, s.decimal) {
			k.numbers++
		} else {
			k.texts++
			k.letters = k.letters || strings.IndexFunc(t, func(r rune) bool { return unicode.IsLetter(r) || r == '|' || r == '°' || r == '∠' }) >= 0
		}
	}
	return k
}

// isData: at least two numbers, and no more than one text (a part's name).
func (k lineKind) isData() bool { return k.numbers >= 2 && k.texts <= 1 }

// nextData returns the index of the first row of numbers within the next few
// lines, -1 if there is none, and its cells.
func (s *source) nextData(from, most int, cells []span) (int, []span) {
	for i := from; i < len(s.lines) && i < from+most; i++ {
		if s.isComment(s.lines[i]) {
			continue
		}
		cells = s.split(s.lines[i], cells)
		if k := s.look(cells); k.isData() {
			return i, cells
		}
	}
	return -1, nil
}

// cellTexts are the cells of a header line; where blanks separate, the cells
// are cut so that their number agrees with the data's, if there is a way.
func (s *source) cellTexts(l line, dataCells int) ([]string, []span) {
	cells := s.split(l, nil)
	if s.delim == blanks && dataCells > 0 && len(cells) != dataCells {
		if wide := s.splitWide(l); len(wide) == dataCells {
			cells = wide
		} else if merged := s.mergeUnits(cells); len(merged) == dataCells {
			cells = merged
		} else if merged := s.mergeUnits(wide); len(merged) == dataCells {
			cells = merged
		} else if commas := s.splitCommas(l); len(commas) == dataCells {
			cells = commas
		}
	}
	return s.texts(cells), cells
}

func (s *source) texts(cells []span) []string {
	texts := make([]string, len(cells))
	for i, c := range cells {
		texts[i] = s.cell(c)
	}
	return texts
}

// splitWide cuts at tabs and at two blanks or more.
func (s *source) splitWide(l line) []span {
	var out []span
	for i := l.start; i < l.end; {
		for i < l.end && isBlank(s.text[i]) {
			i++
		}
		from := i
		for i < l.end && !(s.text[i] == '\t' || isBlank(s.text[i]) && i+1 < l.end && isBlank(s.text[i+1])) {
			i++
		}
		if i > from {
			out = append(out, span{from, i})
		}
	}
	return out
}

// splitCommas is for headers that keep the commas their rows lack.
func (s *source) splitCommas(l line) []span {
	t := *s
	t.delim = ','
	return t.split(l, nil)
}

// mergeUnits joins a bracketed unit with the word before it: "Freq (Hz)", and
// words inside one bracket: "(deg C)".
func (s *source) mergeUnits(cells []span) []span {
	var out []span
	open := false
	for _, c := range cells {
		t := s.cell(c)
		if len(out) > 0 && (open || t != "" && (t[0] == '(' || t[0] == '[' || t[0] == '/')) {
			out[len(out)-1].end = c.end
		} else {
			out = append(out, c)
		}
		open = strings.Count(s.text[out[len(out)-1].start:out[len(out)-1].end], "(") > strings.Count(s.text[out[len(out)-1].start:out[len(out)-1].end], ")") ||
			strings.Count(s.text[out[len(out)-1].start:out[len(out)-1].end], "[") > strings.Count(s.text[out[len(out)-1].start:out[len(out)-1].end], "]")
	}
	return out
}

// isRule: a line drawn from signs, such as ------ or ======.
func isRule(t string) bool { return strings.Trim(t, "-=_+|* \t") == "" }

// tryHeader takes line i as a header: cells of text, one of them a frequency.
func (s *source) tryHeader(i int) (table, bool) {
	l := s.uncomment(s.lines[i])
	if l.start >= l.end {
		return table{}, false
	}
	rough := s.split(l, nil)
	k := s.look(rough)
	if k.cells < 2 || !k.letters || k.numbers > k.texts/2 {
		return table{}, false
	}
	// A file of nothing but headers must not take hours.
	if s.headerCells += len(rough); len(rough) > maxColumns || s.headerCells > maxHeaderCells {
		return table{}, false
	}
	data, dataCells := s.nextData(i+1, 5, nil)
	n := 0
	if data >= 0 {
		n = len(dataCells)
	}
	texts, cells := s.cellTexts(l, n)
	t := table{head: i, unit: -1, group: -1, first: i + 1, cols: readHeadings(texts)}

	// A second line: units, or the parts of what the first line names.
	next := i + 1
	for next < len(s.lines) && isRule(s.lineText(s.uncomment(s.lines[next]))) {
		next++
	}
	t.first = next
	if next < len(s.lines) && next != data {
		second := s.uncomment(s.lines[next])
		texts2, cells2 := s.cellTexts(second, n)
		if k := s.look(cells2); k.cells >= 1 && k.numbers == 0 && k.letters {
			switch {
			case s.unitRow(&t, texts2):
				t.unit, t.first = next, next+1
			case data >= 0 && data > next:
				joined := s.join(texts, cells, texts2, cells2)
				if cols := readHeadings(joined); countKnown(cols) > countKnown(t.cols) && hasFreq(cols) {
					t.cols, t.unit, t.first = cols, next, next+1
				}
			}
			for t.first < len(s.lines) && isRule(s.lineText(s.uncomment(s.lines[t.first]))) {
				t.first++
			}
		}
	}
	if !hasFreq(t.cols) {
		return table{}, false
	}
	if countKnown(t.cols) < 2 {
		// Only the frequency is recognised: a header if rows follow at once, or
		// if it is all that is left of the file.
		if data != t.first && t.first < len(s.lines) || k.numbers > 0 {
			return table{}, false
		}
	}
	s.groupRow(&t)
	t.key = headerKey(texts)
	return t, true
}

func headerKey(texts []string) string {
	return strings.ToLower(strings.Join(texts, "\x00"))
}

// unitRow reads a row whose cells are all units; empty cells and words below
// columns that are not recognised are allowed.
func (s *source) unitRow(t *table, texts []string) bool {
	found := 0
	units := make([]unit, len(texts))
	odd := make([]bool, len(texts))
	for i, text := range texts {
		if strings.TrimSpace(text) == "" {
			continue
		}
		u, ok, ambiguous := readUnitCell(text)
		if !ok {
			if i < len(t.cols) && t.cols[i].role.quantity() {
				return false
			}
			continue
		}
		units[i], odd[i] = u, ambiguous
		if u.dim != "1" {
			found++
		}
	}
	if found == 0 {
		return false
	}
	for i, u := range units {
		if i < len(t.cols) && u.dim != "" && t.cols[i].unit.dim == "" {
			t.cols[i].setUnit(u, odd[i])
			t.cols[i].text += " [" + u.text + "]"
		}
	}
	return true
}

// join puts the words of an upper line before those below: by place on the line
// where blanks separate, by cell elsewhere. An upper word covers the cells up to
// the next one.
func (s *source) join(upper []string, upperCells []span, lower []string, lowerCells []span) []string {
	out := make([]string, len(lower))
	for i := range lower {
		j := -1
		if s.delim == blanks && len(upper) != len(lower) {
			for k, c := range upperCells {
				if c.start-upperCells[0].start <= lowerCells[i].start-lowerCells[0].start {
					j = k
				}
			}
		} else {
			for k := min(i, len(upper)-1); k >= 0; k-- {
				if upper[k] != "" {
					j = k
					break
				}
			}
		}
		out[i] = lower[i]
		if j >= 0 {
			out[i] = upper[j] + " " + lower[i]
		}
	}
	return out
}

// groupRow looks at the line above a header with repeated columns: its words
// name the parts (or the S-parameters) of the columns below.
func (s *source) groupRow(t *table) {
	if t.head == 0 || !repeatsRole(t.cols) {
		return
	}
	above := s.uncomment(s.lines[t.head-1])
	texts, cells := s.cellTexts(above, len(t.cols))
	if k := s.look(cells); k.cells < 1 || len(texts) > len(t.cols)+1 {
		return
	}
	if s.delim == blanks && len(texts) != len(t.cols) {
		return
	}
	label := ""
	distinct := map[string]bool{}
	labels := make([]string, len(t.cols))
	for i := range t.cols {
		if i < len(texts) && texts[i] != "" {
			label = texts[i]
		}
		labels[i] = label
		if t.cols[i].role.quantity() && label != "" {
			distinct[label] = true
		}
	}
	if len(distinct) < 2 {
		return
	}
	for i := range t.cols {
		if t.cols[i].role.quantity() {
			t.cols[i].label = labels[i]
		}
	}
	t.group = t.head - 1
}

func repeatsRole(cols []heading) bool {
	type kind struct {
		role  role
		port  int
		label string
	}
	var few [16]kind // most tables have no more
	seen := few[:0]
	var more map[kind]bool
	for _, c := range cols {
		k := kind{c.role, c.port, c.label}
		switch {
		case !c.role.quantity():
		case slices.Contains(seen, k) || more[k]:
			return true
		case len(seen) < cap(seen):
			seen = append(seen, k)
		default:
			if more == nil {
				more = map[kind]bool{}
			}
			more[k] = true
		}
	}
	return false
}

func countKnown(cols []heading) int {
	n := 0
	for _, c := range cols {
		if c.known() {
			n++
		}
	}
	return n
}

func hasFreq(cols []heading) bool {
	for _, c := range cols {
		if c.role == roleFreq || c.role == roleOmega {
			return true
		}
	}
	return false
}

// findTable looks for a header at or after line from; without one, for the rows
// of numbers of a file that has none.
func (s *source) findTable(from int, o Options) (table, *Error) {
	if len(o.Columns) > 0 {
		return s.findColumns(from, o.Columns)
	}
	bare, rows := -1, 0
	var cells []span
	for i := from; i < len(s.lines); i++ {
		l := s.lines[i]
		if !s.isComment(l) {
			cells = s.split(l, cells)
			if k := s.look(cells); k.isData() {
				if bare < 0 {
					bare = i
				}
				if rows++; rows > headerScan {
					break
				}
				continue
			}
		}
		if t, ok := s.tryHeader(i); ok {
			return t, nil
		}
	}
	if bare >= 0 {
		return s.bareTable(bare)
	}
	return table{}, s.noTable(from)
}

// bareTable is a file without a header, whose rows must be three numbers:
// frequency, |Z| and phase (contract). A line of words above that could be a
// header in other words is not passed over.
func (s *source) bareTable(first int) (table, *Error) {
	cells := s.split(s.lines[first], nil)
	if first > 0 {
		above := s.uncomment(s.lines[first-1])
		texts, aboveCells := s.cellTexts(above, len(cells))
		if k := s.look(aboveCells); k.cells == len(cells) && k.numbers == 0 && k.letters {
			return table{}, &Error{File: s.name, Line: int(above.num), Column: s.column(s.lines[first-1], aboveCells, 0),
				Found: strings.Join(texts, ", "), Expected: "a header with a frequency column",
				Hint: "--columns 'f=1,z=2,phase=3' with the columns' numbers", Err: ErrAmbiguous}
		}
	}
	l := s.lines[first]
	if n := len(cells); n != 3 || s.look(cells).numbers != 3 {
		return table{}, &Error{File: s.name, Line: int(l.num), Column: 1, Found: fmt.Sprintf("rows of %d columns without a header", n), bare: true,
			Expected: "a header, or three columns of numbers (frequency, |Z|, phase)", Hint: "--columns 'f=1,r=2,x=3' with the columns' numbers", Err: ErrAmbiguous}
	}
	return table{head: -1, unit: -1, group: -1, first: first, cols: []heading{
		{text: "", role: roleFreq, unit: unit{"Hz", "Hz", 0}}, {text: "", role: roleAbsZ, unit: unit{"Ω", "Ω", 0}},
		{text: "", role: rolePhase, unit: unit{"°", "°", 0}}}}, nil
}

// noTable says what is missing in a file without any.
func (s *source) noTable(from int) *Error {
	if from >= len(s.lines) {
		return &Error{File: s.name, Line: 1, Column: 1, Found: "only blank lines", bare: true, Expected: "a header and rows of numbers"}
	}
	// The line that most looks like a header gives the best hint.
	l := s.lines[from]
	for i := from; i < len(s.lines) && i < from+200; i++ {
		if texts, _ := s.cellTexts(s.uncomment(s.lines[i]), 0); len(texts) <= maxColumns && countKnown(readHeadings(texts)) >= 2 {
			l = s.lines[i]
			break
		}
	}
	return &Error{File: s.name, Line: int(l.num), Column: 1, Found: s.lineText(l), Expected: "a header with a frequency column and rows of numbers",
		Hint: "--columns 'f=1,z=2,phase=3' with the columns' numbers"}
}

// findColumns finds the table that --columns describes.
func (s *source) findColumns(from int, want Columns) (table, *Error) {
	byText := map[string]string{} // key → header
	number := map[string]int{}    // key → column from 0
	most := 0
	for key, v := range want {
		if n, err := strconv.Atoi(v); err == nil {
			number[key] = n - 1
			most = max(most, n)
		} else {
			byText[key] = v
		}
	}
	seen := map[string]bool{} // keys whose header stands somewhere, for the error
	for i := from; i < len(s.lines); i++ {
		if len(byText) > 0 {
			n := 0
			if _, cells := s.nextData(i+1, 5, nil); cells != nil {
				n = len(cells)
			}
			texts, cells := s.cellTexts(s.uncomment(s.lines[i]), n)
			if s.look(cells).letters && len(texts) >= most && len(texts) <= maxColumns {
				if cols, ok := chooseColumns(texts, byText, number); ok {
					return s.withUnitRow(table{head: i, unit: -1, group: -1, first: i + 1, cols: cols, key: headerKey(texts)}), nil
				}
				for key, text := range byText {
					if _, ok := chooseColumns(texts, map[string]string{key: text}, nil); ok {
						seen[key] = true
					}
				}
			}
			continue
		}
		if s.isComment(s.lines[i]) {
			continue
		}
		cells := s.split(s.lines[i], nil)
		if k := s.look(cells); len(cells) < most || len(cells) > maxColumns || !k.isData() {
			continue
		}
		if f := s.cell(cells[number["f"]]); f == "" || !looksNumber(f, s.decimal) {
			continue
		}
		t := table{head: -1, unit: -1, group: -1, first: i}
		texts := make([]string, len(cells))
		// The header is the text line above with as many cells, or the one
		// above a unit row.
		for h := i - 1; h >= from && h >= i-3; h-- {
			above, aboveCells := s.cellTexts(s.uncomment(s.lines[h]), len(cells))
			if len(above) < most || s.look(aboveCells).numbers > 0 {
				continue
			}
			t.head, texts = h, above
			if cols := readHeadings(above); countKnown(cols) > 0 {
				break
			}
		}
		cols, _ := chooseColumns(texts, nil, number)
		t.cols, t.key = cols, headerKey(texts)
		if t.head >= 0 && t.head < i-1 {
			t = s.withUnitRow(t)
			t.first = i
		}
		return t, nil
	}
	e := &Error{File: s.name, Line: 1, Column: 1, Found: "none", bare: true, Expected: "the columns that --columns names", Err: ErrUsage, Hint: "numbers or the header's own words"}
	if len(s.lines) > 0 {
		e.Line = int(s.lines[min(from, len(s.lines)-1)].num)
	}
	for _, key := range columnKeys {
		if text, ok := byText[key]; ok && !seen[key] {
			e.Expected = fmt.Sprintf("a column with the header %q (--columns %s)", text, key)
			break
		}
		if n, ok := number[key]; ok && n+1 == most {
			e.Expected = fmt.Sprintf("rows of numbers with %d columns (--columns %s=%d)", most, key, most)
			break
		}
	}
	return table{}, e
}

func (s *source) withUnitRow(t table) table {
	if t.head+1 < len(s.lines) {
		texts, _ := s.cellTexts(s.uncomment(s.lines[t.head+1]), len(t.cols))
		if s.unitRow(&t, texts) {
			t.unit, t.first = t.head+1, t.head+2
		}
	}
	return t
}

// chooseColumns gives the named columns their roles and all others none; a unit
// that the header states is kept if it fits the role.
func chooseColumns(texts []string, byText map[string]string, number map[string]int) ([]heading, bool) {
	cols := make([]heading, len(texts))
	read := readHeadings(texts)
	for i := range cols {
		cols[i] = heading{text: texts[i]}
	}
	place := func(key string, i int) {
		r, _ := keyRole(key)
		cols[i].role = r
		cols[i].negate = read[i].negate
		if u := read[i].unit; dimFits(roles[r].dim, u.dim) || r == roleFreq && u.dim == "rad/s" {
			cols[i].unit, cols[i].ambiguous = u, read[i].ambiguous
			if u.dim == "rad/s" {
				cols[i].role = roleOmega
			}
		}
	}
	for _, key := range columnKeys {
		i, ok := number[key]
		if !ok {
			continue
		}
		if i >= len(cols) {
			return cols, false
		}
		place(key, i)
	}
	for _, key := range columnKeys {
		want, ok := byText[key]
		if !ok {
			continue
		}
		found := -1
		for i, h := range read {
			if strings.EqualFold(strings.TrimSpace(texts[i]), want) || strings.EqualFold(h.name, want) && found < 0 {
				found = i
				if strings.EqualFold(strings.TrimSpace(texts[i]), want) {
					break
				}
			}
		}
		if found < 0 {
			return cols, false
		}
		place(key, found)
	}
	return cols, true
}
