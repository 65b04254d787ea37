package lm

import (
	"math"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// Workspace holds the memory of a solve. The zero value is ready for use; it grows when a problem is larger than all
// before it. A Result never points into it, so it may be used again at once, but only by one solve at a time. What a
// former solve left in it has no influence on the next.
type Workspace struct {
	floats []float64
	ints   []int
	bools  []bool
	jac    [2]mat.Dense
	state  state
}

// prepare cuts the memory for m residuals and n variables.
func (w *Workspace) prepare(m, n int) *state {
	const vectors = 14 // of length n, counted below
	size := 4*m + vectors*n + 2*m*n + (n+1)*m + 2*n*n
	if len(w.floats) < size {
		w.floats = make([]float64, size)
	}
	if len(w.ints) < n {
		w.ints = make([]int, n)
	}
	if len(w.bools) < n {
		w.bools = make([]bool, n)
	}
	rest := w.floats
	take := func(k int) []float64 {
		head := rest[:k:k]
		rest = rest[k:]
		return head
	}
	s := &w.state
	*s = state{m: m, n: n, lastStep: math.Inf(1), lastDecrease: math.Inf(1)}
	s.r, s.trialR, s.near, s.far = take(m), take(m), take(m), take(m)
	for _, v := range []*[]float64{
		&s.x, &s.trial, &s.scale, &s.gradient, &s.p, &s.image, &s.rhs, &s.sigma, &s.c, &s.a,
		&s.low, &s.high, &s.probe, &s.tri.norms,
	} {
		*v = take(n)
	}
	for i := range w.jac {
		w.jac[i].SetRawMatrix(blas64.General{Rows: m, Cols: n, Stride: n, Data: take(m * n)})
	}
	s.jac, s.spare = &w.jac[0], &w.jac[1]
	s.tri.n, s.tri.m = n, m
	s.tri.data = take((n + 1) * m)
	s.b, s.v = take(n*n), take(n*n)
	s.free, s.onto = w.ints[:0:n], w.bools[:n]
	return s
}
