package lots

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// fewestForNormality is the smallest sample for which the probability of
// Anderson–Darling is known well.
const fewestForNormality = 8

// AndersonDarling tests values against the normal distribution with unknown
// mean and standard deviation. It returns the statistic
//
//	A² = −n − Σ (2i−1)/n·(ln Φ(z_i) + ln(1 − Φ(z_{n+1−i}))),  z = (x − x̄)/s,
//
// and the probability of a larger one if the values are normal, from the
// approximation of D'Agostino and Stephens 1986 (Goodness-of-Fit Techniques,
// table 4.9; coefficients from memory, checked by simulation in the tests).
// The statistic is NaN for fewer than 2 different values, the probability also
// for fewer than 8 values.
func AndersonDarling(values []float64) (a2, p float64) {
	v := slices.Sorted(slices.Values(values))
	n := len(v)
	if n < 2 || v[0] == v[n-1] {
		return math.NaN(), math.NaN()
	}
	m, s := stat.MeanStdDev(v, nil)
	sum := 0.0
	for i := range v {
		low, high := (v[i]-m)/s, (v[n-1-i]-m)/s
		sum += float64(2*i+1) * (logNormalCDF(low) + logNormalCDF(-high))
	}
	a2 = -float64(n) - sum/float64(n)
	if n < fewestForNormality {
		return a2, math.NaN()
	}
	a := a2 * (1 + 0.75/float64(n) + 2.25/float64(n*n))
	switch {
	case a < 0.2:
		p = 1 - math.Exp(-13.436+101.14*a-223.73*a*a)
	case a < 0.34:
		p = 1 - math.Exp(-8.318+42.796*a-59.938*a*a)
	case a < 0.6:
		p = math.Exp(0.9177 - 4.279*a - 1.38*a*a)
	case a < 10:
		p = math.Exp(1.2937 - 5.709*a + 0.0186*a*a)
	default: // below 4e-24; the polynomial turns upwards further out
		p = 0
	}
	return a2, p
}

// logNormalCDF is ln Φ(z), also far out where Φ(z) is 0 in floating point.
func logNormalCDF(z float64) float64 {
	if z > -30 {
		return math.Log(distuv.UnitNormal.CDF(z))
	}
	// Mills' ratio: Φ(z) ≈ φ(z)/|z|·(1 − 1/z²).
	return -z*z/2 - math.Log(-z*math.Sqrt(2*math.Pi)) + math.Log1p(-1/(z*z))
}
