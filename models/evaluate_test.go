package models

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"
)

// The compiled evaluation against complex arithmetic. 1e-12 of |Z|; where
// terms of the sum cancel, their rounding errors (a few times 1e-16, up to
// 1e-14 through the logarithm of a power) are multiplied by the gain.
func TestImpedanceAgainstComplexArithmetic(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 1))
	circuits := everyCircuit()
	for range 200 {
		circuits = append(circuits, mustParse(randomExpression(rng.IntN, 1+rng.IntN(8))))
	}
	freq := logFrequencies(1e-3, 100e9, 70)
	for _, c := range circuits {
		for range 5 {
			values := realistic(rng, c)
			got := poisoned(len(freq))
			c.NewEvaluator(freq).Impedance(got, values)
			for i, f := range freq {
				want, gain, _ := reference(c.Root(), f, values)
				what := fmt.Sprintf("%s with %v at %g Hz", c, values, f)
				requireClose(t, what, got[i], want, max(1e-12, 1e-14*gain), cmplx.Abs(want))
				if at := c.At(f, values); at != got[i] {
					t.Errorf("%s: At gives %v, Impedance %v", what, at, got[i])
				}
			}
			if t.Failed() {
				return
			}
		}
	}
}

// differentiate is the five-point central difference of a complex function at
// 0, with a step h.
func differentiate(f func(x float64) complex128, h float64) complex128 {
	return (8*(f(h)-f(-h)) - (f(2*h) - f(-2*h))) / complex(12*h, 0)
}

// shifted returns the values with x_k moved by dx.
func shifted(c *Circuit, values []float64, k int, dx float64) []float64 {
	moved := append([]float64(nil), values...)
	if c.Parameters()[k].Scale == LogitScale {
		moved[k] = LogitScale.Value(LogitScale.Unknown(values[k]) + dx)
	} else {
		moved[k] *= math.Exp(dx) // exacter than through ln p, which is large
	}
	return moved
}

// derivativeStep returns a step in ln p for [differentiate]. No structure in
// ln p is narrower than 1/sharpest, so that with a step of 1e-3/sharpest the
// truncation error (h·sharpest)⁴ is about 1e-12 of the derivative; the rounding
// error of the difference, 1e-16·|Z|·sharpest/h, is about 1e-13·sharpest of it.
// The tolerance is relative to the largest derivative or |Z|.
func derivativeStep(sharpest float64) (h, tolerance float64) {
	return 1e-3 / sharpest, max(1e-8, 1e-11*sharpest)
}

func TestJacobianAgainstDifferences(t *testing.T) {
	rng := rand.New(rand.NewPCG(2, 1))
	circuits := everyCircuit()
	for range 40 {
		circuits = append(circuits, mustParse(randomExpression(rng.IntN, 2+rng.IntN(7))))
	}
	freq := logFrequencies(100, 100e6, 65) // more than a block
	for _, c := range circuits {
		for range 3 {
			values := realistic(rng, c)
			n := len(values)
			z, derivatives := poisoned(len(freq)), columns(n, len(freq))
			before := append([]float64(nil), values...)
			c.NewEvaluator(freq).Jacobian(z, derivatives, values)
			for k := range values {
				if values[k] != before[k] {
					t.Fatalf("%s: Jacobian changed the values", c)
				}
			}
			for i, f := range freq {
				_, _, sharpest := reference(c.Root(), f, values)
				h, tolerance := derivativeStep(sharpest)
				scale := cmplx.Abs(z[i])
				for k := range n {
					scale = max(scale, cmplx.Abs(derivatives[k][i]))
				}
				e := c.NewEvaluator([]float64{f})
				one := make([]complex128, 1)
				row := make([]complex128, n)
				for k, p := range c.Parameters() {
					row[k] = derivatives[k][i]
					want := differentiate(func(dx float64) complex128 {
						e.Impedance(one, shifted(c, values, k, dx))
						return one[0]
					}, h)
					requireClose(t, fmt.Sprintf("%s with %v at %g Hz: derivative by %s", c, values, f, p.Name), row[k], want, tolerance, scale)
				}
				want := differentiate(func(dx float64) complex128 { return c.At(f*math.Exp(dx), values) }, h/2)
				requireClose(t, fmt.Sprintf("%s with %v: derivative by ln f at %g Hz", c, values, f), c.FrequencyDerivative(row, values), want, tolerance, scale)
			}
			if t.Failed() {
				return
			}
		}
	}
}

// What is computed for a frequency does not depend on its neighbours, on the
// block they fall into, on an evaluator's past, or on which derivatives are
// wanted.
func TestJacobianIsTheSameInAnyBlock(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 1))
	all := logFrequencies(100, 100e6, 201)
	for _, c := range everyCircuit() {
		values := realistic(rng, c)
		n := len(values)
		want, wantBy := poisoned(201), columns(n, 201)
		c.NewEvaluator(all).Jacobian(want, wantBy, values)
		reused := c.NewEvaluator(all[:1])
		for _, size := range []int{201, 1, 63, 64, 65, 128} {
			reused.SetFrequencies(all[:size])
			for name, e := range map[string]*Evaluator{"new": c.NewEvaluator(all[:size]), "reused": reused} {
				z, by, alone := poisoned(size), columns(n, size), poisoned(size)
				skip := rng.IntN(n)
				by[skip] = nil
				e.Jacobian(z, by, values)
				e.Impedance(alone, values)
				for i := range size {
					if z[i] != want[i] || alone[i] != want[i] {
						t.Fatalf("%s, %s, %d frequencies: Z[%d] = %v from Jacobian, %v from Impedance, want %v", c, name, size, i, z[i], alone[i], want[i])
					}
					for k := range n {
						if k != skip && by[k][i] != wantBy[k][i] {
							t.Fatalf("%s, %s, %d frequencies: ∂Z[%d]/∂x_%d = %v, want %v", c, name, size, i, k, by[k][i], wantBy[k][i])
						}
					}
				}
			}
		}
	}
}

func TestSetFrequencies(t *testing.T) {
	c := mustParse("skin(K) + loss(C, tand)")
	values := []float64{1e-4, 1e-6, 0.02}
	e := c.NewEvaluator(logFrequencies(1e3, 1e6, 10))
	tail := append([]float64(nil), e.Frequencies()[4:]...)
	e.SetFrequencies(e.Frequencies()[4:]) // overlaps with what it replaces
	z := poisoned(len(tail))
	e.Impedance(z, values)
	for i, f := range tail {
		if e.Frequencies()[i] != f || z[i] != c.At(f, values) {
			t.Errorf("%d: at %g Hz %v, want %v at %g Hz", i, e.Frequencies()[i], z[i], c.At(f, values), f)
		}
	}
	e.SetFrequencies(nil)
	e.Impedance(nil, values)
	if got := len(c.NewEvaluator(nil).Frequencies()); got != 0 {
		t.Errorf("%d frequencies, want none", got)
	}
}

func TestPanicsOnWrongUse(t *testing.T) {
	c := mustParse("R + C")
	e := c.NewEvaluator([]float64{1, 2})
	z, by := poisoned(2), columns(2, 2)
	for name, f := range map[string]func(){
		"zero frequency":       func() { c.NewEvaluator([]float64{1, 0}) },
		"negative frequency":   func() { e.SetFrequencies([]float64{-1}) },
		"NaN frequency":        func() { e.SetFrequencies([]float64{math.NaN()}) },
		"infinite frequency":   func() { e.SetFrequencies([]float64{math.Inf(1)}) },
		"short dst":            func() { e.Impedance(z[:1], []float64{1, 1}) },
		"too few values":       func() { e.Impedance(z, []float64{1}) },
		"too few columns":      func() { e.Jacobian(z, by[:1], []float64{1, 1}) },
		"short column":         func() { e.Jacobian(z, [][]complex128{by[0], by[1][:1]}, []float64{1, 1}) },
		"range upside down":    func() { c.Resonances([]float64{1, 1}, 10, 1) },
		"range from zero":      func() { c.Resonances([]float64{1, 1}, 0, 1) },
		"range up to infinity": func() { c.Resonances([]float64{1, 1}, 1, math.Inf(1)) },
	} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("%s: no panic", name)
				}
			}()
			f()
		}()
	}
	// A refused frequency leaves the evaluator as it was.
	e.Impedance(z, []float64{1, 1})
	if z[1] != c.At(2, []float64{1, 1}) {
		t.Errorf("after a refused frequency Z = %v at 2 Hz", z[1])
	}
}

// Parameters at the bounds of their range and at the corners of what parts can
// have, in all or in many combinations, from 1 mHz to 100 GHz.
func TestExtremeValuesStayFinite(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 1))
	freq := logFrequencies(1e-3, 100e9, 15)
	extremes := []float64{MinValue, MaxValue, 1e-18, 1e18, 1}
	exponents := []float64{math.SmallestNonzeroFloat64, math.Nextafter(1, 0), 1e-9, 1 - 1e-9, 0.5}
	circuits := everyCircuit()
	for range 60 {
		circuits = append(circuits, mustParse(randomExpression(rng.IntN, 2+rng.IntN(7))))
	}
	for _, c := range circuits {
		n := len(c.Parameters())
		e := c.NewEvaluator(freq)
		z, by, row := poisoned(len(freq)), columns(n, len(freq)), make([]complex128, n)
		check := func(choice func(k int) int) {
			t.Helper()
			values := make([]float64, n)
			for k, p := range c.Parameters() {
				values[k] = extremes[choice(k)]
				if p.Scale == LogitScale {
					values[k] = exponents[choice(k)]
				}
				if err := p.CheckValue(values[k]); err != nil {
					t.Fatal(err)
				}
			}
			e.Jacobian(z, by, values)
			for i, f := range freq {
				if !finite(z[i]) {
					t.Fatalf("%s with %v at %g Hz: Z = %v", c, values, f, z[i])
				}
				for k := range n {
					row[k] = by[k][i]
					if !finite(row[k]) {
						t.Fatalf("%s with %v at %g Hz: derivative by %s = %v", c, values, f, c.Parameters()[k].Name, row[k])
					}
				}
				if d := c.FrequencyDerivative(row, values); !finite(d) {
					t.Fatalf("%s with %v at %g Hz: derivative by ln f = %v", c, values, f, d)
				}
			}
		}
		if n <= 7 { // every corner of the range
			for corner := range 1 << n {
				check(func(k int) int { return corner >> k & 1 })
			}
		}
		for range 100 {
			check(func(int) int { return rng.IntN(len(extremes)) })
		}
	}
}

// At the resonance of an ideal parallel circuit Z has a pole and at that of an
// ideal series circuit Y has one. Both stay numbers, also inside of other
// circuits and for parts of very low and very high impedance.
func TestIdealResonanceStaysFinite(t *testing.T) {
	// L and C whose reactances, of about the given size, or for a parallel
	// circuit susceptances, cancel to the last bit as the evaluation rounds
	// them; 0, 0 if none are found.
	exact := func(f, reactance float64, parallel bool) (l, c float64) {
		omega := 2 * math.Pi * f
		rest := func(l, c float64) float64 {
			if parallel {
				return float64(c*omega) - float64(1/l*(1/omega))
			}
			return float64(l*omega) - float64(1/c*(1/omega))
		}
		l = reactance / omega
		c = 1 / (omega * (omega * l))
		for range 100 {
			switch r := rest(l, c); {
			case r == 0:
				return l, c
			case r < 0: // both rise with C
				c = math.Nextafter(c, 1e300)
			default:
				c = math.Nextafter(c, 0)
			}
		}
		return 0, 0
	}
	expressions := map[bool][]string{
		true:  {"L || C", "R + (L || C)", "R || L || C", "R1 || (R2 + (L || C))", "R1 || (L1 + (L || C))"},
		false: {"L + C", "R || (L + C)", "C1 || (L + C)", "R + (C1 || (L + C))", "R1 || (R2 + (C1 || (L + C)))"},
	}
	hits := map[bool]int{}
	for _, reactance := range []float64{1e-30, 1e-6, 0.01, 1, 37, 1e6, 1e30} {
		for _, f := range []float64{1e-3, 159.1549431, 1e6, 1.0001e6, 7.3e6, 99e9} {
			for parallel, written := range expressions {
				l, cap := exact(f, reactance, parallel)
				if l == 0 {
					continue
				}
				hits[parallel]++
				for _, expression := range written {
					c := mustParse(expression)
					for _, other := range []float64{MinValue, 1e-6, 1, 1e6, MaxValue} {
						values := make([]float64, len(c.Parameters()))
						for k, p := range c.Parameters() {
							switch p.Name {
							case "L":
								values[k] = l
							case "C":
								values[k] = cap
							default:
								values[k] = other
							}
						}
						z, by := poisoned(1), columns(len(values), 1)
						c.NewEvaluator([]float64{f}).Jacobian(z, by, values)
						if !finite(z[0]) {
							t.Errorf("%s with %v at %g Hz: Z = %v", c, values, f, z[0])
						}
						for k := range by {
							if !finite(by[k][0]) {
								t.Errorf("%s with %v at %g Hz: derivative by %s = %v", c, values, f, c.Parameters()[k].Name, by[k][0])
							}
						}
					}
				}
				if !parallel {
					if z := mustParse("L + C").At(f, []float64{l, cap}); z != 0 {
						t.Errorf("L + C with %v, %v at %g Hz: Z = %v, want 0", l, cap, f, z)
					}
					continue
				}
				if z := mustParse("L || C").At(f, []float64{l, cap}); !(cmplx.Abs(z) > 1e80) {
					t.Errorf("L || C with %v, %v at %g Hz: Z = %v, want next to infinity", l, cap, f, z)
				}
				if z := mustParse("R || L || C").At(f, []float64{5, l, cap}); reactance >= 1e-6 && reactance <= 1e6 {
					requireClose(t, fmt.Sprintf("R || L || C at its resonance, %g Hz", f), z, 5, 1e-15, 5)
				}
			}
		}
	}
	if hits[true] < 30 || hits[false] < 30 {
		t.Errorf("of 42 resonances only %d parallel and %d series ones hit exactly: too little was tested", hits[true], hits[false])
	}
}

func TestReciprocal(t *testing.T) {
	for _, z := range []complex128{1, 1i, -3 + 4i, 1e-200, 1e-200i, 1e200 + 1e200i, 1e-150 - 1e-150i, 1e144, 1e146 - 1e140i, 3e-300 + 4e-300i} {
		requireClose(t, fmt.Sprintf("1/%v", z), reciprocal(z)*z, 1, 1e-15, 1)
	}
	if got := reciprocal(0); got != beyondAnyPart {
		t.Errorf("1/0 = %v, want %v", got, complex(beyondAnyPart, 0))
	}
	if got := reciprocal(complex(math.NaN(), 1)); !cmplx.IsNaN(got) {
		t.Errorf("1/NaN = %v, want NaN", got)
	}
}

func TestEvaluationAllocatesNothing(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 1))
	freq := logFrequencies(100, 100e6, 201)
	for _, c := range everyCircuit() {
		values := realistic(rng, c)
		e := c.NewEvaluator(freq)
		z, by := poisoned(len(freq)), columns(len(values), len(freq))
		for name, f := range map[string]func(){
			"Impedance":      func() { e.Impedance(z, values) },
			"Jacobian":       func() { e.Jacobian(z, by, values) },
			"SetFrequencies": func() { e.SetFrequencies(freq) },
		} {
			if n := testing.AllocsPerRun(10, f); n != 0 {
				t.Errorf("%s: %s allocates %v times", c, name, n)
			}
		}
	}
}
