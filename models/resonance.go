package models

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"
)

// ResonanceKind tells the two ways in which a reactance passes through zero.
type ResonanceKind string

const (
	// SeriesResonance: the reactance rises through zero, from capacitive to
	// inductive; |Z| has a minimum nearby.
	SeriesResonance ResonanceKind = "series"
	// ParallelResonance: the reactance falls through zero; |Z| has a maximum
	// nearby.
	ParallelResonance ResonanceKind = "parallel"
)

// Resonance is a self-resonance: a frequency at which the impedance is real.
// For a lossy parallel circuit this is neither 1/(2π√(LC)) nor the frequency
// of the largest |Z| exactly.
type Resonance struct {
	Freq float64 // Hz
	Kind ResonanceKind
	// Impedance is Z there, in Ω, which is real. For a parallel circuit
	// without any loss, where Z has a pole, it is |Z| as near to the pole as a
	// float64 comes.
	Impedance float64
}

// pointsPerDecade of the grid on which sign changes of the reactance are
// looked for, beside the frequencies at which elements can resonate. An
// interval is halved, at most maxHalvings times, while Z turns or changes by
// more than steepestTurn in it.
const (
	pointsPerDecade = 60
	fewPerDecade    = 20 // enough for one inductance, with which there are few resonances
	steepestTurn    = 0.3
	maxHalvings     = 48
)

// Resonances returns all zeros of Im Z between two frequencies in Hz, in
// rising order, each refined until the bracket is two neighbouring float64.
// It panics unless 0 < from < to < ∞.
//
// Sign changes are looked for on a logarithmic grid to which the resonance
// frequencies of all pairs of L and C are added, alone and with the other
// elements of their kind in series and in parallel. An interval is halved
// while its ends differ much in phase or, by their derivative ∂ln Z/∂ln f,
// would differ much. The derivative is what finds a crystal: the phase is next
// to zero, with the same sign, at its series and at its parallel resonance,
// and all that happens lies between. An interval is also halved while the
// tangents to the reactance at its ends meet beyond zero, which finds the two
// resonances of a crystal so lossy that its reactance hardly reaches zero.
func (c *Circuit) Resonances(values []float64, from, to float64) []Resonance {
	if !(from > 0 && from < to) || math.IsInf(to, 1) {
		panic(fmt.Sprintf("models: resonances between %v Hz and %v Hz: the range is not positive, finite and rising", from, to))
	}
	probe := newProbe(c, values)
	var found []Resonance
	var search func(a, b point, halvings int)
	search = func(a, b point, halvings int) {
		if halvings > 0 && (turns(a, b) || mayTouch(a, b)) {
			if mid, ok := between(a.f, b.f); ok {
				m := probe.at(mid)
				search(a, m, halvings-1)
				search(m, b, halvings-1)
				return
			}
		}
		if math.Signbit(imag(a.z)) != math.Signbit(imag(b.z)) {
			found = append(found, probe.refine(a, b))
		}
	}
	grid := c.resonanceGrid(values, from, to)
	last := probe.at(grid[0])
	block := make([]point, probed)
	for freq := range slices.Chunk(grid[1:], probed) {
		probe.evaluate(block, freq)
		for _, next := range block[:len(freq)] {
			search(last, next, maxHalvings)
			last = next
		}
	}
	return found
}

// point is the impedance at a frequency, and ∂Z/∂ln f.
type point struct {
	f     float64
	z, dz complex128
}

// probed is the number of frequencies that a probe evaluates together.
const probed = 32

// probe evaluates a circuit at a few frequencies after the other.
type probe struct {
	evaluator *Evaluator
	values    []float64
	weights   []float64      // of the derivatives in ∂Z/∂ln f
	z         []complex128   // of a block
	columns   [][]complex128 // of a block
	window    [][]complex128 // of columns
}

func newProbe(c *Circuit, values []float64) *probe {
	n := len(c.parameters)
	p := &probe{
		evaluator: c.NewEvaluator([]float64{1}),
		values:    values,
		weights:   c.frequencyWeights(values),
		z:         make([]complex128, probed),
		columns:   make([][]complex128, n),
		window:    make([][]complex128, n),
	}
	for k, w := range p.weights {
		if w != 0 {
			p.columns[k] = make([]complex128, probed)
		}
	}
	return p
}

func (p *probe) impedance(f float64) complex128 {
	p.evaluator.SetFrequencies([]float64{f})
	p.evaluator.Impedance(p.z[:1], p.values)
	return p.z[0]
}

func (p *probe) at(f float64) point {
	var one [1]point
	p.evaluate(one[:], []float64{f})
	return one[0]
}

// evaluate sets the first points to those at some frequencies, at most a block.
func (p *probe) evaluate(points []point, freq []float64) {
	n := len(freq)
	z := p.z[:n]
	for k, column := range p.columns {
		p.window[k] = nil
		if p.weights[k] != 0 {
			p.window[k] = column[:n]
		}
	}
	p.evaluator.SetFrequencies(freq)
	p.evaluator.Jacobian(z, p.window, p.values)
	for i, f := range freq {
		var re, im float64
		for k, w := range p.weights {
			if w != 0 {
				d := p.window[k][i]
				re += w * real(d)
				im += w * imag(d)
			}
		}
		points[i] = point{f, z[i], complex(re, im)}
	}
}

// refine narrows a sign change of Im Z to two neighbouring float64.
func (p *probe) refine(a, b point) Resonance {
	rising := math.Signbit(imag(a.z))
	for {
		mid, ok := between(a.f, b.f)
		if !ok {
			break
		}
		m := point{f: mid, z: p.impedance(mid)}
		if math.Signbit(imag(m.z)) == rising {
			a = m
		} else {
			b = m
		}
	}
	root := a
	if math.Abs(imag(b.z)) < math.Abs(imag(a.z)) {
		root = b
	}
	if rising {
		return Resonance{root.f, SeriesResonance, real(root.z)}
	}
	r := real(root.z)
	if math.Abs(imag(root.z)) > math.Abs(r) {
		// A pole on the axis, to within the rounding of f: Re Z is no more
		// than what loss is left beside it, while |Z| peaks.
		r = cmplx.Abs(root.z)
	}
	return Resonance{root.f, ParallelResonance, r}
}

// between returns a frequency between two others, their geometric mean as far
// as rounding allows, and false if they are neighbours.
func between(a, b float64) (float64, bool) {
	mid := math.Sqrt(a) * math.Sqrt(b)
	if !(mid > a && mid < b) {
		mid = a + (b-a)/2
	}
	return mid, mid > a && mid < b
}

// turns reports whether Z turns by more than steepestTurn between two points,
// or would turn or change by as much by the slope at either of them.
func turns(a, b point) bool {
	re := real(a.z)*real(b.z) + imag(a.z)*imag(b.z)
	im := imag(b.z)*real(a.z) - real(b.z)*imag(a.z)
	if !(math.Abs(im) <= tanSteepestTurn*re) {
		return true
	}
	most := steepestTurn / (b.f/a.f - 1) // which is no less than ln(b.f/a.f)
	return !(square(a.dz) <= most*most*square(a.z) && square(b.dz) <= most*most*square(b.z))
}

var tanSteepestTurn = math.Tan(steepestTurn)

func square(v complex128) float64 { return real(v)*real(v) + imag(v)*imag(v) }

// mayTouch reports whether the reactance has the same sign at two points,
// heads for zero from both, and its tangents there meet beyond zero.
func mayTouch(a, b point) bool {
	xa, xb := imag(a.z), imag(b.z)
	sa, sb := imag(a.dz), imag(b.dz)
	if math.Signbit(xa) {
		xa, xb, sa, sb = -xa, -xb, -sa, -sb
	}
	if !(xa > 0 && xb > 0 && sa < 0 && sb > 0) {
		return false
	}
	width := math.Log(b.f / a.f)
	meet := (xa - xb + sb*width) / (sb - sa) // in ln f, from a
	return xa+sa*meet < 0
}

// resonanceGrid returns rising frequencies from `from` to `to`.
func (c *Circuit) resonanceGrid(values []float64, from, to float64) []float64 {
	inductances := reactiveSums(c, values, "H")
	density := float64(pointsPerDecade)
	if len(inductances) < 2 {
		density = fewPerDecade
	}
	n := max(2, int(math.Ceil(density*math.Log10(to/from)))+1)
	grid := make([]float64, 0, n)
	step := math.Pow(to/from, 1/float64(n-1))
	for f := from; len(grid) < n-1; f *= step {
		grid = append(grid, f)
	}
	grid = append(grid, to)
	capacitances := reactiveSums(c, values, "F")
	for _, l := range inductances {
		for _, cap := range capacitances {
			f := 1 / (2 * math.Pi * math.Sqrt(l) * math.Sqrt(cap))
			if f > from && f < to {
				grid = append(grid, f)
			}
		}
	}
	slices.Sort(grid)
	return slices.Compact(grid)
}

// reactiveSums returns the values of all parameters of a unit, and for each
// pair and for all together their sum and the reciprocal of the sum of their
// reciprocals.
func reactiveSums(c *Circuit, values []float64, unit string) []float64 {
	var single []float64
	for i, p := range c.parameters {
		if p.Unit == unit {
			single = append(single, values[i])
		}
	}
	if len(single) < 2 {
		return single
	}
	all := slices.Clone(single)
	for i, a := range single {
		for _, b := range single[:i] {
			all = append(all, a+b, 1/(1/a+1/b))
		}
	}
	sum, reciprocals := 0.0, 0.0
	for _, v := range single {
		sum += v
		reciprocals += 1 / v
	}
	return append(all, sum, 1/reciprocals)
}
