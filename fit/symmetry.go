package fit

import (
	"fmt"
	"slices"
	"strings"

	"realpart/models"
)

// twins returns groups of interchangeable branches of a circuit: siblings of
// one shape, such as the two sections of a bead. Each branch is the list of
// its parameters, in the same order for all branches of a group.
func twins(c *models.Circuit) [][][]int {
	var groups [][][]int
	var walk func(n *models.Node)
	walk = func(n *models.Node) {
		for _, child := range n.Children {
			walk(child)
		}
		if !anyAlike(n.Children) {
			return
		}
		var shapes []string
		branches := map[string][][]int{}
		for _, child := range n.Children {
			shape, parameters := shapeOf(child)
			if _, ok := branches[shape]; !ok {
				shapes = append(shapes, shape)
			}
			branches[shape] = append(branches[shape], parameters)
		}
		for _, shape := range shapes {
			if len(branches[shape]) > 1 {
				groups = append(groups, branches[shape])
			}
		}
	}
	walk(c.Root())
	return groups
}

// ladder reports whether each group of a circuit has elements of different laws
// alone and at most one other group, as in ESR + ESL + C + (R1 || C1). Where
// each is seen in a sweep, such a circuit has one set of values for an
// impedance: from group to group, the limits at low and high frequency tell
// what stands in it. Two sections of one shape can be paired in several ways.
func ladder(n *models.Node) bool {
	groups := 0
	for i, child := range n.Children {
		if child.Kind != models.Leaf {
			groups++
			if !ladder(child) {
				return false
			}
			continue
		}
		for _, other := range n.Children[:i] {
			if other.Kind == models.Leaf && other.Element == child.Element {
				return false
			}
		}
	}
	return groups <= 1
}

// anyAlike reports whether two siblings could be of one shape.
func anyAlike(siblings []*models.Node) bool {
	for i, a := range siblings {
		for _, b := range siblings[:i] {
			if a.Kind == b.Kind && (a.Kind != models.Leaf || a.Element == b.Element) {
				return true
			}
		}
	}
	return false
}

// shapeOf returns a text that is the same for branches which differ in the
// names of their elements and the order of their siblings alone, and the
// parameters in the order of that text.
func shapeOf(n *models.Node) (string, []int) {
	if n.Kind == models.Leaf {
		return fmt.Sprintf("e%d", n.Element), n.Parameters
	}
	type branch struct {
		shape      string
		parameters []int
	}
	var branches []branch
	for _, child := range n.Children {
		shape, parameters := shapeOf(child)
		branches = append(branches, branch{shape, parameters})
	}
	slices.SortStableFunc(branches, func(a, b branch) int { return strings.Compare(a.shape, b.shape) })
	var b strings.Builder
	var parameters []int
	fmt.Fprintf(&b, "(%d", n.Kind)
	for _, branch := range branches {
		b.WriteString(" " + branch.shape)
		parameters = append(parameters, branch.parameters...)
	}
	b.WriteString(")")
	return b.String(), parameters
}

// order exchanges the values of interchangeable branches so that the first
// branch has the largest values: two fits of like parts then call the same
// section by the same name. Branches with a parameter about which the user
// said anything stay as they are. values has all parameters of the circuit.
func order(c *models.Circuit, values []float64, s *Settings) bool {
	said := func(i int) bool {
		name := c.Parameters()[i].Name
		_, fixed := s.Fixed[name]
		_, start := s.Start[name]
		_, bounds := s.Bounds[name]
		return fixed || start || bounds
	}
	changed := false
	for _, group := range twins(c) {
		if slices.ContainsFunc(group, func(branch []int) bool { return slices.ContainsFunc(branch, said) }) {
			continue
		}
		var sets [][]float64
		for _, branch := range group {
			var set []float64
			for _, i := range branch {
				set = append(set, values[i])
			}
			sets = append(sets, set)
		}
		if slices.IsSortedFunc(sets, descending) {
			continue
		}
		slices.SortStableFunc(sets, descending)
		for k, branch := range group {
			for j, i := range branch {
				values[i] = sets[k][j]
			}
		}
		changed = true
	}
	return changed
}

func descending(a, b []float64) int { return slices.Compare(b, a) }
