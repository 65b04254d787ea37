package rational

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// An orthogonal factorisation A·S⁻¹ = Q·R of a tall matrix kept by columns, with the columns first scaled to unit length (S holds their
// lengths). Modified Gram–Schmidt is backward stable for least squares when the right-hand side is treated as one more column
// (Björck 1967, BIT 7, 1–21), gives the thin Q at no cost, and by columns runs on gonum's vector kernels; gonum/mat's Householder
// QR, by rows, takes twice as long here and needs the square Q.
type factored struct {
	q     [][]float64 // orthonormal columns; a zero column where A's column depends on those before it
	r     [][]float64 // r[j][i], i ≤ j: column j of the upper triangle
	scale []float64
}

// factor overwrites the columns. With twice, they are orthogonalised a second time, so that Q is orthonormal to rounding.
func factor(cols [][]float64, twice bool) *factored {
	n := len(cols)
	f := &factored{q: cols, r: make([][]float64, n), scale: make([]float64, n)}
	tri := make([]float64, n*(n+1)/2)
	for j, c := range cols {
		f.r[j], tri = tri[:j+1], tri[j+1:]
		f.scale[j] = math.Sqrt(floats.Dot(c, c))
		if !(f.scale[j] > 0) || math.IsInf(f.scale[j], 0) {
			clear(c)
			f.scale[j] = 1
			continue
		}
		floats.Scale(1/f.scale[j], c)
		passes := 1
		if twice {
			passes = 2
		}
		for range passes {
			for i := range j {
				t := floats.Dot(cols[i], c)
				f.r[j][i] += t
				floats.AddScaled(c, -t, cols[i])
			}
		}
		rest := math.Sqrt(floats.Dot(c, c))
		// A column with nothing of its own above rounding is left out of the solution.
		if rest < 1e-14 {
			clear(c)
			continue
		}
		f.r[j][j] = rest
		floats.Scale(1/rest, c)
	}
	return f
}

// project returns Qᵀb and changes b into the part of it orthogonal to Q.
func (f *factored) project(b []float64) []float64 {
	y := make([]float64, len(f.q))
	for j, c := range f.q {
		y[j] = floats.Dot(c, b)
		floats.AddScaled(b, -y[j], c)
	}
	return y
}

// solve returns x with R·S·x = y; dependent columns get 0.
func (f *factored) solve(y []float64) []float64 {
	x := append([]float64(nil), y...)
	for j := len(x) - 1; j >= 0; j-- {
		if f.r[j][j] == 0 {
			x[j] = 0
			continue
		}
		x[j] /= f.r[j][j]
		for i := range j {
			x[i] -= f.r[j][i] * x[j]
		}
	}
	for j := range x {
		x[j] /= f.scale[j]
	}
	return x
}

// damped returns x that minimises ‖R·S·x − y‖² + λ‖S·x‖².
func (f *factored) damped(y []float64, lambda float64) []float64 {
	n := len(y)
	if lambda == 0 {
		return f.solve(y)
	}
	cols := make([][]float64, n)
	for j := range cols {
		cols[j] = make([]float64, 2*n)
		copy(cols[j], f.r[j])
		cols[j][n+j] = math.Sqrt(lambda)
	}
	b := make([]float64, 2*n)
	copy(b, y)
	g := factor(cols, false)
	x := g.solve(g.project(b))
	for j := range x {
		x[j] /= f.scale[j]
	}
	return x
}
