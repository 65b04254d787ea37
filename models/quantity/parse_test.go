package quantity

import (
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func TestParse(t *testing.T) {
	check := func(text, unit string, want float64) {
		t.Helper()
		got, err := Parse(text, unit)
		if err != nil {
			t.Errorf("Parse(%q, %q): %v", text, unit, err)
		} else if got != want { // to the bit: one rounding only
			t.Errorf("Parse(%q, %q) = %v, want %v", text, unit, got, want)
		}
	}
	// The contract's own examples.
	check("10uF", "F", 10e-6)
	check("10µF", "F", 10e-6)      // U+00B5
	check("10\u03bcF", "F", 10e-6) // U+03BC
	check("4.7n", "F", 4.7e-9)
	check("100 kHz", "Hz", 100e3)
	check("1e-6", "F", 1e-6)
	check("4R7", "Ω", 4.7)
	check("4k7", "Ω", 4700)
	check("10n", "F", 10e-9)
	check("120Hz", "Hz", 120)
	check("376uF", "F", 376e-6)
	check("35mΩ", "Ω", 0.035)
	check("30mOhm", "Ω", 0.030)
	check("105C", "°C", 105)
	check("5000h", "h", 5000)
	check("3.2A", "A", 3.2)
	// Spellings.
	check("35mOhm", "Ω", 0.035)
	check("35 mohm", "Ω", 0.035)
	check("35m\u2126", "Ω", 0.035)
	check("1 MOHM", "Ω", 1e6)
	check("2.2 kohms", "Ω", 2200)
	check("  22\u00a0pF ", "F", 22e-12)
	check("10uf", "F", 10e-6)
	check("10uh", "H", 10e-6)
	check("10f", "F", 10e-15)
	check("10F", "F", 10)
	check("3 aF", "F", 3e-18)
	check("1.5T", "Ω", 1.5e12)
	check("\u22125mV", "V", -5e-3)
	check("+5V", "V", 5)
	check("1e3k", "Ω", 1e6)
	check("1E-3", "H", 1e-3)
	check(".5", "1", .5)
	check("5.", "1", 5)
	check("2%", "1", 0.02)
	check("8K/W", "K/W", 8)
	check("8 °C/W", "K/W", 8)
	check("85℃", "°C", 85)
	check("-40", "°C", -40)
	check("20us", "s", 20e-6)
	check("1mS", "S", 1e-3)
	check("0.05deg", "°", 0.05)
	check("4.7u", "", 4.7e-6)
	check("3uF·s^(n-1)", "F·s^(n-1)", 3e-6)
	check("2.4App", "App", 2.4)
	// Case: m is milli and M is mega; hertz alone forgives.
	check("1m", "Ω", 1e-3)
	check("1M", "Ω", 1e6)
	check("1 MHz", "Hz", 1e6)
	check("1 mHz", "Hz", 1e-3)
	check("1 MHZ", "Hz", 1e6)
	check("1 mhz", "Hz", 1e6)
	check("1 KHZ", "Hz", 1e3)
	check("1 khz", "Hz", 1e3)
	check("1 KHz", "Hz", 1e3)
	check("1 ghz", "Hz", 1e9)
	check("1m", "Hz", 1e-3)
	// K is kelvin after a number, kilo inside a code.
	check("10K", "K", 10)
	check("10 K", "K", 10)
	check("4K7", "Ω", 4700)
	check("10K", "Ω", 10e3)
	check("5mK", "K", 5e-3)
}

// TestParseCodes checks the letter codes of IEC 60062 (clause on resistance
// and capacitance values: R K M G T and p n µ m F as decimal sign). The list is
// from memory of the standard's tables; the rule behind it, the letter stands
// for the decimal point and gives the multiplier, is common practice.
func TestParseCodes(t *testing.T) {
	for _, c := range []struct {
		code, unit string
		want       float64
	}{
		{"R10", "Ω", 0.1}, {"R332", "Ω", 0.332}, {"R47", "Ω", 0.47}, {"1R0", "Ω", 1}, {"3R32", "Ω", 3.32},
		{"4R7", "Ω", 4.7}, {"10R", "Ω", 10}, {"33R2", "Ω", 33.2}, {"332R", "Ω", 332}, {"590R4", "Ω", 590.4},
		{"1K0", "Ω", 1e3}, {"3K32", "Ω", 3320}, {"33K2", "Ω", 33.2e3}, {"332K", "Ω", 332e3}, {"4k7", "Ω", 4.7e3},
		{"1M0", "Ω", 1e6}, {"3M32", "Ω", 3.32e6}, {"10M", "Ω", 10e6}, {"1G0", "Ω", 1e9}, {"3G32", "Ω", 3.32e9}, {"1T0", "Ω", 1e12},
		{"p10", "F", 0.1e-12}, {"p332", "F", 0.332e-12}, {"1p0", "F", 1e-12}, {"3p32", "F", 3.32e-12}, {"332p", "F", 332e-12},
		{"1n0", "F", 1e-9}, {"3n32", "F", 3.32e-9}, {"4n7", "F", 4.7e-9}, {"10n", "F", 10e-9}, {"590n4", "F", 590.4e-9},
		{"1µ0", "F", 1e-6}, {"3µ32", "F", 3.32e-6}, {"4u7", "F", 4.7e-6}, {"u47", "F", 0.47e-6}, {"1m0", "F", 1e-3}, {"33m2", "F", 33.2e-3},
		{"1F0", "F", 1}, {"4u7", "H", 4.7e-6}, {"4n7", "H", 4.7e-9},
	} {
		if got, err := Parse(c.code, c.unit); err != nil || got != c.want {
			t.Errorf("Parse(%q, %q) = %v, %v, want %v", c.code, c.unit, got, err, c.want)
		}
	}
}

func TestParseErrors(t *testing.T) {
	for _, c := range []struct{ text, unit, want string }{
		{"10uH", "F", `expected a value in F, found "10uH" in H`},
		{"10kHz", "Ω", `expected a value in Ω, found "10kHz" in Hz`},
		{"85°C", "K", `expected a value in K, found "85°C" in °C`},
		{"R47", "F", `expected a value in F, found "R47"; R as decimal point is for ohms; write the prefix, such as 0.47uF`},
		{"R47", "H", `expected a value in H, found "R47"; R as decimal point is for ohms; write the prefix, such as 0.47uH`},
		{"10KΩ", "Ω", `expected a value in Ω, found "10KΩ"; kilo is a small k, as in kΩ`},
		{"10k", "K", `expected a value in K, found "10k"; kelvin is a capital K`},
		{"10K", "F", `expected a value in F, found "10K" in K; kilo is a small k, as in kF`},
		{"4,7n", "F", `expected a value in F, found "4,7n"; the decimal sign is a point`},
		{"", "F", `expected a value in F, found ""`},
		{"F", "F", `expected a value in F, found "F"`},
		{"n", "F", `expected a value in F, found "n"`},
		{"NaN", "F", `expected a value in F, found "NaN"`},
		{"Inf", "F", `expected a value in F, found "Inf"`},
		{"0x10", "1", `expected a number, found "0x10"`},
		{"1_000", "1", `expected a number, found "1_000"`},
		{"1e999", "1", `expected a number, found "1e999"; the number is too large`},
		{"1e99999999999999999999k", "Ω", `expected a value in Ω, found "1e99999999999999999999k"; the exponent is too large`},
		{"10 uF extra", "F", `expected a value in F, found "10 uF extra"`},
		{"1kk", "Ω", `expected a value in Ω, found "1kk"`},
		{"4 R7", "Ω", `expected a value in Ω, found "4 R7"`},
		{"2%", "F", `expected a value in F, found "2%" in %`},
		{"1ms", "S", `expected a value in S, found "1ms" in s`},
	} {
		v, err := Parse(c.text, c.unit)
		if err == nil {
			t.Errorf("Parse(%q, %q) = %v, want an error", c.text, c.unit, v)
		} else if err.Error() != c.want {
			t.Errorf("Parse(%q, %q):\n got %s\nwant %s", c.text, c.unit, err, c.want)
		}
	}
}

func TestParsePercent(t *testing.T) {
	for text, want := range map[string]float64{"0.1%": 0.001, "0.001": 0.001, "5 %": 0.05, "100%": 1} {
		if got, err := ParsePercent(text); err != nil || got != want {
			t.Errorf("ParsePercent(%q) = %v, %v, want %v", text, got, err, want)
		}
	}
	if _, err := ParsePercent("x"); err == nil || !strings.Contains(err.Error(), "0.1%") {
		t.Errorf("ParsePercent(x): %v", err)
	}
}

func TestParseAngle(t *testing.T) {
	for _, c := range []struct {
		text, unit string
		want       float64
	}{{"180deg", "rad", math.Pi}, {"1rad", "°", 180 / math.Pi}, {"90", "°", 90}, {"1mrad", "rad", 1e-3}, {"1mrad", "°", 0.18 / math.Pi}} {
		got, err := Parse(c.text, c.unit)
		if err != nil || !(math.Abs(got/c.want-1) < 1e-15) {
			t.Errorf("Parse(%q, %q) = %v, %v, want %v", c.text, c.unit, got, err, c.want)
		}
	}
}

func TestExponent(t *testing.T) {
	for _, c := range []struct {
		text, unit string
		want       int
	}{{"kHz", "Hz", 3}, {"mOhm", "Ω", -3}, {"MOHM", "Ω", 6}, {"F", "F", 0}, {"", "F", 0}, {"µ", "F", -6}, {"MHZ", "Hz", 6}, {"pF", "F", -12}} {
		if got, ok := Exponent(c.text, c.unit); !ok || got != c.want {
			t.Errorf("Exponent(%q, %q) = %v, %v, want %v", c.text, c.unit, got, ok, c.want)
		}
	}
	for text, unit := range map[string]string{"uH": "F", "mm": "Ω", "Hz": "Ω", "uuF": "F", "°": "°C"} {
		if exp, ok := Exponent(text, unit); ok {
			t.Errorf("Exponent(%q, %q) = %v, want none", text, unit, exp)
		}
	}
}

// What Format prints, Parse reads back, to the digits printed.
func TestRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		unit := rapid.SampledFrom([]string{"Ω", "F", "H", "Hz", "s", "V", "A", "W", "K", "°C", "K/W", "1", ""}).Draw(t, "unit")
		mantissa := rapid.Float64Range(1, 10).Draw(t, "mantissa")
		exp := rapid.IntRange(-25, 25).Draw(t, "exp")
		digits := rapid.IntRange(1, 15).Draw(t, "digits")
		want := mantissa * math.Pow10(exp)
		if rapid.Bool().Draw(t, "negative") {
			want = -want
		}
		text := Format(want, unit, digits)
		got, err := Parse(text, unit)
		if err != nil {
			t.Fatalf("Parse(Format(%v, %q, %d) = %q): %v", want, unit, digits, text, err)
		}
		if tol := 0.5001 * math.Pow10(1-digits); !(math.Abs(got/want-1) <= tol) {
			t.Fatalf("Format(%v, %q, %d) = %q, read back as %v", want, unit, digits, text, got)
		}
	})
}

func FuzzParse(f *testing.F) {
	units := append([]string{"", "1", "F·s^(n-1)"}, known...)
	for _, s := range []string{"10uF", "4R7", "1e-6", "100 kHz", "2%", "K", "µ", "\xff", "1e", "-R47", "0.05deg"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		for _, unit := range units {
			v, err := Parse(text, unit)
			if err == nil && (math.IsNaN(v) || math.IsInf(v, 0)) {
				t.Errorf("Parse(%q, %q) = %v", text, unit, v)
			}
			if err != nil && strings.ContainsAny(err.Error(), "\n\r") {
				t.Errorf("Parse(%q, %q): error of more than one line: %q", text, unit, err)
			}
		}
	})
}
