package fit

import (
	"fmt"
	"math"
	"math/cmplx"

	"realpart/fit/rational"
	"realpart/fit/residual"
	"realpart/models"
	"realpart/models/quantity"
)

// CheckSettings steer [Check]. The zero value means the defaults.
type CheckSettings struct {
	// Accuracy is the meter's stated accuracy: misfits and steps smaller
	// than it are let pass. nil: none was stated.
	Accuracy MeterAccuracy
	// S holds the measured S-parameters where the sweep was measured as
	// such, and Connection how.
	S          []complex128
	Connection Connection
}

// Step is a jump of the level between two neighbouring points, as a change of
// the meter's range gives.
type Step struct {
	At       float64 // Hz, between the two points
	Relative float64 // (|Z| after)/(|Z| that would continue the sweep before) − 1
}

// Judgement is what [Check] says of a measurement.
type Judgement struct {
	// Consistent: some stable, linear, causal and passive impedance passes
	// through the points to their noise (Kramers–Kronig).
	Consistent bool
	// RMS is √(mean |ρ|²) of the best such function's residuals, Noise the
	// standard deviation of real and of imaginary part that they show.
	RMS, Noise float64
	Steps      []Step
	// Warnings say what is wrong; Next what to measure next, a line each.
	Warnings []Warning
	Next     []string
}

// smallestStep is the relative size below which a step is no finding: on data
// without noise the arithmetic makes such steps. It is a hundredth of what
// meters of 0.1 % keep: common practice, no source. In a file of few digits,
// steps of the last place are none either.
const smallestStep = 1e-5

// minCheckPoints is the least number of points that can be judged.
const minCheckPoints = 24

// Check judges a measurement before any circuit is fitted to it: whether any
// part can have such an impedance, how much the points scatter, where the
// level steps, whether the units and signs look right, what the sweep covers
// and what to measure next. freq in Hz, rising; z in Ω.
//
// What no test of a single sweep can see: an error that turns one possible
// impedance into another. A wrong scale of |Z|, a wrong frequency unit, a
// fixture's own R, L and C, a drift slow enough to look like one more
// relaxation, and the sign of the phase of a resistor that shows none.
func Check(freq []float64, z []complex128, s *CheckSettings) (*Judgement, error) {
	if s == nil {
		s = &CheckSettings{}
	}
	if len(freq) < minCheckPoints {
		return nil, &InputError{Found: pointCount(len(freq)), Expected: fmt.Sprintf("at least %d to judge a sweep", minCheckPoints), Hint: "measure more points, or widen --from and --to"}
	}
	settings := &rational.CheckSettings{}
	if s.Accuracy != nil {
		settings.Tolerance = math.Inf(1)
		for i, v := range z {
			if m, ph, ok := s.Accuracy(freq[i], abs(v)); ok {
				settings.Tolerance = min(settings.Tolerance, max(m, ph))
			}
		}
		if math.IsInf(settings.Tolerance, 1) {
			return nil, &InputError{Flag: "--accuracy", Found: "none at any point of the sweep", Expected: "an accuracy that covers it"}
		}
	}
	c, err := rational.Check(freq, z, settings)
	if err != nil {
		return nil, err
	}
	j := &Judgement{Consistent: c.Consistent, RMS: c.Fit.RMS, Noise: c.Fit.Noise}
	least := max(smallestStep, 2*math.Sqrt(roundingSquares(z)/float64(len(z))))
	for _, step := range c.Steps {
		if math.Abs(step.Relative) < least {
			continue
		}
		j.Steps = append(j.Steps, Step{At: step.Freq, Relative: step.Relative})
	}
	mistaken := j.judgeUnits(freq, z, c)
	j.judgePassivity(z, s, c)
	for _, step := range j.Steps {
		j.add("level-step", "The level steps by %+.2g %% at %s: a change of the meter's range, a contact, or two sweeps joined.", 100*step.Relative, quantity.Format(step.At, "Hz", 4))
	}
	if !c.Consistent && len(j.Warnings) == 0 {
		for _, reason := range c.Reasons {
			j.add("inconsistent", "No passive part has such an impedance: %s. A part that changed during the sweep, a wrong compensation, or nonlinearity can do this.", reason)
		}
	}
	if mistaken {
		return j, nil // what follows would be about another sweep
	}
	j.judgeMains(freq, z)
	j.judgeCoverage(freq, z)
	return j, nil
}

func (j *Judgement) add(code, format string, args ...any) {
	j.Warnings = append(j.Warnings, Warning{code, fmt.Sprintf(format, args...)})
}

// judgeUnits compares the phase with Bode's relation φ ≈ 90°·d ln|Z|/d ln ω
// where the sweep is inconsistent: mistakes of sign and unit show as a factor
// between the two. It tells whether it found one.
func (j *Judgement) judgeUnits(freq []float64, z []complex128, c *rational.Consistency) bool {
	if c.Consistent {
		return false
	}
	// Regression through the origin over points far enough apart that noise
	// does not make the slope.
	gap := max(1, len(z)/40)
	var xy, xx, yy float64
	for i := gap; i < len(z)-gap; i++ {
		slope := math.Pi / 2 * math.Log(abs(z[i+gap])/abs(z[i-gap])) / math.Log(freq[i+gap]/freq[i-gap])
		slope = min(max(slope, -math.Pi/2), math.Pi/2) // a sharp resonance is steeper than any phase
		phase := cmplx.Phase(z[i])
		xy += slope * phase
		xx += slope * slope
		yy += phase * phase
	}
	factor, correlation := xy/xx, xy/math.Sqrt(xx*yy)
	const related = 0.7
	active := 2*len(c.Active) > len(z)
	switch {
	case (active || math.Abs(correlation) < related) && swapped(freq, z):
		j.add("columns-swapped", "Exchanged, the real and the imaginary part would make a possible part, as they are they do not: the columns may be swapped; see --columns.")
	case correlation < -related:
		j.add("phase-reversed", "The phase has the opposite sign of what |Z| over frequency calls for (Bode): the meter may give the phase of the admittance, or its sign is reversed.")
	case correlation > related && factor < 0.1:
		j.add("phase-unit", "The phase is %.2g times what |Z| over frequency calls for (Bode): radians may have been read as degrees; see --units phase=rad.", factor)
	default:
		return false
	}
	return true
}

// swapped tells whether exchanging real and imaginary part gives a consistent
// sweep.
func swapped(freq []float64, z []complex128) bool {
	exchanged := make([]complex128, len(z))
	for i, v := range z {
		exchanged[i] = complex(imag(v), real(v))
	}
	c, err := rational.Check(freq, exchanged, nil)
	return err == nil && c.Consistent
}

// judgePassivity counts the points that no passive part can give.
func (j *Judgement) judgePassivity(z []complex128, s *CheckSettings, c *rational.Consistency) {
	if n := len(c.NonPassive); n > 0 {
		text := fmt.Sprintf("%s of %d with a negative resistance, which no passive part has", pointCount(n), len(z))
		if len(c.Active) == 0 {
			text += "; the noise explains them."
		} else {
			text += fmt.Sprintf("; noise does not explain %d of them: a phase error of the meter, a compensation that took away too much, swapped columns, or a wrong sign.", len(c.Active))
		}
		j.add("non-passive-points", "%s", text)
	}
	beyond := 0
	for _, v := range s.S {
		if cmplx.Abs(v) > 1 {
			beyond++
		}
	}
	if beyond > 0 {
		j.add("reflection-above-one", "%s of %d with |S| above 1, which no passive part gives: noise, or the calibration.", pointCount(beyond), len(s.S))
	}
}

// mainsWidth is the relative distance from a harmonic of the mains within
// which a wild point is taken for pick-up, mainsHarmonics how many are looked
// at. Common practice, no source.
const (
	mainsWidth     = 0.015
	mainsHarmonics = 5
)

// judgeMains looks for wild points at 50 Hz, 60 Hz and their harmonics: points
// whose ln Z is further from the line through their two neighbours than six
// times what is usual in the sweep, much more often near the harmonics than
// elsewhere.
func (j *Judgement) judgeMains(freq []float64, z []complex128) {
	n := len(z)
	var off [2][]float64 // of real and imaginary part of ln Z
	for i := 1; i < n-1; i++ {
		t := math.Log(freq[i]/freq[i-1]) / math.Log(freq[i+1]/freq[i-1])
		aRe, aIm := logRatio(z[i] / z[i-1])
		bRe, bIm := logRatio(z[i+1] / z[i-1])
		off[0] = append(off[0], aRe-t*bRe)
		off[1] = append(off[1], aIm-t*bIm)
	}
	usual := [2]float64{residual.MAD(off[0]), residual.MAD(off[1])}
	for _, mains := range []float64{50, 60} {
		var near, far, hits, misses int
		var at float64
		for i := 1; i < n-1; i++ {
			wild := math.Abs(off[0][i-1]) > 6*usual[0] || math.Abs(off[1][i-1]) > 6*usual[1]
			k := math.Round(freq[i] / mains)
			if k < 1 || k > mainsHarmonics || math.Abs(freq[i]/(k*mains)-1) > mainsWidth {
				far++
				if wild {
					misses++
				}
				continue
			}
			near++
			if wild {
				if hits++; hits == 1 {
					at = freq[i]
				}
			}
		}
		// A wild point makes its two neighbours look wild, too.
		if hits > 0 && 4*hits >= near && float64(hits)/float64(near) > 5*float64(max(misses-2*hits, 0))/float64(max(far, 1)) {
			j.add("mains-pick-up", "%s near multiples of %g Hz out of line with the neighbours, the first at %s: mains pick-up. Shield the leads, or choose frequencies between the harmonics.", pointCount(hits), mains, quantity.Format(at, "Hz", 4))
			return
		}
	}
}

// Points that a resonance and a decade want at least. Common practice, no
// source.
const (
	pointsInBandwidth = 3
	pointsPerDecade   = 8
)

// judgeCoverage says what of the part the sweep contains.
func (j *Judgement) judgeCoverage(freq []float64, z []complex128) {
	n := len(freq)
	first, last := freq[0], freq[n-1]
	if decades := math.Log10(last / first); decades >= 1 && float64(n)/decades < pointsPerDecade {
		j.add("few-points", "%.0f points a decade are few; %d or more let noise average out.", float64(n)/decades, 20)
	}
	phase := make([]float64, n)
	for i, v := range z {
		phase[i] = 180 / math.Pi * cmplx.Phase(v)
	}
	series, parallel := turns(freq, phase)
	for _, t := range append(append([]turn(nil), series...), parallel...) {
		inside := 0
		for _, f := range freq {
			if math.Abs(f-t.freq) <= t.freq/t.q/2 {
				inside++
			}
		}
		if t.q > 1 && inside < pointsInBandwidth {
			j.add("few-points-at-resonance", "%s inside the bandwidth of the resonance at %s (Q about %.2g): its loss rests on them alone.", pointCount(inside), quantity.Format(t.freq, "Hz", 3), t.q)
			j.Next = append(j.Next, fmt.Sprintf("measure 20 points from %s to %s to see the resonance", quantity.Format(t.freq*(1-1/t.q), "Hz", 3), quantity.Format(t.freq*(1+1/t.q), "Hz", 3)))
		}
	}
	kind, _ := TellKind(freq, z)
	lowPhase, highPhase := phase[min(2, n-1)], phase[max(0, n-3)]
	next := func(format string, args ...any) { j.Next = append(j.Next, fmt.Sprintf(format, args...)) }
	switch kind {
	case models.CapacitorPart:
		if len(series) == 0 && highPhase < 0 {
			next("go on to %s to see ESL and the self-resonance", quantity.Format(10*last, "Hz", 2))
		}
		if lowPhase > -reactivePhase {
			next("begin at %s to see the capacitance", quantity.Format(first/10, "Hz", 2))
		}
	case models.InductorPart, models.BeadPart:
		if len(parallel) == 0 && highPhase > 0 {
			next("go on to %s to see the parallel resonance and the winding's capacitance", quantity.Format(10*last, "Hz", 2))
		}
		if lowPhase > 88 {
			next("begin at %s to see DCR", quantity.Format(first/100, "Hz", 2))
		}
	case models.ResistorPart:
		if math.Abs(highPhase) < 2 {
			next("go on to %s to see the series inductance or the parallel capacitance", quantity.Format(10*last, "Hz", 2))
		}
	}
}
