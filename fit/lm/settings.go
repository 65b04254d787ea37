package lm

import (
	"fmt"
	"math"
)

// Defaults that stand for zero fields of Settings.
const (
	DefaultGradientTolerance = 1e-10
	DefaultStepTolerance     = 1e-11
	DefaultCostTolerance     = 1e-18
	DefaultMaxIterations     = 1000
)

// differenceEase multiplies the default tolerances of gradient and step, and its square that of the cost, if the
// Jacobian comes from differences: its relative error of ε^⅔, 4e-11, is then what the tests see.
const differenceEase = 10

// Settings steer a solve. The zero value, and a nil pointer, mean the defaults. They ask for all the digits that float64
// holds in the residuals, which costs one or two steps more than a statistician would need. Without an analytic Jacobian
// the defaults of the gradient and the step tolerance are 10 times, that of the cost 100 times larger.
type Settings struct {
	// GradientTolerance leads to GradientConvergence. It bounds the cosine of the angle between r and what the free
	// columns of the Jacobian span: the relative offset of Bates and Watts (Technometrics 23 (1981) 179) but for a
	// factor of the counts. That is the distance to the solution in units of the standard uncertainty, whatever the
	// units and the conditioning of the variables. Zero: DefaultGradientTolerance.
	GradientTolerance float64
	// StepTolerance leads to StepConvergence. It bounds the largest relative change of a variable by a full step. Zero:
	// DefaultStepTolerance.
	StepTolerance float64
	// CostTolerance leads to CostConvergence. It bounds the relative decrease of the cost that a full step was predicted
	// to give, the measured one being as small or lost in rounding. Zero: DefaultCostTolerance, which is below the
	// resolution of the cost itself but not of the prediction.
	CostTolerance float64
	// SlowTolerance leads to SlowConvergence: the relative decrease of the cost that five steps in a row must exceed
	// together. It ends the way along the flat valley of variables that the data hardly determine, where the region stays
	// small and no step is a full one. Zero: not tested.
	SlowTolerance float64
	// MaxIterations bounds the steps tried, refused ones too, and leads to IterationLimit. Zero: DefaultMaxIterations.
	MaxIterations int
	// InitialRadius is the radius of the first trust region, the greatest length ‖D·p‖ of the first step. D is the
	// diagonal of the Jacobian's column norms, so the radius has the unit of the residuals; with UnitScaling D is the
	// unit matrix and the radius has the unit of x. Zero: the rule told at Solve.
	InitialRadius float64
	// UnitScaling says that the variables are of one scale already, such as logarithms: D is the unit matrix,
	// StepTolerance bounds the change of a variable itself, and differences step relative to at least 1.
	UnitScaling bool
	// MaxStep bounds the change of every variable in one step. Zero: no bound.
	MaxStep float64
	// Lower and Upper are bounds that every point evaluated keeps, both ends included; equal ones fix a variable. A
	// variable without a bound has -Inf or +Inf. Nil: no bounds.
	Lower, Upper []float64
	// Workspace is memory to use again. Nil: the solve takes that of one that is over.
	Workspace *Workspace
}

// bounds returns the bounds of variable k.
func (s *Settings) bounds(k int) (low, high float64) {
	low, high = math.Inf(-1), math.Inf(1)
	if s.Lower != nil {
		low = s.Lower[k]
	}
	if s.Upper != nil {
		high = s.Upper[k]
	}
	return low, high
}

// resolve checks the settings against the start and fills in the defaults.
func (s *Settings) resolve(start []float64, differences bool) (o Settings, err error) {
	if s != nil {
		o = *s
	}
	fill := func(name string, v *float64, standard float64) {
		if !(*v >= 0 && *v < 1) && err == nil {
			err = fmt.Errorf("lm: %s is %v, must be at least 0 and below 1", name, *v)
		}
		if *v == 0 {
			*v = standard
		}
	}
	ease := 1.0
	if differences {
		ease = differenceEase
	}
	fill("GradientTolerance", &o.GradientTolerance, DefaultGradientTolerance*ease)
	fill("StepTolerance", &o.StepTolerance, DefaultStepTolerance*ease)
	fill("CostTolerance", &o.CostTolerance, DefaultCostTolerance*ease*ease)
	switch {
	case err != nil:
		return o, err
	case !(o.SlowTolerance >= 0 && o.SlowTolerance < 1):
		return o, fmt.Errorf("lm: SlowTolerance is %v, must be at least 0 and below 1", o.SlowTolerance)
	case o.MaxIterations < 0:
		return o, fmt.Errorf("lm: MaxIterations is %d, must not be negative", o.MaxIterations)
	case !(o.InitialRadius >= 0) || math.IsInf(o.InitialRadius, 1):
		return o, fmt.Errorf("lm: InitialRadius is %v, must be finite and not negative", o.InitialRadius)
	case !(o.MaxStep >= 0):
		return o, fmt.Errorf("lm: MaxStep is %v, must not be negative", o.MaxStep)
	}
	if o.MaxIterations == 0 {
		o.MaxIterations = DefaultMaxIterations
	}
	if o.MaxStep == 0 {
		o.MaxStep = math.Inf(1)
	}
	for k, x := range start {
		low, high := o.bounds(k)
		switch {
		case !isFinite(x):
			return o, fmt.Errorf("lm: start[%d] is %v, must be finite", k, x)
		case !(low <= high) || math.IsInf(low, 1) || math.IsInf(high, -1):
			return o, fmt.Errorf("lm: Lower[%d] is %v and Upper[%d] is %v, must be numbers in ascending order", k, low, k, high)
		case x < low || x > high:
			return o, fmt.Errorf("lm: start[%d] is %v, must lie within its bounds %v and %v", k, x, low, high)
		}
	}
	return o, nil
}
