package fit

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"realpart/models"
)

// Restore rebuilds a result from what a record of it keeps, so that its values
// and covariances can be carried further without the sweep. parameters are
// those of the circuit, in its order: of each, Value, Fixed, StdError and
// MeterError count, NaN standing for none; the interval is kept as it is.
// correlation is that of the free parameters from scatter, in their order;
// points is how many were fitted, fMin and fMax in Hz are their ends.
//
//	C_ij = ρ_ij·u_i·u_j, u_i = StdError/(dp/dx)
//
// A parameter without StdError has zero rows in the covariances, as one that
// is not determined. How the meter's errors of the parameters go together is
// not known. For any correlation, a quantity with the sensitivities g has
//
//	u² ≤ (Σ|g_i|·m_i)² ≤ k·Σ(g_i·m_i)², m_i = MeterError/(dp/dx)
//
// (triangle inequality, Cauchy–Schwarz) over the k parameters with such an
// error: MeterCovariance is diagonal with k·m², and never gives too little.
//
// The result has no points: Freq holds the two ends and Measured NaN, Status
// is that of no run, Model, Residuals and the figures of their size are zero.
// Values, Figure (Measured and Resolution being NaN) and Resonances work; what
// needs the points does not.
//
// The error says which input is impossible.
func Restore(c *models.Circuit, parameters []Parameter, correlation [][]float64, points int, fMin, fMax float64) (*Result, error) {
	if !(fMin > 0 && fMax >= fMin && fMax < math.Inf(1)) {
		return nil, fmt.Errorf("expected a range of positive frequencies, found %v Hz to %v Hz", fMin, fMax)
	}
	if points < 1 {
		return nil, fmt.Errorf("expected one fitted point or more, found %d", points)
	}
	known := c.Parameters()
	if len(parameters) != len(known) {
		return nil, fmt.Errorf("expected the %d parameters of %s, found %d", len(known), c, len(parameters))
	}
	r := &Result{
		Circuit: c, Parameters: make([]Parameter, 0, len(known)), Free: []int{},
		Freq: []float64{fMin, fMax}, Measured: []complex128{missing, missing},
		RMSRelative: math.NaN(), MaxRelative: math.NaN(), MaxAtHz: math.NaN(), Lag1: math.NaN(), Sigma: math.NaN(), Cost: math.NaN(),
		problem: withoutPoints(),
	}
	for i, p := range parameters {
		if p.Name != known[i].Name {
			return nil, fmt.Errorf("expected parameter %s of %s, found %q", known[i].Name, c, p.Name)
		}
		p.Parameter = known[i]
		if err := p.CheckValue(p.Value); err != nil || !(p.Scale.Slope(p.Value) > 0) && !p.Fixed {
			return nil, fmt.Errorf("expected a possible value of %s, found %v", p.Name, p.Value)
		}
		for _, u := range []float64{p.StdError, p.MeterError} {
			if u < 0 || math.IsInf(u, 0) {
				return nil, fmt.Errorf("expected a standard uncertainty of %s of 0 or more, found %v", p.Name, u)
			}
		}
		r.Parameters = append(r.Parameters, p)
		if !p.Fixed {
			r.Free = append(r.Free, i)
		}
	}
	r.DegreesOfFreedom = 2*points - len(r.Free)
	return r, r.restoreCovariance(correlation)
}

// withoutPoints returns a problem for a result whose points were not kept, with
// a meter whose accuracy is not known point by point.
func withoutPoints() *problem { return &problem{points: new(points)} }

// missing is an impedance that was not kept.
var missing = complex(math.NaN(), math.NaN())

// restoreCovariance fills the covariances.
func (r *Result) restoreCovariance(correlation [][]float64) error {
	k := len(r.Free)
	if len(correlation) != k {
		return fmt.Errorf("expected the correlation of %d free parameters, found %d rows", k, len(correlation))
	}
	if k == 0 {
		return nil
	}
	r.Covariance, r.Correlation = mat.NewSymDense(k, nil), mat.NewSymDense(k, nil)
	scatter := make([]float64, k) // of the unknowns
	meter := make([]float64, k)
	withMeter := 0
	for a, i := range r.Free {
		p := r.Parameters[i]
		slope := p.Scale.Slope(p.Value)
		if !math.IsNaN(p.StdError) {
			scatter[a] = p.StdError / slope
		}
		if !math.IsNaN(p.MeterError) {
			meter[a] = p.MeterError / slope
			withMeter++
		}
	}
	const rounding = 1e-9 // of ρ_ii
	for a, row := range correlation {
		if len(row) != k { // those above are whole, so that [b][a] exists
			return fmt.Errorf("expected %d correlations of %s, found %d", k, r.Parameters[r.Free[a]].Name, len(row))
		}
		for b, v := range row[:a+1] {
			if !(math.Abs(v) <= 1) || v != correlation[b][a] || a == b && v < 1-rounding {
				return fmt.Errorf("expected a symmetric correlation between −1 and 1, 1 of each with itself, found %v of %s with %s", v, r.Parameters[r.Free[a]].Name, r.Parameters[r.Free[b]].Name)
			}
			r.Correlation.SetSym(a, b, v)
			r.Covariance.SetSym(a, b, v*scatter[a]*scatter[b])
		}
		r.Covariance.SetSym(a, a, scatter[a]*scatter[a])
	}
	if withMeter > 0 {
		r.MeterCovariance = mat.NewSymDense(k, nil)
		for a, m := range meter {
			r.MeterCovariance.SetSym(a, a, float64(withMeter)*m*m)
		}
	}
	return nil
}
