package ingest

import (
	"bytes"
	"io"
	"math/cmplx"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// checkSweeps holds what every sweep promises, and what every error does.
func checkSweeps(t *testing.T, sweeps []*Sweep, err error) {
	t.Helper()
	if err != nil {
		if s := err.Error(); strings.ContainsAny(s, "\n\r") || s == "" {
			t.Errorf("error of more than one line: %q", s)
		}
		if e, ok := err.(*Error); !ok {
			t.Errorf("error of type %T", err)
		} else if e.Reading != nil {
			if err := e.Reading.WriteText(io.Discard); err != nil {
				t.Error(err)
			}
		}
		if len(sweeps) > 0 {
			t.Error("sweeps beside an error")
		}
		return
	}
	if len(sweeps) == 0 {
		t.Fatal("neither sweeps nor an error")
	}
	for _, s := range sweeps {
		if len(s.Freq) == 0 || len(s.Freq) != len(s.Z) || s.S != nil && len(s.S) != len(s.Z) {
			t.Fatalf("%d frequencies, %d impedances, %d S", len(s.Freq), len(s.Z), len(s.S))
		}
		if len(s.SHA256) != 64 {
			t.Errorf("digest %q", s.SHA256)
		}
		for i, f := range s.Freq {
			if !(f > 0) || i > 0 && !(f > s.Freq[i-1]) {
				t.Fatalf("frequencies %v", s.Freq)
			}
			if s.Z[i] == 0 || cmplx.IsNaN(s.Z[i]) || cmplx.IsInf(s.Z[i]) {
				t.Fatalf("Z = %v", s.Z[i])
			}
		}
	}
	// All sweeps of a file share one reading.
	if err := sweeps[0].Reading.WriteText(io.Discard); err != nil {
		t.Error(err)
	}
}

func FuzzRead(f *testing.F) {
	for _, s := range []string{
		smallSweep, preamble + smallSweep, "100,1,2\n200,3,4\n", "", "\n", "\xff\xfea\x00", "\xef\xbb\xbf" + smallSweep,
		commas(strings.ReplaceAll(smallSweep, ",", ";")),
		"f (Hz),Z (Ohm)\n1000,1+2j\n2000,(1-2i)\n",
		"Part,f (Hz),Cs (uF),D\na,100,1,0.1\nb,100,1,.1\na,200,1,.1\n",
		"f (Hz),R a,X a,R b,X b\n100,1,2,3,4\n200,1,2,3,4\n",
		",a,,b,\nf (Hz),R (Ohm),X (Ohm),R (Ohm),X (Ohm)\n100,1,2,3,4\n",
		"f (Hz),|Z| (Ohm)\n100,1\n200,2\n\nf (Hz),Phase (deg)\n100,-90\n200,-80\n",
		"% FREQ         S11\n% GHz           Re.               Im.             Mg.             Ph.\n3.6 .1 -.9 .9 -86\n3.7 .1 -.9 .9 -86\n",
		"Frequency, Formatted Data, Formatted Data\n+5.0E+000, +1.7E+001, +0.0E+000\n",
		"BEGIN\nFreq(Hz),S11(DB),S11(DEG)\n1e6,-1,20\n2e6,-2,30\nEND\n",
		"Frequency (Hz),S21 (dB),Phase (deg)\n1e6,-1,20\n",
		"# Hz S RI R 50\n1 0 0\n2 .1 .1\n",
		"Freq Hz\t|Z| Ohm\tTheta deg\n1k\t1.2k\t-90\n2k\tOL\t\n",
		"\"a\"\"b\",\"c\nf,z,\"theta\n1,2,3\n",
	} {
		f.Add([]byte(s), byte(0))
		f.Add([]byte(s), byte(3))
	}
	columns := []Columns{nil, {"f": "1", "z": "2", "phase": "3"}, {"f": "Freq (Hz)", "r": "2", "x": "X"}, {"f": "2", "cs": "3", "d": "4", "part": "1"}}
	f.Fuzz(func(t *testing.T, data []byte, how byte) {
		o := &Options{Columns: columns[how%4], Connection: []string{"", "series", "shunt", "reflection"}[how/4%4]}
		if how&16 != 0 {
			o.Units = Units{"f": "kHz", "phase": "rad", "cs": "nF"}
		}
		sweeps, err := Read([]string{"a.csv", "-", "b.ts"}[how/32%3], bytes.NewReader(data), o)
		checkSweeps(t, sweeps, err)
	})
}

func FuzzTouchstone(f *testing.F) {
	for _, s := range []string{
		"# Hz S RI R 50\n1 0 0\n2 .1 .1\n", "#\n1 1 0\n", "! c\n# MHz Z MA R 75\n100 .99 -4\n", "# GHz Y DB R 50\n1 0 90\n",
		"# Hz S RI R 50\n1 1 2 3 4 5 6 7 8\n.5 1 2 3 4\n",
		"[Version] 2.0\n# Hz S RI\n[Number of Ports] 2\n[Two-Port Data Order] 12_21\n[Number of Frequencies] 1\n[Reference] 50\n50\n[Matrix Format] Upper\n[Network Data]\n1 1 2 3 4\n5 6\n[End]\n",
		"[Version] 2.1\n# Hz Z RI\n[Number of Ports] 1\n[Begin Information]\nx\n[End Information]\n[Network Data]\n1 2 3\n[Noise Data]\n",
	} {
		f.Add(s, byte(1))
		f.Add(s, byte(6))
	}
	f.Fuzz(func(t *testing.T, text string, how byte) {
		o := &Options{Connection: []string{"", "series", "shunt", "reflection"}[how%4]}
		sweeps, err := Read([]string{"a.s1p", "a.s2p", "a.ts", "-"}[how/4%4], strings.NewReader(text), o)
		checkSweeps(t, sweeps, err)
	})
}

func FuzzSpreadsheet(f *testing.F) {
	book := func(rows [][]any) []byte {
		return workbook(&testing.T{}, map[string][][]any{"A": rows}, []string{"A"})
	}
	f.Add(book([][]any{{"f (Hz)", "R (Ohm)", "X (Ohm)"}, {1, 2, 3}, {2, "2,5", "OL"}}))
	f.Add(book([][]any{{"Part", "C17"}, {}, {"f (Hz)", "Z (Ohm)", "Phase (deg)"}, {100, 2, -90}}))
	f.Add([]byte("PK\x03\x04"))
	f.Fuzz(func(t *testing.T, data []byte) {
		sweeps, err := Read("a.xlsx", bytes.NewReader(data), &Options{MaxBytes: 1 << 20})
		checkSweeps(t, sweeps, err)
	})
}

// FuzzSheetCells puts any text into cells, past the archive.
func FuzzSheetCells(f *testing.F) {
	f.Add("f (Hz)|R (Ohm)|X (Ohm)\n1|2|3\n2|3|4")
	f.Add("Part|x\n\nf|Z|theta\nkHz|Ohm|deg\n1|2|3")
	f.Fuzz(func(t *testing.T, text string) {
		src := &source{name: "a.xlsx", sheet: "A", delim: cellMark, decimal: '.'}
		for n, l := range strings.Split(text, "\n") {
			from := len(src.text)
			src.text += strings.ReplaceAll(l, "|", string(rune(cellMark)))
			if strings.Trim(src.text[from:], " \t\v\f") != "" {
				src.lines = append(src.lines, line{int32(from), int32(len(src.text)), int32(n + 1)})
			}
		}
		src.detectDecimal()
		p, err := readDelimited(src, (*Options)(nil).orDefault())
		if err != nil {
			t.Fatal(err)
		}
		sweeps, err := p.finished(nil, Options{})
		checkSweeps(t, sweeps, err)
	})
}

func FuzzTable(f *testing.F) {
	f.Add("f_from,f_to,z_from,z_to,magnitude,phase\n20Hz,1kHz,1,100k,0.05%,0.03\n")
	f.Add("# x\nphase,magnitude,z_to,z_from,f_to,f_from\n,1%,,,,\n")
	f.Fuzz(func(t *testing.T, text string) {
		a, err := ReadAccuracy("a.csv", strings.NewReader(text))
		if err != nil {
			if strings.ContainsAny(err.Error(), "\n\r") {
				t.Errorf("error of more than one line: %q", err)
			}
			return
		}
		if m, p, ok := a.At(1000, 1); ok && !(m > 0 && m < 1 && p > 0) {
			t.Errorf("accuracy %v %v", m, p)
		}
	})
}

func FuzzFlags(f *testing.F) {
	for _, s := range []string{"f=1,z=2,phase=3", `f="a,b",r=x`, "f=kHz,z=mOhm", "0.1%,0.05deg", "50+2j", "=", ",", `f="`} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		_, e1 := ParseColumns(s)
		_, e2 := ParseUnits(s)
		_, e3 := ParseImpedance(s)
		for _, err := range []error{e1, e2, e3} {
			if err != nil && strings.ContainsAny(err.Error(), "\n\r") {
				t.Errorf("error of more than one line: %q", err)
			}
		}
	})
}

// Inputs made to be slow or large must end in reasonable time and memory.
func TestHostileInputs(t *testing.T) {
	const n = 1 << 18
	for name, text := range map[string]string{
		"one line of commas":      strings.Repeat(",", n),
		"one line of numbers":     strings.Repeat("1,", n/2),
		"headers only":            strings.Repeat("f (Hz),R (Ohm),X (Ohm)\n", n/24),
		"headers, all different":  strings.Repeat("f (Hz),R a,X b\nf,z,phase q\n", n/28),
		"text lines in the table": smallSweep + strings.Repeat("abc def\n", n/8),
		"bad rows":                smallSweep + strings.Repeat("a,b,c\n", n/6) + "5,6,7\n",
		"comments":                smallSweep + strings.Repeat("# f, z\n", n/8),
		"blocks":                  strings.Repeat("f (Hz),R (Ohm),X (Ohm)\n1,2,3\n2,3,4\n\n", n/36),
		"halves":                  strings.Repeat("f (Hz),R (Ohm)\n1,2\n2,3\n\n", n/24),
		"quotes":                  strings.Repeat("\"", n),
		"quotes in lines":         strings.Repeat("\"\"\",\"\n", n/6),
		"parts":                   "Part,f (Hz),R (Ohm),X (Ohm)\n" + strings.Repeat("a,1,2,3\nb,1,2,3\n", n/16),
		"one long header":         "f (Hz)," + strings.Repeat("R (Ohm) c,", 1500) + "\n" + strings.Repeat("1,", 1501) + "\n",
		"side by side":            sideBySide(1500),
		"a line of blanks":        smallSweep + strings.Repeat(" ", n),
		"touchstone keywords":     "[Version] 2.0\n# Hz S RI\n" + strings.Repeat("[x] 1\n", n/6),
		"a long comment":          "! " + strings.Repeat("a:", n/2),
	} {
		start := time.Now()
		sweeps, err := Read("a.csv", strings.NewReader(text), nil)
		checkSweeps(t, sweeps, err)
		t.Logf("%s: %v", name, time.Since(start))
		if name == "side by side" && len(sweeps) != 1500 {
			t.Errorf("%s: %d parts, %v", name, len(sweeps), err)
		}
	}
}

func sideBySide(n int) string {
	var h, r strings.Builder
	h.WriteString("f (Hz)")
	r.WriteString("1000")
	for i := range n {
		h.WriteString(",R c" + number(float64(i)) + " (Ohm),X c" + number(float64(i)) + " (Ohm)")
		r.WriteString(",1,2")
	}
	return h.String() + "\n" + r.String() + "\n"
}

// Whatever lies in the folder is read or refused with the promises kept.
func TestOpenSweepsHoldInvariants(t *testing.T) {
	err := filepath.WalkDir(openSweeps, func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		sweeps, err := Open(path, &Options{Connection: ConnectionSeries})
		checkSweeps(t, sweeps, err)
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}
