package report

import (
	"math"
	"strconv"
	"strings"

	"realpart/models"
	"realpart/models/quantity"
)

// valueText gives a value and its interval, rounded to the place of the
// second significant digit of the interval's half-width (GUM 7.2.6), with one
// prefix: "9.873 µF" and "9.851 … 9.895". Without an interval the value has
// four digits and the second text is empty.
func valueText(value float64, low, high *float64, unit string) (string, string) {
	if low == nil || high == nil || !(*low < *high) {
		return quantity.Format(value, unit, 4), ""
	}
	text := quantity.FormatInterval(value, *low, *high, unit)
	number, interval, _ := strings.Cut(text, " (")
	return number, strings.TrimSuffix(interval, ")")
}

// widest is the ratio of the ends of an interval above which a figure is
// given by its interval alone, as a parameter is (design: not determined).
const widest = 4

// Texts gives a parameter for people: its value and 95 % interval, rounded to
// the place of the second significant digit of the interval's half-width (GUM
// 7.2.6) with one prefix, and the half-width relative to the value: "9.873 µF",
// "9.851 … 9.895", "± 0.22 %". A value that is not determined is given as a
// bound ("< 310 pH", "not determined") or not at all.
func (p Parameter) Texts() (value, interval, relative string) {
	switch {
	case p.Fixed:
		return quantity.Format(p.Value, p.Unit, 6), "fixed", ""
	case p.Determined:
		value, interval = valueText(p.Value, p.Low95, p.High95, p.Unit)
		return value, interval, relativeText(p.Value, p.Low95, p.High95)
	case p.Low95 != nil && p.High95 != nil, p.Low95 == nil && p.High95 == nil:
		return "not determined", boundText(p.Low95, p.High95, p.Unit), ""
	}
	return boundText(p.Low95, p.High95, p.Unit), "not determined", ""
}

// Short gives a parameter with three digits, or what is known of it, for a
// drawing.
func (p Parameter) Short() string {
	if p.Determined {
		return quantity.Format(p.Value, p.Unit, 3)
	}
	if s := boundText(p.Low95, p.High95, p.Unit); s != "" {
		return s
	}
	return "?"
}

// Texts gives a self-resonance for people: frequency, 95 % interval, |Z| there.
func (r Resonance) Texts() (freq, interval, impedance string) {
	freq, interval = valueText(r.FHz, r.Low95Hz, r.High95Hz, "Hz")
	return freq, interval, quantity.Format(r.ImpedanceOhm, "Ω", 3)
}

// Texts gives a figure for people: the value and 95 % interval of the fit, and
// the measured value, "" outside the sweep. One whose interval spans more than
// a factor of widest is "not determined".
func (v Figure) Texts() (value, interval, measured string) {
	if v.Measured != nil {
		measured = quantity.Format(*v.Measured, v.Unit, 4)
	}
	value, interval = figureText(v)
	return value, interval, measured
}

func figureText(v Figure) (string, string) {
	positive := v.Name == models.ESR || v.Name == models.D || v.Name == models.Q || v.Name == models.Zabs
	if positive && v.Value > 0 {
		switch {
		case v.Low95 == nil && v.High95 == nil:
		case v.Low95 == nil, v.High95 == nil, *v.High95 > widest**v.Low95:
			return "not determined", boundText(v.Low95, v.High95, v.Unit)
		}
	}
	return valueText(v.Value, v.Low95, v.High95, v.Unit)
}

// boundText says what is known of a parameter that is not determined: "< 0.3
// nH", "> 12 MΩ", "1.1 … 9.2 nH", or "" for nothing. Bounds are rounded
// outwards to two digits.
func boundText(low, high *float64, unit string) string {
	switch {
	case low != nil && high != nil:
		return quantity.Format(quantity.Outward(*low, false), unit, 2) + " … " + quantity.Format(quantity.Outward(*high, true), unit, 2)
	case high != nil:
		return "< " + quantity.Format(quantity.Outward(*high, true), unit, 2)
	case low != nil:
		return "> " + quantity.Format(quantity.Outward(*low, false), unit, 2)
	}
	return ""
}

// relativeText gives the half-width of an interval relative to its value:
// "± 0.22 %". A percentage below a thousandth is not worth digits.
func relativeText(value float64, low, high *float64) string {
	if low == nil || high == nil || value == 0 {
		return ""
	}
	half := max(*high-value, value-*low) / math.Abs(value)
	if !(half > 0) {
		return ""
	}
	return "± " + FormatPercent(half)
}

// FormatPercent gives a fraction with two significant digits in percent, or as a
// power of ten where it is very small.
func FormatPercent(v float64) string {
	switch {
	case v == 0:
		return "0 %"
	case v < 1e-6:
		return strconv.FormatFloat(v, 'e', 1, 64)
	}
	return quantity.Format(100*v, "%", 2)
}

// FormatFrequency gives a frequency with the digits it needs, four at most.
func FormatFrequency(f float64) string {
	for digits := 1; digits < 4; digits++ {
		rounded, _ := strconv.ParseFloat(strconv.FormatFloat(f, 'e', digits-1, 64), 64)
		if math.Abs(rounded-f) <= 1e-12*f {
			return quantity.Format(f, "Hz", max(digits, integerDigits(f)))
		}
	}
	return quantity.Format(f, "Hz", 4)
}

// integerDigits is how many digits stand before the point once the SI prefix
// is chosen: 3 for 100 kHz.
func integerDigits(f float64) int {
	text := strconv.FormatFloat(f, 'e', 2, 64)
	exponent, _ := strconv.Atoi(text[strings.IndexByte(text, 'e')+1:])
	return ((exponent%3)+3)%3 + 1
}
