package models

import (
	"fmt"
	"math"
)

// Evaluator computes the impedance of one circuit and its derivatives at a
// set of frequencies. It holds its own workspace: nothing is allocated by an
// evaluation, and it is not safe for concurrent use. The zero Evaluator is
// ready for [Evaluator.Use].
type Evaluator struct {
	circuit *Circuit
	grid    *Grid
	own     Grid                    // of SetFrequencies
	scratch [][BlockSize]complex128 // the program's columns
	window  [][]complex128          // derivatives of a block, for Jacobian
}

// NewEvaluator returns an evaluator of the circuit at the given frequencies in
// Hz. It panics unless each frequency is positive and finite.
func (c *Circuit) NewEvaluator(freq []float64) *Evaluator {
	e := new(Evaluator)
	e.own.Set(freq)
	e.Use(c, &e.own)
	return e
}

// Use changes the circuit and the frequencies. The grid is not copied. Use
// allocates only if the circuit needs more memory than any before.
func (e *Evaluator) Use(c *Circuit, g *Grid) {
	e.circuit, e.grid = c, g
	if n := c.program.columns; len(e.scratch) < n {
		e.scratch = make([][BlockSize]complex128, n)
	}
	if n := len(c.parameters); cap(e.window) < n {
		e.window = make([][]complex128, n)
	}
	e.window = e.window[:len(c.parameters)]
}

// Circuit returns the circuit that is evaluated.
func (e *Evaluator) Circuit() *Circuit { return e.circuit }

// Frequencies returns the frequencies in Hz. The caller must not change them.
func (e *Evaluator) Frequencies() []float64 { return e.grid.freq }

// SetFrequencies changes the frequencies, in Hz, and leaves a grid given to
// [Evaluator.Use] as it is. It panics, without a change, unless each is
// positive and finite, and allocates only if there are more than ever before.
func (e *Evaluator) SetFrequencies(freq []float64) {
	e.own.Set(freq)
	e.grid = &e.own
}

// Impedance sets dst[i] to Z in ohms at the i-th frequency. values holds the
// parameters in the order of [Circuit.Parameters]; dst has one element a
// frequency. It panics if a length is wrong.
func (e *Evaluator) Impedance(dst []complex128, values []float64) {
	e.check(dst, values)
	for from := 0; from < len(dst); from += BlockSize {
		to := min(from+BlockSize, len(dst))
		e.Block(from, to, values, dst[from:to], nil)
	}
}

// Jacobian sets dst[i] to Z in ohms at the i-th frequency and derivatives[k][i]
// to ∂Z/∂x_k, where x_k is the unknown of the k-th parameter: ln p, or logit n
// for an exponent (see [Scale]). A nil derivatives[k] is not computed. It
// panics if a length is wrong.
func (e *Evaluator) Jacobian(dst []complex128, derivatives [][]complex128, values []float64) {
	e.check(dst, values)
	if len(derivatives) != len(values) {
		panic(fmt.Sprintf("models: %d derivative columns for %d parameters", len(derivatives), len(values)))
	}
	for k, column := range derivatives {
		if column != nil && len(column) != len(dst) {
			panic(fmt.Sprintf("models: %d derivatives by %s for %d frequencies", len(column), e.circuit.parameters[k].Name, len(dst)))
		}
	}
	for from := 0; from < len(dst); from += BlockSize {
		to := min(from+BlockSize, len(dst))
		for k, column := range derivatives {
			if e.window[k] = nil; column != nil {
				e.window[k] = column[from:to]
			}
		}
		e.Block(from, to, values, dst[from:to], e.window)
	}
	clear(e.window) // holds on to nothing of the caller's
}

func (e *Evaluator) check(dst []complex128, values []float64) {
	if len(dst) != len(e.grid.freq) {
		panic(fmt.Sprintf("models: %d impedances for %d frequencies", len(dst), len(e.grid.freq)))
	}
	if len(values) != len(e.circuit.parameters) {
		panic(fmt.Sprintf("models: %d values for %d parameters", len(values), len(e.circuit.parameters)))
	}
}

// Block is [Evaluator.Jacobian] for the frequencies from ≤ i < to, at most
// [BlockSize] of them: it sets z[i−from] to Z and, unless derivatives is nil,
// derivatives[k][i−from] to ∂Z/∂x_k for every k whose derivatives[k] isn't
// nil. It panics if there are more frequencies or a slice is too short.
//
// The groups are passed once from the inside outwards, which gives Z, and once
// back, which hands each group the derivative by its sum of immittances. With
// S the sum of a group and 1/S what its parent adds,
//
//	∂Z/∂S = −∂Z/∂S_parent/S²
//
// and each element multiplies it with its own derivative, which for plain
// elements is real or imaginary.
func (e *Evaluator) Block(from, to int, values []float64, z []complex128, derivatives [][]complex128) {
	if to-from > BlockSize {
		panic(fmt.Sprintf("models: a block of %d frequencies; the most is %d", to-from, BlockSize))
	}
	z = z[:to-from]
	e.up(from, to, values, z, derivatives != nil)
	if derivatives != nil {
		e.down(from, to, values, z, derivatives)
	}
}

// column returns a column of scratch memory, for n frequencies.
func (e *Evaluator) column(i, n int) []complex128 {
	return e.scratch[i][:n]
}

// columnIfAny is column, and nil for none.
func (e *Evaluator) columnIfAny(i, n int) []complex128 {
	if i == none {
		return nil
	}
	return e.column(i, n)
}

// up computes the output of every group; with derivatives also those of
// elements whose derivatives are not multiples of their impedance.
func (e *Evaluator) up(from, to int, values []float64, z []complex128, derivatives bool) {
	omega, inverse := e.grid.omega[from:to], e.grid.inverse[from:to]
	groups := e.circuit.program.groups
	for i := range groups {
		g := &groups[i]
		for k := range g.powers {
			e.power(&g.powers[k], from, to, values, derivatives)
		}
		output := z
		if !g.root {
			output = e.column(g.output, len(z))
		}
		var parts []complex128
		switch len(g.parts) {
		case 0:
		case 1:
			parts = e.column(g.parts[0], len(z))
		default:
			setSum(output, e.column(g.parts[0], len(z)), e.column(g.parts[1], len(z)))
			for _, part := range g.parts[2:] {
				setSum(output, output, e.column(part, len(z)))
			}
			parts = output
		}
		constant, rising, falling := g.lump(values)
		if g.root && !g.parallel {
			setImmittance(output, parts, constant, rising, omega, falling, inverse)
		} else {
			setReciprocal(output, parts, constant, rising, omega, falling, inverse)
		}
	}
}

// lump adds the immittances of the plain elements.
func (g *group) lump(values []float64) (constant, rising, falling float64) {
	if g.parallel {
		for _, p := range g.resistors {
			constant += 1 / values[p]
		}
	} else {
		for _, p := range g.resistors {
			constant += values[p]
		}
	}
	for _, p := range g.rising {
		rising += values[p]
	}
	for _, p := range g.falling {
		falling -= 1 / values[p]
	}
	return constant, rising, falling
}

// down computes the factor of every group and from it the derivatives.
func (e *Evaluator) down(from, to int, values []float64, z []complex128, derivatives [][]complex128) {
	n := len(z)
	program := e.circuit.program
	for i := range program.factors {
		f := &program.factors[i]
		output := z
		if f.output != none {
			output = e.column(f.output, n)
		}
		setFactor(e.column(f.column, n), e.columnIfAny(f.above, n), output)
	}
	for i := range program.derivatives {
		d := &program.derivatives[i]
		dst := derivatives[d.parameter]
		if dst == nil {
			continue
		}
		dst = dst[:n]
		factor := e.columnIfAny(d.factor, n)
		switch v := values[d.parameter]; d.rule {
		case resistance:
			setScaled(dst, v, factor)
		case conductance:
			setScaled(dst, -1/v, factor)
		case rising:
			setTurned(dst, v, e.grid.omega[from:to], factor)
		case falling:
			setTurned(dst, 1/v, e.grid.inverse[from:to], factor)
		case product:
			setProduct(dst, 1, e.column(d.element, n), factor)
		case minusProduct:
			setProduct(dst, -1, e.column(d.element, n), factor)
		}
	}
}

// power computes the impedance of an element; with derivatives also those that
// are not plus or minus the impedance.
func (e *Evaluator) power(w *power, from, to int, values []float64, derivatives bool) {
	n := to - from
	p := values[w.p]
	z := e.column(w.z, n)
	switch w.element {
	case Skin:
		h := p / math.Sqrt2
		for k, omega := range e.grid.omega[from:to] {
			x := h * math.Sqrt(omega)
			z[k] = complex(x, x)
		}
	case LossCapacitor:
		tand := values[w.q]
		// rise = 1 − n. For large tand, atan is next to π/2 and n next to 0.
		rise := 2 / math.Pi * math.Atan(tand)
		dRise := 2 / math.Pi * tand / (1 + tand*tand) // by ln tand
		perC := 1 / p
		inverse := e.grid.inverse[from:to]
		second := e.column(w.second, n)
		for k, log := range e.grid.logs()[from:to] {
			log -= logLossReference
			x := math.Exp(rise*log) * inverse[k] * perC
			r := x * tand
			z[k] = complex(r, -x)
			if derivatives {
				h := dRise * log
				second[k] = complex(h*r+r, -h*x)
			}
		}
	case ConstantPhase:
		exponent := values[w.q]
		dn := LogitScale.Slope(exponent)
		sin, cos := math.Sincos(exponent * math.Pi / 2)
		re, im := cos/p, -sin/p
		second := e.column(w.second, n)
		for k, log := range e.grid.logs()[from:to] {
			scale := math.Exp(-exponent * log)
			z[k] = complex(scale*re, scale*im)
			if derivatives {
				second[k] = z[k] * complex(-dn*log, -dn*math.Pi/2)
			}
		}
	case RCLine:
		rc := p * values[w.q]
		first, second := e.column(w.first, n), e.column(w.second, n)
		for k, omega := range e.grid.omega[from:to] {
			g, slope := lineFactor(omega * rc)
			z[k] = complex(p*real(g), p*imag(g))
			if derivatives {
				second[k] = complex(p*real(slope), p*imag(slope))
				first[k] = z[k] + second[k]
			}
		}
	}
}

var logLossReference = math.Log(lossReference)

// At returns the impedance in ohms at one frequency in Hz.
func (c *Circuit) At(freq float64, values []float64) complex128 {
	var z [1]complex128
	c.NewEvaluator([]float64{freq}).Impedance(z[:], values)
	return z[0]
}

// CheckValue returns an error unless v is a possible value of the parameter:
// between [MinValue] and [MaxValue], or between 0 and 1 for an exponent.
func (p Parameter) CheckValue(v float64) error {
	if p.Scale == LogitScale {
		if !(v > 0 && v < 1) {
			return fmt.Errorf("%s = %v: an exponent is between 0 and 1", p.Name, v)
		}
		return nil
	}
	if !(v >= MinValue && v <= MaxValue) {
		return fmt.Errorf("%s = %v %s: a value is positive, between %v and %v", p.Name, v, p.Unit, float64(MinValue), float64(MaxValue))
	}
	return nil
}

// FrequencyDerivative returns ∂Z/∂ln f in ohms at one frequency, from the
// derivatives ∂Z/∂x_k there (see [Evaluator.Jacobian]) and the values.
//
// The laws of the elements know the frequency only together with a
// parameter (ωL, ωC, K√ω, Qω^n), so that
//
//	∂Z/∂ln ω = Σ_k w_k·∂Z/∂ln p_k,
//
// with w = 1 for L and C, also of the RC line, ½ for K, n for Q, n for the C
// of a loss capacitor, and 0 for R.
func (c *Circuit) FrequencyDerivative(derivatives []complex128, values []float64) complex128 {
	var re, im float64
	for k, w := range c.frequencyWeights(values) {
		if w != 0 {
			re += w * real(derivatives[k])
			im += w * imag(derivatives[k])
		}
	}
	return complex(re, im)
}

// frequencyWeights returns the w_k of [Circuit.FrequencyDerivative].
func (c *Circuit) frequencyWeights(values []float64) []float64 {
	weights := make([]float64, len(c.parameters))
	var walk func(n *Node)
	walk = func(n *Node) {
		for _, child := range n.Children {
			walk(child)
		}
		if n.Kind != Leaf {
			return
		}
		p := n.Parameters[0]
		switch n.Element {
		case Inductor, Capacitor:
			weights[p] = 1
		case Skin:
			weights[p] = 0.5
		case ConstantPhase:
			weights[p] = values[n.Parameters[1]]
		case LossCapacitor:
			weights[p] = 1 - 2/math.Pi*math.Atan(values[n.Parameters[1]])
		case RCLine:
			weights[n.Parameters[1]] = 1
		}
	}
	walk(c.root)
	return weights
}
