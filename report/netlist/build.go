package netlist

import (
	"fmt"
	"math"
	"math/cmplx"
	"strings"

	"realpart/models"
)

// element is a line of a subcircuit: a resistor, inductor or capacitor between
// two nodes.
type element struct {
	name, a, b string
	value      float64
}

// network is a circuit made of elements that simulators have.
type network struct {
	elements []element
	ladders  []ladder
	remarks  []string
	// error is that of the whole impedance by its ladders, realError that of
	// its resistance, both relative.
	error, realError float64
}

// builder lays a circuit's tree out as elements between nodes.
type builder struct {
	circuit *models.Circuit
	values  []float64
	ladders map[*models.Node]ladder
	low     float64 // lowest frequency, Hz
	high    float64 // highest
	nodes   int
	taken   names
	network
}

// build makes the network of a circuit between two frequencies in Hz. Ladders
// are refined until impedance and resistance of the whole are right within the
// errors of the options: near a resonance that takes more than the error of the
// element alone.
func build(c *models.Circuit, values []float64, from, to float64, o Options) (*network, error) {
	var distributed []*models.Node
	collect(c.Root(), &distributed)
	b := &builder{circuit: c, values: values, low: from, high: to, taken: names{}, ladders: map[*models.Node]ladder{}}
	// The whole is most sensitive to an element at its resonances.
	check := grid(from, to)
	if from < to {
		for _, r := range c.Resonances(values, from, to) {
			check = append(check, r.Freq)
		}
	}
	want := make([]complex128, len(check))
	c.NewEvaluator(check).Impedance(want, values)
	for tighter := 1.0; len(distributed) > 0; {
		for _, n := range distributed {
			l, err := newLadder(c, n, values, from, to, o.LadderError/tighter, o.LadderRealError/tighter)
			if err != nil {
				return nil, err
			}
			b.ladders[n] = l
		}
		got := make([]complex128, len(check))
		for i, f := range check {
			got[i] = b.at(c.Root(), f)
		}
		b.error, b.realError = relativeErrors(got, want)
		if b.error <= o.LadderError && b.realError <= o.LadderRealError {
			break
		}
		// The errors of whole and element are in proportion.
		tighter *= max(1.2, 1.1*max(b.error/o.LadderError, b.realError/o.LadderRealError))
	}
	for _, n := range distributed {
		b.network.ladders = append(b.network.ladders, b.ladders[n])
	}
	b.lay(c.Root(), "a", "b")
	b.ground()
	if !b.conducts() {
		b.remark("no path for direct current between a and b: the circuit around it must hold both in place")
	}
	return &b.network, nil
}

// collect gathers the elements that need a ladder.
func collect(n *models.Node, into *[]*models.Node) {
	for _, child := range n.Children {
		collect(child, into)
	}
	if n.Kind != models.Leaf {
		return
	}
	switch n.Element {
	case models.Resistor, models.Inductor, models.Capacitor:
	default:
		*into = append(*into, n)
	}
}

// at returns the impedance in Ω of a part of the tree with its ladders.
func (b *builder) at(n *models.Node, freq float64) complex128 {
	switch n.Kind {
	case models.Series:
		var z complex128
		for _, child := range n.Children {
			z += b.at(child, freq)
		}
		return z
	case models.Parallel:
		var y complex128
		for _, child := range n.Children {
			y += 1 / b.at(child, freq)
		}
		return 1 / y
	}
	omega := 2 * math.Pi * freq
	switch v := b.values[n.Parameters[0]]; n.Element {
	case models.Resistor:
		return complex(v, 0)
	case models.Inductor:
		return complex(0, omega*v)
	case models.Capacitor:
		return complex(0, -1/(omega*v))
	}
	return b.ladders[n].at(freq)
}

// lay puts a part of the tree between two nodes.
func (b *builder) lay(n *models.Node, from, to string) {
	switch n.Kind {
	case models.Series:
		for i, child := range n.Children {
			next := to
			if i < len(n.Children)-1 {
				next = b.node()
			}
			b.lay(child, from, next)
			from = next
		}
		return
	case models.Parallel:
		b.layParallel(n, from, to)
		return
	}
	name := b.circuit.Parameters()[n.Parameters[0]].Name
	switch v := b.values[n.Parameters[0]]; n.Element {
	case models.Resistor:
		b.add("R", name, from, to, v)
	case models.Inductor:
		b.add("L", name, from, to, v)
	case models.Capacitor:
		b.add("C", name, from, to, v)
	default:
		b.layLadder(b.ladders[n], name, from, to)
	}
}

// layParallel lays branches side by side. Inductors across each other are a
// loop without resistance, in which the direct current is not determined:
// branches of inductors alone are merged into one inductor, and where a branch
// has others beside its inductors, a resistor is put in.
func (b *builder) layParallel(n *models.Node, from, to string) {
	merged, reciprocal := []string{}, 0.0
	for _, child := range n.Children {
		if l, ok := b.inductance(child); ok {
			merged, reciprocal = append(merged, b.namesIn(child)...), reciprocal+1/l
		}
	}
	shorted := false
	if reciprocal > 0 {
		b.add("L", strings.Join(merged, "_"), from, to, 1/reciprocal)
		if len(merged) > 1 {
			b.remark("one inductor stands for the loop of " + strings.Join(merged, ", ") + ", whose direct current would not be determined")
		}
		shorted = true
	}
	for _, child := range n.Children {
		if _, ok := b.inductance(child); ok {
			continue
		}
		start := from
		if b.shorts(child) {
			if shorted {
				start = b.node()
				// It must be small beside the impedance of the branch at the
				// lowest frequency, and not so small that the impedance at
				// the highest is lost in the rounding of its conductance.
				low, high := cmplx.Abs(b.at(child, b.low)), cmplx.Abs(b.at(child, b.high))
				value := math.Sqrt(epsilon * low * high)
				b.add("R", "loop", from, start, value)
				b.remark(fmt.Sprintf("Rloop, in a loop of inductors, which would have no operating point: at most %.1g of what it stands in series with", value/min(low, high)))
			}
			shorted = true
		}
		b.lay(child, start, to)
	}
}

// epsilon is the spacing of float64 at 1.
const epsilon = 0x1p-52

// negligible is the size of a help for the operating point relative to the
// element beside it.
const negligible = 1e-8

func (b *builder) remark(s string) {
	for _, known := range b.remarks {
		if known == s {
			return
		}
	}
	b.remarks = append(b.remarks, s)
}

// inductance returns the inductance of a part of the tree that is made of
// inductors alone.
func (b *builder) inductance(n *models.Node) (float64, bool) {
	if n.Kind == models.Leaf {
		return b.values[n.Parameters[0]], n.Element == models.Inductor
	}
	sum := 0.0
	for _, child := range n.Children {
		l, ok := b.inductance(child)
		if !ok {
			return 0, false
		}
		if n.Kind == models.Parallel {
			l = 1 / l
		}
		sum += l
	}
	if n.Kind == models.Parallel {
		sum = 1 / sum
	}
	return sum, true
}

// shorts tells whether a part of the tree has no resistance at direct current.
func (b *builder) shorts(n *models.Node) bool {
	switch n.Kind {
	case models.Series:
		for _, child := range n.Children {
			if !b.shorts(child) {
				return false
			}
		}
		return true
	case models.Parallel:
		for _, child := range n.Children {
			if b.shorts(child) {
				return true
			}
		}
		return false
	}
	l, isLadder := b.ladders[n]
	return n.Element == models.Inductor || isLadder && l.inductive() && l.X0 > 0
}

func (b *builder) namesIn(n *models.Node) []string {
	var all []string
	for _, child := range n.Children {
		all = append(all, b.namesIn(child)...)
	}
	for _, p := range n.Parameters {
		all = append(all, b.circuit.Parameters()[p].Name)
	}
	return all
}

func (b *builder) node() string {
	b.nodes++
	return fmt.Sprintf("n%d", b.nodes)
}

// add appends an element. Its name begins with the letter that tells its
// kind, as the format wants it.
func (b *builder) add(kind, name, from, to string, value float64) {
	if !strings.HasPrefix(strings.ToUpper(name), kind) {
		name = kind + name
	}
	b.elements = append(b.elements, element{b.taken.unique(name), from, to, value})
}

// ground gives every node a path for direct current to one of the two ends:
// where nodes hang between capacitors alone, a resistor across one of these,
// 1/negligible times its reactance at the lowest frequency.
func (b *builder) ground() {
	helped := false
	for {
		island := b.islands()
		i := -1
		for k, e := range b.elements {
			if island[e.a] != island[e.b] && (i < 0 || e.value > b.elements[i].value) {
				i = k // the largest capacitor: the smallest resistor
			}
		}
		if i < 0 {
			break
		}
		e := b.elements[i]
		b.add("R", "float", e.a, e.b, 1/(negligible*2*math.Pi*b.low*e.value))
		helped = true
	}
	if helped {
		b.remark("Rfloat, across capacitors between which a node would float, is 1e8 times their reactance at the lowest frequency")
	}
}

// islands tells which nodes have no path through R and L to an end.
func (b *builder) islands() map[string]bool {
	reached := map[string]bool{"a": true, "b": true}
	b.spread(reached)
	island := map[string]bool{}
	for _, e := range b.elements {
		for _, n := range []string{e.a, e.b} {
			if !reached[n] {
				island[n] = true
			}
		}
	}
	return island
}

// conducts tells whether direct current can flow from end to end.
func (b *builder) conducts() bool {
	reached := map[string]bool{"a": true}
	b.spread(reached)
	return reached["b"]
}

// spread marks all nodes that R and L join to those marked.
func (b *builder) spread(reached map[string]bool) {
	for changed := true; changed; {
		changed = false
		for _, e := range b.elements {
			if e.name[0] != 'C' && e.name[0] != 'c' && reached[e.a] != reached[e.b] {
				reached[e.a], reached[e.b], changed = true, true, true
			}
		}
	}
}
