package rational

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"math/cmplx"
	"slices"
)

// A LadderKind says what a ladder is made of. All four are Foster forms: every section has its own positive R and C or L.
type LadderKind int

const (
	// SeriesRC is R₀ + 1/(jωC₀) + Σ (R_k ∥ C_k) in series, R/(1 + jωR·C) each: losses that fall with frequency.
	SeriesRC LadderKind = iota
	// SeriesRL is R₀ + jωL₀ + Σ (R_k ∥ L_k) in series, jωL·R/(R + jωL) each: skin effect, core loss.
	SeriesRL
	// ParallelRC is R₀ ∥ C₀ ∥ the branches R_k + 1/(jωC_k): a capacitor with dielectric absorption.
	ParallelRC
	// ParallelRL is R₀ ∥ L₀ ∥ the branches R_k + jωL_k.
	ParallelRL
)

var ladderNames = [...]string{"SeriesRC", "SeriesRL", "ParallelRC", "ParallelRL"}

func (k LadderKind) String() string {
	if k < 0 || int(k) >= len(ladderNames) {
		return fmt.Sprintf("LadderKind(%d)", int(k))
	}
	return ladderNames[k]
}

// A Foster is a ladder network with positive elements.
type Foster struct {
	Kind LadderKind
	R0   float64 // Ω; the single resistor, 0 where there is none
	X0   float64 // F or H; the single capacitor or inductor, 0 where there is none
	R    []float64
	X    []float64 // F or H; R[k] and X[k] make section k, time constants rising

	MaxError   float64 // largest |Z_ladder/Z − 1| on the dense grid
	MaxErrorAt float64 // Hz
	RealError  float64 // largest relative error of the real part on the dense grid: the ESR may be small beside |Z|
	Points     int     // of the dense grid, log-spaced, ends included
}

// Sections is the number of R-C or R-L sections, R0 and X0 not counted.
func (n *Foster) Sections() int { return len(n.R) }

// At returns the impedance in Ω at freq in Hz.
func (n *Foster) At(freq float64) complex128 {
	s := complex(0, 2*math.Pi*freq)
	c := func(v float64) complex128 { return complex(v, 0) }
	reactance := func(x float64) complex128 {
		if n.Kind == SeriesRC || n.Kind == ParallelRC {
			return 1 / (s * c(x))
		}
		return s * c(x)
	}
	var sum complex128 // of impedances, or of admittances
	series := n.Kind == SeriesRC || n.Kind == SeriesRL
	add := func(z complex128) {
		if series {
			sum += z
		} else {
			sum += 1 / z
		}
	}
	if n.R0 != 0 {
		add(c(n.R0))
	}
	if n.X0 != 0 {
		add(reactance(n.X0))
	}
	for k, r := range n.R {
		x := reactance(n.X[k])
		if series {
			add(c(r) * x / (c(r) + x))
		} else {
			add(c(r) + x)
		}
	}
	if series {
		return sum
	}
	return 1 / sum
}

// ErrLadder is wrapped by the error of a ladder that does not reach its tolerance: too tight a tolerance, or a target that is not of the kind
// (its sign of reactance, or its real part rising where the ladder's can only fall).
var ErrLadder = errors.New("tolerance not reached")

// maxSections is where the search gives up.
const maxSections = 64

// Ladder approximates target between fMin and fMax (Hz) by the smallest number of sections found that keeps the relative error
// |Z_ladder/Z − 1| within tolerance at every frequency of a dense grid (200 points a decade). All element values are positive.
//
// Note that a tolerance relative to |Z| says little about a small real part; see LadderReal.
func Ladder(target func(freq float64) complex128, fMin, fMax, tolerance float64, kind LadderKind) (*Foster, error) {
	return LadderReal(target, fMin, fMax, tolerance, math.Inf(1), kind)
}

// LadderReal is Ladder with a second demand: the real part, too, within realTolerance of itself, as the ESR of a low-loss capacitor
// needs. An infinite realTolerance demands nothing.
//
// For each number of sections, time constants start log-spaced over the band with amplitudes by non-negative least squares; all logarithms
// are then refined by damped Gauss–Newton steps on ln(Z_ladder/Z), the points reweighted by their error until the largest is least
// (Lawson's method; Lawson 1961, Contributions to the theory of linear least maximum approximation). As a
// sum of positive terms cancels nothing, the logarithms are well conditioned.
func LadderReal(target func(freq float64) complex128, fMin, fMax, tolerance, realTolerance float64, kind LadderKind) (*Foster, error) {
	switch {
	case !(fMin > 0) || !(fMax > fMin) || math.IsInf(fMax, 0):
		return nil, fmt.Errorf("rational: ladder from %g Hz to %g Hz; the range must be positive and rise", fMin, fMax)
	case !(tolerance > 0) || !(realTolerance > 0):
		return nil, fmt.Errorf("rational: ladder tolerances %g and %g; must be positive", tolerance, realTolerance)
	case kind < 0 || int(kind) >= len(ladderNames):
		return nil, fmt.Errorf("rational: unknown ladder kind %d", int(kind))
	}
	decades := math.Log10(fMax / fMin)
	l, err := newLadderProblem(target, fMin, fMax, 24+int(20*decades), kind)
	if err != nil {
		return nil, err
	}
	l.tol, l.realTol = tolerance, realTolerance
	dense, err := newLadderProblem(target, fMin, fMax, 2+int(math.Ceil(200*decades)), kind)
	if err != nil {
		return nil, err
	}
	dense.tol, dense.realTol = tolerance, realTolerance

	// Double until it fits, then halve the bracket: the error falls steadily with the number of sections.
	best := map[int]*relaxations{}
	fits := func(k int) bool {
		m := l.fit(k, dense)
		if m == nil {
			return false
		}
		best[k] = m
		return true
	}
	low, high := -1, 0
	for !fits(high) {
		if low = high; low >= maxSections {
			return nil, fmt.Errorf("rational: %v ladder from %g Hz to %g Hz to %g with %d sections: %w", kind, fMin, fMax, tolerance, maxSections, ErrLadder)
		}
		high = min(max(1, 2*high), maxSections)
	}
	for high-low > 1 {
		if mid := (low + high) / 2; fits(mid) {
			high = mid
		} else {
			low = mid
		}
	}
	return dense.network(best[high], target, fMin, fMax), nil
}

// A ladderProblem is the target on a grid, in the form F(x) = A + B/(jx) + Σ w/(1 + jxτ) that all four kinds reduce to: F is Z or Y;
// for SeriesRL and ParallelRC, x = 1/ω and F is conjugated, since jωτ/(1 + jωτ) = 1/(1 + 1/(jωτ)).
type ladderProblem struct {
	kind         LadderKind
	w0           float64
	x            []float64 // normalised by w0, or 1/ω by 1/w0
	f            []complex128
	z            []complex128
	tol, realTol float64
}

func (k LadderKind) admittance() bool { return k == ParallelRC || k == ParallelRL }
func (k LadderKind) inverse() bool    { return k == SeriesRL || k == ParallelRC }

func newLadderProblem(target func(float64) complex128, fMin, fMax float64, points int, kind LadderKind) (*ladderProblem, error) {
	l := &ladderProblem{kind: kind, w0: 2 * math.Pi * math.Sqrt(fMin) * math.Sqrt(fMax)}
	for i := range points {
		freq := fMin * math.Pow(fMax/fMin, float64(i)/float64(points-1))
		z := target(freq)
		if z == 0 || cmplx.IsNaN(z) || cmplx.IsInf(z) {
			return nil, fmt.Errorf("rational: ladder target is %g Ω at %g Hz; must be finite and not 0", z, freq)
		}
		x, f := 2*math.Pi*freq/l.w0, z
		if kind.admittance() {
			f = 1 / z
		}
		if kind.inverse() {
			x, f = 1/x, cmplx.Conj(f)
		}
		l.x, l.f, l.z = append(l.x, x), append(l.f, f), append(l.z, z)
	}
	return l, nil
}

// relaxations is A + B/(jx) + Σ w/(1 + jxτ), all positive; A or B may be 0 for absent.
type relaxations struct {
	a, b   float64
	w, tau []float64
}

func (m *relaxations) at(x float64) complex128 {
	v := complex(m.a, -m.b/x)
	for k, w := range m.w {
		v += complex(w, 0) * recip(complex(1, x*m.tau[k]))
	}
	return v
}

// errors returns |ln ratio|/tol and the real part's |ln ratio|/realTol of every point, and the largest of all.
func (l *ladderProblem) errors(m *relaxations) (whole, part []float64, largest float64) {
	n := len(l.x)
	whole, part = make([]float64, n), make([]float64, n)
	for i, x := range l.x {
		v := m.at(x)
		ratio := v / l.f[i]
		if l.kind.admittance() {
			ratio = 1 / ratio
		}
		whole[i] = cmplx.Abs(ratio-1) / l.tol
		if !math.IsInf(l.realTol, 1) {
			part[i] = math.Abs(real(ratio*l.z[i])/real(l.z[i])-1) / l.realTol
		}
		if e := max(whole[i], part[i]); !(e <= largest) {
			largest = e
		}
	}
	return whole, part, largest
}

// fit returns a ladder of k sections within the tolerance on l and on dense, or nil.
func (l *ladderProblem) fit(k int, dense *ladderProblem) *relaxations {
	for _, beyond := range []float64{1, 10} {
		m := l.start(k, beyond)
		n := len(l.x)
		weight, realWeight := make([]float64, n), make([]float64, n)
		for i := range weight {
			weight[i], realWeight[i] = 1, 1
		}
		lambda := 1e-2
		const rounds = 40
		for round := range rounds {
			steps := 3
			if round == 0 {
				steps = 25
			}
			for range steps {
				if !l.step(m, weight, realWeight, &lambda) {
					break
				}
			}
			whole, part, largest := l.errors(m)
			if largest <= 1 {
				if _, _, d := dense.errors(m); d <= 1 {
					return m
				}
			}
			// More than ten times the tolerance after the first fit is not levelled out by weights.
			if !(largest < 10) {
				break
			}
			sum := 0.0
			for i := range weight {
				// The square root makes Lawson's rule calmer; the floor keeps every point in the game.
				weight[i] = max(weight[i]*math.Sqrt(whole[i]/largest), 1e-6)
				realWeight[i] = max(realWeight[i]*math.Sqrt(part[i]/largest), 1e-6)
				sum += weight[i] + realWeight[i]
			}
			for i := range weight {
				weight[i] *= 2 * float64(n) / sum
				realWeight[i] *= 2 * float64(n) / sum
			}
		}
	}
	return nil
}

// start spreads k time constants over the band, widened by the ratio beyond at both ends; amplitudes by non-negative least squares.
func (l *ladderProblem) start(k int, beyond float64) *relaxations {
	m := &relaxations{w: make([]float64, k), tau: make([]float64, k)}
	first, last := l.x[0], l.x[len(l.x)-1]
	hi, lo := beyond/min(first, last), 1/(beyond*max(first, last))
	for i := range k {
		m.tau[i] = lo * math.Pow(hi/lo, (float64(i)+0.5)/float64(k))
	}
	n := len(l.x)
	cols := [][]float64{
		realColumn(n, func(i int) complex128 { return 1 / l.f[i] }),
		realColumn(n, func(i int) complex128 { return complex(0, -1/l.x[i]) / l.f[i] }),
	}
	for _, tau := range m.tau {
		cols = append(cols, realColumn(n, func(i int) complex128 { return recip(complex(1, l.x[i]*tau)) / l.f[i] }))
	}
	b := make([]float64, 2*n)
	for i := range n {
		b[i] = 1
	}
	c := nonNegativeLeastSquares(cols, b)
	// A logarithm cannot start from 0: what NNLS left out enters at a thousandth of the smallest target value it can make.
	for j, v := range c {
		if v > 0 {
			continue
		}
		largest := 0.0
		for i := range n {
			largest = max(largest, math.Hypot(cols[j][i], cols[j][n+i]))
		}
		c[j] = 1e-3 / largest
	}
	m.a, m.b = c[0], c[1]
	copy(m.w, c[2:])
	return m
}

// rows returns the weighted residuals of l: ln ratio, and where demanded the relative error of the real part, in tolerances; and their sum of squares.
func (l *ladderProblem) rows(m *relaxations, weight, realWeight []float64) ([]float64, float64) {
	n := len(l.x)
	r := make([]float64, 3*n)
	sum := 0.0
	for i, x := range l.x {
		v := m.at(x)
		rho := cmplx.Log(v / l.f[i])
		s := math.Sqrt(weight[i]) / l.tol
		r[i], r[n+i] = s*real(rho), s*imag(rho)
		if !math.IsInf(l.realTol, 1) {
			if l.kind.admittance() {
				v = 1 / v
			}
			r[2*n+i] = math.Sqrt(realWeight[i]) / l.realTol * (real(v)/real(l.z[i]) - 1)
		}
		sum += r[i]*r[i] + r[n+i]*r[n+i] + r[2*n+i]*r[2*n+i]
	}
	return r, sum
}

// step makes one damped Gauss–Newton step in the logarithms; false where none helps or the gain is below 1e-4.
func (l *ladderProblem) step(m *relaxations, weight, realWeight []float64, lambda *float64) bool {
	n := len(l.x)
	r, before := l.rows(m, weight, realWeight)
	v := make([]complex128, n)
	for i, x := range l.x {
		v[i] = m.at(x)
	}
	column := func(df func(x float64) complex128) []float64 {
		c := make([]float64, 3*n)
		for i, x := range l.x {
			g := df(x)
			rho := g / v[i]
			s := math.Sqrt(weight[i]) / l.tol
			c[i], c[n+i] = s*real(rho), s*imag(rho)
			if !math.IsInf(l.realTol, 1) {
				if l.kind.admittance() {
					g = -g / (v[i] * v[i])
				}
				c[2*n+i] = math.Sqrt(realWeight[i]) / l.realTol * real(g) / real(l.z[i])
			}
		}
		return c
	}
	cols := [][]float64{
		column(func(float64) complex128 { return complex(m.a, 0) }),
		column(func(x float64) complex128 { return complex(0, -m.b/x) }),
	}
	for k, w := range m.w {
		tau := m.tau[k]
		cols = append(cols,
			column(func(x float64) complex128 { return complex(w, 0) * recip(complex(1, x*tau)) }),
			column(func(x float64) complex128 {
				u := recip(complex(1, x*tau))
				return complex(0, -w*x*tau) * u * u
			}))
	}
	f := factor(cols, false)
	for i := range r {
		r[i] = -r[i]
	}
	y := f.project(r)
	for range 8 {
		d := f.damped(y, *lambda)
		grow := func(v, s float64) float64 { return v * math.Exp(min(max(s, -2), 2)) }
		next := &relaxations{a: grow(m.a, d[0]), b: grow(m.b, d[1]), w: make([]float64, len(m.w)), tau: make([]float64, len(m.w))}
		for k := range m.w {
			next.w[k] = grow(m.w[k], d[2+2*k])
			next.tau[k] = grow(m.tau[k], d[3+2*k])
		}
		if _, after := l.rows(next, weight, realWeight); after < before {
			*m = *next
			*lambda = max(*lambda/5, 1e-9)
			return before-after > 1e-4*before
		}
		*lambda = max(4**lambda, 1e-6)
	}
	return false
}

// network converts to elements, leaves out what no point of the dense grid can tell, and measures the errors.
func (l *ladderProblem) network(m *relaxations, target func(float64) complex128, fMin, fMax float64) *Foster {
	m = l.pruned(m)
	out := &Foster{Kind: l.kind, Points: len(l.x)}
	// Amplitude g in Ω or S; time constant in s.
	value := func(g float64) float64 {
		if l.kind.admittance() {
			return 1 / g
		}
		return g
	}
	if m.a > 0 {
		out.R0 = value(m.a)
	}
	if m.b > 0 {
		// B/(jx): SeriesRC 1/(jωC), ParallelRL 1/(jωL), both with B·w0 = 1/X; the inverse kinds jωL and jωC with B/w0 = X.
		if l.kind.inverse() {
			out.X0 = m.b / l.w0
		} else {
			out.X0 = 1 / (m.b * l.w0)
		}
	}
	for k := range m.w {
		tau := m.tau[k] / l.w0
		if l.kind.inverse() {
			tau = 1 / (m.tau[k] * l.w0)
		}
		r := value(m.w[k])
		x := tau / r // R·C = τ
		if l.kind == SeriesRL || l.kind == ParallelRL {
			x = tau * r // L/R = τ
		}
		out.R, out.X = append(out.R, r), append(out.X, x)
	}
	if l.kind.inverse() {
		slices.Reverse(out.R)
		slices.Reverse(out.X)
	}
	for i := range l.x {
		freq := fMin * math.Pow(fMax/fMin, float64(i)/float64(len(l.x)-1))
		z, t := out.At(freq), target(freq)
		if e := cmplx.Abs(z/t - 1); e >= out.MaxError {
			out.MaxError, out.MaxErrorAt = e, freq
		}
		out.RealError = max(out.RealError, math.Abs(real(z)/real(t)-1))
	}
	return out
}

// pruned sorts the sections by time constant and drops the terms without which the ladder stays within its tolerance: the logarithms
// of terms that are not needed only run towards −∞.
func (l *ladderProblem) pruned(m *relaxations) *relaxations {
	index := make([]int, len(m.w))
	for i := range index {
		index[i] = i
	}
	slices.SortStableFunc(index, func(a, b int) int { return cmp.Compare(m.tau[a], m.tau[b]) })
	out := &relaxations{a: m.a, b: m.b}
	for _, k := range index {
		out.w, out.tau = append(out.w, m.w[k]), append(out.tau, m.tau[k])
	}
	fits := func(c *relaxations) bool {
		_, _, largest := l.errors(c)
		return largest <= 1
	}
	if c := *out; c.a > 0 {
		if c.a = 0; fits(&c) {
			out.a = 0
		}
	}
	if c := *out; c.b > 0 {
		if c.b = 0; fits(&c) {
			out.b = 0
		}
	}
	for k := 0; k < len(out.w); {
		c := &relaxations{a: out.a, b: out.b, w: slices.Delete(slices.Clone(out.w), k, k+1), tau: slices.Delete(slices.Clone(out.tau), k, k+1)}
		if fits(c) {
			out = c
		} else {
			k++
		}
	}
	return out
}
