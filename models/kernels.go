package models

import "math"

// The loops over the frequencies of a block. Slices are cut to one length
// first, which frees the loops of bounds checks. In an argument list, dst is
// written and has the length of the others.

// setImmittance sets dst = constant + j(rising·ω + falling/ω).
func setImmittance(dst []complex128, constant, rising float64, omega []float64, falling float64, inverse []float64) {
	dst, inverse = dst[:len(omega)], inverse[:len(omega)]
	for k, w := range omega {
		dst[k] = complex(constant, rising*w+falling*inverse[k])
	}
}

// setSum sets dst = a + constant + j(rising·ω + falling/ω).
func setSum(dst, a []complex128, constant, rising float64, omega []float64, falling float64, inverse []float64) {
	dst, a, inverse = dst[:len(omega)], a[:len(omega)], inverse[:len(omega)]
	for k, w := range omega {
		dst[k] = complex(constant+real(a[k]), rising*w+falling*inverse[k]+imag(a[k]))
	}
}

// add adds a to dst.
func add(dst, a []complex128) {
	dst = dst[:len(a)]
	for k, v := range a {
		dst[k] += v
	}
}

// invert sets dst = 1/dst.
func invert(dst []complex128) {
	for k, v := range dst {
		dst[k] = reciprocal(v)
	}
}

// setSquare sets dst = −a².
func setSquare(dst, a []complex128) {
	dst = dst[:len(a)]
	for k, v := range a {
		re, im := real(v), imag(v)
		dst[k] = complex(im*im-re*re, -2*re*im)
	}
}

// setProductSquare sets dst = −factor·a².
func setProductSquare(dst, factor, a []complex128) {
	dst, factor = dst[:len(a)], factor[:len(a)]
	for k, v := range a {
		re, im := real(v), imag(v)
		dst[k] = factor[k] * complex(im*im-re*re, -2*re*im)
	}
}

// scale sets dst = s·factor; a nil factor is 1.
func scale(dst []complex128, s float64, factor []complex128) {
	if factor == nil {
		for k := range dst {
			dst[k] = complex(s, 0)
		}
		return
	}
	factor = factor[:len(dst)]
	for k, f := range factor {
		dst[k] = complex(s*real(f), s*imag(f))
	}
}

// turn90 sets dst = j·s·x·factor; a nil factor is 1.
func turn90(dst []complex128, s float64, x []float64, factor []complex128) {
	x = x[:len(dst)]
	if factor == nil {
		for k := range dst {
			dst[k] = complex(0, s*x[k])
		}
		return
	}
	factor = factor[:len(dst)]
	for k, f := range factor {
		t := s * x[k]
		dst[k] = complex(-t*imag(f), t*real(f))
	}
}

// multiply sets dst = sign·a·factor; a nil factor is 1.
func multiply(dst []complex128, sign float64, a, factor []complex128) {
	a = a[:len(dst)]
	if factor == nil {
		for k, v := range a {
			dst[k] = complex(sign*real(v), sign*imag(v))
		}
		return
	}
	factor = factor[:len(dst)]
	for k, f := range factor {
		v := a[k] * f
		dst[k] = complex(sign*real(v), sign*imag(v))
	}
}

// beyondAnyPart stands for 1/0: more than any impedance or admittance within
// [MinValue] and [MaxValue] (up to 1e82 for the impedance of a lossy
// capacitor, 1e52 for an admittance), and so little that its square times
// that of an admittance, as [Evaluator.Jacobian] forms, is a float64.
const beyondAnyPart = 1e90

// reciprocal returns 1/z. Go's complex division takes care of infinities at
// the cost of a call; here only magnitudes whose square leaves the range of
// a float64 need care, and 1/0 becomes beyondAnyPart, so that an ideal
// parallel resonance stays computable.
func reciprocal(z complex128) complex128 {
	re, im := real(z), imag(z)
	if d := re*re + im*im; d > 1e-290 && d < 1e290 {
		d = 1 / d
		return complex(re*d, -im*d)
	}
	s := max(math.Abs(re), math.Abs(im))
	if s == 0 {
		return beyondAnyPart
	}
	re /= s
	im /= s
	d := 1 / (re*re + im*im) / s
	return complex(re*d, -im*d)
}
