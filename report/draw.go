package report

import (
	"math"
	"strings"

	"github.com/rivo/uniseg"

	"realpart/models"
	"realpart/models/quantity"
)

// DrawText draws a circuit in characters: resistors as boxes, inductors as
// arcs, capacitors as two bars (after IEC 60617), elements with a law of their
// own as shown in [models.Element]'s order below. Values, if given, stand under
// the names with three digits; a NaN leaves the place empty.
//
//	loss ┤/├   cpe ┤>├   skin [∩∩]   rcline [┴┴]
//
// The two ends of the part are at the left and the right. Lines end without
// spaces; there is a line feed after each.
func DrawText(c *models.Circuit, values []float64) string {
	labels := make([]string, len(c.Parameters()))
	for i, p := range c.Parameters() {
		if values != nil && !math.IsNaN(values[i]) {
			labels[i] = quantity.Format(values[i], p.Unit, 3)
		}
	}
	return drawLabelled(c, labels)
}

// drawLabelled draws a circuit with a text under each parameter's name.
func drawLabelled(c *models.Circuit, labels []string) string {
	b := drawNode(c, c.Root(), labels)
	var out strings.Builder
	for i, line := range b.lines {
		end := "  "
		if i == b.row {
			end = "──"
		}
		out.WriteString(strings.TrimRight(end+line+end, " ") + "\n")
	}
	return out.String()
}

// block is a drawing: lines of equal width, with its two ends on one row.
type block struct {
	lines []string
	row   int
	width int
}

var symbols = map[models.Element]string{
	models.Resistor:      "[    ]",
	models.Inductor:      "∩∩∩∩",
	models.Capacitor:     "┤ ├",
	models.LossCapacitor: "┤/├",
	models.ConstantPhase: "┤>├",
	models.Skin:          "[∩∩]",
	models.RCLine:        "[┴┴┴┴]",
}

func drawNode(c *models.Circuit, n *models.Node, labels []string) block {
	switch n.Kind {
	case models.Series:
		return drawSeries(c, n, labels)
	case models.Parallel:
		return drawParallel(c, n, labels)
	}
	return drawElement(c, n, labels)
}

// drawElement stacks names, values and symbol, the latter at the bottom.
func drawElement(c *models.Circuit, n *models.Node, labels []string) block {
	var above []string
	for _, p := range n.Parameters {
		name, label := c.Parameters()[p].Name, labels[p]
		if len(n.Parameters) > 1 && label != "" {
			above = append(above, name+" = "+label)
			continue
		}
		above = append(above, name)
		if label != "" {
			above = append(above, label)
		}
	}
	if len(n.Parameters) > 1 && strings.Join(above, "") == names(c, n, "") {
		above = []string{names(c, n, ", ")}
	}
	symbol := symbols[n.Element]
	b := block{row: len(above), width: uniseg.StringWidth(symbol) + 2}
	for _, text := range above {
		b.width = max(b.width, uniseg.StringWidth(text)+2)
	}
	for _, text := range above {
		b.lines = append(b.lines, centre(text, b.width, " "))
	}
	b.lines = append(b.lines, centre(symbol, b.width, "─"))
	return b
}

// names joins the names of an element's parameters.
func names(c *models.Circuit, n *models.Node, separator string) string {
	var all []string
	for _, p := range n.Parameters {
		all = append(all, c.Parameters()[p].Name)
	}
	return strings.Join(all, separator)
}

func drawSeries(c *models.Circuit, n *models.Node, labels []string) block {
	children := make([]block, len(n.Children))
	above, below := 0, 0
	for i, child := range n.Children {
		children[i] = drawNode(c, child, labels)
		above = max(above, children[i].row)
		below = max(below, len(children[i].lines)-1-children[i].row)
	}
	b := block{row: above, lines: make([]string, above+1+below)}
	for _, child := range children {
		for i := range b.lines {
			k := i - above + child.row
			if k >= 0 && k < len(child.lines) {
				b.lines[i] += child.lines[k]
			} else {
				b.lines[i] += strings.Repeat(" ", child.width)
			}
		}
		b.width += child.width
	}
	return b
}

// drawParallel stacks the branches between two rails; the ends of the group
// are those of the first branch.
func drawParallel(c *models.Circuit, n *models.Node, labels []string) block {
	var children []block
	width := 0
	for _, child := range n.Children {
		children = append(children, drawNode(c, child, labels))
		width = max(width, children[len(children)-1].width)
	}
	b := block{row: children[0].row, width: width + 4}
	last := len(children) - 1
	for i, child := range children {
		for k, line := range child.lines {
			left, right, fill := "│ ", " │", " "
			switch {
			case k == child.row && i == 0:
				left, right, fill = "┬─", "─┬", "─"
			case k == child.row && i == last:
				left, right, fill = "└─", "─┘", "─"
			case k == child.row:
				left, right, fill = "├─", "─┤", "─"
			case i == 0 && k < child.row, i == last && k > child.row:
				left, right = "  ", "  "
			}
			b.lines = append(b.lines, left+centre(line, width, fill)+right)
		}
	}
	return b
}

// centre pads a text to a width on both sides.
func centre(text string, width int, fill string) string {
	missing := width - uniseg.StringWidth(text)
	if missing <= 0 {
		return text
	}
	left := missing / 2
	return strings.Repeat(fill, left) + text + strings.Repeat(fill, missing-left)
}
