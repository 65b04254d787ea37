package ingest

import (
	"math"
	"strconv"
	"strings"
)

// plainRow reads rows of the plain dialect: one part, a delimiter that is one
// byte, decimal points, nothing but numbers in the columns that are needed. That
// is what most files are, and where the time goes. Whatever is out of the
// ordinary makes it decline a row, which then goes the general way with its
// checks and messages; it never decides anything itself.
type plainRow struct {
	delim byte
	cols  int // of the header; a row with more is not plain
	cells []plainCell
	vals  []float64 // of the columns needed
}

// plainCell is a column up to the last that is needed.
type plainCell struct {
	slot          int // index of the value in vals, −1 if it is not needed
	exp           int
	neverNegative bool
}

// newPlainRow returns nil where a plan is not plain.
func newPlainRow(s *source, p *plan) *plainRow {
	if len(p.groups) != 1 || p.groups[0].part >= 0 || len(p.also) > 0 || s.delim == blanks || s.decimal != '.' {
		return nil
	}
	pr := &plainRow{delim: s.delim, cells: make([]plainCell, len(p.cols)), cols: len(p.cols)}
	if p.loose {
		pr.cols = math.MaxInt
	}
	for i := range pr.cells {
		pr.cells[i].slot = -1
	}
	last, slots := 0, 0
	for n := -1; n < len(p.need); n++ {
		c := p.groups[0].freq
		if n >= 0 {
			c = p.need[n]
		}
		switch p.cols[c].role {
		case roleZ, roleY, roleS:
			return nil
		}
		if pr.cells[c].slot >= 0 {
			continue
		}
		pr.cells[c] = plainCell{slots, p.cols[c].unit.exp, p.cols[c].role.neverNegative()}
		slots++
		last = max(last, c)
	}
	pr.cells = pr.cells[:last+1]
	pr.vals = make([]float64, slots)
	return pr
}

// store appends the row in vals, which is line i, and the plain rows that follow
// without a gap. It returns how many that makes.
func (pr *plainRow) store(seg *segment, s *source, i int) int {
	text, lines := s.text, s.lines[i:]
	columns := seg.vals[:len(pr.vals)]
	n := 0
	for {
		for k, v := range pr.vals {
			columns[k] = append(columns[k], v)
		}
		num := lines[n].num
		if n++; n == len(lines) || lines[n].num != num+1 || !pr.read(text, lines[n]) {
			break
		}
	}
	for _, l := range lines[:n] {
		seg.line = append(seg.line, l.num)
	}
	return n
}

// read reads a line into vals; false means that the line is not plain.
func (pr *plainRow) read(text string, l line) bool {
	i, end := int(l.start), int(l.end)
	for c := range pr.cells {
		cell := &pr.cells[c]
		if cell.slot < 0 {
			if i < end && text[i] == '"' {
				return false // a delimiter may hide between quotes
			}
			j := strings.IndexByte(text[i:end], pr.delim)
			if j < 0 {
				return false // the last column is always needed
			}
			i += j + 1
			continue
		}
		for i < end && text[i] == ' ' {
			i++
		}
		v, next, ok := decimal(text, i)
		if !ok {
			// Too long for the short way, or no number at all.
			if next = strings.IndexByte(text[i:end], pr.delim); next < 0 {
				next = end - i
			}
			next += i
			number := strings.TrimRight(text[i:next], " ")
			if number == "" || number[0] > '9' || isHex(number) {
				return false
			}
			var err error
			if v, err = strconv.ParseFloat(number, 64); err != nil || !(math.Abs(v) < overload) {
				return false
			}
		}
		i = next
		for i < end && text[i] == ' ' {
			i++
		}
		if v < 0 && cell.neverNegative {
			return false
		}
		if cell.exp != 0 {
			v = scale(v, cell.exp)
		}
		pr.vals[cell.slot] = v
		if c < len(pr.cells)-1 {
			if i >= end || text[i] != pr.delim {
				return false
			}
			i++
		}
	}
	// What stands behind is not looked at, but must not be too much.
	return i >= end || text[i] == pr.delim && len(pr.cells)+strings.Count(text[i:end], string(rune(pr.delim))) <= pr.cols
}

// powers are exact in float64.
var powers = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// Limits of the short way: the digits that a uint64 holds, and the mantissa up
// to which every integer is a float64.
const (
	maxDigits   = 19
	maxMantissa = 1 << 53
)

// decimal reads a decimal number at text[i] while it looks for its end: a
// mantissa up to 2⁵³ and a power of ten up to 10^22, both exact in float64, so
// that one multiplication or division gives the correctly rounded number
// (Clinger 1990, "How to read floating point numbers accurately", the fast case;
// strconv does the same, but needs to know the end first). Anything else is not
// ok and goes to strconv.ParseFloat.
//
// Note: taking eight digits at once was slower: where a number ends is then
// known only after a chain of operations, while a loop goes on with the end that
// the processor predicts.
func decimal(text string, i int) (v float64, end int, ok bool) {
	negative := false
	if i < len(text) && (text[i] == '-' || text[i] == '+') {
		negative = text[i] == '-'
		i++
	}
	mantissa, start := uint64(0), i
	for i < len(text) && text[i]-'0' < 10 {
		mantissa = mantissa*10 + uint64(text[i]-'0')
		i++
	}
	digits := i - start
	exp := 0
	if i < len(text) && text[i] == '.' {
		i++
		point := i
		for i < len(text) && text[i]-'0' < 10 {
			mantissa = mantissa*10 + uint64(text[i]-'0')
			i++
		}
		exp = point - i
		digits -= exp
	}
	if digits == 0 || digits > maxDigits || mantissa > maxMantissa {
		return 0, i, false
	}
	if i < len(text) && text[i]|0x20 == 'e' {
		j := i + 1
		minus := false
		if j < len(text) && (text[j] == '-' || text[j] == '+') {
			minus = text[j] == '-'
			j++
		}
		e, first := 0, j
		for j < len(text) && text[j]-'0' < 10 && j < first+4 {
			e = e*10 + int(text[j]-'0')
			j++
		}
		if j == first {
			return 0, i, false
		}
		if minus {
			e = -e
		}
		exp += e
		i = j
	}
	v = float64(mantissa)
	switch {
	case exp <= 0 && -exp < len(powers):
		v /= powers[-exp]
	case 0 < exp && exp < len(powers):
		if v *= powers[exp]; v >= overload {
			return 0, i, false
		}
	default:
		return 0, i, false
	}
	if negative {
		v = -v
	}
	return v, i, true
}
