package lots

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// ToleranceOneSided returns the factor k of the one-sided tolerance bound of a
// normal population from n values: x̄ + k·s is above a share of it with the
// given confidence, x̄ − k·s below. It is exact, from the noncentral t
// distribution; NaN for n < 2.
//
//	k = t'(confidence; ν = n−1, δ = z(share)·√n)/√n
//
// Source: NIST/SEMATECH e-Handbook 7.2.6.3.
func ToleranceOneSided(n int, share, confidence float64) float64 {
	if n < 2 {
		return math.NaN()
	}
	root := math.Sqrt(float64(n))
	delta := distuv.UnitNormal.Quantile(share) * root
	t := newNoncentral(float64(n - 1))
	return rising(0, distuv.UnitNormal.Quantile(share)+1, func(k float64) float64 {
		return t.cdf(k*root, delta) - confidence
	})
}

// ToleranceTwoSided returns the factor k of the two-sided tolerance interval
// of a normal population from n values: x̄ ± k·s contains at least a share of
// it with the given confidence. It is exact, by integration over the mean; NaN
// for n < 2.
//
//	∫ P(χ²_{n−1} ≥ (n−1)·r(z)²/k²)·√n·φ(z√n) dz = confidence,
//	Φ(z + r) − Φ(z − r) = share
//
// Source: ISO 16269-6; the integral is derived in Odeh and Owen 1980, Tables
// for Normal Tolerance Limits (from memory).
func ToleranceTwoSided(n int, share, confidence float64) float64 {
	if n < 2 {
		return math.NaN()
	}
	// The mean of the sample in standard deviations of the population, by
	// symmetry on one side only; the normal density beyond 9 is nothing.
	root := math.Sqrt(float64(n))
	var radius, weight []float64
	integrate(0, 9, func(u, w float64) {
		z := u / root
		r := rising(0, 2, func(r float64) float64 {
			return distuv.UnitNormal.CDF(z+r) - distuv.UnitNormal.CDF(z-r) - share
		})
		radius = append(radius, r)
		weight = append(weight, 2*w*distuv.UnitNormal.Prob(u))
	})
	nu := float64(n - 1)
	return rising(0, 4, func(k float64) float64 {
		sum := 0.0
		for i, r := range radius {
			sum += weight[i] * mathext.GammaIncRegComp(nu/2, nu*r*r/(k*k)/2)
		}
		return sum - confidence
	})
}

var toleranceCache sync.Map // of n: [2]float64

// toleranceFactors returns both factors for [Coverage] and [Confidence]. All
// figures of a lot share them.
func toleranceFactors(n int) (oneSided, twoSided float64) {
	if f, ok := toleranceCache.Load(n); ok {
		return f.([2]float64)[0], f.([2]float64)[1]
	}
	f := [2]float64{ToleranceOneSided(n, Coverage, Confidence), ToleranceTwoSided(n, Coverage, Confidence)}
	toleranceCache.Store(n, f)
	return f[0], f[1]
}
