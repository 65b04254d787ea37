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
	last  int   // last column needed
	cols  int   // of the header; a row with more is not plain
	slot  []int // by column: index of the value in a row, −1 if it is not needed
	exp   []int // by slot
	never []bool
	vals  []float64
}

// newPlainRow returns nil where a plan is not plain.
func newPlainRow(s *source, p *plan) *plainRow {
	if len(p.groups) != 1 || p.groups[0].part >= 0 || len(p.also) > 0 || s.delim == blanks || s.decimal != '.' {
		return nil
	}
	pr := &plainRow{delim: s.delim, slot: make([]int, len(p.cols)), cols: len(p.cols)}
	if p.loose {
		pr.cols = math.MaxInt
	}
	for i := range pr.slot {
		pr.slot[i] = -1
	}
	for _, c := range append(freqsOf(p), p.need...) {
		switch p.cols[c].role {
		case roleZ, roleY, roleS:
			return nil
		}
		if pr.slot[c] >= 0 {
			continue
		}
		pr.slot[c] = len(pr.exp)
		pr.exp = append(pr.exp, p.cols[c].unit.exp)
		pr.never = append(pr.never, p.cols[c].role.neverNegative())
		pr.last = max(pr.last, c)
	}
	pr.vals = make([]float64, len(pr.exp))
	return pr
}

// read reads a line into vals; false means that the line is not plain.
func (pr *plainRow) read(text string) bool {
	i := 0
	for c := 0; ; c++ {
		k := pr.slot[c]
		if k < 0 {
			if i < len(text) && text[i] == '"' {
				return false // a delimiter may hide between quotes
			}
			j := strings.IndexByte(text[i:], pr.delim)
			if j < 0 {
				return false // the last column is always needed
			}
			i += j + 1
			continue
		}
		for i < len(text) && text[i] == ' ' {
			i++
		}
		v, end, ok := decimal(text, i)
		if !ok {
			// Too long for the short way, or no number at all.
			j := strings.IndexByte(text[i:], pr.delim)
			if j < 0 {
				j = len(text) - i
			}
			cell := strings.TrimRight(text[i:i+j], " ")
			if cell == "" || cell[0] > '9' || isHex(cell) {
				return false
			}
			var err error
			if v, err = strconv.ParseFloat(cell, 64); err != nil || !(math.Abs(v) < overload) {
				return false
			}
			end = i + j
		}
		i = end
		for i < len(text) && text[i] == ' ' {
			i++
		}
		if v < 0 && pr.never[k] {
			return false
		}
		if e := pr.exp[k]; e != 0 {
			v = scale(v, e)
		}
		pr.vals[k] = v
		if c == pr.last {
			return i == len(text) || text[i] == pr.delim && c+1+strings.Count(text[i:], string(rune(pr.delim))) <= pr.cols
		}
		if i >= len(text) || text[i] != pr.delim {
			return false
		}
		i++
	}
}

// powers are exact in float64.
var powers = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// decimal reads a short decimal number at text[i] while it looks for its end:
// up to 15 digits and a power of ten up to 10^22, both exact in float64, so that
// one multiplication or division gives the correctly rounded number (Clinger
// 1990, "How to read floating point numbers accurately", the fast case; strconv
// does the same, but needs to know the end first). Anything else is not ok and
// goes to strconv.ParseFloat.
func decimal(text string, i int) (v float64, end int, ok bool) {
	negative := false
	if i < len(text) && (text[i] == '-' || text[i] == '+') {
		negative = text[i] == '-'
		i++
	}
	mantissa, digits, start := uint64(0), 0, i
	for i < len(text) && text[i]-'0' < 10 {
		mantissa = mantissa*10 + uint64(text[i]-'0')
		i++
	}
	digits = i - start
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
	if digits == 0 || digits > 15 {
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
	case exp == 0:
	case 0 < exp && exp <= 22:
		v *= powers[exp]
	case -22 <= exp && exp < 0:
		v /= powers[-exp]
	default:
		return 0, i, false
	}
	if v >= overload {
		return 0, i, false
	}
	if negative {
		v = -v
	}
	return v, i, true
}
