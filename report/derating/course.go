package derating

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"realpart/fit"
)

// kelvin is 0 °C in K.
const kelvin = 273.15

// course is how the resistance at each frequency goes with temperature: ln R
// linearly over 1/T between the sweeps of one part at several temperatures (the
// Arrhenius law of a thermally activated conduction, such as an electrolyte's;
// common practice, no source). Beyond the sweeps it is the larger of going on so
// and of staying as at the end, which is the cautious side both for a resistance
// that rises and for one that falls.
type course struct {
	temperature []float64 // °C, rising
	nodes       []*resistance
	ln          [][]float64 // ln R, [node][frequency]
	base        float64     // °C, of the resistance that factors apply to
	lnBase      []float64   // ln R there
}

// sameTemperature is the difference in K below which two sweeps count as
// measured at one temperature.
const sameTemperature = 2

// newCourse makes a course over the given frequencies from sweeps whose
// temperatures are known.
func newCourse(series []Sweep, base float64, freq []float64) (*course, error) {
	sorted := byTemperature(series)
	for i := 1; i < len(sorted); i++ {
		if a, b := sorted[i-1], sorted[i]; b.Temperature-a.Temperature < sameTemperature {
			return nil, &fit.InputError{Flag: "--at-temperature", Found: fmt.Sprintf("%s at %v °C and %s at %v °C", a.Part, a.Temperature, b.Part, b.Temperature),
				Expected: fmt.Sprintf("temperatures that differ by %d K or more", sameTemperature)}
		}
	}
	if len(sorted) < 2 {
		return nil, &fit.InputError{Flag: "--at-temperature", Found: "one temperature", Expected: "sweeps of the part at two temperatures or more",
			Hint: "state that of the first sweep too, as FILE=T"}
	}
	c := &course{base: base, lnBase: make([]float64, len(freq))}
	for _, s := range sorted {
		node := resistanceOf(s.Fit, freq)
		ln := make([]float64, len(freq))
		for i, r := range node.r {
			ln[i] = math.Log(r)
			if math.IsInf(ln[i], 0) || math.IsNaN(ln[i]) {
				return nil, &fit.InputError{Found: fmt.Sprintf("the resistance %v Ω at %v Hz in the fit of %s", r, freq[i], s.Part),
					Expected: "a circuit with a positive resistance at every temperature", Hint: "give one with --circuit"}
			}
		}
		c.temperature, c.nodes, c.ln = append(c.temperature, s.Temperature), append(c.nodes, node), append(c.ln, ln)
	}
	i, share := c.segment(base)
	for line := range freq {
		c.lnBase[line] = c.lnAt(i, share, line)
	}
	return c, nil
}

// byTemperature returns sweeps in rising order.
func byTemperature(series []Sweep) []Sweep {
	return slices.SortedStableFunc(slices.Values(series), func(a, b Sweep) int { return cmp.Compare(a.Temperature, b.Temperature) })
}

// segment returns the sweep below a temperature in °C and the share of the way
// to the next, in 1/T; below 0 or above 1 beyond the sweeps.
func (c *course) segment(t float64) (i int, share float64) {
	for i < len(c.temperature)-2 && t > c.temperature[i+1] {
		i++
	}
	inverse := func(t float64) float64 { return 1 / (t + kelvin) }
	first := inverse(c.temperature[i])
	return i, (inverse(t) - first) / (inverse(c.temperature[i+1]) - first)
}

// bounded keeps to the cautious side beyond the sweeps.
func (c *course) bounded(i int, share float64, line int) float64 {
	if rises := c.ln[i+1][line] > c.ln[i][line]; rises {
		return max(share, 0)
	}
	return min(share, 1)
}

func (c *course) lnAt(i int, share float64, line int) float64 {
	share = c.bounded(i, share, line)
	return c.ln[i][line] + share*(c.ln[i+1][line]-c.ln[i][line])
}

// factors sets dst to R(t)/R(base) at each frequency.
func (c *course) factors(dst []float64, t float64) {
	i, share := c.segment(t)
	for line := range dst {
		dst[line] = math.Exp(c.lnAt(i, share, line) - c.lnBase[line])
	}
}

// weights returns what ∂ln R_line(t)/∂ln R_line of each node is.
func (c *course) weights(t float64, line int) []float64 {
	w := make([]float64, len(c.nodes))
	for _, at := range []struct{ t, sign float64 }{{t, 1}, {c.base, -1}} {
		i, share := c.segment(at.t)
		share = c.bounded(i, share, line)
		w[i] += at.sign * (1 - share)
		w[i+1] += at.sign * share
	}
	return w
}

// inside tells whether a temperature in °C lies between the sweeps.
func (c *course) inside(t float64) bool {
	return t >= c.temperature[0] && t <= c.temperature[len(c.temperature)-1]
}
