package lots

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
)

// The share of a lot that a tolerance bound covers, and the confidence that it
// does.
const (
	Coverage   = 0.95
	Confidence = 0.95
)

// significance is the level at which an outlier is flagged, lots are called
// different and lots are called equivalent.
const significance = 0.05

// Summary describes a sample of a figure, in its unit. What needs more values
// than there are is NaN.
type Summary struct {
	N                          int
	Mean, SD, Median, Min, Max float64
	// AndersonDarling is A² against the normal distribution, and the
	// probability of a larger one if the lot is normal.
	AndersonDarling, AndersonDarlingP float64
	// ToleranceLow and ToleranceHigh bound between them a share [Coverage]
	// of a normal lot with confidence [Confidence]; OneSidedLow and
	// OneSidedHigh each bound that share on one side alone.
	ToleranceLow, ToleranceHigh float64
	OneSidedLow, OneSidedHigh   float64
}

// Summarise describes values, which must be finite.
func Summarise(values []float64) Summary {
	v := slices.Sorted(slices.Values(values)) // the sums don't depend on the order of the parts
	nan := math.NaN()
	s := Summary{N: len(v), Mean: nan, SD: nan, Median: nan, Min: nan, Max: nan,
		AndersonDarling: nan, AndersonDarlingP: nan,
		ToleranceLow: nan, ToleranceHigh: nan, OneSidedLow: nan, OneSidedHigh: nan}
	if len(v) == 0 {
		return s
	}
	s.Min, s.Max, s.Median = v[0], v[len(v)-1], median(v)
	s.Mean = mean(v)
	if len(v) < 2 {
		return s
	}
	s.SD = stat.StdDev(v, nil)
	s.AndersonDarling, s.AndersonDarlingP = AndersonDarling(v)
	one, two := toleranceFactors(len(v))
	s.OneSidedLow, s.OneSidedHigh = s.Mean-one*s.SD, s.Mean+one*s.SD
	s.ToleranceLow, s.ToleranceHigh = s.Mean-two*s.SD, s.Mean+two*s.SD
	return s
}

// mean is the arithmetic mean, never outside the values. What rounding loses in
// the first sum, the mean of the deviations gives back.
func mean(sorted []float64) float64 {
	m, rest := stat.Mean(sorted, nil), 0.0
	for _, v := range sorted {
		rest += v - m
	}
	m += rest / float64(len(sorted))
	return min(max(m, sorted[0]), sorted[len(sorted)-1])
}

func median(sorted []float64) float64 {
	n := len(sorted)
	if n%2 == 1 {
		return sorted[n/2]
	}
	return sorted[n/2-1]/2 + sorted[n/2]/2
}

// Capability returns the indices of a process against limits; a limit of NaN
// is none. Cp needs both limits, Cpk one.
//
//	Cp = (U − L)/(6s)    Cpk = min((U − x̄)/(3s), (x̄ − L)/(3s))
//
// s is that of the lot, so that the indices are those of its performance over
// the whole sample. Where s is 0 both are NaN. Source: NIST/SEMATECH e-Handbook
// 6.1.6.
func (s Summary) Capability(low, high float64) (cp, cpk float64) {
	cp, cpk = math.NaN(), math.NaN()
	if !(s.SD > 0) {
		return cp, cpk
	}
	cp = (high - low) / (6 * s.SD)
	above, below := (high-s.Mean)/(3*s.SD), (s.Mean-low)/(3*s.SD)
	switch {
	case math.IsNaN(low):
		cpk = above
	case math.IsNaN(high):
		cpk = below
	default:
		cpk = min(above, below)
	}
	return cp, cpk
}
