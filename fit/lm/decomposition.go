package lm

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"
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
	n, m  int
	data  []float64 // (n+1)×m, see factorise; of a triangle from JᵀJ (n+1)×n, with n for m
	norms []float64 // ‖J_j‖, Euclidean norm of each column
}

// factorise forms R and Qᵀr from J (m×n) and r (m) by Householder reflections. It returns the first column whose norm
// is not finite, or -1.
//
// Note: the factors are those of [J r]. It is kept transposed, because gonum stores by rows and reflections work on
// columns, which are long and contiguous this way; r being reflected with the columns, Q is never needed. gonum's
// Gelqf does the same and takes 1.3 to 1.6 times as long for 402×8 to 402×3, because it guards every norm against
// overflow. A column that overflows here, above 10¹⁵⁴, is refused instead.
func (t *triangle) factorise(j *mat.Dense, r []float64) (bad int) {
	raw := j.RawMatrix()
	n, m := t.n, raw.Rows
	t.m = m
	for i := range m {
		for k, v := range raw.Data[i*raw.Stride : i*raw.Stride+n] {
			t.data[k*m+i] = v
		}
	}
	copy(t.data[n*m:(n+1)*m], r)
	for k := range n {
		v := t.vector(k, k)
		size := math.Sqrt(blas64.Dot(v, v))
		// With Q·R = J the columns of R are as long as those of J.
		t.norms[k] = math.Hypot(norm(t.data[k*m:k*m+k]), size)
		if !isFinite(t.norms[k]) {
			return k
		}
		if size == 0 {
			continue
		}
		// v = x − β·e with |β| = ‖x‖ and the sign that does not cancel; then I + v·vᵀ/(β·v_0) reflects x onto β·e.
		beta := -math.Copysign(size, v.Data[0])
		v.Data[0] -= beta
		for l := k + 1; l <= n; l++ {
			w := t.vector(l, k)
			blas64.Axpy(blas64.Dot(v, w)/(beta*v.Data[0]), v, w)
		}
		v.Data[0] = beta
	}
	return -1
}

// leastPivot is the smallest pivot, of JᵀJ with the columns of J scaled to length 1, at which the Cholesky factor serves:
// the squared sine of the angle between a column and those before it. Its relative error is about ε over the pivot.
const leastPivot = 1e-9

// cholesky forms R and Qᵀr from JᵀJ and Jᵀr,
//
//	JᵀJ = Rᵀ·R,  Rᵀ·(Qᵀr) = Jᵀr
//
// It returns false where JᵀJ is not finite or not clearly regular; then the triangle is undefined.
func (t *triangle) cholesky(jtj, jtr []float64) bool {
	n := t.n
	t.m = n
	projected := t.projected()
	for k := range n {
		col := t.column(k)
		size := jtj[k*n+k]
		t.norms[k] = math.Sqrt(size)
		pivot, rhs := size, jtr[k]
		for i := range k {
			other := t.column(i)
			sum := jtj[k*n+i]
			for l := range i {
				sum -= other[l] * col[l]
			}
			v := sum / other[i]
			col[i] = v
			pivot -= v * v
			rhs -= v * projected[i]
		}
		if !(pivot > leastPivot*size && size < math.MaxFloat64 && isFinite(rhs)) {
			return false
		}
		col[k] = math.Sqrt(pivot)
		projected[k] = rhs / col[k]
	}
	return true
}

// vector returns column l of [J r] from row k on.
func (t *triangle) vector(l, k int) blas64.Vector {
	return blas64.Vector{N: t.m - k, Inc: 1, Data: t.data[l*t.m+k : (l+1)*t.m]}
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
// bidiagonalisation does not, and next to gonum's Gesvd it is faster as well: 5 times for three variables, twice for five,
// 1.3 times for eight.
func rightSingular(b []float64, k, n int, v []float64) {
	clear(v[:k*k])
	for i := range k {
		v[i*k+i] = 1
	}
	tolerance := float64(n) * epsilon // the rounding error of a scalar product
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
				if !(math.Abs(xy) > tolerance*math.Sqrt(xx)*math.Sqrt(yy)) {
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
