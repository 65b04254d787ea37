package rational

import (
	"flag"
	"math"
	"math/cmplx"
	"reflect"
	"slices"
	"strings"
	"testing"
)

// seeds is the number of random parts of each kind; more of them make the printed tables finer.
var seeds = flag.Int("seeds", 2, "random parts of each kind in the seeded tests")

func fit(t *testing.T, f []float64, z []complex128, s *Settings) *Result {
	t.Helper()
	r, err := Fit(f, z, s)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// largest is the largest |model/z − 1|.
func largest(m *Model, f []float64, z []complex128) float64 {
	e := 0.0
	for i := range f {
		if d := cmplx.Abs(m.At(f[i])/z[i] - 1); !(d <= e) {
			e = d
		}
	}
	return e
}

// relaxation is the Debye relaxation R∞ + ΔR/(1 + jωτ), a closed-form Kramers–Kronig pair (Debye 1929, Polar Molecules).
func relaxation(rInf, dR, tau float64) impedance {
	return func(f float64) complex128 { return re(rInf) + re(dR)/(1+jw(f)*re(tau)) }
}

func TestRelaxationRecovered(t *testing.T) {
	const rInf, dR, tau = 10.0, 90.0, 2e-5
	f := logSpaced(100, 1e7, 101)
	r := fit(t, f, sample(relaxation(rInf, dR, tau), f), nil)
	if r.Order != 1 {
		t.Fatalf("order %d, want 1", r.Order)
	}
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"pole", real(r.Poles[0]), -1 / tau},
		{"residue", real(r.Residues[0]), dR / tau},
		{"constant", r.Constant, rInf},
	} {
		if !(math.Abs(c.got/c.want-1) < 1e-9) {
			t.Errorf("%s: got %.12g, want %.12g", c.name, c.got, c.want)
		}
	}
}

func TestViolatedPairIsInconsistent(t *testing.T) {
	f := logSpaced(100, 1e7, 201)
	good := sample(relaxation(10, 90, 2e-5), f)
	bad := make([]complex128, len(good))
	for i, z := range good {
		bad[i] = complex(real(z), 1.05*imag(z))
	}
	for _, c := range []struct {
		name       string
		z          []complex128
		consistent bool
	}{{"good", good, true}, {"bad", bad, false}} {
		got, err := Check(f, noisy(c.z, 1e-3, seeded(1)), nil)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%s: order %d, noise %.3g, local %.3g, misfit %.3g, excess %.3g, structure p %.2g", c.name, got.Fit.Order, got.Fit.Noise, got.LocalNoise, got.Misfit, got.Excess, got.StructureP)
		if got.Consistent != c.consistent {
			t.Errorf("%s: consistent %v (%q), want %v", c.name, got.Consistent, got.Reasons, c.consistent)
		}
		if !c.consistent && !(got.Fit.Noise > 2e-3) {
			t.Errorf("%s: noise %g of the rational model, want well above 1e-3", c.name, got.Fit.Noise)
		}
	}
}

func TestExactDataIsReproduced(t *testing.T) {
	// Real poles of a bead or a resistor lie up to 10⁵ times above the sweep: the margin lets them.
	wide := &Settings{Margin: 1e6}
	f := logSpaced(100, 1e7, 201)
	for i, p := range parts {
		for k := range *seeds {
			z := sample(p.make(seeded(100*i+k)), f)
			s, tol := wide, 1e-9
			if !p.lumped {
				s, tol = &Settings{Margin: 10, MaxPoles: 40}, 1e-5
			}
			r := fit(t, f, z, s)
			if e := largest(&r.Model, f, z); !(e < tol) {
				t.Errorf("%s, seed %d: order %d, largest error %g, want < %g", p.name, k, r.Order, e, tol)
			}
		}
	}
	for _, c := range []struct {
		name string
		f    []float64
		q    float64
		tol  float64
	}{
		{"crystal, linear", linSpaced(9.95e6, 10.05e6, 401), 5e4, 1e-9},
		{"crystal, logarithmic: the resonance falls between points", f, 5e4, 1e-9},
		{"crystal, fine", linSpaced(9.995e6, 10.025e6, 1600), 1e5, 1e-9},
	} {
		z := sample(crystal(1e7, c.q), c.f)
		r := fit(t, c.f, z, nil)
		if e := largest(&r.Model, c.f, z); !(e < c.tol) {
			t.Errorf("%s: order %d, largest error %g, want < %g", c.name, r.Order, e, c.tol)
		}
	}
	// Several sharp resonances in one sweep.
	several := series(resistor(0.1), crystal(9.98e6, 2e4), crystal(1e7, 5e4), crystal(1.004e7, 1e4))
	fine := linSpaced(9.95e6, 1.01e7, 801)
	z := sample(several, fine)
	r := fit(t, fine, z, nil)
	if e := largest(&r.Model, fine, z); !(e < 1e-9) || r.Order > 12 {
		t.Errorf("three crystals: order %d, largest error %g, want < 1e-9", r.Order, e)
	}
}

func TestPolesAreStable(t *testing.T) {
	f := logSpaced(100, 1e7, 101)
	for i, p := range parts {
		src := seeded(300 + i)
		r := fit(t, f, noisy(sample(p.make(src), f), 1e-2, src), nil)
		if len(r.Poles) != r.Order || len(r.Residues) != r.Order {
			t.Errorf("%s: %d poles and %d residues at order %d", p.name, len(r.Poles), len(r.Residues), r.Order)
		}
		for k, pole := range r.Poles {
			if !(real(pole) < 0) {
				t.Errorf("%s: pole %g is not stable", p.name, pole)
			}
			if w := cmplx.Abs(pole) / (2 * math.Pi); !(w > 99.9/10 && w < 1.001e8) {
				t.Errorf("%s: pole %g outside the band and its margin", p.name, pole)
			}
			if imag(pole) == 0 {
				if imag(r.Residues[k]) != 0 {
					t.Errorf("%s: complex residue %g of a real pole", p.name, r.Residues[k])
				}
			} else if j := slices.Index(r.Poles, cmplx.Conj(pole)); j < 0 || r.Residues[j] != cmplx.Conj(r.Residues[k]) {
				t.Errorf("%s: pole %g has no conjugate", p.name, pole)
			}
		}
		// The residuals are those of the model that is returned.
		for k, rho := range r.Residuals {
			if w := cmplx.Log(r.At(f[k]) / noisyPoint(f, p, 300+i)[k]); !(cmplx.Abs(w-rho) < 1e-8) {
				t.Fatalf("%s: residual %g at point %d, want %g", p.name, rho, k, w)
			}
		}
	}
}

func noisyPoint(f []float64, p part, seed int) []complex128 {
	src := seeded(seed)
	return noisy(sample(p.make(src), f), 1e-2, src)
}

func TestNoiseIsEstimated(t *testing.T) {
	const sigma = 1e-3
	f := logSpaced(100, 1e7, 201)
	total, off, highest := 0, 0, 0
	mean, square := 0.0, 0.0
	for i, p := range parts {
		for k := range 2 * *seeds {
			src := seeded(1000*i + k)
			r := fit(t, f, noisy(sample(p.make(src), f), sigma, src), nil)
			total++
			x := r.Noise/sigma - 1
			mean += x
			square += x * x
			if !(math.Abs(x) < 0.1) {
				off++
				t.Logf("%s, seed %d: noise %.5f, order %d", p.name, k, r.Noise, r.Order)
			}
			highest = max(highest, r.Order)
		}
	}
	t.Logf("%d sweeps: mean error of the noise %+.2f %%, rms %.2f %% (%.2f %% by counting alone), off by more than 10 %%: %d; highest order %d",
		total, 100*mean/float64(total), 100*math.Sqrt(square/float64(total)), 100/math.Sqrt(2*390), off, highest)
	// 10 % is 2.8 standard deviations of 390 degrees of freedom: 0.5 % of sweeps by chance.
	if off > 1+total/50 {
		t.Errorf("noise off by more than 10 %% in %d of %d sweeps", off, total)
	}
	if !(math.Abs(mean/float64(total)) < 0.01) {
		t.Errorf("noise biased by %+.2f %%", 100*mean/float64(total))
	}
	if highest > 16 {
		t.Errorf("order %d", highest)
	}
}

func TestPointNoise(t *testing.T) {
	f := logSpaced(100, 1e7, 201)
	total, square, mean := 0, 0.0, 0.0
	for i, p := range parts {
		for k := range 20 {
			src := seeded(5000 + 100*i + k)
			got, err := PointNoise(f, noisy(sample(p.make(src), f), 1e-3, src))
			if err != nil {
				t.Fatal(err)
			}
			x := math.Log(got / 1e-3)
			mean += x
			square += x * x
			total++
		}
	}
	rms := math.Sqrt(square / float64(total))
	t.Logf("ln(estimate/truth): mean %+.3f, rms %.3f, times √n %.2f", mean/float64(total), rms, rms*math.Sqrt(201))
	if !(rms < 1.5*1.3/math.Sqrt(201)) {
		t.Errorf("point noise scatters by %.3f, Check counts on %.3f", rms, 1.3/math.Sqrt(201))
	}
	// The differences are exact for polynomials of ln f, whatever the spacing.
	g := []float64{1, 1.1, 1.5, 2, 3, 3.1, 5, 8, 9, 10, 12, 14, 19, 20, 25, 31, 40, 41}
	z := make([]complex128, len(g))
	for i, v := range g {
		l := math.Log(v)
		z[i] = cmplx.Exp(complex(1+l-0.1*l*l, 0.3+0.2*l+0.05*l*l))
	}
	for q := 3; q <= 5; q++ {
		for _, v := range differences(g, z, q) {
			if !(math.Abs(v) < 1e-12) {
				t.Errorf("difference of order %d of a quadratic: %g", q, v)
			}
		}
	}
}

func TestRealPolesAndPositiveResidues(t *testing.T) {
	f := logSpaced(10, 1e6, 101)
	z := sample(series(resistor(5), parallel(resistor(100), capacitance(1e-6)), parallel(resistor(30), capacitance(1e-8)), capacitance(1e-3)), f)
	r := fit(t, f, z, &Settings{RealPolesOnly: true, PositiveResidues: true})
	if e := largest(&r.Model, f, z); !(e < 1e-6) {
		t.Errorf("R-C network: order %d, error %g", r.Order, e)
	}
	// Noise, and a target that is no R-C network, must keep the signs all the same.
	src := seeded(4)
	for _, z := range [][]complex128{noisy(z, 1e-2, src), sample(parts[2].make(src), f)} {
		r := fit(t, f, z, &Settings{RealPolesOnly: true, PositiveResidues: true})
		for k := range r.Poles {
			if imag(r.Poles[k]) != 0 || !(real(r.Poles[k]) < 0) || !(real(r.Residues[k]) >= 0) {
				t.Errorf("pole %g with residue %g", r.Poles[k], r.Residues[k])
			}
		}
		if !(r.Constant >= 0 && r.Slope >= 0 && r.Origin >= 0) {
			t.Errorf("end terms %g, %g, %g", r.Constant, r.Slope, r.Origin)
		}
	}
	r = fit(t, f, z, &Settings{NoSlope: true, NoOrigin: true})
	if r.Slope != 0 || r.Origin != 0 {
		t.Errorf("end terms left out: %g, %g", r.Slope, r.Origin)
	}
}

func TestNonNegativeLeastSquares(t *testing.T) {
	// The unconstrained solution is (2, −1); with x₂ ≥ 0 it is x₁ = (a₁·b)/(a₁·a₁), by hand: a₁ = (1, 1), a₂ = (0, 1), b = (2, 1).
	x := nonNegativeLeastSquares([][]float64{{1, 1}, {0, 1}}, []float64{2, 1})
	if !(math.Abs(x[0]-1.5) < 1e-14) || x[1] != 0 {
		t.Errorf("got %v, want [1.5 0]", x)
	}
}

func TestDeterministicAndPure(t *testing.T) {
	f := logSpaced(100, 1e7, 101)
	z := noisyPoint(f, parts[3], 7)
	f0, z0 := slices.Clone(f), slices.Clone(z)
	a, err := Check(f, z, nil)
	if err != nil {
		t.Fatal(err)
	}
	b, err := Check(f, z, nil)
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(a, b) {
		t.Error("two runs differ")
	}
	if !slices.Equal(f, f0) || !slices.Equal(z, z0) {
		t.Error("arguments changed")
	}
}

func TestScalesVanish(t *testing.T) {
	// Frequencies and impedances multiplied by powers of two give the same residuals, picofarads and gigaohms included.
	f := logSpaced(100, 1e7, 101)
	z := noisyPoint(f, parts[4], 11)
	want := fit(t, f, z, nil)
	g, y := make([]float64, len(f)), make([]complex128, len(f))
	for i := range f {
		g[i], y[i] = f[i]*0x1p-20, z[i]*0x1p40
	}
	got := fit(t, g, y, nil)
	if got.Order != want.Order || !(math.Abs(got.RMS/want.RMS-1) < 1e-6) {
		t.Errorf("scaled: order %d, RMS %g; want %d, %g", got.Order, got.RMS, want.Order, want.RMS)
	}
}

func TestNonPassive(t *testing.T) {
	got := NonPassive([]complex128{1 + 1i, -1e-9 + 1i, 0 - 3i, complex(math.NaN(), 0)})
	if !slices.Equal(got, []int{1, 3}) {
		t.Errorf("got %v", got)
	}
}

func TestBadInput(t *testing.T) {
	f := logSpaced(100, 1e7, 30)
	z := sample(parts[0].make(seeded(1)), f)
	change := func(i int, fv float64, zv complex128) ([]float64, []complex128) {
		g, y := slices.Clone(f), slices.Clone(z)
		g[i], y[i] = fv, zv
		return g, y
	}
	check := func(name, want string, f []float64, z []complex128, s *Settings) {
		t.Helper()
		if _, err := Fit(f, z, s); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: error %v, want one with %q", name, err, want)
		}
	}
	g, y := change(3, f[2], z[3])
	check("repeated frequency", "point 4", g, y, nil)
	g, y = change(0, 0, z[0])
	check("zero frequency", "point 1", g, y, nil)
	g, y = change(5, f[5], complex(math.NaN(), 0))
	check("NaN", "point 6", g, y, nil)
	g, y = change(5, f[5], 0)
	check("zero impedance", "point 6", g, y, nil)
	check("lengths", "30 frequencies but 29", f, z[1:], nil)
	check("short", "at least 8", f[:5], z[:5], nil)
	check("positive residues", "RealPolesOnly", f, z, &Settings{PositiveResidues: true})
	check("significance", "Significance is 2", f, z, &Settings{Significance: 2})
	check("margin", "Margin", f, z, &Settings{Margin: 0.5})
	check("poles", "MaxPoles", f, z, &Settings{MaxPoles: -1})
	check("iterations", "Iterations", f, z, &Settings{Iterations: -1})
	for name, fn := range map[string]func() error{
		"PointNoise": func() error { _, err := PointNoise(f[:10], z[:10]); return err },
		"Steps":      func() error { _, err := Steps(f[:20], z[:20], nil); return err },
		"Check":      func() error { _, err := Check(f[:20], z[:20], nil); return err },
	} {
		if fn() == nil {
			t.Errorf("%s: no error for too few points", name)
		}
	}
}

func TestShortSweeps(t *testing.T) {
	for _, n := range []int{8, 9, 12, 20} {
		f := logSpaced(100, 1e6, n)
		for i, p := range parts {
			src := seeded(900 + i)
			r := fit(t, f, noisy(sample(p.make(src), f), 1e-3, src), nil)
			if r.DegreesOfFreedom < 1 || math.IsNaN(r.Noise) {
				t.Errorf("%s, %d points: %d degrees of freedom, noise %g", p.name, n, r.DegreesOfFreedom, r.Noise)
			}
		}
	}
}

func benchmarkFit(b *testing.B, i int) {
	f := logSpaced(100, 1e7, 201)
	src := seeded(42)
	z := noisy(sample(parts[i].make(src), f), 1e-3, src)
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Fit(f, z, nil); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkFitCapacitor201(b *testing.B) { benchmarkFit(b, 0) }
func BenchmarkFitInductor201(b *testing.B)  { benchmarkFit(b, 3) }
func BenchmarkFitSkin201(b *testing.B)      { benchmarkFit(b, 9) }

func BenchmarkCheck201(b *testing.B) {
	f := logSpaced(100, 1e7, 201)
	src := seeded(42)
	z := noisy(sample(parts[3].make(src), f), 1e-3, src)
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Check(f, z, nil); err != nil {
			b.Fatal(err)
		}
	}
}
