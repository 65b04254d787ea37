package ingest

import (
	"math/cmplx"
	"testing"
)

// Files on disk, for the reader and for whole commands; their README says what
// they hold.
func TestSamples(t *testing.T) {
	const dir = "../testdata/ingest/"
	freq, z := referenceSweep()
	for path, o := range map[string]*Options{
		"plain.csv": nil, "preamble-decimal-comma-windows-1252.csv": nil, "utf-16-tabs.txt": nil, "cs-d.dat": nil, "no-header.csv": nil,
		"overload.csv": nil, "blocks.csv": nil, "pair_MAG.csv": nil, "pair_PHASE.csv": nil, "reflection.s1p": nil, "book.xlsx#Sweep": nil, "lot.csv": nil,
		"shunt.s2p": {Connection: ConnectionShunt}, "series.s2p": {Connection: ConnectionSeries},
		"ambiguous-c.csv": {Columns: Columns{"f": "1", "cs": "2", "d": "3"}},
	} {
		sweeps, err := Open(dir+path, o)
		if err != nil {
			t.Errorf("%s: %v", path, err)
			continue
		}
		want := 1
		if path == "lot.csv" {
			want = 3
		}
		if len(sweeps) != want || sweeps[0].File != dir+path {
			t.Errorf("%s: %d sweeps, want %d", path, len(sweeps), want)
		}
		for k, s := range sweeps {
			if len(s.Freq) != len(freq) {
				t.Errorf("%s: %d points, want %d", path, len(s.Freq), len(freq))
				continue
			}
			for i := range freq {
				w := z[i] + complex(float64(k)*0.0213, 0)
				tol := 3e-8
				if s.S != nil { // fifteen digits, but of S
					tol = 1e-13 * (50/cmplx.Abs(w) + cmplx.Abs(w)/50)
				}
				if !near(s.Z[i], w, tol) {
					t.Errorf("%s: Z = %v at %v Hz, want %v", path, s.Z[i], freq[i], w)
					break
				}
			}
		}
	}
	for path, want := range map[string]string{
		"bad-cell.csv":    dir + `bad-cell.csv:10:6: expected a number for R in Ohm, found "see note"; try: remove the row, or leave the cell empty`,
		"ambiguous-c.csv": dir + `ambiguous-c.csv:1:1: expected two columns that give an impedance, found a capacitance, D and frequency; try: --columns 'f=1,cs=2,d=3' or --columns 'f=1,cp=2,d=3'`,
		"shunt.s2p":       dir + `shunt.s2p:2:1: expected how the part was connected, found two ports; try: --connection series, shunt or reflection`,
		"book.xlsx":       dir + `book.xlsx:1:1: expected a header with a frequency column and rows of numbers, found "the sweep is on the next sheet"; try: --columns 'f=1,z=2,phase=3' with the columns' numbers`,
	} {
		if _, err := Open(dir+path, nil); err == nil || err.Error() != want {
			t.Errorf("%s:\n got %v\nwant %s", path, err, want)
		}
	}
}
