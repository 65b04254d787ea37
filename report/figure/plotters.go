package figure

import (
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// lines are straight lines between values, drawn as one path.
type lines struct {
	segments [][4]float64 // x₁, y₁, x₂, y₂
	style    draw.LineStyle
}

var _ plot.Plotter = (*lines)(nil)

// Plot draws the lines.
func (l *lines) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	var path vg.Path
	for _, s := range l.segments {
		path.Move(vg.Point{X: x(s[0]), Y: y(s[1])})
		path.Line(vg.Point{X: x(s[2]), Y: y(s[3])})
	}
	stroke(c, path, l.style)
}

func stroke(c draw.Canvas, path vg.Path, style draw.LineStyle) {
	if len(path) == 0 {
		return
	}
	c.SetLineStyle(style)
	c.Stroke(path)
	c.SetLineDash(nil, 0)
}

// axisTicks are the ticks of both axes, inside the figure, in one path: those
// of the plot itself are a path each.
type axisTicks struct {
	x, y  []plot.Tick
	style draw.LineStyle
}

var _ plot.Plotter = (*axisTicks)(nil)

// Plot draws the ticks, those with a label longer.
func (t *axisTicks) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	length := func(t plot.Tick) vg.Length {
		if t.Label != "" {
			return 4
		}
		return 2
	}
	var path vg.Path
	for _, v := range t.x {
		path.Move(vg.Point{X: x(v.Value), Y: c.Min.Y})
		path.Line(vg.Point{X: x(v.Value), Y: c.Min.Y + length(v)})
	}
	for _, v := range t.y {
		path.Move(vg.Point{X: c.Min.X, Y: y(v.Value)})
		path.Line(vg.Point{X: c.Min.X + length(v), Y: y(v.Value)})
	}
	stroke(c, path, t.style)
}

// band fills the area between two lines over the same frequencies.
type band struct {
	above, below plotter.XYs
	colour       color.Color
}

var _ plot.Plotter = band{}

// Plot fills the band.
func (b band) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	var path vg.Path
	outline := func(s plotter.XYs, from, step int) {
		for i := from; i >= 0 && i < len(s); i += step {
			point := vg.Point{X: x(s[i].X), Y: y(s[i].Y)}
			if len(path) == 0 {
				path.Move(point)
			} else {
				path.Line(point)
			}
		}
	}
	outline(b.above, 0, 1)
	outline(b.below, len(b.below)-1, -1)
	path.Close()
	c.SetColor(b.colour)
	c.Fill(path)
}

// series is a set of values drawn in one path: a line, dots or crosses. One
// path for all keeps a file small.
type series struct {
	values plotter.XYs
	colour color.Color
	draw   func(c draw.Canvas, points []vg.Point, colour color.Color)
}

var _ plot.Plotter = series{}

// Plot draws the series.
func (s series) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	points := make([]vg.Point, 0, len(s.values))
	for _, v := range s.values {
		if math.IsNaN(v.Y) || math.IsInf(v.Y, 0) {
			continue
		}
		points = append(points, vg.Point{X: x(v.X), Y: y(v.Y)})
	}
	if len(points) > 0 {
		s.draw(c, points, s.colour)
	}
}

func line(values plotter.XYs, colour color.Color) series {
	return series{values, colour, func(c draw.Canvas, points []vg.Point, colour color.Color) {
		var path vg.Path
		for i, p := range simplify(points, 0.08) {
			if i == 0 {
				path.Move(p)
			} else {
				path.Line(p)
			}
		}
		stroke(c, path, draw.LineStyle{Color: colour, Width: lineWidth})
	}}
}

// dots are drawn as small diamonds.
func dots(values plotter.XYs, colour color.Color) series {
	return series{values, colour, func(c draw.Canvas, points []vg.Point, colour color.Color) {
		const r = vg.Length(1.7)
		var path vg.Path
		for _, p := range points {
			path.Move(vg.Point{X: p.X - r, Y: p.Y})
			path.Line(vg.Point{X: p.X, Y: p.Y + r})
			path.Line(vg.Point{X: p.X + r, Y: p.Y})
			path.Line(vg.Point{X: p.X, Y: p.Y - r})
			path.Close()
		}
		c.SetColor(colour)
		c.Fill(path)
	}}
}

func crosses(values plotter.XYs, colour color.Color) series {
	return series{values, colour, func(c draw.Canvas, points []vg.Point, colour color.Color) {
		const r = vg.Length(1.7)
		var path vg.Path
		for _, p := range points {
			path.Move(vg.Point{X: p.X - r, Y: p.Y - r})
			path.Line(vg.Point{X: p.X + r, Y: p.Y + r})
			path.Move(vg.Point{X: p.X - r, Y: p.Y + r})
			path.Line(vg.Point{X: p.X + r, Y: p.Y - r})
		}
		stroke(c, path, draw.LineStyle{Color: colour, Width: 0.8})
	}}
}

// simplify leaves out points of a line that lie within a tolerance of what
// remains (Ramer 1972, Douglas and Peucker 1973).
func simplify(points []vg.Point, tolerance vg.Length) []vg.Point {
	keep := make([]bool, len(points))
	keep[0], keep[len(points)-1] = true, true
	stack := [][2]int{{0, len(points) - 1}}
	for len(stack) > 0 {
		a, b := stack[len(stack)-1][0], stack[len(stack)-1][1]
		stack = stack[:len(stack)-1]
		dx, dy := points[b].X-points[a].X, points[b].Y-points[a].Y
		length := vg.Length(math.Hypot(float64(dx), float64(dy)))
		worst, at := tolerance, -1
		for i := a + 1; i < b; i++ {
			ex, ey := points[i].X-points[a].X, points[i].Y-points[a].Y
			d := vg.Length(math.Hypot(float64(ex), float64(ey)))
			if length > 0 {
				d = vg.Length(math.Abs(float64(dx*ey-dy*ex))) / length
			}
			if d > worst {
				worst, at = d, i
			}
		}
		if at >= 0 {
			keep[at] = true
			stack = append(stack, [2]int{a, at}, [2]int{at, b})
		}
	}
	var out []vg.Point
	for i, p := range points {
		if keep[i] {
			out = append(out, p)
		}
	}
	return out
}

// note is a text beside a frequency, at the top of a figure or at its bottom;
// row counts inwards so that neighbours do not overlap.
type note struct {
	x      float64
	text   string
	row    int
	bottom bool
	style  text.Style
	colour color.Color
}

var _ plot.Plotter = (*note)(nil)

// Plot writes the text, to the side where there is room.
func (n *note) Plot(c draw.Canvas, p *plot.Plot) {
	x, _ := p.Transforms(&c)
	style := n.style
	style.Color = n.colour
	style.XAlign, style.YAlign = draw.XLeft, draw.YTop
	at := vg.Point{X: x(n.x) + 3, Y: c.Max.Y - 2 - vg.Length(n.row%3)*(style.Font.Size+2)}
	if n.bottom {
		style.YAlign = draw.YBottom
		at.Y = c.Min.Y + 6 + vg.Length(n.row%3)*(style.Font.Size+2)
	}
	if at.X+style.Width(n.text) > c.Max.X {
		style.XAlign = draw.XRight
		at.X -= 6
	}
	c.FillText(style, at, n.text)
}
