package ingest

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestParseAccuracy(t *testing.T) {
	for _, c := range []struct {
		text       string
		mag, phase float64
	}{
		{"0.1%", 0.001, 0.001}, // the phase is as many radians (contract)
		{"0.001", 0.001, 0.001},
		{"0.1%,0.05deg", 0.001, 0.05 * math.Pi / 180},
		{"0.1%, 0.05°", 0.001, 0.05 * math.Pi / 180},
		{"0.1%,0.05", 0.001, 0.05 * math.Pi / 180},
		{"0.1%,0.002rad", 0.001, 0.002},
		{"0.1%,2mrad", 0.001, 0.002},
	} {
		a, err := ParseAccuracy(c.text)
		if err != nil {
			t.Errorf("%q: %v", c.text, err)
			continue
		}
		m, p, ok := a.At(1000, 5)
		if !ok || !a.Stated() || !(math.Abs(m/c.mag-1) < 1e-14) || !(math.Abs(p/c.phase-1) < 1e-14) {
			t.Errorf("%q: %v %v %v, want %v %v", c.text, m, p, ok, c.mag, c.phase)
		}
	}
	for text, want := range map[string]string{
		"0%":           "between 0 and 100%",
		"150%":         "between 0 and 100%",
		"-0.1%":        "between 0 and 100%",
		"0.1%,x":       "after the comma",
		"0.1%,0":       "after the comma",
		"no-such-file": "a table file",
		"":             "a table file",
	} {
		if _, err := ParseAccuracy(text); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v, want %s", text, err, want)
		}
	}
	if _, _, ok := (Accuracy{}).At(1, 1); ok || (Accuracy{}).Stated() {
		t.Error("the zero value states an accuracy")
	}
}

func TestAccuracyTable(t *testing.T) {
	path := filepath.Join(t.TempDir(), "meter.csv")
	text := "# bench meter\nf_from,f_to,z_from,z_to,magnitude,phase\n20Hz,1kHz,1,100k,0.05%,0.03\n1kHz,1MHz,1,100kOhm,0.1%,0.05deg\n1kHz,1MHz,10mΩ,1,0.005,2mrad\n,,,,2%,\n"
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	a, err := ParseAccuracy(path)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ f, z, mag, phase float64 }{
		{100, 10, 0.0005, 0.03 * math.Pi / 180},
		{1000, 10, 0.0005, 0.03 * math.Pi / 180}, // the first row that covers it
		{1001, 10, 0.001, 0.05 * math.Pi / 180},
		{1e4, 0.02, 0.005, 0.002},
		{1e7, 0.02, 0.02, 0.02},
	} {
		m, p, ok := a.At(c.f, c.z)
		if !ok || !(math.Abs(m/c.mag-1) < 1e-14) || !(math.Abs(p/c.phase-1) < 1e-14) {
			t.Errorf("at %v Hz, %v Ω: %v %v %v, want %v %v", c.f, c.z, m, p, ok, c.mag, c.phase)
		}
	}
	for text, want := range map[string]string{
		"f_from,f_to,z_from,z_to,magnitude\n1,2,3,4,5%\n":        `m.csv:1:1: expected a column phase, found "f_from,f_to,z_from,z_to,magnitude"; try: the header f_from,f_to,z_from,z_to,magnitude,phase`,
		"f_from,f_to,z_from,z_to,magnitude,phase\n":              `m.csv:1:1: expected rows below the header f_from,f_to,z_from,z_to,magnitude,phase, found only a header`,
		"f_from,f_to,z_from,z_to,magnitude,phase\n1,2,3,4,,1\n":  `m.csv:2:1: expected a magnitude accuracy above 0 and below 1, found ""; try: 0.1% or 0.001`,
		"f_from,f_to,z_from,z_to,magnitude,phase\n5,2,3,4,1%,\n": `m.csv:2:1: expected limits from low to high, found "5,2,3,4"`,
		"f_from,f_to,z_from,z_to,magnitude,phase\n1,2,3,x,1%,\n": `m.csv:2:1: expected z_to in Ω, found "x"; try: a value such as 1kΩ`,
	} {
		if _, err := ReadAccuracy("m.csv", strings.NewReader(text)); err == nil || err.Error() != want {
			t.Errorf("%q:\n got %v\nwant %s", text, err, want)
		}
	}
	// Outside a table without a last row for the rest, nothing is stated.
	b, err := ReadAccuracy("m.csv", strings.NewReader("f_from,f_to,z_from,z_to,magnitude,phase\n100,200,1,2,1%,1\n"))
	if err != nil {
		t.Fatal(err)
	}
	if _, _, ok := b.At(300, 1); ok || !b.Stated() {
		t.Error("outside the table an accuracy is stated")
	}
}
