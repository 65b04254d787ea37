package rational

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

// poleColumns returns the columns of the pole terms, each times weight(i): 1/(s + a) for a real pole, then s/D and 1/D for a section.
func (d *sweep) poleColumns(m *sections, weight []complex128) [][]float64 {
	n := len(d.x)
	cols := make([][]float64, 0, m.order())
	for _, f := range m.one {
		cols = append(cols, realColumn(n, func(i int) complex128 { return weight[i] * recip(complex(f.a, d.x[i])) }))
	}
	for _, p := range m.two {
		u := make([]complex128, n)
		for i, x := range d.x {
			u[i] = weight[i] * recip(p.denominator(x))
		}
		cols = append(cols,
			realColumn(n, func(i int) complex128 { return complex(0, d.x[i]) * u[i] }),
			realColumn(n, func(i int) complex128 { return u[i] }))
	}
	return cols
}

// endColumns returns the columns of d, and of e·s and o/s where the model has them, times weight(i).
func (d *sweep) endColumns(weight []complex128) [][]float64 {
	n := len(d.x)
	cols := [][]float64{realColumn(n, func(i int) complex128 { return weight[i] })}
	if d.free.slope {
		cols = append(cols, realColumn(n, func(i int) complex128 { return weight[i] * complex(0, d.x[i]) }))
	}
	if d.free.origin {
		cols = append(cols, realColumn(n, func(i int) complex128 { return weight[i] * complex(0, -1/d.x[i]) }))
	}
	return cols
}

// relativeWeight is 1/Z: with it the linear problem is about the relative error Z_model/Z − 1.
func (d *sweep) relativeWeight() []complex128 {
	w := make([]complex128, len(d.z))
	for i, z := range d.z {
		w[i] = 1 / z
	}
	return w
}

// setLinear takes the coefficients in the order of endColumns, poleColumns.
func (d *sweep) setLinear(m *sections, c []float64) {
	m.d, c = c[0], c[1:]
	m.e, m.o = 0, 0
	if d.free.slope {
		m.e, c = c[0], c[1:]
	}
	if d.free.origin {
		m.o, c = c[0], c[1:]
	}
	for i := range m.one {
		m.one[i].r, c = c[0], c[1:]
	}
	for i := range m.two {
		m.two[i].r1, m.two[i].r0, c = c[0], c[1], c[2:]
	}
}

// solveLinear sets all residues and end terms by linear least squares on Z_model/Z − 1.
func (d *sweep) solveLinear(m *sections, nonNegative bool) {
	w := d.relativeWeight()
	cols := append(d.endColumns(w), d.poleColumns(m, w)...)
	b := make([]float64, 2*len(d.x))
	for i := range d.x {
		b[i] = 1
	}
	if nonNegative {
		d.setLinear(m, nonNegativeLeastSquares(cols, b))
		return
	}
	f := factor(cols, false)
	d.setLinear(m, f.solve(f.project(b)))
}

// relocate makes one step of vector fitting: from the poles of m it returns better ones, residues not yet set. It returns nil where
// the linear problem or the eigenvalues fail. With realOnly, a complex pair becomes two real poles of about its magnitude.
//
// The linear problem, divided by Z, is N(s)/Z − Σ c̃_k·φ_k(s) − d̃ = 0 for every point, and (relaxed form) one row that keeps the mean
// real part of σ at 1, so that σ = 0 is no solution.
func (d *sweep) relocate(m *sections, realOnly bool) *sections {
	n := len(d.x)
	w := d.relativeWeight()
	one := make([]complex128, n)
	for i := range one {
		one[i] = 1
	}
	cols := append(d.endColumns(w), d.poleColumns(m, w)...)
	nNum := len(cols)
	sigma := d.poleColumns(m, one)
	nSigma := len(sigma)
	constant := realColumn(n, func(i int) complex128 { return 1 })
	sigma = append(sigma, constant)
	row := make([]float64, len(sigma))
	rowWeight := 1 / math.Sqrt(float64(n))
	for j, c := range sigma {
		for _, v := range c[:n] {
			row[j] += v
		}
		row[j] *= rowWeight
		for i := range c {
			c[i] = -c[i]
		}
	}
	for j := range cols {
		cols[j] = append(cols[j], 0)
	}
	for j := range sigma {
		sigma[j] = append(sigma[j], row[j])
	}
	b := make([]float64, 2*n+1)
	b[2*n] = rowWeight * float64(n)
	f := factor(append(cols, sigma...), false)
	c := f.solve(f.project(b))[nNum:]
	dTilde := c[nSigma]
	if !(math.Abs(dTilde) > 1e-8) {
		return nil // σ without a constant has no full set of zeros; the caller polishes what it has
	}
	return d.zeros(m, c[:nSigma], dTilde, realOnly)
}

// zeros returns the zeros of σ as poles: the eigenvalues of A − b·c̃ᵀ/d̃, A block-diagonal with −a for a real pole and
//
//	[  0   w ]
//	[ −w  −2α],  w = √β,  b = (0, 1)ᵀ,  c̃ᵀ = (c₀/w, c₁)
//
// for a section (c₁s + c₀)/(s² + 2αs + β).
func (d *sweep) zeros(m *sections, c []float64, dTilde float64, realOnly bool) *sections {
	k := m.order()
	if k == 0 {
		return m.clone()
	}
	a := mat.NewDense(k, k, nil)
	b, out := make([]float64, k), make([]float64, k)
	j := 0
	for _, f := range m.one {
		a.Set(j, j, -f.a)
		b[j], out[j] = 1, c[j]
		j++
	}
	for _, p := range m.two {
		w := math.Sqrt(p.beta)
		a.Set(j, j+1, w)
		a.Set(j+1, j, -w)
		a.Set(j+1, j+1, -2*p.alpha)
		b[j+1] = 1
		out[j], out[j+1] = c[j+1]/w, c[j]
		j += 2
	}
	for i := range k {
		if b[i] == 0 {
			continue
		}
		for l := range k {
			v := a.At(i, l) - out[l]/dTilde
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil
			}
			a.Set(i, l, v)
		}
	}
	var eig mat.Eigen
	if !eig.Factorize(a, mat.EigenNone) {
		return nil
	}
	return fromPoles(eig.Values(nil), d.band, realOnly)
}

// fromPoles makes sections without residues: unstable poles flipped, all moved into the band, poles that coincide there dropped.
func fromPoles(poles []complex128, b band, realOnly bool) *sections {
	m := &sections{}
	for _, p := range poles {
		switch w := cmplx.Abs(p); {
		case w == 0:
			m.one = append(m.one, first{a: b.lo})
		case imag(p) == 0 || realOnly:
			a := w
			if realOnly && imag(p) < 0 {
				a *= 1.2 // the twin of a pair would coincide with it
			}
			m.one = append(m.one, first{a: a})
		case imag(p) > 0:
			m.two = append(m.two, second{alpha: math.Abs(real(p)), beta: w * w})
		}
	}
	m.hold(b)
	m.dropTwins()
	return m
}

// dropTwins removes real poles within 0.1 % of another: their columns are the same to rounding.
func (m *sections) dropTwins() {
	kept := m.one[:0]
	for _, f := range m.one {
		twin := false
		for _, g := range kept {
			if math.Abs(f.a-g.a) < 1e-3*f.a {
				twin = true
			}
		}
		if !twin {
			kept = append(kept, f)
		}
	}
	m.one = kept
}
