package ingest

import (
	"fmt"
	"math"
	"slices"
)

// angleUnit is the outcome of telling degrees from radians.
type angleUnit uint8

const (
	angleUnknown angleUnit = iota
	angleDegrees
	angleRadians
)

func (u angleUnit) dim() string {
	switch u {
	case angleDegrees:
		return "°"
	case angleRadians:
		return "rad"
	}
	return ""
}

// short is the unit as --units takes it.
func (u angleUnit) short() string {
	if u == angleRadians {
		return "rad"
	}
	return "deg"
}

// phaseUnit tells the unit of phase values from the values alone. Beyond π they
// are degrees. Else the slope of ln|Z| decides: where the impedance is of
// minimum phase, Bode's relation gives
//
//	φ ≈ 90° · d ln|Z| / d ln ω
//
// (H. W. Bode, Network Analysis and Feedback Amplifier Design, 1945, ch. XIV;
// here from memory), so the values' regression on 90° times the slope is near 1
// for degrees and near π/180 for radians. The answer is angleUnknown where the
// slope is too small (a resistor) or the factor fits neither. The relation holds
// for |Z| and its phase and for |Y| and its phase alike.
func phaseUnit(freq, mag, phase []float64) (angleUnit, string) {
	if v := largest(phase); v > beyondPi {
		return angleDegrees, fmt.Sprintf("values up to %.4g exceed π", v)
	}
	s := slopeFactor(freq, mag, phase)
	k := s.factor
	unit := s.unit()
	switch {
	case unit == angleDegrees:
		return unit, fmt.Sprintf("the slope of ln|Z| agrees (factor %.2f)", k)
	case unit == angleRadians:
		return unit, fmt.Sprintf("the slope of ln|Z| agrees (factor %.2f)", k*180/math.Pi)
	case s.pairs < 3 || s.predicted < 3:
		return angleUnknown, "the magnitude changes too little to tell"
	case !(s.agreement >= leastAgreement):
		return angleUnknown, "the phase does not follow the slope of ln|Z|"
	}
	return angleUnknown, fmt.Sprintf("the slope of ln|Z| fits neither (factor %.3g)", k)
}

// beyondPi is where an angle can no longer be in radians; a little above π, for
// rounding.
const beyondPi = 1.001 * math.Pi

func largest(v []float64) float64 {
	m := 0.0
	for _, x := range v {
		m = max(m, math.Abs(x))
	}
	return m
}

// The factors that are taken for agreement: capacitors, inductors and beads over
// a few decades give 0.8 to 1.1 (see the test), resonances between two points and
// short sweeps somewhat more.
const (
	leastFactor    = 0.6
	mostFactor     = 1.5
	leastAgreement = 0.8
)

// slopePoints are enough to tell a factor of 57.
const slopePoints = 64

// thinned returns the indices of about slopePoints of the values in ascending
// order, evenly spread, the first and the last among them. They are appended to
// out.
func thinned(v []float64, out []int) []int {
	var order []int // nil while the values stand in order
	if !slices.IsSorted(v) {
		order = sortedOrder(v)
	}
	at := func(i int) int {
		if order != nil {
			return order[i]
		}
		return i
	}
	step := max(1, (len(v)+slopePoints-1)/slopePoints)
	for i := 0; i < len(v)-1; i += step {
		out = append(out, at(i))
	}
	if len(v) > 0 {
		out = append(out, at(len(v)-1))
	}
	return out
}

// slope is how a phase follows the slope of the magnitude.
type slope struct {
	factor    float64 // of the regression
	predicted float64 // rms of 90° times the slope, degrees
	agreement float64 // 0 … 1, the cosine between the two
	pairs     int     // of points
}

// unit is the unit in which the phase would follow the slope.
func (s slope) unit() angleUnit {
	k := s.factor
	switch {
	case s.pairs < 3 || s.predicted < 3 || !(s.agreement >= leastAgreement):
		return angleUnknown
	case leastFactor <= k && k <= mostFactor:
		return angleDegrees
	case leastFactor <= k*180/math.Pi && k*180/math.Pi <= mostFactor:
		return angleRadians
	}
	return angleUnknown
}

// gainsays reports whether there is evidence enough to doubt what a header says:
// a fair agreement over many points, or a very good one over the few spot
// frequencies of a hand-held meter.
func (s slope) gainsays() bool {
	if s.predicted < 3 {
		return false
	}
	return s.pairs >= 8 && s.agreement >= leastAgreement || s.pairs >= 3 && s.agreement >= 0.99
}

// slopeFactor is the regression through the origin of phase on 90°·slope, over
// pairs of points at least 5 % apart in frequency, thinned.
func slopeFactor(freq, mag, phase []float64) slope {
	var sxy, sxx, syy float64
	n := 0
	j := 0
	var few [slopePoints + 1]int
	order := thinned(freq, few[:0])
	for _, i := range order {
		a := order[j]
		if !(freq[i] > 1.05*freq[a]) {
			continue
		}
		j++
		for j < len(order) && freq[i] > 1.05*freq[order[j]] {
			j++
		}
		a = order[j-1]
		if !(freq[a] > 0) || !(mag[a] > 0) || !(mag[i] > 0) {
			continue
		}
		x := 90 * math.Log(mag[i]/mag[a]) / math.Log(freq[i]/freq[a])
		y := (phase[i] + phase[a]) / 2
		if math.IsNaN(x) || math.IsInf(x, 0) || math.Abs(x) > 200 {
			continue // a resonance within the step: no slope
		}
		sxy += x * y
		sxx += x * x
		syy += y * y
		n++
	}
	if n == 0 || sxx == 0 || syy == 0 {
		return slope{pairs: n}
	}
	return slope{factor: sxy / sxx, predicted: math.Sqrt(sxx / float64(n)), agreement: math.Abs(sxy) / math.Sqrt(sxx*syy), pairs: n}
}
