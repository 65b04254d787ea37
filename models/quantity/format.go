package quantity

import (
	"math"
	"strconv"
	"strings"
)

// Limits of the prefixes: smallest and largest decimal exponent printed with
// one (1 a… and 999 T…).
const (
	minExponent = -18
	maxExponent = 14
)

// mostDigits is what a float64 carries; more would print noise.
const mostDigits = 15

// Format prints a value with the given number of significant digits (at least
// 1, at most 15), the SI prefix that leaves one to three digits before the
// point, and the unit: "9.87 µF", "-21.3 mΩ", "0 F". The prefix is chosen after
// rounding, so 999.96 mΩ with three digits is "1.00 Ω", never "1000 mΩ".
// Outside a … T it falls back on e-notation. Units "1", "", "°", "°C", "K",
// "K/W", "h", "dB" and "%" take no prefix.
func Format(value float64, unit string, digits int) string {
	if value == 0 || math.IsNaN(value) || math.IsInf(value, 0) {
		return join(special(value), unit)
	}
	digits = min(max(digits, 1), mostDigits)
	exp := exponentAfterRounding(value, digits)
	p, plain := choosePrefix(exp, unit)
	if !plain {
		return join(strconv.FormatFloat(value, 'e', digits-1, 64), unit)
	}
	return join(atPlace(value, exp-digits+1, p.exp), p.sign+unit)
}

// FormatUncertain prints a value with its standard uncertainty in the manner of
// GUM 7.2.6: the uncertainty with two significant digits, the value rounded to
// the same place, one prefix for both, chosen by the larger.
//
//	FormatUncertain(9.8731e-6, 2.24e-8, "F")  "9.873", "0.022", "µF"
//
// An uncertainty of zero, or none (negative, NaN, infinite), leaves the value
// with six digits and unc empty.
func FormatUncertain(value, u float64, unit string) (val, unc, prefixed string) {
	if math.IsNaN(value) || math.IsInf(value, 0) || !(u > 0) || math.IsInf(u, 0) {
		val = Format(value, unit, 6)
		if rest, ok := strings.CutSuffix(val, "°"); ok && unit == "°" {
			return rest, "", unit
		}
		val, prefixed, _ = strings.Cut(val, " ")
		return val, "", prefixed
	}
	place := exponentAfterRounding(u, 2) - 1
	var texts [2]string
	prefixed = common(texts[:], []float64{value, u}, place, unit)
	if unit == "1" {
		prefixed = ""
	}
	return texts[0], texts[1], prefixed
}

// FormatInterval prints a value and an interval about it with one prefix:
// "9.873 µF (9.851 … 9.895)". All are rounded to the place of the second
// significant digit of the nearer side's width. A side that is not known (NaN
// or infinite) is left out: "9.873 µF (≥ 9.851)".
func FormatInterval(value, low, high float64, unit string) string {
	finite := func(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
	width := math.Inf(1)
	values := []float64{value}
	for _, side := range []float64{low, high} {
		if finite(side) {
			if w := math.Abs(side - value); w > 0 {
				width = min(width, w)
			}
			values = append(values, side)
		}
	}
	if !finite(value) || !finite(width) {
		return Format(value, unit, 6)
	}
	texts := make([]string, len(values))
	prefixed := common(texts, values, exponentAfterRounding(width, 2)-1, unit)
	out := join(texts[0], prefixed)
	switch {
	case finite(low) && finite(high):
		return out + " (" + texts[1] + " … " + texts[2] + ")"
	case finite(low):
		return out + " (≥ " + texts[1] + ")"
	case finite(high):
		return out + " (≤ " + texts[1] + ")"
	}
	return out
}

// common writes all values rounded at one place (a power of ten) with one
// prefix, chosen by the largest, and returns prefix and unit.
func common(texts []string, values []float64, place int, unit string) string {
	largest := 0.0
	for _, v := range values {
		largest = max(largest, math.Abs(v))
	}
	top := max(exponentAfterRounding(largest, mostDigits), place)
	place = max(place, top-mostDigits+1)
	if n := top - place + 1; n > 0 {
		top = exponentAfterRounding(largest, min(n, mostDigits))
	}
	p, plain := choosePrefix(top, unit)
	if !plain {
		for i, v := range values {
			texts[i] = eNotation(v, place)
		}
		return unit
	}
	for i, v := range values {
		texts[i] = atPlace(v, place, p.exp)
	}
	return p.sign + unit
}

// choosePrefix returns the prefix for a value of the given decimal exponent;
// plain is false where e-notation is needed.
func choosePrefix(exp int, unit string) (p prefix, plain bool) {
	if !formOf(unit).shown {
		return prefix{}, -5 <= exp && exp <= 6
	}
	if exp < minExponent || exp > maxExponent {
		return prefix{}, false
	}
	return prefixes[floorDiv(exp-minExponent, 3)], true
}

func floorDiv(a, b int) int { return int(math.Floor(float64(a) / float64(b))) }

// exponentAfterRounding is the decimal exponent of v rounded to so many
// significant digits: 3 for 999.96 with four.
func exponentAfterRounding(v float64, digits int) int {
	s := strconv.FormatFloat(v, 'e', digits-1, 64)
	exp, _ := strconv.Atoi(s[strings.IndexByte(s, 'e')+1:])
	return exp
}

// rounded returns the decimal digits of |v| rounded at the place 10^place, as
// an integer count of that place. It works on the decimal text, since dividing
// by a power of ten would round twice.
func rounded(v float64, place int) string {
	v = math.Abs(v)
	if v == 0 {
		return "0"
	}
	n := exponentAfterRounding(v, mostDigits+2) - place + 1
	if n <= 0 {
		// Below one unit of the place: half of it rounds up.
		if n == 0 && v >= 5*math.Pow10(place-1) {
			return "1"
		}
		return "0"
	}
	s := strconv.FormatFloat(v, 'e', n-1, 64)
	i := strings.IndexByte(s, 'e')
	exp, _ := strconv.Atoi(s[i+1:])
	digits := strings.Replace(s[:i], ".", "", 1)
	return digits + strings.Repeat("0", max(0, exp-place+1-len(digits)))
}

// atPlace prints v rounded at 10^place in units of 10^scale.
func atPlace(v float64, place, scale int) string {
	digits := rounded(v, place)
	decimals := scale - place
	if decimals <= 0 {
		if digits != "0" {
			digits += strings.Repeat("0", -decimals)
		}
	} else {
		if len(digits) <= decimals {
			digits = strings.Repeat("0", decimals+1-len(digits)) + digits
		}
		digits = digits[:len(digits)-decimals] + "." + digits[len(digits)-decimals:]
	}
	if v < 0 && strings.Trim(digits, "0.") != "" {
		return "-" + digits
	}
	return digits
}

// eNotation prints v rounded at 10^place as a mantissa and an exponent.
func eNotation(v float64, place int) string {
	digits := rounded(v, place)
	if digits == "0" {
		return "0"
	}
	n := len(digits)
	return strconv.FormatFloat(v, 'e', n-1, 64)
}

func special(v float64) string {
	switch {
	case math.IsInf(v, 1):
		return "∞"
	case math.IsInf(v, -1):
		return "-∞"
	case v == 0:
		return "0"
	}
	return "NaN"
}

// join puts unit behind number; the angle's sign follows without a space (SI
// brochure, 5.4.3), the number 1 is not written.
func join(number, unit string) string {
	switch unit {
	case "", "1":
		return number
	case "°":
		return number + unit
	}
	return number + " " + unit
}

// Outward rounds a positive bound to two significant digits, up or down, so that
// it stays a bound.
func Outward(v float64, up bool) float64 {
	nearest, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', 1, 64), 64)
	if nearest == v || nearest > v == up {
		return nearest
	}
	step := math.Pow10(int(math.Floor(math.Log10(v))) - 1)
	if !up {
		step = -step
	}
	return nearest + step
}
