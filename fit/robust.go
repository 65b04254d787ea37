package fit

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"realpart/fit/lm"
	"realpart/fit/residual"
)

// setAside is the residual in units of the loss's scale above which a point
// counts as set aside: its pull r/√(1+s), s = r², is then below a fifth of r.
const setAside = 5

// searchScale is the scale of the soft-L1 loss in a robust search: wide
// enough to keep the basin of the plain residual, narrow enough that points
// wrong by a factor count little.
const searchScale = 0.1

// polishRobust goes on from a plain solution with the soft-L1 loss. Its scale
// comes down in steps from one at which points wrong by a factor already count
// little, since the loss with a small scale has many minima, to the noise: the
// median absolute deviation of the robust fit's residuals. That of the plain
// fit, which the wild points have pulled, would make the noise look larger.
func (p *problem) polishRobust(plain *lm.Result, settings *lm.Settings) (*lm.Result, error) {
	const steps, fall = 30, 3.0
	r := plain
	scale := residual.MAD(p.plainResiduals(r.X))
	if p.weight == Relative {
		scale = max(scale, searchScale)
	}
	for range steps {
		if !(scale > 0) {
			return plain, nil
		}
		p.scale = scale
		var err error
		if r, err = p.minimise(r.X, settings); err != nil {
			return nil, err
		}
		next := max(residual.MAD(p.plainResiduals(r.X)), scale/fall)
		if math.Abs(next-scale) <= 1e-3*scale {
			break
		}
		scale = next
	}
	return r, nil
}

// plainResiduals returns the weighted residuals without the robust loss.
func (p *problem) plainResiduals(x []float64) []float64 {
	scale := p.scale
	p.scale = 0
	defer func() { p.scale = scale }()
	r := make([]float64, 2*len(p.freq))
	p.residual(r, x)
	return r
}

// robustSpread returns the Jacobian of the plain residuals at the solution
// and the standard deviation that makes (JᵀJ)⁻¹·s² the covariance of an
// M-estimate (Huber 1973, Annals of Statistics 1, 799–821):
//
//	s² = Σ|ψ|²/ν / κ²,  ψ = r/√(1+q),  q = |r|²/scale²,
//	κ = mean of the derivative of ψ = (1 − q/(2(1+q)))/√(1+q)
//
// with r the two parts of a point. It also lists the points set aside.
func (r *Result) robustSpread() (*mat.Dense, float64) {
	p := r.problem
	plain := p.plainResiduals(r.x)
	scale := p.scale
	p.scale = 0
	j := p.jacobianAt(r.x)
	p.scale = scale
	squares, slope := 0.0, 0.0
	for i := range p.freq {
		a, b := plain[2*i], plain[2*i+1]
		q := (a*a + b*b) / (scale * scale)
		squares += (a*a + b*b) / (1 + q)
		slope += (1 - q/(2*(1+q))) / math.Sqrt(1+q)
		if q > setAside*setAside {
			r.SetAside = append(r.SetAside, p.freq[i])
		}
	}
	slope /= float64(len(p.freq))
	return j, math.Sqrt(squares/float64(r.DegreesOfFreedom)) / slope
}
