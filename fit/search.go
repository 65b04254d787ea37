package fit

import (
	"math"

	"realpart/fit/lm"
	"realpart/models"
)

// search is a search for starting values on a thinned sweep with the relative
// residual, whose basin is the widest. In each round many sets of values are
// drawn, the user's own kept, and the few that come nearest to the sweep are
// improved by the solver: few good starts beat many blind ones.
type search struct {
	whole, thinned *problem
	settings       *Settings
	sampler        *sampler
	solver         lm.Settings
	round          int
	repeats        int
	best           []candidate
	failure        error
}

const (
	kept           = 4 // minima that are remembered
	drawsPerRound  = 24
	solvesPerRound = 3
)

func (p *problem) newSearch() *search {
	s := p.settings
	lower, upper := p.bounds(s)
	f := p.features(s.Robust)
	q := &search{
		whole: p, thinned: newProblem(p.circuit, f.points, Relative, s), settings: s, sampler: newSampler(f, p.circuit, s.Seed),
		solver: p.searcher(lower, upper),
	}
	if s.Robust {
		q.thinned.scale = searchScale
	}
	return q
}

// all searches thoroughly: for a number of rounds that grows with the unknowns,
// or until the same minimum has come back so often that there is hardly a
// lower one.
func (q *search) all(noiseIsEnough bool) {
	unknowns := len(q.whole.free)
	q.run(noiseIsEnough, 2+unknowns*unknowns/2, 2*solvesPerRound)
}

// run goes on until so many rounds are over, or the same minimum has come back
// so often, or, if noiseIsEnough, the sweep is described to its noise.
func (q *search) run(noiseIsEnough bool, rounds, repeats int) {
	for ; q.round < rounds; q.round++ {
		if len(q.best) > 0 && (noiseIsEnough && q.atNoise() || q.repeats >= repeats) {
			return
		}
		starts := q.starts()
		if 2*len(q.thinned.freq) < len(starts[0].x) {
			q.best = starts[:1] // too few points for the solver
			return
		}
		for _, start := range starts {
			q.solve(start.x)
			if noiseIsEnough && q.atNoise() || q.repeats >= repeats {
				return
			}
		}
	}
}

// atNoise reports whether the best minimum describes the thinned sweep to its
// noise.
func (q *search) atNoise() bool {
	return len(q.best) > 0 && q.whole.describes(q.best[0].cost, len(q.thinned.freq))
}

// solve goes to the minimum from a start.
func (q *search) solve(x []float64) {
	r, err := q.thinned.minimise(x, &q.solver)
	if err != nil {
		q.failure = err
		return
	}
	if len(q.best) > 0 && math.Abs(r.Cost-q.best[0].cost) <= 1e-3*q.best[0].cost {
		q.repeats++
	} else if len(q.best) == 0 || r.Cost < q.best[0].cost {
		q.repeats = 0
	}
	q.best = keep(q.best, candidate{x: r.X, cost: r.Cost, converged: r.Status.Converged() && r.Status != lm.SlowConvergence}, kept)
}

// starts returns the starts of a round.
func (q *search) starts() []candidate {
	draws := drawsPerRound
	if q.round == 0 { // mostly the last
		draws = min(draws, 4*len(q.whole.free))
	}
	if q.whole.given() != nil {
		draws = 1
	}
	return q.nearest(draws, solvesPerRound, q.draw)
}

// draw fills values at random, the user's own kept.
func (q *search) draw(values []float64) {
	q.sampler.draw(values)
	for _, i := range q.whole.free {
		if given, ok := q.settings.Start[q.whole.parameters[i].Name]; ok {
			values[i] = given
		}
	}
}

// nearest returns up to n of the sets of unknowns that draw fills in, with
// their distance from the sweep as cost: the nearest, and the first ones.
func (q *search) nearest(draws, n int, draw func(values []float64)) []candidate {
	p := q.whole
	values := make([]float64, len(p.values))
	b := q.thinned.block()
	defer q.thinned.put(b)
	var starts []candidate
	x := make([]float64, len(p.free))
	for range draws {
		draw(values)
		for k, i := range p.free {
			x[k] = p.parameters[i].Scale.Unknown(values[i])
			if math.IsNaN(x[k]) {
				x[k] = (q.solver.Lower[k] + q.solver.Upper[k]) / 2
			}
		}
		clamp(x, q.solver.Lower, q.solver.Upper)
		cost := q.thinned.distance(b, x)
		if !(cost < math.Inf(1)) {
			continue
		}
		switch {
		case len(starts) < n:
			starts = append(starts, candidate{x: append([]float64(nil), x...), cost: cost})
			if last := len(starts) - 1; cost < starts[0].cost {
				starts[0], starts[last] = starts[last], starts[0]
			}
		case cost < starts[0].cost:
			copy(starts[0].x, x)
			starts[0].cost = cost
		}
	}
	if len(starts) == 0 {
		for k := range x {
			x[k] = (q.solver.Lower[k] + q.solver.Upper[k]) / 2
		}
		starts = []candidate{{x: x, cost: math.Inf(1)}}
	}
	return starts
}

// distance says how far the circuit is from the sweep, for telling a good start
// from a bad one: with q = z/measured it sums over the points
//
//	d/(1 + d/4),  d = |q − 1|²/|q| = 2·(cosh ln|q| − cos arg q),
//
// which is |ln q|² near q = 1 and at most 4 for a point that is far off.
func (p *problem) distance(b *block, x []float64) float64 {
	p.set(x)
	sum := 0.0
	for from := 0; from < len(p.freq); from += models.BlockSize {
		to := min(from+models.BlockSize, len(p.freq))
		z, inverse := b.z[:to-from], p.work.inverse[from:to]
		b.evaluator.Block(from, to, p.values, z, nil)
		for i, v := range z {
			q := v * inverse[i]
			re, im := real(q), imag(q)
			d := (re-1)*(re-1) + im*im
			sum += d / (math.Sqrt(re*re+im*im) + d/4)
		}
	}
	return sum
}

// weaken makes the branches of a circuit all of whose parameters were added
// show less in its impedance by a factor: those in series have less impedance,
// those in parallel less admittance. It reports whether the node itself is such a
// branch.
func weaken(n *models.Node, added []bool, values []float64, factor float64) bool {
	if n.Kind == models.Leaf {
		all := true
		for _, p := range n.Parameters {
			all = all && added[p]
		}
		if !all && len(n.Parameters) > 1 && added[n.Parameters[1]] {
			values[n.Parameters[1]] /= factor // the loss tangent of a capacitor
		} else if !all && added[n.Parameters[0]] {
			values[n.Parameters[0]] /= factor // the resistance of a line
		}
		return all
	}
	all := true
	var branches []*models.Node
	for _, child := range n.Children {
		if weaken(child, added, values, factor) {
			branches = append(branches, child)
		} else {
			all = false
		}
	}
	if !all {
		if n.Kind == models.Series {
			factor = 1 / factor
		}
		for _, child := range branches {
			scaleImpedance(child, factor, values)
		}
	}
	return all
}

// scaleImpedance multiplies the impedance of a branch by a factor at every
// frequency.
func scaleImpedance(n *models.Node, factor float64, values []float64) {
	for _, child := range n.Children {
		scaleImpedance(child, factor, values)
	}
	if n.Kind != models.Leaf {
		return
	}
	switch p := n.Parameters[0]; n.Element {
	case models.Capacitor, models.LossCapacitor, models.ConstantPhase:
		values[p] /= factor
	case models.RCLine:
		values[p] *= factor
		values[n.Parameters[1]] /= factor
	default:
		values[p] *= factor
	}
}
