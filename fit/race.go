package fit

import (
	"fmt"
	"slices"

	"realpart/fit/lm"
)

// outcome is a circuit's fit to a sweep.
type outcome struct {
	result *Result
	// reason says why not every parameter is determined; sound tells that
	// all are, and that the fit converged.
	reason string
	sound  bool
}

func (p *problem) outcome(solution *lm.Result) (*outcome, error) {
	r, err := p.complete(solution)
	if err != nil {
		return nil, err
	}
	o := &outcome{result: r}
	o.reason, o.sound = r.soundness()
	return o, nil
}

// each fits several circuits to one sweep, each on its own. A nil problem, and
// one without a solution, has a nil outcome.
func each(problems []*problem) ([]*outcome, error) {
	return oneByOne(problems, (*problem).solve)
}

// glance is each with little effort: to see whether a circuit describes the
// sweep much better than what there is.
func glance(problems []*problem) ([]*outcome, error) {
	return oneByOne(problems, func(p *problem) (*lm.Result, error) {
		const rounds, repeats = 2, 2
		q := p.newSearch()
		q.run(true, rounds, repeats)
		if len(q.best) == 0 {
			return nil, nil
		}
		return p.polish(q.best[0].x, q.solver.Lower, q.solver.Upper, p.settings.Robust)
	})
}

func oneByOne(problems []*problem, solve func(p *problem) (*lm.Result, error)) ([]*outcome, error) {
	outcomes := make([]*outcome, len(problems))
	for i, p := range problems {
		if p == nil {
			continue
		}
		solution, err := solve(p)
		if err == nil && solution != nil {
			outcomes[i], err = p.outcome(solution)
		}
		if err != nil {
			return nil, err
		}
	}
	return outcomes, nil
}

// race fits several circuits to one sweep, from the simplest on, for a choice
// among them. Each starts from what a simpler one has found, too.
//
// As soon as one of them describes the sweep to its noise with every parameter
// determined, there is little to be gained by the others. Those that have more
// elements can lower the cost by a few residuals' worth, and do so within a few
// steps if what they add is determined. Those that don't describe the sweep are
// far behind: they are tried from the better one's values, and fitted to the
// first digits of their AICc alone. Where none describes it, all are searched
// as thoroughly as if they had been asked for.
//
// A nil problem has a nil outcome.
func race(problems []*problem) ([]*outcome, error) {
	runners := make([]*runner, len(problems))
	outcomes := make([]*outcome, len(problems))
	var winner *lm.Result // the first that describes the sweep, with every parameter determined
	var first *problem    // whose it is
	finish := func(i int, solution *lm.Result, err error) error {
		switch {
		case err != nil:
		case winner != nil && !solution.Status.Converged():
			r := evaluate(problems[i], problems[i].settings, solution.X, solution)
			r.Reason = solution.Reason()
			r.givenUp = solution
			outcomes[i] = &outcome{result: r, reason: fmt.Sprintf("not followed to its end, as %s describes the sweep to its noise", first.circuit)}
		default:
			outcomes[i], err = problems[i].outcome(solution)
		}
		return err
	}
	for i, p := range problems {
		switch {
		case p == nil:
			continue
		case len(p.free) == 0:
			solution, err := p.solve()
			if err := finish(i, solution, err); err != nil {
				return nil, err
			}
			continue
		}
		r := &runner{search: p.newSearch()}
		l := leader(runners[:i])
		if winner != nil {
			r.solver.MaxIterations = briefSteps
		}
		nested := r.from(l)
		runners[i] = r
		if !nested {
			r.first()
		}
		if !r.search.atNoise() {
			continue
		}
		solution, err := r.polish(winner)
		if err != nil {
			return nil, err
		}
		if r.atNoise = p.describes(solution.Cost, len(p.freq)); !r.atNoise {
			continue
		}
		if winner == nil && !solution.Status.Converged() {
			solution, err = p.solveFrom(r.search)
		}
		if err := finish(i, solution, err); err != nil {
			return nil, err
		}
		if winner == nil && outcomes[i].sound {
			winner, first = solution, p
		}
	}
	for i, r := range runners {
		if r == nil || outcomes[i] != nil {
			continue
		}
		var solution *lm.Result
		var err error
		if winner != nil {
			if len(r.whole.free) > 2 { // with so few the first attempt has found the one minimum
				r.within(runners[i+1:])
			}
			solution, err = r.polish(winner)
		}
		if solution == nil {
			r.repeats = 0 // the attempts from simpler circuits lead to the same minima
			solution, err = problems[i].solveFrom(r.search)
		}
		if err := finish(i, solution, err); err != nil {
			return nil, err
		}
	}
	for i, o := range outcomes {
		if o != nil && o.result.givenUp != nil {
			o.noWorseThan(outcomes[:i])
		}
	}
	return outcomes, nil
}

// noWorseThan gives a circuit that was given up the cost of one that it
// contains where that is lower: it could have reached it with what it has
// besides vanished. The choice of a lot adds such numbers up.
func (o *outcome) noWorseThan(simpler []*outcome) {
	r := o.result
	for _, other := range simpler {
		if other == nil || !(other.result.Cost < r.Cost) || slices.ContainsFunc(other.result.Parameters, func(p Parameter) bool {
			_, ok := r.Circuit.Index(p.Name)
			return !ok
		}) {
			continue
		}
		r.Cost, r.RMSRelative = other.result.Cost, other.result.RMSRelative
	}
}

// runner is a search that takes part in a race.
type runner struct {
	*search
	atNoise bool // the whole sweep is described to its noise
}

// leader returns the runner, of those of simpler circuits, to start from: the
// first that describes the sweep to its noise, else the last; nil if there are
// none.
func leader(simpler []*runner) *runner {
	var last *runner
	for _, r := range simpler {
		if r == nil {
			continue
		}
		if r.atNoise {
			return r
		}
		last = r
	}
	return last
}

// from makes an attempt from the best minimum of a simpler circuit: with its
// values of the parameters that this one has, too, and draws of the others.
// Where the simpler circuit describes the sweep to its noise, the elements that
// this circuit has besides can only be small: they are drawn somewhat small and
// come down from there, since from far below they hardly move. It reports
// whether all of the simpler one's parameters are among this one's.
func (r *runner) from(simpler *runner) bool {
	if simpler == nil || len(simpler.best) == 0 || len(simpler.whole.parameters) >= len(r.whole.parameters) && !simpler.atNoise {
		return false
	}
	added := make([]bool, len(r.whole.parameters))
	kept := make([]float64, len(r.whole.parameters))
	for i := range added {
		added[i] = true
	}
	simpler.whole.set(simpler.best[0].x)
	shared := 0
	for i, p := range simpler.whole.parameters {
		if k, ok := r.whole.circuit.Index(p.Name); ok {
			kept[k], added[k] = simpler.whole.values[i], false
			shared++
		}
	}
	all := shared == len(simpler.whole.parameters)
	if shared == 0 || !all && !simpler.atNoise {
		return false
	}
	const draws, weakness = 5, 3
	r.solve(r.nearest(draws, 1, func(values []float64) {
		r.sampler.draw(values)
		for k, v := range kept {
			if !added[k] {
				values[k] = v
			}
		}
		if simpler.atNoise {
			weaken(r.whole.circuit.Root(), added, values, weakness)
		}
	})[0].x)
	return all
}

// first makes a first attempt from the nearest of a few draws.
func (r *runner) first() {
	draws := min(6*len(r.whole.free), drawsPerRound)
	for _, start := range r.nearest(draws, 1, r.draw) {
		r.solve(start.x)
	}
}

// within makes an attempt from the minimum of the first circuit that describes
// the sweep to its noise and has all of this one's parameters.
func (r *runner) within(larger []*runner) {
	for _, l := range larger {
		if l == nil || !l.atNoise {
			continue
		}
		l.whole.set(l.best[0].x)
		x := make([]float64, len(r.whole.free))
		all := true
		for k, i := range r.whole.free {
			j, ok := l.whole.circuit.Index(r.whole.parameters[i].Name)
			if all = all && ok; all {
				x[k] = r.whole.parameters[i].Scale.Unknown(l.whole.values[j])
			}
		}
		if all {
			clamp(x, r.solver.Lower, r.solver.Upper)
			r.solve(x)
			return
		}
	}
}

// polish goes from the best minimum on the thinned sweep to that on the whole;
// nil if there is none. In a race that has a winner, a circuit that does not
// describe the thinned sweep is fitted for the first digits of its cost, and
// one that does goes a few steps, and on to its end only if that is in sight or
// worth it.
func (r *runner) polish(winner *lm.Result) (*lm.Result, error) {
	if len(r.best) == 0 {
		return nil, nil
	}
	p, best := r.whole, r.best[0]
	settings := p.precise(r.search.solver.Lower, r.search.solver.Upper)
	if winner == nil {
		return p.minimise(best.x, &settings)
	}
	brief := settings
	brief.MaxIterations = fewSteps
	if !r.search.atNoise() {
		brief.CostTolerance, brief.SlowTolerance = 1e-2, 1e-2
	} else if !best.converged {
		brief.MaxIterations = 2
	}
	solution, err := p.minimise(best.x, &brief)
	if err != nil || solution.Status.Converged() || !(solution.Cost < (1-2/float64(len(p.freq)))*winner.Cost) {
		return solution, err
	}
	return p.minimise(solution.X, &settings)
}

// In a race that has a winner, a solve on the thinned sweep is bounded by
// briefSteps, one on the whole sweep by fewSteps unless it lowers the cost below
// the winner's by so much that AICc falls by 4.
const (
	briefSteps = 12
	fewSteps   = 4
)
