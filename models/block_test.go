package models

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// referenceDerivatives adds to [reference] the derivatives by all unknowns, by
// the chain rule in complex arithmetic from the leaves on, with no thought of
// speed or range. amplified is the largest product of gains between the root
// and any node: the relative error of the elements can grow by so much.
func referenceDerivatives(n *Node, f float64, values []float64) (z complex128, by map[int]complex128, amplified float64) {
	if n.Kind == Leaf {
		z, by = referenceElementDerivatives(n, f, values)
		return z, by, 1
	}
	by = map[int]complex128{}
	var sum complex128
	var size float64
	for _, child := range n.Children {
		z, inside, a := referenceDerivatives(child, f, values)
		factor := complex(1, 0)
		if n.Kind == Parallel {
			z = 1 / z
			factor = -z * z
		}
		sum += z
		size += cmplx.Abs(z)
		amplified = max(amplified, a)
		for k, d := range inside {
			by[k] = factor * d
		}
	}
	amplified *= size / cmplx.Abs(sum)
	if n.Kind == Parallel {
		sum = 1 / sum
		for k := range by {
			by[k] *= -sum * sum
		}
	}
	return sum, by, amplified
}

// referenceElementDerivatives differentiates the laws as the documentation of
// [Element] states them.
func referenceElementDerivatives(n *Node, f float64, values []float64) (complex128, map[int]complex128) {
	jw := complex(0, 2*math.Pi*f)
	z := referenceElement(n, jw, values)
	by := map[int]complex128{n.Parameters[0]: z}
	switch n.Element {
	case Capacitor:
		by[n.Parameters[0]] = -z
	case LossCapacitor: // ln Z = ½·ln(1 + tand²) + (2/π)·atan(tand)·ln(jω/ω₀) + …
		tand := values[n.Parameters[1]]
		by[n.Parameters[0]] = -z
		by[n.Parameters[1]] = z * complex(tand/(1+tand*tand), 0) *
			(complex(tand, 0) + 2/math.Pi*cmplx.Log(jw/complex(2*math.Pi*1000, 0)))
	case ConstantPhase: // ln Z = −ln Q − n·ln jω
		exponent := values[n.Parameters[1]]
		by[n.Parameters[0]] = -z
		by[n.Parameters[1]] = -z * complex(exponent*(1-exponent), 0) * cmplx.Log(jw)
	case RCLine: // Z = R·coth(x)/x with x = √(jωRC)
		r := complex(values[n.Parameters[0]], 0)
		x := cmplx.Sqrt(jw * r * complex(values[n.Parameters[1]], 0))
		var perSinh2 complex128
		if real(x) < 20 {
			perSinh2 = 1 / (cmplx.Sinh(x) * cmplx.Sinh(x))
		}
		byC := -(z + r*perSinh2) / 2
		by[n.Parameters[1]] = byC
		by[n.Parameters[0]] = z + byC
	}
	return z, by
}

// Z and all derivatives of any circuit against complex arithmetic written
// straight from the laws, for parts as they are and for values from 1e-18 to
// 1e18: each to 1e-11, and to 1e-13 times the gain where terms cancel.
func TestBlockAgainstComplexArithmetic(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := drawCircuit(t)
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
		freq := logFrequencies(10, 1e9, 11)
		values := realistic(rng, c)
		if rapid.Bool().Draw(t, "extreme") {
			freq = logFrequencies(1e-3, 100e9, 15)
			for k, p := range c.Parameters() {
				if values[k] = math.Pow(10, 36*rng.Float64()-18); p.Scale == LogitScale {
					values[k] = 0.001 + 0.998*rng.Float64()
				}
			}
		}
		z, by := poisoned(len(freq)), columns(len(values), len(freq))
		var e Evaluator
		e.Use(c, NewGrid(freq))
		e.Block(0, len(freq), values, z, by)
		for i, f := range freq {
			wantZ, wantBy, amplified := referenceDerivatives(c.Root(), f, values)
			tolerance := max(1e-11, 1e-13*amplified)
			if !(cmplx.Abs(z[i]-wantZ) <= tolerance*cmplx.Abs(wantZ)) {
				t.Fatalf("%s with %v at %g Hz: Z = %v, want %v to %.2g of it", c, values, f, z[i], wantZ, tolerance)
			}
			for k, d := range wantBy {
				size := cmplx.Abs(d)
				if c.Parameters()[k].Quantity == laws[RCLine].parameters[0].quantity {
					size = max(size, cmplx.Abs(wantBy[k+1])) // the reference subtracts
				}
				if !(cmplx.Abs(by[k][i]-d) <= tolerance*size) {
					t.Fatalf("%s with %v at %g Hz: derivative by %s = %v, want %v to %.2g of %.3g", c, values, f, c.Parameters()[k].Name, by[k][i], d, tolerance, size)
				}
			}
		}
	})
}

// One evaluator goes through all circuits and two sweeps and gives, for any
// part of them, the bits that a new one gives for the whole.
func TestBlockIsPartOfJacobian(t *testing.T) {
	rng := rand.New(rand.NewPCG(6, 1))
	grids := []*Grid{NewGrid(logFrequencies(1, 1e9, 150)), NewGrid(logFrequencies(50, 2e3, 70))}
	circuits := everyCircuit()
	for range 40 {
		circuits = append(circuits, mustParse(randomExpression(rng.IntN, 1+rng.IntN(12))))
	}
	var e Evaluator
	for range 2 {
		rng.Shuffle(len(circuits), func(i, j int) { circuits[i], circuits[j] = circuits[j], circuits[i] })
		for _, c := range circuits {
			g := grids[rng.IntN(2)]
			total := len(g.Frequencies())
			values := realistic(rng, c)
			want, wantBy := poisoned(total), columns(len(values), total)
			c.NewEvaluator(g.Frequencies()).Jacobian(want, wantBy, values)
			e.Use(c, g)
			if e.Circuit() != c || &e.Frequencies()[0] != &g.Frequencies()[0] {
				t.Fatal("Use: another circuit or grid")
			}
			for range 4 {
				from := rng.IntN(total)
				n := rng.IntN(min(BlockSize, total-from) + 1)
				// One more than needed, which must stay as it is.
				z, by := poisoned(n+1), columns(len(values), n+1)
				skip := rng.IntN(len(values))
				by[skip] = nil
				e.Block(from, from+n, values, z, by)
				alone := poisoned(n + 1)
				e.Block(from, from+n, values, alone, nil)
				for i := range n {
					if z[i] != want[from+i] || alone[i] != want[from+i] {
						t.Fatalf("%s, block from %d: Z[%d] = %v, alone %v, want %v", c, from, i, z[i], alone[i], want[from+i])
					}
				}
				if !cmplx.IsNaN(z[n]) || !cmplx.IsNaN(alone[n]) {
					t.Fatalf("%s: a block of %d writes one more", c, n)
				}
				for k := range by {
					if k == skip {
						continue
					}
					for i := range n {
						if by[k][i] != wantBy[k][from+i] {
							t.Fatalf("%s, block from %d: derivative %d by %s = %v, want %v", c, from, i, c.Parameters()[k].Name, by[k][i], wantBy[k][from+i])
						}
					}
					if !cmplx.IsNaN(by[k][n]) {
						t.Fatalf("%s: a block of %d writes one more derivative", c, n)
					}
				}
			}
			// The whole through the same evaluator.
			z, by := poisoned(total), columns(len(values), total)
			e.Jacobian(z, by, values)
			if !slices.Equal(z, want) {
				t.Fatalf("%s: Jacobian after Use gives another Z", c)
			}
			for k := range by {
				if !slices.Equal(by[k], wantBy[k]) {
					t.Fatalf("%s: Jacobian after Use gives another derivative by %s", c, c.Parameters()[k].Name)
				}
			}
		}
	}
}

// Numbers whose squares leave the range of a float64, next to ordinary ones in
// a block, take the slow way to their reciprocal and leave the others alone.
func TestReciprocalOfMixedMagnitudes(t *testing.T) {
	all := []complex128{1, 0, 2i, 1e-200, 3 - 4i, 1e200i, 0, 0, -5, 1e-160 + 1e-150i}
	ones := make([]float64, len(all))
	for from := range all {
		parts := all[from:]
		dst := poisoned(len(parts))
		setReciprocal(dst, parts, 0, 0, ones[from:], 0, ones[from:])
		inPlace := slices.Clone(parts)
		setReciprocal(inPlace, inPlace, 0, 0, ones[from:], 0, ones[from:])
		for k, v := range parts {
			if dst[k] != reciprocal(v) || inPlace[k] != dst[k] {
				t.Errorf("1/%v at %d: %v, in place %v, want %v", v, k, dst[k], inPlace[k], reciprocal(v))
			}
		}
	}
	// Without parts: L || C with its ideal resonance at the second of three
	// frequencies.
	dst := poisoned(3)
	setReciprocal(dst, nil, 0, 1, []float64{1, 2, 4}, -4, []float64{1, 0.5, 0.25})
	for k, want := range []complex128{1i / 3, beyondAnyPart, -1i / 3} {
		requireClose(t, fmt.Sprintf("1/(jω − 4j/ω) at ω = %d", 1<<k), dst[k], want, 1e-15, cmplx.Abs(want))
	}
}

func TestGridSet(t *testing.T) {
	var g Grid
	if len(g.Frequencies()) != 0 {
		t.Error("the zero Grid has frequencies")
	}
	for _, n := range []int{10, 3, 0, 10, 11} {
		freq := logFrequencies(1, 1e6, n)
		g.Set(freq)
		if fresh := NewGrid(freq); !slices.Equal(g.Frequencies(), freq) ||
			!slices.Equal(g.omega, fresh.omega) || !slices.Equal(g.inverse, fresh.inverse) || !slices.Equal(g.logs(), fresh.logs()) {
			t.Errorf("%d frequencies: Set and NewGrid differ", n)
		}
		if n > 0 {
			freq[0] = 77
			if g.Frequencies()[0] == 77 {
				t.Errorf("%d frequencies: the grid shares the caller's", n)
			}
		}
	}
	tail := slices.Clone(g.Frequencies()[4:])
	g.Set(g.Frequencies()[4:]) // overlaps with what it replaces
	if !slices.Equal(g.Frequencies(), tail) {
		t.Errorf("%v, want %v", g.Frequencies(), tail)
	}
	// A refused frequency changes nothing.
	func() {
		defer func() {
			if recover() == nil {
				t.Error("no panic")
			}
		}()
		g.Set([]float64{5, 6, 0})
	}()
	if !slices.Equal(g.Frequencies(), tail) {
		t.Errorf("after a refused frequency %v, want %v", g.Frequencies(), tail)
	}
}

// SetFrequencies after Use leaves the shared grid as it is; Set of a grid in
// use shows at the next evaluation, also if there are more frequencies.
func TestSharedGrid(t *testing.T) {
	c := mustParse("ESR + ESL + (C || Rp)")
	values := []float64{0.01, 1e-9, 1e-6, 1e5}
	g := NewGrid([]float64{1e3})
	var a, b Evaluator
	a.Use(c, g)
	b.Use(c, g)
	a.SetFrequencies([]float64{5, 6})
	if len(g.Frequencies()) != 1 || g.Frequencies()[0] != 1e3 || len(a.Frequencies()) != 2 {
		t.Errorf("after SetFrequencies the shared grid has %v", g.Frequencies())
	}
	freq := logFrequencies(1e3, 1e6, 100)
	g.Set(freq)
	z := poisoned(len(freq))
	b.Impedance(z, values)
	for i, f := range freq {
		if want := c.At(f, values); z[i] != want {
			t.Errorf("at %g Hz %v, want %v", f, z[i], want)
		}
	}
}

func TestBlocksAllocateNothing(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 1))
	long, short := NewGrid(logFrequencies(100, 100e6, 201)), NewGrid(logFrequencies(1, 1e6, 11))
	circuits := everyCircuit()
	var e Evaluator
	for _, c := range circuits { // once, for the memory
		e.Use(c, long)
	}
	freq := slices.Clone(short.Frequencies())
	for _, c := range circuits {
		values := realistic(rng, c)
		z, by := poisoned(BlockSize), columns(len(values), BlockSize)
		if n := testing.AllocsPerRun(10, func() {
			e.Use(c, short)
			e.Block(0, 11, values, z, by)
			e.Use(c, long)
			e.Block(64, 128, values, z, by)
			e.Block(192, 201, values, z, nil)
			short.Set(freq)
		}); n != 0 {
			t.Errorf("%s: %v allocations", c, n)
		}
	}
}

func TestBlockPanicsOnWrongUse(t *testing.T) {
	c := mustParse("R + C")
	values := []float64{1, 1}
	var e Evaluator
	e.Use(c, NewGrid(logFrequencies(1, 1e3, 2*BlockSize)))
	z, by := poisoned(2*BlockSize), columns(2, 2*BlockSize)
	for name, f := range map[string]func(){
		"too many":          func() { e.Block(0, BlockSize+1, values, z, by) },
		"upside down":       func() { e.Block(5, 4, values, z, by) },
		"beyond the end":    func() { e.Block(2*BlockSize-1, 2*BlockSize+1, values, z, by) },
		"short z":           func() { e.Block(0, 5, values, z[:4:4], by) },
		"short column":      func() { e.Block(0, 5, values, z, [][]complex128{by[0], by[1][:4:4]}) },
		"too few columns":   func() { e.Block(0, 5, values, z, by[:1]) },
		"too few values":    func() { e.Block(0, 5, values[:1], z, by) },
		"grid at zero":      func() { NewGrid([]float64{0}) },
		"grid below zero":   func() { NewGrid([]float64{1, -1}) },
		"grid at NaN":       func() { NewGrid([]float64{math.NaN()}) },
		"grid at infinity":  func() { NewGrid([]float64{math.Inf(1)}) },
		"zero value, Block": func() { new(Evaluator).Block(0, 1, values, z, by) },
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
}
