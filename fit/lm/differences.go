package lm

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// relativeStep is ε^⅓, which balances the rounding error ε/h and the truncation error h² of a central difference.
var relativeStep = math.Cbrt(epsilon)

// differences approximates the Jacobian at x by central differences with relative steps h_j = ε^⅓·|x_j|:
//
//	∂r/∂x_j ≈ (r(x + h_j·e_j) − r(x − h_j·e_j))/(2·h_j)
//
// A variable that is zero steps relative to the largest, or by ε^⅓ if all are zero; with UnitScaling every step is
// relative to at least 1. Where one side is out of bounds or not finite the other is used alone, with an error of the
// same order:
//
//	∂r/∂x_j ≈ ±(−3·r(x) + 4·r(x ± h_j·e_j) − r(x ± 2·h_j·e_j))/(2·h_j)
//
// A column that neither side gives is NaN.
func (s *state) differences(dst *mat.Dense) {
	copy(s.probe, s.x)
	typical := largest(s.x)
	if typical == 0 {
		typical = 1
	}
	for k, x := range s.x {
		size := s.magnitude(x)
		if size == 0 {
			size = typical
		}
		h := relativeStep * size
		up, down := x+h, x-h
		var fill func(i int) float64
		switch haveUp := s.beside(s.near, k, up); {
		case haveUp && s.beside(s.far, k, down):
			fill = func(i int) float64 { return (s.near[i] - s.far[i]) / (up - down) }
		case haveUp && s.beside(s.far, k, x+2*h):
			fill = func(i int) float64 { return (-3*s.r[i] + 4*s.near[i] - s.far[i]) / (2 * (up - x)) }
		case !haveUp && s.beside(s.near, k, down) && s.beside(s.far, k, x-2*h):
			fill = func(i int) float64 { return (-3*s.r[i] + 4*s.near[i] - s.far[i]) / (2 * (down - x)) }
		default:
			fill = func(int) float64 { return math.NaN() }
		}
		for i := range s.m {
			dst.Set(i, k, fill(i))
		}
	}
}

// beside evaluates the residuals with variable k changed to v, and reports whether v is in bounds and they are finite.
func (s *state) beside(dst []float64, k int, v float64) bool {
	if !(v >= s.low[k] && v <= s.high[k]) {
		return false
	}
	s.probe[k] = v
	s.residual(dst, s.probe)
	s.probe[k] = s.x[k]
	return isFinite(dot(dst, dst))
}
