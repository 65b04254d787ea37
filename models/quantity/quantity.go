// Package quantity is a number with an SI unit and an SI prefix: reading one
// from text and printing one.
//
// Everything inside the module is in plain SI units. [Parse] turns what people
// write ("10uF", "4k7", "100 kHz") into such a number once, at the door;
// [Format], [FormatUncertain] and [FormatInterval] choose a prefix once, at the
// exit. Nothing in between knows about prefixes.
//
// Prefixes are a f p n µ m k M G T. Case matters (m is milli, M is mega), with
// one exception: hertz written in capitals or in small letters throughout (MHZ,
// mhz, KHZ, khz, GHZ, ghz) is mega, kilo or giga, as in Touchstone, which
// ignores case. A capital K before a unit is accepted for hertz alone; for
// other units it is kilo only inside an IEC 60062 code (4K7), and after a
// number it is kelvin.
package quantity

// prefix is an SI prefix and its power of ten.
type prefix struct {
	sign string
	exp  int
}

// prefixes in steps of 10³, with an empty one for 10⁰: Format indexes them by
// exponent. Source: SI brochure, 9th edition, table 7.
var prefixes = []prefix{
	{"a", -18}, {"f", -15}, {"p", -12}, {"n", -9}, {"µ", -6}, {"m", -3}, {"", 0},
	{"k", 3}, {"M", 6}, {"G", 9}, {"T", 12},
}

// prefixExponent returns the power of ten of a prefix sign; u stands for µ.
func prefixExponent(sign string) (int, bool) {
	if sign == "u" {
		sign = "µ"
	}
	for _, p := range prefixes {
		if p.sign == sign && sign != "" {
			return p.exp, true
		}
	}
	return 0, false
}
