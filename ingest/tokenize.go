package ingest

import (
	"slices"
	"strings"
	"sync"
	"unicode/utf8"
)

// source is a text cut into lines, with the delimiter that cuts lines into
// cells. Cells are parts of the text; nothing is copied.
type source struct {
	name     string
	text     string
	encoding string
	lines    []line // those that are not blank

	delim   byte // ',' ';' '\t' '|', blanks for runs of blanks, or cellMark in a spreadsheet
	decimal byte // '.' or ','
	sheet   string

	headerCells int // looked at so far

	scratch *scratch // nil in a spreadsheet
}

// scratch is memory that is needed while a file is read and not by its sweeps. In
// a batch the next file uses it again.
type scratch struct {
	lines  []line
	values []float64 // columns
}

var scratches = sync.Pool{New: func() any { return new(scratch) }}

// column takes memory for a column of so many values; the last argument is how
// many columns will be asked for in all.
func (s *scratch) column(rows, columns int) []float64 {
	if s == nil {
		return make([]float64, 0, rows)
	}
	if n := len(s.values) + rows; n > cap(s.values) {
		s.values = make([]float64, 0, max(n, rows*columns))
	}
	from := len(s.values)
	s.values = s.values[:from+rows]
	return s.values[from:from:len(s.values)]
}

// release gives the scratch memory back. Nothing of the source is used after.
func (s *source) release() {
	if s.scratch == nil {
		return
	}
	s.scratch.lines, s.scratch.values = s.lines[:0], s.scratch.values[:0]
	scratches.Put(s.scratch)
	s.lines, s.scratch = nil, nil
}

const (
	blanks   = ' '
	cellMark = '\x1f' // between the cells of a spreadsheet
)

// line is text[start:end], without the line's end; num counts from 1 and jumps
// where blank lines were.
type line struct {
	start, end int32
	num        int32
}

// span is a cell: text[start:end], without the blanks and quotes around it.
type span struct{ start, end int32 }

// newSource cuts text at LF, CR LF, or CR alone where the text has no LF.
func newSource(name, text, enc string) *source {
	s := &source{name: name, text: text, encoding: enc, decimal: '.', scratch: scratches.Get().(*scratch)}
	end := byte('\n')
	if strings.IndexByte(text, '\n') < 0 {
		end = '\r'
	}
	quotes := strings.IndexByte(text, '"') >= 0
	s.lines = slices.Grow(s.scratch.lines[:0], strings.Count(text, string(rune(end)))+1)
	num := int32(0)
	for start := 0; start < len(text); {
		stop := strings.IndexByte(text[start:], end)
		next := start + stop + 1
		if stop < 0 {
			stop, next = len(text)-start, len(text)
		}
		num++
		from, to := start, start+stop
		extra := int32(0)
		if quotes {
			if more, lines := openQuote(text, start, start+stop, end); lines > 0 {
				to, next, extra = more, min(more+1, len(text)), int32(lines)
			}
		}
		for to > from && (text[to-1] == '\r' || isBlank(text[to-1])) {
			to--
		}
		if to > from {
			s.lines = append(s.lines, line{int32(from), int32(to), num})
		}
		num += extra
		start = next
	}
	return s
}

// openQuote looks for a quoted cell that begins on the line text[start:stop] and
// runs over the next lines, as spreadsheets write headers of two lines. It
// returns the end of the line on which the cell closes and how many further
// lines that takes, 0 if there is no such cell.
func openQuote(text string, start, stop int, end byte) (to, lines int) {
	const most = 4
	if strings.Count(text[start:stop], `"`)%2 == 0 {
		return 0, 0
	}
	at := start + strings.LastIndexByte(text[start:stop], '"')
	if at > start && strings.IndexByte(",;\t|", text[at-1]) < 0 {
		return 0, 0
	}
	for n := 1; n <= most && stop < len(text); n++ {
		from := stop + 1
		length := strings.IndexByte(text[from:], end)
		if length < 0 {
			length = len(text) - from
		}
		stop = from + length
		i := strings.IndexByte(text[from:stop], '"')
		if i < 0 {
			continue
		}
		if i += from + 1; i < stop && strings.IndexByte(",;\t|\r", text[i]) < 0 {
			return 0, 0
		}
		if strings.Count(text[from:stop], `"`)%2 == 1 {
			return stop, n
		}
		// The line closes the cell and opens another.
	}
	return 0, 0
}

func isBlank(c byte) bool { return c == ' ' || c == '\t' || c == '\v' || c == '\f' }

func (s *source) lineText(l line) string { return s.text[l.start:l.end] }

func (s *source) cell(c span) string { return s.text[c.start:c.end] }

// column is the place of a cell for a message: characters from the line's
// start, or the number of the cell in a spreadsheet.
func (s *source) column(l line, cells []span, i int) int {
	if s.sheet != "" {
		return i + 1
	}
	if i >= len(cells) {
		return utf8.RuneCountInString(s.lineText(l)) + 1
	}
	return utf8.RuneCountInString(s.text[l.start:cells[i].start]) + 1
}

// split cuts a line into cells, in the given slice's memory.
func (s *source) split(l line, cells []span) []span {
	if cells == nil {
		cells = make([]span, 0, 8)
	}
	return s.splitRange(l.start, l.end, cells[:0])
}

func (s *source) splitRange(start, end int32, cells []span) []span {
	text := s.text
	if s.delim == blanks {
		return splitBlanks(text, start, end, cells)
	}
	delim := s.delim
	for i := start; ; {
		for i < end && text[i] != delim && isBlank(text[i]) {
			i++
		}
		from := i
		if i < end && text[i] == '"' && delim != cellMark {
			if stop, next, ok := quoted(text, i, end, delim); ok {
				cells = append(cells, span{i + 1, stop})
				if next > end {
					return cells
				}
				i = next
				continue
			}
		}
		for i < end && text[i] != delim {
			i++
		}
		to := i
		for to > from && isBlank(text[to-1]) {
			to--
		}
		cells = append(cells, span{from, to})
		if i >= end {
			return cells
		}
		i++
	}
}

func splitBlanks(text string, start, end int32, cells []span) []span {
	for i := start; i < end; {
		for i < end && isBlank(text[i]) {
			i++
		}
		if i >= end {
			break
		}
		if text[i] == '"' {
			if stop, next, ok := quoted(text, i, end, blanks); ok {
				cells = append(cells, span{i + 1, stop})
				i = next
				continue
			}
		}
		from := i
		for i < end && !isBlank(text[i]) {
			i++
		}
		cells = append(cells, span{from, i})
	}
	return cells
}

// quoted finds the end of the quoted cell that opens at i: its closing quote
// must stand before a delimiter or the line's end; a doubled quote is part of
// it. next is where the following cell starts, beyond end if there is none. A
// cell does not run over lines: a lone quote is then text.
func quoted(text string, i, end int32, delim byte) (stop, next int32, ok bool) {
	for j := i + 1; j < end; j++ {
		if text[j] != '"' {
			continue
		}
		if j+1 < end && text[j+1] == '"' {
			j++
			continue
		}
		k := j + 1
		for k < end && isBlank(text[k]) && text[k] != delim {
			k++
		}
		if k >= end {
			return j, end + 1, true
		}
		if text[k] == delim || delim == blanks && isBlank(text[k]) || delim == blanks && k > j+1 {
			return j, k + 1 - b2i(delim == blanks), true
		}
		return 0, 0, false
	}
	return 0, 0, false
}

func b2i(b bool) int32 {
	if b {
		return 1
	}
	return 0
}

// commentSigns start a line that is no data. A semicolon does too where it is
// not the delimiter.
func (s *source) isComment(l line) bool {
	if s.sheet != "" {
		return false
	}
	i := l.start
	for i < l.end && isBlank(s.text[i]) {
		i++
	}
	if i >= l.end {
		return false
	}
	switch s.text[i] {
	case '#', '%', '!':
		return true
	case ';':
		return s.delim != ';'
	case '/':
		return i+1 < l.end && s.text[i+1] == '/'
	}
	return false
}

// uncomment returns the line without its comment signs.
func (s *source) uncomment(l line) line {
	if !s.isComment(l) {
		return l
	}
	for l.start < l.end && strings.IndexByte("#%!;/ \t", s.text[l.start]) >= 0 {
		l.start++
	}
	return l
}

// sniffLines is how many lines, evenly spread, the choice of the delimiter looks at.
const sniffLines = 32

// detectDelimiter chooses delimiter and decimal sign: those under which the
// most cells of the lines looked at are numbers. A line counts for the square
// of its numbers over its cells, at least two of them numbers, so that cutting
// at a decimal comma loses.
func (s *source) detectDelimiter() {
	type choice struct{ delim, decimal byte }
	choices := [...]choice{{',', '.'}, {';', '.'}, {';', ','}, {'\t', '.'}, {'\t', ','}, {'|', '.'}, {'|', ','}, {blanks, '.'}, {blanks, ','}}
	var score [len(choices)]float64
	var cells []span
	n := len(s.lines)
	look := func(l line) {
		if s.isComment(l) {
			return
		}
		var has [256]bool
		for _, c := range []byte(s.text[l.start:l.end]) {
			has[c] = true
		}
		has[blanks] = has[blanks] || has['\t']
		for i, c := range choices {
			if !has[c.delim] || c.decimal == ',' && !has[','] {
				continue
			}
			s.delim = c.delim
			numbers := 0
			if c.delim != blanks && c.decimal == '.' {
				numbers = s.onlyNumbers(l)
			}
			total := numbers
			if numbers == 0 {
				cells = s.split(l, cells)
				for _, cell := range cells {
					t := s.cell(cell)
					if t == "" {
						continue
					}
					total++
					if looksNumber(t, c.decimal) {
						numbers++
					}
				}
			}
			if numbers >= 2 {
				score[i] += float64(numbers*numbers) / float64(total)
			}
		}
	}
	step := max(1, n/sniffLines)
	for i := n - 1; i >= 0; i -= step {
		look(s.lines[i])
	}
	best := 0
	for i := range choices {
		if score[i] > score[best] {
			best = i
		}
	}
	s.delim, s.decimal = choices[best].delim, choices[best].decimal
	if score[best] == 0 {
		// No rows of numbers: only the wording of an error depends on it.
		for _, c := range []byte{',', ';', '\t', blanks} {
			for _, l := range s.lines {
				if strings.IndexByte(s.lineText(l), c) >= 0 {
					s.delim, s.decimal = c, '.'
					return
				}
			}
		}
	}
}

// onlyNumbers counts the cells of a line that has nothing but plain numbers with
// decimal points, 0 for any other line. It is a quick look.
func (s *source) onlyNumbers(l line) int {
	i, end := int(l.start), int(l.end)
	for n := 1; ; n++ {
		_, next, ok := decimal(s.text, i)
		switch {
		case !ok:
			return 0
		case next >= end:
			return n
		case s.text[next] != s.delim:
			return 0
		}
		i = next + 1
	}
}

// checkDecimal refuses a file whose commas could all group thousands: "1,500"
// may be one and a half or fifteen hundred. One number that can be read in one
// way only settles it.
func (s *source) checkDecimal() *Error {
	if s.decimal != ',' {
		return nil
	}
	var cells []span
	var first *Error
	for _, l := range s.lines {
		if s.isComment(l) {
			continue
		}
		cells = s.split(l, cells)
		for i, c := range cells {
			t := s.cell(c)
			if strings.IndexByte(t, ',') < 0 || !looksNumber(t, ',') {
				continue
			}
			if !thousands(t) {
				return nil
			}
			if first == nil {
				first = &Error{Line: int(l.num), Column: s.column(l, cells, i), Found: t, Err: ErrAmbiguous,
					Expected: "numbers whose comma is clearly decimal", Hint: "save with a decimal point and without thousands separators"}
			}
		}
	}
	return first
}

// delimiterName is for Reading.
func (s *source) delimiterName() string {
	switch s.delim {
	case ',':
		return "comma"
	case ';':
		return "semicolon"
	case '\t':
		return "tab"
	case '|':
		return "vertical bar"
	case blanks:
		return "blanks"
	}
	return "cells"
}

func (s *source) decimalName() string {
	if s.decimal == ',' {
		return "comma"
	}
	return "point"
}
