package quantity

import (
	"fmt"
	"strings"
	"unicode/utf8"
)

// unitForm says how a unit may be written and whether it takes prefixes.
type unitForm struct {
	exact  []string // spelled exactly so, after an optional prefix
	folded []string // in any case
	// read and shown are the prefixes that are understood and printed. Kelvin
	// takes no kilo ("10k" where 10 K is meant), angles and temperatures take
	// none, and nobody prints kilohours.
	read  string
	shown bool
}

const allPrefixes = "afpnµmkMGT"

// forms holds the units of this field. A unit that is not listed is accepted
// as it is spelled, with any prefix, so that units such as F·s^(n-1) or Ω·s^½
// need no entry.
var forms = map[string]unitForm{
	"Ω":   {exact: []string{"Ω"}, folded: []string{"ohm", "ohms"}, read: allPrefixes, shown: true},
	"F":   {exact: []string{"F"}, folded: []string{"farad", "farads"}, read: allPrefixes, shown: true},
	"H":   {exact: []string{"H"}, folded: []string{"henry", "henries", "henrys"}, read: allPrefixes, shown: true},
	"Hz":  {exact: []string{"Hz"}, folded: []string{"hz", "hertz"}, read: allPrefixes, shown: true},
	"S":   {exact: []string{"S", "℧"}, folded: []string{"siemens", "mho", "mhos"}, read: allPrefixes, shown: true},
	"s":   {exact: []string{"s"}, folded: []string{"sec", "second", "seconds"}, read: allPrefixes, shown: true},
	"V":   {exact: []string{"V", "v"}, folded: []string{"volt", "volts"}, read: allPrefixes, shown: true},
	"A":   {exact: []string{"A"}, folded: []string{"amp", "amps", "ampere", "amperes"}, read: allPrefixes, shown: true},
	"W":   {exact: []string{"W", "w"}, folded: []string{"watt", "watts"}, read: allPrefixes, shown: true},
	"K":   {exact: []string{"K"}, folded: []string{"kelvin"}, read: "µm"},
	"°C":  {exact: []string{"°C", "C", "℃", "º"}, folded: []string{"degc", "deg c", "°c", "celsius"}},
	"K/W": {exact: []string{"K/W", "°C/W", "C/W", "℃/W"}, folded: []string{"degc/w"}, read: "m"},
	"h":   {exact: []string{"h"}, folded: []string{"hour", "hours", "hrs", "hr"}, read: "k"},
	"°":   {exact: []string{"°", "º"}, folded: []string{"deg", "degs", "degree", "degrees"}},
	"rad": {folded: []string{"rad", "rads", "radian", "radians"}, read: "µm", shown: true},
	"dB":  {folded: []string{"db"}},
	"%":   {exact: []string{"%"}},
	"1":   {read: allPrefixes},
	"":    {read: allPrefixes},
}

// is reports whether text is a way to write the unit, without a prefix.
func (f unitForm) is(text string) bool {
	for _, s := range f.exact {
		if s == text {
			return true
		}
	}
	for _, s := range f.folded {
		if strings.EqualFold(s, text) {
			return true
		}
	}
	return false
}

func formOf(unit string) unitForm {
	if f, ok := forms[unit]; ok {
		return f
	}
	return unitForm{exact: []string{unit}, read: allPrefixes, shown: true}
}

// tidy replaces the look-alikes that Unicode offers: both micro signs, the ohm
// sign, minus signs, and spaces that are not a space.
var tidy = strings.NewReplacer(
	"\u03bc", "µ", "\u2126", "Ω", "\u2127", "℧", "\u2212", "-", "\u2013", "-",
	"\u00a0", " ", "\u2009", " ", "\u202f", " ", "\u2007", " ",
)

func canonical(text string) string {
	for i := 0; i < len(text); i++ {
		if text[i] >= utf8.RuneSelf {
			return strings.TrimSpace(tidy.Replace(text))
		}
	}
	return strings.TrimSpace(text)
}

// Exponent returns the power of ten that a unit text stands for: "kHz" is 3
// where unit is "Hz", "mOhm" is −3 where unit is "Ω", "F" is 0 where unit is
// "F". An empty text and a lone prefix ("k") count as the unit itself. ok is
// false where the text is no way to write the unit.
func Exponent(text, unit string) (exp int, ok bool) {
	return unitExponent(canonical(text), unit)
}

// unitExponent works on canonical text.
func unitExponent(text, unit string) (int, bool) {
	form := formOf(unit)
	if text == "" || form.is(text) {
		return 0, true
	}
	if unit == "Hz" {
		if exp, ok := hertzExponent(text); ok {
			return exp, true
		}
	}
	_, size := utf8.DecodeRuneInString(text)
	sign, rest := text[:size], strings.TrimLeft(text[size:], " ")
	if sign == "u" {
		sign = "µ"
	}
	exp, ok := prefixExponent(sign)
	if !ok || !strings.Contains(form.read, sign) {
		return 0, false
	}
	if rest == "" || form.is(rest) {
		return exp, true
	}
	// After a prefix nothing else than the unit can follow, so small letters
	// are safe there: 10uf, 4.7nh.
	if (unit == "F" || unit == "H") && strings.EqualFold(rest, unit) {
		return exp, true
	}
	return 0, false
}

// hertzExponent reads hertz with the prefix in capitals or small letters
// throughout, where case says nothing: MHZ and mhz are mega (contract:
// quantities), mHz stays milli.
func hertzExponent(text string) (int, bool) {
	switch text {
	case "KHZ", "khz", "KHz", "Khz":
		return 3, true
	case "MHZ", "mhz":
		return 6, true
	case "GHZ", "ghz":
		return 9, true
	case "THZ", "thz":
		return 12, true
	}
	return 0, false
}

// known lists the units that a wrong unit is compared with, in a fixed order.
var known = []string{"Hz", "Ω", "F", "H", "S", "V", "A", "W", "s", "°C", "K/W", "K", "°", "rad", "dB", "%", "h"}

// foundUnit names the unit that text is in, if it is one of the known ones.
func foundUnit(text, wanted string) string {
	for _, unit := range known {
		if unit == wanted {
			continue
		}
		if _, ok := unitExponent(text, unit); !ok {
			continue
		}
		// A lone prefix fits every unit and says nothing.
		if _, lone := prefixExponent(text); lone {
			continue
		}
		return unit
	}
	return ""
}

func unitHint(text, unit string) string {
	if rest, ok := strings.CutPrefix(text, "K"); ok {
		if exp, ok := unitExponent("k"+rest, unit); ok && exp == 3 {
			return fmt.Sprintf("kilo is a small k, as in k%s", unit)
		}
	}
	if unit == "K" && text == "k" {
		return "kelvin is a capital K"
	}
	return ""
}
