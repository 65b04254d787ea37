package rational

import (
	"cmp"
	"math"
	"math/cmplx"
	"slices"
)

// first is r/(s + a), a > 0.
type first struct{ a, r float64 }

// second is (r1·s + r0)/(s² + 2·alpha·s + beta), both positive: a complex pair, or two real poles where alpha² ≥ beta.
type second struct{ alpha, beta, r1, r0 float64 }

// sections is the model in normalised frequency: d + e·s + o/s + first-order + second-order sections.
type sections struct {
	d, e, o float64
	one     []first
	two     []second
}

func (m *sections) clone() *sections {
	c := *m
	c.one = slices.Clone(m.one)
	c.two = slices.Clone(m.two)
	return &c
}

// order is the number of poles, those at 0 and ∞ not counted.
func (m *sections) order() int { return len(m.one) + 2*len(m.two) }

// at returns the value at s = jx.
func (m *sections) at(x float64) complex128 {
	z := complex(m.d, m.e*x-m.o/x)
	for _, f := range m.one {
		z += complex(f.r, 0) * recip(complex(f.a, x))
	}
	for _, p := range m.two {
		z += complex(p.r0, p.r1*x) * recip(p.denominator(x))
	}
	return z
}

// denominator is s² + 2αs + β at s = jx. √β − x is taken first, so that nothing cancels near a sharp resonance.
func (p *second) denominator(x float64) complex128 {
	b := math.Sqrt(p.beta)
	return complex((b-x)*(b+x), 2*p.alpha*x)
}

// recip is 1/v; the runtime's complex division is several times slower. The values here are far from overflow.
func recip(v complex128) complex128 {
	n := real(v)*real(v) + imag(v)*imag(v)
	return complex(real(v)/n, -imag(v)/n)
}

// model converts to ohms and seconds: s = s'·w0.
func (m *sections) model(w0 float64) Model {
	out := Model{Constant: m.d, Slope: m.e / w0, Origin: m.o * w0}
	add := func(p, r complex128) {
		out.Poles = append(out.Poles, p*complex(w0, 0))
		out.Residues = append(out.Residues, r*complex(w0, 0))
	}
	for _, f := range m.one {
		add(complex(-f.a, 0), complex(f.r, 0))
	}
	for _, p := range m.two {
		disc := (p.alpha - math.Sqrt(p.beta)) * (p.alpha + math.Sqrt(p.beta))
		if math.Abs(disc) < 1e-12*p.beta {
			disc = 1e-12 * p.beta // a double pole has no partial fractions; part it by less than anybody can see
		}
		if disc < 0 {
			q := complex(-p.alpha, math.Sqrt(-disc))
			r := (complex(p.r1, 0)*q + complex(p.r0, 0)) / complex(0, 2*imag(q))
			add(q, r)
			add(cmplx.Conj(q), cmplx.Conj(r))
			continue
		}
		hi := p.alpha + math.Sqrt(disc)
		lo := p.beta / hi
		add(complex(-lo, 0), complex((p.r0-p.r1*lo)/(hi-lo), 0))
		add(complex(-hi, 0), complex((p.r1*hi-p.r0)/(hi-lo), 0))
	}
	// By |p|, pairs together and the upper one first.
	index := make([]int, len(out.Poles))
	for i := range index {
		index[i] = i
	}
	slices.SortStableFunc(index, func(a, b int) int {
		return cmp.Compare(cmplx.Abs(out.Poles[a]), cmplx.Abs(out.Poles[b]))
	})
	poles, residues := make([]complex128, len(index)), make([]complex128, len(index))
	for i, k := range index {
		poles[i], residues[i] = out.Poles[k], out.Residues[k]
	}
	out.Poles, out.Residues = poles, residues
	return out
}

// A band is what the poles are held to, in normalised frequency.
type band struct{ lo, hi float64 }

// minDamping is the smallest damping ratio α/√β: Q = 1/(2·minDamping). Quartz reaches a Q of some 10⁶.
const minDamping = 1e-8

// hold moves the poles into the band.
func (m *sections) hold(b band) {
	for i := range m.one {
		m.one[i].a = min(max(m.one[i].a, b.lo), b.hi)
	}
	for i := range m.two {
		p := &m.two[i]
		p.beta = min(max(p.beta, b.lo*b.lo), b.hi*b.hi)
		w := math.Sqrt(p.beta)
		p.alpha = min(max(p.alpha, minDamping*w), b.overdamped(p.beta))
	}
}

// overdamped returns the largest α of a section: its two real poles a and β/a are both inside the band where the larger is at
// most min(hi, β/lo).
func (b band) overdamped(beta float64) float64 {
	far := min(b.hi, beta/b.lo)
	return (far + beta/far) / 2
}
