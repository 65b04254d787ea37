package lm

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// A column takes part in a singularity when its share in the vanishing direction, a unit vector in the scaled
// variables, is at least this. Smaller shares are rounding or hardly matter.
const share = 0.1

// SingularError says which columns of a Jacobian are zero or linearly dependent, so that the data do not determine
// their variables.
type SingularError struct {
	Columns   []int   // ascending
	Condition float64 // of the Jacobian with its columns scaled to length 1; +Inf for a zero column
}

func (e *SingularError) Error() string {
	return fmt.Sprintf("lm: the data do not determine variables %v: the condition number of the scaled Jacobian is %.3g", e.Columns, e.Condition)
}

// Covariance returns the n×n covariance matrix of the variables at a solution,
//
//	C = (JᵀJ)⁻¹·s²
//
// from the m×n Jacobian there and the variance s² of one residual, 1 if the residuals are divided by their standard
// uncertainty, ‖r‖²/(m−n) if they are all alike and their scatter is the only clue.
//
// It is computed from the QR decomposition of J with columns scaled to length 1, so that the units of the variables do
// not matter, and without forming JᵀJ, which would halve the digits. For variables at a bound, leave their columns out:
// the formula does not hold for them.
//
// If the scaled columns are dependent to working precision, their smallest singular value being at most max(m, n)·ε
// times the largest, the error is a *SingularError and there is no matrix. A Jacobian that is not finite or has fewer
// rows than columns, and a variance that is negative or not finite, are errors, too.
func Covariance(j mat.Matrix, variance float64) (*mat.SymDense, error) {
	m, n := j.Dims()
	if !(variance >= 0) || math.IsInf(variance, 1) {
		return nil, fmt.Errorf("lm: variance is %v, must be finite and not negative", variance)
	}
	if m < n {
		return nil, fmt.Errorf("lm: the Jacobian is %d×%d, must have at least as many rows as columns", m, n)
	}
	s := new(Workspace).prepare(m, n, false)
	s.jac.Copy(j)
	if k := s.tri.factorise(s.jac, s.r); k >= 0 {
		return nil, fmt.Errorf("lm: column %d of the Jacobian is not finite", k)
	}
	copy(s.scale, s.tri.norms)
	for k := range n {
		s.free = append(s.free, k)
	}
	s.decompose()
	if err := s.singular(float64(max(m, n)) * epsilon); err != nil {
		return nil, err
	}
	c := mat.NewSymDense(n, nil)
	for p := range n {
		for q := p; q < n; q++ {
			var sum float64
			for i, sigma := range s.sigma {
				sum += (s.v[i*n+p] / sigma) * (s.v[i*n+q] / sigma)
			}
			c.SetSym(p, q, sum*variance/s.scale[p]/s.scale[q])
		}
	}
	return c, nil
}

// singular returns a *SingularError if a singular value is no more than limit times the largest.
func (s *state) singular(limit float64) error {
	smallest, biggest := math.Inf(1), 0.0
	for _, v := range s.sigma {
		smallest, biggest = math.Min(smallest, v), math.Max(biggest, v)
	}
	if smallest > limit*biggest {
		return nil
	}
	e := &SingularError{Condition: math.Inf(1)}
	if smallest > 0 {
		e.Condition = biggest / smallest
	}
	for k := range s.n {
		for i, v := range s.sigma {
			if v <= limit*biggest && math.Abs(s.v[i*s.n+k]) >= share {
				e.Columns = append(e.Columns, k)
				break
			}
		}
	}
	return e
}

// Triangle returns R of the QR decomposition of J, n×n; nil if J has no more rows than columns or is not finite. The
// columns of R are as long as those of J and at the same angles, so that their covariance is the same.
func Triangle(j *mat.Dense) *mat.Dense {
	m, n := j.Dims()
	if m <= n {
		return nil
	}
	w := workspaces.Get().(*Workspace)
	defer workspaces.Put(w)
	s := w.prepare(m, n, false)
	clear(s.r)
	if s.tri.factorise(j, s.r) >= 0 {
		return nil
	}
	r := mat.NewDense(n, n, nil)
	for k := range n {
		for i, v := range s.tri.column(k) {
			r.Set(i, k, v)
		}
	}
	return r
}

// NormalCovariance is [Covariance] from JᵀJ, n×n by rows, instead of J: (JᵀJ)⁻¹·s². It is faster and has fewer digits;
// it returns false where JᵀJ is not finite or not so clearly regular that they suffice for a standard deviation.
func NormalCovariance(jtj []float64, n int, variance float64) (*mat.SymDense, bool) {
	memory := make([]float64, n+(n+1)*n+n*n)
	t := triangle{n: n, norms: memory[:n], data: memory[n : n+(n+1)*n]}
	inverse := memory[n+(n+1)*n:] // R⁻¹, upper triangle by rows
	if !t.cholesky(jtj, memory[n+(n+1)*n:][:n]) {
		return nil, false
	}
	for k := range n {
		column := t.column(k)
		inverse[k*n+k] = 1 / column[k]
		for i := range k {
			var sum float64
			for l := i; l < k; l++ {
				sum -= inverse[i*n+l] * column[l]
			}
			inverse[i*n+k] = sum / column[k]
		}
	}
	c := make([]float64, n*n)
	for p := range n {
		for q := p; q < n; q++ {
			var sum float64
			for i := q; i < n; i++ {
				sum += inverse[p*n+i] * inverse[q*n+i]
			}
			c[p*n+q] = sum * variance
		}
	}
	return mat.NewSymDense(n, c), true
}
