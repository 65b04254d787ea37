package lots

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Difference is the difference of two means with its standard error, after
// Welch 1947: the two lots need not have the same spread.
//
//	Δ = x̄ − ȳ,  SE² = s_x²/n_x + s_y²/n_y,
//	ν = SE⁴/((s_x²/n_x)²/(n_x−1) + (s_y²/n_y)²/(n_y−1))
type Difference struct {
	Value    float64 // x̄ − ȳ
	StdError float64
	DF       float64 // ν
}

// Welch returns the difference of the mean of x from that of y. It is all NaN
// if either has fewer than 2 values.
func Welch(x, y []float64) Difference {
	if len(x) < 2 || len(y) < 2 {
		return Difference{math.NaN(), math.NaN(), math.NaN()}
	}
	x, y = slices.Sorted(slices.Values(x)), slices.Sorted(slices.Values(y))
	nx, ny := float64(len(x)), float64(len(y))
	a, b := stat.Variance(x, nil)/nx, stat.Variance(y, nil)/ny
	d := Difference{Value: mean(x) - mean(y), StdError: math.Sqrt(a + b)}
	d.DF = nx + ny - 2
	if d.StdError > 0 {
		// Relative to the sum, since the squares of small variances vanish.
		a, b := a/(a+b), b/(a+b)
		d.DF = 1 / (a*a/(nx-1) + b*b/(ny-1))
	}
	return d
}

// T is Δ/SE; NaN if there is no spread at all.
func (d Difference) T() float64 {
	if d.StdError == 0 {
		return math.NaN()
	}
	return d.Value / d.StdError
}

// P is the two-sided probability of a difference at least as large if the
// means are equal. Without any spread it is 1 for equal means, else 0.
func (d Difference) P() float64 {
	switch {
	case math.IsNaN(d.StdError):
		return math.NaN()
	case d.StdError == 0 && d.Value == 0:
		return 1
	case d.StdError == 0:
		return 0
	}
	return twoSided(d.T(), d.DF)
}

// twoSided is P(|T| ≥ |t|) of Student's t, exact also far out.
func twoSided(t, nu float64) float64 {
	return mathext.RegIncBeta(nu/2, 0.5, nu/(nu+t*t))
}

// Interval returns the interval of the difference with a confidence, such as
// 0.95.
func (d Difference) Interval(confidence float64) (low, high float64) {
	if d.StdError == 0 {
		return d.Value, d.Value
	}
	if !(d.DF > 0) {
		return math.NaN(), math.NaN()
	}
	h := distuv.StudentsT{Sigma: 1, Nu: d.DF}.Quantile(1-(1-confidence)/2) * d.StdError
	return d.Value - h, d.Value + h
}

// Equivalence returns the probability, by two one-sided t tests (Schuirmann
// 1987), of a difference so well inside ±margin if it is outside: lots are
// equivalent at 5 % if it is at most 0.05, that is if the 90 % interval of the
// difference lies inside. margin is in the unit of the difference.
func (d Difference) Equivalence(margin float64) float64 {
	switch {
	case math.IsNaN(d.StdError) || !(margin > 0):
		return math.NaN()
	case d.StdError == 0 && math.Abs(d.Value) < margin:
		return 0
	case d.StdError == 0:
		return 1
	}
	upper := (math.Abs(d.Value) - margin) / d.StdError // the nearer of the two ends decides
	p := twoSided(upper, d.DF) / 2
	if upper > 0 {
		return 1 - p
	}
	return p
}

// Detectable returns the difference of the means that a two-sided t test at
// level alpha shows with a given power, for the spread and the numbers that
// the lots have: the noncentral t distribution with δ = difference/SE.
func (d Difference) Detectable(alpha, power float64) float64 {
	if d.StdError == 0 {
		return 0
	}
	if !(d.DF > 0) {
		return math.NaN()
	}
	critical := distuv.StudentsT{Sigma: 1, Nu: d.DF}.Quantile(1 - alpha/2)
	t := newNoncentral(d.DF)
	return d.StdError * rising(0, critical+2, func(delta float64) float64 {
		return 1 - t.cdf(critical, delta) + t.cdf(-critical, delta) - power
	})
}

// Holm adjusts probabilities for their number, so that the chance of any
// false alarm among all stays at the level of one (Holm 1979):
//
//	p'_(i) = max over j ≤ i of min(1, (m−j+1)·p_(j)),  p_(1) ≤ p_(2) ≤ …
//
// NaN, a test that was not made, stays NaN and does not count.
func Holm(p []float64) []float64 {
	var order []int
	out := make([]float64, len(p))
	for i, v := range p {
		if math.IsNaN(v) {
			out[i] = math.NaN()
		} else {
			order = append(order, i)
		}
	}
	slices.SortStableFunc(order, func(a, b int) int {
		switch {
		case p[a] < p[b]:
			return -1
		case p[a] > p[b]:
			return 1
		}
		return 0
	})
	largest := 0.0
	for rank, i := range order {
		largest = max(largest, min(1, float64(len(order)-rank)*p[i]))
		out[i] = largest
	}
	return out
}
