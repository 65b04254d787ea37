package netlist

import (
	"fmt"
	"math"

	"realpart/fit/rational"
	"realpart/models"
)

// ladder stands for a distributed element: a chain of sections of R parallel
// to C, or R parallel to L, with what is left at the ends of the range.
type ladder struct {
	element  string // as in the expression
	kind     string // of the sections
	sections int
	error    float64 // largest relative error at and between the fitted points
	// resistance, inductance and capacitance stand in series with the
	// sections; 0: none.
	resistance, inductance, capacitance float64
	sectionR                            []float64
	sectionX                            []float64 // C in F, or L in H where inductive
	inductive                           bool
}

// newLadder finds the ladder with the fewest sections whose impedance is
// within the relative error between two frequencies in Hz.
//
// An R-C chain has the impedance R₀ + 1/(sC₀) + Σ r_k/(s − p_k) with positive
// terms, r = 1/C, p = −1/(RC). An R-L chain has R₀ + sL₀ + Σ s·r_k/(s − p_k),
// which is s times an impedance of the first form with L₀ for R₀ and R₀ for
// 1/C₀ (Foster's first form and its dual).
func newLadder(c *models.Circuit, n *models.Node, values []float64, from, to, maxError float64) (ladder, error) {
	single, own := alone(c, n, values)
	l := ladder{element: single.String(), kind: "R-C sections", inductive: n.Element == models.Skin}
	if l.inductive {
		l.kind = "R-L sections"
	}
	freq := grid(from, to)
	z := make([]complex128, len(freq))
	single.NewEvaluator(freq).Impedance(z, own)
	fitted := z
	if l.inductive {
		fitted = make([]complex128, len(z))
		for i, f := range freq {
			fitted[i] = z[i] / complex(0, 2*math.Pi*f)
		}
	}
	check := append([]float64(nil), freq...)
	for i := range freq[1:] {
		check = append(check, math.Sqrt(freq[i]*freq[i+1]))
	}
	want, got := make([]complex128, len(check)), make([]complex128, len(check))
	single.NewEvaluator(check).Impedance(want, own)
	for sections := 1; sections <= len(freq)/3; sections++ {
		r, err := rational.Fit(freq, fitted, &rational.Settings{
			MaxPoles: sections, RealPolesOnly: true, PositiveResidues: true, NoSlope: true, Margin: 100,
		})
		if err != nil {
			return l, err
		}
		l.set(&r.Model)
		for i, f := range check {
			got[i] = l.at(f)
		}
		if l.error = relativeError(got, want); l.error <= maxError {
			return l, nil
		}
	}
	return l, fmt.Errorf("no ladder for %s reaches an error of %.2g %%, the best has %.2g %%", single, 100*maxError, 100*l.error)
}

// alone returns the circuit of one element, and its values.
func alone(c *models.Circuit, n *models.Node, values []float64) (*models.Circuit, []float64) {
	whole := c
	for i := 0; ; {
		// Take away every parameter that is not the element's own.
		if i == len(whole.Parameters()) {
			break
		}
		own := false
		for _, p := range n.Parameters {
			own = own || whole.Parameters()[i].Name == c.Parameters()[p].Name
		}
		if own {
			i++
			continue
		}
		whole, _ = whole.Without(i)
		i = 0
	}
	var single []float64
	for _, p := range n.Parameters {
		single = append(single, values[p])
	}
	return whole, single
}

// set takes the sections from a rational function.
func (l *ladder) set(m *rational.Model) {
	l.sectionR, l.sectionX = nil, nil
	l.resistance, l.inductance, l.capacitance = 0, 0, 0
	if l.inductive {
		l.resistance, l.inductance = m.Origin, m.Constant
	} else {
		l.resistance = m.Constant
		if m.Origin > 0 {
			l.capacitance = 1 / m.Origin
		}
	}
	for k, residue := range m.Residues {
		r, p := real(residue), -real(m.Poles[k])
		if !(r > 0 && p > 0) {
			continue
		}
		if l.inductive {
			l.sectionR, l.sectionX = append(l.sectionR, r), append(l.sectionX, r/p)
		} else {
			l.sectionR, l.sectionX = append(l.sectionR, r/p), append(l.sectionX, 1/r)
		}
	}
	l.sections = len(l.sectionR)
}

// at returns the impedance in Ω of the elements as they are written.
func (l ladder) at(freq float64) complex128 {
	omega := 2 * math.Pi * freq
	z := complex(l.resistance, omega*l.inductance)
	if l.capacitance > 0 {
		z += complex(0, -1/(omega*l.capacitance))
	}
	for k, r := range l.sectionR {
		y := complex(1/r, omega*l.sectionX[k])
		if l.inductive {
			y = complex(1/r, -1/(omega*l.sectionX[k]))
		}
		z += 1 / y
	}
	return z
}

// layLadder puts the chain between two nodes: the capacitor last, so that all
// nodes before it have a path for direct current.
func (b *builder) layLadder(l ladder, name, from, to string) {
	type step struct {
		kind, suffix string
		value        float64
		sectionX     float64
	}
	var steps []step
	if l.resistance > 0 {
		steps = append(steps, step{kind: "R", suffix: "0", value: l.resistance})
	}
	if l.inductance > 0 {
		steps = append(steps, step{kind: "L", suffix: "0", value: l.inductance})
	}
	for k, r := range l.sectionR {
		steps = append(steps, step{kind: "R", suffix: fmt.Sprint(k + 1), value: r, sectionX: l.sectionX[k]})
	}
	if l.capacitance > 0 {
		steps = append(steps, step{kind: "C", suffix: "0", value: l.capacitance})
	}
	for i, s := range steps {
		next := to
		if i < len(steps)-1 {
			next = b.node()
		}
		b.add(s.kind, s.kind+name+"_"+s.suffix, from, next, s.value)
		if s.sectionX > 0 {
			kind := "C"
			if l.inductive {
				kind = "L"
			}
			b.add(kind, kind+name+"_"+s.suffix, from, next, s.sectionX)
		}
		from = next
	}
}
