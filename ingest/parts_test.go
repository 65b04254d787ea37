package ingest

import (
	"bytes"
	"fmt"
	"strings"
	"testing"
)

// Three parts whose R and X tell them apart.
func partRows(k float64, sep string) string {
	var b strings.Builder
	for _, f := range []float64{100, 1000, 10000} {
		fmt.Fprintf(&b, "%g%s%g%s%g\n", f, sep, k, sep, -k*1e6/f)
	}
	return b.String()
}

func TestSeveralParts(t *testing.T) {
	head := "Frequency (Hz),R (Ohm),X (Ohm)\n"
	var column, side, sideUnits, grouped, grid strings.Builder
	column.WriteString("Serial,Frequency (Hz),R (Ohm),X (Ohm)\n")
	side.WriteString("Frequency (Hz),R c1,X c1,R c2,X c2,R c3,X c3\n")
	sideUnits.WriteString("Freq (Hz);c1 R (mOhm);c1 X (Ohm);c2 R (mOhm);c2 X (Ohm);c3 R (mOhm);c3 X (Ohm)\n")
	grouped.WriteString(",c1,,c2,,c3,\nFrequency (Hz),R (Ohm),X (Ohm),R (Ohm),X (Ohm),R (Ohm),X (Ohm)\n")
	grid.WriteString("f (Hz),R (Ohm),X (Ohm),f (Hz),R (Ohm),X (Ohm),f (Hz),R (Ohm),X (Ohm)\n")
	for _, f := range []float64{100, 1000, 10000} {
		x := -1e6 / f
		for k := 1; k <= 3; k++ {
			fmt.Fprintf(&column, "c%d,%g,%d,%g\n", k, f, k, float64(k)*x)
		}
		fmt.Fprintf(&side, "%g,1,%g,2,%g,3,%g\n", f, x, 2*x, 3*x)
		fmt.Fprintf(&sideUnits, "%g;1000;%g;2000;%g;3000;%g\n", f, x, 2*x, 3*x)
		fmt.Fprintf(&grouped, "%g,1,%g,2,%g,3,%g\n", f, x, 2*x, 3*x)
		fmt.Fprintf(&grid, "%g,1,%g,%g,2,%g,%g,3,%g\n", f, x, f, 2*x, f, 3*x)
	}
	rows := func(k float64) string { return partRows(k, ",") }
	sheet := workbook(t, map[string][][]any{"A": {{"Serial", "Frequency (Hz)", "R (Ohm)", "X (Ohm)"},
		{"c1", 100, 1, -1e4}, {"c1", 1000, 1, -1e3}, {"c1", 10000, 1, -1e2},
		{"c2", 100, 2, -2e4}, {"c2", 1000, 2, -2e3}, {"c2", 10000, 2, -2e2},
		{"c3", 100, 3, -3e4}, {"c3", 1000, 3, -3e3}, {"c3", 10000, 3, -3e2}}}, []string{"A"})
	for _, c := range []struct{ name, text, parts string }{
		{"part column", column.String(), "c1 c2 c3"},
		{"side by side", side.String(), "c1 c2 c3"},
		{"side by side with units", sideUnits.String(), "c1 c2 c3"},
		{"names above", grouped.String(), "c1 c2 c3"},
		{"each with its frequencies", grid.String(), "lot-1 lot-2 lot-3"},
		{"repeated columns", strings.NewReplacer(" c1", "", " c2", "", " c3", "").Replace(side.String()), "lot-1 lot-2 lot-3"},
		{"repeated header", head + rows(1) + head + rows(2) + head + rows(3), "lot-1 lot-2 lot-3"},
		{"blank lines", head + rows(1) + "\n" + rows(2) + "\n\n" + rows(3), "lot-1 lot-2 lot-3"},
		{"blank lines and titles", head + "\nc1\n" + rows(1) + "\nc2\n" + rows(2) + "\nc3\n" + rows(3), "c1 c2 c3"},
		{"metadata between", "Part: c1\n" + head + rows(1) + "\nPart: c2\n" + head + rows(2) + "\nPart: c3\n" + head + rows(3), "c1 c2 c3"},
		{"serial in comments", "# Serial: c1\n" + head + rows(1) + "# Serial: c2\n" + rows(2) + "# Serial: c3\n" + rows(3), "c1 c2 c3"},
		{"BEGIN and END", "BEGIN\n" + head + rows(1) + "END\nBEGIN\n" + head + rows(2) + "END\nBEGIN\n" + head + rows(3) + "END\n", "lot-1 lot-2 lot-3"},
		{"spreadsheet", string(sheet), "c1 c2 c3"},
	} {
		sweeps, err := Read("lot.csv", strings.NewReader(c.text), nil)
		if err != nil {
			t.Errorf("%s: %v\n%s", c.name, err, c.text)
			continue
		}
		var parts []string
		for k, s := range sweeps {
			parts = append(parts, s.Part)
			for i, f := range []float64{100, 1000, 10000} {
				want := complex(float64(k+1), -float64(k+1)*1e6/f)
				if i >= len(s.Z) || s.Freq[i] != f || !near(s.Z[i], want, 1e-12) {
					t.Errorf("%s: part %d: %v at %v, want %v at %v", c.name, k, s.Z, s.Freq, want, f)
				}
			}
		}
		if got := strings.Join(parts, " "); got != c.parts {
			t.Errorf("%s: parts %q, want %q", c.name, got, c.parts)
		}
	}
}

// An overload or a gap in one part costs the others nothing, nor does a shorter
// sweep beside a longer one.
func TestSideBySideGaps(t *testing.T) {
	s := read(t, "a.csv", "f (Hz),R a,X a,R b,X b\n100,OL,0,2,2\n200,1,1,2,2\n300,1,1,,\n400,1,1,2,----\n", nil)
	if len(s) != 2 || len(s[0].Freq) != 3 || len(s[1].Freq) != 2 || s[0].Freq[0] != 200 || s[1].Freq[1] != 200 {
		t.Errorf("%v %v", s[0].Freq, s[1].Freq)
	}
	s = read(t, "a.csv", "f (Hz),R (Ohm),X (Ohm),f (Hz),R (Ohm),X (Ohm)\n100,1,1,10,2,2\n200,1,1,20,2,2\n,,,30,2,2\n,,,40,2,2\n", nil)
	if len(s) != 2 || len(s[0].Freq) != 2 || len(s[1].Freq) != 4 || len(s[0].Dropped) != 0 {
		t.Errorf("%v %v %v", s[0].Freq, s[1].Freq, s[0].Dropped)
	}
	s = read(t, "a.csv", "f (Hz),R (Ohm),X (Ohm),f (Hz),R (Ohm),X (Ohm)\n100,1,1,10,2,2\n200,1,1,20,2,2\n300,1,1\n", nil)
	if len(s) != 2 || len(s[0].Freq) != 3 || len(s[1].Freq) != 2 {
		t.Errorf("%v %v", s[0].Freq, s[1].Freq)
	}
}

// Comments between rows that run up and down part nothing; blank lines between
// rows in no order would make a part of each row, which is refused.
func TestGaps(t *testing.T) {
	s := one(t, "a.csv", "f (Hz),R (Ohm),X (Ohm)\n100,1,2\n200,1,2\n# turning\n200,1,2\n100,1,2\n", nil)
	if len(s.Freq) != 2 {
		t.Errorf("%v", s.Freq)
	}
	_, err := Read("a.csv", strings.NewReader("f (Hz),R (Ohm),X (Ohm)\n\n300,1,2\n\n100,1,2\n\n400,1,2\n\n50,1,2\n\n20,1,2\n\n10,1,2\n\n30,1,2\n\n1,1,2\n"), nil)
	if err == nil || !strings.Contains(err.Error(), "expected parts of several points") {
		t.Errorf("%v", err)
	}
}

// A column of conditions: constant it is metadata, else it can name the sweeps;
// where frequencies do not repeat it only wanders.
func TestConditionColumns(t *testing.T) {
	rows := "25.0,5,100,10,0.01\n25.0,5,1000,10,0.01\n25.0,5,10000,10,0.01\n"
	head := "Temp (°C),DC Bias (V),Frequency (Hz),Cs (nF),D\n"
	s := one(t, "a.csv", head+rows, nil)
	if m := s.Metadata; m.TemperatureC != 25 || !m.HasTemperature || m.BiasV != 5 || !m.HasBias || m.Bias != "5 V" || len(s.Warnings) != 0 {
		t.Errorf("%+v %v", m, s.Warnings)
	}
	if m := one(t, "a.csv", head+strings.Replace(rows, "25.0", "25.3", 1), nil).Metadata; m.HasTemperature {
		t.Errorf("a temperature that wanders is %v", m.TemperatureC)
	}
	two := read(t, "a.csv", head+rows+strings.ReplaceAll(rows, "25.0,5,", "85,5,"), &Options{Columns: Columns{"f": "3", "cs": "4", "d": "5", "part": "1"}})
	if len(two) != 2 || two[0].Part != "25.0" || two[1].Part != "85" {
		t.Errorf("%d sweeps", len(two))
	}
}

// A line of words within a sweep is no new part.
func TestWordsBetweenRows(t *testing.T) {
	s := one(t, "a.csv", "f (Hz),R (Ohm),X (Ohm)\n100,1,2\n\nrange changed\n200,1,2\n300,1,2\n", nil)
	if s.Part != "a" || len(s.Freq) != 3 || len(s.Dropped) != 1 || s.Dropped[0].Line != 4 {
		t.Errorf("%q %v %v", s.Part, s.Freq, s.Dropped)
	}
}

// A part without a usable row does not vanish without a word.
func TestEmptyPart(t *testing.T) {
	for name, text := range map[string]string{
		"column":       "Part,f (Hz),R (Ohm),X (Ohm)\na,100,1,2\na,200,1,2\nb,100,OL,2\nb,200,OL,2\n",
		"side by side": "f (Hz),R a,X a,R b,X b\n100,1,2,OL,2\n200,1,1,OL,2\n",
	} {
		s := read(t, "a.csv", text, nil)
		if len(s) != 1 || !strings.Contains(codes(s[0].Warnings), "part-empty") || !strings.Contains(fmt.Sprint(s[0].Warnings), "no row of part b could be used") {
			t.Errorf("%s: %d sweeps, %v", name, len(s), s[0].Warnings)
		}
	}
}

// Dropping a point of one part must not touch the others' frequencies.
func TestSideBySideAreIndependent(t *testing.T) {
	s := read(t, "a.csv", "f (Hz),R a,X a,R b,X b\n100,0,0,2,2\n200,1,1,2,2\n300,1,1,2,2\n", nil)
	if len(s) != 2 || len(s[0].Freq) != 2 || len(s[1].Freq) != 3 || s[1].Freq[0] != 100 || s[1].Freq[2] != 300 || s[0].Freq[0] != 200 {
		t.Fatalf("%+v", s)
	}
	s[0].Freq[0] = -1
	if s[1].Freq[1] != 200 {
		t.Error("sweeps share memory")
	}
}

func TestMetadata(t *testing.T) {
	s := one(t, "c017.csv", preamble+"Frequency (Hz),R (Ohm),X (Ohm)\n100,1,2\n1000,1,2\n10000,1,2\n", nil)
	m := s.Metadata
	if m.Part != "C17" || m.Serial != "0042" || m.Lot != "heron" || s.Lot != "heron" || m.Date != "2026-11-30 14:05:22" {
		t.Errorf("metadata %+v", m)
	}
	if m.TestLevel != "500 mV" || !m.HasTestLevel || m.TestLevelV != 0.5 || m.TestLevelA != 0 {
		t.Errorf("test level %+v", m)
	}
	if m.Bias != "12 V" || !m.HasBias || m.BiasV != 12 {
		t.Errorf("bias %+v", m)
	}
	if m.Temperature != "23.5 °C" || !m.HasTemperature || m.TemperatureC != 23.5 {
		t.Errorf("temperature %+v", m)
	}
	for _, c := range []struct {
		line string
		ok   func(Metadata) bool
	}{
		{"# Bias (V) = -5", func(m Metadata) bool { return m.HasBias && m.BiasV == -5 }},
		{"DC Bias Current, 200, mA", func(m Metadata) bool { return m.HasBias && m.BiasA == 0.2 }},
		{"OSC LEVEL;1.0Vrms", func(m Metadata) bool { return m.HasTestLevel && m.TestLevelV == 1 }},
		{"Temp (K): 298.15", func(m Metadata) bool { return m.HasTemperature && m.TemperatureC == 25 }},
		{"Temperature\t85 C", func(m Metadata) bool { return m.HasTemperature && m.TemperatureC == 85 }},
		{"Bias: off", func(m Metadata) bool { return m.Bias == "off" && !m.HasBias }},
		{"Z0: 75 Ohm", func(m Metadata) bool { return m.reference == 75 }},
	} {
		var m Metadata
		if !m.read(c.line) || !c.ok(m) {
			t.Errorf("%q: %+v", c.line, m)
		}
	}
	var none Metadata
	if none.read("Colour: red") || none.read("no colon here") || none.read(": x") {
		t.Errorf("unknown lines were taken: %+v", none)
	}
}

// Faults are counted in the one line, and listed in the reading.
func TestReadingListsAllFaults(t *testing.T) {
	text := "Frequency (Hz),R (Ohm),X (Ohm)\n100,a,2\n200,1,b\n300,1,2\n400,c,d\n"
	_, err := Read("a.csv", strings.NewReader(text), nil)
	e, ok := err.(*Error)
	if !ok || e.Line != 2 || e.Column != 5 || e.More != 2 || e.Reading == nil {
		t.Fatalf("%#v", err)
	}
	var b bytes.Buffer
	if err := e.Reading.WriteText(&b); err != nil {
		t.Fatal(err)
	}
	want := `a.csv
  format     delimited text
  encoding   UTF-8
  delimiter  comma, decimal point
  header     line 1
  column 1   "Frequency (Hz)": frequency in Hz
  column 2   "R (Ohm)": R in Ohm
  column 3   "X (Ohm)": X in Ohm
  rows       1 read, 0 dropped
  fault      line 2, column 5: expected a number for R in Ohm, found "a"; try: remove the row, or leave the cell empty
  fault      line 3, column 7: expected a number for X in Ohm, found "b"; try: remove the row, or leave the cell empty
  fault      line 5, column 5: expected a number for R in Ohm, found "c"; try: remove the row, or leave the cell empty
`
	if b.String() != want {
		t.Errorf("got\n%swant\n%s", b.String(), want)
	}
}

func TestReadingText(t *testing.T) {
	text := "Part: C17\n\nFreq,|Z|,Phase,Range\nkHz,mOhm,,\n0.1,159155,-89.9,3\n1,15915.5,-89.5,3\n2,OL,0,3\n10,1591.55,-85,3\n"
	s := one(t, "a.csv", text, nil)
	var b bytes.Buffer
	if err := s.Reading.WriteText(&b); err != nil {
		t.Fatal(err)
	}
	want := `a.csv
  format     delimited text
  encoding   UTF-8
  delimiter  comma, decimal point
  header     line 3, units in line 4
  column 1   "Freq [kHz]": frequency in kHz
  column 2   "|Z| [mOhm]": |Z| in mOhm
  column 3   "Phase": phase of Z in ° (not stated)
  column 4   "Range": not used
  part       C17
  note       the phase was taken in degrees: values up to 89.9 exceed π; --units phase=deg or phase=rad says otherwise
  rows       3 read, 1 dropped
  dropped    line 7: overload or no number in |Z|
`
	if b.String() != want {
		t.Errorf("got\n%swant\n%s", b.String(), want)
	}
}
