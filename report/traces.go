package report

import (
	"math"
	"math/cmplx"
	"slices"

	"realpart/fit"
)

// Traces are the curves of a fit over frequency, for pictures and tables.
type Traces struct {
	// Freq in Hz and the impedances in Ω of the points that were fitted;
	// Residual is ρ = ln(Z_model/Z_measured).
	Freq                      []float64
	Measured, Model, Residual []complex128
	// CurveFreq and Curve are the model between the points, dense enough to
	// be drawn, with the self-resonances among them.
	CurveFreq []float64
	Curve     []complex128
	// Resonances are the self-resonances inside the sweep.
	Resonances []fit.Resonance
	// Scatter is the standard deviation of the relative error of |Z|, and of
	// the phase in radians, of one point: √(Σ|ρ|²/ν).
	Scatter float64
	// MeterMagnitude and MeterPhase are the meter's stated accuracy at the
	// points: the relative error of |Z| and the error of phase in radians;
	// nil: none was stated.
	MeterMagnitude, MeterPhase []float64
}

// curveDensity is the number of model frequencies a decade. A curve as wide as
// a page shows no more.
const curveDensity = 60

// NewTraces returns the curves of a fit. accuracy is the meter's stated
// accuracy, nil if none was stated; where it says nothing, nothing is drawn.
func NewTraces(r *fit.Result, accuracy fit.MeterAccuracy) *Traces {
	t := &Traces{Freq: r.Freq, Measured: r.Measured, Model: r.Model, Residual: r.Residuals}
	first, last := r.Freq[0], r.Freq[len(r.Freq)-1]
	n := int(math.Ceil(curveDensity*math.Log10(last/first))) + 1
	for i := range n {
		t.CurveFreq = append(t.CurveFreq, first*math.Pow(last/first, float64(i)/float64(max(n-1, 1))))
	}
	t.CurveFreq = append(t.CurveFreq, r.Freq...)
	for _, q := range r.Resonances() {
		if q.InSweep {
			t.Resonances = append(t.Resonances, q)
			// A narrow resonance needs points of its own.
			for _, shift := range []float64{0, 1e-4, 3e-4, 1e-3, 3e-3, 1e-2} {
				t.CurveFreq = append(t.CurveFreq, q.Freq*(1-shift), q.Freq*(1+shift))
			}
		}
	}
	slices.Sort(t.CurveFreq)
	t.CurveFreq = slices.Compact(slices.DeleteFunc(t.CurveFreq, func(f float64) bool { return f < first || f > last }))
	t.Curve = make([]complex128, len(t.CurveFreq))
	r.Circuit.NewEvaluator(t.CurveFreq).Impedance(t.Curve, r.Values())
	sum := 0.0
	for _, v := range r.Residuals {
		sum += real(v)*real(v) + imag(v)*imag(v)
	}
	if r.DegreesOfFreedom > 0 {
		t.Scatter = math.Sqrt(sum / float64(r.DegreesOfFreedom))
	}
	if accuracy != nil {
		for i, f := range r.Freq {
			magnitude, phase, ok := accuracy(f, cmplx.Abs(r.Measured[i]))
			if !ok {
				magnitude, phase = math.NaN(), math.NaN()
			}
			t.MeterMagnitude = append(t.MeterMagnitude, magnitude)
			t.MeterPhase = append(t.MeterPhase, phase)
		}
	}
	return t
}

// ModelSweep returns the fitted circuit's impedance in Ω at the frequencies in
// Hz that were fitted: the sweep to be written where the model is wanted as a
// file.
func ModelSweep(r *fit.Result) (freq []float64, z []complex128) {
	return slices.Clone(r.Freq), slices.Clone(r.Model)
}

// degrees turns radians into degrees.
const degrees = 180 / math.Pi

// Phase returns the phase of z in degrees.
func Phase(z complex128) float64 { return degrees * cmplx.Phase(z) }
