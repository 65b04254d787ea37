package ingest

import (
	"math"
	"math/bits"
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

// powersUint are for digits8.
var powersUint = [...]uint64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8}

// Limits of the short way: the digits that a uint64 holds, and the mantissa up
// to which every integer is a float64.
const (
	maxDigits   = 19
	maxMantissa = 1 << 53
)

// decimalWindow is how many bytes decimal looks at: a sign, the digits, a point,
// an exponent, and up to eight bytes behind them.
const decimalWindow = 32

// decimal reads a decimal number at text[i] while it looks for its end: a
// mantissa up to 2⁵³ and a power of ten up to 10^22, both exact in float64, so
// that one multiplication or division gives the correctly rounded number
// (Clinger 1990, "How to read floating point numbers accurately", the fast case;
// strconv does the same, but needs to know the end first). Anything else is not
// ok and goes to strconv.ParseFloat.
func decimal(text string, i int) (v float64, end int, ok bool) {
	if len(text)-i < decimalWindow {
		var tail [decimalWindow]byte
		copy(tail[:], text[i:])
		v, end, ok = decimal(string(tail[:]), 0)
		return v, i + end, ok
	}
	t := text[i : i+decimalWindow]
	k := 0
	negative := t[0] == '-'
	if negative || t[0] == '+' {
		k = 1
	}
	mantissa, n := digits8(t, k)
	digits := n
	k += n
	for n == 8 {
		if digits > maxDigits-8 {
			return 0, i, false
		}
		var more uint64
		more, n = digits8(t, k)
		mantissa = mantissa*powersUint[n] + more
		digits += n
		k += n
	}
	exp := 0
	if t[k] == '.' {
		k++
		point := k
		for n = 8; n == 8; {
			var more uint64
			more, n = digits8(t, k)
			if digits += n; digits > maxDigits {
				return 0, i, false
			}
			mantissa = mantissa*powersUint[n] + more
			k += n
		}
		exp = point - k
	}
	if digits == 0 || mantissa > maxMantissa {
		return 0, i, false
	}
	if t[k]|0x20 == 'e' {
		j := k + 1
		minus := t[j] == '-'
		if minus || t[j] == '+' {
			j++
		}
		e, first := 0, j
		for t[j]-'0' < 10 && j < first+4 {
			e = e*10 + int(t[j]-'0')
			j++
		}
		if j == first {
			return 0, i, false
		}
		if minus {
			e = -e
		}
		exp += e
		k = j
	}
	v = float64(mantissa)
	switch {
	case exp == 0:
	case 0 < exp && exp < len(powers):
		v *= powers[exp]
	case exp < 0 && -exp < len(powers):
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
	return v, i + k, true
}

// digits8 reads the decimal digits at text[i], up to eight of them: their value
// and their number. It takes eight bytes at once, because a loop over digits,
// whose number differs from cell to cell, is mostly waiting for branches that
// were predicted wrongly.
func digits8(text string, i int) (value uint64, n int) {
	text = text[i : i+8]
	w := uint64(text[0]) | uint64(text[1])<<8 | uint64(text[2])<<16 | uint64(text[3])<<24 |
		uint64(text[4])<<32 | uint64(text[5])<<40 | uint64(text[6])<<48 | uint64(text[7])<<56
	w ^= 0x3030303030303030 // digits are now 0 to 9, all else is more
	// The top bit of each byte says that it is no digit; a carry spoils only
	// bytes behind the first that is none.
	other := (w + 0x7676767676767676 | w) & 0x8080808080808080
	n = bits.TrailingZeros64(other) / 8
	w <<= 64 - 8*uint(n) // zeros in front of the digits
	w = w*10 + w>>8      // in every second byte: pairs
	return ((w&0x000000ff000000ff)*(100+1000000<<32) + (w>>16&0x000000ff000000ff)*(1+10000<<32)) >> 32, n
}
