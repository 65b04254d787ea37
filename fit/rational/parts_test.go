package rational

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
)

// The impedances of the parts under test, written out from their circuits. f in Hz.
type impedance func(f float64) complex128

func jw(f float64) complex128 { return complex(0, 2*math.Pi*f) }
func re(v float64) complex128 { return complex(v, 0) }

func par(zs ...complex128) complex128 {
	var y complex128
	for _, z := range zs {
		y += 1 / z
	}
	return 1 / y
}

func resistor(r float64) impedance   { return func(float64) complex128 { return re(r) } }
func inductance(l float64) impedance { return func(f float64) complex128 { return jw(f) * re(l) } }
func capacitance(c float64) impedance {
	return func(f float64) complex128 { return 1 / (jw(f) * re(c)) }
}
func skin(k float64) impedance {
	return func(f float64) complex128 { return re(k) * cmplx.Sqrt(jw(f)) }
}
func cpe(q, n float64) impedance {
	return func(f float64) complex128 { return 1 / (re(q) * cmplx.Pow(jw(f), re(n))) }
}

// lossy is a capacitor with the loss tangent tand at every frequency and the series capacitance c at 1 kHz.
func lossy(c, tand float64) impedance {
	m := 2 / math.Pi * math.Atan(tand)
	return func(f float64) complex128 {
		return re(math.Pow(f/1e3, m)) * complex(tand, -1) / re(2*math.Pi*f*c)
	}
}

// rcLine is the open-ended RC line √(R/(jωC))·coth√(jωRC).
func rcLine(r, c float64) impedance {
	return func(f float64) complex128 {
		u := cmplx.Sqrt(jw(f) * re(r*c))
		// tanh overflows in cmplx for large arguments, where it is 1.
		t := complex128(1)
		if real(u) < 300 {
			t = cmplx.Tanh(u)
		}
		return re(r) / (u * t)
	}
}

func series(zs ...impedance) impedance {
	return func(f float64) complex128 {
		var z complex128
		for _, p := range zs {
			z += p(f)
		}
		return z
	}
}

func parallel(zs ...impedance) impedance {
	return func(f float64) complex128 {
		v := make([]complex128, len(zs))
		for i, p := range zs {
			v[i] = p(f)
		}
		return par(v...)
	}
}

// draw returns a value log-uniform between lo and hi.
func draw(src *rand.Rand, lo, hi float64) float64 { return lo * math.Pow(hi/lo, src.Float64()) }

// A part is a kind of circuit with random realistic values.
type part struct {
	name   string
	lumped bool
	make   func(src *rand.Rand) impedance
}

var parts = []part{
	{"series R-L-C", true, func(s *rand.Rand) impedance {
		return series(resistor(draw(s, 5e-3, 1)), inductance(draw(s, 1e-9, 5e-8)), capacitance(draw(s, 1e-8, 1e-4)))
	}},
	{"capacitor, two branches", true, func(s *rand.Rand) impedance {
		c := draw(s, 1e-6, 1e-3)
		r := draw(s, 1e-2, 1)
		return series(inductance(draw(s, 5e-9, 3e-8)), parallel(
			series(resistor(r), capacitance(c)),
			series(resistor(r*draw(s, 3, 30)), capacitance(c*draw(s, 0.1, 0.5)))))
	}},
	{"inductor, Cp and core loss", true, func(s *rand.Rand) impedance {
		l := draw(s, 1e-5, 1e-3)
		return series(resistor(draw(s, 1e-2, 1)), parallel(inductance(l), capacitance(draw(s, 5e-12, 5e-11)), resistor(draw(s, 1e4, 1e6))))
	}},
	{"inductor, eddy ladder", true, func(s *rand.Rand) impedance {
		l := draw(s, 1e-5, 1e-3)
		l1 := l * draw(s, 0.02, 0.3)
		return parallel(series(resistor(draw(s, 1e-2, 1)), inductance(l), parallel(resistor(2*math.Pi*draw(s, 1e4, 1e6)*l1), inductance(l1))),
			capacitance(draw(s, 5e-12, 5e-11)))
	}},
	{"two resonances", true, func(s *rand.Rand) impedance {
		l, c := draw(s, 1e-5, 1e-4), draw(s, 1e-11, 1e-9)
		q := draw(s, 5, 100)
		l2, c2 := l/draw(s, 5, 50), c/draw(s, 0.5, 2)
		return series(resistor(draw(s, 1e-2, 1)), parallel(inductance(l), capacitance(c), resistor(q*math.Sqrt(l/c))),
			parallel(inductance(l2), capacitance(c2), resistor(q*math.Sqrt(l2/c2))))
	}},
	{"bead", true, func(s *rand.Rand) impedance {
		return series(resistor(draw(s, 1e-2, 0.5)), parallel(resistor(draw(s, 50, 1000)), inductance(draw(s, 1e-7, 5e-6)), capacitance(draw(s, 5e-13, 5e-12))))
	}},
	{"resistor", true, func(s *rand.Rand) impedance {
		return parallel(series(resistor(draw(s, 1, 1e5)), inductance(draw(s, 1e-9, 1e-8))), capacitance(draw(s, 1e-13, 1e-12)))
	}},
	{"capacitor with leakage", true, func(s *rand.Rand) impedance {
		return series(resistor(draw(s, 1e-2, 1)), inductance(draw(s, 1e-9, 3e-8)), parallel(capacitance(draw(s, 1e-9, 1e-6)), resistor(draw(s, 1e6, 1e9))))
	}},
	{"lossy capacitor", false, func(s *rand.Rand) impedance {
		return series(resistor(draw(s, 1e-3, 0.1)), inductance(draw(s, 1e-9, 3e-8)), lossy(draw(s, 1e-9, 1e-6), draw(s, 1e-4, 0.3)))
	}},
	{"choke with skin effect", false, func(s *rand.Rand) impedance {
		return parallel(series(resistor(draw(s, 1e-2, 1)), skin(draw(s, 1e-4, 1e-2)), inductance(draw(s, 1e-5, 1e-3))), capacitance(draw(s, 5e-12, 5e-11)))
	}},
	{"porous electrode", false, func(s *rand.Rand) impedance {
		return series(resistor(draw(s, 1e-2, 1)), inductance(draw(s, 5e-9, 3e-8)), rcLine(draw(s, 1e-2, 1), draw(s, 1e-6, 1e-3)))
	}},
}

// crystal is C0 ∥ (R1 + L1 + C1) with the series resonance f0 and quality q.
func crystal(f0, q float64) impedance {
	c0, c1 := 4e-12, 15e-15
	l1 := 1 / (4 * math.Pi * math.Pi * f0 * f0 * c1)
	r1 := 2 * math.Pi * f0 * l1 / q
	return parallel(capacitance(c0), series(resistor(r1), inductance(l1), capacitance(c1)))
}

func logSpaced(lo, hi float64, n int) []float64 {
	f := make([]float64, n)
	for i := range f {
		f[i] = lo * math.Pow(hi/lo, float64(i)/float64(n-1))
	}
	return f
}

func linSpaced(lo, hi float64, n int) []float64 {
	f := make([]float64, n)
	for i := range f {
		f[i] = lo + (hi-lo)*float64(i)/float64(n-1)
	}
	return f
}

func sample(p impedance, f []float64) []complex128 {
	z := make([]complex128, len(f))
	for i := range f {
		z[i] = p(f[i])
	}
	return z
}

// noisy multiplies every point by exp(σ(n₁ + j·n₂)).
func noisy(z []complex128, sigma float64, src *rand.Rand) []complex128 {
	out := make([]complex128, len(z))
	for i := range z {
		out[i] = z[i] * cmplx.Exp(complex(sigma*src.NormFloat64(), sigma*src.NormFloat64()))
	}
	return out
}

func seeded(seed int) *rand.Rand { return rand.New(rand.NewPCG(uint64(seed), 20)) }

// A drifting part has one element that its maker multiplies by scale.
var drifting = []struct {
	name string
	make func(src *rand.Rand, scale float64) impedance
}{
	{"resistor, R", func(s *rand.Rand, k float64) impedance {
		return parallel(series(resistor(k*draw(s, 10, 1e4)), inductance(draw(s, 1e-9, 1e-8))), capacitance(draw(s, 1e-13, 1e-12)))
	}},
	{"capacitor, ESR", func(s *rand.Rand, k float64) impedance {
		return series(resistor(k*draw(s, 0.1, 1)), inductance(draw(s, 5e-9, 3e-8)), capacitance(draw(s, 1e-5, 1e-3)))
	}},
	{"film capacitor, C", func(s *rand.Rand, k float64) impedance {
		return series(resistor(draw(s, 1e-2, 0.1)), inductance(draw(s, 5e-9, 3e-8)), capacitance(k*draw(s, 1e-9, 1e-8)))
	}},
	{"ceramic, loss and C", func(s *rand.Rand, k float64) impedance {
		return series(inductance(draw(s, 1e-9, 3e-9)), lossy(k*draw(s, 1e-10, 1e-9), draw(s, 1e-3, 0.05)))
	}},
	{"choke, L", func(s *rand.Rand, k float64) impedance {
		return series(resistor(draw(s, 1e-2, 1)), parallel(inductance(k*draw(s, 1e-5, 1e-4)), capacitance(draw(s, 5e-12, 2e-11)), resistor(draw(s, 1e4, 1e5))))
	}},
	{"choke, core loss", func(s *rand.Rand, k float64) impedance {
		return series(resistor(draw(s, 1e-2, 1)), parallel(inductance(draw(s, 1e-4, 1e-3)), capacitance(draw(s, 5e-12, 5e-11)), resistor(k*draw(s, 1e3, 1e4))))
	}},
}

// drifted samples a part whose element grows by size along a raised cosine over the last third of the sweep.
func drifted(make_ func(*rand.Rand, float64) impedance, seed uint64, f []float64, size float64) []complex128 {
	z := make([]complex128, len(f))
	for i := range f {
		u := max(0, 3*float64(i)/float64(len(f)-1)-2)
		p := make_(rand.New(rand.NewPCG(seed, 3)), 1+size*(1-math.Cos(math.Pi*u))/2)
		z[i] = p(f[i])
	}
	return z
}
