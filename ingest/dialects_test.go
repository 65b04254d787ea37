package ingest

import (
	"bytes"
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"
	"unicode/utf16"

	"github.com/xuri/excelize/v2"
	"golang.org/x/text/encoding/charmap"
)

// The one sweep that is saved in all dialects: 10 µF, 21.3 mΩ, 1 nH from 100 Hz
// to 10 MHz (invented numbers). All quantities are saved with nine digits.
func referenceSweep() (freq []float64, z []complex128) {
	for i := range 41 {
		f := math.Round(math.Pow(10, 2+float64(i)/8)*10) / 10
		w := 2 * math.Pi * f
		freq = append(freq, f)
		z = append(z, complex(0.0213, w*1e-9-1/(w*10e-6)))
	}
	return freq, z
}

const digits = 9

func num(v float64) string { return fmt.Sprintf("%.*g", digits, v) }
func exp(v float64) string { return fmt.Sprintf("%+.*E", digits-1, v) }

// table writes a header and one row a point.
func textTable(header, sep string, cells func(f float64, z complex128) []float64) string {
	return textTableOf(header, sep, num, cells)
}

func textTableOf(header, sep string, write func(float64) string, cells func(f float64, z complex128) []float64) string {
	var b strings.Builder
	if header != "" {
		b.WriteString(header + "\n")
	}
	freq, z := referenceSweep()
	for i := range freq {
		for k, v := range cells(freq[i], z[i]) {
			if k > 0 {
				b.WriteString(sep)
			}
			b.WriteString(write(v))
		}
		b.WriteString("\n")
	}
	return b.String()
}

const deg = 180 / math.Pi

func polarDeg(f float64, z complex128) []float64 {
	return []float64{f, cmplx.Abs(z), cmplx.Phase(z) * deg}
}
func polarRad(f float64, z complex128) []float64 {
	return []float64{f, cmplx.Abs(z), cmplx.Phase(z)}
}
func rect(f float64, z complex128) []float64 { return []float64{f, real(z), imag(z)} }

// scaledBy multiplies the columns, for headers with prefixes.
func scaledBy(cells func(float64, complex128) []float64, k ...float64) func(float64, complex128) []float64 {
	return func(f float64, z complex128) []float64 {
		v := cells(f, z)
		for i := range k {
			v[i] *= k[i]
		}
		return v
	}
}

func commas(s string) string { return strings.ReplaceAll(s, ".", ",") }

func utf16Bytes(s string, big, mark bool) []byte {
	var out []byte
	units := utf16.Encode([]rune(s))
	if mark {
		units = append([]uint16{0xfeff}, units...)
	}
	for _, u := range units {
		if big {
			out = append(out, byte(u>>8), byte(u))
		} else {
			out = append(out, byte(u), byte(u>>8))
		}
	}
	return out
}

func windows1252(t *testing.T, s string) []byte {
	t.Helper()
	b, err := charmap.Windows1252.NewEncoder().String(s)
	if err != nil {
		t.Fatal(err)
	}
	return []byte(b)
}

func workbook(t *testing.T, sheets map[string][][]any, order []string) []byte {
	t.Helper()
	f := excelize.NewFile()
	for i, name := range order {
		if i == 0 {
			if err := f.SetSheetName("Sheet1", name); err != nil {
				t.Fatal(err)
			}
		} else if _, err := f.NewSheet(name); err != nil {
			t.Fatal(err)
		}
		for r, row := range sheets[name] {
			if err := f.SetSheetRow(name, fmt.Sprintf("A%d", r+1), &row); err != nil {
				t.Fatal(err)
			}
		}
	}
	var b bytes.Buffer
	if err := f.Write(&b); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func sheetRows(head ...[]any) [][]any {
	rows := append([][]any{}, head...)
	freq, z := referenceSweep()
	for i := range freq {
		v := polarDeg(freq[i], z[i])
		rows = append(rows, []any{v[0], v[1], v[2]})
	}
	return rows
}

const preamble = `Impedance sweep
Instrument: bench meter
Date: 2026-11-30
Time: 14:05:22
Part: C17
Serial: 0042
Lot: heron
Test level: 500 mV
DC bias: 12 V
Temperature: 23.5 °C
Points,41
Start,100,Stop,1e7

`

func TestDialects(t *testing.T) {
	type dialect struct {
		name, file string
		data       []byte
		opt        *Options
		warnings   string // codes, in order
	}
	var all []dialect
	add := func(name string, data []byte, warnings string) {
		all = append(all, dialect{name: name, file: "c017.csv", data: data, warnings: warnings})
	}
	addText := func(name, text, warnings string) { add(name, []byte(text), warnings) }
	addOpt := func(name, text string, opt Options, warnings string) {
		all = append(all, dialect{"with options: " + name, "c017.csv", []byte(text), &opt, warnings})
	}
	addFile := func(name, file string, data []byte, opt *Options, warnings string) {
		all = append(all, dialect{name, file, data, opt, warnings})
	}
	plain := textTable("Frequency (Hz),|Z| (Ω),Phase (°)", ",", polarDeg)
	ascii := textTable("Frequency (Hz),|Z| (Ohm),Phase (deg)", ",", polarDeg)

	// Delimiters and number formats.
	addText("comma", plain, "")
	addText("comma and blank, exponents", textTableOf("Frequency, |Z|, Phase", ", ", exp, polarDeg), "phase-unit unit-assumed")
	addText("semicolon", textTable("Frequency (Hz);|Z| (Ohm);Phase (deg)", ";", polarDeg), "")
	addText("semicolon, decimal comma", commas(textTable("Frequenz (Hz);Impedanz (Ohm);Phase (deg)", ";", polarDeg)), "")
	addText("tab", textTable("Frequency (Hz)\t|Z| (Ohm)\tPhase (deg)", "\t", polarDeg), "")
	addText("tab, decimal comma", commas(textTable("Frequency [Hz]\t|Z| [Ohm]\tTheta [deg]", "\t", polarDeg)), "")
	addText("blanks", textTable("Freq(Hz) |Z|(Ohm) Theta(deg)", "   ", polarDeg), "")
	addText("blanks, header with blanks", textTable("Freq (Hz)   |Z| (Ohm)   Theta (deg)", "   ", polarDeg), "")
	addText("one blank, header with blanks", textTable("Freq (Hz) |Z| (Ohm) Theta (deg)", " ", polarDeg), "")
	addText("blanks, decimal comma", commas(textTable("Freq(Hz) |Z|(Ohm) Theta(deg)", "  ", polarDeg)), "")
	addText("bar", textTable("f (Hz)|Z (Ohm)|Phase (deg)", "|", polarDeg), "")
	addText("leading blanks", strings.ReplaceAll(ascii, "\n", "\n   "), "")
	addText("trailing delimiter", strings.ReplaceAll(ascii, "\n", ",\n"), "")
	addText("Fortran exponents", strings.ReplaceAll(textTableOf("Freq(Hz) |Z|(Ohm) Theta(deg)", "  ", exp, polarDeg), "E", "D"), "")
	addText("Unicode minus", strings.ReplaceAll(ascii, ",-", ",−"), "")
	addText("quoted cells", strings.ReplaceAll(`"`+strings.ReplaceAll(strings.TrimSuffix(ascii, "\n"), "\n", "\"\n\"")+`"`, ",", `","`), "")
	addText("quoted header with commas", strings.Replace(ascii, "Frequency (Hz),|Z| (Ohm),Phase (deg)", `"Frequency, Hz","|Z|, Ohm","Phase, deg"`, 1), "")

	addText("header of two lines in quotes", strings.Replace(ascii, "Frequency (Hz),|Z| (Ohm),Phase (deg)", "\"Frequency\n(Hz)\",\"|Z|\n(Ohm)\",\"Phase\n(deg)\"", 1), "")
	addText("names of traces", textTable("Frequency (Hz), Trace 1: Impedance: Magnitude (Ω), Trace 2: Impedance: Phase (°)", ",", polarDeg), "")
	addText("trace, real and imaginary", textTable("Frequency (Hz), Trace 1: Impedance: Real (Ω), Trace 1: Impedance: Imag (Ω)", ",", rect), "")
	addText("a number sign as heading", textTable("#,Frequency (Hz),Z (Ohm),Theta (deg),Status", ",", func(f float64, z complex128) []float64 {
		return []float64{7, f, cmplx.Abs(z), cmplx.Phase(z) * deg, 0}
	}), "")

	// Encodings and line ends.
	add("UTF-8 with mark", append([]byte("\xef\xbb\xbf"), plain...), "")
	add("UTF-16 little endian", utf16Bytes(plain, false, true), "")
	add("UTF-16 big endian", utf16Bytes(plain, true, true), "")
	add("UTF-16 little endian without mark", utf16Bytes(plain, false, false), "")
	add("UTF-16 big endian without mark", utf16Bytes(plain, true, false), "")
	add("Windows-1252", windows1252(t, textTable("Frequency (Hz),|Z| (µOhm),Phase (°)", ",", scaledBy(polarDeg, 1, 1e6))), "")
	addText("ohm sign, Greek mu", textTable("Frequency (Hz),|Z| (\u03bc\u2126),Phase (°)", ",", scaledBy(polarDeg, 1, 1e6)), "")
	addText("CR LF", strings.ReplaceAll(plain, "\n", "\r\n"), "")
	addText("CR", strings.ReplaceAll(plain, "\n", "\r"), "")
	addText("CR CR LF", strings.ReplaceAll(plain, "\n", "\r\r\n"), "")
	addText("no end of line at the end", strings.TrimSuffix(plain, "\n"), "")

	// What stands around the table.
	addText("preamble", preamble+ascii, "")
	addText("preamble, semicolons", strings.ReplaceAll(preamble+ascii, ",", ";"), "")
	addText("preamble, tabs as cells", strings.ReplaceAll(strings.ReplaceAll(preamble, ": ", "\t")+ascii, ",", "\t"), "")
	addText("comment signs", "# made on the bench\n# second line\n"+ascii, "")
	addText("header in a comment", "# "+textTable("Frequency (Hz),|Z| (Ohm),Phase (deg)", ",", polarDeg), "")
	addText("percent comments, blanks", "% Freq(Hz) |Z|(Ohm) Theta(deg)\n"+textTable("", " ", polarDeg), "")
	addText("exclamation comments", "! bench\n! Freq(Hz), |Z|(Ohm), Theta(deg)\n"+textTable("", ",", polarDeg), "")
	addText("BEGIN and END", "BEGIN\n"+ascii+"END\n", "")
	addText("begin with a name", "BEGIN CH1_DATA\n"+ascii+"END CH1_DATA\n", "")
	addText("rule below the header", strings.Replace(ascii, "\n", "\n-------------\n", 1), "")
	addText("blank lines", strings.ReplaceAll(ascii, "\n", "\n\n"), "")
	addText("empty rows of delimiters", strings.Replace(ascii, "\n", "\n,,\n", 4), "")
	addText("comment in the middle", strings.Replace(ascii, "\n1000,", "\n# range change\n1000,", 1), "")
	addText("repeated header", strings.Replace(ascii, "\n1000,", "\nFrequency (Hz),|Z| (Ohm),Phase (deg)\n1000,", 1), "")
	addText("a preamble of 500 lines", strings.Repeat("Setting,on\n", 500)+ascii, "")

	// Headers.
	addText("unit row", textTable("Frequency,|Z|,Phase\nHz,Ohm,deg", ",", polarDeg), "")
	addText("unit row in brackets", textTable("Frequency,|Z|,Phase\n[kHz],[mOhm],[°]", ",", scaledBy(polarDeg, 1e-3, 1e3)), "")
	addText("slash", textTable("f/Hz,|Z|/Ω,φ/°", ",", polarDeg), "")
	addText("slash, prefixes", textTable("f / kHz,|Z| / mΩ,θ / rad", ",", scaledBy(polarRad, 1e-3, 1e3)), "")
	addText("underscore", textTable("freq_hz,z_ohm,phase_deg", ",", polarDeg), "")
	addText("square brackets", textTable("Freq. [MHz],Impedance [mOhm],Phase angle [deg]", ",", scaledBy(polarDeg, 1e-6, 1e3)), "")
	addText("capitals", textTable("FREQUENCY(KHZ),|Z|(OHM),PHASE(DEG)", ",", scaledBy(polarDeg, 1e-3)), "")
	addText("in", textTable("Frequency in Hz,|Z| in Ohm,Phase in deg", ",", polarDeg), "")
	addText("another order", textTable("Phase (deg),|Z| (Ohm),Freq (Hz)", ",", func(f float64, z complex128) []float64 {
		return []float64{cmplx.Phase(z) * deg, cmplx.Abs(z), f}
	}), "")
	addText("extra columns", textTable("No.,Frequency (Hz),|Z| (Ohm),Phase (deg),Bias (V),Range", ",", func(f float64, z complex128) []float64 {
		return []float64{3, f, cmplx.Abs(z), cmplx.Phase(z) * deg, 0, 7}
	}), "")
	addText("angular frequency", textTable("omega (rad/s),|Z| (Ohm),Phase (deg)", ",", scaledBy(polarDeg, 2*math.Pi)), "")
	addText("no header", textTable("", ",", polarDeg), "no-header")
	addText("no header, tabs", textTable("", "\t", polarDeg), "no-header")
	addText("no units, degrees", textTable("freq,z,theta", ",", polarDeg), "phase-unit unit-assumed")
	addText("no units, radians", textTable("freq,z,theta", ",", polarRad), "phase-unit unit-assumed")
	addText("German", textTable("Frequenz [Hz];Impedanz [Ohm];Phasenwinkel [°]", ";", polarDeg), "")

	// Rectangular and admittance.
	addText("R and X", textTable("Frequency (Hz),R (Ohm),X (Ohm)", ",", rect), "")
	addText("Re and Im", textTable("Frequency (Hz),Re(Z) (Ohm),Im(Z) (Ohm)", ",", rect), "")
	addText("Z' and Z''", textTable("Freq (Hz),Z' (Ohm),Z'' (Ohm)", ",", rect), "")
	addText("Z' and -Z''", textTable("Freq (Hz),Z' (Ohm),-Z'' (Ohm)", ",", scaledBy(rect, 1, 1, -1)), "")
	addText("Rs and Xs in mΩ", textTable("Freq (Hz),Rs (mOhm),Xs (mOhm)", ",", scaledBy(rect, 1, 1e3, 1e3)), "")
	addText("all of it", textTable("Freq (Hz),R (Ohm),X (Ohm),|Z| (Ohm),Theta (deg)", ",", func(f float64, z complex128) []float64 {
		return []float64{f, real(z), imag(z), cmplx.Abs(z), cmplx.Phase(z) * deg}
	}), "")
	freq, z := referenceSweep()
	complexText := func(format string) string {
		out := "Frequency (Hz),Z (Ohm)\n"
		for i := range freq {
			out += fmt.Sprintf(format+"\n", freq[i], real(z[i]), imag(z[i]))
		}
		return out
	}
	addText("complex literals", complexText("%.9g,%.9g%+.9gj"), "")
	addText("complex literals in brackets", complexText("%.9g,(%.9g%+.9gi)"), "")
	addText("complex literals, blanks", complexText("%.9g,%.9g %+.9g j"), "")

	// Order.
	reversed := func(text string) string {
		lines := strings.Split(strings.TrimSpace(text), "\n")
		for i, j := 1, len(lines)-1; i < j; i, j = i+1, j-1 {
			lines[i], lines[j] = lines[j], lines[i]
		}
		return strings.Join(lines, "\n")
	}
	addText("descending", reversed(ascii), "")
	lines := strings.Split(strings.TrimSpace(ascii), "\n")
	addText("unsorted", strings.Join(append(append([]string{lines[0]}, lines[20:]...), lines[1:20]...), "\n"), "unsorted")
	addText("up and down", strings.TrimSpace(ascii)+strings.TrimPrefix(reversed(ascii), lines[0]), "unsorted duplicate-points")
	addText("a row twice", strings.Join(append(append([]string{}, lines[:8]...), lines[7:]...), "\n"), "duplicate-points")

	// Marks and dropped rows.
	marked := func(mark string) string {
		return strings.Replace(ascii, "\n1000,", "\n150,"+mark+","+mark+"\n1000,", 1)
	}
	for _, m := range []string{"----", "OL", "+9.9E37", "9.9E37", "NaN", "Inf", "-Inf", "", "***", "9.90000E+37"} {
		addText("mark "+m, marked(m), "rows-dropped")
	}
	addText("a row at 0 Hz", strings.Replace(ascii, "\n100,", "\n0,1e9,-90\n100,", 1), "rows-dropped")
	addText("a row of |Z| = 0", strings.Replace(ascii, "\n1000,", "\n150,0,0\n1000,", 1), "rows-dropped")
	addText("text below the table", ascii+"\nmeasured in the cold room\n", "rows-dropped")

	// Suffixes in the cells.
	suffix := "Frequency,|Z|,Phase (deg)\n"
	for i := range freq {
		suffix += fmt.Sprintf("%.9g kHz,%.9g mOhm,%.9g\n", freq[i]/1e3, cmplx.Abs(z[i])*1e3, cmplx.Phase(z[i])*deg)
	}
	addText("units in the cells", suffix, "unit-assumed")
	suffix = "Frequency,|Z|,Phase (deg)\n"
	for i := range freq {
		suffix += fmt.Sprintf("%.9gk,%.9gm,%.9g\n", freq[i]/1e3, cmplx.Abs(z[i])*1e3, cmplx.Phase(z[i])*deg)
	}
	addText("prefixes in the cells", suffix, "unit-assumed")

	// S-parameters in delimited text.
	s11 := func(z complex128) complex128 { return (z - 50) / (z + 50) }
	addText("S11 re and im", textTable("Freq(Hz),S11(REAL),S11(IMAG)", ",", func(f float64, z complex128) []float64 {
		return []float64{f, real(s11(z)), imag(s11(z))}
	}), "reference-assumed")
	addText("S11 dB and degrees", "! Z0: 50 Ohm\n"+textTableOf("Freq(Hz),S11(DB),S11(DEG)", ",", func(v float64) string { return fmt.Sprintf("%.13g", v) }, func(f float64, z complex128) []float64 {
		return []float64{f, 20 * math.Log10(cmplx.Abs(s11(z))), cmplx.Phase(s11(z)) * deg}
	}), "")
	addText("S11 magnitude and phase", "Z0,50\n"+textTableOf("Frequency (Hz),|S11|,Phase (deg)", ",", func(v float64) string { return fmt.Sprintf("%.13g", v) }, func(f float64, z complex128) []float64 {
		return []float64{f, cmplx.Abs(s11(z)), cmplx.Phase(s11(z)) * deg}
	}), "")
	s21 := func(z complex128) complex128 { return 2 * z / (2*z + 50) }
	addOpt("S21 shunt", textTable("Freq(Hz),re(S21),im(S21)", ",", func(f float64, z complex128) []float64 {
		return []float64{f, real(s21(z)), imag(s21(z))}
	}), Options{Connection: ConnectionShunt, Reference: 50}, "")

	// Blocks and files in several pieces.
	addText("two blocks", "Trace: magnitude\nFrequency (Hz),|Z| (Ohm)\n"+textTable("", ",", func(f float64, z complex128) []float64 { return polarDeg(f, z)[:2] })+
		"\nTrace: phase\nFrequency (Hz),Phase (deg)\n"+textTable("", ",", func(f float64, z complex128) []float64 { v := polarDeg(f, z); return []float64{v[0], v[2]} }), "")
	addText("a part column", textTable("", "", func(float64, complex128) []float64 { return nil })[:0]+
		strings.ReplaceAll(strings.Replace(ascii, "Frequency", "Part,Frequency", 1), "\n", "\nc017,")[:len(strings.ReplaceAll(strings.Replace(ascii, "Frequency", "Part,Frequency", 1), "\n", "\nc017,"))-len("c017,")], "")

	// Overrides.
	addOpt("columns by number", textTable("A,B,C", ",", polarDeg), Options{Columns: Columns{"f": "1", "z": "2", "phase": "3"}, Units: Units{"phase": "deg", "f": "Hz", "z": "Ohm"}}, "")
	addOpt("columns by text", textTable("A,B,C", ",", polarRad), Options{Columns: Columns{"f": "A", "z": "b", "phase": "C"}, Units: Units{"phase": "rad", "f": "Hz", "z": "Ohm"}}, "")
	addOpt("columns without header", textTable("", ";", rect), Options{Columns: Columns{"f": "1", "r": "2", "x": "3"}}, "unit-assumed")
	addOpt("units", textTable("Frequency,|Z|,Phase", ",", scaledBy(polarRad, 1e-3, 1e3)), Options{Units: Units{"f": "kHz", "z": "mOhm", "phase": "rad"}}, "")
	addOpt("no header, radians", textTable("", ",", polarRad), Options{Units: Units{"phase": "rad"}}, "no-header")

	// Touchstone.
	touchstone := func(f TouchstoneFormat) []byte {
		var b bytes.Buffer
		if err := WriteTouchstone(&b, freq, z, []string{"bench"}, f); err != nil {
			t.Fatal(err)
		}
		return b.Bytes()
	}
	for _, p := range []string{"S", "Z", "Y"} {
		for _, f := range []string{"RI", "MA", "DB"} {
			addFile("Touchstone "+p+" "+f, "c017.s1p", touchstone(TouchstoneFormat{Parameter: p, Format: f, Unit: "MHz", Reference: 75}), nil, "")
		}
	}
	addFile("Touchstone without ending", "-", touchstone(TouchstoneFormat{}), nil, "")
	addFile("Touchstone 2.0", "c017.ts", []byte("[Version] 2.0\n# Hz Z RI\n[Number of Ports] 1\n[Number of Frequencies] 41\n[Reference] 20\n[Network Data]\n"+textTable("", " ", rect)+"[End]\n"), nil, "")

	// Spreadsheets.
	head := []any{"Frequency (Hz)", "|Z| (Ω)", "Phase (°)"}
	addFile("spreadsheet", "c017.xlsx", workbook(t, map[string][][]any{"Data": sheetRows(head)}, []string{"Data"}), nil, "")
	addFile("second sheet", "c017.xlsx#Sweep", workbook(t, map[string][][]any{"Notes": {{"hello"}}, "Sweep": sheetRows([]any{"Part", "C17"}, []any{"Temperature", 23.5, "°C"}, []any{}, head)}, []string{"Notes", "Sweep"}), nil, "")

	if len(all) < 60 {
		t.Errorf("%d dialects, want at least 60", len(all))
	}
	names := map[string]bool{}
	for _, d := range all {
		if names[d.name] {
			t.Errorf("dialect %q twice", d.name)
		}
		names[d.name] = true
		t.Run(d.name, func(t *testing.T) {
			sweeps, err := Read(d.file, bytes.NewReader(d.data), d.opt)
			if err != nil {
				t.Fatalf("%v\n%.300s", err, d.data)
			}
			if len(sweeps) != 1 {
				t.Fatalf("%d sweeps, want 1", len(sweeps))
			}
			s := sweeps[0]
			if got := codes(s.Warnings); got != d.warnings {
				t.Errorf("warnings %q, want %q: %v", got, d.warnings, s.Warnings)
			}
			if want := "c017"; s.Part != want && d.file != "-" {
				t.Errorf("part %q, want %q", s.Part, want)
			}
			if len(s.Freq) != len(freq) || len(s.Z) != len(freq) {
				t.Fatalf("%d points, want %d", len(s.Freq), len(freq))
			}
			for i := range freq {
				if !(math.Abs(s.Freq[i]/freq[i]-1) <= 1e-8) {
					t.Fatalf("point %d at %v Hz, want %v", i, s.Freq[i], freq[i])
				}
				// Nine digits of each of two numbers; an S-parameter loses what the
				// reference resistance is larger than |Z|.
				tol := 3e-8
				if s.S != nil {
					tol *= 50 / cmplx.Abs(z[i])
				}
				if !near(s.Z[i], z[i], tol) {
					t.Fatalf("at %v Hz Z = %v, want %v", freq[i], s.Z[i], z[i])
				}
			}
			var b strings.Builder
			if err := s.Reading.WriteText(&b); err != nil || b.Len() == 0 {
				t.Errorf("reading: %v %q", err, b.String())
			}
		})
	}
	t.Logf("%d dialects", len(all))
}
