package models

import (
	"fmt"
	"math"
	"slices"
)

// blockSize is the number of frequencies evaluated together. A node needs two
// complex numbers a frequency, so that a circuit of ten nodes stays within
// 20 KB, which fits the first-level cache of any current processor.
const blockSize = 64

// Evaluator computes the impedance of one circuit and its derivatives at a
// set of frequencies. It holds its own workspace: nothing is allocated by an
// evaluation, and it is not safe for concurrent use.
type Evaluator struct {
	circuit *Circuit
	program []instruction
	// omega, logOmega and rootOmega hold ω, ln ω and √ω of each frequency;
	// the latter two only if an element needs them.
	omega, logOmega, rootOmega []float64
	needsLog, needsRoot        bool
	freq                       []float64
}

// instruction is one node of the tree in the order of evaluation, children
// before parents.
type instruction struct {
	kind     NodeKind
	element  Element
	p, q     int   // parameters of a leaf, −1 if none
	children []int // instructions of the children
	// z is the impedance of the node. factor is ∂Z/∂Z_node on the way down;
	// on the way up a child of a parallel node keeps its admittance there.
	// second is Z_node's derivative by the second parameter of a leaf, first
	// that by the first where it isn't plus or minus Z_node.
	z, factor, first, second []complex128
}

// NewEvaluator compiles the circuit for the given frequencies in Hz. It
// panics unless each frequency is positive and finite.
func (c *Circuit) NewEvaluator(freq []float64) *Evaluator {
	e := &Evaluator{circuit: c}
	e.compile(c.root)
	n := min(blockSize, max(1, len(freq)))
	size := 0
	for _, in := range e.program {
		size += in.columns()
	}
	buffer := make([]complex128, size*n)
	take := func() []complex128 {
		column := buffer[:n:n]
		buffer = buffer[n:]
		return column
	}
	for i := range e.program {
		in := &e.program[i]
		in.z, in.factor = take(), take()
		if in.columns() > 2 {
			in.first, in.second = take(), take()
		}
	}
	e.SetFrequencies(freq)
	return e
}

func (in *instruction) columns() int {
	if in.q >= 0 {
		return 4
	}
	return 2
}

func (e *Evaluator) compile(n *Node) int {
	in := instruction{kind: n.Kind, element: n.Element, p: -1, q: -1}
	if n.Kind == Leaf {
		in.p = n.Parameters[0]
		if len(n.Parameters) > 1 {
			in.q = n.Parameters[1]
		}
		switch n.Element {
		case LossCapacitor, ConstantPhase:
			e.needsLog = true
		case Skin:
			e.needsRoot = true
		}
	}
	for _, child := range n.Children {
		in.children = append(in.children, e.compile(child))
	}
	e.program = append(e.program, in)
	return len(e.program) - 1
}

// Circuit returns the circuit that is evaluated.
func (e *Evaluator) Circuit() *Circuit { return e.circuit }

// Frequencies returns the frequencies in Hz. The caller must not change them.
func (e *Evaluator) Frequencies() []float64 { return e.freq }

// SetFrequencies changes the frequencies, in Hz. It panics unless each is
// positive and finite, and allocates only if there are more than ever before.
func (e *Evaluator) SetFrequencies(freq []float64) {
	if len(e.program[0].z) < min(len(freq), blockSize) {
		*e = *e.circuit.NewEvaluator(freq)
		return
	}
	for _, f := range freq {
		if !(f > 0) || math.IsInf(f, 1) {
			panic(fmt.Sprintf("models: frequency %v Hz is not positive and finite", f))
		}
	}
	e.freq = append(e.freq[:0], freq...)
	e.omega, e.logOmega, e.rootOmega = slices.Grow(e.omega[:0], len(freq)), e.logOmega[:0], e.rootOmega[:0]
	for _, f := range e.freq {
		omega := 2 * math.Pi * f
		e.omega = append(e.omega, omega)
		if e.needsLog {
			e.logOmega = append(e.logOmega, math.Log(omega))
		}
		if e.needsRoot {
			e.rootOmega = append(e.rootOmega, math.Sqrt(omega))
		}
	}
}

// Impedance sets dst[i] to Z in ohms at the i-th frequency. values holds the
// parameters in the order of [Circuit.Parameters]; dst has one element a
// frequency. It panics if a length is wrong.
func (e *Evaluator) Impedance(dst []complex128, values []float64) {
	e.check(dst, values)
	for from := 0; from < len(e.omega); from += blockSize {
		to := min(from+blockSize, len(e.omega))
		e.up(from, to, values, false)
		copy(dst[from:to], e.program[len(e.program)-1].z)
	}
}

// Jacobian sets dst[i] to Z in ohms at the i-th frequency and derivatives[k][i]
// to ∂Z/∂x_k, where x_k is the unknown of the k-th parameter: ln p, or logit n
// for an exponent (see [Scale]).
//
// The tree is passed once from the leaves to the root, which gives Z, and once
// back, which hands each node the factor
//
//	∂Z/∂Z_child = ∂Z/∂Z_node                      (series)
//	∂Z/∂Z_child = ∂Z/∂Z_node·(Z_node/Z_child)²    (parallel).
//
// A nil derivatives[k] is not computed. It panics if a length is wrong.
func (e *Evaluator) Jacobian(dst []complex128, derivatives [][]complex128, values []float64) {
	e.check(dst, values)
	if len(derivatives) != len(values) {
		panic(fmt.Sprintf("models: %d derivative columns for %d parameters", len(derivatives), len(values)))
	}
	for k, column := range derivatives {
		if column != nil && len(column) != len(e.omega) {
			panic(fmt.Sprintf("models: %d derivatives by %s for %d frequencies", len(column), e.circuit.parameters[k].Name, len(e.omega)))
		}
	}
	for from := 0; from < len(e.omega); from += blockSize {
		to := min(from+blockSize, len(e.omega))
		e.up(from, to, values, true)
		copy(dst[from:to], e.program[len(e.program)-1].z)
		e.down(from, to, derivatives)
	}
}

func (e *Evaluator) check(dst []complex128, values []float64) {
	if len(dst) != len(e.omega) {
		panic(fmt.Sprintf("models: %d impedances for %d frequencies", len(dst), len(e.omega)))
	}
	if len(values) != len(e.circuit.parameters) {
		panic(fmt.Sprintf("models: %d values for %d parameters", len(values), len(e.circuit.parameters)))
	}
}

// up computes z of every node for a block of frequencies; with derivatives
// also those of two-parameter elements.
func (e *Evaluator) up(from, to int, values []float64, derivatives bool) {
	omega := e.omega[from:to]
	n := to - from
	for i := range e.program {
		in := &e.program[i]
		z := in.z[:n]
		switch in.kind {
		case Leaf:
			e.leaf(in, z, omega, from, values, derivatives)
		case Series:
			copy(z, e.program[in.children[0]].z)
			for _, child := range in.children[1:] {
				for k, v := range e.program[child].z[:n] {
					z[k] += v
				}
			}
		case Parallel:
			for c, child := range in.children {
				admittance := e.program[child].factor[:n]
				for k, v := range e.program[child].z[:n] {
					admittance[k] = reciprocal(v)
				}
				if c == 0 {
					copy(z, admittance)
					continue
				}
				for k, v := range admittance {
					z[k] += v
				}
			}
			for k, v := range z {
				z[k] = reciprocal(v)
			}
		}
	}
}

// leaf computes the impedance of an element, and for an element of two
// parameters its derivatives by the unknowns.
func (e *Evaluator) leaf(in *instruction, z []complex128, omega []float64, from int, values []float64, derivatives bool) {
	p := values[in.p]
	switch in.element {
	case Resistor:
		for k := range z {
			z[k] = complex(p, 0)
		}
	case Inductor:
		for k := range z {
			z[k] = complex(0, omega[k]*p)
		}
	case Capacitor:
		for k := range z {
			z[k] = complex(0, -1/(omega[k]*p))
		}
	case Skin:
		h := p / math.Sqrt2
		for k := range z {
			x := h * e.rootOmega[from+k]
			z[k] = complex(x, x)
		}
	case LossCapacitor:
		tand := values[in.q]
		// rise = 1 − n. For large tand, atan is next to π/2 and n next to 0.
		rise := 2 / math.Pi * math.Atan(tand)
		dRise := 2 / math.Pi * tand / (1 + tand*tand) // by ln tand
		for k := range z {
			log := e.logOmega[from+k] - logLossReference
			scale := math.Exp(rise*log) / (omega[k] * p)
			z[k] = complex(scale*tand, -scale)
			if derivatives {
				in.first[k] = -z[k]
				in.second[k] = complex(dRise*log, 0)*z[k] + complex(scale*tand, 0)
			}
		}
	case ConstantPhase:
		n := values[in.q]
		dn := LogitScale.Slope(n)
		sin, cos := math.Sincos(n * math.Pi / 2)
		for k := range z {
			log := e.logOmega[from+k]
			scale := math.Exp(-n*log) / p
			z[k] = complex(scale*cos, -scale*sin)
			if derivatives {
				in.first[k] = -z[k]
				in.second[k] = z[k] * complex(-dn*log, -dn*math.Pi/2)
			}
		}
	case RCLine:
		c := values[in.q]
		for k := range z {
			g, slope := lineFactor(omega[k] * p * c)
			z[k] = complex(p, 0) * g
			if derivatives {
				in.second[k] = complex(p, 0) * slope
				in.first[k] = z[k] + in.second[k]
			}
		}
	}
}

var logLossReference = math.Log(lossReference)

// down hands each node its factor and fills the derivatives of the leaves.
func (e *Evaluator) down(from, to int, derivatives [][]complex128) {
	n := to - from
	last := len(e.program) - 1
	for k := range e.program[last].factor[:n] {
		e.program[last].factor[k] = 1
	}
	for i := last; i >= 0; i-- {
		in := &e.program[i]
		factor := in.factor[:n]
		switch in.kind {
		case Series:
			for _, child := range in.children {
				copy(e.program[child].factor[:n], factor)
			}
		case Parallel:
			z := in.z[:n]
			for _, child := range in.children {
				f := e.program[child].factor[:n]
				for k, admittance := range f {
					ratio := z[k] * admittance
					f[k] = factor[k] * (ratio * ratio)
				}
			}
		case Leaf:
			first, sign := in.z[:n], 1.0
			if in.element == Capacitor {
				sign = -1
			}
			if in.q >= 0 {
				first = in.first[:n]
				product(derivatives[in.q], from, factor, in.second[:n], 1)
			}
			product(derivatives[in.p], from, factor, first, sign)
		}
	}
}

// product sets dst[from+k] = sign·a[k]·b[k].
func product(dst []complex128, from int, a, b []complex128, sign float64) {
	if dst == nil {
		return
	}
	dst = dst[from : from+len(a)]
	for k := range dst {
		v := a[k] * b[k]
		dst[k] = complex(sign*real(v), sign*imag(v))
	}
}

// beyondAnyPart stands for 1/0: more than any impedance or admittance within
// [MinValue] and [MaxValue] (up to 1e82 for the impedance of a lossy
// capacitor, 1e52 for an admittance), and so little that its square times
// that of an admittance, as [Evaluator.Jacobian] forms, is a float64.
const beyondAnyPart = 1e90

// reciprocal returns 1/z. Go's complex division takes care of infinities at
// the cost of a call; here only magnitudes whose square leaves the range of
// a float64 need care, and 1/0 becomes beyondAnyPart, so that an ideal
// parallel resonance stays computable.
func reciprocal(z complex128) complex128 {
	re, im := real(z), imag(z)
	if d := re*re + im*im; d > 1e-290 && d < 1e290 {
		d = 1 / d
		return complex(re*d, -im*d)
	}
	s := max(math.Abs(re), math.Abs(im))
	if s == 0 {
		return beyondAnyPart
	}
	re /= s
	im /= s
	d := 1 / (re*re + im*im) / s
	return complex(re*d, -im*d)
}

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
	var sum complex128
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
			sum += derivatives[p]
		case Skin:
			sum += derivatives[p] / 2
		case ConstantPhase:
			sum += complex(values[n.Parameters[1]], 0) * derivatives[p]
		case LossCapacitor:
			exponent := 1 - 2/math.Pi*math.Atan(values[n.Parameters[1]])
			sum += complex(exponent, 0) * derivatives[p]
		case RCLine:
			sum += derivatives[n.Parameters[1]]
		}
	}
	walk(c.root)
	return sum
}
