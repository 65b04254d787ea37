package rational

import (
	"gonum.org/v1/gonum/floats"
)

// nonNegativeLeastSquares returns x ≥ 0 that minimises ‖A·x − b‖, A by columns; neither is changed.
// Active-set method of Lawson and Hanson 1974, Solving Least Squares Problems, chapter 23, algorithm NNLS.
func nonNegativeLeastSquares(cols [][]float64, b []float64) []float64 {
	n := len(cols)
	norm := make([]float64, n)
	for j, c := range cols {
		norm[j] = floats.Norm(c, 2)
	}
	x := make([]float64, n)
	in := make([]bool, n)
	passive := func() ([]int, []float64) {
		var index []int
		var a [][]float64
		for j := range n {
			if in[j] {
				index = append(index, j)
				a = append(a, append([]float64(nil), cols[j]...))
			}
		}
		f := factor(a, false)
		return index, f.solve(f.project(append([]float64(nil), b...)))
	}
	r := append([]float64(nil), b...)
	tol := 1e-12 * floats.Norm(b, 2)
	for range 3 * n {
		best, at := tol, -1
		for j, c := range cols {
			if !in[j] && norm[j] > 0 {
				if g := floats.Dot(c, r) / norm[j]; g > best {
					best, at = g, j
				}
			}
		}
		if at < 0 {
			break
		}
		in[at] = true
		for {
			index, y := passive()
			step, out := 1.0, -1
			for i, j := range index {
				if y[i] <= 0 {
					if s := x[j] / (x[j] - y[i]); s < step || out < 0 {
						step, out = s, j
					}
				}
			}
			for i, j := range index {
				x[j] += step * (y[i] - x[j])
			}
			if out < 0 {
				break
			}
			x[out], in[out] = 0, false
			if out == at && step == 0 { // rounding: the newcomer cannot enter
				norm[at] = 0
				break
			}
		}
		copy(r, b)
		for j, c := range cols {
			if in[j] {
				floats.AddScaled(r, -x[j], c)
			}
		}
	}
	return x
}
