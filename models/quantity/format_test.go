package quantity

import (
	"math"
	"strings"
	"testing"
)

func TestFormat(t *testing.T) {
	check := func(v float64, unit string, digits int, want string) {
		t.Helper()
		if got := Format(v, unit, digits); got != want {
			t.Errorf("Format(%v, %q, %d) = %q, want %q", v, unit, digits, got, want)
		}
	}
	check(9.87e-6, "F", 3, "9.87 µF")
	check(0.0213, "Ω", 3, "21.3 mΩ")
	check(-0.0213, "Ω", 3, "-21.3 mΩ")
	check(0, "F", 3, "0 F")
	check(math.Copysign(0, -1), "F", 3, "0 F")
	check(10e-6, "F", 3, "10.0 µF")
	check(123e-6, "F", 2, "120 µF")
	check(123e-6, "F", 1, "100 µF")
	check(999.96e-3, "Ω", 4, "1.000 Ω")
	check(999.4e-3, "Ω", 3, "999 mΩ")
	check(1e-18, "F", 3, "1.00 aF")
	check(2.5e-15, "F", 2, "2.5 fF")
	check(1e-19, "F", 3, "1.00e-19 F")
	check(1e12, "Ω", 3, "1.00 TΩ")
	check(999e12, "Ω", 3, "999 TΩ")
	check(1e15, "Ω", 3, "1.00e+15 Ω")
	check(999.9e12, "Ω", 3, "1.00e+15 Ω")
	check(0.85, "1", 2, "0.85")
	check(0.85, "", 3, "0.850")
	check(12345, "1", 3, "12300")
	check(1e-9, "1", 2, "1.0e-09")
	check(0.001234, "1", 2, "0.0012")
	check(-12.5, "°", 3, "-12.5°")
	check(105, "°C", 4, "105.0 °C")
	check(1234, "K", 3, "1230 K")
	check(0.25, "K/W", 2, "0.25 K/W")
	check(3e-6, "F·s^(n-1)", 2, "3.0 µF·s^(n-1)")
	check(math.NaN(), "F", 3, "NaN F")
	check(math.Inf(1), "F", 3, "∞ F")
	check(1.0/3, "Ω", 99, "333.333333333333 mΩ")
	check(5, "Ω", 0, "5 Ω")
	check(math.MaxFloat64, "Ω", 3, "1.80e+308 Ω")
	check(math.SmallestNonzeroFloat64, "F", 1, "5e-324 F")
}

// At each prefix boundary, on it and beside it, three digits of rounding give
// the larger prefix, and never four digits before the point.
func TestPrefixBoundaries(t *testing.T) {
	for i := 1; i < len(prefixes); i++ {
		at := math.Pow10(prefixes[i].exp)
		want := "1.00 " + prefixes[i].sign + "Ω"
		for _, v := range []float64{at, math.Nextafter(at, 0), math.Nextafter(at, math.Inf(1)), at * 0.9996} {
			if got := Format(v, "Ω", 3); got != want {
				t.Errorf("Format(%v, Ω, 3) = %q, want %q", v, got, want)
			}
		}
		below := "999 " + prefixes[i-1].sign + "Ω"
		if got := Format(at*0.9994, "Ω", 3); got != below {
			t.Errorf("Format(%v, Ω, 3) = %q, want %q", at*0.9994, got, below)
		}
		// The rounding boundary itself: 999.5 of the smaller prefix. Powers of
		// ten are inexact, so only the neighbours two steps away are sure.
		edge := 0.9995 * at
		if got := Format(edge*(1-4e-16), "Ω", 3); got != below {
			t.Errorf("just below the edge: Format(%v, Ω, 3) = %q, want %q", edge, got, below)
		}
		if got := Format(edge*(1+4e-16), "Ω", 3); got != want {
			t.Errorf("just above the edge: Format(%v, Ω, 3) = %q, want %q", edge, got, want)
		}
	}
}

func TestFormatUncertain(t *testing.T) {
	check := func(v, u float64, unit, val, unc, prefixed string) {
		t.Helper()
		gv, gu, gp := FormatUncertain(v, u, unit)
		if gv != val || gu != unc || gp != prefixed {
			t.Errorf("FormatUncertain(%v, %v, %q) = %q, %q, %q, want %q, %q, %q", v, u, unit, gv, gu, gp, val, unc, prefixed)
		}
	}
	// JCGM 100:2008, 7.2.2: m_S = 100,021 47 g, u_c = 0,35 mg (from memory of
	// the text). 7.2.6: 10,057 62 Ω with 27 mΩ becomes 10,058 Ω (from memory).
	check(100.02147, 0.00035, "g", "100.02147", "0.00035", "g")
	check(10.05762, 0.027, "Ω", "10.058", "0.027", "Ω")
	check(9.8731e-6, 2.24e-8, "F", "9.873", "0.022", "µF")
	check(9.8731e-6, 9.96e-8, "F", "9.87", "0.10", "µF")
	check(999.9996e-6, 1e-6, "F", "1.0000", "0.0010", "mF")
	check(1e-9, 1e-3, "F", "0.0", "1.0", "mF")
	check(-5.21e-3, 3.3e-4, "Ω", "-5.21", "0.33", "mΩ")
	check(1234567, 34567, "Hz", "1.235", "0.035", "MHz")
	check(1.5, 0, "Ω", "1.50000", "", "Ω")
	check(1.5, math.Inf(1), "Ω", "1.50000", "", "Ω")
	check(1.5, math.NaN(), "Ω", "1.50000", "", "Ω")
	check(0.85, 0.012, "1", "0.850", "0.012", "")
	check(-89.5, 0, "°", "-89.5000", "", "°")
	check(-89.5, 0.12, "°", "-89.50", "0.12", "°")
	check(1, 1e-30, "Ω", "1.00000000000000", "0.00000000000000", "Ω")
	check(1e20, 1e18, "Ω", "1.000e+20", "1.0e+18", "Ω")
}

func TestFormatInterval(t *testing.T) {
	check := func(v, low, high float64, want string) {
		t.Helper()
		if got := FormatInterval(v, low, high, "F"); got != want {
			t.Errorf("FormatInterval(%v, %v, %v) = %q, want %q", v, low, high, got, want)
		}
	}
	check(9.873e-6, 9.851e-6, 9.895e-6, "9.873 µF (9.851 … 9.895)")
	check(1e-6, 0.1e-6, 10e-6, "1.00 µF (0.10 … 10.00)")
	check(9.873e-6, 9.851e-6, math.NaN(), "9.873 µF (≥ 9.851)")
	check(9.873e-6, math.Inf(-1), 9.895e-6, "9.873 µF (≤ 9.895)")
	check(9.873e-6, math.NaN(), math.NaN(), "9.87300 µF")
	check(9.873e-6, 9.873e-6, 9.873e-6, "9.87300 µF")
}

func FuzzFormat(f *testing.F) {
	f.Add(9.87e-6, 1e-8, 3)
	f.Add(math.MaxFloat64, 5e-324, 15)
	f.Add(999.9996e-3, 1e-3, 5)
	f.Fuzz(func(t *testing.T, v, u float64, digits int) {
		for _, unit := range []string{"F", "1", "°C"} {
			s := Format(v, unit, digits)
			if strings.Contains(s, "1000 ") && unit == "F" && digits <= 3 {
				t.Errorf("Format(%v, %d) = %q", v, digits, s)
			}
			FormatUncertain(v, u, unit)
			FormatInterval(v, v-u, v+u, unit)
		}
	})
}

func TestOutward(t *testing.T) {
	for _, c := range []struct {
		v        float64
		up, down float64
	}{
		{3.01e-10, 3.1e-10, 3.0e-10}, {1.24e-8, 1.3e-8, 1.2e-8}, {9.96e3, 1.0e4, 9.9e3}, {2.5, 2.5, 2.5}, {0.0449, 0.045, 0.044},
	} {
		for _, got := range [][2]float64{{Outward(c.v, true), c.up}, {Outward(c.v, false), c.down}} {
			if !(math.Abs(got[0]/got[1]-1) < 1e-12) {
				t.Errorf("Outward(%g) = %g, want %g", c.v, got[0], got[1])
			}
		}
	}
}
