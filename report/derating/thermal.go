package derating

import "math"

// heating is a part that a current heats.
type heating struct {
	ambient float64 // °C
	rth     float64 // K/W
	// loss returns the loss in W at a hot spot in °C of the ripple current
	// and of the direct current.
	loss func(t float64) (ripple, direct float64)
	// top is the temperature in °C up to which a hot spot is looked for; a
	// part without a course of resistance over temperature has none (NaN).
	top float64
}

// scanStep in K is the step in which hot spots are looked for: two that lie
// closer count as none.
const scanStep = 0.25

// hotSpot returns the lowest temperature t in °C at which the part takes no
// more heat than it gives off:
//
//	t = ambient + R_th·(k·P_ripple(t) + P_direct(t))
//
// k scales the loss of the ripple, 1 for the current as it is. Up to there the
// part heats itself, and at this point it stays. stable is false if there is
// none up to the top: each kelvin makes more heat than it gives off (thermal
// runaway).
func (h heating) hotSpot(k float64) (t float64, stable bool) {
	excess := func(t float64) float64 {
		ripple, direct := h.loss(t)
		return h.ambient + h.rth*(k*ripple+direct) - t
	}
	if math.IsNaN(h.top) {
		t = h.ambient + excess(h.ambient)
		return t, true
	}
	low := h.ambient
	if excess(low) <= 0 {
		return low, true
	}
	for i := 1; ; i++ {
		high := h.ambient + float64(i)*scanStep
		if excess(high) <= 0 {
			return bisect(low, high, excess), true
		}
		if high > h.top {
			break
		}
		low = high
	}
	// Hot, but a part whose resistance falls still comes to rest.
	if excess(low) < excess(low-scanStep) && excess(h.ambient) > excess(low) {
		ripple, direct := h.loss(low)
		return h.ambient + h.rth*(k*ripple+direct), true
	}
	return math.NaN(), false
}

// bisect returns where a function that is positive at low and not at high
// comes to zero.
func bisect(low, high float64, f func(float64) float64) float64 {
	for range 60 {
		middle := low + (high-low)/2
		if middle <= low || middle >= high {
			break
		}
		if f(middle) > 0 {
			low = middle
		} else {
			high = middle
		}
	}
	return high
}

// largest returns the largest factor k on the loss of the ripple for which the
// part comes to rest at a hot spot of at most limit °C,
//
//	k = max (t − ambient − R_th·P_direct(t))/(R_th·P_ripple(t)),  ambient < t ≤ limit,
//
// and the temperature t of that maximum: below the limit where the part would
// run away before it gets there. It is 0 where nothing is left for ripple, and
// infinite where ripple makes no loss.
func (h heating) largest(limit float64) (k, at float64) {
	room := func(t float64) float64 {
		ripple, direct := h.loss(t)
		left := t - h.ambient - h.rth*direct
		if ripple == 0 && left >= 0 {
			return math.Inf(1)
		}
		return left / (h.rth * ripple)
	}
	k, at = room(limit), limit
	if !math.IsNaN(h.top) {
		for t := limit - scanStep; t > h.ambient; t -= scanStep {
			if v := room(t); v > k {
				k, at = v, t
			}
		}
		if at < limit { // refined by golden section about the best step
			low, high := max(h.ambient, at-scanStep), min(limit, at+scanStep)
			const golden = 0.6180339887498949
			for range 40 {
				a, b := high-golden*(high-low), low+golden*(high-low)
				if room(a) > room(b) {
					high = b
				} else {
					low = a
				}
			}
			at = (low + high) / 2
			k = max(k, room(at))
		}
	}
	return max(k, 0), at
}
