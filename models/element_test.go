package models

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"
)

// Handbook reactances, X = 2πfL and X = 1/(2πfC), to the ten digits that they
// are tabulated with (computed in double precision from the definitions).
func TestReactances(t *testing.T) {
	for _, c := range []struct{ value, f, want float64 }{
		{1e-6, 1e3, 159.1549431},
		{100e-9, 1e3, 1591.549431},
		{100e-9, 1e6, 1.591549431},
		{10e-6, 100e3, 0.1591549431},
		{100e-12, 100e6, 15.91549431},
		{10e-6, 120, 132.6291192},
		{22e-12, 10e6, 723.4315595},
		{4.7e-6, 100e3, 0.3386275385},
	} {
		z := mustParse("C").At(c.f, []float64{c.value})
		requireRelative(t, fmt.Sprintf("X of %g F at %g Hz", c.value, c.f), imag(z), -c.want, 5e-10)
		if real(z) != 0 {
			t.Errorf("a capacitor has the resistance %v", real(z))
		}
	}
	for _, c := range []struct{ value, f, want float64 }{
		{10e-3, 1e3, 62.83185307},
		{1e-3, 1e3, 6.283185307},
		{1e-6, 1e6, 6.283185307},
		{100e-6, 100e3, 62.83185307},
		{1e-9, 1e9, 6.283185307},
		{220e-6, 100e3, 138.2300768},
		{0.5e-9, 100e6, 0.3141592654},
		{47e-6, 1e6, 295.3097094},
	} {
		z := mustParse("L").At(c.f, []float64{c.value})
		requireRelative(t, fmt.Sprintf("X of %g H at %g Hz", c.value, c.f), imag(z), c.want, 5e-10)
		if real(z) != 0 {
			t.Errorf("an inductor has the resistance %v", real(z))
		}
	}
}

// Skin effect rises with √f because the skin depth of copper falls so:
// 66.085 mm at 1 Hz, 2.0898 mm at 1 kHz, 66.085 µm at 1 MHz (ρ = 17.241 nΩm,
// δ = √(ρ/(πfµ₀)), five digits of which the last may be off by one). The surface impedance of a flat conductor,
// (1 + j)·ρ/δ a square, is skin(K) with K = √(µ₀ρ).
func TestSkinAgainstSkinDepthOfCopper(t *testing.T) {
	const rho, mu0 = 1.7241e-8, 4e-7 * math.Pi
	for _, c := range []struct{ f, depth float64 }{
		{1, 66.085e-3}, {50, 9.3459e-3}, {1e3, 2.0898e-3}, {20e3, 0.46730e-3}, {1e6, 66.085e-6}, {10e9, 0.66085e-6},
	} {
		z := mustParse("skin(K)").At(c.f, []float64{math.Sqrt(mu0 * rho)})
		requireRelative(t, fmt.Sprintf("surface resistance at %g Hz", c.f), real(z), rho/c.depth, 2.5e-5)
		requireRelative(t, "surface reactance", imag(z), real(z), 1e-15)
	}
}

func TestLossCapacitor(t *testing.T) {
	c := mustParse("loss(C, tand)")
	for _, tand := range []float64{1e-40, 1e-6, 0.002, 0.02, 0.5, 1, 30, 1e6} {
		for _, f := range []float64{1e-3, 50, 1e3, 1e6, 100e9} {
			z := c.At(f, []float64{4.7e-9, tand})
			d, _, _ := D.Of(f, z)
			requireRelative(t, fmt.Sprintf("D at %g Hz", f), d, tand, 1e-14)
		}
		z := c.At(1000, []float64{4.7e-9, tand})
		cs, _, _ := Cs.Of(1000, z)
		requireRelative(t, fmt.Sprintf("C_s at 1 kHz for tand = %g", tand), cs, 4.7e-9, 1e-13)
	}
}

// A constant loss tangent is one of the constant-phase elements, which are
// analytic in the right half plane, 1/(Q·s^n): the Kramers–Kronig relations
// hold for it.
func TestLossCapacitorIsAConstantPhase(t *testing.T) {
	const c, tand = 22e-9, 0.03
	n := 1 - 2/math.Pi*math.Atan(tand)
	q := c * math.Pow(2*math.Pi*1000, 1-n) / math.Sqrt(1+tand*tand)
	for _, f := range logFrequencies(1e-3, 100e9, 15) {
		got := mustParse("loss(C, tand)").At(f, []float64{c, tand})
		want := mustParse("cpe(Q, n)").At(f, []float64{q, n})
		requireClose(t, fmt.Sprintf("loss at %g Hz", f), got, want, 1e-13, cmplx.Abs(want))
	}
}

// 1/(Q·(jω)^n) has the phase −n·90° at every frequency, and |Z| = 1/Q at
// ω = 1/s.
func TestConstantPhase(t *testing.T) {
	for _, n := range []float64{1e-6, 0.3, 0.5, 0.9, 1 - 1e-9} {
		for _, f := range []float64{1e-3, 1 / (2 * math.Pi), 1e3, 1e9} {
			phase, _, _ := Phase.Of(f, mustParse("cpe(Q, n)").At(f, []float64{3e-5, n}))
			requireRelative(t, fmt.Sprintf("phase at %g Hz", f), phase, -90*n, 1e-9)
		}
		z := mustParse("cpe(Q, n)").At(1/(2*math.Pi), []float64{3e-5, n})
		requireRelative(t, "|Z| at 1 rad/s", cmplx.Abs(z), 1/3e-5, 1e-14)
	}
}

// At low frequency the line is a third of its resistance in series with its
// capacitance, at high frequency √(R/(jωC)). The next terms of the series,
// −jθ/45 against 1/3 − j/θ with θ = ωRC, and 2·exp(−√(2θ)), say how near.
func TestRCLineLimits(t *testing.T) {
	c := mustParse("rcline(R, C)")
	const r, cap = 12.0, 3e-4
	for _, theta := range []float64{1e-9, 1e-6, 1e-4, 1e-3} {
		omega := theta / (r * cap)
		z := c.At(omega/(2*math.Pi), []float64{r, cap})
		requireRelative(t, fmt.Sprintf("ESR at θ = %g", theta), real(z), r/3, theta*theta)
		requireRelative(t, fmt.Sprintf("reactance at θ = %g", theta), imag(z), -1/(omega*cap), theta*theta/44+1e-14)
	}
	for _, theta := range []float64{1e3, 1e6, 1e12} {
		omega := theta / (r * cap)
		z := c.At(omega/(2*math.Pi), []float64{r, cap})
		want := cmplx.Sqrt(complex(r, 0) / complex(0, omega*cap))
		requireClose(t, fmt.Sprintf("Z at θ = %g", theta), z, want, 1e-14+2*math.Exp(-math.Sqrt(2*theta)), cmplx.Abs(want))
	}
}

// lineFactor at and beside the places where it changes its formula, t = 40
// being θ = 800, agrees with complex arithmetic and, across, with itself.
func TestLineFactorIsContinuous(t *testing.T) {
	for _, at := range []float64{0.5, 800} {
		below, above := math.Nextafter(at, 0), math.Nextafter(at, 1e9)
		g0, s0 := lineFactor(below)
		for _, theta := range []float64{at, above} {
			g, s := lineFactor(theta)
			requireClose(t, fmt.Sprintf("g across θ = %g", at), g, g0, 1e-15, cmplx.Abs(g0))
			requireClose(t, fmt.Sprintf("u·g′ across θ = %g", at), s, s0, 2e-15, cmplx.Abs(s0))
		}
	}
	for _, theta := range []float64{1e-80, 1e-9, 0.01, 0.3, 0.4999, 0.5, 0.5001, 1, 10, 799, 800, 801, 1e4, 1e90} {
		g, slope := lineFactor(theta)
		u := complex(0, theta)
		root := cmplx.Sqrt(u)
		coth, sinh2 := complex(1, 0), cmplx.Inf()
		if real(root) < 300 {
			coth, sinh2 = 1/cmplx.Tanh(root), cmplx.Sinh(root)*cmplx.Sinh(root)
		}
		requireClose(t, fmt.Sprintf("g(%g)", theta), g, coth/root, 1e-14, cmplx.Abs(g))
		requireClose(t, fmt.Sprintf("u·g′(%g)", theta), slope, -(coth/root+1/sinh2)/2, 1e-14, cmplx.Abs(slope))
	}
	// The real part is R/3 where 1/u is larger by 1e12 and would drown it.
	g, slope := lineFactor(1e-12)
	requireRelative(t, "Re g(1e-12)", real(g), 1.0/3, 1e-15)
	if !(math.Abs(real(slope)) < 1e-20) {
		t.Errorf("Re u·g′(1e-12) = %v, want about 4e-27", real(slope))
	}
}

// The Laurent coefficients of coth are rational: coth x = 1/x + x/3 − x³/45 +
// 2x⁵/945 − x⁷/4725 + … (textbook series; 1/3 − u/45 + … after division by x).
func TestCothSeries(t *testing.T) {
	for k, want := range []float64{1.0 / 3, -1.0 / 45, 2.0 / 945, -1.0 / 4725, 2.0 / 93555} {
		requireRelative(t, fmt.Sprintf("a_%d", k), cothSeries[k], want, 1e-15)
	}
}

func TestScale(t *testing.T) {
	for _, v := range []float64{MinValue, 1e-12, 1, 4.7e3, MaxValue} {
		requireRelative(t, "LogScale", LogScale.Value(LogScale.Unknown(v)), v, 1e-13)
		slope := (LogScale.Value(LogScale.Unknown(v)+1e-5) - LogScale.Value(LogScale.Unknown(v)-1e-5)) / 2e-5
		requireRelative(t, "slope of LogScale", LogScale.Slope(v), slope, 1e-8)
	}
	for _, v := range []float64{1e-9, 0.2, 0.5, 0.9, 0.999} {
		requireRelative(t, "LogitScale", LogitScale.Value(LogitScale.Unknown(v)), v, 1e-13)
		slope := (LogitScale.Value(LogitScale.Unknown(v)+1e-5) - LogitScale.Value(LogitScale.Unknown(v)-1e-5)) / 2e-5
		requireRelative(t, "slope of LogitScale", LogitScale.Slope(v), slope, 1e-8)
	}
}

func TestCheckValue(t *testing.T) {
	c, n := Parameter{Name: "C", Unit: "F"}, Parameter{Name: "n", Unit: "1", Scale: LogitScale}
	for _, v := range []float64{MinValue, 1e-12, 1, MaxValue} {
		if err := c.CheckValue(v); err != nil {
			t.Error(err)
		}
	}
	for _, v := range []float64{0.5, 1e-300, math.Nextafter(1, 0)} {
		if err := n.CheckValue(v); err != nil {
			t.Error(err)
		}
	}
	for _, v := range []float64{0, -1, math.NaN(), math.Inf(1), math.Inf(-1), 1e-41, 1e41} {
		if c.CheckValue(v) == nil {
			t.Errorf("C = %v is accepted", v)
		}
		if n.CheckValue(v) == nil && v != 1e-41 {
			t.Errorf("n = %v is accepted", v)
		}
	}
	if err := n.CheckValue(1); err == nil || err.Error() != "n = 1: an exponent is between 0 and 1" {
		t.Errorf("n = 1: %v", err)
	}
	if err := c.CheckValue(-2); err == nil || err.Error() != "C = -2 F: a value is positive, between 1e-40 and 1e+40" {
		t.Errorf("C = -2: %v", err)
	}
}
