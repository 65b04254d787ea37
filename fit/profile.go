package fit

import (
	"math"
	"slices"

	"realpart/fit/lm"
	"realpart/models"
)

// profile returns the unknown of a free parameter, below or above its fitted
// value, at which the smallest cost that the other parameters can reach has
// risen by
//
//	2·(cost(x) − cost)/s² = t²
//
// (profile likelihood; Bates and Watts 1988, Nonlinear Regression Analysis,
// 6.1.2). open is true where it never rises so far: the sweep sets no bound
// on that side.
func (r *Result) profile(column int, direction, t float64) (x float64, open bool, err error) {
	p := r.problem
	lower, upper := p.bounds(p.settings)
	end := lower[column]
	if direction > 0 {
		end = upper[column]
	}
	sigma := max(r.Sigma, math.SmallestNonzeroFloat64)
	if r.Weight == Relative {
		sigma = max(sigma, roundingFloor)
	}
	settings := solver(slices.Clone(lower), slices.Clone(upper))
	// rise returns √(2Δcost)/s at x: it grows about linearly.
	rise := func(at float64, from []float64) (float64, []float64, error) {
		settings.Lower[column], settings.Upper[column] = at, at
		start := slices.Clone(from)
		start[column] = at
		clamp(start, settings.Lower, settings.Upper)
		s, err := lm.Solve(p.lm(), start, &settings)
		if err != nil {
			return 0, nil, err
		}
		return math.Sqrt(max(2*(s.Cost-r.Cost), 0)) / sigma, s.X, nil
	}
	step := 0.5
	if v := math.Sqrt(r.Covariance.At(column, column)); v > 0 && t*v < 2 {
		step = t * v
	}
	inside, outside := r.x[column], r.x[column]
	insideRise, outsideRise := 0.0, 0.0
	state := slices.Clone(r.x)
	for {
		outside += direction * step
		if direction*(outside-end) >= 0 {
			outside = end
		}
		high, next, err := rise(outside, state)
		if err != nil {
			return 0, false, err
		}
		if high >= t {
			outsideRise = high
			break
		}
		if outside == end {
			return end, true, nil
		}
		inside, insideRise, state = outside, high, next
		step *= 1.6
	}
	for range 60 {
		if math.Abs(outside-inside) <= 1e-4*math.Max(math.Abs(outside-r.x[column]), 1e-9) || outsideRise-insideRise <= 1e-6*t {
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
	return inside + share*(outside-inside), false, nil
}

// bound replaces the intervals of parameters that are not determined by
// profile limits: the two-sided 95 % interval where both sides are closed, a
// one-sided 95 % limit where one is open.
func (r *Result) bound() error {
	for c, i := range r.Free {
		if !r.Parameters[i].Determined {
			if err := r.profileInterval(c, i); err != nil {
				return err
			}
		}
	}
	return nil
}

// ProfileIntervals replaces the intervals of all free parameters by those of
// the profile likelihood, which may be lopsided. They cover the scatter and
// are widened in ln p (n itself for an exponent) by the meter's part.
func (r *Result) ProfileIntervals() error {
	for c, i := range r.Free {
		if r.Parameters[i].Determined {
			if err := r.profileInterval(c, i); err != nil {
				return err
			}
		}
	}
	return nil
}

func (r *Result) profileInterval(c, i int) error {
	q := &r.Parameters[i]
	nu := float64(r.DegreesOfFreedom)
	if nu < 1 {
		return nil
	}
	two, one := studentQuantile(0.975, nu), studentQuantile(0.95, nu)
	low, lowOpen, err := r.profile(c, -1, two)
	if err != nil {
		return err
	}
	high, highOpen, err := r.profile(c, 1, two)
	if err != nil {
		return err
	}
	if lowOpen != highOpen {
		if lowOpen {
			high, highOpen, err = r.profile(c, 1, one)
		} else {
			low, lowOpen, err = r.profile(c, -1, one)
		}
		if err != nil {
			return err
		}
	}
	// The meter's part widens each side as a root sum of squares.
	meter := 0.0
	if r.MeterCovariance != nil {
		meter = r.MeterCovariance.At(c, c)
	}
	widen := func(side float64) float64 {
		d := side - r.x[c]
		return r.x[c] + math.Copysign(math.Sqrt(d*d+two*two*meter), d)
	}
	q.Low95, q.High95 = math.NaN(), math.NaN()
	if !lowOpen {
		q.Low95 = q.Scale.Value(widen(low))
	}
	if !highOpen {
		q.High95 = q.Scale.Value(widen(high))
	}
	if q.Scale == models.LogitScale && q.Determined {
		q.Determined = q.High95-q.Low95 <= determinedExponent
	}
	return nil
}
