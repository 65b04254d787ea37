package models

import (
	"math"
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
	Freq      float64 // Hz
	Kind      ResonanceKind
	Impedance float64 // real part of Z there, Ω
}

// pointsPerDecade of the grid on which sign changes of the reactance are
// looked for, beside the frequencies at which elements can resonate.
const pointsPerDecade = 60

// Resonances returns all zeros of Im Z between two frequencies in Hz, in
// rising order, each refined until the bracket is two neighbouring float64.
//
// Sign changes are looked for on a logarithmic grid to which the resonance
// frequencies of all pairs of L and C are added, alone and with the other
// elements of their kind in series and in parallel; between two grid points
// the search goes on where the phase turns fast. A resonance narrower than
// the grid can therefore not hide between its points: it is always near the
// resonance of some inductance with some capacitance.
func (c *Circuit) Resonances(values []float64, from, to float64) []Resonance {
	e := c.NewEvaluator([]float64{from})
	var buffer [1]complex128
	at := func(f float64) complex128 {
		e.SetFrequencies([]float64{f})
		e.Impedance(buffer[:], values)
		return buffer[0]
	}
	type point struct {
		f float64
		z complex128
	}
	var found []Resonance
	bisect := func(a, b point) {
		sign := math.Signbit(imag(a.z))
		for {
			mid := math.Sqrt(a.f) * math.Sqrt(b.f)
			if !(mid > a.f && mid < b.f) {
				mid = a.f + (b.f-a.f)/2
			}
			if !(mid > a.f && mid < b.f) {
				break
			}
			m := point{mid, at(mid)}
			if math.Signbit(imag(m.z)) == sign {
				a = m
			} else {
				b = m
			}
		}
		kind := ParallelResonance
		if sign { // negative below: rising
			kind = SeriesResonance
		}
		root := a
		if math.Abs(imag(b.z)) < math.Abs(imag(a.z)) {
			root = b
		}
		found = append(found, Resonance{Freq: root.f, Kind: kind, Impedance: real(root.z)})
	}
	var search func(a, b point, depth int)
	search = func(a, b point, depth int) {
		if turn := math.Abs(phaseBetween(a.z, b.z)); turn > 0.3 && depth > 0 {
			mid := math.Sqrt(a.f) * math.Sqrt(b.f)
			if mid > a.f && mid < b.f {
				m := point{mid, at(mid)}
				search(a, m, depth-1)
				search(m, b, depth-1)
				return
			}
		}
		if math.Signbit(imag(a.z)) != math.Signbit(imag(b.z)) {
			bisect(a, b)
		}
	}
	grid := c.resonanceGrid(values, from, to)
	last := point{grid[0], at(grid[0])}
	for _, f := range grid[1:] {
		next := point{f, at(f)}
		search(last, next, 12)
		last = next
	}
	return found
}

func phaseBetween(a, b complex128) float64 {
	re := real(a)*real(b) + imag(a)*imag(b)
	im := real(a)*imag(b) - imag(a)*real(b)
	return math.Atan2(im, re)
}

// resonanceGrid returns rising frequencies from `from` to `to`.
func (c *Circuit) resonanceGrid(values []float64, from, to float64) []float64 {
	n := max(2, int(math.Ceil(pointsPerDecade*math.Log10(to/from)))+1)
	grid := make([]float64, 0, n)
	for i := range n {
		grid = append(grid, from*math.Pow(to/from, float64(i)/float64(n-1)))
	}
	grid[n-1] = to
	inductances := reactiveSums(c, values, "H")
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
