package rational

import (
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/stat/distuv"

	"realpart/fit/residual"
)

// A Consistency says whether a stable, linear, causal, passive impedance passes through the points of a sweep (Kramers–Kronig), and what
// speaks against it.
type Consistency struct {
	Consistent bool
	Reasons    []string // one sentence for each finding that makes it inconsistent

	Fit        *Result
	PointNoise float64 // of PointNoise: from neighbouring points alone
	LocalNoise float64 // of the second differences of the residuals, root mean square: the part of Fit.Noise that changes from point to point
	Misfit     float64 // √(Fit.Noise² − LocalNoise²), or 0: the part that does not, relative

	Excess     float64 // median-based scatter of the residuals over PointNoise: about 1 where the function passes through the points
	ExcessP    float64 // probability of such an Excess or more by chance (approximate)
	Lag1       float64 // lag-1 correlation of the residuals, real and imaginary parts averaged
	StructureP float64 // probability by chance of so large a Lag1, of so few runs, or of so smooth residuals (approximate)

	// PhaseSense is ∫φ d ln|Z| / ∫|φ| |d ln|Z||, between −1 and 1: near 1 for a passive part, near −1 where the sign of the phase is reversed.
	PhaseSense float64
	NonPassive []int  // points with Re Z < 0
	Active     []int  // those among them that noise does not explain
	Steps      []Step // level steps; the fit is of the sweep as measured. Not looked for where sign or columns are wrong

	reversed bool
}

// CheckSettings of Check. The zero value of a field means its default.
type CheckSettings struct {
	Settings // of the rational model
	// Tolerance is the largest relative misfit that is let pass however significant it is; default 5e-4. Few meters are smooth to
	// better over their ranges: with a stated accuracy, give that. A level step smaller than Tolerance is listed, but let pass.
	Tolerance float64
}

// Levels of Check, each a probability of a false alarm on a clean sweep.
const (
	excessLevel    = 1e-4
	structureLevel = 1e-4
	stepLevel      = 1e-4
	passiveLevel   = 1e-4
)

// Check judges a sweep of at least 24 points. nil settings are fine. Errors are those of Fit.
//
// Four tests, each at a false-alarm level of 10⁻⁴: the residuals of the rational model against the point-to-point noise; their
// structure over frequency; level steps; and passivity. For a passive impedance, ln|Z| and phase φ are a Hilbert pair of the
// minimum-phase kind, φ(u) = (1/π)∫ ln coth(|u−v|/2)·(d ln|Z|/dv) dv with u, v = ln ω (Bode 1945, Network Analysis and Feedback
// Amplifier Design, chapter 14). As this kernel is positive definite, ∫φ d ln|Z| ≥ 0: it is negative where the sign of the phase is reversed,
// which the rational model alone cannot tell (a negative capacitance is stable, too).
//
// Noise may differ along the sweep: the scatter is compared by medians, and smoothness by root mean squares of the same residuals.
func Check(freq []float64, z []complex128, s *CheckSettings) (*Consistency, error) {
	if err := checkSweep(freq, z, 24); err != nil {
		return nil, err
	}
	var cs CheckSettings
	if s != nil {
		cs = *s
	}
	c, err := cs.Settings.checked(len(freq))
	if err != nil {
		return nil, err
	}
	tolerance := cs.Tolerance
	if tolerance == 0 {
		tolerance = 5e-4
	}
	if !(tolerance > 0) {
		return nil, fmt.Errorf("rational: CheckSettings.Tolerance is %g; must be positive", tolerance)
	}
	d := newSweep(freq, z, c.Margin, ends{!c.NoSlope, !c.NoOrigin})
	g := d.grow(&c)
	out := &Consistency{Consistent: true, Fit: d.result(g), NonPassive: NonPassive(z)}
	if out.PointNoise, err = PointNoise(freq, z); err != nil {
		return nil, err
	}
	out.judgePassivity(freq, z)
	out.judgeResiduals(tolerance)
	// Where sign or columns are wrong, level steps mean nothing, and looking for them in an order that will not settle is slow.
	if !out.reversed && len(out.Active) == 0 {
		out.Steps = d.steps(freq, g, &c, &StepSettings{FalseAlarm: stepLevel, MaxSteps: defaultMaxSteps})
	}
	for _, s := range out.Steps {
		if math.Abs(s.Relative) > tolerance {
			out.against("the level steps by %+.2g %% at %.4g Hz", 100*s.Relative, s.Freq)
		}
	}
	return out, nil
}

func (c *Consistency) judgeResiduals(tolerance float64) {
	fit := c.Fit
	n := len(fit.Residuals)
	re, im := make([]float64, n), make([]float64, n)
	var local, square, fourth float64
	for i, r := range fit.Residuals {
		re[i], im[i] = real(r), imag(r)
		if i >= 2 {
			for _, p := range [][]float64{re, im} {
				v := p[i] - 2*p[i-1] + p[i-2]
				local += v * v / 6
			}
		}
		for _, v := range []float64{real(r), imag(r)} {
			square += v * v
			fourth += v * v * v * v
		}
	}
	c.LocalNoise = math.Sqrt(local / float64(2*(n-2)))
	c.Misfit = math.Sqrt(max(0, fit.Noise*fit.Noise-c.LocalNoise*c.LocalNoise))

	// Where noise is concentrated in a part of the sweep, fewer residuals count: for normal ones Σρ⁴ = 3(Σρ²)²/count.
	count := min(3*square*square/fourth, 2*float64(n))
	upper := func(sigmas float64) float64 { return math.Erfc(sigmas/math.Sqrt2) / 2 }

	// The poles take up a share of the scatter. Standard deviation of ln PointNoise: 1.3/√n, by simulation (TestPointNoise).
	scatter := math.Hypot(residual.MAD(re), residual.MAD(im)) / math.Sqrt2 * math.Sqrt(2*float64(n)/float64(fit.DegreesOfFreedom))
	c.Excess = scatter / c.PointNoise
	c.ExcessP = upper(math.Log(c.Excess) / math.Sqrt((1.3*1.3+0.6)/float64(n)))

	c.Lag1 = (residual.Lag1(re) + residual.Lag1(im)) / 2
	_, pr := residual.Runs(re)
	_, pi := residual.Runs(im)
	// ln(Noise/LocalNoise) has the variance 0.472/count for white residuals, from the autocorrelation −2/3, 1/6 of second differences.
	smooth := math.Log(fit.Noise/c.LocalNoise) / math.Sqrt(0.472/count)
	c.StructureP = min(1, 4*min(pr, pi, upper(c.Lag1*math.Sqrt(count)), upper(smooth)))

	if c.ExcessP < excessLevel && scatter > tolerance {
		c.against("the best stable function misses the points by %.2g relative, %.2g times their point-to-point noise", scatter, c.Excess)
	}
	if c.StructureP < structureLevel && c.Misfit > tolerance {
		c.against("the best stable function leaves a smooth misfit of %.2g relative (lag-1 correlation %.2f)", c.Misfit, c.Lag1)
	}
}

func (c *Consistency) judgePassivity(freq []float64, z []complex128) {
	n := float64(len(z))
	// One point of pure noise in 10⁴ sweeps, and room for the scatter of the noise estimate.
	limit := distuv.UnitNormal.Quantile(1-passiveLevel/n) * (1 + 3*1.3/math.Sqrt(n)) * c.PointNoise
	for _, i := range c.NonPassive {
		if real(z[i]) < -max(limit, 1e-9)*cmplx.Abs(z[i]) {
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
