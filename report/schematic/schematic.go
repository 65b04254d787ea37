// Package schematic draws circuits as SVG.
//
// Resistors are rectangles, inductors arcs, capacitors two bars (IEC 60617).
// Elements with a law of their own have symbols of our own: a loss capacitor
// has its gap shaded, a constant-phase element has one bar leaning, skin
// effect is a rectangle with a dashed core, an RC line is a rectangle over a
// plate.
package schematic

import (
	"fmt"
	"html"
	"strings"
	"unicode/utf8"

	"realpart/models"
)

// Sizes in units of the drawing, see scale.
const (
	lineHeight = 15.0 // of text
	letter     = 7.3  // width of a character, a cautious estimate
	symbol     = 44.0 // width of a symbol
	half       = 10.0 // half its height
	gap        = 12.0 // between neighbours
	lead       = 16.0 // at the ends
	scale      = 1.25 // pixels a unit, where there is room
	leastScale = 0.9  // below it the text gets too small to read
)

// SVG draws a circuit with a text, such as the value, for each of its
// parameters; "" leaves it out. The svg element takes its colour from the
// text around it and its name for those who cannot see it from alt.
func SVG(c *models.Circuit, labels []string, alt string) string {
	b := layout(c, c.Root(), labels)
	width, height := b.width+2*lead, b.above+b.below+8
	var out strings.Builder
	fmt.Fprintf(&out, `<svg class="schematic" viewBox="0 0 %g %g" width="%g" height="%g" style="min-width:%gpx" role="img" aria-label="%s" xmlns="http://www.w3.org/2000/svg">`,
		width, height, scale*width, scale*height, leastScale*width, html.EscapeString(alt))
	out.WriteString(`<g fill="none" stroke="currentColor" stroke-width="1.4" stroke-linecap="round">`)
	y := b.above + 4
	wire(&out, 5, y, lead, y)
	wire(&out, width-lead, y, width-5, y)
	for _, x := range []float64{3.5, width - 3.5} {
		fmt.Fprintf(&out, `<circle cx="%g" cy="%g" r="2.2"/>`, x, y)
	}
	b.draw(&out, lead, y)
	out.WriteString(`</g></svg>`)
	return out.String()
}

// block is a part of the drawing: its extent from the line of its ends, and
// how to draw it with its left end at a point.
type block struct {
	width, above, below float64
	draw                func(out *strings.Builder, x, y float64)
}

func wire(out *strings.Builder, x1, y1, x2, y2 float64) {
	if x1 != x2 || y1 != y2 {
		fmt.Fprintf(out, `<path d="M%g %gL%g %g"/>`, x1, y1, x2, y2)
	}
}

func layout(c *models.Circuit, n *models.Node, labels []string) block {
	switch n.Kind {
	case models.Series:
		return series(c, n, labels)
	case models.Parallel:
		return parallel(c, n, labels)
	}
	return element(c, n, labels)
}

func element(c *models.Circuit, n *models.Node, labels []string) block {
	var lines []string
	for _, p := range n.Parameters {
		name, label := c.Parameters()[p].Name, labels[p]
		switch {
		case label == "":
			lines = append(lines, name)
		case len(n.Parameters) > 1:
			lines = append(lines, name+" = "+label)
		default:
			lines = append(lines, name, label)
		}
	}
	width := symbol
	for _, l := range lines {
		width = max(width, letter*float64(utf8.RuneCountInString(l)))
	}
	width += gap
	return block{width, half + 4 + lineHeight*float64(len(lines)), half + 3, func(out *strings.Builder, x, y float64) {
		middle := x + width/2
		for i, l := range lines {
			fmt.Fprintf(out, `<text x="%g" y="%g" text-anchor="middle" fill="currentColor" stroke="none">%s</text>`,
				middle, y-half-6-lineHeight*float64(len(lines)-1-i), html.EscapeString(l))
		}
		left, right := drawSymbol(out, n.Element, middle, y)
		wire(out, x, y, left, y)
		wire(out, right, y, x+width, y)
	}}
}

// drawSymbol draws a symbol about its middle and returns where its ends are.
func drawSymbol(out *strings.Builder, e models.Element, x, y float64) (left, right float64) {
	bars := func(lean float64) (float64, float64) {
		fmt.Fprintf(out, `<path d="M%g %gV%gM%g %gL%g %g" stroke-width="2"/>`, x-4, y-half, y+half, x+4+lean, y-half, x+4-lean, y+half)
		return x - 4, x + 4
	}
	box := func() (float64, float64) {
		fmt.Fprintf(out, `<path d="M%g %gh%gv%gh%gz"/>`, x-symbol/2, y-half*0.75, symbol, half*1.5, -symbol)
		return x - symbol/2, x + symbol/2
	}
	switch e {
	case models.Inductor:
		const r = symbol / 8
		fmt.Fprintf(out, `<path d="M%g %g%s"/>`, x-symbol/2, y, strings.Repeat(fmt.Sprintf("a%g %g 0 0 1 %g 0", r, r, 2*r), 4))
		return x - symbol/2, x + symbol/2
	case models.Capacitor:
		return bars(0)
	case models.LossCapacitor:
		fmt.Fprintf(out, `<path d="M%g %gh8v%gh-8z" fill="currentColor" fill-opacity=".3" stroke="none"/>`, x-4, y-half, 2*half)
		return bars(0)
	case models.ConstantPhase:
		return bars(3.5)
	case models.Skin:
		fmt.Fprintf(out, `<path d="M%g %gh%g" stroke-dasharray="3 4"/>`, x-symbol/2+5, y, symbol-10)
		return box()
	case models.RCLine:
		fmt.Fprintf(out, `<path d="M%g %gh%g" stroke-width="2"/>`, x-symbol/2, y+half*0.75+4, symbol)
		return box()
	}
	return box()
}

func series(c *models.Circuit, n *models.Node, labels []string) block {
	var children []block
	var b block
	for _, child := range n.Children {
		k := layout(c, child, labels)
		children = append(children, k)
		b.width += k.width
		b.above, b.below = max(b.above, k.above), max(b.below, k.below)
	}
	b.draw = func(out *strings.Builder, x, y float64) {
		for _, k := range children {
			k.draw(out, x, y)
			x += k.width
		}
	}
	return b
}

// parallel stacks branches between two rails, the first on the line of the
// ends.
func parallel(c *models.Circuit, n *models.Node, labels []string) block {
	var children []block
	var b block
	for _, child := range n.Children {
		k := layout(c, child, labels)
		children = append(children, k)
		b.width = max(b.width, k.width)
	}
	const rail = 10.0
	inner := b.width
	b.width += 2 * rail
	b.above = children[0].above
	offsets := []float64{0}
	for i, k := range children[1:] {
		offsets = append(offsets, offsets[i]+children[i].below+k.above)
	}
	last := len(children) - 1
	b.below = offsets[last] + children[last].below
	b.draw = func(out *strings.Builder, x, y float64) {
		left, right := x+rail, x+rail+inner
		wire(out, x, y, left, y)
		wire(out, right, y, x+b.width, y)
		wire(out, left, y, left, y+offsets[last])
		wire(out, right, y, right, y+offsets[last])
		for i, k := range children {
			start := left + (inner-k.width)/2
			at := y + offsets[i]
			wire(out, left, at, start, at)
			wire(out, start+k.width, at, right, at)
			k.draw(out, start, at)
			if i < last {
				fmt.Fprintf(out, `<g fill="currentColor" stroke="none"><circle cx="%g" cy="%g" r="2"/><circle cx="%g" cy="%g" r="2"/></g>`, left, at, right, at)
			}
		}
	}
	return b
}
