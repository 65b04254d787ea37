package quantity

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Error says why a text is not a quantity of the wanted unit.
type Error struct {
	Text     string // as given, without the spaces around it
	Found    string // unit found, "" if none was recognised
	Expected string // unit wanted
	Hint     string // what to try, "" if nothing is known to help
}

// Error is one line that names found and expected.
func (e *Error) Error() string {
	var b strings.Builder
	fmt.Fprintf(&b, "expected %s, found %q", e.Want(), e.Text)
	if e.Found != "" {
		fmt.Fprintf(&b, " in %s", e.Found)
	}
	if e.Hint != "" {
		fmt.Fprintf(&b, "; %s", e.Hint)
	}
	return b.String()
}

// Want names what was wanted, in words for a message.
func (e *Error) Want() string {
	switch e.Expected {
	case "", "1":
		return "a number"
	}
	return "a value in " + e.Expected
}

// Parse reads a quantity and returns it in the SI unit wanted:
//
//	Parse("10uF", "F")    1e-5
//	Parse("100 kHz", "Hz") 1e5
//	Parse("35 mohm", "Ω") 0.035
//	Parse("4k7", "Ω")     4700      IEC 60062: the letter is the decimal point
//	Parse("1e-6", "F")    1e-6      a plain number is in the wanted unit
//
// The result is the correctly rounded number: "4.7n" is 4.7e-9 to the bit.
// Where unit is "Ω" the code letters are R, k or K, M, G, T and m; otherwise
// they are the prefixes, so R47 is refused for farads and henries, where the
// trade means micro or pico by it. Where unit is "°" or "rad" the other one is
// converted; where unit is "1", "2%" is 0.02. NaN, infinities, hexadecimal
// numbers and the decimal comma are refused. The error is an [*Error].
func Parse(text, unit string) (float64, error) {
	text = canonical(text)
	fail := func(found, hint string) (float64, error) {
		return 0, &Error{Text: text, Found: found, Expected: unit, Hint: hint}
	}
	num, rest := splitNumber(text)
	if num == "" {
		if v, ok := parseCode(text, unit); ok {
			return v, nil
		}
		return fail("", codeHint(text, unit))
	}
	if rest == "" {
		return finite(num, 0, fail)
	}
	spaced := rest[0] == ' '
	rest = strings.TrimLeft(rest, " ")
	if exp, ok := unitExponent(rest, unit); ok {
		return finite(num, exp, fail)
	}
	if unit == "1" && rest == "%" {
		return finite(num, -2, fail)
	}
	if factor, ok := angleFactor(rest, unit); ok {
		v, err := finite(num, 0, fail)
		return v * factor, err
	}
	if !spaced {
		if v, ok := parseCode(text, unit); ok {
			return v, nil
		}
	}
	if rest[0] == ',' {
		return fail("", "the decimal sign is a point")
	}
	hint := codeHint(text, unit)
	if hint == "" {
		hint = unitHint(rest, unit)
	}
	return fail(foundUnit(rest, unit), hint)
}

// ParsePercent reads a fraction: "0.1%" and "0.001" are both 0.001.
func ParsePercent(text string) (float64, error) {
	v, err := Parse(text, "1")
	if e, ok := err.(*Error); ok {
		e.Hint = "write a percentage such as 0.1% or a fraction such as 0.001"
	}
	return v, err
}

// angleFactor converts between degrees and radians.
func angleFactor(text, unit string) (float64, bool) {
	switch {
	case unit == "rad" && forms["°"].is(text):
		return math.Pi / 180, true
	case unit == "°" && forms["rad"].is(text):
		return 180 / math.Pi, true
	case unit == "°" && (text == "mrad"):
		return 0.18 / math.Pi, true
	}
	return 0, false
}

// finite parses num·10^exp in one rounding.
func finite(num string, exp int, fail func(found, hint string) (float64, error)) (float64, error) {
	if exp != 0 {
		if i := strings.IndexAny(num, "eE"); i >= 0 {
			e, err := strconv.Atoi(num[i+1:])
			if err != nil {
				return fail("", "the exponent is too large")
			}
			num, exp = num[:i], exp+e
		}
		num += "e" + strconv.Itoa(exp)
	}
	v, err := strconv.ParseFloat(num, 64)
	if err != nil || math.IsInf(v, 0) {
		return fail("", "the number is too large")
	}
	return v, nil
}

// splitNumber cuts a decimal number off the front of text. An e is part of it
// only if digits follow.
func splitNumber(text string) (num, rest string) {
	i := 0
	if i < len(text) && (text[i] == '+' || text[i] == '-') {
		i++
	}
	digits := func() int {
		start := i
		for i < len(text) && '0' <= text[i] && text[i] <= '9' {
			i++
		}
		return i - start
	}
	n := digits()
	if i < len(text) && text[i] == '.' {
		i++
		n += digits()
	}
	if n == 0 {
		return "", text
	}
	if i < len(text) && (text[i] == 'e' || text[i] == 'E') {
		mark := i
		i++
		if i < len(text) && (text[i] == '+' || text[i] == '-') {
			i++
		}
		if digits() == 0 {
			i = mark
		}
	}
	return text[:i], text[i:]
}

// parseCode reads an IEC 60062 code: digits with one letter in place of the
// decimal point, such as 4R7, R47, 4k7, 10K, 4n7, 3F3.
func parseCode(text, unit string) (float64, bool) {
	sign := ""
	if text != "" && (text[0] == '-' || text[0] == '+') {
		sign, text = text[:1], text[1:]
	}
	i := 0
	for i < len(text) && '0' <= text[i] && text[i] <= '9' {
		i++
	}
	before := text[:i]
	_, size := utf8.DecodeRuneInString(text[i:])
	letter, after := text[i:i+size], text[i+size:]
	for j := 0; j < len(after); j++ {
		if after[j] < '0' || after[j] > '9' {
			return 0, false
		}
	}
	if before == "" && after == "" {
		return 0, false
	}
	exp, ok := codeExponent(letter, unit, after != "")
	if !ok {
		return 0, false
	}
	if before == "" {
		before = "0"
	}
	v, err := strconv.ParseFloat(sign+before+"."+after+"0e"+strconv.Itoa(exp), 64)
	return v, err == nil && !math.IsInf(v, 0)
}

// codeExponent returns the power of ten of a code letter. IEC 60062 gives R K
// M G T for resistance and p n µ m F for capacitance; k, and the prefixes for
// other units, are common practice. inside means that digits follow.
func codeExponent(letter, unit string, inside bool) (int, bool) {
	resistance := unit == "Ω" || unit == "" && inside
	switch {
	case resistance && letter == "R":
		return 0, true
	case resistance && letter == "K":
		return 3, true
	case unit == "F" && letter == "F", unit == "V" && letter == "V":
		return 0, true
	}
	if letter == "u" {
		letter = "µ"
	}
	if !strings.Contains(formOf(unit).read, letter) || letter == "" {
		return 0, false
	}
	return prefixExponent(letter)
}

// codeHint explains the codes that are refused.
func codeHint(text, unit string) string {
	if unit == "F" || unit == "H" {
		if _, ok := parseCode(text, "Ω"); ok && strings.Contains(text, "R") {
			return fmt.Sprintf("R as decimal point is for ohms; write the prefix, such as 0.47u%s", unit)
		}
	}
	return ""
}
