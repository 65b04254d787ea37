package fit

import (
	"math"
	"slices"
	"sync"
	"unsafe"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
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
	*points
	weight     Weight
	reference  float64
	connection Connection

	values []float64 // of all parameters; the fixed ones stay
	free   []int     // indices of the free parameters
	scale  float64   // of the soft-L1 loss, in units of the residual; 0: none

	held   *block     // for all evaluations of a solve
	solver lm.Problem // made once

	// The last point of which only the cost was asked, which is where a
	// solve ends, with the model and its relative residuals there.
	at               []float64
	model, residuals []complex128
}

// points is a sweep with what its weighting needs of it.
type points struct {
	freq     []float64
	measured []complex128
	s        []complex128 // S-parameter of measured, for SParameter
	magnitude,
	phase []float64 // stated accuracy of each point, for Accuracy and the meter's part of the uncertainty; nil: none
	low, high float64   // the least and the largest |Z|
	work      *work     // see prepare
	shape     *features // see features
}

// work is what is computed of a sweep for its fits, and again if it is needed
// after they are over.
type work struct {
	grid    models.Grid
	inverse []complex128 // 1/measured
	noise   noise        // see describes
}

// works are those that no sweep needs.
var works = sync.Pool{New: func() any { return new(work) }}

// prepare computes what evaluations need.
func (p *points) prepare() *work {
	if p.work == nil {
		p.work = works.Get().(*work)
		p.compute()
	}
	return p.work
}

func (p *points) compute() {
	w := p.work
	w.grid.Set(p.freq)
	w.noise.sizes = w.noise.sizes[:0]
	w.inverse = slices.Grow(w.inverse[:0], len(p.measured))[:len(p.measured)]
	for i, v := range p.measured {
		if squares := real(v)*real(v) + imag(v)*imag(v); squares > safe && squares < 1/safe {
			d := 1 / squares
			w.inverse[i] = complex(real(v)*d, -imag(v)*d)
		} else {
			w.inverse[i] = 1 / v
		}
	}
}

// release gives back what prepare has computed.
func (p *points) release() {
	if p.work != nil {
		works.Put(p.work)
		p.work = nil
	}
}

// safe is the square of a magnitude that has a reciprocal.
const safe = 1e-290

// pick returns the points of rising indices.
func (p *points) pick(index []int) *points {
	n := len(index)
	q := &points{freq: make([]float64, 0, n), measured: make([]complex128, 0, n), low: p.low, high: p.high}
	for _, i := range index {
		q.freq = append(q.freq, p.freq[i])
		q.measured = append(q.measured, p.measured[i])
		if p.s != nil {
			q.s = append(q.s, p.s[i])
		}
		if p.magnitude != nil {
			q.magnitude = append(q.magnitude, p.magnitude[i])
			q.phase = append(q.phase, p.phase[i])
		}
	}
	q.work = new(work) // too little to be worth giving back
	q.compute()
	return q
}

func newProblem(c *models.Circuit, pts *points, weight Weight, s *Settings) *problem {
	n := len(c.Parameters())
	numbers := make([]float64, 2*n)
	p := &problem{
		circuit: c, parameters: c.Parameters(), settings: s, points: pts, weight: weight,
		reference: s.Reference, connection: s.Connection,
		values: numbers[:n:n], at: numbers[n:n],
	}
	p.free = make([]int, 0, len(p.parameters))
	for i, parameter := range p.parameters {
		if v, ok := s.Fixed[parameter.Name]; ok {
			p.values[i] = v
			continue
		}
		p.free = append(p.free, i)
	}
	return p
}

func (p *problem) lm() lm.Problem {
	return lm.Problem{Size: 2 * len(p.freq), Residual: p.residual, Jacobian: p.jacobian, Normal: p.normal}
}

// block is the memory in which one block of points is evaluated.
type block struct {
	evaluator models.Evaluator
	z         [models.BlockSize]complex128 // of the model
	weight    [models.BlockSize]float64
	weighted  [models.BlockSize]complex128
	// rows holds, each of BlockSize points, the weighted residual, its two
	// parts, and ∂z/∂x of the free parameters.
	rows    []complex128
	rho     []complex128   // the first row
	dz      [][]complex128 // the others, by parameter; nil for fixed ones
	product []float64
}

// blocks are those that no problem works with: one is enough for a worker.
var blocks = sync.Pool{New: func() any { return new(block) }}

// minimise is [lm.Solve] with one block for all evaluations.
func (p *problem) minimise(x []float64, settings *lm.Settings) (*lm.Result, error) {
	b := p.block()
	p.held = b
	defer func() {
		p.held = nil
		p.put(b)
	}()
	if p.solver.Residual == nil {
		p.solver = p.lm()
	}
	return lm.Solve(p.solver, x, settings)
}

// put gives back what block has returned.
func (p *problem) put(b *block) {
	if b != p.held {
		blocks.Put(b)
	}
}

// block returns memory for the evaluation of this problem, for put afterwards.
func (p *problem) block() *block {
	if p.held != nil {
		return p.held
	}
	b := blocks.Get().(*block)
	b.evaluator.Use(p.circuit, &p.prepare().grid)
	n := len(p.parameters)
	if len(b.product) < n+1 {
		b.rows = make([]complex128, (n+1)*models.BlockSize)
		b.rho = b.rows[:models.BlockSize]
		b.dz, b.product = make([][]complex128, n), make([]float64, n+1)
	}
	b.dz = b.dz[:n]
	clear(b.dz)
	for k, i := range p.free {
		b.dz[i] = b.rows[(k+1)*models.BlockSize : (k+2)*models.BlockSize]
	}
	return b
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
	b := p.block()
	defer p.put(b)
	for from := 0; from < len(p.freq); from += models.BlockSize {
		to := min(from+models.BlockSize, len(p.freq))
		b.evaluator.Block(from, to, p.values, b.z[:], nil)
		for i := from; i < to; i++ {
			dst[2*i], dst[2*i+1] = p.robust(p.pair(i, b.z[i-from]))
		}
	}
}

// robust makes the two parts of a residual those of the soft-L1 loss, if that
// is asked for.
func (p *problem) robust(a, b float64) (float64, float64) {
	if p.scale > 0 {
		g, _ := softL1((a*a + b*b) / (p.scale * p.scale))
		a, b = g*a, g*b
	}
	return a, b
}

// modelAt returns the impedance in Ω at the points, and the relative residuals.
func (p *problem) modelAt(x []float64) (model, residuals []complex128) {
	if p.model == nil || !slices.Equal(p.at, x) {
		p.set(x)
		b := p.block()
		defer p.put(b)
		p.keep(b)
	}
	model, residuals = p.model, p.residuals
	p.model, p.residuals = nil, nil
	return model, residuals
}

// keep evaluates model and residuals for the present values.
func (p *problem) keep(b *block) {
	if p.model == nil {
		memory := make([]complex128, 2*len(p.freq))
		p.model, p.residuals = memory[:len(p.freq):len(p.freq)], memory[len(p.freq):]
	}
	for from := 0; from < len(p.freq); from += models.BlockSize {
		to := min(from+models.BlockSize, len(p.freq))
		b.evaluator.Block(from, to, p.values, p.model[from:to], nil)
	}
	logRatios(p.residuals, p.model, p.work.inverse)
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
	a, b = logRatio(z * p.work.inverse[i])
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

// logRatios sets dst to ln(z·inverse): where e = z·inverse − 1 is below 1/256
// by the first terms of
//
//	ln(1 + e) = e·(1 − e·(1/2 − e·(1/3 − e/4 + …)))
//
// to a relative 1e-10, else by [logRatio].
func logRatios(dst, z, inverse []complex128) {
	const small = 1. / 256
	inverse, dst = inverse[:len(z)], dst[:len(z)]
	for i, v := range z {
		q := v * inverse[i]
		e, f := real(q)-1, imag(q)
		if e < small && e > -small && f < small && f > -small {
			a, b := 1./3-e*0.25, f*-0.25
			a, b = 0.5-(e*a-f*b), -(e*b + f*a)
			a, b = 1-(e*a-f*b), -(e*b + f*a)
			dst[i] = complex(e*a-f*b, e*b+f*a)
			continue
		}
		a, b := logRatio(q)
		dst[i] = complex(a, b)
	}
}

// normal sums JᵀJ and Jᵀr over the points, see [lm.Problem]. With w_i a weight
// of point i and d_ik, ρ_i complex,
//
//	(JᵀJ)_kl = Σ w_i·Re(d_ik·d*_il),  (Jᵀr)_k = Σ w_i·Re(d_ik·ρ*_i),
//
// where d_ik = ∂z_i/∂x_k, w_i = 1/|z_i|² and ρ_i = z_i·r_i for the relative
// residual r_i = ln(z_i/measured): to turn and scale the two parts of a
// point's residual together changes neither sum.
func (p *problem) normal(jtj, jtr, x []float64) (squares float64) {
	p.set(x)
	b := p.block()
	defer p.put(b)
	relative := p.weight == Relative && p.scale == 0
	if jtj == nil && relative {
		p.keep(b)
		p.at = append(p.at[:0], x...)
		var re, im float64
		for _, r := range p.residuals {
			re += real(r) * real(r)
			im += imag(r) * imag(r)
		}
		return re + im
	}
	clear(jtj)
	clear(jtr)
	for from := 0; from < len(p.freq); from += models.BlockSize {
		to := min(from+models.BlockSize, len(p.freq))
		b.evaluator.Block(from, to, p.values, b.z[:], b.dz)
		if relative {
			squares += b.weigh(p.work.inverse[from:to])
		} else {
			squares += p.weigh(b, from, to)
		}
		if jtj != nil {
			b.accumulate(jtj, jtr, to-from)
		}
	}
	n := len(p.free)
	for k := range jtr {
		for l := range k {
			jtj[l*n+k] = jtj[k*n+l]
		}
	}
	return squares
}

// weigh sets w and ρ of a block of points of the relative residual from z, and
// returns Σ|r|².
func (b *block) weigh(inverse []complex128) (squares float64) {
	z, rho, weight := b.z[:len(inverse)], b.rho[:len(inverse)], b.weight[:len(inverse)]
	logRatios(rho, z, inverse)
	var aa, bb float64
	for i, r := range rho {
		re, im := real(z[i]), imag(z[i])
		weight[i] = 1 / (re*re + im*im)
		aa += real(r) * real(r)
		bb += imag(r) * imag(r)
		rho[i] = complex(re*real(r)-im*imag(r), re*imag(r)+im*real(r))
	}
	return aa + bb
}

// weigh is block.weigh for any residual; w is 1, and the columns ∂z/∂x become
// those of the residual.
func (p *problem) weigh(b *block, from, to int) (squares float64) {
	for i := from; i < to; i++ {
		k := i - from
		first, second := p.robust(p.pair(i, b.z[k]))
		p.row(b.dz, k, i, b.z[k])
		b.weight[k] = 1
		b.rho[k] = complex(first, second)
		squares += first*first + second*second
	}
	return squares
}

// accumulate adds a block of points to JᵀJ, of which it fills the lower
// triangle, and Jᵀr.
func (b *block) accumulate(jtj, jtr []float64, points int) {
	n := len(jtr)
	weight, weighted := b.weight[:points], b.weighted[:points]
	all := blas64.General{Rows: n + 1, Cols: 2 * points, Stride: 2 * models.BlockSize, Data: numbers(b.rows)}
	product := blas64.Vector{N: n + 1, Inc: 1, Data: b.product}
	for k := range n {
		column := b.rows[(k+1)*models.BlockSize:][:points]
		for i, w := range weight {
			weighted[i] = complex(w*real(column[i]), w*imag(column[i]))
		}
		all.Rows, product.N = k+2, k+2
		blas64.Gemv(blas.NoTrans, 1, all, blas64.Vector{N: 2 * points, Inc: 1, Data: numbers(weighted)}, 0, product)
		jtr[k] += b.product[0]
		for l, v := range b.product[1 : k+2] {
			jtj[k*n+l] += v
		}
	}
}

// numbers sees complex numbers as twice as many real ones.
func numbers(z []complex128) []float64 {
	return unsafe.Slice((*float64)(unsafe.Pointer(unsafe.SliceData(z))), 2*len(z))
}

func (p *problem) jacobian(dst *mat.Dense, x []float64) {
	p.set(x)
	b := p.block()
	defer p.put(b)
	raw := dst.RawMatrix()
	for from := 0; from < len(p.freq); from += models.BlockSize {
		to := min(from+models.BlockSize, len(p.freq))
		b.evaluator.Block(from, to, p.values, b.z[:], b.dz)
		for i := from; i < to; i++ {
			p.row(b.dz, i-from, i, b.z[i-from])
			even := raw.Data[2*i*raw.Stride : 2*i*raw.Stride+raw.Cols]
			odd := raw.Data[(2*i+1)*raw.Stride : (2*i+1)*raw.Stride+raw.Cols]
			for k, j := range p.free {
				even[k], odd[k] = real(b.dz[j][i-from]), imag(b.dz[j][i-from])
			}
		}
	}
}

// jacobianAt returns the Jacobian of the weighted residuals.
func (p *problem) jacobianAt(x []float64) *mat.Dense {
	j := mat.NewDense(2*len(p.freq), len(p.free), nil)
	p.jacobian(j, x)
	return j
}

// row turns element k of the columns ∂z/∂x into the derivatives of the two
// parts of the weighted residual of point i, as real and imaginary part.
func (p *problem) row(dz [][]complex128, k, i int, z complex128) {
	slope, sa, sb := p.slope(i, z)
	var a, b, g, dg float64
	if p.scale > 0 {
		a, b = p.pair(i, z)
		g, dg = softL1((a*a + b*b) / (p.scale * p.scale))
		dg *= 2 / (p.scale * p.scale)
	}
	for _, j := range p.free {
		d := dz[j][k] * slope
		da, db := real(d)*sa, imag(d)*sb
		if p.scale > 0 {
			ds := dg * (a*da + b*db)
			da, db = g*da+a*ds, g*db+b*ds
		}
		dz[j][k] = complex(da, db)
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
