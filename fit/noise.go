package fit

import "math"

// noise tells how well a smooth sweep could be described at all: it holds the
// sizes of the third differences of ln Z over neighbouring points, real and
// imaginary parts, to which a smooth sweep does not contribute, in units of
// the standard deviation of one part of ln Z.
type noise struct{ sizes []float64 }

// newNoise takes impedances in Ω at rising frequencies and their reciprocals.
func newNoise(z, inverse []complex128) *noise {
	const least = 8
	if len(z) < least {
		return &noise{}
	}
	n := &noise{sizes: make([]float64, 0, 2*len(z))}
	scale := 1 / math.Sqrt(20) // 1 + 9 + 9 + 1
	_, before := second(z, inverse, 2)
	for i := 3; i < len(z); i++ {
		bend, unbend := second(z, inverse, i)
		// Sizes far below 1 matter alone, so that q − 1 would do for ln q; but
		// a sweep that bends much between its points must not look smooth.
		q := bend * before
		before = unbend
		a, b := real(q)-1, imag(q)
		if math.Abs(a)+math.Abs(b) > 0.01 {
			a, b = logRatio(q)
		}
		n.sizes = append(n.sizes, math.Abs(a)*scale, math.Abs(b)*scale)
	}
	return n
}

// second returns the exponential of the second difference of ln Z that ends at
// point i, and its reciprocal.
func second(z, inverse []complex128, i int) (bend, unbend complex128) {
	middle, un := z[i-1], inverse[i-1]
	return (z[i] * un) * (z[i-2] * un), (inverse[i] * middle) * (inverse[i-2] * middle)
}

// explains reports whether a cost ½Σr² of the relative residual over so many
// points is no more than noise makes, noise² a point give or take a relative
// 1/√points. Noise is the median of the sizes over that of normal data, so
// that wild points don't count; which side of a cost it lies on is a matter of
// counting.
func (n *noise) explains(cost float64, points int) bool {
	limit := math.Sqrt(cost/(float64(points)*(1+5/math.Sqrt(float64(points))))) / 1.482602218505602 // 1/Φ⁻¹(3/4)
	above := 0
	for _, v := range n.sizes {
		if v >= limit {
			above++
		}
	}
	return len(n.sizes) > 0 && 2*above >= len(n.sizes)
}
