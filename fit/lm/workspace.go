package lm

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// Workspace holds the memory of a solve. The zero value is ready for use; it grows when a problem is larger than all
// before it. A Result never points into it, so it may be used again at once, but only by one solve at a time. What a
// former solve left in it has no influence on the next.
type Workspace struct {
	floats []float64 // by prepare
	tall   []float64 // by state.tall
	ints   []int
	bools  []bool
	jac    [2]mat.Dense
	state  state
}

// workspaces are those of solves that were given none.
var workspaces = sync.Pool{New: func() any { return new(Workspace) }}

// prepare cuts the memory for m residuals and n variables. With normal, what grows with m is left out until tall asks
// for it.
func (w *Workspace) prepare(m, n int, normal bool) *state {
	const vectors = 14 // of length n, counted below
	size := (vectors+2)*n + 4*n*n + (n+1)*n
	if len(w.floats) < size {
		w.floats = make([]float64, size)
	}
	if len(w.ints) < n {
		w.ints = make([]int, n)
	}
	if len(w.bools) < n {
		w.bools = make([]bool, n)
	}
	take := cutter(w.floats)
	s := &w.state
	*s = state{workspace: w, m: m, n: n, normal: normal, lastStep: math.Inf(1), lastDecrease: math.Inf(1)}
	for _, v := range []*[]float64{
		&s.x, &s.trial, &s.scale, &s.gradient, &s.p, &s.image, &s.rhs, &s.sigma, &s.c, &s.a,
		&s.low, &s.high, &s.probe, &s.tri.norms,
	} {
		*v = take(n)
	}
	s.b, s.v = take(n*n), take(n*n)
	s.free, s.onto = w.ints[:0:n], w.bools[:n]
	s.tri.n = n
	if normal {
		s.jtj, s.trialJTJ, s.jtr, s.trialJTR = take(n*n), take(n*n), take(n), take(n)
		s.tri.data = take((n + 1) * n)
	} else {
		s.tall()
	}
	return s
}

// tall cuts the memory for what has one element or more a residual.
func (s *state) tall() {
	if s.r != nil {
		return
	}
	m, n, w := s.m, s.n, s.workspace
	if size := 4*m + 2*m*n + (n+1)*m; len(w.tall) < size {
		w.tall = make([]float64, size)
	}
	take := cutter(w.tall)
	s.r, s.trialR, s.near, s.far = take(m), take(m), take(m), take(m)
	for i := range w.jac {
		w.jac[i].SetRawMatrix(blas64.General{Rows: m, Cols: n, Stride: n, Data: take(m * n)})
	}
	s.jac, s.spare = &w.jac[0], &w.jac[1]
	s.tri.data = take((n + 1) * m)
}

// cutter returns a function that cuts memory into pieces of given lengths.
func cutter(memory []float64) func(k int) []float64 {
	return func(k int) []float64 {
		head := memory[:k:k]
		memory = memory[k:]
		return head
	}
}
