package models

import "strings"

// Parameter is one unknown value of a circuit.
type Parameter struct {
	Name     string
	Unit     string // SI base unit of the value; "1" for a pure number
	Scale    Scale  // how a fit represents it
	Quantity string // the trade's word, such as "resistance"
}

// NodeKind tells what a node of a circuit's tree is.
type NodeKind int

const (
	// Leaf is one element.
	Leaf NodeKind = iota
	// Series is a chain whose impedances add.
	Series
	// Parallel is a group whose admittances add.
	Parallel
)

// Node is a node of a circuit's tree. A series node has no series children
// and a parallel node no parallel children.
type Node struct {
	Kind       NodeKind
	Children   []*Node // of Series and Parallel, at least two
	Element    Element // of Leaf
	Parameters []int   // of Leaf: indices into [Circuit.Parameters]
}

// Circuit is an equivalent circuit with two terminals. It is immutable and
// safe for concurrent use.
type Circuit struct {
	root       *Node
	parameters []Parameter
	index      map[string]int
	program    *program
}

func newCircuit(root *Node, parameters []Parameter) *Circuit {
	c := &Circuit{root: root, parameters: parameters, index: make(map[string]int, len(parameters)), program: compile(root)}
	for i, p := range parameters {
		c.index[p.Name] = i
	}
	return c
}

// Parameters returns the parameters in the order of the expression. The
// caller must not change the slice.
func (c *Circuit) Parameters() []Parameter { return c.parameters }

// Index returns the place of a parameter in [Circuit.Parameters].
func (c *Circuit) Index(name string) (int, bool) {
	i, ok := c.index[name]
	return i, ok
}

// Root returns the circuit's tree. The caller must not change it.
func (c *Circuit) Root() *Node { return c.root }

// String returns the circuit's expression with the fewest brackets that keep
// a parallel group readable: a group inside a series chain stands in
// brackets.
func (c *Circuit) String() string {
	var b strings.Builder
	c.write(&b, c.root, Leaf)
	return b.String()
}

func (c *Circuit) write(b *strings.Builder, n *Node, parent NodeKind) {
	if n.Kind == Leaf {
		name := laws[n.Element].name
		if name != "" {
			b.WriteString(name + "(")
		}
		for i, p := range n.Parameters {
			if i > 0 {
				b.WriteString(", ")
			}
			b.WriteString(c.parameters[p].Name)
		}
		if name != "" {
			b.WriteByte(')')
		}
		return
	}
	operator := " + "
	if n.Kind == Parallel {
		operator = " || "
	}
	if parent != Leaf {
		b.WriteByte('(')
	}
	for i, child := range n.Children {
		if i > 0 {
			b.WriteString(operator)
		}
		c.write(b, child, n.Kind)
	}
	if parent != Leaf {
		b.WriteByte(')')
	}
}

// Without returns the circuit that remains when the element of a parameter
// is taken away: shorted where it stands in series, opened where it stands
// in parallel. The map gives, for each remaining parameter, its index in c.
// It returns nil if nothing would remain.
func (c *Circuit) Without(parameter int) (*Circuit, []int) {
	var keep []int
	var parameters []Parameter
	var prune func(n *Node) *Node
	prune = func(n *Node) *Node {
		if n.Kind == Leaf {
			for _, p := range n.Parameters {
				if p == parameter {
					return nil
				}
			}
			leaf := &Node{Kind: Leaf, Element: n.Element}
			for _, p := range n.Parameters {
				leaf.Parameters = append(leaf.Parameters, len(keep))
				keep = append(keep, p)
				parameters = append(parameters, c.parameters[p])
			}
			return leaf
		}
		rest := &Node{Kind: n.Kind}
		for _, child := range n.Children {
			switch pruned := prune(child); {
			case pruned == nil:
			case pruned.Kind == n.Kind:
				rest.Children = append(rest.Children, pruned.Children...)
			default:
				rest.Children = append(rest.Children, pruned)
			}
		}
		switch len(rest.Children) {
		case 0:
			return nil
		case 1:
			return rest.Children[0]
		}
		return rest
	}
	root := prune(c.root)
	if root == nil {
		return nil, nil
	}
	return newCircuit(root, parameters), keep
}
