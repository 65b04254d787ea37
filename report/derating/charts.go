package derating

import (
	"bytes"
	"fmt"
	"image/color"
	"math"
	"regexp"
	"strings"
	"sync"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"

	"realpart/models/quantity"
	"realpart/report"
	"realpart/report/figure"
)

// chart is a figure of a page: an svg element, a legend and what is to be seen,
// in words.
type chart struct {
	Title, SVG, Alt string
	Legend          []mark
}

// mark is an entry of a legend: the class of its mark and its meaning.
type mark struct{ Class, Text string }

// Size of a chart in points.
const (
	chartWidth  = 420
	chartHeight = 250
)

// charts draws loss by harmonic, and temperature over ripple current where
// there is one.
func (a *Assessment) charts() []chart {
	charts := []chart{a.lossChart()}
	if c, ok := a.temperatureChart(); ok {
		charts = append(charts, c)
	}
	return charts
}

// stems are vertical lines from zero with a mark at the top.
type stems struct {
	points plotter.XYs
	colour color.Color
	glyph  draw.GlyphDrawer
}

// Plot draws the stems.
func (s stems) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	for _, v := range s.points {
		foot, top := vg.Point{X: x(v.X), Y: y(0)}, vg.Point{X: x(v.X), Y: y(v.Y)}
		c.StrokeLine2(draw.LineStyle{Color: s.colour, Width: 1.6}, foot.X, foot.Y, top.X, top.Y)
		c.DrawGlyph(draw.GlyphStyle{Color: s.colour, Radius: 2.4, Shape: s.glyph}, top)
	}
}

// axes makes a plot with the style of the other figures.
func axes(x, y string) *plot.Plot {
	p := plot.New()
	style := figure.Paper
	p.BackgroundColor = nil
	sans := font.Font{Typeface: "Liberation", Variant: "Sans", Size: 9.5}
	for _, axis := range []*plot.Axis{&p.X, &p.Y} {
		axis.LineStyle.Color, axis.Tick.LineStyle.Color = style.Ink, style.Ink
		axis.Tick.Label.Font, axis.Tick.Label.Color = sans, style.Ink
		axis.Label.TextStyle.Font, axis.Label.TextStyle.Color = sans, style.Ink
		axis.Padding = 0
	}
	p.X.Label.Text, p.Y.Label.Text = x, y
	grid := plotter.NewGrid()
	grid.Vertical.Color, grid.Horizontal.Color = style.Grid, style.Grid
	p.Add(grid)
	return p
}

// unitTicks labels the usual ticks with SI prefixes and a unit.
type unitTicks struct{ unit string }

// Ticks returns ticks at equal steps.
func (t unitTicks) Ticks(low, high float64) []plot.Tick {
	ticks := plot.DefaultTicks{}.Ticks(low, high)
	for i, tick := range ticks {
		switch {
		case tick.Label == "":
		case math.Abs(tick.Value) < 1e-9*(high-low):
			ticks[i].Label = "0"
		default:
			ticks[i].Label = shortest(tick.Value, t.unit)
		}
	}
	return ticks
}

// shortest writes a value with the digits that it needs, four at most.
func shortest(v float64, unit string) string {
	text := quantity.Format(v, unit, 4)
	number, rest, _ := strings.Cut(text, " ")
	if strings.Contains(number, ".") {
		number = strings.TrimSuffix(strings.TrimRight(number, "0"), ".")
	}
	return number + " " + rest
}

// frequencyTicks labels decades, and 2 and 5 where there are few.
type frequencyTicks struct{}

// Ticks returns ticks of a logarithmic axis.
func (frequencyTicks) Ticks(low, high float64) []plot.Tick {
	var ticks []plot.Tick
	for e := math.Floor(math.Log10(low)); e <= math.Ceil(math.Log10(high)); e++ {
		for m := 1.0; m < 10; m++ {
			v := m * math.Pow(10, e)
			if v < low || v > high {
				continue
			}
			tick := plot.Tick{Value: v}
			if m == 1 || (m == 2 || m == 5) && high/low < 100 {
				tick.Label = report.FormatFrequency(v)
			}
			ticks = append(ticks, tick)
		}
	}
	return ticks
}

// lossChart shows the loss of each harmonic over frequency. Direct current,
// which has no place there, is told in the legend.
func (a *Assessment) lossChart() chart {
	var inside, outside plotter.XYs
	low, high, top := math.Inf(1), 0.0, 0.0
	direct := ""
	for _, h := range a.Harmonics {
		if h.FHz == 0 {
			direct = "direct current, not drawn: " + quantity.Format(h.LossW, "W", 3)
			continue
		}
		low, high, top = min(low, h.FHz), max(high, h.FHz), max(top, h.LossW)
		if point := (plotter.XY{X: h.FHz, Y: h.LossW}); h.InSweep {
			inside = append(inside, point)
		} else {
			outside = append(outside, point)
		}
	}
	if top == 0 {
		top = 1e-9
	}
	p := axes("frequency", "loss")
	p.X.Scale, p.X.Tick.Marker, p.Y.Tick.Marker = plot.LogScale{}, frequencyTicks{}, unitTicks{"W"}
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = low/1.5, high*1.5, 0, 1.08*top
	p.Add(stems{inside, figure.Paper.Model, draw.CircleGlyph{}}, stems{outside, figure.Paper.Second, draw.SquareGlyph{}})
	c := chart{Title: "Loss by harmonic", SVG: svg(p), Legend: []mark{{"inside", "harmonic"}}}
	if len(outside) > 0 {
		c.Legend = append(c.Legend, mark{"outside", "outside the sweep"})
	}
	if direct != "" {
		c.Legend = append(c.Legend, mark{"", direct})
	}
	rows, _ := a.table(3)
	var most []string
	for _, row := range rows[1:min(len(rows), 4)] {
		most = append(most, row[0]+" "+row[7])
	}
	c.Alt = "Loss by harmonic; the largest: " + strings.Join(most, ", ") + "."
	return c
}

// temperatureChart shows the hot spot over the total RMS of the same spectrum,
// with the limits.
func (a *Assessment) temperatureChart() (chart, bool) {
	reach := a.Ripple.RMSA
	if a.MaxRippleA != nil {
		reach = max(reach, *a.MaxRippleA)
	}
	reach *= 1.15
	curve := a.Curve(reach, 241)
	if len(curve) < 2 {
		return chart{}, false
	}
	var points plotter.XYs
	bottom, top := math.Inf(1), math.Inf(-1)
	for _, v := range curve {
		points = append(points, plotter.XY{X: v.RippleA, Y: v.HotSpotC})
		bottom, top = min(bottom, v.HotSpotC), max(top, v.HotSpotC)
	}
	if a.LimitC != nil {
		bottom, top = min(bottom, *a.LimitC-*a.RequiredMarginK), max(top, *a.LimitC)
	}
	margin := max(0.06*(top-bottom), 0.5)
	p := axes("ripple current, RMS", "hot spot")
	p.X.Tick.Marker, p.Y.Tick.Marker = unitTicks{"A"}, unitTicks{"°C"}
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = 0, reach, bottom-margin, top+margin
	line := func(points plotter.XYs, colour color.Color, width vg.Length, dashes ...vg.Length) {
		p.Add(&plotter.Line{XYs: points, LineStyle: draw.LineStyle{Color: colour, Width: width, Dashes: dashes}})
	}
	c := chart{Title: "Hot spot over ripple current", Legend: []mark{{"curve", "hot spot"}}}
	if a.LimitC != nil {
		line(plotter.XYs{{X: 0, Y: *a.LimitC}, {X: reach, Y: *a.LimitC}}, figure.Paper.Second, 1.3)
		c.Legend = append(c.Legend, mark{"limit", "limit " + celsius(*a.LimitC)})
		if *a.RequiredMarginK > 0 {
			permitted := *a.LimitC - *a.RequiredMarginK
			line(plotter.XYs{{X: 0, Y: permitted}, {X: reach, Y: permitted}}, figure.Paper.Second, 1, 4, 3)
			c.Legend = append(c.Legend, mark{"permitted", "limit less the margin " + celsius(permitted)})
		}
	}
	now := a.Ripple.RMSA
	line(plotter.XYs{{X: now, Y: p.Y.Min}, {X: now, Y: p.Y.Max}}, figure.Paper.Resonance, 0.9, 2, 2)
	c.Legend = append(c.Legend, mark{"now", "current now " + amperes(now)})
	line(points, figure.Paper.Model, 1.6)
	if a.HotSpotC != nil {
		p.Add(&plotter.Scatter{XYs: plotter.XYs{{X: now, Y: *a.HotSpotC}}, GlyphStyle: draw.GlyphStyle{Color: figure.Paper.Model, Radius: 3, Shape: draw.CircleGlyph{}}})
	}
	first, last := curve[0], curve[len(curve)-1]
	c.Alt = fmt.Sprintf("Hot spot over ripple current: %s without ripple, %s at %s.", celsius(first.HotSpotC), celsius(last.HotSpotC), amperes(last.RippleA))
	if len(curve) < 241 {
		c.Alt += " Beyond, the part runs away."
		c.Legend = append(c.Legend, mark{"", "the curve ends where the part runs away"})
	}
	c.SVG = svg(p)
	return c, true
}

var (
	svgHead   = sync.OnceValue(func() *regexp.Regexp { return regexp.MustCompile(`(?s)^.*?<svg[^>]*>`) })
	textStyle = sync.OnceValue(func() *regexp.Regexp { return regexp.MustCompile(`style="font-family:[^"]*fill:([^;"]+)"`) })
)

// svg returns a plot as an svg element without a size of its own; the page's
// style sheet sets the font.
func svg(p *plot.Plot) string {
	c := vgsvg.NewWith(vgsvg.UseWH(chartWidth, chartHeight))
	p.Draw(draw.Crop(draw.New(c), 2, -8, 2, -6))
	var b bytes.Buffer
	c.WriteTo(&b) // a bytes.Buffer takes everything
	head := fmt.Sprintf(`<svg viewBox="0 0 %d %d" xmlns="http://www.w3.org/2000/svg" aria-hidden="true">`, chartWidth, chartHeight)
	return textStyle().ReplaceAllString(head+svgHead().ReplaceAllString(b.String(), ""), `fill="$1"`)
}
