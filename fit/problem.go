package fit

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"realpart/fit/lm"
	"realpart/models"
)

// problem is one circuit on one sweep: what the solver minimises. Rows 2i and
// 2i+1 of the residual are the two parts of point i; columns are the free
// parameters' unknowns.
type problem struct {
	circuit    *models.Circuit
	parameters []models.Parameter
	settings   *Settings
	evaluator  *models.Evaluator
	points
	weight     Weight
	reference  float64
	connection Connection

	values []float64 // of all parameters; the fixed ones stay
	free   []int     // indices of the free parameters
	scale  float64   // of the soft-L1 loss, in units of the residual; 0: none

	workspace *lm.Workspace // of the solver; nil: each solve makes its own

	z  []complex128   // model at the last evaluation
	dz [][]complex128 // ∂z/∂x, nil for fixed parameters
}

// points is a sweep with what its weighting needs of it.
type points struct {
	freq     []float64
	measured []complex128
	inverse  []complex128 // 1/measured
	s        []complex128 // S-parameter of measured, for SParameter
	magnitude,
	phase []float64 // stated accuracy of each point, for Accuracy and the meter's part of the uncertainty; nil: none
}

func (p *points) pick(index []int) points {
	q := points{freq: make([]float64, 0, len(index)), measured: make([]complex128, 0, len(index)), inverse: make([]complex128, 0, len(index))}
	for _, i := range index {
		q.freq = append(q.freq, p.freq[i])
		q.measured = append(q.measured, p.measured[i])
		q.inverse = append(q.inverse, p.inverse[i])
		if p.s != nil {
			q.s = append(q.s, p.s[i])
		}
		if p.magnitude != nil {
			q.magnitude = append(q.magnitude, p.magnitude[i])
			q.phase = append(q.phase, p.phase[i])
		}
	}
	return q
}

func newProblem(c *models.Circuit, pts points, weight Weight, s *Settings) *problem {
	p := &problem{
		circuit: c, parameters: c.Parameters(), settings: s, points: pts, weight: weight,
		reference: s.Reference, connection: s.Connection,
		evaluator: c.NewEvaluator(pts.freq),
		values:    make([]float64, len(c.Parameters())),
		z:         make([]complex128, len(pts.freq)),
		dz:        make([][]complex128, len(c.Parameters())),
	}
	n := len(pts.freq)
	columns := make([]complex128, n*len(p.parameters))
	p.free = make([]int, 0, len(p.parameters))
	for i, parameter := range p.parameters {
		if v, ok := s.Fixed[parameter.Name]; ok {
			p.values[i] = v
			continue
		}
		p.free = append(p.free, i)
		p.dz[i] = columns[i*n : (i+1)*n : (i+1)*n]
	}
	return p
}

func (p *problem) lm() lm.Problem {
	return lm.Problem{Size: 2 * len(p.freq), Residual: p.residual, Jacobian: p.jacobian}
}

// set puts the unknowns of the free parameters into the values.
func (p *problem) set(x []float64) {
	for k, i := range p.free {
		p.values[i] = p.parameters[i].Scale.Value(x[k])
	}
}

// unknowns returns the unknowns of the free parameters' present values.
func (p *problem) unknowns() []float64 {
	x := make([]float64, len(p.free))
	for k, i := range p.free {
		x[k] = p.parameters[i].Scale.Unknown(p.values[i])
	}
	return x
}

func (p *problem) residual(dst, x []float64) {
	p.set(x)
	p.evaluator.Impedance(p.z, p.values)
	for i, z := range p.z {
		a, b := p.pair(i, z)
		if p.scale > 0 {
			g, _ := softL1((a*a + b*b) / (p.scale * p.scale))
			a, b = g*a, g*b
		}
		dst[2*i], dst[2*i+1] = a, b
	}
}

// pair returns the two parts of the weighted residual of point i.
func (p *problem) pair(i int, z complex128) (a, b float64) {
	switch p.weight {
	case Uniform:
		d := z - p.measured[i]
		return real(d), imag(d)
	case SParameter:
		s, _ := p.connection.sParameter(z, p.reference)
		d := s - p.s[i]
		return real(d), imag(d)
	}
	a, b = logRatio(z * p.inverse[i])
	if p.weight == Accuracy {
		a /= p.magnitude[i]
		b /= p.phase[i]
	}
	return a, b
}

// logRatio returns real and imaginary part of the principal ln q.
//
// Near q = 1, where a fit spends most of its time, the series of artanh and
// arctan are faster than the library's functions and as exact:
//
//	½·ln s = artanh u, u = (s − 1)/(s + 1);  |u|, |t| < 1/16, so that the
//	first term left out is below 2^−52 of the sum.
func logRatio(q complex128) (a, b float64) {
	re, im := real(q), imag(q)
	s := re*re + im*im
	if re > 0 && s > 0.89 && s < 1.12 {
		if t := im / re; t < 1./16 && t > -1./16 {
			// s − 1 without cancellation
			u := ((re-1)*(re+1) + im*im) / (s + 1)
			v, w := u*u, t*t
			return u * (1 + v*(1./3+v*(1./5+v*(1./7+v*(1./9+v*(1./11+v*(1./13))))))),
				t * (1 - w*(1./3-w*(1./5-w*(1./7-w*(1./9-w*(1./11-w*(1./13)))))))
		}
	}
	return 0.5 * math.Log(s), math.Atan2(im, re)
}

func (p *problem) jacobian(dst *mat.Dense, x []float64) {
	p.set(x)
	p.evaluator.Jacobian(p.z, p.dz, p.values)
	raw := dst.RawMatrix()
	for i, z := range p.z {
		slope, sa, sb := p.slope(i, z)
		even := raw.Data[2*i*raw.Stride : 2*i*raw.Stride+raw.Cols]
		odd := raw.Data[(2*i+1)*raw.Stride : (2*i+1)*raw.Stride+raw.Cols]
		for k, j := range p.free {
			d := p.dz[j][i] * slope
			even[k], odd[k] = real(d)*sa, imag(d)*sb
		}
		if p.scale > 0 {
			a, b := p.pair(i, z)
			g, dg := softL1((a*a + b*b) / (p.scale * p.scale))
			dg *= 2 / (p.scale * p.scale)
			for k := range even {
				da, db := even[k], odd[k]
				ds := dg * (a*da + b*db)
				even[k], odd[k] = g*da+a*ds, g*db+b*ds
			}
		}
	}
}

// slope returns the derivative of the complex residual of point i by z, and
// the factors of its two parts.
func (p *problem) slope(i int, z complex128) (slope complex128, a, b float64) {
	switch p.weight {
	case Uniform:
		return 1, 1, 1
	case SParameter:
		_, d := p.connection.sParameter(z, p.reference)
		return d, 1, 1
	case Accuracy:
		return 1 / z, 1 / p.magnitude[i], 1 / p.phase[i]
	}
	return 1 / z, 1, 1
}

// shift returns the change of the weighted residual of point i when the
// measured impedance is wrong by the relative error e.
func (p *problem) shift(i int, e complex128) (a, b float64) {
	slope, sa, sb := p.slope(i, p.measured[i])
	d := -e * p.measured[i] * slope
	return real(d) * sa, imag(d) * sb
}
