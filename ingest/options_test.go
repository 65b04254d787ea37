package ingest

import (
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestParseColumns(t *testing.T) {
	for text, want := range map[string]Columns{
		"f=1,z=2,phase=3":                  {"f": "1", "z": "2", "phase": "3"},
		" F = Freq (Hz) , r=Rs , x = Xs ":  {"f": "Freq (Hz)", "r": "Rs", "x": "Xs"},
		`f=1,z="|Z|, Ohm",phase="a=b"`:     {"f": "1", "z": "|Z|, Ohm", "phase": "a=b"},
		"f=1,cs=2,d=3,part=4":              {"f": "1", "cs": "2", "d": "3", "part": "4"},
		"":                                 {},
		"f=Frequency(Hz),y=|Y|,yphase=θ,,": nil,
	} {
		got, err := ParseColumns(text)
		if want == nil {
			if err == nil {
				t.Errorf("%q: %v, want an error", text, got)
			}
			continue
		}
		if err != nil || !cmp.Equal(got, want) {
			t.Errorf("%q: %v %v, want %v", text, got, err, want)
		}
	}
	for text, want := range map[string]string{
		"z=2,phase=3": `--columns: expected a frequency column, f=NUMBER or f=HEADER, found "z=2,phase=3"`,
		"f=1,foo=2":   `--columns: expected a key of f, z, phase, y, yphase, r, x, g, b, cs, cp, ls, lp, rs, rp, d, q, part, found "foo"`,
		"f=1,f=2":     `--columns: expected each key once, found "f"`,
		"f=0":         `--columns: expected a column number from 1, found "f=0"`,
		"f":           `--columns: expected KEY=VALUE, separated by commas, found "f"`,
		"f=":          `--columns: expected a value after f=, found "f="`,
		`f="a`:        `--columns: expected a closing quote, found "\"a"`,
	} {
		if _, err := ParseColumns(text); err == nil || err.Error() != want {
			t.Errorf("%q:\n got %v\nwant %s", text, err, want)
		}
	}
}

func TestParseUnits(t *testing.T) {
	got, err := ParseUnits("f=kHz,z=mOhm,phase=rad,cs=µF,d=%")
	if want := (Units{"f": "kHz", "z": "mOhm", "phase": "rad", "cs": "µF", "d": "%"}); err != nil || !cmp.Equal(got, want) {
		t.Errorf("%v %v", got, err)
	}
	for text, want := range map[string]string{
		"z=uF":      `--units: expected a unit of Ω, found "z=uF"`,
		"f=foo":     `--units: expected a unit of Hz, found "f=foo"`,
		"phase=Ohm": `--units: expected a unit of °, found "phase=Ohm"`,
		"part=Hz":   `--units: expected a key with a unit, one of`,
	} {
		if _, err := ParseUnits(text); err == nil || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%q:\n got %v\nwant %s", text, err, want)
		}
	}
}

// A flag that does not fit the file is said so.
func TestColumnsDoNotFit(t *testing.T) {
	text := "A,B,C\n100,1,2\n200,1,2\n"
	for want, c := range map[string]Columns{
		`a.csv:1:1: expected a column with the header "D" (--columns z), found none; try: numbers or the header's own words`:                             {"f": "A", "z": "D", "phase": "C"},
		`a.csv:1:1: expected rows of numbers with 7 columns (--columns phase=7), found none; try: numbers or the header's own words`:                     {"f": "1", "z": "2", "phase": "7"},
		`a.csv:1:1: expected two columns that give an impedance, found |Z|, D and frequency; try: --columns 'f=1,z=…,phase=…' with the columns' numbers`: {"f": "1", "z": "2", "d": "3"},
	} {
		_, err := Read("a.csv", strings.NewReader(text), &Options{Columns: c})
		if err == nil || err.Error() != want {
			t.Errorf("%v:\n got %v\nwant %s", c, err, want)
		}
	}
}
