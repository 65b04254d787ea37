package fit

import (
	"math"
	"math/rand/v2"
	"slices"

	"realpart/models"
)

// features are what starting values are made from: a thinned sweep and the
// frequencies at which it resonates.
type features struct {
	*points
	resonances []float64 // zeros of X, and extremes of |Z| inside the sweep, Hz
}

// features returns those of the sweep, of its tame points if it has wild ones.
// They are worked out once.
func (p *points) features(wild bool) *features {
	if wild {
		return newFeatures(p.pick(tame(p.freq, p.measured)), searchPoints)
	}
	if p.shape == nil {
		p.shape = newFeatures(p, searchPoints)
	}
	return p.shape
}

func newFeatures(pts *points, n int) *features {
	f := &features{points: pts.pick(thin(pts.freq, pts.measured, n))}
	z := pts.measured
	for i := 1; i < len(z); i++ {
		if (imag(z[i-1]) < 0) != (imag(z[i]) < 0) {
			// linear in ln f between the two points
			share := imag(z[i-1]) / (imag(z[i-1]) - imag(z[i]))
			if share >= 0 && share <= 1 {
				f.resonances = append(f.resonances, pts.freq[i-1]*math.Pow(pts.freq[i]/pts.freq[i-1], share))
			}
		}
	}
	low, high := extremes(z)
	for _, i := range []int{low, high} {
		if i > 0 && i < len(z)-1 {
			f.resonances = append(f.resonances, pts.freq[i])
		}
	}
	// Noise on a real impedance makes hundreds of sign changes; a few stand
	// for all.
	if len(f.resonances) > 16 {
		f.resonances = f.resonances[:16]
	}
	return f
}

func abs(z complex128) float64 { return math.Hypot(real(z), imag(z)) }

// sampler draws starting values for any circuit. Every element is given a
// frequency of the sweep, its anchor, at which its impedance matches the
// measured one (its magnitude, or the part of it or of the admittance that
// is the element's own), give or take a factor; an inductance may instead
// resonate with a capacitance at a resonance of the sweep. So each element
// matters somewhere in the sweep, which blind draws over decades don't
// achieve.
type sampler struct {
	*features
	random *rand.Rand
	leaves []*models.Node
	// inductors and capacitors are the parameters of inductances and of
	// capacitances; siblings gives for each inductor the capacitance beside it,
	// -1 if there is none.
	inductors, siblings, capacitors []int
}

func newSampler(f *features, c *models.Circuit, seed uint64) *sampler {
	s := &sampler{features: f, random: rand.New(rand.NewPCG(seed, 0x5eed))}
	s.list(c.Root(), -1)
	return s
}

// list adds the leaves of a branch, beside which there is a given capacitance.
func (s *sampler) list(n *models.Node, beside int) {
	if n.Kind != models.Leaf {
		beside = -1
		for _, child := range n.Children {
			if child.Kind == models.Leaf && child.Element == models.Capacitor {
				beside = child.Parameters[0]
			}
		}
		for _, child := range n.Children {
			s.list(child, beside)
		}
		return
	}
	s.leaves = append(s.leaves, n)
	switch n.Element {
	case models.Inductor:
		s.inductors, s.siblings = append(s.inductors, n.Parameters[0]), append(s.siblings, beside)
	case models.Capacitor, models.LossCapacitor:
		s.capacitors = append(s.capacitors, n.Parameters[0])
	case models.RCLine:
		s.capacitors = append(s.capacitors, n.Parameters[1])
	}
}

// spread returns a factor exp(N(0, σ)).
func (s *sampler) spread(sigma float64) float64 { return math.Exp(sigma * s.random.NormFloat64()) }

// anchor returns a frequency of the thinned sweep as ω, with Z and Y there.
func (s *sampler) anchor() (omega float64, z, y complex128) {
	i := s.random.IntN(len(s.freq))
	return 2 * math.Pi * s.freq[i], s.measured[i], s.prepare().inverse[i]
}

// draw fills values (in the order of the circuit's parameters) at random.
func (s *sampler) draw(values []float64) {
	for _, n := range s.leaves {
		p := n.Parameters[0]
		omega, z, y := s.anchor()
		switch n.Element {
		case models.Resistor:
			values[p] = [...]float64{abs(z), math.Abs(real(z)), 1 / math.Abs(real(y))}[s.random.IntN(3)]
		case models.Inductor:
			values[p] = [...]float64{abs(z), math.Abs(imag(z)), 1 / math.Abs(imag(y))}[s.random.IntN(3)] / omega
		case models.Capacitor:
			values[p] = [...]float64{abs(y), math.Abs(imag(y)), 1 / math.Abs(imag(z))}[s.random.IntN(3)] / omega
		case models.Skin:
			values[p] = [...]float64{abs(z), math.Sqrt2 * math.Abs(real(z))}[s.random.IntN(2)] / math.Sqrt(omega)
		case models.LossCapacitor:
			values[p] = abs(y) / omega
			tand := real(z) / math.Abs(imag(z))
			if !(tand > 1e-5 && tand < 1) {
				tand = math.Pow(10, -4+3.5*s.random.Float64())
			}
			values[n.Parameters[1]] = tand
		case models.ConstantPhase:
			exponent := 0.3 + 0.65*s.random.Float64()
			values[p] = abs(y) / math.Pow(omega, exponent)
			values[n.Parameters[1]] = exponent
		case models.RCLine:
			values[p] = 3 * math.Abs(real(z)) * s.spread(0.5)
			values[n.Parameters[1]] = abs(y) / omega
		}
		values[p] *= s.spread(0.5)
	}
	for i, l := range s.inductors {
		if len(s.capacitors) == 0 || s.random.IntN(2) == 0 {
			continue
		}
		partner := s.capacitors[s.random.IntN(len(s.capacitors))]
		omega := 0.0
		if sibling := s.siblings[i]; sibling >= 0 && s.random.IntN(2) == 0 {
			// the two of a section resonate somewhere in the sweep
			partner = sibling
			omega, _, _ = s.anchor()
		} else if len(s.resonances) > 0 {
			omega = 2 * math.Pi * s.resonances[s.random.IntN(len(s.resonances))]
		} else {
			continue
		}
		values[l] = s.spread(0.1) / (omega * omega * values[partner])
	}
}

// box returns the range that the unknown of each free parameter is kept in:
// seven decades beyond what could show in the sweep, where an element has
// vanished for any purpose and the arithmetic is still at ease.
func (p *problem) box() (lower, upper []float64) {
	const beyond = 1e7
	low, high := p.low/beyond, p.high*beyond
	first, last := 2*math.Pi*p.freq[0], 2*math.Pi*p.freq[len(p.freq)-1]
	n := len(p.free)
	both := make([]float64, 2*n)
	lower, upper = both[:n:n], both[n:]
	for k, i := range p.free {
		var a, b float64
		switch p.parameters[i].Unit {
		case "Ω":
			a, b = low, high
		case "H":
			a, b = low/last, high/first
		case "F":
			a, b = 1/(high*last), 1/(low*first)
		case "Ω·s^½":
			a, b = low/math.Sqrt(last), high/math.Sqrt(first)
		case "1":
			if p.parameters[i].Scale == models.LogitScale {
				a, b = 1e-6, 1-1e-6
			} else {
				a, b = 1e-9, 1e3
			}
		default: // the coefficient of a constant-phase element, 0 < n < 1
			a, b = 1/(high*max(last, 1)), 1/(low*min(first, 1))
		}
		lower[k] = p.parameters[i].Scale.Unknown(max(a, models.MinValue))
		upper[k] = p.parameters[i].Scale.Unknown(min(b, models.MaxValue))
	}
	return lower, upper
}

// clamp moves x into the box.
func clamp(x, lower, upper []float64) {
	for k := range x {
		x[k] = min(max(x[k], lower[k]), upper[k])
	}
}

// candidate is a minimum that the search has found on the thinned sweep.
type candidate struct {
	x         []float64
	cost      float64
	converged bool // and not along a flat valley
}

// keep adds a minimum unless it is there already, best first, at most n.
func keep(best []candidate, c candidate, n int) []candidate {
	at, _ := slices.BinarySearchFunc(best, c, func(a, b candidate) int {
		switch {
		case a.cost < b.cost:
			return -1
		case a.cost > b.cost:
			return 1
		}
		return 0
	})
	for _, b := range best {
		if same(b.x, c.x, 1e-3) && math.Abs(b.cost-c.cost) <= 1e-3*(b.cost+c.cost) {
			return best
		}
	}
	best = slices.Insert(best, at, c)
	return best[:min(n, len(best))]
}

// same reports whether two sets of unknowns agree to a relative difference
// tol of the values.
func same(a, b []float64, tol float64) bool {
	for k := range a {
		if !(math.Abs(a[k]-b[k]) <= tol) {
			return false
		}
	}
	return true
}
