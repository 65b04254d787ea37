package rational

import (
	"math"
	"math/cmplx"
	"os"
	"strconv"
	"strings"
	"testing"
)

// rows reads the numbers of a file of testdata/open-sweeps (sources and licences in its README); lines that do not begin with a number are
// left out.
func rows(t *testing.T, name string) [][]float64 {
	t.Helper()
	b, err := os.ReadFile("../../testdata/open-sweeps/" + name)
	if err != nil {
		t.Fatal(err)
	}
	var out [][]float64
	for line := range strings.Lines(string(b)) {
		var row []float64
		for _, cell := range strings.FieldsFunc(line, func(r rune) bool { return strings.ContainsRune(", \t\r\n", r) }) {
			v, err := strconv.ParseFloat(cell, 64)
			if err != nil {
				break
			}
			row = append(row, v)
		}
		if len(row) >= 3 {
			out = append(out, row)
		}
	}
	return out
}

func coil(t *testing.T, name string) (f []float64, z []complex128) {
	mag, ang := rows(t, name+"_MAG_Z.CSV"), rows(t, name+"_ANG_Z.CSV")
	for i, r := range mag {
		f = append(f, r[0])
		z = append(z, cmplx.Rect(r[1], ang[i][1]*math.Pi/180))
	}
	return f, z
}

// impedanceOf is Z of a reflection coefficient at 50 Ω.
func impedanceOf(g complex128) complex128 { return 50 * (1 + g) / (1 - g) }

func TestOpenSweeps(t *testing.T) {
	type sweep struct {
		name   string
		f      []float64
		z      []complex128
		points int
		// noise is the largest accepted Noise: nobody states it, so it is what was reached with some room, against getting worse.
		noise float64
	}
	var sweeps []sweep
	for _, name := range []string{"coil_220u_1kHz_20MHz", "coil_330u_1kHz_20MHz"} {
		f, z := coil(t, name)
		sweeps = append(sweeps, sweep{name, f, z, 201, 1.5e-3})
	}
	film := sweep{name: "printed_film_T61", points: 1016, noise: 1e-2}
	for _, r := range rows(t, "printed_film_T61.csv") {
		film.f = append(film.f, r[0])
		film.z = append(film.z, impedanceOf(cmplx.Rect(math.Pow(10, r[1]/20), r[2]*math.Pi/180)))
	}
	cavity := sweep{name: "resonator", points: 201, noise: 6e-4}
	for _, r := range rows(t, "resonator_Table6c27.txt") {
		cavity.f = append(cavity.f, r[0]*1e9)
		cavity.z = append(cavity.z, impedanceOf(complex(r[1], r[2])))
	}
	sweeps = append(sweeps, film, cavity)
	for _, s := range sweeps {
		if len(s.f) != s.points {
			t.Fatalf("%s: %d points, want %d", s.name, len(s.f), s.points)
		}
		r := fit(t, s.f, s.z, nil)
		p, err := PointNoise(s.f, s.z)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%s: order %d, noise %.2g, point noise %.2g", s.name, r.Order, r.Noise, p)
		if !(r.Noise < s.noise) || !(r.Noise > 0.8*p) {
			t.Errorf("%s: noise %g, want < %g, and not below the point noise %g", s.name, r.Noise, s.noise, p)
		}
	}
}

// The same meter measured both coils, and both sweeps have a small level step between the same two points: the meter's, as the parts
// resonate at different frequencies.
func TestOpenSweepsShareAStep(t *testing.T) {
	for _, name := range []string{"coil_220u_1kHz_20MHz", "coil_330u_1kHz_20MHz"} {
		f, z := coil(t, name)
		c, err := Check(f, z, nil)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%s: local noise %.2g, misfit %.2g, excess %.2f, structure p %.1g, phase sense %.2f, steps %+v",
			name, c.LocalNoise, c.Misfit, c.Excess, c.StructureP, c.PhaseSense, c.Steps)
		if len(c.Steps) != 1 || !(c.Steps[0].Freq > 1.4e6 && c.Steps[0].Freq < 1.5e6) || !(c.Steps[0].Relative < -1e-3 && c.Steps[0].Relative > -3e-3) {
			t.Errorf("%s: steps %+v, want one of about −0.2 %% between 1.4 and 1.5 MHz", name, c.Steps)
		}
		if c.reversed || c.PhaseSense < 0.9 {
			t.Errorf("%s: phase sense %.2f", name, c.PhaseSense)
		}
	}
}

// The resonator's source notes state an unloaded Q of 862 (its method 2). The reflection coefficient of a cavity seen through a line has
// no unique impedance of the cavity alone, but its loaded resonance is a pole of the reflection coefficient itself.
func TestResonatorPole(t *testing.T) {
	var f []float64
	var g []complex128
	for _, r := range rows(t, "resonator_Table6c27.txt") {
		f = append(f, r[0]*1e9)
		g = append(g, complex(r[1], r[2]))
	}
	r := fit(t, f, g, &Settings{MaxPoles: 2})
	for _, p := range r.Poles {
		if imag(p) > 0 {
			f0, q := cmplx.Abs(p)/(2*math.Pi), -cmplx.Abs(p)/(2*real(p))
			t.Logf("pole at %.6g Hz, loaded Q %.4g", f0, q)
			// The loaded Q is below the unloaded one, and not by much: a small coupling loop.
			if !(f0 > f[0] && f0 < f[len(f)-1]) || !(q > 700 && q < 862) {
				t.Errorf("pole at %g Hz with a loaded Q of %g", f0, q)
			}
		}
	}
	if r.Order != 2 {
		t.Errorf("order %d", r.Order)
	}
}

// The calculated two-ports hold one ideal part in series between two 50 Ω ports: Z = 2·Z0·(1 − S21)/S21.
func TestKnownParts(t *testing.T) {
	for _, c := range []struct {
		name  string
		value func(m *Model) float64
		want  float64
	}{
		{"resistor-1ohm", func(m *Model) float64 { return m.Constant }, 1},
		{"capacitor-p01pF", func(m *Model) float64 { return 1 / m.Origin }, 10e-15},
		{"inductor-p1nH", func(m *Model) float64 { return m.Slope }, 0.1e-9},
	} {
		var f []float64
		var z []complex128
		for _, r := range rows(t, "known-twoports/"+c.name+".s2p") {
			s21 := complex(r[3], r[4])
			f = append(f, r[0])
			z = append(z, 100*(1-s21)/s21)
		}
		r := fit(t, f, z, &Settings{MaxPoles: 2})
		if got := c.value(&r.Model); !(math.Abs(got/c.want-1) < 1e-9) {
			t.Errorf("%s: %.12g, want %g", c.name, got, c.want)
		}
	}
}
