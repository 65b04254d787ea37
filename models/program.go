package models

// program is a circuit compiled for evaluation: its groups, children before
// parents, the root last. Every group adds immittances: a series group the
// impedances of its members, a parallel group their admittances. As series and
// parallel groups alternate, a group hands its parent the reciprocal of its
// sum; only a series group at the root hands out the sum itself.
type program struct {
	groups  []group
	columns int // of scratch memory that an evaluation needs, BlockSize each
}

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
	// output is the column of 1/S, factor that of ∂Z/∂S. The output of the
	// root is Z itself and has no column, nor has the factor of a series root,
	// which is 1: they are −1.
	output, factor int
	parent         int // the group that this one stands in; −1 for the root
}

// power is an element whose law needs a power or a hyperbolic function of the
// frequency.
type power struct {
	element Element
	p, q    int // parameters; q is −1 if there is one only
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
	p.group(root, true)
	return p
}

// column reserves a column of scratch memory.
func (p *program) column() int {
	p.columns++
	return p.columns - 1
}

// group appends the group of a node, after those inside it, and returns its
// place.
func (p *program) group(n *Node, root bool) int {
	g := group{parallel: n.Kind == Parallel, root: root, output: -1, factor: -1, parent: -1}
	var inside []int
	for _, child := range n.Children {
		switch {
		case child.Kind != Leaf:
			inside = append(inside, p.group(child, false))
		case child.Element == Resistor:
			g.resistors = append(g.resistors, child.Parameters[0])
		case child.Element == Inductor && !g.parallel, child.Element == Capacitor && g.parallel:
			g.rising = append(g.rising, child.Parameters[0])
		case child.Element == Inductor, child.Element == Capacitor:
			g.falling = append(g.falling, child.Parameters[0])
		case g.parallel:
			inside = append(inside, p.group(&Node{Kind: Series, Children: []*Node{child}}, false))
		default:
			w := power{element: child.Element, p: child.Parameters[0], q: -1, z: p.column()}
			if len(child.Parameters) > 1 {
				w.q = child.Parameters[1]
				w.second = p.column()
			}
			if w.element == RCLine {
				w.first = p.column()
			}
			g.powers = append(g.powers, w)
			g.parts = append(g.parts, w.z)
		}
	}
	place := len(p.groups)
	for _, i := range inside {
		p.groups[i].parent = place
		g.parts = append(g.parts, p.groups[i].output)
	}
	if !root {
		g.output = p.column()
	}
	if !root || g.parallel {
		g.factor = p.column()
	}
	p.groups = append(p.groups, g)
	return place
}
