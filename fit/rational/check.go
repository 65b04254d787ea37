package rational

import (
	"fmt"
	"math"
	"math/cmplx"

	"realpart/fit/residual"
)

// A Consistency says whether a stable, linear, causal, passive impedance passes through the points of a sweep (Kramers–Kronig), and what
// speaks against it.
type Consistency struct {
	Consistent bool
	Reasons    []string // one sentence for each finding that makes it inconsistent

	Fit        *Result
	PointNoise float64 // of PointNoise: from neighbouring points alone
	Excess     float64 // Fit.Noise/PointNoise: about 1 where the function passes through the points within their noise
	ExcessP    float64 // probability of such an Excess or more by chance (approximate)
	Lag1       float64 // lag-1 correlation of the residuals, real and imaginary parts averaged
	StructureP float64 // probability of such a correlation, or of so few runs, by chance

	// PhaseSense is ∫φ d ln|Z| / ∫|φ| |d ln|Z||, between −1 and 1: near 1 for a passive part, near −1 where the sign of the phase is reversed.
	PhaseSense float64
	NonPassive []int  // points with Re Z < 0
	Active     []int  // those among them that noise does not explain: Re Z < −4·PointNoise·|Z|
	Steps      []Step // level steps; the fit is of the sweep as measured. Not looked for where sign or columns are wrong

	reversed bool
}

// Levels of Check, each a probability of a false alarm on a clean sweep.
const (
	excessLevel    = 1e-4
	structureLevel = 1e-4
	stepLevel      = 1e-4
	// A residual this small is beyond every meter: whatever structure it has is of the calculation.
	negligible = 1e-5
)

// Check judges a sweep of at least 24 points. Settings are those of the rational model; nil is fine. Errors are those of Fit.
//
// Four tests, each at a false-alarm level of 10⁻⁴: the residual of the rational model against the point-to-point noise; its
// structure over frequency; level steps; and passivity. For a passive impedance, ln|Z| and phase φ are a Hilbert pair of the
// minimum-phase kind, φ(u) = (1/π)∫ ln coth(|u−v|/2)·(d ln|Z|/dv) dv with u, v = ln ω (Bode 1945, Network Analysis and Feedback
// Amplifier Design, chapter 14). As this kernel is positive definite, ∫φ d ln|Z| ≥ 0: it is negative where the sign of the phase is reversed,
// which the rational model alone cannot tell (a negative capacitance is stable, too).
func Check(freq []float64, z []complex128, s *Settings) (*Consistency, error) {
	if err := checkSweep(freq, z, 24); err != nil {
		return nil, err
	}
	c, err := s.checked(len(freq))
	if err != nil {
		return nil, err
	}
	d := newSweep(freq, z, c.Margin, ends{!c.NoSlope, !c.NoOrigin})
	g := d.grow(&c)
	out := &Consistency{Fit: d.result(g), NonPassive: NonPassive(z)}
	if out.PointNoise, err = PointNoise(freq, z); err != nil {
		return nil, err
	}
	out.judge(freq, z)
	// Where sign or columns are wrong, level steps mean nothing, and looking for them in an order that will not settle is slow.
	if !out.reversed && len(out.Active) == 0 {
		out.Steps = d.steps(freq, g, &c, &StepSettings{FalseAlarm: stepLevel})
	}
	for _, s := range out.Steps {
		if math.Abs(s.Relative) > negligible {
			out.against("the level steps by %+.2g %% at %.4g Hz", 100*s.Relative, s.Freq)
		}
	}
	return out, nil
}

func (c *Consistency) judge(freq []float64, z []complex128) {
	n := len(z)
	fit := c.Fit
	c.Consistent = true

	c.Excess = fit.Noise / c.PointNoise
	// Standard deviation of ln PointNoise: 1.3/√n, by simulation (TestPointNoise).
	spread := math.Sqrt(1.3*1.3/float64(n) + 1/(2*float64(fit.DegreesOfFreedom)))
	c.ExcessP = math.Erfc(math.Log(c.Excess)/spread/math.Sqrt2) / 2
	if c.ExcessP < excessLevel && fit.RMS > negligible {
		c.against("the best stable function misses the points by %.3g relative, %.2g times their point-to-point noise", fit.Noise, c.Excess)
	}

	re, im := make([]float64, n), make([]float64, n)
	for i, r := range fit.Residuals {
		re[i], im[i] = real(r), imag(r)
	}
	c.Lag1 = (residual.Lag1(re) + residual.Lag1(im)) / 2
	_, pr := residual.Runs(re)
	_, pi := residual.Runs(im)
	pl := math.Erfc(c.Lag1*math.Sqrt(2*float64(n))/math.Sqrt2) / 2
	c.StructureP = min(1, 3*min(pr, pi, pl))
	if c.StructureP < structureLevel && fit.RMS > negligible {
		c.against("the residuals of the best stable function have structure over frequency (lag-1 correlation %.2f)", c.Lag1)
	}

	for _, i := range c.NonPassive {
		if real(z[i]) < -4*max(c.PointNoise, negligible)*cmplx.Abs(z[i]) {
			c.Active = append(c.Active, i)
		}
	}
	if len(c.Active) > 0 {
		c.against("the real part is negative beyond the noise at %d points, first at %.4g Hz", len(c.Active), freq[c.Active[0]])
	}

	var significance float64
	c.PhaseSense, significance = phaseSense(z, c.PointNoise)
	if c.PhaseSense < -0.5 && significance < -5 {
		c.reversed = true
		c.against("the phase has the wrong sign: |Z| falls where the phase is positive and rises where it is negative")
	}
}

func (c *Consistency) against(format string, a ...any) {
	c.Reasons = append(c.Reasons, fmt.Sprintf(format, a...))
	c.Consistent = false
}

// phaseSense returns ∫φ d ln|Z| as a share of ∫|φ| |d ln|Z||, and divided by its standard deviation for the noise sigma.
// By summation by parts the noise of neighbouring magnitudes cancels in the integral.
func phaseSense(z []complex128, sigma float64) (share, significance float64) {
	var sum, size, variance float64
	for i := 1; i < len(z); i++ {
		phi := (cmplx.Phase(z[i]) + cmplx.Phase(z[i-1])) / 2
		step := math.Log(cmplx.Abs(z[i]) / cmplx.Abs(z[i-1]))
		sum += phi * step
		size += math.Abs(phi * step)
		if i+1 < len(z) {
			turn := (cmplx.Phase(z[i+1]) - cmplx.Phase(z[i-1])) / 2
			variance += turn*turn + (step*step)/2
		}
	}
	variance += (math.Pow(cmplx.Phase(z[0]), 2) + math.Pow(cmplx.Phase(z[len(z)-1]), 2))
	if size == 0 {
		return 0, 0
	}
	return sum / size, sum / (sigma*math.Sqrt(variance) + 1e-300)
}
