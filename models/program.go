package models

// program is a circuit compiled for evaluation. Every group of it adds
// immittances: a series group the impedances of its members, a parallel group
// their admittances. As series and parallel groups alternate, a group hands its
// parent the reciprocal of its sum; only a series group at the root hands out
// the sum itself.
//
// A column is scratch memory of BlockSize complex numbers, given by its
// number; none stands for no column.
type program struct {
	groups      []group      // children before parents, the root last
	factors     []factor     // parents before children
	derivatives []derivative // one a parameter
	columns     int
}

const none = -1

// group is a series or parallel node. The sum of its immittances at ω is
//
//	S = constant + j(rising·ω + falling/ω) + parts
//
// in which resistors make the constant, whatever grows as ω (inductors in
// series, capacitors in parallel) the rising and the others the falling term.
type group struct {
	parallel, root             bool
	resistors, rising, falling []int // parameters
	// powers are the other elements. They stand only in series groups; one
	// beside others in parallel gets a series group of its own.
	powers []power
	// parts are the columns with the impedances of the powers and the outputs
	// of the groups inside.
	parts []int
	// output is the column of 1/S; for the root, whose output is Z, none.
	output int
}

// factor is the step from ∂Z/∂S of a parent to ∂Z/∂S of a group. A series root
// has none: there it is 1.
type factor struct {
	column int
	above  int // the parent's; none if it is 1
	output int // of the group; none for the root
}

// derivative is the last step, from ∂Z/∂S of a group to ∂Z/∂x of a parameter.
type derivative struct {
	rule      rule
	parameter int
	factor    int // column of ∂Z/∂S; none if it is 1
	element   int // column of the element's own derivative, for product
}

// rule says what ∂Z/∂S is multiplied with.
type rule int

const (
	resistance   rule = iota // R
	conductance              // −1/R
	rising                   // j·p·ω
	falling                  // j/(p·ω)
	product                  // the element's own derivative
	minusProduct             // minus it
)

// power is an element whose law needs a power or a hyperbolic function of the
// frequency.
type power struct {
	element Element
	p, q    int // parameters; q is none if there is one only
	// z is the column of the impedance, first and second those of its
	// derivatives by the unknowns of p and q. There is a first only for the RC
	// line; for the others that derivative is plus or minus z.
	z, first, second int
}

func compile(root *Node) *program {
	p := new(program)
	if root.Kind == Leaf {
		root = &Node{Kind: Series, Children: []*Node{root}}
	}
	p.group(root, nil)
	return p
}

// column reserves a column of scratch memory.
func (p *program) column() int {
	p.columns++
	return p.columns - 1
}

// group appends the group of a node, after those inside it, and returns the
// column of its output. above is the parent's factor, nil for the root.
func (p *program) group(n *Node, above *factor) (output int) {
	g := group{parallel: n.Kind == Parallel, root: above == nil, output: none}
	f := factor{column: none, above: none, output: none}
	if !g.root {
		g.output = p.column()
		f.above, f.output = above.column, g.output
	}
	if !g.root || g.parallel {
		f.column = p.column()
		p.factors = append(p.factors, f)
	}
	derive := func(parameter int, r rule, element int) {
		p.derivatives = append(p.derivatives, derivative{r, parameter, f.column, element})
	}
	for _, child := range n.Children {
		switch {
		case child.Kind != Leaf:
			g.parts = append(g.parts, p.group(child, &f))
		case child.Element == Resistor:
			g.resistors = append(g.resistors, child.Parameters[0])
			r := resistance
			if g.parallel {
				r = conductance
			}
			derive(child.Parameters[0], r, none)
		case child.Element == Inductor && !g.parallel, child.Element == Capacitor && g.parallel:
			g.rising = append(g.rising, child.Parameters[0])
			derive(child.Parameters[0], rising, none)
		case child.Element == Inductor, child.Element == Capacitor:
			g.falling = append(g.falling, child.Parameters[0])
			derive(child.Parameters[0], falling, none)
		case g.parallel:
			g.parts = append(g.parts, p.group(&Node{Kind: Series, Children: []*Node{child}}, &f))
		default:
			w := power{element: child.Element, p: child.Parameters[0], q: none, z: p.column()}
			if len(child.Parameters) > 1 {
				w.q = child.Parameters[1]
				w.second = p.column()
				derive(w.q, product, w.second)
			}
			switch w.element {
			case Skin:
				derive(w.p, product, w.z)
			case LossCapacitor, ConstantPhase:
				derive(w.p, minusProduct, w.z)
			case RCLine:
				w.first = p.column()
				derive(w.p, product, w.first)
			}
			g.powers = append(g.powers, w)
			g.parts = append(g.parts, w.z)
		}
	}
	p.groups = append(p.groups, g)
	return g.output
}
