package fit

import "realpart/fit/lm"

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

// each fits several circuits to one sweep, each on its own. A nil problem has a
// nil outcome.
func each(problems []*problem) ([]*outcome, error) {
	outcomes := make([]*outcome, len(problems))
	for i, p := range problems {
		if p == nil {
			continue
		}
		solution, err := p.solve()
		if err == nil {
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
	finish := func(i int, solution *lm.Result, err error) error {
		if err == nil {
			outcomes[i], err = problems[i].outcome(solution)
		}
		return err
	}
	described := false
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
		if described {
			r.solver.MaxIterations = briefSteps
		}
		r.from(leader(runners[:i]))
		runners[i] = r
		if len(r.best) == 0 {
			r.first()
		}
		if !r.search.atNoise() {
			continue
		}
		solution, err := r.polish(described)
		if err != nil {
			return nil, err
		}
		if r.atNoise = p.describes(solution.Cost, len(p.freq)); !r.atNoise {
			continue
		}
		if !described && !solution.Status.Converged() {
			solution, err = p.solveFrom(r.search)
		}
		if err := finish(i, solution, err); err != nil {
			return nil, err
		}
		described = described || outcomes[i].sound
	}
	for i, r := range runners {
		if r == nil || outcomes[i] != nil {
			continue
		}
		var solution *lm.Result
		var err error
		if described {
			r.within(runners[i+1:])
			solution, err = r.polish(true)
		}
		if solution == nil {
			solution, err = problems[i].solveFrom(r.search)
		}
		if err := finish(i, solution, err); err != nil {
			return nil, err
		}
	}
	return outcomes, nil
}

// briefSteps bounds the steps of a solve in a race that has a winner.
const briefSteps = 10

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

// from makes a first attempt from the best minimum of a simpler circuit, if
// all of that circuit's parameters are among this one's. Where that describes
// the sweep to its noise, the elements that this circuit has besides can only
// be small, and are drawn so.
func (r *runner) from(simpler *runner) {
	if simpler == nil || len(simpler.best) == 0 || len(simpler.whole.parameters) >= len(r.whole.parameters) {
		return
	}
	at := make([]int, len(simpler.whole.parameters)) // in this circuit
	added := make([]bool, len(r.whole.parameters))
	for i := range added {
		added[i] = true
	}
	for i, p := range simpler.whole.parameters {
		k, ok := r.whole.circuit.Index(p.Name)
		if !ok {
			return
		}
		at[i], added[k] = k, false
	}
	simpler.whole.set(simpler.best[0].x)
	const draws = 8
	r.solve(r.nearest(draws, 1, func(values []float64) {
		r.sampler.draw(r.whole.circuit, values)
		for i, k := range at {
			values[k] = simpler.whole.values[i]
		}
		if simpler.atNoise {
			weaken(r.whole.circuit.Root(), added, values)
		}
	})[0].x)
}

// first makes a first attempt from the nearest of a few draws.
func (r *runner) first() {
	draws := min(8*len(r.whole.free), drawsPerRound)
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
// in brief, with few steps, and where the thinned sweep is not described, for
// the cost to three digits alone. It returns nil if there is no minimum.
func (r *runner) polish(brief bool) (*lm.Result, error) {
	if len(r.best) == 0 {
		return nil, nil
	}
	p := r.whole
	settings := p.solver(r.search.solver.Lower, r.search.solver.Upper)
	switch {
	case !brief:
	case !r.best[0].converged:
		settings.MaxIterations = 2 // it will not converge here either
	case !r.search.atNoise():
		settings.MaxIterations = briefSteps
		settings.GradientTolerance, settings.CostTolerance, settings.SlowTolerance = 3e-2, 1e-3, 1e-3
	default:
		settings.MaxIterations = briefSteps
	}
	return p.minimise(r.best[0].x, &settings)
}
