package ingest

import (
	"math"
	"strconv"
	"strings"
)

// cellKind says what a cell of a number column holds.
type cellKind uint8

const (
	isNumber   cellKind = iota
	isEmpty             // nothing
	isOverload          // a mark of overload, NaN or an infinity
	isText              // anything else
)

// overload is the number that instruments write for a reading out of range
// (9.9E37, IEEE 488.2 and SCPI); whatever is as large is taken for it.
const overload = 9.9e36

// parseNumber reads a cell. The common case, a plain decimal number, costs one
// strconv.ParseFloat.
func parseNumber(s string, decimal byte) (float64, cellKind) {
	if s == "" {
		return 0, isEmpty
	}
	if decimal == ',' {
		t, ok := pointForComma(s)
		if !ok {
			return 0, isText
		}
		s = t
	}
	if c := s[0]; '0' <= c && c <= '9' || c == '-' || c == '+' || c == '.' {
		// Hexadecimal numbers and underscores are not what meters write.
		if v, err := strconv.ParseFloat(s, 64); err == nil {
			if math.Abs(v) < overload && !isHex(s) {
				return v, isNumber
			}
			if isHex(s) {
				return 0, isText
			}
			return 0, isOverload
		}
	}
	return parseOdd(s)
}

func isHex(s string) bool {
	for i := 0; i < len(s) && i < 3; i++ {
		if s[i] == 'x' || s[i] == 'X' {
			return true
		}
	}
	return false
}

// parseOdd reads what ParseFloat refuses: marks, a Unicode minus, a blank
// behind the sign, a Fortran exponent.
func parseOdd(s string) (float64, cellKind) {
	if isMark(s) {
		return 0, isOverload
	}
	t := strings.Replace(s, "\u2212", "-", 2)
	if len(t) > 2 && (t[0] == '+' || t[0] == '-') && t[1] == ' ' {
		t = t[:1] + strings.TrimLeft(t[1:], " ")
	}
	if i := strings.IndexAny(t, "Dd"); i > 0 && i+1 < len(t) {
		t = t[:i] + "e" + t[i+1:]
	}
	if t == s || isHex(t) {
		if v, err := strconv.ParseFloat(s, 64); err != nil && math.IsInf(v, 0) {
			return 0, isOverload // out of range
		}
		return 0, isText
	}
	v, err := strconv.ParseFloat(t, 64)
	switch {
	case err != nil && !math.IsInf(v, 0), math.IsNaN(v):
		return 0, isText
	case !(math.Abs(v) < overload):
		return 0, isOverload
	}
	return v, isNumber
}

// marks of a missing or overloaded reading, besides rows of - * ? and #.
// Common practice, no source.
var marks = []string{
	"OL", "O.L", "0L", "OF", "OVL", "OVLD", "OVER", "OVERLOAD", "OVERFLOW", "OUT", "UL", "UNDER",
	"NAN", "INF", "INFINITY", "∞", "N/A", "NA", "#N/A", "NULL", "NONE", "INVALID", "#DIV/0!", "#NUM!", "#VALUE!",
	"1.#INF", "1.#IND", "1.#QNAN",
}

func isMark(s string) bool {
	t := strings.Trim(s, " .")
	if t == "" {
		return false
	}
	if c := t[0]; c|0x20-'a' >= 26 && (strings.Trim(t, "-") == "" || strings.Trim(t, "*") == "" || strings.Trim(t, "?") == "" || strings.Trim(t, "#") == "" || strings.Trim(t, "—–") == "") {
		return true
	}
	if t = strings.TrimLeft(t, "+-"); len(t) > len("OVERFLOW") {
		return false
	}
	for _, m := range marks {
		if strings.EqualFold(t, m) {
			return true
		}
	}
	return false
}

// pointForComma writes a number with a decimal comma with a decimal point. A
// number that has a point already, or two commas, is refused: in a file with
// decimal commas "1.000" may be one or one thousand.
func pointForComma(s string) (string, bool) {
	i := strings.IndexByte(s, ',')
	if i < 0 {
		if j := strings.IndexByte(s, '.'); j >= 0 && !isMark(s) {
			return s, false
		}
		return s, true
	}
	if strings.IndexByte(s[i+1:], ',') >= 0 || strings.IndexByte(s, '.') >= 0 {
		return s, false
	}
	return s[:i] + "." + s[i+1:], true
}

// looksNumber is a quick test without the value, for the choice of the
// delimiter: a decimal number, or a mark.
func looksNumber(s string, decimal byte) bool {
	if s == "" {
		return false
	}
	i := 0
	if s[0] == '+' || s[0] == '-' {
		i++
	}
	digits, points := 0, 0
	for ; i < len(s); i++ {
		c := s[i]
		if '0' <= c && c <= '9' {
			digits++
			continue
		}
		if c == decimal {
			points++
			// A trailing comma is a delimiter.
			if points > 1 || c == ',' && (i+1 == len(s) || s[i+1] < '0' || s[i+1] > '9') {
				return false
			}
			continue
		}
		break
	}
	if i == len(s) {
		return digits > 0
	}
	if digits == 0 {
		return isMark(s)
	}
	if s[i] == 'e' || s[i] == 'E' {
		_, err := strconv.Atoi(s[i+1:])
		return err == nil
	}
	// A prefix or unit may follow, or the imaginary part.
	rest := s[i:]
	return len(rest) <= 4 && !strings.ContainsAny(rest, ",;\t|") && (rest[0] < '0' || rest[0] > '9') && rest[0] != '.' ||
		rest[0] == '+' || rest[0] == '-'
}

// thousands reports whether a text with commas could be a number grouped in
// thousands: 1,000 or 12,345,678.
func thousands(s string) bool {
	s = strings.TrimLeft(s, "+-")
	groups := strings.Split(s, ",")
	if len(groups) < 2 || len(groups[0]) == 0 || len(groups[0]) > 3 || groups[0][0] == '0' {
		return false
	}
	for i, g := range groups {
		if i > 0 && len(g) != 3 {
			return false
		}
		for j := 0; j < len(g); j++ {
			if g[j] < '0' || g[j] > '9' {
				return false
			}
		}
	}
	return true
}

// parseComplex reads 1.2-3.4j, 1.2 - j3.4, 1.2-3.4i, (1.2-3.4j) or 5j.
func parseComplex(s string) (complex128, bool) {
	if !strings.ContainsAny(s, "ijIJ") {
		return 0, false
	}
	s = strings.TrimSuffix(strings.TrimPrefix(strings.TrimSpace(s), "("), ")")
	s = strings.ReplaceAll(strings.ReplaceAll(s, " ", ""), "\u2212", "-")
	if s == "" {
		return 0, false
	}
	// The sign between the parts: the last one that is not in an exponent.
	cut := -1
	for i := len(s) - 1; i > 0; i-- {
		if (s[i] == '+' || s[i] == '-') && s[i-1] != 'e' && s[i-1] != 'E' {
			cut = i
			break
		}
	}
	if cut < 0 {
		cut = 0
	}
	re, im := s[:cut], s[cut:]
	unit := strings.IndexAny(im, "ijIJ")
	if unit < 0 {
		return 0, false
	}
	im = im[:unit] + im[unit+1:]
	if im == "" || im == "+" || im == "-" {
		im += "1"
	}
	var r float64
	if re != "" {
		var kind cellKind
		if r, kind = parseNumber(re, '.'); kind != isNumber {
			return 0, false
		}
	}
	i, kind := parseNumber(im, '.')
	if kind != isNumber {
		return 0, false
	}
	return complex(r, i), true
}
