package lots

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// BrownForsythe tests whether samples have the same spread: an analysis of
// variance of the distances from each sample's median, which does not need
// normal values. It returns the statistic and the probability of a larger one
// if the spreads are equal; NaN if a sample has fewer than 2 values or nothing
// deviates.
//
//	W = (N−k)/(k−1) · Σ n_i(z̄_i − z̄)² / ΣΣ(z_ij − z̄_i)²,  z = |x − median|
//
// Source: NIST/SEMATECH e-Handbook 1.3.5.10 (Levene's test with the median).
func BrownForsythe(samples ...[]float64) (w, p float64) {
	k, n := len(samples), 0
	var all []float64
	means := make([]float64, k)
	within := 0.0
	for i, sample := range samples {
		if len(sample) < 2 {
			return math.NaN(), math.NaN()
		}
		z := slices.Sorted(slices.Values(sample))
		m := median(z)
		for j, v := range z {
			z[j] = math.Abs(v - m)
		}
		slices.Sort(z)
		means[i] = stat.Mean(z, nil)
		for _, v := range z {
			within += (v - means[i]) * (v - means[i])
		}
		n += len(z)
		all = append(all, z...)
	}
	if k < 2 || within == 0 {
		return math.NaN(), math.NaN()
	}
	slices.Sort(all)
	grand, between := stat.Mean(all, nil), 0.0
	for i, m := range means {
		between += float64(len(samples[i])) * (m - grand) * (m - grand)
	}
	w = float64(n-k) / float64(k-1) * between / within
	return w, distuv.F{D1: float64(k - 1), D2: float64(n - k)}.Survival(w)
}
