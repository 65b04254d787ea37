package lm

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

const (
	// A step is taken when it lowers the cost by at least this fraction of the prediction (Moré 1978, section 4).
	acceptable = 1e-4
	// Below the first ratio the linear model is poor and the region shrinks, above the second it is good and the region
	// grows.
	poor, good = 0.25, 0.75
	// The region grows to twice the step, and shrinks to between 0.1 and 0.4 of it, by a parabola through the costs.
	// Note: 0.4 and not the customary 0.5, because growing and shrinking must not cancel: in a narrow curved valley the
	// radius would swing between two values and every second step would be refused. It saves a sixth of the evaluations
	// on the NIST problems.
	growth, leastShrink, mostShrink = 2, 0.4, 0.1
	// Residuals are computed with a few roundings more than that of x.
	evaluation = 10
	// See Settings.SlowTolerance.
	slowSteps = 5
	// A step that the bounds reduce to nothing is tried with this many ever smaller radii.
	maxBarren = 100
)

// Problem is a nonlinear least-squares problem: minimise ½‖r(x)‖² for r: Rⁿ → Rᵐ.
type Problem struct {
	// Size is m, the number of residuals, at least the number of variables.
	Size int
	// Residual fills dst, of length m, with r(x). It must overwrite every element, must not keep or change x, and must
	// give the same bits for the same x. An x for which there are no residuals is answered with NaN or ±Inf in any
	// element.
	Residual func(dst, x []float64)
	// Jacobian fills dst, m×n, with dst_{ij} = ∂r_i/∂x_j. It overwrites every element and does not keep or change x,
	// which is always the point for which Residual was called last, so that common terms may be kept from there. Nil:
	// central differences with relative steps, 2n evaluations of Residual.
	Jacobian func(dst *mat.Dense, x []float64)
	// Normal, where given, fills jtj (n×n by rows, all of it) with JᵀJ and jtr (n) with Jᵀr at x and returns ‖r‖²; where
	// both are nil only the latter is wanted. A problem with many residuals for its few variables can sum them without
	// storing J, which is several times faster than the QR decomposition. It halves the digits, though: at every point
	// whose JᵀJ is not clearly regular the solver uses Residual and Jacobian, which must both be given, instead. What is
	// not finite shows as for Residual.
	Normal func(jtj, jtr, x []float64) (squares float64)
}

// Result is where a solve ended. It shares no memory with the arguments or the Workspace.
type Result struct {
	X         []float64  // the best point, n
	Cost      float64    // ½‖r(X)‖²
	Residuals []float64  // r(X), m; nil where Normal is not
	Jacobian  *mat.Dense // J(X), m×n; nil where Normal is not
	Gradient  []float64  // Jᵀr at X, n
	// Normal is JᵀJ at X by rows, n×n, for a problem with Normal, else nil. If the solve ended with CostConvergence it and
	// the Gradient are those of the point before the last step.
	Normal  []float64
	AtBound []bool // X_j is equal to its lower or upper bound, n

	Status Status
	// Measured is the value that ended the solve, Limit its threshold; see Reason.
	Measured, Limit float64

	Iterations          int // steps tried, the refused ones included
	ResidualEvaluations int // those for differences included
	JacobianEvaluations int
}

// Reason returns the Status in words, with the measured value and its threshold.
func (r *Result) Reason() string { return reason(r.Status, r.Measured, r.Limit) }

// NonFiniteError says which residual, or which element of the Jacobian, is not a finite number at the start.
type NonFiniteError struct {
	Residual int // index i of r_i
	Variable int // index j of ∂r_i/∂x_j, or -1 if the residual itself is not finite
	Value    float64
}

func (e *NonFiniteError) Error() string {
	if e.Variable < 0 {
		return fmt.Sprintf("lm: residual %d is %v at the start, must be finite with a finite square; start elsewhere", e.Residual, e.Value)
	}
	return fmt.Sprintf("lm: the derivative of residual %d by variable %d is %v at the start, must be finite with a finite square; start elsewhere",
		e.Residual, e.Variable, e.Value)
}

// Solve minimises the problem's cost from start, which it does not change. Nil settings mean the defaults.
//
// The first radius is, unless given, ‖D·start‖: the first step may be as long as the start itself. If that is zero it
// is ‖r‖, which has the same unit. With UnitScaling it is 1, a factor of e for a logarithm.
//
// Where the residuals at a trial point, or the Jacobian there, are not finite the step is refused and the region
// shrinks. At the start they are a *NonFiniteError, and the result holds only the Status. Settings, a start that is not
// finite or out of its bounds, and fewer residuals than variables are errors with a nil result. A solve that ends
// without convergence is not an error: see Status.
//
// Solve panics on a Problem without Residual or Size, an empty start, and bounds of another length than start.
//
// The same arguments give the same bits, on one kind of processor.
func Solve(p Problem, start []float64, settings *Settings) (*Result, error) {
	checkLengths(p, start, settings)
	o, err := settings.resolve(start, p.Jacobian == nil)
	if err != nil {
		return nil, err
	}
	if p.Size < len(start) {
		return nil, fmt.Errorf("lm: %d residuals for %d variables, must be at least as many", p.Size, len(start))
	}
	w := o.Workspace
	if w == nil {
		w = workspaces.Get().(*Workspace)
		defer workspaces.Put(w)
	}
	s := w.prepare(p.Size, len(start), p.Normal != nil)
	s.problem, s.settings = p, o
	s.begin(start)
	if err := s.evaluate(); err != nil {
		s.settings, s.problem = Settings{}, Problem{}
		return &Result{Status: NonFinite, ResidualEvaluations: s.residuals, JacobianEvaluations: s.jacobians}, err
	}
	s.radius = o.InitialRadius
	for s.status == NotRun {
		s.inspect()
		if s.status == NotRun {
			s.advance()
		}
	}
	r := s.result()
	s.settings, s.problem = Settings{}, Problem{} // the workspace keeps no one's closures alive
	return r, nil
}

func checkLengths(p Problem, start []float64, s *Settings) {
	n := len(start)
	switch {
	case p.Residual == nil:
		panic("lm: Problem.Residual is nil")
	case p.Size <= 0:
		panic(fmt.Sprintf("lm: Problem.Size is %d, must be positive", p.Size))
	case n == 0:
		panic("lm: start is empty")
	case p.Normal != nil && p.Jacobian == nil:
		panic("lm: Problem.Normal without Problem.Jacobian")
	case s != nil && s.Lower != nil && len(s.Lower) != n:
		panic(fmt.Sprintf("lm: %d lower bounds for %d variables", len(s.Lower), n))
	case s != nil && s.Upper != nil && len(s.Upper) != n:
		panic(fmt.Sprintf("lm: %d upper bounds for %d variables", len(s.Upper), n))
	}
}

// begin sets the point and the bounds.
func (s *state) begin(start []float64) {
	copy(s.x, start)
	for k := range s.n {
		s.low[k], s.high[k] = s.settings.bounds(k)
		s.bounded = s.bounded || !math.IsInf(s.low[k], -1) || !math.IsInf(s.high[k], 1)
		s.scale[k] = 0
		if s.settings.UnitScaling {
			s.scale[k] = 1
		}
	}
}

// evaluate computes residuals and Jacobian at the start.
func (s *state) evaluate() error {
	if s.normal {
		s.cost = s.problem.Normal(s.jtj, s.jtr, s.x) / 2
		s.residuals++
		if isFinite(s.cost) && s.linearise() < 0 {
			return nil
		}
		// Once more with what tells where the fault is.
		s.normal = false
		s.tall()
	}
	s.residual(s.r, s.x)
	s.cost = dot(s.r, s.r) / 2
	if !isFinite(s.cost) {
		i := worst(s.r)
		return &NonFiniteError{Residual: i, Variable: -1, Value: s.r[i]}
	}
	k := s.linearise()
	if k < 0 {
		return nil
	}
	column := mat.Col(nil, k, s.jac)
	i := worst(column)
	return &NonFiniteError{Residual: i, Variable: k, Value: column[i]}
}

func (s *state) residual(dst, x []float64) {
	s.problem.Residual(dst, x)
	s.residuals++
}

// linearise computes the Jacobian at x into spare, exchanges it with jac and factorises it. It returns the first column
// that is not finite, or -1; then the former Jacobian is in spare. With Normal, JᵀJ and Jᵀr at x are there already.
func (s *state) linearise() (bad int) {
	if s.normal {
		if s.regular = s.tri.cholesky(s.jtj, s.jtr); s.regular {
			s.jacobians++
			return -1
		}
		s.tall()
		s.residual(s.r, s.x)
	}
	s.jac, s.spare = s.spare, s.jac
	if s.problem.Jacobian == nil {
		s.differences(s.jac)
	} else {
		s.problem.Jacobian(s.jac, s.x)
	}
	s.jacobians++
	return s.tri.factorise(s.jac, s.r)
}

// inspect prepares a new point and tests whether it is the end.
func (s *state) inspect() {
	o := &s.settings
	projected := s.tri.projected()
	for k := range s.n {
		if s.regular {
			s.gradient[k] = s.jtr[k]
		} else {
			s.gradient[k] = dot(s.tri.column(k), projected)
		}
		if !o.UnitScaling {
			// Never less than before (Moré 1978): a variable whose influence fades, such as a rate that runs away, is not
			// set free by it.
			s.scale[k] = math.Max(s.scale[k], s.tri.norms[k])
		}
	}
	s.hold()
	var offset float64 // ‖P·r‖
	if s.split = false; s.regular && len(s.free) == s.n {
		offset = norm(projected)
	} else {
		s.resolve(projected)
		offset = norm(s.c[:len(s.free)])
	}
	if s.radius == 0 {
		s.radius = s.firstRadius()
	}

	size := math.Sqrt(2 * s.cost)
	// The residuals cannot be known better than x is, whose rounding changes them by up to this.
	s.rounding = 0
	for k, x := range s.x {
		s.rounding += s.tri.norms[k] * s.magnitude(x)
	}
	s.rounding *= epsilon
	switch {
	case size == 0:
		s.stop(RoundingConvergence, 0, 0)
	case offset <= o.GradientTolerance*size:
		s.stop(GradientConvergence, offset/size, o.GradientTolerance)
	case offset <= s.rounding:
		s.stop(RoundingConvergence, offset, s.rounding)
	case s.lastStep <= o.StepTolerance:
		s.stop(StepConvergence, s.lastStep, o.StepTolerance)
	case s.lastDecrease <= o.CostTolerance:
		s.stop(CostConvergence, s.lastDecrease, o.CostTolerance)
	case s.taken >= slowSteps && o.SlowTolerance > 0:
		var sum float64
		for _, d := range s.recent {
			sum += d
		}
		if sum <= o.SlowTolerance {
			s.stop(SlowConvergence, sum, o.SlowTolerance)
		}
	}
}

// magnitude is the size of a variable to which its changes are relative.
func (s *state) magnitude(x float64) float64 {
	if s.settings.UnitScaling {
		return math.Max(math.Abs(x), 1)
	}
	return math.Abs(x)
}

func (s *state) firstRadius() float64 {
	if s.settings.UnitScaling {
		return 1
	}
	var length float64
	for k, x := range s.x {
		length = math.Hypot(length, s.scale[k]*x)
	}
	if length == 0 {
		return math.Sqrt(2 * s.cost) // ‖r‖
	}
	return length
}

// advance tries steps with shrinking radii until one is taken or the solve ends.
func (s *state) advance() {
	o := &s.settings
	s.lastStep, s.lastDecrease = math.Inf(1), math.Inf(1)
	for barren := 0; ; {
		if s.iterations >= o.MaxIterations {
			s.stop(IterationLimit, float64(s.iterations), float64(o.MaxIterations))
			return
		}
		s.step(s.radius, o.MaxStep)
		predicted := s.predicted()
		if !(predicted > 0) {
			// The bounds took away all that was to be gained. A smaller step is closer to the gradient, which points
			// inside.
			s.radius /= 4
			if barren++; barren > maxBarren {
				s.stop(Stalled, s.length, s.radius)
				return
			}
			continue
		}
		full := s.lambda == 0 && !s.cut
		change := s.change()
		if !s.move() {
			if full && change <= o.StepTolerance {
				s.stop(StepConvergence, change, o.StepTolerance)
			} else {
				s.stop(Stalled, s.length, s.radius)
			}
			return
		}
		s.iterations++
		// The last step: after it nothing is linearised any more.
		last := s.normal && full && predicted <= o.CostTolerance*s.cost
		cost, actual := s.try(last)
		if !isFinite(cost) {
			s.radius = mostShrink * s.length
			continue
		}
		// Where rounding hides the decrease, the ratio tends to 1 and the prediction is trusted (Conn, Gould and Toint,
		// Trust-Region Methods, 2000, section 17.4.2). Note: only for a full step, the last ones of a good solve. With
		// a wrong Jacobian the radius shrinks until all steps are lost in rounding, and those must not be taken for
		// success.
		var noise float64
		if full {
			noise = evaluation * (epsilon*s.cost + s.rounding*math.Sqrt(2*s.cost))
		}
		ratio := (actual + noise) / (predicted + noise)
		s.resize(ratio, actual)
		if !(ratio >= acceptable) {
			if full && change <= o.StepTolerance {
				s.stop(StepConvergence, change, o.StepTolerance)
				return
			}
			continue
		}
		former := s.cost
		if last {
			if math.Abs(actual) <= o.CostTolerance*former+noise {
				s.x, s.trial = s.trial, s.x
				s.cost = cost
				s.stop(CostConvergence, predicted/former, o.CostTolerance)
				return
			}
			s.try(false) // the prediction was wrong: on from there
		}
		s.exchange()
		s.cost = cost
		if s.linearise() >= 0 {
			s.exchange()
			s.cost = former
			if s.normal {
				s.linearise()
			} else {
				s.jac, s.spare = s.spare, s.jac
				s.tri.factorise(s.jac, s.r)
			}
			s.radius = mostShrink * s.length
			continue
		}
		// A step that the radius or MaxStep shortened is small for that reason and proves nothing; except that one nearly as
		// long as MaxStep allows which gains nothing shows a flat valley, such as that of a variable without effect.
		if full {
			s.lastStep = change
		}
		s.recent[s.taken%slowSteps] = actual / former
		s.taken++
		if full || change >= o.MaxStep/2 {
			if math.Abs(actual) <= o.CostTolerance*former+noise {
				s.lastDecrease = predicted / former
			}
		}
		return
	}
}

// try evaluates the trial point: its cost, and how much less that is than the cost at x. With costOnly its JᵀJ and Jᵀr
// are left out.
func (s *state) try(costOnly bool) (cost, decrease float64) {
	if s.normal {
		s.residuals++
		if costOnly {
			cost = s.problem.Normal(nil, nil, s.trial) / 2
		} else {
			cost = s.problem.Normal(s.trialJTJ, s.trialJTR, s.trial) / 2
		}
		return cost, s.cost - cost
	}
	s.residual(s.trialR, s.trial)
	// Summed by differences: of two nearly equal costs only the leading digits would cancel.
	for i, r := range s.r {
		decrease += (r - s.trialR[i]) * (r + s.trialR[i])
	}
	return dot(s.trialR, s.trialR) / 2, decrease / 2
}

// exchange swaps the current and the trial point.
func (s *state) exchange() {
	s.x, s.trial = s.trial, s.x
	s.r, s.trialR = s.trialR, s.r
	s.jtj, s.trialJTJ = s.trialJTJ, s.jtj
	s.jtr, s.trialJTR = s.trialJTR, s.jtr
}

// change is the largest relative change of a variable by the step.
func (s *state) change() float64 {
	var change float64
	for k, p := range s.p {
		if s.settings.UnitScaling {
			change = math.Max(change, math.Abs(p))
		} else if p != 0 {
			change = math.Max(change, math.Abs(p)/math.Abs(s.x[k]))
		}
	}
	return change
}

// resize sets the radius after a step whose cost decreased by actual, ratio times what was predicted.
func (s *state) resize(ratio, actual float64) {
	switch {
	case ratio < poor:
		factor := leastShrink
		if actual < 0 {
			// The parabola through the cost and its slope at x and the cost at x + p is lowest at this fraction of p.
			slope := dot(s.gradient, s.p)
			factor = slope / (2 * (slope + actual))
		}
		s.radius = math.Min(s.radius, s.length) * math.Max(mostShrink, math.Min(factor, leastShrink))
	case ratio > good:
		s.radius = math.Max(s.radius, growth*s.length)
	}
}

func (s *state) stop(status Status, measured, limit float64) {
	s.status, s.measured, s.limit = status, measured, limit
}

// result copies the end point out of the workspace.
func (s *state) result() *Result {
	m, n := s.m, s.n
	size := 2*n + m + m*n
	if s.normal {
		size = 2*n + n*n
	}
	memory := make([]float64, size)
	r := &Result{
		X:                   memory[:n:n],
		Gradient:            memory[n : 2*n : 2*n],
		AtBound:             make([]bool, n),
		Cost:                s.cost,
		Status:              s.status,
		Measured:            s.measured,
		Limit:               s.limit,
		Iterations:          s.iterations,
		ResidualEvaluations: s.residuals,
		JacobianEvaluations: s.jacobians,
	}
	if s.normal {
		r.Normal = memory[2*n:]
		copy(r.Normal, s.jtj)
	} else {
		r.Residuals = memory[2*n : 2*n+m : 2*n+m]
		copy(r.Residuals, s.r)
		r.Jacobian = mat.NewDense(m, n, memory[2*n+m:])
		r.Jacobian.Copy(s.jac)
	}
	copy(r.X, s.x)
	copy(r.Gradient, s.gradient)
	for k, x := range r.X {
		r.AtBound[k] = x == s.low[k] || x == s.high[k]
	}
	return r
}

// worst returns the index of the first element that is not finite, or else of the largest.
func worst(x []float64) int {
	at := 0
	for i, v := range x {
		if !isFinite(v) {
			return i
		}
		if math.Abs(v) > math.Abs(x[at]) {
			at = i
		}
	}
	return at
}

func isFinite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
