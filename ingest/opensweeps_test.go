package ingest

import (
	"errors"
	"math"
	"math/cmplx"
	"os"
	"path/filepath"
	"testing"
)

// The numbers are those that testdata/open-sweeps/README.md tabulates, computed
// there from the files' raw numbers; sources and licences stand in that file.
const openSweeps = "../testdata/open-sweeps"

func open(t *testing.T, path string, o *Options) *Sweep {
	t.Helper()
	s, err := Open(filepath.Join(openSweeps, path), o)
	if err != nil {
		t.Fatal(err)
	}
	if len(s) != 1 {
		t.Fatalf("%s: %d sweeps", path, len(s))
	}
	return s[0]
}

func TestCoilFiles(t *testing.T) {
	for _, c := range []struct {
		name          string
		at5Hz         complex128
		inductance    float64 // X/ω at 100.004975 kHz, H
		zero          float64 // Hz, phase by straight line
		before, after float64 // degrees on either side
		peak, peakAt  float64 // Ω, Hz
	}{
		{"220u", 0.21413 + 0.06633i, 223.805e-6, 5.7127e6, 3.88, -26.67, 134572, 5.7e6},
		{"330u", 0.20812 + 0.06890i, 300.299e-6, 5.3264e6, 7.52, -21.01, 138231, 5.3e6},
	} {
		mag := "coil_" + c.name + "_1kHz_20MHz_MAG_Z.CSV"
		ang := "coil_" + c.name + "_1kHz_20MHz_ANG_Z.CSV"
		var first *Sweep
		for _, path := range []string{mag, ang, mag + "+" + ang, ang + "+" + mag} {
			s := open(t, path, nil)
			if first == nil {
				first = s
			}
			if len(s.Freq) != 201 || s.Freq[0] != 5 || s.Freq[1] != 100004.975 {
				t.Fatalf("%s: %d points from %v, %v Hz", path, len(s.Freq), s.Freq[0], s.Freq[1])
			}
			for i := range s.Z {
				if s.Z[i] != first.Z[i] {
					t.Fatalf("%s: point %d is %v, %v in another order", path, i, s.Z[i], first.Z[i])
				}
			}
			// Five decimals are tabulated.
			if d := s.Z[0] - c.at5Hz; !(math.Abs(real(d)) <= 5e-6 && math.Abs(imag(d)) <= 5e-6) {
				t.Errorf("%s: Z at 5 Hz = %v, want %v", path, s.Z[0], c.at5Hz)
			}
			if l := imag(s.Z[1]) / (2 * math.Pi * s.Freq[1]); !(math.Abs(l/c.inductance-1) <= 2e-6) {
				t.Errorf("%s: X/ω = %v, want %v", path, l, c.inductance)
			}
			peak, at := 0.0, 0
			zero := math.NaN()
			for i := range s.Z {
				if a := cmplx.Abs(s.Z[i]); a > peak {
					peak, at = a, i
				}
				if p, q := cmplx.Phase(s.Z[max(i-1, 1)])*deg, cmplx.Phase(s.Z[i])*deg; i > 1 && p > 0 && q < 0 && math.IsNaN(zero) {
					zero = s.Freq[i-1] + (s.Freq[i]-s.Freq[i-1])*p/(p-q)
					if !(math.Abs(p-c.before) <= 0.005 && math.Abs(q-c.after) <= 0.005) {
						t.Errorf("%s: phase %v, %v about the zero, want %v, %v", path, p, q, c.before, c.after)
					}
				}
			}
			if !(math.Abs(peak-c.peak) <= 0.5) || !(math.Abs(s.Freq[at]/c.peakAt-1) <= 1e-6) {
				t.Errorf("%s: peak %v at %v, want %v at %v", path, peak, s.Freq[at], c.peak, c.peakAt)
			}
			if !(math.Abs(zero/c.zero-1) <= 1e-5) {
				t.Errorf("%s: phase zero at %v, want %v", path, zero, c.zero)
			}
		}
	}
}

func TestFilmFiles(t *testing.T) {
	worst := 0.0
	for _, c := range []struct {
		name             string
		fromS, fromTable complex128 // Z at 20 MHz
		capacitance      float64
	}{
		{"printed_film_T61", 5.646 - 36.834i, 5.7 - 36.8i, 216.2e-12},
		{"printed_film_T62", 7.835 - 44.288i, 7.8 - 44.3i, 179.6e-12},
	} {
		s := open(t, c.name+".csv", nil)
		if len(s.Freq) != 1016 || s.Freq[0] != 20e6 || s.Connection != ConnectionReflection || s.Reference != 50 || s.Part != c.name {
			t.Fatalf("%s: %d points from %v, %q %v", c.name, len(s.Freq), s.Freq[0], s.Connection, s.Reference)
		}
		if d := s.Z[0] - c.fromS; !(math.Abs(real(d)) <= 5e-4 && math.Abs(imag(d)) <= 5e-4) {
			t.Errorf("%s: Z = %v, want %v", c.name, s.Z[0], c.fromS)
		}
		// The rounded columns, asked for by their headers.
		cols, err := ParseColumns("f=Frequency(Hz),r=Rs,x=Xs")
		if err != nil {
			t.Fatal(err)
		}
		r := open(t, c.name+".csv", &Options{Columns: cols})
		if r.Z[0] != c.fromTable || r.S != nil {
			t.Errorf("%s: Z from the columns = %v, want %v", c.name, r.Z[0], c.fromTable)
		}
		if got := -1 / (2 * math.Pi * r.Freq[0] * imag(r.Z[0])); !(math.Abs(got-c.capacitance) <= 5e-14*1.1) {
			t.Errorf("%s: C = %v, want %v", c.name, got, c.capacitance)
		}
		for i := range s.Z {
			d := s.Z[i] - r.Z[i]
			worst = max(worst, math.Abs(real(d)), math.Abs(imag(d)))
		}
	}
	// "differ by up to 0.36 Ω": of the two parts, over both files.
	if !(math.Abs(worst-0.36) <= 0.005) {
		t.Errorf("the two readings differ by up to %v Ω, want 0.36", worst)
	}
}

// The file gives S11 as real and imaginary part and again as magnitude and
// angle; what is read must agree with both.
func TestResonatorFile(t *testing.T) {
	s := open(t, "resonator_Table6c27.txt", nil)
	if len(s.Freq) != 201 || s.Connection != ConnectionReflection {
		t.Fatalf("%d points, %q", len(s.Freq), s.Connection)
	}
	if !(math.Abs(s.Freq[0]/3.63954464e9-1) < 1e-15) || !(math.Abs(s.Freq[200]/3.66641464e9-1) < 1e-15) {
		t.Errorf("from %v to %v Hz", s.Freq[0], s.Freq[200])
	}
	if want := complex(0.0620117, -0.9798584); s.S[0] != want {
		t.Errorf("S11 = %v, want %v", s.S[0], want)
	}
	if a, p := cmplx.Abs(s.S[0]), cmplx.Phase(s.S[0])*deg; !(math.Abs(a-0.9818187) < 1e-6 && math.Abs(p+86.37879) < 1e-5) {
		t.Errorf("S11 = %v at %v°", a, p)
	}
	if want := 50 * (1 + s.S[7]) / (1 - s.S[7]); !near(s.Z[7], want, 1e-14) {
		t.Errorf("Z = %v, want %v", s.Z[7], want)
	}
}

func TestKnownTwoports(t *testing.T) {
	series := &Options{Connection: ConnectionSeries}
	for _, c := range []struct {
		name string
		z    func(w float64) complex128
		tol  float64 // the files hold 12 digits
	}{
		{"resistor-1ohm", func(float64) complex128 { return 1 }, 2e-10},
		{"capacitor-p01pF", func(w float64) complex128 { return complex(0, -1/(w*10e-15)) }, 1e-10},
		{"inductor-p1nH", func(w float64) complex128 { return complex(0, w*100e-12) }, 1e-10},
	} {
		s := open(t, "known-twoports/"+c.name+".s2p", series)
		if len(s.Freq) != 101 || s.Freq[0] != 75e9 || s.Freq[100] != 110e9 {
			t.Fatalf("%s: %d points, %v to %v", c.name, len(s.Freq), s.Freq[0], s.Freq[len(s.Freq)-1])
		}
		for i, f := range s.Freq {
			if want := c.z(2 * math.Pi * f); !near(s.Z[i], want, c.tol) {
				t.Fatalf("%s: Z = %v at %v Hz, want %v", c.name, s.Z[i], f, want)
			}
		}
		_, err := Open(filepath.Join(openSweeps, "known-twoports", c.name+".s2p"), nil)
		if !errors.Is(err, ErrConnection) {
			t.Errorf("%s without a connection: %v", c.name, err)
		}
	}
}

// Opened as a folder, the two files of a coil are one sweep.
func TestFindOpenSweeps(t *testing.T) {
	in, err := Find([]string{openSweeps})
	if err != nil {
		t.Fatal(err)
	}
	pairs := 0
	for _, i := range in {
		if filepath.Ext(i.Path) == ".CSV" {
			pairs++
			if i.Lot != "open-sweeps" {
				t.Errorf("lot %q", i.Lot)
			}
			if s, err := i.Open(nil); err != nil || len(s) != 1 || s[0].Lot != "open-sweeps" || s[0].File != i.Display {
				t.Errorf("%s: %v %v", i.Path, s, err)
			}
		}
	}
	if pairs != 2 {
		t.Errorf("%d pairs, want 2: %v", pairs, in)
	}
	if _, err := os.Stat(filepath.Join(openSweeps, "README.md")); err != nil {
		t.Error("the source of the open sweeps must stay beside them")
	}
}
