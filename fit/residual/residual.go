// Package residual holds statistics of a sequence of residuals: is what a fit left behind noise, or has it structure?
//
// Every function takes the residuals in the order of the swept variable (frequency) and knows nothing of where they came from.
// A NaN in the input gives NaN.
package residual

import (
	"math"
	"slices"
)

// Lag1 returns the lag-1 correlation coefficient of the residuals r about their mean,
//
//	r₁ = Σ (r[i]−m)·(r[i+1]−m) / Σ (r[i]−m)².
//
// White noise gives about −1/n with a standard deviation of about 1/√n; a smooth misfit gives nearly 1.
// It returns NaN for fewer than three values and for constant ones.
func Lag1(r []float64) float64 {
	if len(r) < 3 {
		return math.NaN()
	}
	mean := 0.0
	for _, v := range r {
		mean += v
	}
	mean /= float64(len(r))
	var num, den float64
	for i, v := range r {
		den += (v - mean) * (v - mean)
		if i > 0 {
			num += (v - mean) * (r[i-1] - mean)
		}
	}
	if den == 0 {
		return math.NaN()
	}
	return num / den
}

// Runs is the Wald–Wolfowitz runs test on the signs of the residuals. With n₊ positive and n₋ negative values, n = n₊ + n₋,
// the number of runs of equal sign in a random order has
//
//	μ = 2·n₊·n₋/n + 1,  σ² = (μ−1)(μ−2)/(n−1).
//
// It returns z = (runs − μ)/σ and the probability p (normal approximation) of as few runs or fewer by chance: a small p means
// that neighbours share their sign too often. Zeros are left out. Both are NaN where fewer than two of either sign remain,
// except that twenty or more residuals of one sign alone are as structured as can be, and give z = −Inf, p = 0.
//
// Source: Wald, Wolfowitz 1940, Annals of Mathematical Statistics 11, 147–162.
func Runs(r []float64) (z, p float64) {
	var pos, neg, runs, last int
	for _, v := range r {
		sign := 0
		switch {
		case math.IsNaN(v):
			return math.NaN(), math.NaN()
		case v > 0:
			sign = 1
			pos++
		case v < 0:
			sign = -1
			neg++
		default:
			continue
		}
		if sign != last {
			runs++
		}
		last = sign
	}
	n := float64(pos + neg)
	if min(pos, neg) < 2 {
		if min(pos, neg) == 0 && n >= 20 {
			return math.Inf(-1), 0
		}
		return math.NaN(), math.NaN()
	}
	mu := 2*float64(pos)*float64(neg)/n + 1
	sigma := math.Sqrt((mu - 1) * (mu - 2) / (n - 1))
	z = (float64(runs) - mu) / sigma
	return z, math.Erfc(-z/math.Sqrt2) / 2
}

// MAD returns 1.4826 times the median absolute deviation from the median: the standard deviation of normal data, estimated so
// that up to half of the values may be wild. It returns NaN for no values. r is not changed.
func MAD(r []float64) float64 {
	m := median(slices.Clone(r))
	d := make([]float64, len(r))
	for i, v := range r {
		d[i] = math.Abs(v - m)
	}
	// 1.4826 = 1/Φ⁻¹(3/4).
	return 1.482602218505602 * median(d)
}

// median returns the middle of r, which it reorders; NaN for no values.
func median(r []float64) float64 {
	if len(r) == 0 || slices.ContainsFunc(r, math.IsNaN) {
		return math.NaN()
	}
	h := len(r) / 2
	upper := ranked(r, h)
	if len(r)%2 == 1 {
		return upper
	}
	return (slices.Max(r[:h]) + upper) / 2
}

// ranked puts the k-th smallest value of r in its place, smaller or equal ones
// before it, and returns it (Hoare's selection, with the median of three).
func ranked(r []float64, k int) float64 {
	low, high := 0, len(r)-1
	for low < high {
		middle := low + (high-low)/2
		a, b, c := r[low], r[middle], r[high]
		pivot := max(min(a, b), min(max(a, b), c))
		i, j := low, high
		for i <= j {
			for r[i] < pivot {
				i++
			}
			for r[j] > pivot {
				j--
			}
			if i <= j {
				r[i], r[j] = r[j], r[i]
				i++
				j--
			}
		}
		switch {
		case k <= j:
			high = j
		case k >= i:
			low = i
		default:
			return r[k]
		}
	}
	return r[k]
}
