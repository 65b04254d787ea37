package ingest

import (
	"fmt"
	"math"
	"strings"
	"unicode"

	"realpart/models/quantity"
)

// unit is a unit as found in a header, a unit row or a flag: value·10^exp is in
// the SI unit dim, an angle in dim "°" or "rad".
type unit struct {
	text string
	dim  string
	exp  int
}

// dims are tried in this order; the texts of two dims do not overlap, lone
// prefixes being excluded.
var dims = []string{"Hz", "Ω", "F", "H", "S", "°", "rad", "dB", "%", "V", "A", "s", "°C"}

// readUnit recognises a unit text. ambiguous is true for spellings in capitals
// whose m could be milli or mega.
func readUnit(text string) (u unit, ok, ambiguous bool) {
	t := strings.TrimSpace(text)
	if u, ok := commonUnit(t); ok {
		return u, true, false
	}
	return searchUnit(t)
}

// commonUnit saves the search for what most headers have.
func commonUnit(t string) (u unit, ok bool) {
	dim, exp := "", 0
	switch t {
	case "Hz", "hz":
		dim = "Hz"
	case "kHz", "khz":
		dim, exp = "Hz", 3
	case "MHz", "mhz":
		dim, exp = "Hz", 6
	case "GHz", "ghz":
		dim, exp = "Hz", 9
	case "Ω", "Ohm", "ohm":
		dim = "Ω"
	case "mΩ", "mOhm":
		dim, exp = "Ω", -3
	case "kΩ", "kOhm":
		dim, exp = "Ω", 3
	case "°", "deg":
		dim = "°"
	case "rad":
		dim = "rad"
	case "F":
		dim = "F"
	case "µF", "uF":
		dim, exp = "F", -6
	case "nF":
		dim, exp = "F", -9
	case "pF":
		dim, exp = "F", -12
	case "H":
		dim = "H"
	case "mH":
		dim, exp = "H", -3
	case "µH", "uH":
		dim, exp = "H", -6
	case "nH":
		dim, exp = "H", -9
	case "S":
		dim = "S"
	case "mS":
		dim, exp = "S", -3
	case "dB":
		dim = "dB"
	case "%":
		dim, exp = "1", -2
	default:
		return unit{}, false
	}
	return unit{t, dim, exp}, true
}

// searchUnit goes through all units and prefixes.
func searchUnit(t string) (u unit, ok, ambiguous bool) {
	switch strings.ToLower(t) {
	case "":
		return unit{}, false, false
	case "-", "1", "—", "–", "none", "n/a", "unitless", "dimensionless":
		return unit{text: t, dim: "1"}, true, false
	case "rad/s", "rad/sec", "1/s", "s^-1", "rad·s⁻¹", "rad s-1":
		return unit{text: t, dim: "rad/s"}, true, false
	case "krad/s":
		return unit{text: t, dim: "rad/s", exp: 3}, true, false
	case "ppm", "1e-6":
		return unit{text: t, dim: "1", exp: -6}, true, false
	case "e-3", "1e-3", "e-03", "10^-3", "10⁻³", "x10^-3", "‰":
		return unit{text: t, dim: "1", exp: -3}, true, false
	case "e-4", "1e-4", "10^-4", "10⁻⁴", "x10^-4":
		return unit{text: t, dim: "1", exp: -4}, true, false
	case "1/ohm", "1/ω", "ohm^-1":
		return unit{text: t, dim: "S"}, true, false
	case "degree", "degr", "dg":
		return unit{text: t, dim: "°"}, true, false
	case "mrad":
		return unit{text: t, dim: "rad", exp: -3}, true, false
	}
	if _, _, lone := lonePrefix(t); lone {
		return unit{}, false, false
	}
	for _, dim := range dims {
		if exp, ok := quantity.Exponent(t, dim); ok {
			if dim == "%" {
				return unit{text: t, dim: "1", exp: -2}, true, false
			}
			// Capital letters throughout: MOHM, MF, MH may be milli or mega.
			capitals := t == strings.ToUpper(t) && t[0] == 'M' && len(t) > 1 && strings.IndexFunc(t, unicode.IsLetter) >= 0
			return unit{text: t, dim: dim, exp: exp}, true,
				capitals && dim != "Hz" && dim != "dB" && exp == 6 && !strings.ContainsAny(t, "Ω\u2126")
		}
	}
	// Header lines in capitals: PF, NF, UF, UH, KOHM; no prefix other than the
	// small letter exists for these.
	if len(t) >= 2 {
		if i := strings.IndexByte("PNUK", t[0]); i >= 0 {
			small := string("pnuk"[i]) + t[1:]
			for _, dim := range dims[:5] {
				if exp, ok := quantity.Exponent(small, dim); ok {
					return unit{text: t, dim: dim, exp: exp}, true, false
				}
			}
		}
	}
	return unit{}, false, false
}

// lonePrefix recognises a prefix without a unit.
func lonePrefix(t string) (sign string, exp int, ok bool) {
	switch t {
	case "a", "f", "p", "n", "u", "µ", "\u03bc", "m", "k", "M", "G", "T":
		e, ok := quantity.Exponent(t, "")
		return t, e, ok
	}
	return "", 0, false
}

// readUnitCell recognises a cell of a unit row: a unit, perhaps in brackets.
func readUnitCell(text string) (unit, bool, bool) {
	t := strings.TrimSpace(text)
	if n := len(t); n >= 2 && (t[0] == '(' && t[n-1] == ')' || t[0] == '[' && t[n-1] == ']' || t[0] == '<' && t[n-1] == '>') {
		t = t[1 : n-1]
	}
	return readUnit(t)
}

// scale multiplies by 10^exp with one rounding: dividing by a power of ten up
// to 10²² is exact in its divisor, multiplying by 10⁻³ is not.
func scale(v float64, exp int) float64 {
	switch {
	case exp == 0:
		return v
	case exp > 0:
		return v * math.Pow10(exp)
	}
	return v / math.Pow10(-exp)
}

// dimName describes a dim for messages.
func dimName(dim string) string {
	if dim == "1" {
		return "a plain number or %"
	}
	return fmt.Sprintf("a unit of %s", dim)
}
