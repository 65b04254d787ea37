package fit

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sync"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"realpart/fit/lm"
	"realpart/fit/residual"
	"realpart/models"
)

// determinedFactor is the ratio of the ends of a 95 % interval above which a
// value counts as not determined, determinedExponent their difference for an
// exponent.
const (
	determinedFactor   = 4
	determinedExponent = 0.2
)

// evaluate makes a result of a solution, but for its uncertainties and the
// structure of its residuals.
func evaluate(p *problem, s *Settings, x []float64, solution *lm.Result) *Result {
	n := len(p.freq)
	r := &Result{
		Circuit: p.circuit, Weight: p.weight, Robust: s.Robust, Free: p.free,
		Freq: p.freq, Measured: p.measured,
		Status: solution.Status, Iterations: solution.Iterations,
		Evaluations:      solution.ResidualEvaluations + solution.JacobianEvaluations,
		DegreesOfFreedom: 2*n - len(p.free),
		problem:          p, x: x, Cost: solution.Cost,
	}
	for name, v := range s.Fixed {
		i, _ := p.circuit.Index(name)
		p.values[i] = v
	}
	r.Model, r.Residuals = p.modelAt(x)
	p.set(x)
	sum, largest, at := 0.0, 0.0, 0
	for i, rho := range r.Residuals {
		squares := real(rho)*real(rho) + imag(rho)*imag(rho)
		sum += squares
		if squares > largest {
			largest, at = squares, i
		}
	}
	if largest > 0 {
		r.MaxRelative, r.MaxAtHz = math.Sqrt(largest), p.freq[at]
	}
	r.RMSRelative = math.Sqrt(sum / float64(n))
	r.Parameters = make([]Parameter, 0, len(p.parameters))
	for i, parameter := range p.parameters {
		_, fixed := s.Fixed[parameter.Name]
		r.Parameters = append(r.Parameters, Parameter{
			Parameter: parameter, Value: p.values[i], Fixed: fixed, Determined: true,
			StdError: 0, MeterError: math.NaN(), Low95: p.values[i], High95: p.values[i],
		})
	}
	for k, i := range p.free {
		if solution.AtBound != nil {
			r.Parameters[i].AtBound = solution.AtBound[k]
		}
	}
	return r
}

// structure fills Lag1 and Structured. Residuals count as structured when
// real or imaginary part has fewer runs of one sign than chance gives at a
// level of 0.1 %.
func (r *Result) structure() {
	n := len(r.Residuals)
	parts := borrow(2 * n)
	defer floats.Put(parts)
	re, im := (*parts)[:n], (*parts)[n:]
	for i, rho := range r.Residuals {
		re[i], im[i] = real(rho), imag(rho)
	}
	lagRe, lagIm := residual.Lag1(re), residual.Lag1(im)
	switch {
	case math.IsNaN(lagRe):
		r.Lag1 = lagIm
	case math.IsNaN(lagIm):
		r.Lag1 = lagRe
	default:
		r.Lag1 = (lagRe + lagIm) / 2
	}
	for _, part := range [][]float64{re, im} {
		if _, p := residual.Runs(part); p < 0.001 {
			r.Structured = true
		}
	}
	// Residuals at the rounding of the numbers in a file are not noise, and
	// their pattern says nothing about the part.
	squares := r.RMSRelative * r.RMSRelative * float64(len(r.Measured))
	if r.Structured && (r.RMSRelative < 1e-9 || squares <= roundingSquares(r.Measured)) {
		r.Structured = false
	}
}

// uncertainty fills the covariances and the parameters' intervals.
//
// Scatter: (JᵀJ)⁻¹·s², s² = Σr²/ν with ν = 2·points − free. Meter: a common
// relative error of magnitude and a common error of phase of the whole sweep,
// each rectangular with the stated accuracy as half-width (u = a/√3, GUM
// 4.3.7), carried through the fit's linear response. Both are added as
// variances; the expanded uncertainty uses Student's t at the effective
// degrees of freedom (Welch–Satterthwaite, GUM G.4), the meter's part having
// infinitely many. Intervals are symmetric in ln p, so that none crosses
// zero, and in n itself for an exponent.
func (r *Result) uncertainty(s *Settings, solution *lm.Result) {
	p := r.problem
	k := len(p.free)
	r.Covariance = mat.NewSymDense(k, nil)
	r.Correlation = mat.NewSymDense(k, nil)
	nu := float64(r.DegreesOfFreedom)
	normal, jacobian := solution.Normal, solution.Jacobian
	if nu > 0 {
		r.Sigma = math.Sqrt(2 * solution.Cost / nu)
		if p.scale > 0 {
			jacobian, r.Sigma = r.robustSpread()
			normal = nil
		}
	}
	determined := make([]int, 0, k) // columns that the sweep determines at all
	for c, i := range p.free {
		if r.Parameters[i].AtBound {
			r.Parameters[i].Determined = false
			r.Parameters[i].Why = "its element has vanished from the circuit"
			if _, given := s.Bounds[r.Parameters[i].Name]; given {
				r.Parameters[i].Why = "it ended at a bound that was given"
			}
			continue
		}
		determined = append(determined, c)
	}
	covariance := normalCovariance(normal, k, determined)
	var vague []int
	if covariance != nil {
		covariance, determined, vague = tellApart(covariance, determined, r.Sigma, func(columns []int) *mat.SymDense {
			return normalCovariance(normal, k, columns)
		})
	}
	if jacobian == nil && (covariance == nil || p.magnitude != nil) {
		jacobian = p.jacobianAt(r.x)
	}
	if covariance == nil && len(determined) > 0 {
		var alike []int
		covariance, determined, alike = regularCovariance(jacobian, determined, 1)
		vague = append(vague, alike...)
		if covariance != nil {
			covariance, determined, alike = tellApart(covariance, determined, r.Sigma, func(columns []int) *mat.SymDense {
				c, rest, _ := regularCovariance(jacobian, columns, 1)
				if len(rest) < len(columns) {
					return nil
				}
				return c
			})
			vague = append(vague, alike...)
		}
	}
	for _, c := range vague {
		q := &r.Parameters[p.free[c]]
		q.Determined = false
		q.Why = "the sweep cannot tell it from other parameters"
	}
	response := r.meterResponse(jacobian, covariance, determined)
	if response != nil {
		r.MeterCovariance = mat.NewSymDense(k, nil)
	}
	inside := make([]bool, k)
	for a, ca := range determined {
		inside[ca] = true
		for b, cb := range determined[:a+1] {
			v := covariance.At(a, b)
			r.Covariance.SetSym(ca, cb, v*r.Sigma*r.Sigma)
			r.Correlation.SetSym(ca, cb, v/math.Sqrt(covariance.At(a, a))/math.Sqrt(covariance.At(b, b)))
			if response != nil {
				r.MeterCovariance.SetSym(ca, cb, response.At(a, 0)*response.At(b, 0)+response.At(a, 1)*response.At(b, 1))
			}
		}
	}
	for c, i := range p.free {
		q := &r.Parameters[i]
		if !inside[c] {
			q.StdError, q.Low95, q.High95 = math.NaN(), math.NaN(), math.NaN()
			r.Correlation.SetSym(c, c, 1)
			continue
		}
		if !q.Determined {
			q.StdError, q.Low95, q.High95 = math.NaN(), math.NaN(), math.NaN()
			continue
		}
		scatter := r.Covariance.At(c, c)
		meter := 0.0
		slope := q.Scale.Slope(q.Value)
		q.StdError = slope * math.Sqrt(scatter)
		if r.MeterCovariance != nil {
			meter = r.MeterCovariance.At(c, c)
			q.MeterError = slope * math.Sqrt(meter)
		}
		u := expand(scatter, meter, nu)
		if q.Scale == models.LogitScale {
			u *= slope
			q.Low95, q.High95 = math.Max(q.Value-u, 0), math.Min(q.Value+u, 1)
			if !(q.High95-q.Low95 <= determinedExponent) {
				q.Determined = false
				q.Why = fmt.Sprintf("its 95 %% interval spans %.2g", q.High95-q.Low95)
			}
		} else {
			q.Low95, q.High95 = q.Value*math.Exp(-u), q.Value*math.Exp(u)
			if !(2*u <= math.Log(determinedFactor)) {
				q.Determined = false
				q.Why = fmt.Sprintf("its 95 %% interval spans a factor of %.2g", math.Exp(2*u))
				if 2*u > math.Log(1e3) {
					q.Why = "its 95 % interval spans more than three decades"
				}
			}
		}
	}
}

// expand returns the half-width of the 95 % interval from a scatter variance
// with ν degrees of freedom and a meter variance with infinitely many. It is
// infinite without degrees of freedom.
func expand(scatter, meter, nu float64) float64 {
	total := scatter + meter
	if nu < 1 {
		return math.Inf(1)
	}
	if total == 0 {
		return 0
	}
	effective := nu
	if scatter > 0 {
		effective = nu * (total / scatter) * (total / scatter)
	} else {
		effective = math.Inf(1)
	}
	return studentQuantile(0.975, effective) * math.Sqrt(total)
}

// studentQuantile is the quantile of Student's t, that of the normal
// distribution beyond 1e6 degrees of freedom, where they agree to 1e-6. Those
// of whole degrees of freedom are kept: every parameter and figure of a sweep,
// and every sweep of a lot, asks for the same one, and it costs more than many
// evaluations of a circuit.
func studentQuantile(p, nu float64) float64 {
	if nu > 1e6 {
		return distuv.UnitNormal.Quantile(p)
	}
	type key struct{ p, nu float64 }
	whole := nu == math.Trunc(nu)
	if whole {
		if t, ok := quantiles.Load(key{p, nu}); ok {
			return t.(float64)
		}
	}
	t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: nu}.Quantile(p)
	if whole {
		quantiles.Store(key{p, nu}, t)
	}
	return t
}

var quantiles sync.Map // of studentQuantile

// lost is the standard uncertainty of ln p, or of a logit, above which nothing
// of the linear response is left: what it says of several such unknowns
// together is the difference of huge numbers.
const lost = 10

// tellApart takes unknowns away until none is lost, the worst first. It returns
// what regularCovariance does; of must give the covariance of fewer columns, nil
// if it cannot.
func tellApart(covariance *mat.SymDense, columns []int, sigma float64, of func(columns []int) *mat.SymDense) (rest *mat.SymDense, remaining, vague []int) {
	for {
		worst, most := -1, lost/sigma*(lost/sigma)
		for k, c := range columns {
			if v := covariance.At(k, k); v > lost/sigma*(lost/sigma) {
				if !slices.Contains(vague, c) {
					vague = append(vague, c)
				}
				if v > most {
					worst, most = k, v
				}
			}
		}
		if worst < 0 {
			return covariance, columns, vague
		}
		columns = slices.Delete(slices.Clone(columns), worst, worst+1)
		if len(columns) == 0 {
			return nil, nil, vague
		}
		if covariance = of(columns); covariance == nil {
			return nil, columns, vague
		}
	}
}

// normalCovariance returns the covariance (JᵀJ)⁻¹ of the given columns of a
// Jacobian of n columns from its JᵀJ; nil where that is not clearly regular, or
// not given.
func normalCovariance(jtj []float64, n int, columns []int) *mat.SymDense {
	if jtj == nil || len(columns) == 0 {
		return nil
	}
	part := jtj
	if k := len(columns); k < n {
		part = make([]float64, 0, k*k)
		for _, a := range columns {
			for _, b := range columns {
				part = append(part, jtj[a*n+b])
			}
		}
	}
	covariance, _ := lm.NormalCovariance(part, len(columns), 1)
	return covariance
}

// regularCovariance returns the covariance of the given columns of a
// Jacobian. Of columns that cannot be told apart, all are vague, and one
// after the other is taken away until the rest can: what the rest then says
// of the impedance, which is their sum in effect, stays right.
func regularCovariance(j *mat.Dense, columns []int, variance float64) (covariance *mat.SymDense, rest, vague []int) {
	if r := lm.Triangle(j); r != nil {
		j = r // says the same of the columns, in fewer rows
	}
	for len(columns) > 0 {
		rows, _ := j.Dims()
		part := mat.NewDense(rows, len(columns), nil)
		for k, c := range columns {
			for i := range rows {
				part.Set(i, k, j.At(i, c))
			}
		}
		covariance, err := lm.Covariance(part, variance)
		if err == nil {
			return covariance, columns, vague
		}
		var singular *lm.SingularError
		if !errors.As(err, &singular) || len(singular.Columns) == 0 {
			return nil, nil, append(vague, columns...)
		}
		for _, k := range singular.Columns {
			vague = append(vague, columns[k])
		}
		last := singular.Columns[len(singular.Columns)-1]
		columns = slices.Delete(slices.Clone(columns), last, last+1)
	}
	return nil, nil, vague
}

// meterResponse returns the change of the unknowns of the determined columns
// for a standard uncertainty of the common magnitude error (column 0) and of
// the common phase error (column 1); nil where no accuracy was stated.
//
//	δx = −(JᵀJ)⁻¹·Jᵀ·δr
func (r *Result) meterResponse(j *mat.Dense, covariance *mat.SymDense, determined []int) *mat.Dense {
	p := r.problem
	if p.magnitude == nil || len(determined) == 0 {
		return nil
	}
	projected := mat.NewDense(len(determined), 2, nil)
	for i := range p.freq {
		am, bm := p.shift(i, complex(p.magnitude[i]/math.Sqrt(3), 0))
		ap, bp := p.shift(i, complex(0, p.phase[i]/math.Sqrt(3)))
		for k, c := range determined {
			ja, jb := j.At(2*i, c), j.At(2*i+1, c)
			projected.Set(k, 0, projected.At(k, 0)+ja*am+jb*bm)
			projected.Set(k, 1, projected.At(k, 1)+ja*ap+jb*bp)
		}
	}
	response := mat.NewDense(len(determined), 2, nil)
	response.Mul(covariance, projected)
	response.Scale(-1, response)
	return response
}

// Propagate carries the covariance of inputs through a function with the
// given sensitivities: C_y = G·C_x·Gᵀ, G_{ij} = ∂y_i/∂x_j (law of propagation
// of uncertainty, GUM 5.2.2 and H.2.3).
func Propagate(sensitivities mat.Matrix, covariance mat.Symmetric) *mat.SymDense {
	rows, _ := sensitivities.Dims()
	var half, full mat.Dense
	half.Mul(sensitivities, covariance)
	full.Mul(&half, sensitivities.T())
	out := mat.NewSymDense(rows, nil)
	for i := range rows {
		for j := range i + 1 {
			out.SetSym(i, j, (full.At(i, j)+full.At(j, i))/2)
		}
	}
	return out
}
