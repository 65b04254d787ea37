package lm

import "strconv"

// Status says why a solve ended.
type Status int

const (
	// NotRun is the zero value: nothing in the result has a meaning.
	NotRun Status = iota
	// GradientConvergence: ‖P·r‖ ≤ GradientTolerance·‖r‖, where P projects onto the span of the Jacobian's columns of all
	// variables that are free to move. The residuals are orthogonal to everything a step can change.
	GradientConvergence
	// StepConvergence: the full step, not shortened by the trust region, changes no variable by more than StepTolerance
	// relative to its value (with UnitScaling: by more than StepTolerance). X is the point after that step, unless the
	// step raised the cost.
	StepConvergence
	// CostConvergence: the full step lowered the cost, as predicted and as far as rounding shows, by no more than
	// CostTolerance·cost. X is the point after that step.
	CostConvergence
	// SlowConvergence: five steps in a row, of whatever length, lowered the cost together by no more than
	// SlowTolerance·cost. X is the point after them.
	SlowConvergence
	// RoundingConvergence: ‖P·r‖ ≤ ε·Σ‖J_j‖·|x_j|, so that no step changes the residuals by more than the rounding of x
	// does; or all residuals are zero. Problems with an exact solution end like this.
	RoundingConvergence
	// Stalled: no step however short lowers the cost, though no convergence test holds. Mostly the Jacobian is wrong, or
	// the residuals are not smooth or carry few digits. X is the best point found.
	Stalled
	// IterationLimit: MaxIterations steps were tried. X is the best point found.
	IterationLimit
	// NonFinite: the residuals or the Jacobian at the start are not finite. Solve returned an error.
	NonFinite
)

// statuses holds for every Status its text, the sentence of Result.Reason around the measured value and the limit, and
// the answers of Converged and Usable.
var statuses = [...]struct {
	text                   string
	before, between, after string
	converged, usable      bool
}{
	NotRun:              {text: "not run"},
	GradientConvergence: {"gradient convergence", "cosine between residuals and Jacobian ", " <= ", " (GradientTolerance)", true, true},
	StepConvergence:     {"step convergence", "largest change of a variable in a full step ", " <= ", " (StepTolerance)", true, true},
	CostConvergence:     {"cost convergence", "relative decrease of the cost ", " <= ", " (CostTolerance)", true, true},
	SlowConvergence:     {"slow convergence", "relative decrease of the cost by five steps ", " <= ", " (SlowTolerance)", true, true},
	RoundingConvergence: {"rounding convergence", "reachable change of the residuals ", " <= ", " (rounding of the variables)", true, true},
	Stalled:             {"stalled", "no decrease of the cost down to a step of length ", " in the radius ", "", false, true},
	IterationLimit:      {"iteration limit", "steps tried ", " >= ", " (MaxIterations)", false, true},
	NonFinite:           {text: "not finite"},
}

// String returns a short text, for a value that is not in the list Status(value).
func (s Status) String() string {
	if s.known() {
		return statuses[s].text
	}
	return "Status(" + strconv.Itoa(int(s)) + ")"
}

// Converged reports whether one of the convergence tests holds at the result's X.
func (s Status) Converged() bool { return s.known() && statuses[s].converged }

// Usable reports whether the result's X is an evaluated point and not worse than the start.
func (s Status) Usable() bool { return s.known() && statuses[s].usable }

func (s Status) known() bool { return s >= 0 && int(s) < len(statuses) }

// reason puts the numbers into the sentence of the status.
func reason(s Status, measured, limit float64) string {
	e := &statuses[s]
	text := make([]byte, 0, 160)
	text = append(text, e.before...)
	text = strconv.AppendFloat(text, measured, 'g', 4, 64)
	text = append(text, e.between...)
	text = strconv.AppendFloat(text, limit, 'g', 4, 64)
	text = append(text, e.after...)
	return string(text)
}
