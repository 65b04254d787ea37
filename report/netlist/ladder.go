package netlist

import (
	"fmt"
	"math"
	"math/cmplx"

	"realpart/fit/rational"
	"realpart/models"
)

// ladder stands for a distributed element: branches of R and C, or R and L, side
// by side, with what is left at the ends of the range (Foster's second form).
//
// Note: a chain of sections R ∥ C (the first form) has the same impedance, but
// its resistors are far smaller than the impedance of a capacitor of low loss.
// A simulator adds up conductances at nodes, and loses the loss in their
// rounding: 0.3 % of it in ngspice for a loss tangent of 3e-4 over 6 decades.
type ladder struct {
	element string // as in the expression
	*rational.Foster
	// block is a capacitance in F in series with the resistor R0 of an R-C
	// ladder. Without it that resistor, which is there for the loss at the
	// low end of the range, would conduct direct current, which the element
	// does not. 0: none.
	block float64
}

// leastBlocking is the least ratio of R0 to the reactance of its capacitor at
// the lowest frequency: there it takes 1 % off the conductance of R0, which is a
// part of the loss.
const leastBlocking = 10

// blockingShare is the share that the capacitor may take of the error: with the
// ratio b it adds 1/b of the conductance of R0 to the susceptance.
const blockingShare = 0.25

// newLadder finds a ladder whose impedance is within a relative error between
// two frequencies in Hz, and its resistance within another.
func newLadder(c *models.Circuit, n *models.Node, values []float64, from, to, maxError, maxRealError float64) (ladder, error) {
	single, own := alone(c, n, values)
	kind := rational.ParallelRC
	if n.Element == models.Skin {
		kind = rational.ParallelRL
	}
	if to < from*1.01 {
		to = from * 1.01 // a ladder needs a range
	}
	evaluator := single.NewEvaluator([]float64{from})
	z := make([]complex128, 1)
	foster, err := rational.LadderReal(func(freq float64) complex128 {
		evaluator.SetFrequencies([]float64{freq})
		evaluator.Impedance(z, own)
		return z[0]
	}, from, to, maxError, maxRealError, kind)
	if err != nil {
		return ladder{}, fmt.Errorf("%s: %w", single, err)
	}
	l := ladder{element: single.String(), Foster: foster}
	if foster.R0 > 0 && !l.inductive() {
		ratio := max(leastBlocking, cmplx.Abs(foster.At(from))/foster.R0/(blockingShare*maxError))
		l.block = ratio / (2 * math.Pi * from * foster.R0)
	}
	return l, nil
}

func (l ladder) inductive() bool { return l.Kind == rational.ParallelRL }

// String describes the ladder for the head of a subcircuit.
func (l ladder) String() string {
	kind := "R-C"
	if l.inductive() {
		kind = "R-L"
	}
	branches := "branches"
	if l.Sections() == 1 {
		branches = "branch"
	}
	return fmt.Sprintf("%s: ladder of %d %s %s", l.element, l.Sections(), kind, branches)
}

// at returns the impedance in Ω of the ladder as it is laid out.
func (l ladder) at(freq float64) complex128 {
	z := l.At(freq)
	if l.block == 0 {
		return z
	}
	r := complex(l.R0, 0)
	return 1 / (1/z - 1/r + 1/(r+complex(0, -1/(2*math.Pi*freq*l.block))))
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

// layLadder puts the branches between two nodes. In each the resistor comes
// first, so that the node behind it has a path for direct current.
func (b *builder) layLadder(l ladder, name, from, to string) {
	kind := "C"
	if l.inductive() {
		kind = "L"
	}
	if l.block > 0 {
		middle := b.node()
		b.add("R", "R"+name+"_low", from, middle, l.R0)
		b.add("C", "C"+name+"_low", middle, to, l.block)
	} else if l.R0 > 0 {
		b.add("R", "R"+name+"_0", from, to, l.R0)
	}
	if l.X0 > 0 {
		b.add(kind, kind+name+"_0", from, to, l.X0)
	}
	for k, r := range l.R {
		middle := b.node()
		b.add("R", fmt.Sprintf("R%s_%d", name, k+1), from, middle, r)
		b.add(kind, fmt.Sprintf("%s%s_%d", kind, name, k+1), middle, to, l.X[k])
	}
}
