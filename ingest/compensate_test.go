package ingest

import (
	"errors"
	"math"
	"strings"
	"testing"
)

func point(z complex128) *Sweep {
	return &Sweep{File: "p.csv", Freq: []float64{1000}, Z: []complex128{z}}
}

// Check values of the collected list, section 10 (calculated there from the
// chain matrix of three fixtures).
func TestCompensationPublished(t *testing.T) {
	apply := func(f Fixture, z complex128) complex128 {
		t.Helper()
		s, err := f.Apply(point(z))
		if err != nil {
			t.Fatal(err)
		}
		return s.Z[0]
	}
	// Fixture G, not symmetric, needs the load.
	g := Fixture{Open: point(4229.50819672131 - 45524.5901639344i), Short: point(0.121080298684382 + 0.0608397315252857i),
		Load: point(51.0189464218727 + 0.307686515081718i), LoadValue: 49.9 + 0.1i}
	for _, c := range []struct{ raw, want complex128 }{
		{102.127973079599 + 30.8489199353316i, 100 + 30i},
		{0.178137703663865 - 1.46905463063776i, 0.05 - 1.5i},
	} {
		if got := apply(g, c.raw); !near(got, c.want, 1e-12) {
			t.Errorf("open/short/load of %v = %v, want %v", c.raw, got, c.want)
		}
	}
	// Fixture T, a residual Zs and a stray Yo: open measures Zs + 1/Yo.
	zs, yo := 0.1+0.05i, 1e-6+2e-5i
	f := Fixture{Open: point(zs + 1/yo), Short: point(zs)}
	for _, c := range []struct{ raw, want complex128 }{
		{100.210572999696 + 29.8616813774994i, 100 + 30i},
		{0.149999247500063 - 1.44995490135559i, 0.05 - 1.5i},
	} {
		if got := apply(f, c.raw); !near(got, c.want, 1e-12) {
			t.Errorf("open/short of %v = %v, want %v", c.raw, got, c.want)
		}
	}
}

// Known parts in simulated fixtures come back to 1e-9, the fixture sweeps being
// on the same frequencies.
func TestCompensationEmbedded(t *testing.T) {
	freq, z := referenceSweep()
	sweep := func(zf func(w float64) complex128) *Sweep {
		s := &Sweep{File: "f.csv", Freq: freq, Z: make([]complex128, len(freq))}
		for i := range freq {
			s.Z[i] = zf(2 * math.Pi * freq[i])
		}
		return s
	}
	zs := func(w float64) complex128 { return complex(0.02+1e-6*math.Sqrt(w), w*8e-9) }
	yo := func(w float64) complex128 { return complex(1e-9, w*2e-12) }
	in := func(w float64, z complex128) complex128 { return zs(w) + 1/(yo(w)+1/z) }
	raw := &Sweep{File: "c.csv", Freq: freq, Z: make([]complex128, len(freq)), S: make([]complex128, len(freq)), Connection: ConnectionShunt}
	for i := range freq {
		raw.Z[i] = in(2*math.Pi*freq[i], z[i])
	}
	before := append([]complex128(nil), raw.Z...)
	open := sweep(func(w float64) complex128 { return zs(w) + 1/yo(w) })
	short := sweep(zs)
	load := sweep(func(w float64) complex128 { return in(w, 50+2i) })
	for name, f := range map[string]Fixture{
		"open/short":      {Open: open, Short: short},
		"open/short/load": {Open: open, Short: short, Load: load, LoadValue: 50 + 2i},
	} {
		got, err := f.Apply(raw)
		if err != nil {
			t.Fatal(err)
		}
		if got.S != nil || got.Connection != "" {
			t.Errorf("%s: still marked as S-parameters", name)
		}
		for i := range freq {
			if !near(got.Z[i], z[i], 1e-9) {
				t.Fatalf("%s: Z = %v at %v Hz, want %v", name, got.Z[i], freq[i], z[i])
			}
		}
	}
	for i := range before {
		if raw.Z[i] != before[i] {
			t.Fatal("Apply changed its argument")
		}
	}
	// Open alone takes away the stray admittance, short alone the residual.
	s := point(1 / (1/(100+30i) + 1e-6i))
	if got, err := (Fixture{Open: point(1 / 1e-6i)}).Apply(s); err != nil || !near(got.Z[0], 100+30i, 1e-12) {
		t.Errorf("open only: %v %v", got, err)
	}
	if got, err := (Fixture{Short: point(1 + 2i)}).Apply(point(101 + 32i)); err != nil || !near(got.Z[0], 100+30i, 1e-14) {
		t.Errorf("short only: %v %v", got, err)
	}
}

func TestInterpolation(t *testing.T) {
	s := &Sweep{File: "o.csv", Freq: []float64{100, 10000}, Z: []complex128{1 + 10i, 3 + 40i}}
	if z, ok := s.Interpolate(1000); !ok || !near(z, 2+25i, 1e-14) { // half way in log frequency
		t.Errorf("at 1 kHz %v %v", z, ok)
	}
	if z, ok := s.Interpolate(100 * (1 - 1e-12)); !ok || z != s.Z[0] {
		t.Errorf("at the end %v %v", z, ok)
	}
	for _, f := range []float64{99, 10001, 0, -1, math.NaN()} {
		if _, ok := s.Interpolate(f); ok {
			t.Errorf("%v Hz is inside", f)
		}
	}
	_, err := Fixture{Short: s}.Apply(&Sweep{File: "c.csv", Freq: []float64{50}, Z: []complex128{1}})
	var r *RangeError
	if !errors.As(err, &r) || err.Error() != "o.csv: expected the short sweep to cover 50.00 Hz, found 100.0 Hz to 10.00 kHz; try: a fixture sweep over the range of the part's" {
		t.Errorf("outside: %v", err)
	}
}

func TestCompensationErrors(t *testing.T) {
	p := point(1)
	for _, c := range []struct {
		f    Fixture
		z    complex128
		want string
	}{
		{Fixture{}, 1, "expected an open or a short sweep"},
		{Fixture{Load: p, LoadValue: 50, Open: p}, 1, "expected an open and a short sweep beside the load, found the open only"},
		{Fixture{Open: p, Short: p, Load: p}, 1, "--load-value 50"},
		{Fixture{Short: p}, 1, "finite impedance after compensation"},
	} {
		if _, err := c.f.Apply(point(c.z)); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %s", c.f, err, c.want)
		}
	}
}

func TestParseImpedance(t *testing.T) {
	for text, want := range map[string]complex128{"50": 50, "50+2j": 50 + 2i, "50 Ω": 50, "1k": 1000, "49.9-0.1i": 49.9 - 0.1i, "-3j": -3i} {
		if got, err := ParseImpedance(text); err != nil || got != want {
			t.Errorf("%q: %v %v, want %v", text, got, err, want)
		}
	}
	for _, text := range []string{"", "0", "x", "10uF", "NaN", "j+"} {
		if got, err := ParseImpedance(text); err == nil {
			t.Errorf("%q: %v, want an error", text, got)
		}
	}
}
