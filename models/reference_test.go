package models

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"strings"
	"testing"
)

// reference evaluates a node by complex arithmetic alone, from the laws as the
// documentation of [Element] states them. gain is the factor by which a common
// relative error of the elements can grow: above 1 where terms cancel, which
// is near a resonance of little loss and about its Q there. sharpest is the
// largest gain of any node of the tree, which a larger impedance in series may
// hide from the outside.
func reference(n *Node, f float64, values []float64) (z complex128, gain, sharpest float64) {
	jw := complex(0, 2*math.Pi*f)
	if n.Kind == Leaf {
		return referenceElement(n, jw, values), 1, 1
	}
	var sum complex128
	var size float64
	for _, child := range n.Children {
		z, gain, s := reference(child, f, values)
		if n.Kind == Parallel {
			z = 1 / z
		}
		sum += z
		size += gain * cmplx.Abs(z)
		sharpest = max(sharpest, s)
	}
	gain = size / cmplx.Abs(sum)
	if n.Kind == Parallel {
		sum = 1 / sum
	}
	return sum, gain, max(sharpest, gain)
}

func referenceElement(n *Node, jw complex128, values []float64) complex128 {
	first := complex(values[n.Parameters[0]], 0)
	var second float64
	if len(n.Parameters) == 2 {
		second = values[n.Parameters[1]]
	}
	switch n.Element {
	case Resistor:
		return first
	case Inductor:
		return jw * first
	case Capacitor:
		return 1 / (jw * first)
	case LossCapacitor:
		exponent := 1 - 2/math.Pi*math.Atan(second)
		omega0 := complex(2*math.Pi*1000, 0)
		return complex(math.Sqrt(1+second*second), 0) * cmplx.Pow(jw/omega0, complex(1-exponent, 0)) / (jw * first)
	case ConstantPhase:
		return 1 / (first * cmplx.Pow(jw, complex(second, 0)))
	case Skin:
		return first * cmplx.Sqrt(jw)
	case RCLine:
		c := complex(second, 0)
		root := cmplx.Sqrt(jw * first * c)
		coth := complex(1, 0)
		if real(root) < 20 { // beyond, coth is 1 and the parts of tanh overflow
			coth = 1 / cmplx.Tanh(root)
		}
		return cmplx.Sqrt(first/(jw*c)) * coth
	}
	panic(fmt.Sprintf("no law for element %d", n.Element))
}

// elementExpressions holds each element on its own.
var elementExpressions = []string{"R", "L", "C", "loss(C, tand)", "cpe(Q, n)", "skin(K)", "rcline(R, C)"}

// everyCircuit returns each element on its own and the whole library.
func everyCircuit() []*Circuit {
	var all []*Circuit
	for _, expression := range elementExpressions {
		all = append(all, mustParse(expression))
	}
	for _, m := range Library() {
		all = append(all, m.Circuit)
	}
	return all
}

// realistic returns values as parts have them, log-uniform in their range.
func realistic(rng *rand.Rand, c *Circuit) []float64 {
	logUniform := func(low, high float64) float64 { return low * math.Pow(high/low, rng.Float64()) }
	values := make([]float64, len(c.Parameters()))
	for i, p := range c.Parameters() {
		switch {
		case p.Scale == LogitScale:
			values[i] = 0.2 + 0.78*rng.Float64()
		case p.Unit == "Ω":
			values[i] = logUniform(1e-3, 1e6)
		case p.Unit == "H":
			values[i] = logUniform(1e-10, 1e-1)
		case p.Unit == "F":
			values[i] = logUniform(1e-13, 1e-2)
		case p.Unit == "1":
			values[i] = logUniform(1e-4, 0.5)
		case p.Unit == "Ω·s^½":
			values[i] = logUniform(1e-6, 1e-2)
		case strings.HasPrefix(p.Unit, "F·s"):
			values[i] = logUniform(1e-10, 1e-2)
		default:
			panic("no range for unit " + p.Unit)
		}
	}
	return values
}

// randomExpression writes a circuit of the given number of elements; pick(n)
// chooses one of n.
func randomExpression(pick func(n int) int, elements int) string {
	made := 0
	var write func(elements int) string
	write = func(elements int) string {
		if elements == 1 {
			made++
			switch pick(7) {
			case 0, 1:
				return fmt.Sprintf([]string{"R%d", "ESR%d", "DCR%d"}[pick(3)], made)
			case 2:
				return fmt.Sprintf([]string{"L%d", "ESL%d"}[pick(2)], made)
			case 3:
				return fmt.Sprintf("C%d", made)
			case 4:
				return fmt.Sprintf("loss(c%d,tand_%d)", made, made)
			case 5:
				return fmt.Sprintf("cpe( Q%d,n%d )", made, made)
			}
			return fmt.Sprintf([]string{"skin(k%d)", "rcline(r%[1]d, x%[1]d)"}[pick(2)], made)
		}
		left := 1 + pick(elements-1)
		text := write(left) + []string{"+", " + ", "||", " || "}[pick(4)] + write(elements-left)
		if pick(2) == 0 {
			text = "(" + text + ")"
		}
		return text
	}
	return write(elements)
}

// finite reports whether neither part is infinite or NaN.
func finite(z complex128) bool { return !cmplx.IsInf(z) && !cmplx.IsNaN(z) }

// requireClose fails unless |got − want| ≤ tolerance·scale; NaN fails.
func requireClose(t *testing.T, what string, got, want complex128, tolerance, scale float64) {
	t.Helper()
	if !(cmplx.Abs(got-want) <= tolerance*scale) {
		t.Errorf("%s: got %v, want %v; difference %.2g of %.3g, tolerance %.2g", what, got, want, cmplx.Abs(got-want)/scale, scale, tolerance)
	}
}

// requireRelative fails unless two numbers agree to a relative tolerance; NaN
// fails.
func requireRelative(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance*math.Abs(want)) {
		t.Errorf("%s: got %.17g, want %.17g; relative difference %.2g, tolerance %.2g", what, got, want, (got-want)/want, tolerance)
	}
}
