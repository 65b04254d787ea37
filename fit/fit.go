package fit

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/mat"

	"realpart/fit/lm"
	"realpart/models"
)

// Interval is a closed range of values.
type Interval struct{ Low, High float64 }

// Settings steer a fit. The zero value, and a nil pointer, mean the defaults.
type Settings struct {
	// Weight says what is minimised; "" means [Relative].
	Weight Weight
	// Accuracy is the meter's stated accuracy. It is needed by the weight
	// [Accuracy] and gives the meter's part of the uncertainty; nil: none
	// was stated.
	Accuracy MeterAccuracy
	// Reference in Ω and Connection tell how S-parameters were measured;
	// needed by the weight [SParameter]. S holds the measured values; nil:
	// they are computed from the impedance.
	Reference  float64
	Connection Connection
	S          []complex128
	// Fixed holds parameters that are not fitted, by name.
	Fixed map[string]float64
	// Start holds starting values by name; those of other parameters are
	// found from the sweep.
	Start map[string]float64
	// Bounds holds the ranges that parameters are kept in, by name.
	Bounds map[string]Interval
	// Robust fits with a soft-L1 loss whose scale is the noise, so that
	// single wild points lose their pull.
	Robust bool
	// Seed of the search for starting values. Two fits with the same input
	// and the same seed agree to the bit.
	Seed uint64
}

// Parameter is one fitted value with its uncertainty.
type Parameter struct {
	models.Parameter
	Value float64
	Fixed bool
	// StdError is the standard uncertainty from the scatter of the points,
	// in the unit of the value; NaN where the sweep does not determine it.
	StdError float64
	// MeterError is the standard uncertainty from the meter's stated
	// accuracy; NaN where none was stated.
	MeterError float64
	// Low95 and High95 bound the 95 % interval from both; NaN on an open
	// side.
	Low95, High95 float64
	// Determined is false where the sweep does not tell the value; Why then
	// says why.
	Determined bool
	Why        string
	// AtBound tells that the value ended at a bound the user gave, or where
	// its element has vanished from the sweep.
	AtBound bool
}

// Result is a fitted circuit.
type Result struct {
	Circuit *models.Circuit
	Weight  Weight
	Robust  bool
	// Parameters are in the order of the circuit's expression.
	Parameters []Parameter
	// Free holds the indices of the parameters that were fitted.
	Free []int
	// Covariance is that of the unknowns x (ln p, logit n) of the free
	// parameters from scatter alone, MeterCovariance that from the meter;
	// the latter is nil where no accuracy was stated. Rows and columns of
	// parameters that are not determined are zero.
	Covariance, MeterCovariance *mat.SymDense
	// Correlation is that of the free parameters from scatter.
	Correlation *mat.SymDense
	// DegreesOfFreedom is 2·points − free parameters.
	DegreesOfFreedom int
	// Sigma is the standard deviation s of the weighted residuals:
	// s² = Σr²/DegreesOfFreedom.
	Sigma float64
	// Cost is ½Σr² of the weighted residuals (of the loss, for Robust).
	Cost float64

	Freq     []float64
	Measured []complex128
	Model    []complex128
	// Residuals are ρ = ln(Z_model/Z_measured), whatever the weight.
	Residuals []complex128
	// RMSRelative is √(mean |ρ|²), MaxRelative the largest |ρ|, at MaxAtHz.
	RMSRelative, MaxRelative, MaxAtHz float64
	// Lag1 is the lag-1 correlation of the residuals over frequency, the
	// mean of those of real and imaginary part.
	Lag1 float64
	// Structured tells that the residuals are more alike from point to
	// point than chance explains: the circuit does not describe the part
	// to the accuracy of the points.
	Structured bool

	// SetAside holds the frequencies in Hz of the points that a robust fit
	// set aside in effect: their residual is so large that their pull is
	// below a fifth of what it would be.
	SetAside []float64

	Status lm.Status
	// Reason says why the solver stopped, with the value and the threshold.
	Reason      string
	Iterations  int
	Evaluations int // of the model on the whole sweep

	problem *problem
	x       []float64
	tested  bool // by testElements
	// givenUp is the solution of a circuit that a race gave up; its
	// uncertainties wait for whoever asks.
	givenUp *lm.Result
	// extremes holds unknowns at the limits of profiled parameters: other
	// circuits that the sweep allows, by which figures take their share of
	// what is not determined.
	extremes [][]float64
}

// Values returns the fitted values in the order of the circuit.
func (r *Result) Values() []float64 {
	v := make([]float64, len(r.Parameters))
	for i, p := range r.Parameters {
		v[i] = p.Value
	}
	return v
}

// InputError is a fault of what a fit was asked for.
type InputError struct {
	Flag     string // the command-line flag that carries the fault, such as "--fix"; "" for the sweep
	Found    string
	Expected string
	Hint     string
}

// Error gives one line.
func (e *InputError) Error() string {
	s := fmt.Sprintf("expected %s, found %s", e.Expected, e.Found)
	if e.Flag != "" {
		s = e.Flag + ": " + s
	}
	if e.Hint != "" {
		s += "; " + e.Hint
	}
	return s
}

// Fit fits a circuit to an impedance sweep: frequencies in Hz, positive and
// rising, and impedances in Ω, finite and not zero. It minimises Σ|r|² of the
// weighted residual over the unknowns ln p (logit n for an exponent) and gives
// each value with its uncertainty.
//
// The error is an [*InputError] for wishes that can't be met: an unknown
// parameter, fewer data than unknowns. A fit that did not converge comes back
// with a [lm.Status] that says so. Neither slice is changed. It panics if the
// slices differ in length.
func Fit(freq []float64, z []complex128, c *models.Circuit, settings *Settings) (*Result, error) {
	if len(freq) != len(z) {
		panic(fmt.Sprintf("fit: %d frequencies for %d impedances", len(freq), len(z)))
	}
	s := settings.resolve()
	if err := s.check(freq, c); err != nil {
		return nil, err
	}
	pts, err := s.points(freq, z)
	if err != nil {
		return nil, err
	}
	defer pts.release()
	p := newProblem(c, pts, s.Weight, s)
	solution, err := p.solve()
	if err != nil {
		return nil, err
	}
	r, err := p.complete(solution)
	if err == nil {
		r.structure()
	}
	return r, err
}

// resolve returns the settings with the defaults filled in.
func (s *Settings) resolve() *Settings {
	var resolved Settings
	if s != nil {
		resolved = *s
	}
	if resolved.Weight == "" {
		resolved.Weight = Relative
	}
	return &resolved
}

// complete makes a result of a solution, but for the structure of its residuals.
func (p *problem) complete(solution *lm.Result) (*Result, error) {
	c, s := p.circuit, p.settings
	if len(p.free) == 0 {
		r := evaluate(p, s, nil, solution)
		r.Reason = "all parameters are fixed"
		return r, nil
	}
	p.set(solution.X)
	if order(c, p.values, s) {
		// Once more from the reordered values, which is a solution: the
		// Jacobian's columns change places with it.
		lower, upper := p.bounds(s)
		var err error
		if solution, err = p.polish(p.unknowns(), lower, upper, s.Robust); err != nil {
			return nil, err
		}
	}
	reason := solution.Reason()
	// A solver that stalled at the noise of the points has converged: in the
	// flat valley of a parameter that is not determined, the decrease that is
	// left is lost in the rounding of the cost.
	if solution.Status == lm.Stalled && p.weight == Relative && p.describes(solution.Cost, len(p.freq)) {
		solution.Status = lm.CostConvergence
		reason += "; the residuals are at the noise of the points"
	}
	r := evaluate(p, s, solution.X, solution)
	r.Reason = reason
	r.uncertainty(s, solution)
	return r, nil
}

// check finds faults of the settings before anything is computed.
func (s *Settings) check(freq []float64, c *models.Circuit) error {
	names := func() string {
		var names []string
		for _, p := range c.Parameters() {
			names = append(names, p.Name)
		}
		return strings.Join(names, ", ")
	}
	value := func(flag, name string, v float64) error {
		i, ok := c.Index(name)
		if !ok {
			return &InputError{Flag: flag, Found: fmt.Sprintf("%q", name),
				Expected: "a parameter of the circuit " + c.String() + " (" + names() + ")"}
		}
		if err := c.Parameters()[i].CheckValue(v); err != nil {
			return &InputError{Flag: flag, Found: fmt.Sprintf("%s=%v", name, v), Expected: "a possible value", Hint: err.Error()}
		}
		return nil
	}
	// Sorted, so that of two faults the same one is told each time.
	for _, name := range sortedKeys(s.Fixed) {
		if err := value("--fix", name, s.Fixed[name]); err != nil {
			return err
		}
	}
	for _, name := range sortedKeys(s.Start) {
		if err := value("--start", name, s.Start[name]); err != nil {
			return err
		}
		if v, ok := s.Fixed[name]; ok && v != s.Start[name] {
			return &InputError{Flag: "--start", Found: fmt.Sprintf("%s=%v", name, s.Start[name]),
				Expected: fmt.Sprintf("a parameter that --fix does not hold at %v", v)}
		}
	}
	for _, name := range sortedKeys(s.Bounds) {
		b := s.Bounds[name]
		if err := value("--bounds", name, b.Low); err != nil {
			return err
		}
		if err := value("--bounds", name, b.High); err != nil {
			return err
		}
		if !(b.Low <= b.High) {
			return &InputError{Flag: "--bounds", Found: fmt.Sprintf("%s=%v..%v", name, b.Low, b.High), Expected: "LOW..HIGH with LOW not above HIGH"}
		}
		for _, other := range []struct {
			flag   string
			values map[string]float64
		}{{"--fix", s.Fixed}, {"--start", s.Start}} {
			if v, ok := other.values[name]; ok && !(v >= b.Low && v <= b.High) {
				return &InputError{Flag: other.flag, Found: fmt.Sprintf("%s=%v", name, v),
					Expected: fmt.Sprintf("a value inside --bounds %s=%v..%v", name, b.Low, b.High)}
			}
		}
	}
	free := len(c.Parameters()) - len(s.Fixed)
	if 2*len(freq) < free || len(freq) == 0 {
		return &InputError{Found: pointCount(len(freq)),
			Expected: fmt.Sprintf("at least %s for the %d unknowns of %s", pointCount(max(1, (free+1)/2)), free, c),
			Hint:     "widen --from/--to, fix a parameter with --fix or choose a simpler circuit"}
	}
	for i := 1; i < len(freq); i++ {
		if !(freq[i] > freq[i-1]) {
			return &InputError{Found: fmt.Sprintf("%v Hz after %v Hz", freq[i], freq[i-1]), Expected: "rising frequencies"}
		}
	}
	if s.Weight == SParameter && !(s.Reference > 0) {
		return &InputError{Flag: "--weight", Found: "s-parameter", Expected: "relative, uniform or accuracy for a sweep that was not measured as S-parameters"}
	}
	if s.Weight == Accuracy && s.Accuracy == nil {
		return &InputError{Flag: "--weight", Found: "accuracy without --accuracy", Expected: "the meter's stated accuracy", Hint: "add --accuracy 0.1%,0.05deg with your meter's numbers"}
	}
	return nil
}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}

// points prepares a sweep for the problem.
func (s *Settings) points(freq []float64, z []complex128) (*points, error) {
	pts := &points{freq: freq, measured: z}
	low, high := math.Inf(1), 0.0 // |Z|²
	for i, v := range z {
		squares := real(v)*real(v) + imag(v)*imag(v)
		if !(squares > safe && squares < 1/safe) {
			if a := abs(v); !(a > 0) || math.IsInf(a, 1) {
				return nil, &InputError{Found: fmt.Sprintf("Z = %v at %v Hz", v, freq[i]), Expected: "a finite impedance that is not zero"}
			}
			squares = min(max(squares, safe), 1/safe)
		}
		low, high = min(low, squares), max(high, squares)
	}
	pts.low, pts.high = math.Sqrt(low), math.Sqrt(high)
	if s.Weight == SParameter {
		pts.s = s.S
		if pts.s == nil {
			for _, v := range z {
				m, _ := s.Connection.sParameter(v, s.Reference)
				pts.s = append(pts.s, m)
			}
		}
		if len(pts.s) != len(z) {
			panic(fmt.Sprintf("fit: %d S-parameters for %d impedances", len(pts.s), len(z)))
		}
	}
	if s.Accuracy != nil {
		pts.magnitude, pts.phase = make([]float64, len(z)), make([]float64, len(z))
		for i, v := range z {
			m, ph, ok := s.Accuracy(freq[i], abs(v))
			if !ok || !(m > 0) || !(ph > 0) {
				return nil, &InputError{Flag: "--accuracy", Found: fmt.Sprintf("none for %v Hz and %.4g Ω", freq[i], abs(v)),
					Expected: "a positive accuracy at every point of the sweep", Hint: "extend the table, or cut the sweep with --from and --to"}
			}
			pts.magnitude[i], pts.phase[i] = m, ph
		}
	}
	return pts, nil
}

// bounds returns the box of the problem, narrowed to the user's bounds, and
// widened to the user's starting values.
func (p *problem) bounds(s *Settings) (lower, upper []float64) {
	lower, upper = p.box()
	for k, i := range p.free {
		parameter := p.parameters[i]
		if b, ok := s.Bounds[parameter.Name]; ok {
			lower[k], upper[k] = parameter.Scale.Unknown(b.Low), parameter.Scale.Unknown(b.High)
		} else if v, ok := s.Start[parameter.Name]; ok {
			x := parameter.Scale.Unknown(v)
			lower[k], upper[k] = min(lower[k], x), max(upper[k], x)
		}
	}
	return lower, upper
}

// The solver's settings: unknowns are logarithms, so that they share a scale,
// and a step changes no value by more than a factor e².
const (
	maxStep         = 2
	searchPoints    = 32
	searchSteps     = 60
	polishSteps     = 200
	searchTolerance = 1e-6
)

// solve finds the best solution it can. The search for starting values stops
// at once where the sweep is described to its noise. Where it isn't, because
// the circuit is not the part's or a minimum is not the lowest, the search
// goes through all its draws, and its best minima are compared on the whole
// sweep.
func (p *problem) solve() (*lm.Result, error) {
	if len(p.free) == 0 {
		return &lm.Result{Status: lm.GradientConvergence}, nil
	}
	if x := p.given(); x != nil {
		r, err := p.fromStart(x)
		if err == nil && p.weight == Relative && p.leavesNoise(r) {
			return r, nil
		}
	}
	return p.solveFrom(p.newSearch())
}

// solveFrom goes on with a search: it takes the first minimum that describes
// the sweep to its noise, else the best of all.
func (p *problem) solveFrom(search *search) (*lm.Result, error) {
	lower, upper, robust := search.solver.Lower, search.solver.Upper, search.settings.Robust
	search.all(true)
	if len(search.best) == 0 {
		return nil, fmt.Errorf("no starting values found: %w", search.failure)
	}
	best, err := p.polish(search.best[0].x, lower, upper, robust)
	if err != nil {
		return nil, err
	}
	if p.atNoise(best) {
		return best, nil
	}
	search.all(false)
	for _, c := range search.best {
		if c.cost > 2*search.best[0].cost {
			break // on the thinned sweep already much worse
		}
		r, err := p.polish(c.x, lower, upper, robust)
		if err == nil && better(r, best, len(p.freq)) {
			best = r
		}
	}
	return best, nil
}

// atNoise reports whether a solution describes the sweep to its noise.
func (p *problem) atNoise(r *lm.Result) bool {
	return p.weight == Relative && r.Status.Converged() && p.describes(r.Cost, len(p.freq))
}

// fromStart goes from starting values to a minimum: most of the way on a few
// points of the sweep, whose minimum is within a few standard uncertainties of
// that of the whole.
func (p *problem) fromStart(x []float64) (*lm.Result, error) {
	s := p.settings
	lower, upper := p.bounds(s)
	few := 2*len(x) + 3
	if len(p.freq) > 4*few && !s.Robust {
		thinned := newProblem(p.circuit, p.pick(spread(p.measured, few)), Relative, s)
		settings := p.searcher(lower, upper)
		settings.CostTolerance = 1e-2 // the two minima are farther apart
		if r, err := thinned.minimise(x, &settings); err == nil && r.Status.Converged() {
			x = r.X
		}
	}
	return p.polish(x, lower, upper, s.Robust)
}

// searcher returns the settings of a fit on a thinned sweep.
func (p *problem) searcher(lower, upper []float64) lm.Settings {
	return lm.Settings{UnitScaling: true, MaxStep: maxStep, MaxIterations: searchSteps,
		GradientTolerance: searchTolerance, StepTolerance: searchTolerance, CostTolerance: searchTolerance, SlowTolerance: 1e-4,
		Lower: lower, Upper: upper}
}

// leavesNoise reports whether the residuals of a solution are noise.
func (p *problem) leavesNoise(r *lm.Result) bool {
	if p.model == nil || !slices.Equal(p.at, r.X) || len(p.freq) < leastForNoise {
		return p.describes(r.Cost, len(p.freq))
	}
	memory := borrow(2 * len(p.freq))
	defer floats.Put(memory)
	n := noise{sizes: *memory}
	n.ofResiduals(p.residuals)
	return n.explains(r.Cost, len(p.freq))
}

// better reports whether a solution is to be preferred: one that converged to
// one that crawls along the valley of parameters that are not determined,
// unless its χ² is larger by more than 1; else the one with the lower cost.
func better(a, b *lm.Result, points int) bool {
	one := b.Cost / float64(2*points) // Δ½Σr² of Δχ² = 1 is ½s², s² ≈ Σr²/(2·points)
	switch {
	case a.Status.Converged() && !b.Status.Converged():
		return a.Cost <= b.Cost+one
	case !a.Status.Converged() && b.Status.Converged():
		return a.Cost < b.Cost-one
	}
	return a.Cost < b.Cost
}

// given returns the unknowns if the user gave a start for every free
// parameter, else nil.
func (p *problem) given() []float64 {
	x := make([]float64, len(p.free))
	for k, i := range p.free {
		v, ok := p.settings.Start[p.parameters[i].Name]
		if !ok {
			return nil
		}
		x[k] = p.parameters[i].Scale.Unknown(v)
	}
	return x
}

// precise returns the settings of a fit on the whole sweep. The gradient
// tolerance is in standard uncertainties of the solution: 1e-7 of them is
// far below what anybody prints, and above the rounding of the residuals. The
// cost tolerance ends the way along the flat valley of a parameter that is
// not determined, where a step changes χ² by less than 1e-6.
func (p *problem) precise(lower, upper []float64) lm.Settings {
	return lm.Settings{UnitScaling: true, MaxStep: maxStep, MaxIterations: polishSteps,
		GradientTolerance: 1e-6, StepTolerance: 1e-9, CostTolerance: 1e-7, SlowTolerance: 1e-6,
		Lower: lower, Upper: upper}
}

// polish minimises over the whole sweep: first the relative residual, whose
// basin is wide, then the one asked for.
func (p *problem) polish(x, lower, upper []float64, robust bool) (*lm.Result, error) {
	settings := p.precise(lower, upper)
	wanted := p.weight
	p.weight = Relative
	r, err := p.minimise(x, &settings)
	p.weight = wanted
	if err != nil {
		return nil, err
	}
	if wanted != Relative {
		if r, err = p.minimise(r.X, &settings); err != nil {
			return nil, err
		}
	}
	if robust {
		return p.polishRobust(r, &settings)
	}
	return r, nil
}
