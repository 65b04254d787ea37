package ingest

import (
	"errors"
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// pairColumns writes each pair of quantities for an impedance at ω, from the
// definitions of IEC 60384-1 and the usual parallel forms, written out here
// independently of the reader: both columns in SI units, angles in degrees.
var pairColumns = []struct {
	header string
	of     func(w float64, z complex128) (a, b float64)
}{
	{"|Z| (Ohm),Theta (deg)", func(w float64, z complex128) (float64, float64) { return cmplx.Abs(z), cmplx.Phase(z) * deg }},
	{"Z (Ω),θz (rad)", func(w float64, z complex128) (float64, float64) { return cmplx.Abs(z), cmplx.Phase(z) }},
	{"R (Ohm),X (Ohm)", func(w float64, z complex128) (float64, float64) { return real(z), imag(z) }},
	{"Rs (Ohm),Xs (Ohm)", func(w float64, z complex128) (float64, float64) { return real(z), imag(z) }},
	{"|Y| (S),Theta (deg)", func(w float64, z complex128) (float64, float64) { return cmplx.Abs(1 / z), cmplx.Phase(1/z) * deg }},
	{"Y (S),θy (rad)", func(w float64, z complex128) (float64, float64) { return cmplx.Abs(1 / z), cmplx.Phase(1 / z) }},
	{"G (S),B (S)", func(w float64, z complex128) (float64, float64) { return real(1 / z), imag(1 / z) }},
	{"Cs (F),D", func(w float64, z complex128) (float64, float64) { return seriesC(w, z), tanDelta(z) }},
	{"Cs (F),Q", func(w float64, z complex128) (float64, float64) { return seriesC(w, z), 1 / tanDelta(z) }},
	{"Cs (F),Rs (Ohm)", func(w float64, z complex128) (float64, float64) { return seriesC(w, z), real(z) }},
	{"Cs (F),ESR (Ohm)", func(w float64, z complex128) (float64, float64) { return seriesC(w, z), real(z) }},
	{"Cp (F),D", func(w float64, z complex128) (float64, float64) { return parallelC(w, z), tanDelta(z) }},
	{"Cp (F),Q", func(w float64, z complex128) (float64, float64) { return parallelC(w, z), 1 / tanDelta(z) }},
	{"Cp (F),Rp (Ohm)", func(w float64, z complex128) (float64, float64) { return parallelC(w, z), 1 / real(1/z) }},
	{"Cp (F),G (S)", func(w float64, z complex128) (float64, float64) { return parallelC(w, z), real(1 / z) }},
	{"Ls (H),Q", func(w float64, z complex128) (float64, float64) { return imag(z) / w, 1 / tanDelta(z) }},
	{"Ls (H),D", func(w float64, z complex128) (float64, float64) { return imag(z) / w, tanDelta(z) }},
	{"Ls (H),Rs (Ohm)", func(w float64, z complex128) (float64, float64) { return imag(z) / w, real(z) }},
	{"Lp (H),Q", func(w float64, z complex128) (float64, float64) { return parallelL(w, z), 1 / tanDelta(z) }},
	{"Lp (H),D", func(w float64, z complex128) (float64, float64) { return parallelL(w, z), tanDelta(z) }},
	{"Lp (H),Rp (Ohm)", func(w float64, z complex128) (float64, float64) { return parallelL(w, z), 1 / real(1/z) }},
	{"Lp (H),G (S)", func(w float64, z complex128) (float64, float64) { return parallelL(w, z), real(1 / z) }},
}

func seriesC(w float64, z complex128) float64   { return -1 / (w * imag(z)) }
func parallelC(w float64, z complex128) float64 { return imag(1/z) / w }
func parallelL(w float64, z complex128) float64 { return -1 / (w * imag(1/z)) }
func tanDelta(z complex128) float64             { return math.Abs(real(z) / imag(z)) }

// Every pair gives back any passive impedance, capacitive or inductive.
func TestPairs(t *testing.T) {
	for _, p := range pairColumns {
		rapid.Check(t, func(t *rapid.T) {
			var b strings.Builder
			b.WriteString("Frequency (Hz)," + p.header + "\n")
			var want []complex128
			f := 100.0
			for range 5 {
				x := math.Pow(10, rapid.Float64Range(-3, 6).Draw(t, "log |X|"))
				if rapid.Bool().Draw(t, "capacitive") {
					x = -x
				}
				z := complex(math.Abs(x)*math.Pow(10, rapid.Float64Range(-4, 2).Draw(t, "log D")), x)
				a, c := p.of(2*math.Pi*f, z)
				fmt.Fprintf(&b, "%g,%.17g,%.17g\n", f, a, c)
				want = append(want, z)
				f *= 10
			}
			s, err := Read("a.csv", strings.NewReader(b.String()), nil)
			if errors.Is(err, ErrAmbiguous) && strings.Contains(err.Error(), "values that look like") {
				t.Skip("random impedances follow no law and may by chance contradict the stated unit")
			}
			if err != nil {
				t.Fatalf("%s: %v\n%s", p.header, err, b.String())
			}
			for i := range want {
				// Going through D = 1e-4 or 100 costs digits of the smaller part, in R
				// or X, not in Z.
				if !near(s[0].Z[i], want[i], 1e-10) {
					t.Fatalf("%s: Z = %v, want %v", p.header, s[0].Z[i], want[i])
				}
			}
		})
	}
}

// Published values, section 6 of the collected check values, calculated there
// in double precision from the standard formulas: Cs = 1 µF with D = 0.02 at
// 1 kHz has ESR = 3.183098862 Ω, Cp = 0.9996001599 µF, Rp = 7960.930253 Ω,
// Q = 50; reactances of 1 µF, 10 mH.
func TestPairsPublished(t *testing.T) {
	want := complex(3.183098862, -159.1549431)
	for _, row := range []string{
		"Cs (uF),D\n1000,1,0.02",
		"Cs (uF),D (%)\n1000,1,2",
		"Cs (uF),Q\n1000,1,50",
		"Cs (uF),Rs (Ohm)\n1000,1,3.183098862",
		"Cs (uF),ESR (mOhm)\n1000,1,3183.098862",
		"Cp (uF),D\n1000,0.9996001599,0.02",
		"Cp (nF),Q\n1000,999.6001599,50",
		"Cp (uF),Rp (kOhm)\n1000,0.9996001599,7.960930253",
		"Cp (uF),G (uS)\n1000,0.9996001599,125.6134557", // 1/7960.930253 Ω
	} {
		s := one(t, "a.csv", "Frequency (Hz),"+row+"\n", nil)
		if !near(s.Z[0], want, 2e-9) {
			t.Errorf("%s: Z = %v, want %v", row, s.Z[0], want)
		}
	}
	s := one(t, "a.csv", "Frequency (Hz),Ls (mH),Rs (Ohm)\n1000,10,0\n", nil)
	if !near(s.Z[0], 62.83185307i, 1e-9) {
		t.Errorf("10 mH at 1 kHz: %v", s.Z[0])
	}
	s = one(t, "a.csv", "Frequency (MHz),Ls (nH),Rs (Ohm)\n1000,1,0\n", nil)
	if !near(s.Z[0], 6.283185307i, 1e-9) {
		t.Errorf("1 nH at 1 GHz: %v", s.Z[0])
	}
}

// Meters that compute D = ωRsCs print it negative beside a negative Cs; R is
// positive either way. A negative D beside a positive C is a negative R.
func TestLossSigns(t *testing.T) {
	for _, c := range []struct {
		c, d string
		sign float64
	}{{"-1e-6", "0.02", 1}, {"-1e-6", "-0.02", 1}, {"1e-6", "0.02", 1}, {"1e-6", "-0.02", -1}} {
		s := one(t, "a.csv", "Frequency (Hz),Cs (F),D\n1000,"+c.c+","+c.d+"\n", nil)
		if want := c.sign * 3.183098862; !(math.Abs(real(s.Z[0])/want-1) < 1e-9) {
			t.Errorf("Cs %s D %s: R = %v, want %v", c.c, c.d, real(s.Z[0]), want)
		}
	}
}

// What could be read in two ways is refused, with the flag that settles it.
func TestAmbiguous(t *testing.T) {
	for _, c := range []struct{ name, text, want string }{
		{"C alone", "Frequency (Hz),C (uF),D\n1000,1,0.02\n2000,1,0.02\n",
			`a.csv:1:1: expected two columns that give an impedance, found a capacitance, D and frequency; try: --columns 'f=1,cs=2,d=3' or --columns 'f=1,cp=2,d=3'`},
		{"L alone", "Frequency (Hz),L (uH),Q\n1000,1,20\n2000,1,20\n",
			`a.csv:1:1: expected two columns that give an impedance, found an inductance, Q and frequency; try: --columns 'f=1,ls=2,q=3' or --columns 'f=1,lp=2,q=3'`},
		{"re and im of what", "Frequency (Hz),Real,Imag\n1000,1,2\n2000,1,2\n",
			`a.csv:1:1: expected two columns that give an impedance, found a real part, an imaginary part and frequency; try: --columns 'f=1,r=…,x=2' or --columns 'f=1,g=…,b=2'`},
		{"magnitude of what", "Frequency (Hz),Magnitude,Phase (deg)\n1000,0.1,20\n2000,0.4,-30\n3000,0.1,40\n4000,0.5,-20\n",
			`a.csv:1:16: expected what the magnitude is of, found a magnitude and a phase that do not look like those of an impedance; try: --columns 'f=1,z=2,phase=3' for |Z|, or y and yphase, with the columns' numbers`},
		{"phase of a resistor", "Frequency (Hz),|Z| (Ohm),Phase\n1000,100,0.01\n10000,100,0.02\n100000,100,0.03\n1e6,100,0.05\n",
			`a.csv:1:26: expected degrees or radians, found no unit, and the magnitude changes too little to tell; try: --units phase=deg or --units phase=rad`},
		{"milli or mega", "FREQ(HZ),Z(MOHM),THETA(DEG)\n1000,1,-90\n2000,1,-90\n",
			`a.csv:1:10: expected a unit that tells milli from mega, found "Z(MOHM)"; try: --units 'z=m…' or --units 'z=M…'`},
		{"microfarads without a unit", "Frequency (Hz),Cs,D\n1000,9.87,0.02\n2000,9.86,0.03\n",
			`a.csv:1:16: expected a unit for Cs, found 9.87 without a unit, which is not likely in F; try: --units cs=pF`},
		{"gigahertz without a unit", "Frequency,R (Ohm),X (Ohm)\n1.0,1,2\n3.6,1,2\n",
			`a.csv:1:1: expected a unit for frequency, found no frequency above 3.6 without a unit; try: --units f=MHz, or f=Hz if it is`},
		{"columns that disagree", "Frequency (Hz),R (Ohm),X (Ohm),|Z| (mOhm),Theta (deg)\n1000,3,4,5,53.13\n2000,3,4,5,53.13\n3000,3,4,5,53.13\n",
			`a.csv:1:32: expected |Z| and phase of Z to agree with R and X, found a median difference of 99.9 %; try: --columns to choose two columns, or --units if one has another unit`},
		{"two columns of |Z|", "Frequency (Hz),|Z| (Ohm),Z (Ohm),Theta (deg)\n1000,1,2,3\n2000,1,2,3\n",
			`a.csv:1:26: expected one column of |Z|, found "Z (Ohm)"; try: --columns 'f=1,z=3,…' to choose`},
		{"a header in unknown words", "A,B,C\n100,1,2\n200,1,2\n",
			`a.csv:1:1: expected a header with a frequency column, found "A, B, C"; try: --columns 'f=1,z=2,phase=3' with the columns' numbers`},
		{"four columns without a header", "100,1,2,3\n200,1,2,3\n",
			`a.csv:1:1: expected a header, or three columns of numbers (frequency, |Z|, phase), found rows of 4 columns without a header; try: --columns 'f=1,r=2,x=3' with the columns' numbers`},
		{"no header, radians", textTable("", ",", polarRad),
			`a.csv:1:1: expected phase in degrees in a file without a header, found values that look like radians: the slope of ln|Z| agrees (factor 0.94); try: --units phase=rad, or phase=deg if the header is right`},
		{"thousands", "Frequency (Hz);R (Ohm);X (Ohm)\n1,000.0;1.5;2\n2,000.0;1.5;2\n",
			`a.csv:2:1: expected a number for frequency in Hz, found "1,000.0"; try: save without thousands separators (and 1 more)`},
		{"two temperatures", "Temperature (C),Frequency (Hz),Cs (nF),D\n25,100,10,0.01\n85,100,11,0.01\n25,1000,10,0.01\n85,1000,11,0.01\n",
			`a.csv:1:1: expected one sweep at one temperature, found several, from 25 to 85; try: --columns 'f=2,cs=3,d=4,part=1' to read one sweep for each`},
		{"two runs 2 % apart", "Frequency (Hz),R (Ohm),X (Ohm)\n1,1,2\n20,1,2\n300,1,2\n1,1.02,2.04\n20,1.02,2.04\n300,1.02,2.04\n",
			`a.csv:5:1: expected one impedance at each frequency of a part, found 3 repeated frequencies with impedances up to 1.96 % apart; try: --columns with part=…, or a blank line between the parts`},
		{"decimal commas in a comma file", "Frequency (Hz),R (Ohm),X (Ohm)\n100,0,159,1,-89,9\n200,0,159,1,-89,9\n",
			`a.csv:2:11: expected 3 cells, as the header has, found a row of 6; try: save numbers with a decimal point, or another delimiter than the comma; or --columns with the columns' numbers (and 1 more)`},
		{"commas that may be thousands", "Frequency (Hz);R (Ohm);X (Ohm)\n1,000;15,915;-89,985\n2,000;15,915;-89,985\n",
			`a.csv:2:1: expected numbers whose comma is clearly decimal, found "1,000"; try: save with a decimal point and without thousands separators`},
		{"header and columns do not match", "Freq Hz |Z| Ohm Phase of it all deg\n100 1 -90\n200 2 -90\n",
			`a.csv:1:1: expected a heading for each of 3 columns, found 9; try: --columns 'f=1,z=2,phase=3' with the columns' numbers`},
		{"radians below degrees", textTable("f (Hz),|Z| (Ohm),Theta (deg)", ",", polarRad),
			`a.csv:1:18: expected phase in degrees, found values that look like radians: the slope of ln|Z| agrees (factor 0.94); try: --units phase=rad, or phase=deg if the header is right`},
		{"degrees below radians", textTable("f (Hz),|Y| (S),Theta (rad)", ",", func(f float64, z complex128) []float64 {
			return []float64{f, 1 / cmplx.Abs(z), -cmplx.Phase(z) * deg}
		}), `a.csv:1:16: expected phase in radians, found values that look like degrees: values up to 89.99 exceed π; try: --units yphase=deg, or yphase=rad if the header is right`},
		{"return loss of both signs", "Frequency (Hz),Return Loss (dB),Phase (deg)\n1000,1,20\n2000,-1,30\n3000,-2,40\n",
			`a.csv:1:16: expected losses of one sign, found positive and negative ones; try: a column S11 in dB instead of return loss`},
		{"two parts in one", "Frequency (Hz),R (Ohm),X (Ohm)\n1,1,2\n20,1,2\n300,1,2\n1,5,9\n20,5,9\n300,5,9\n",
			`a.csv:5:1: expected one impedance at each frequency of a part, found 3 repeated frequencies with impedances up to 78.3 % apart; try: --columns with part=…, or a blank line between the parts`},
	} {
		_, err := Read("a.csv", strings.NewReader(c.text), nil)
		if err == nil {
			t.Errorf("%s: no error, want %s", c.name, c.want)
			continue
		}
		if err.Error() != c.want {
			t.Errorf("%s:\n got %s\nwant %s", c.name, err, c.want)
		}
		if c.name != "decimal commas in a comma file" && !errors.Is(err, ErrAmbiguous) {
			t.Errorf("%s: not marked as ambiguous", c.name)
		}
	}
	// S21 without a connection is wrong use.
	_, err := Read("a.csv", strings.NewReader("Frequency (Hz),S21 (dB),Phase (deg)\n1000,-1,20\n2000,-1,30\n"), nil)
	if !errors.Is(err, ErrConnection) || !strings.Contains(err.Error(), "--connection series or --connection shunt") {
		t.Errorf("S21: %v", err)
	}
}

// A phase that does not follow the slope tells nothing; a header is doubted only
// on good evidence.
func TestPhaseUnitNeedsAgreement(t *testing.T) {
	var f, mag, phase []float64
	for i := range 40 {
		f = append(f, math.Pow(10, float64(i)/8))
		mag = append(mag, math.Pow(10, math.Sin(float64(i))))
		phase = append(phase, -1.5)
	}
	if u, why := phaseUnit(f, mag, phase); u != angleUnknown {
		t.Errorf("%v: %s", u, why)
	}
	for text, refused := range map[string]bool{
		// Spot frequencies of a capacitor in radians below a header in degrees.
		"100,10,-1.5\n1000,1,-1.52\n10000,0.1,-1.5\n100000,0.01,-1.45\n": true,
		// A lossy part that happens to have small angles.
		"100,10,-1.5\n1000,8,-2.5\n10000,9,-1\n100000,5,-2.5\n":    false,
		"100,10,-89\n1000,1,-88\n10000,0.1,-85\n100000,0.01,-80\n": false,
	} {
		_, err := Read("a.csv", strings.NewReader("f (Hz),|Z| (Ohm),Theta (deg)\n"+text), nil)
		if errors.Is(err, ErrAmbiguous) != refused {
			t.Errorf("%q: %v", text, err)
		}
	}
}

// A phase of the wrong sign is warned of; it may be a convention of its own.
func TestPhaseSign(t *testing.T) {
	s := one(t, "a.csv", textTable("f (Hz),|Z| (Ohm),Theta (deg)", ",", func(f float64, z complex128) []float64 {
		return []float64{f, cmplx.Abs(z), -cmplx.Phase(z) * deg}
	}), nil)
	if got := codes(s.Warnings); got != "not-checked" {
		t.Errorf("warnings %q: %v", got, s.Warnings)
	}
}

// A column that counts the rows is no part column.
func TestSampleColumnCounts(t *testing.T) {
	s := one(t, "a.csv", "Sample,Frequency (Hz),R (Ohm),X (Ohm)\n1,100,1,2\n2,200,1,2\n3,300,1,2\n", nil)
	if len(s.Freq) != 3 || s.Part != "a" {
		t.Errorf("%q with %d points", s.Part, len(s.Freq))
	}
	// Parts measured at one frequency only are parts.
	if p := read(t, "a.csv", "Sample,Frequency (Hz),R (Ohm),X (Ohm)\n1,100,1,2\n2,100,1,2\n3,100,1,2\n", nil); len(p) != 3 || p[2].Part != "3" {
		t.Errorf("%d parts", len(p))
	}
}

// The flag that the message gives settles the matter.
func TestFlagsSettle(t *testing.T) {
	text := "Frequency (Hz),C (uF),D\n1000,1,0.02\n2000,1,0.02\n"
	for flag, want := range map[string]complex128{
		"f=1,cs=2,d=3": complex(3.183098862, -159.1549431),
		"f=1,cp=2,d=3": 1 / complex(0.02*2e-3*math.Pi, 2e-3*math.Pi),
	} {
		c, err := ParseColumns(flag)
		if err != nil {
			t.Fatal(err)
		}
		if s := one(t, "a.csv", text, &Options{Columns: c}); !near(s.Z[0], want, 1e-9) {
			t.Errorf("%s: Z = %v, want %v", flag, s.Z[0], want)
		}
	}
	u, err := ParseUnits("z=MOhm")
	if err != nil {
		t.Fatal(err)
	}
	if s := one(t, "a.csv", "FREQ(HZ),Z(MOHM),THETA(DEG)\n1000,1,-90\n2000,1,-90\n", &Options{Units: u}); !near(s.Z[0], -1e6i, 1e-12) {
		t.Errorf("MOhm: %v", s.Z[0])
	}
}

// The instrument's mode tells what C is.
func TestModeTellsEquivalent(t *testing.T) {
	for mode, series := range map[string]bool{"Cs-D": true, "CPD": false, "Cp-D": false} {
		s := one(t, "a.csv", "Mode: "+mode+"\nFrequency (Hz),C (uF),D\n1000,1,0.5\n2000,1,0.5\n", nil)
		want := complex(0.5*159.1549431, -159.1549431)
		if !series {
			want = 1 / complex(0.5*2e-3*math.Pi, 2e-3*math.Pi)
		}
		if !near(s.Z[0], want, 1e-9) {
			t.Errorf("mode %s: Z = %v, want %v", mode, s.Z[0], want)
		}
	}
	// Letters within other words are no mode.
	for _, line := range []string{"Type: Ceramics", "Function: Cs-D, Cp-D", "Parameter: electronics"} {
		if _, err := Read("a.csv", strings.NewReader(line+"\nFrequency (Hz),C (uF),D\n1000,1,0.5\n2000,1,0.5\n"), nil); !errors.Is(err, ErrAmbiguous) {
			t.Errorf("%s: %v", line, err)
		}
	}
}

// Degrees or radians are told from the slope for capacitors, inductors and
// parts with a resonance, in either unit.
func TestPhaseUnit(t *testing.T) {
	parts := map[string]func(w float64) complex128{
		"capacitor":   func(w float64) complex128 { return complex(0.02, w*1e-9-1/(w*10e-6)) },
		"film":        func(w float64) complex128 { return complex(0.001/(w*1e-8), -1/(w*1e-8)) },
		"inductor":    func(w float64) complex128 { return 1 / (1/complex(2, w*100e-6) + complex(0, w*5e-12)) },
		"RC":          func(w float64) complex128 { return complex(50, -1/(w*1e-7)) },
		"bead":        func(w float64) complex128 { return 0.1 + 1/(1/complex(0, w*1e-6)+1/600.0+complex(0, w*1e-12)) },
		"electrolyte": func(w float64) complex128 { return complex(0.05+0.4/(1+w*1e-4), w*10e-9-1/(w*470e-6)) },
	}
	for name, z := range parts {
		var f, mag, phase, small []float64
		for i := range 61 {
			fi := math.Pow(10, 2+float64(i)/12)
			v := z(2 * math.Pi * fi)
			f, mag = append(f, fi), append(mag, cmplx.Abs(v))
			phase = append(phase, cmplx.Phase(v))
			small = append(small, cmplx.Phase(v)*deg/30) // degrees within ±3: must not be taken for radians
		}
		if u, why := phaseUnit(f, mag, phase); u != angleRadians {
			t.Errorf("%s in radians: %v, %s", name, u, why)
		}
		degrees := make([]float64, len(phase))
		for i := range phase {
			degrees[i] = phase[i] * deg
		}
		if u, why := phaseUnit(f, mag, degrees); u != angleDegrees {
			t.Errorf("%s in degrees: %v, %s", name, u, why)
		}
		if u, why := phaseUnit(f, mag, small); u != angleUnknown {
			t.Errorf("%s, neither: %v, %s", name, u, why)
		}
	}
}
