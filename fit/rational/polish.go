package rational

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// jacobian returns the columns ∂ρ/∂θ, ρ = ln(Z_model/Z), θ = d, (e), (o), (ln a, r) of each real pole, (ln α, ln β, r₁, r₀) of each section.
func (d *sweep) jacobian(m *sections) [][]float64 {
	n := len(d.x)
	w := make([]complex128, n)
	for i, x := range d.x {
		w[i] = recip(m.at(x))
	}
	cols := make([][]float64, 0, 3+2*m.order())
	cols = append(cols, d.endColumns(w)...)
	for _, f := range m.one {
		da, dr := make([]float64, 2*n), make([]float64, 2*n)
		for i, x := range d.x {
			u := recip(complex(f.a, x))
			v := u * w[i]
			dr[i], dr[n+i] = real(v), imag(v)
			v *= u * complex(-f.r*f.a, 0)
			da[i], da[n+i] = real(v), imag(v)
		}
		cols = append(cols, da, dr)
	}
	for _, p := range m.two {
		da, db, d1, d0 := make([]float64, 2*n), make([]float64, 2*n), make([]float64, 2*n), make([]float64, 2*n)
		for i, x := range d.x {
			u := recip(p.denominator(x))
			v := u * w[i]
			d0[i], d0[n+i] = real(v), imag(v)
			d1[i], d1[n+i] = -x*imag(v), x*real(v)
			v *= u * complex(-p.r0, -p.r1*x)
			db[i], db[n+i] = p.beta*real(v), p.beta*imag(v)
			v *= complex(0, 2*p.alpha*x)
			da[i], da[n+i] = real(v), imag(v)
		}
		cols = append(cols, da, db, d1, d0)
	}
	return cols
}

// moved returns the model at θ + step. Logarithms move by at most 1.
func (d *sweep) moved(m *sections, step []float64) *sections {
	grow := func(v, s float64) float64 { return v * math.Exp(min(max(s, -1), 1)) }
	c := m.clone()
	take := func() float64 { s := step[0]; step = step[1:]; return s }
	c.d += take()
	if d.free.slope {
		c.e += take()
	}
	if d.free.origin {
		c.o += take()
	}
	for i := range c.one {
		f := &c.one[i]
		f.a = grow(f.a, take())
		f.r += take()
	}
	for i := range c.two {
		p := &c.two[i]
		p.alpha = grow(p.alpha, take())
		p.beta = grow(p.beta, take())
		p.r1 += take()
		p.r0 += take()
	}
	c.hold(d.band)
	return c
}

// A state is a model with its residuals.
type state struct {
	m   *sections
	r   []float64
	rss float64
}

func (d *sweep) state(m *sections) *state {
	r, rss := d.residuals(m)
	return &state{m, r, rss}
}

// polish minimises Σ|ρ|² over all parameters by damped Gauss–Newton steps from st, until a step gains less than the share tol of the
// sum, at most steps times. The result is never worse than st.
func (d *sweep) polish(st *state, steps int, tol float64, nonNegative bool) *state {
	lambda := 0.0
	for range steps {
		if math.IsInf(st.rss, 0) || !(st.rss > 0) {
			return st
		}
		f, rest := d.linearised(st, false)
		y := f.project(rest)
		var next *state
		for range 8 {
			m := d.moved(st.m, f.damped(y, lambda))
			if nonNegative {
				m.clampResidues()
			}
			if trial := d.state(m); trial.rss < st.rss {
				next = trial
				break
			}
			// Columns have unit length, so λ compares with 1.
			lambda = max(10*lambda, 1e-4)
		}
		if next == nil {
			return st
		}
		gain := (st.rss - next.rss) / st.rss
		st = next
		if lambda /= 10; lambda < 1e-7 {
			lambda = 0
		}
		if gain < tol {
			return st
		}
	}
	return st
}

// linearised returns the factored Jacobian at st, poles at the edge of the band frozen, and −ρ.
func (d *sweep) linearised(st *state, twice bool) (f *factored, rest []float64) {
	cols := d.jacobian(st.m)
	rest = make([]float64, len(st.r))
	for i, v := range st.r {
		rest[i] = -v
	}
	d.freeze(st.m, cols, rest)
	return factor(cols, twice), rest
}

// freeze clears the columns of the poles that stand at the edge of the band and would be moved across it: left in, they would take
// most of the step and then be held back, and the iteration would stall. A pole
// added beside them would seem to be no gain, either.
func (d *sweep) freeze(m *sections, cols [][]float64, rest []float64) {
	edge := func(v, lo, hi float64, col []float64) {
		g := floats.Dot(col, rest)
		if v <= lo*(1+1e-9) && g < 0 || v >= hi*(1-1e-9) && g > 0 {
			clear(col)
		}
	}
	k := len(cols) - 2*m.order()
	for _, f := range m.one {
		edge(f.a, d.band.lo, d.band.hi, cols[k])
		k += 2
	}
	for _, p := range m.two {
		edge(p.alpha, 0, d.band.overdamped(p.beta), cols[k])
		edge(p.beta, d.band.lo*d.band.lo, d.band.hi*d.band.hi, cols[k+1])
		k += 4
	}
}

// clampResidues sets negative coefficients to 0.
func (m *sections) clampResidues() {
	m.d, m.e, m.o = max(m.d, 0), max(m.e, 0), max(m.o, 0)
	for i := range m.one {
		m.one[i].r = max(m.one[i].r, 0)
	}
}
