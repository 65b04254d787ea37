package fit

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"realpart/models"
)

// significance of the F test for the circuit without an element.
const significance = 0.01

// clearlySeen is the standard uncertainty of ln p below which an element is
// seen so clearly that the circuit need not be fitted without it: it is ten
// standard uncertainties away from vanishing.
const clearlySeen = 0.1

// testElements fits the circuit again without each element whose parameter
// is not clearly seen. An element without which the circuit is not worse by
// an F test at 1 % is not determined.
func (r *Result) testElements() {
	if r.tested || !r.Status.Converged() {
		return
	}
	r.tested = true
	for c, i := range r.Free {
		q := &r.Parameters[i]
		if !q.Determined || q.Scale != models.LogScale || math.Sqrt(r.Covariance.At(c, c)) < clearlySeen {
			continue
		}
		if p, _, ok := r.withoutElement(i); ok && !(p < significance) {
			q.Determined = false
			q.Why = fmt.Sprintf("the circuit without it fits as well (F test, p = %.2g)", p)
		}
	}
}

// withoutElement returns the probability, by the F test of nested models,
// that the circuit without the element of parameter i would be worse by
// chance as much as it is, and the cost that it reaches.
//
//	F = ((S₀ − S)/(k − k₀))/(S/ν)
func (r *Result) withoutElement(i int) (probability, cost float64, ok bool) {
	if r.DegreesOfFreedom < 1 {
		return 0, 0, false
	}
	reduced, kept := r.Circuit.Without(i)
	if reduced == nil {
		return 0, 0, false
	}
	s := r.problem.settings
	rest := *s
	rest.Fixed, rest.Start, rest.Bounds = map[string]float64{}, nil, map[string]Interval{}
	for _, k := range kept {
		name := r.Parameters[k].Name
		if v, ok := s.Fixed[name]; ok {
			rest.Fixed[name] = v
		}
		if b, ok := s.Bounds[name]; ok {
			rest.Bounds[name] = b
		}
	}
	p := newProblem(reduced, r.problem.points, r.problem.weight, &rest)
	p.scale = r.problem.scale
	for k, from := range kept {
		p.values[k] = r.Parameters[from].Value
	}
	lost := len(r.Free) - len(p.free)
	if lost < 1 {
		return 0, 0, false
	}
	if len(p.free) > 0 {
		lower, upper := p.bounds(&rest)
		x := p.unknowns()
		clamp(x, lower, upper)
		settings := p.precise(lower, upper)
		solution, err := p.minimise(x, &settings)
		if err != nil {
			return 0, 0, false
		}
		cost = solution.Cost
		// Parameters that the reduced circuit cannot tell apart, such as two
		// capacitances that are now in series, count as one.
		all := make([]int, len(p.free))
		for c := range all {
			all[c] = c
		}
		if normalCovariance(solution.Normal, len(all), all) == nil {
			_, all, _ = regularCovariance(p.jacobianAt(solution.X), all, 1)
		}
		lost = len(r.Free) - len(all)
	} else {
		residuals := make([]float64, 2*len(p.freq))
		p.residual(residuals, nil)
		for _, v := range residuals {
			cost += v * v / 2
		}
	}
	nu := float64(r.DegreesOfFreedom)
	f := (cost - r.Cost) / float64(lost) / (max(r.Cost, 1e-300) / nu)
	return distuv.F{D1: float64(lost), D2: nu}.Survival(max(f, 0)), cost, true
}
