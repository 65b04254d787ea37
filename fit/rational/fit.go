package rational

import (
	"errors"
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"
)

// Settings of Fit. The zero value of a field means its default.
type Settings struct {
	// MaxPoles is the largest number of poles (a pair counts two); default 30, and never more than a third of the points.
	MaxPoles int
	// Iterations is the number of relocations and of polishing steps for each trial order; default 12.
	Iterations int
	// Significance of the F test by which an added pole must earn its place; default 0.01. It is divided by the number of places
	// where the pole could have gone (Bonferroni): the search takes the best of them, and in pure noise the best of 200 looks good.
	Significance float64
	// Margin is how far outside the sweep poles may lie, as a ratio of frequency; default 10. What lies farther out is represented
	// by the constant, slope and origin terms. A large margin reproduces exact data better, a small one sees more faults.
	Margin float64
	// RealPolesOnly excludes resonances.
	RealPolesOnly bool
	// PositiveResidues demands Constant, Slope, Origin and all residues ≥ 0, an R-C network; needs RealPolesOnly.
	PositiveResidues bool
	// NoSlope and NoOrigin leave out the terms s·e and q/s.
	NoSlope, NoOrigin bool
}

// checked returns s with its defaults filled in.
func (s *Settings) checked(points int) (Settings, error) {
	var c Settings
	if s != nil {
		c = *s
	}
	set := func(v *int, d int) {
		if *v == 0 {
			*v = d
		}
	}
	setFloat := func(v *float64, d float64) {
		if *v == 0 {
			*v = d
		}
	}
	set(&c.MaxPoles, 30)
	set(&c.Iterations, 12)
	setFloat(&c.Significance, 0.01)
	setFloat(&c.Margin, 10)
	switch {
	case c.MaxPoles < 0:
		return c, fmt.Errorf("rational: Settings.MaxPoles is %d; must not be negative", c.MaxPoles)
	case c.Iterations < 1:
		return c, fmt.Errorf("rational: Settings.Iterations is %d; must be positive", c.Iterations)
	case !(c.Significance > 0 && c.Significance < 1):
		return c, fmt.Errorf("rational: Settings.Significance is %g; must lie between 0 and 1", c.Significance)
	case !(c.Margin >= 1) || math.IsInf(c.Margin, 0):
		return c, fmt.Errorf("rational: Settings.Margin is %g; must be finite and at least 1", c.Margin)
	case c.PositiveResidues && !c.RealPolesOnly:
		return c, errors.New("rational: Settings.PositiveResidues needs RealPolesOnly")
	}
	c.MaxPoles = min(c.MaxPoles, points/3)
	return c, nil
}

// An OrderStep is one order that was tried.
type OrderStep struct {
	Order        int
	Coefficients int
	RMS          float64 // √(mean|ρ|²)
	P            float64 // of the F test against the last accepted order, times the number of places tried; 1 for the first
	Accepted     bool
}

// Result of Fit.
type Result struct {
	Model
	Order int // number of poles

	// RMS is √(mean |ρ|²) with ρ = ln(Z_model/Z): relative error of |Z| and phase error in radians taken together.
	RMS float64
	// Noise is the estimated standard deviation of the relative error of |Z|, and of the phase in radians, of one point:
	// √(Σ|ρ|²/DegreesOfFreedom).
	Noise            float64
	Residuals        []complex128 // ρ of each point
	DegreesOfFreedom int          // 2·points − coefficients
	Trace            []OrderStep
}

// exactRMS is the residual taken for rounding, which a Q of 10⁵ magnifies: there is nothing left to fit.
const exactRMS = 1e-11

// Fit approximates the impedances z (Ω) at the frequencies freq (Hz, rising) by a stable rational function. nil settings are fine.
// It returns an error for settings out of range, for fewer than 8 points, and for points that cannot be used (frequency not positive
// or not rising, impedance zero or not finite). The arguments are not changed; the same input gives the same bits.
func Fit(freq []float64, z []complex128, s *Settings) (*Result, error) {
	c, err := s.checked(len(freq))
	if err != nil {
		return nil, err
	}
	if err := checkSweep(freq, z, 8); err != nil {
		return nil, err
	}
	d := newSweep(freq, z, c.Margin, ends{!c.NoSlope, !c.NoOrigin})
	g := d.grow(&c)
	return d.result(g), nil
}

// growth is the outcome of the order search: the accepted states in rising order.
type growth struct {
	accepted []*state
	trace    []OrderStep
}

func (g *growth) last() *state { return g.accepted[len(g.accepted)-1] }

func (d *sweep) result(g *growth) *Result {
	st := g.last()
	n := len(d.x)
	res := &Result{Model: st.m.model(d.w0), Order: st.m.order(), Trace: g.trace, DegreesOfFreedom: 2*n - d.coefficients(st.m)}
	res.RMS = math.Sqrt(st.rss / float64(n))
	res.Noise = math.Sqrt(st.rss / float64(res.DegreesOfFreedom))
	res.Residuals = make([]complex128, n)
	for i := range n {
		res.Residuals[i] = complex(st.r[i], st.r[n+i])
	}
	return res
}

// grow raises the order until neither of two successive additions is significant.
func (d *sweep) grow(c *Settings) *growth {
	m := &sections{}
	d.solveLinear(m, c.PositiveResidues)
	base := d.polish(d.state(m), c.Iterations, 1e-6, c.PositiveResidues)
	g := &growth{accepted: []*state{base}, trace: []OrderStep{d.orderStep(base, 1, true)}}
	from := base
	failures := 0
	for from.m.order() < c.MaxPoles && base.rss > exactRMS*exactRMS*float64(len(d.x)) {
		var best *state
		bestP := math.Inf(1)
		for _, start := range d.additions(from, c) {
			st := d.refine(start, c)
			if st == nil {
				continue
			}
			if p := d.significance(base, st); best == nil || p < bestP || p == bestP && st.rss < best.rss {
				best, bestP = st, p
			}
		}
		if best == nil {
			break
		}
		ok := bestP < c.Significance
		g.trace = append(g.trace, d.orderStep(best, min(bestP, 1), ok))
		if ok {
			base, failures = best, 0
			g.accepted = append(g.accepted, base)
		} else if failures++; failures == 2 {
			break
		}
		from = best
	}
	final := d.polish(base, 4*c.Iterations, 1e-9, c.PositiveResidues)
	g.accepted[len(g.accepted)-1] = final
	return g
}

func (d *sweep) orderStep(st *state, p float64, ok bool) OrderStep {
	return OrderStep{Order: st.m.order(), Coefficients: d.coefficients(st.m), RMS: math.Sqrt(st.rss / float64(len(d.x))), P: p, Accepted: ok}
}

// significance is the p-value of the F test of the larger model against the smaller, times the number of places searched.
func (d *sweep) significance(small, large *state) float64 {
	k0, k1 := d.coefficients(small.m), d.coefficients(large.m)
	dof := 2*len(d.x) - k1
	if k1 <= k0 || dof < 1 || !(large.rss < small.rss) {
		return math.Inf(1)
	}
	f := (small.rss - large.rss) / float64(k1-k0) / (large.rss / float64(dof))
	places := d.places(k1-k0 >= 4)
	return places * distuv.F{D1: float64(k1 - k0), D2: float64(dof)}.Survival(f)
}

// places is how many distinguishable places a new pole has: a sharp pair, one at every point; a real pole, two a decade.
func (d *sweep) places(pair bool) float64 {
	if pair {
		return float64(len(d.x))
	}
	return 1 + 2*math.Log10(d.band.hi/d.band.lo)
}

// refine finds the poles from a start: relocation, then polishing.
func (d *sweep) refine(m *sections, c *Settings) *state {
	want := m.order()
	d.solveLinear(m, c.PositiveResidues)
	best := d.state(m)
	prev := best
	for range c.Iterations {
		next := d.relocate(prev.m, c.RealPolesOnly)
		if next == nil || next.order() != want {
			break
		}
		d.solveLinear(next, c.PositiveResidues)
		st := d.state(next)
		if st.rss < best.rss {
			best = st
		}
		// Noise makes relocation wander about its end; polishing is what finishes.
		if st.rss > 0.9*prev.rss {
			break
		}
		prev = st
	}
	if math.IsInf(best.rss, 0) {
		return nil
	}
	return d.polish(best, c.Iterations, 1e-4, c.PositiveResidues)
}

// additions returns starts with one more real pole and with one more pair, placed where the residual projects on them best,
// beyond what the parameters already there can take up.
func (d *sweep) additions(st *state, c *Settings) []*sections {
	f, r := d.linearised(st, true)
	f.project(r)
	n := len(d.x)
	w := make([]complex128, n)
	for i, x := range d.x {
		w[i] = recip(st.m.at(x))
	}
	var out []*sections

	// Real poles, six a decade.
	bestA, gain := 0.0, -1.0
	for a := d.band.lo; a <= d.band.hi*1.0001; a *= math.Pow(10, 1.0/6) {
		col := realColumn(n, func(i int) complex128 { return w[i] * recip(complex(a, d.x[i])) })
		norm := floats.Dot(col, col)
		f.project(col)
		rest := floats.Dot(col, col)
		if !(rest > 1e-20*norm) {
			continue
		}
		g := floats.Dot(col, r)
		if g = g * g / rest; g > gain {
			bestA, gain = a, g
		}
	}
	if bestA > 0 {
		m := st.m.clone()
		m.one = append(m.one, first{a: bestA})
		out = append(out, m)
	}
	if c.RealPolesOnly || st.m.order()+2 > c.MaxPoles {
		return out
	}

	var bestPair second
	gain = -1
	for _, p := range d.pairPlaces(r) {
		u := make([]complex128, n)
		for i, x := range d.x {
			u[i] = w[i] * recip(p.denominator(x))
		}
		cols := [][]float64{
			realColumn(n, func(i int) complex128 { return complex(0, d.x[i]) * u[i] }),
			realColumn(n, func(i int) complex128 { return u[i] }),
		}
		for _, c := range cols {
			f.project(c)
		}
		pair := factor(cols, false)
		y := pair.project(append([]float64(nil), r...))
		if g := y[0]*y[0] + y[1]*y[1]; g > gain {
			bestPair, gain = p, g
		}
	}
	if gain >= 0 {
		m := st.m.clone()
		m.two = append(m.two, bestPair)
		out = append(out, m)
	}
	return out
}

// pairPlaces returns the pairs that additions tries: log-spaced ones of several dampings, and sharp ones at the largest residuals.
func (d *sweep) pairPlaces(r []float64) []second {
	n := len(d.x)
	var out []second
	add := func(w, damping float64) { out = append(out, second{alpha: damping * w, beta: w * w}) }
	lo, hi := d.x[0], d.x[n-1]
	steps := int(math.Ceil(4 * math.Log10(hi/lo)))
	steps = max(steps, 8)
	for i := range steps + 1 {
		w := lo * math.Pow(hi/lo, float64(i)/float64(steps))
		for _, damping := range []float64{0.7, 0.2, 0.05} {
			add(w, damping)
		}
	}
	size := func(i int) float64 { return cmplx.Abs(complex(r[i], r[n+i])) }
	taken := make([]bool, n)
	for range 6 {
		at := -1
		for i := range n {
			if !taken[i] && (at < 0 || size(i) > size(at)) {
				at = i
			}
		}
		if at < 0 {
			break
		}
		for i := max(at-2, 0); i <= min(at+2, n-1); i++ {
			taken[i] = true
		}
		spacing := (d.x[min(at+1, n-1)] - d.x[max(at-1, 0)]) / 2
		for _, share := range []float64{0.3, 1, 4} {
			add(d.x[at], min(share*spacing/d.x[at], 0.5))
		}
	}
	return out
}
