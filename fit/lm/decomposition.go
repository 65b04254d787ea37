package lm

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/lapack/lapack64"
	"gonum.org/v1/gonum/mat"
)

// epsilon is the spacing of the float64 numbers at 1.
const epsilon = 0x1p-52

// maxSweeps bounds the Jacobi sweeps of rightSingular. Convergence is quadratic: ten variables need about six.
const maxSweeps = 60

// triangle reduces the least-squares problem at x to n×n. With J = Q·R it holds R and Qᵀr; what is left of r is
// orthogonal to the columns of J and no step changes it:
//
//	‖r + J·p‖² = ‖Qᵀr + R·p‖² + const
type triangle struct {
	n     int
	data  []float64 // (n+1)×m, see factorise
	m     int
	tau   []float64
	work  []float64
	norms []float64 // ‖J_j‖, Euclidean norm of each column
}

// factorise forms R and Qᵀr from J (m×n) and r (m). It returns the first column that is not finite, or -1.
//
// Note: the factorisation is made as an LQ of the transposed, augmented matrix [J r]ᵀ. gonum stores by rows, and
// the rows of this matrix are long and contiguous, which makes it a quarter faster than QR of the tall one; the last
// row of L is Qᵀr, so Q itself is never needed.
func (t *triangle) factorise(j *mat.Dense, r []float64) (bad int) {
	n, m := t.n, t.m
	raw := j.RawMatrix()
	for i := range m {
		row := raw.Data[i*raw.Stride : i*raw.Stride+n]
		for k, v := range row {
			t.data[k*m+i] = v
		}
	}
	copy(t.data[n*m:(n+1)*m], r)
	for k := range n {
		t.norms[k] = blas64.Nrm2(blas64.Vector{N: m, Inc: 1, Data: t.data[k*m : (k+1)*m]})
		if math.IsNaN(t.norms[k]) || math.IsInf(t.norms[k], 0) {
			return k
		}
	}
	lapack64.Gelqf(blas64.General{Rows: n + 1, Cols: m, Stride: m, Data: t.data}, t.tau, t.work, len(t.work))
	return -1
}

// column returns the non-zero part of column k of R, its first k+1 elements.
func (t *triangle) column(k int) []float64 { return t.data[k*t.m : k*t.m+k+1] }

// projected returns the n elements of Qᵀr.
func (t *triangle) projected() []float64 { return t.data[t.n*t.m : t.n*t.m+t.n] }

// rightSingular turns the k rows of b (k×n, row i = column i of a matrix A) by plane rotations until they are
// orthogonal and gathers the rotations in v (k×k):
//
//	A = U·Σ·Vᵀ,  row i of b becomes σ_i·u_i,  row i of v becomes v_i
//
// This is the one-sided Jacobi method (Hestenes 1958). It finds small singular values to high relative accuracy
// however the columns of A are scaled (Demmel and Veselić, SIAM J. Matrix Anal. Appl. 13 (1992) 1204), which
// bidiagonalisation does not, and for ten variables or fewer it is several times faster.
func rightSingular(b []float64, k, n int, v []float64) {
	clear(v[:k*k])
	for i := range k {
		v[i*k+i] = 1
	}
	for range maxSweeps {
		rotated := false
		for p := range k {
			x := b[p*n : (p+1)*n]
			for q := p + 1; q < k; q++ {
				y := b[q*n : (q+1)*n]
				var xx, yy, xy float64
				for i, xi := range x {
					yi := y[i]
					xx += xi * xi
					yy += yi * yi
					xy += xi * yi
				}
				if !(math.Abs(xy) > epsilon*math.Sqrt(xx)*math.Sqrt(yy)) {
					continue
				}
				rotated = true
				zeta := (yy - xx) / (2 * xy)
				tan := math.Copysign(1, zeta) / (math.Abs(zeta) + math.Hypot(1, zeta))
				cos := 1 / math.Sqrt(1+tan*tan)
				sin := cos * tan
				rotate(x, y, cos, sin)
				rotate(v[p*k:(p+1)*k], v[q*k:(q+1)*k], cos, sin)
			}
		}
		if !rotated {
			return
		}
	}
}

// rotate replaces (x, y) by (c·x − s·y, s·x + c·y).
func rotate(x, y []float64, c, s float64) {
	for i, xi := range x {
		yi := y[i]
		x[i] = c*xi - s*yi
		y[i] = s*xi + c*yi
	}
}
