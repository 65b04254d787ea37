package ingest

import (
	"math"
	"math/cmplx"
	"strings"
	"testing"
)

// read reads text that must hold sweeps.
func read(t *testing.T, name, text string, o *Options) []*Sweep {
	t.Helper()
	s, err := Read(name, strings.NewReader(text), o)
	if err != nil {
		t.Fatalf("%s: %v\n%s", name, err, text)
	}
	return s
}

// one reads text that must hold one sweep.
func one(t *testing.T, name, text string, o *Options) *Sweep {
	t.Helper()
	s := read(t, name, text, o)
	if len(s) != 1 {
		t.Fatalf("%s: %d sweeps, want 1\n%s", name, len(s), text)
	}
	return s[0]
}

// near compares relative to the larger of the two; NaN fails.
func near(got, want complex128, tol float64) bool {
	return cmplx.Abs(got-want) <= tol*math.Max(cmplx.Abs(got), cmplx.Abs(want))
}

func codes(ws []Warning) string {
	var c []string
	for _, w := range ws {
		c = append(c, w.Code)
	}
	return strings.Join(c, " ")
}

func TestReadPlain(t *testing.T) {
	text := "Frequency (Hz),|Z| (Ohm),Phase (deg)\n100,159.155,-89.9\n1000,15.9155,-89.5\n1e4,1.59155,-85\n"
	s := one(t, "dir/c017.csv", text, nil)
	if s.File != "dir/c017.csv" || s.Part != "c017" || len(s.Freq) != 3 || len(s.Warnings) != 0 {
		t.Errorf("got %+v", s)
	}
	if want := cmplx.Rect(15.9155, -89.5*math.Pi/180); !near(s.Z[1], want, 1e-14) || s.Freq[1] != 1000 {
		t.Errorf("got %v at %v, want %v at 1000", s.Z[1], s.Freq[1], want)
	}
	// sha256sum of the text above.
	if len(s.SHA256) != 64 {
		t.Errorf("SHA256 = %q", s.SHA256)
	}
}

func TestReadWithoutHeader(t *testing.T) {
	s := one(t, "a.csv", "100,159.155,-89.9\n1000,15.9155,-89.5\n10000,1.59155,-85\n", nil)
	if got := codes(s.Warnings); got != "no-header" {
		t.Errorf("warnings %q, want no-header", got)
	}
	if !near(s.Z[2], cmplx.Rect(1.59155, -85*math.Pi/180), 1e-14) {
		t.Errorf("Z = %v", s.Z)
	}
}

// A bad file gives one line with place, expected, found and what to try.
func TestErrors(t *testing.T) {
	head := "Frequency (Hz),|Z| (Ohm),Phase (deg)\n"
	for _, c := range []struct{ name, text, want string }{
		{"empty", "", `a.csv:1:1: expected a header and rows of numbers, found an empty file`},
		{"blank", "\n\n  \n", `a.csv:1:1: expected a header and rows of numbers, found only blank lines`},
		{"header only", head, `a.csv:1:1: expected rows of numbers, found only a header`},
		{"text in a number cell", head + "100,1,2\n200,abc,3\n300,1,x\n", `a.csv:3:5: expected a number for |Z| in Ohm, found "abc"; try: remove the row, or leave the cell empty (and 1 more)`},
		{"missing column", "Frequency (Hz),|Z| (Ohm)\n100,1\n200,2\n", `a.csv:1:1: expected two columns that give an impedance, found frequency and |Z| only; try: the file with the other quantity behind a plus: mag.csv+phase.csv`},
		{"negative frequency", head + "100,1,2\n-200,1,3\n", `a.csv:3:1: expected a frequency that is not negative, found "-200"; try: --columns to name the columns`},
		{"negative magnitude", head + "100,1,2\n200,-1,3\n", `a.csv:3:5: expected a magnitude that is not negative, found "-1"; try: --columns to name the columns`},
		{"short row", head + "100,1,2\n200,1\n", `a.csv:3:6: expected at least 3 cells, found a row of 2; try: complete or remove the row`},
	} {
		_, err := Read("a.csv", strings.NewReader(c.text), nil)
		if err == nil {
			t.Errorf("%s: no error, want %s", c.name, c.want)
		} else if err.Error() != c.want {
			t.Errorf("%s:\n got %s\nwant %s", c.name, err, c.want)
		}
	}
}
