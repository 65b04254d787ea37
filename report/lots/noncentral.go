package lots

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/stat/distuv"
)

// noncentralT returns P(T ≤ t) of Student's t with ν degrees of freedom and
// noncentrality δ, which gonum lacks:
//
//	P = ∫ Φ(t·x − δ) g(x) dx,  g the density of √(χ²_ν/ν)
//
// The integral is good to about 1e-13 absolute, also for large δ, where the
// usual series loses all digits.
func noncentralT(t, nu, delta float64) float64 { return newNoncentral(nu).cdf(t, delta) }

// noncentral holds the abscissas of √(χ²_ν/ν) with their weights, for many
// probabilities with the same ν.
type noncentral [panels * nodesPerPanel][2]float64

func newNoncentral(nu float64) *noncentral {
	// The density of √(χ²/ν) is nothing beyond 9/√ν from 1.
	chi := distuv.ChiSquared{K: nu}
	d, i := new(noncentral), 0
	integrate(max(0, 1-9/math.Sqrt(nu)), 1+9/math.Sqrt(nu), func(x, w float64) {
		if x > 0 {
			d[i] = [2]float64{x, w * math.Exp(chi.LogProb(nu*x*x)) * 2 * nu * x}
		}
		i++
	})
	return d
}

func (d *noncentral) cdf(t, delta float64) float64 {
	sum := 0.0
	for _, n := range d {
		sum += n[1] * distuv.UnitNormal.CDF(t*n[0]-delta)
	}
	return min(max(sum, 0), 1)
}

const (
	panels        = 24
	nodesPerPanel = 16
)

// nodes are the Gauss–Legendre abscissas and weights on [0, 1] of all panels.
var nodes = func() (nodes [panels * nodesPerPanel][2]float64) {
	x, w := make([]float64, nodesPerPanel), make([]float64, nodesPerPanel)
	quad.Legendre{}.FixedLocations(x, w, 0, 1)
	for p := range panels {
		for i := range x {
			nodes[p*nodesPerPanel+i] = [2]float64{(float64(p) + x[i]) / panels, w[i] / panels}
		}
	}
	return nodes
}()

// integrate calls f with the abscissas and weights of a Gauss–Legendre rule
// over panels of [a, b].
func integrate(a, b float64, f func(x, w float64)) {
	for _, n := range nodes {
		f(a+n[0]*(b-a), n[1]*(b-a))
	}
}

// rising returns the zero of an increasing function on x > low to 13
// digits, by bisection from a first guess of the upper end, which is doubled
// until the function is not negative there.
func rising(low, high float64, f func(x float64) float64) float64 {
	for f(high) < 0 {
		low, high = high, 2*high
		if high > 1e9 {
			return math.Inf(1)
		}
	}
	for high-low > 1e-13*high {
		middle := low + (high-low)/2
		if f(middle) < 0 {
			low = middle
		} else {
			high = middle
		}
	}
	return low + (high-low)/2
}
