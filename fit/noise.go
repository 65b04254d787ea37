package fit

import (
	"math"
	"slices"
	"sync"
)

// noise tells how well a smooth sweep could be described at all: it holds the
// sizes of the third differences of ln Z over neighbouring points, real and
// imaginary parts, to which a smooth sweep does not contribute, in units of
// the standard deviation of one part of ln Z.
type noise struct{ sizes []float64 }

// leastForNoise is the number of points below which the noise is not told.
const leastForNoise = 8

// measure takes impedances in Ω at rising frequencies and their reciprocals.
func (n *noise) measure(z, inverse []complex128) {
	n.sizes = n.sizes[:0]
	if len(z) < leastForNoise {
		return
	}
	n.sizes = slices.Grow(n.sizes, 2*len(z)-6)[:2*len(z)-6]
	scale := 1 / math.Sqrt(20) // 1 + 9 + 9 + 1
	// The exponentials of first and second differences, and their reciprocals.
	rise, fall := z[2]*inverse[1], z[1]*inverse[2]
	unbend := fall * (z[1] * inverse[0])
	before := z[2]
	unbefore := inverse[2]
	for i, v := range z[3:] {
		inv := inverse[i+3]
		nextRise, nextFall := v*unbefore, before*inv
		q := nextRise * fall * unbend
		unbend = nextFall * rise
		rise, fall, before, unbefore = nextRise, nextFall, v, inv
		// Sizes far below 1 matter alone, so that q − 1 would do for ln q; but
		// a sweep that bends much between its points must not look smooth.
		a, b := math.Abs(real(q)-1), math.Abs(imag(q))
		if !(a+b < 0.01) {
			a, b = logRatio(q)
			a, b = math.Abs(a), math.Abs(b)
		}
		n.sizes[2*i], n.sizes[2*i+1] = a*scale, b*scale
	}
}

// ofResiduals takes the relative residuals of a fit instead: where it describes
// the sweep, they hold its noise alone, and differ from ln Z by what is smooth
// where it doesn't.
func (n *noise) ofResiduals(rho []complex128) {
	scale := 1 / math.Sqrt(20)
	n.sizes = n.sizes[:0]
	for i := 3; i < len(rho); i++ {
		a, b, c, d := rho[i], rho[i-1], rho[i-2], rho[i-3]
		n.sizes = append(n.sizes,
			scale*math.Abs(real(a)-real(d)+3*(real(c)-real(b))),
			scale*math.Abs(imag(a)-imag(d)+3*(imag(c)-imag(b))))
	}
}

// explains reports whether a cost ½Σr² of the relative residual over so many
// points is no more than noise makes: level² a point, give or take a relative
// 1/√points. The level is the median of the sizes over that of normal data, so
// that wild points don't count; on which side of a limit it lies is a matter of
// counting.
func (n *noise) explains(cost float64, points int) bool {
	limit := math.Sqrt(cost / (float64(points) * (1 + 5/math.Sqrt(float64(points)))))
	limit /= 1.482602218505602 // 1/Φ⁻¹(3/4)
	above := 0
	for _, v := range n.sizes {
		if v >= limit {
			above++
		}
	}
	return len(n.sizes) > 0 && 2*above >= len(n.sizes)
}

// describes reports whether a cost over so many points of the sweep is
// explained by its noise, see [noise.explains].
func (p *points) describes(cost float64, points int) bool {
	w := p.prepare()
	if len(w.noise.sizes) == 0 {
		w.noise.measure(p.measured, w.inverse)
	}
	return w.noise.explains(cost, points)
}

// floats is memory for numbers that nobody keeps.
var floats = sync.Pool{New: func() any { return new([]float64) }}

// borrow returns memory for n numbers, for floats.Put afterwards.
func borrow(n int) *[]float64 {
	memory := floats.Get().(*[]float64)
	*memory = slices.Grow((*memory)[:0], n)[:n]
	return memory
}
