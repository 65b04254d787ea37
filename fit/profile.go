package fit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"realpart/fit/lm"
	"realpart/models"
)

// profiler finds the smallest cost that a fit can reach with one unknown held.
// Where the meter's accuracy was stated, its common errors of magnitude and
// of phase, in units of the stated accuracy, are two more unknowns, each held
// near zero by one more residual: a rectangular distribution of half-width 1
// counts as a standard uncertainty of 1/√3 (GUM 4.3.7).
type profiler struct {
	result       *Result
	lm           lm.Problem
	x            []float64 // at the smallest cost
	cost         float64
	lower, upper []float64
	sigma        float64
	settings     lm.Settings
	// reached holds the unknowns at the limits that were found.
	reached [][]float64
	// vague holds the columns of the parameters that are not determined:
	// those that may have another minimum where an element has vanished.
	vague []int
}

func (r *Result) newProfiler() (*profiler, error) {
	p := r.problem
	q := &profiler{result: r, lm: p.lm(), x: slices.Clone(r.x), cost: r.Cost, sigma: r.Sigma}
	q.lower, q.upper = p.bounds(p.settings)
	for c, i := range r.Free {
		if !r.Parameters[i].Determined {
			q.vague = append(q.vague, c)
		}
	}
	if r.Weight == Relative {
		q.sigma = max(q.sigma, roundingFloor)
	}
	q.sigma = max(q.sigma, math.SmallestNonzeroFloat64)
	if p.magnitude != nil {
		n := len(r.x)
		q.lm = p.withMeter(q.sigma)
		q.x = append(q.x, 0, 0)
		const far = 30
		q.lower = append(q.lower, -far, -far)
		q.upper = append(q.upper, far, far)
		q.settings = p.precise(slices.Clone(q.lower), slices.Clone(q.upper))
		clamp(q.x, q.lower, q.upper)
		s, err := lm.Solve(q.lm, q.x, &q.settings)
		if err != nil {
			return nil, err
		}
		q.x, q.cost = s.X[:n+2], s.Cost
	} else {
		q.settings = p.precise(slices.Clone(q.lower), slices.Clone(q.upper))
	}
	// An element that is not seen can still fit some of the noise. Values are
	// then judged against the circuit without it, which is no worse by the F
	// test, not against that lucky minimum.
	spare := 0.0
	for _, c := range q.vague {
		if p, cost, ok := r.withoutElement(r.Free[c]); ok && !(p < significance) {
			spare = max(spare, cost-r.Cost)
		}
	}
	q.cost += spare
	return q, nil
}

// withMeter returns the problem with the meter's two errors as unknowns.
func (p *problem) withMeter(sigma float64) lm.Problem {
	n, rows := len(p.free), 2*len(p.freq)
	prior := math.Sqrt(3) * sigma
	part := mat.NewDense(rows, n, nil)
	return lm.Problem{
		Size: rows + 2,
		Residual: func(dst, x []float64) {
			p.residual(dst[:rows], x[:n])
			for i := range p.freq {
				a, b := p.shift(i, complex(x[n]*p.magnitude[i], x[n+1]*p.phase[i]))
				dst[2*i] -= a
				dst[2*i+1] -= b
			}
			dst[rows], dst[rows+1] = prior*x[n], prior*x[n+1]
		},
		Jacobian: func(dst *mat.Dense, x []float64) {
			p.jacobian(part, x[:n])
			dst.Zero()
			dst.Slice(0, rows, 0, n).(*mat.Dense).Copy(part)
			for i := range p.freq {
				am, bm := p.shift(i, complex(p.magnitude[i], 0))
				ap, bp := p.shift(i, complex(0, p.phase[i]))
				dst.Set(2*i, n, -am)
				dst.Set(2*i+1, n, -bm)
				dst.Set(2*i, n+1, -ap)
				dst.Set(2*i+1, n+1, -bp)
			}
			dst.Set(rows, n, prior)
			dst.Set(rows+1, n+1, prior)
		},
	}
}

// profileSteps bounds the steps of one solve of a profile.
const profileSteps = 30

// limit returns the unknown of a free parameter, below or above its fitted
// value, at which the smallest cost that the other unknowns can reach has
// risen by
//
//	2·(cost(x) − cost)/s² = t²
//
// (profile likelihood; Bates and Watts 1988, Nonlinear Regression Analysis,
// 6.1.2). open is true where it never rises so far: the sweep sets no bound
// on that side.
func (q *profiler) limit(column int, direction, t float64) (x float64, open bool, err error) {
	r, sigma, settings := q.result, q.sigma, q.settings
	// χ² to 0.001 is enough for an interval.
	settings.GradientTolerance, settings.StepTolerance, settings.CostTolerance = 1e-4, 1e-6, 1e-6
	settings.MaxIterations = profileSteps
	copy(settings.Lower, q.lower)
	copy(settings.Upper, q.upper)
	end := q.lower[column]
	if direction > 0 {
		end = q.upper[column]
	}
	// rise returns √(2Δcost)/s at x: it grows about linearly.
	rise := func(at float64, from []float64) (float64, []float64, error) {
		settings.Lower[column], settings.Upper[column] = at, at
		start := slices.Clone(from)
		start[column] = at
		clamp(start, settings.Lower, settings.Upper)
		s, err := lm.Solve(q.lm, start, &settings)
		if err != nil {
			return 0, nil, err
		}
		return math.Sqrt(max(2*(s.Cost-q.cost), 0)) / sigma, s.X, nil
	}
	// Before a value is taken to be outside, the minima are tried in which
	// another parameter that is not determined has gone to an end of its
	// range.
	surely := func(at float64, from []float64) (float64, []float64, error) {
		high, next, err := rise(at, from)
		for _, c := range q.vague {
			for _, end := range []float64{q.lower[c], q.upper[c]} {
				if c == column || err != nil || high < t {
					continue
				}
				other := slices.Clone(from)
				other[c] = end
				if v, x, e := rise(at, other); e == nil && v < high {
					high, next = v, x
				}
			}
		}
		return high, next, err
	}
	step := 0.5
	if v := math.Sqrt(r.Covariance.At(column, column)); v > 0 && t*v < 2 {
		step = t * v
	}
	inside, outside := q.x[column], q.x[column]
	insideRise, outsideRise := 0.0, 0.0
	state := slices.Clone(q.x)
	for {
		outside += direction * step
		if direction*(outside-end) >= 0 {
			outside = end
		}
		high, next, err := surely(outside, state)
		if err != nil {
			return 0, false, err
		}
		if high >= t {
			outsideRise = high
			break
		}
		if outside == end {
			q.reached = append(q.reached, next[:r.Covariance.SymmetricDim()])
			return end, true, nil
		}
		inside, insideRise, state = outside, high, next
		step *= 1.6
	}
	for range 60 {
		if math.Abs(outside-inside) <= 1e-4*math.Max(math.Abs(outside-q.x[column]), 1e-9) || outsideRise-insideRise <= 1e-6*t {
			break
		}
		share := (t - insideRise) / (outsideRise - insideRise)
		share = min(max(share, 0.05), 0.95)
		mid := inside + share*(outside-inside)
		v, next, err := rise(mid, state)
		if err != nil {
			return 0, false, err
		}
		if v >= t {
			outside, outsideRise = mid, v
		} else {
			inside, insideRise, state = mid, v, next
		}
	}
	share := 0.5
	if outsideRise > insideRise {
		share = (t - insideRise) / (outsideRise - insideRise)
	}
	x = inside + share*(outside-inside)
	at := slices.Clone(state[:r.Covariance.SymmetricDim()])
	at[column] = x
	q.reached = append(q.reached, at)
	return x, false, nil
}

// bound replaces the intervals of parameters that are not determined by
// profile limits: the two-sided 95 % interval where both sides are closed, a
// one-sided 95 % limit where one is open. The linear intervals of the other
// parameters hold the vanished elements for absent; they are profiled too, and
// if one turns out too wide its parameter is not determined either.
func (r *Result) bound() error {
	if !slices.ContainsFunc(r.Free, func(i int) bool { return !r.Parameters[i].Determined }) {
		return nil
	}
	if err := r.profileIntervals(func(*Parameter) bool { return true }); err != nil {
		return err
	}
	for _, i := range r.Free {
		q := &r.Parameters[i]
		if !q.Determined {
			continue
		}
		wide := !(q.High95/q.Low95 <= determinedFactor)
		if q.Scale == models.LogitScale {
			wide = !(q.High95-q.Low95 <= determinedExponent)
		}
		if wide {
			q.Determined = false
			q.Why = "other values do as well once other elements may vanish"
		}
	}
	return nil
}

// ProfileIntervals replaces the intervals of all free parameters by those of
// the profile likelihood, which may be lopsided. They cover the scatter and,
// where an accuracy was stated, the meter.
func (r *Result) ProfileIntervals() error {
	return r.profileIntervals(func(p *Parameter) bool { return p.Determined })
}

func (r *Result) profileIntervals(wanted func(*Parameter) bool) error {
	nu := float64(r.DegreesOfFreedom)
	if nu < 1 {
		return nil
	}
	var q *profiler
	for c, i := range r.Free {
		if !wanted(&r.Parameters[i]) {
			continue
		}
		if q == nil {
			var err error
			if q, err = r.newProfiler(); err != nil {
				return err
			}
		}
		if err := q.interval(c, &r.Parameters[i], nu); err != nil {
			return err
		}
	}
	if q != nil {
		if err := q.allVanished(nu); err != nil {
			return err
		}
		r.extremes = append(r.extremes, q.reached...)
	}
	r.problem.set(r.x)
	return nil
}

// allVanished adds the circuit in which every parameter with an open side has
// gone to its end there, if the sweep allows it: together their cost may rise
// by t² for each. A figure in which several of them share can be as small, or
// as large, as there.
func (q *profiler) allVanished(nu float64) error {
	r, settings := q.result, q.settings
	copy(settings.Lower, q.lower)
	copy(settings.Upper, q.upper)
	start := slices.Clone(q.x)
	count := 0
	for _, c := range q.vague {
		p := r.Parameters[r.Free[c]]
		switch {
		case math.IsNaN(p.Low95):
			settings.Upper[c] = q.lower[c]
		case math.IsNaN(p.High95):
			settings.Lower[c] = q.upper[c]
		default:
			continue
		}
		count++
	}
	if count < 2 {
		return nil // the profile has been there
	}
	clamp(start, settings.Lower, settings.Upper)
	s, err := lm.Solve(q.lm, start, &settings)
	if err != nil {
		return err
	}
	t := q.sigma * studentQuantile(0.975, nu)
	if 2*(s.Cost-q.cost) <= t*t*float64(count) {
		q.reached = append(q.reached, s.X[:r.Covariance.SymmetricDim()])
	}
	return nil
}

func (q *profiler) interval(column int, p *Parameter, nu float64) error {
	two, one := studentQuantile(0.975, nu), studentQuantile(0.95, nu)
	low, lowOpen, err := q.limit(column, -1, two)
	if err != nil {
		return err
	}
	high, highOpen, err := q.limit(column, 1, two)
	if err != nil {
		return err
	}
	if lowOpen != highOpen {
		if lowOpen {
			high, highOpen, err = q.limit(column, 1, one)
		} else {
			low, lowOpen, err = q.limit(column, -1, one)
		}
		if err != nil {
			return err
		}
	}
	p.Low95, p.High95 = math.NaN(), math.NaN()
	if !lowOpen {
		p.Low95 = p.Scale.Value(low)
	}
	if !highOpen {
		p.High95 = p.Scale.Value(high)
	}
	return nil
}
