package models

import "math"

// The loops over the frequencies of a block. Slices are cut to one length
// first, which frees the loops of bounds checks. They are kept out of their
// callers because a loop of its own has all registers to itself, which is
// worth a factor of two. In each, dst may be one of the operands.
//
// The conversions to float64 keep processors that can from fusing a product
// with the sum: the reactances of an ideal resonance then cancel everywhere.

// setImmittance sets dst = constant + j(rising·ω + falling/ω) + parts. Nil parts
// are 0.
//
//go:noinline
func setImmittance(dst, parts []complex128, constant, rising float64, omega []float64, falling float64, inverse []float64) {
	n := len(omega)
	dst, inverse = dst[:n], inverse[:n]
	if parts == nil {
		for k := range dst {
			dst[k] = complex(constant, float64(rising*omega[k])+float64(falling*inverse[k]))
		}
		return
	}
	parts = parts[:n]
	for k := range dst {
		dst[k] = complex(constant+real(parts[k]), float64(rising*omega[k])+float64(falling*inverse[k])+imag(parts[k]))
	}
}

// setReciprocal sets dst to the reciprocal of what setImmittance computes.
func setReciprocal(dst, parts []complex128, constant, rising float64, omega []float64, falling float64, inverse []float64) {
	for {
		k := setOrdinary(dst, parts, constant, rising, omega, falling, inverse)
		if k == len(dst) {
			return
		}
		dst[k] = reciprocal(dst[k])
		k++
		dst, omega, inverse = dst[k:], omega[k:], inverse[k:]
		if parts != nil {
			parts = parts[k:]
		}
	}
}

// minSquare and maxSquare bound the squares of magnitudes from which a
// reciprocal can be formed without care for the range of a float64.
const minSquare, maxSquare = 1e-290, 1e290

// setOrdinary is setReciprocal up to the first number whose square may leave
// the range of a float64. It returns the place of that number, which it leaves
// in dst, or the length.
//
//go:noinline
func setOrdinary(dst, parts []complex128, constant, rising float64, omega []float64, falling float64, inverse []float64) int {
	n := len(omega)
	dst, inverse = dst[:n], inverse[:n]
	if parts == nil {
		square := constant * constant
		for k := range dst {
			im := float64(rising*omega[k]) + float64(falling*inverse[k])
			d := square + im*im
			if !(d > minSquare && d < maxSquare) {
				dst[k] = complex(constant, im)
				return k
			}
			d = 1 / d
			dst[k] = complex(constant*d, -im*d)
		}
		return n
	}
	parts = parts[:n]
	for k := range dst {
		re := constant + real(parts[k])
		im := float64(rising*omega[k]) + float64(falling*inverse[k]) + imag(parts[k])
		d := re*re + im*im
		if !(d > minSquare && d < maxSquare) {
			dst[k] = complex(re, im)
			return k
		}
		d = 1 / d
		dst[k] = complex(re*d, -im*d)
	}
	return n
}

// setSum sets dst = a + b.
//
//go:noinline
func setSum(dst, a, b []complex128) {
	a, b = a[:len(dst)], b[:len(dst)]
	for k := range dst {
		dst[k] = a[k] + b[k]
	}
}

// setFactor sets dst = −above·a². A nil above is 1.
//
//go:noinline
func setFactor(dst, above, a []complex128) {
	a = a[:len(dst)]
	if above == nil {
		for k := range dst {
			re, im := real(a[k]), imag(a[k])
			dst[k] = complex(im*im-re*re, -2*re*im)
		}
		return
	}
	above = above[:len(dst)]
	for k := range dst {
		re, im := real(a[k]), imag(a[k])
		dst[k] = above[k] * complex(im*im-re*re, -2*re*im)
	}
}

// setScaled sets dst = s·factor. A nil factor is 1.
//
//go:noinline
func setScaled(dst []complex128, s float64, factor []complex128) {
	if factor == nil {
		for k := range dst {
			dst[k] = complex(s, 0)
		}
		return
	}
	factor = factor[:len(dst)]
	for k := range dst {
		dst[k] = complex(s*real(factor[k]), s*imag(factor[k]))
	}
}

// setTurned sets dst = j·s·x·factor. A nil factor is 1.
//
//go:noinline
func setTurned(dst []complex128, s float64, x []float64, factor []complex128) {
	x = x[:len(dst)]
	if factor == nil {
		for k := range dst {
			dst[k] = complex(0, s*x[k])
		}
		return
	}
	factor = factor[:len(dst)]
	for k := range dst {
		t := s * x[k]
		dst[k] = complex(-t*imag(factor[k]), t*real(factor[k]))
	}
}

// setProduct sets dst = sign·a·factor. A nil factor is 1.
//
//go:noinline
func setProduct(dst []complex128, sign float64, a, factor []complex128) {
	a = a[:len(dst)]
	if factor == nil {
		for k := range dst {
			dst[k] = complex(sign*real(a[k]), sign*imag(a[k]))
		}
		return
	}
	factor = factor[:len(dst)]
	for k := range dst {
		v := a[k] * factor[k]
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
	if d := re*re + im*im; d > minSquare && d < maxSquare {
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
