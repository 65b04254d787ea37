// Package figure draws the curves of a fit: |Z| and phase with the measured
// points and the fitted circuit, the residuals with the bands of scatter and
// of the meter's stated accuracy, and resistance and reactance with the
// meter's resolution.
//
// [Panels] makes the single figures for a page, [Write] a document with all of
// them. Both use gonum/plot with ticks that carry SI prefixes.
package figure

import (
	"fmt"
	"image/color"
	"math"
	"math/cmplx"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"realpart/models"
	"realpart/models/quantity"
	"realpart/report"
)

// Style holds the size of the text in points and the colours of a figure. What
// a colour tells, a shape or a position tells too.
type Style struct {
	FontSize  vg.Length
	Ink       color.Color // text, axes
	Grid      color.Color
	Measured  color.Color // points
	Model     color.Color // line
	Second    color.Color // points and line of the reactance
	Scatter   color.Color // band
	Meter     color.Color // band and resolution
	Resonance color.Color // marks
}

// Paper is a style for white paper. Blue and vermilion are told apart with
// every usual kind of colour vision (Okabe and Ito, Color Universal Design,
// 2008; values from memory).
var Paper = Style{
	FontSize:  8,
	Ink:       color.RGBA{0x22, 0x22, 0x22, 0xff},
	Grid:      color.RGBA{0xdd, 0xdd, 0xdd, 0xff},
	Measured:  color.RGBA{0x76, 0x76, 0x76, 0xff},
	Model:     color.RGBA{0x00, 0x72, 0xb2, 0xff},
	Second:    color.RGBA{0xd5, 0x5e, 0x00, 0xff},
	Scatter:   color.RGBA{0xcc, 0xe3, 0xf0, 0xff},
	Meter:     color.RGBA{0xec, 0xe4, 0xd0, 0xff},
	Resonance: color.RGBA{0x66, 0x66, 0x66, 0xff},
}

// Panel is one figure.
type Panel struct {
	// Name is a short identifier: impedance, phase, parts,
	// residual-magnitude, residual-phase.
	Name  string
	Title string
	// Legend says what is what.
	Legend []Entry
	// Alt says in words and numbers what is to be seen.
	Alt string
	// Notes says what is not drawn.
	Notes []string
	plot  *plot.Plot
}

// Entry is a line of a legend: a mark ("dot", "cross", "line", "second",
// "thin", "dashed", "scatter" or "meter") and its meaning.
type Entry struct{ Mark, Text string }

// Panels draws the figures of a fit. pick holds the indices of the points
// that are drawn; nil means all.
func Panels(t *report.Traces, s Style, pick []int) []Panel {
	if pick == nil {
		pick = make([]int, len(t.Freq))
		for i := range pick {
			pick[i] = i
		}
	}
	d := drawing{t, s, pick}
	return []Panel{d.impedance(), d.phase(), d.parts(), d.residualMagnitude(), d.residualPhase()}
}

// Coverage is the factor of a band of scatter: 95 % of normal deviations lie
// within it.
const coverage = 1.959963984540054

type drawing struct {
	*report.Traces
	style Style
	pick  []int
}

const (
	thin      = vg.Length(0.5)
	lineWidth = vg.Length(1.3)
)

// axis is the range of an axis with its ticks.
type axis struct {
	ticks       plot.Ticker
	logarithmic bool
	low, high   float64
}

// axes starts a figure over the frequencies of the sweep.
func (d drawing) axes(yTicks plot.Ticker, logarithmic bool, low, high float64) *plot.Plot {
	return d.style.axes(frequencies(d.Freq), axis{yTicks, logarithmic, low, high})
}

// frequencies is the axis of a sweep.
func frequencies(freq []float64) axis {
	low, high := freq[0], freq[len(freq)-1]
	if low == high {
		low, high = low/1.2, high*1.2
	}
	return axis{logTicks{"Hz", 6}, true, low, high}
}

// cornerShare is the share of a vertical axis below its lowest label that keeps
// this clear of the first label of the horizontal axis.
const cornerShare = 0.045

// clearOfCorner returns a vertical axis with its lowest label above the corner.
func (a axis) clearOfCorner() axis {
	place, back := func(v float64) float64 { return v }, func(v float64) float64 { return v }
	if a.logarithmic {
		place, back = math.Log, math.Exp
	}
	for _, t := range a.ticks.Ticks(a.low, a.high) {
		if t.Label == "" || t.Value < a.low {
			continue
		}
		least := (place(t.Value) - cornerShare*place(a.high)) / (1 - cornerShare)
		a.low = min(a.low, back(least))
		break // they rise
	}
	return a
}

// axes starts a figure: axes, ticks, and a grid with a line at every labelled
// tick. The vertical axis may begin a little below what was asked for.
func (s Style) axes(x, y axis) *plot.Plot {
	y = y.clearOfCorner()
	p := plot.New()
	p.BackgroundColor = nil
	sans := font.Font{Typeface: "Liberation", Variant: "Sans", Size: s.FontSize}
	for _, a := range []struct {
		*plot.Axis
		axis
	}{{&p.X, x}, {&p.Y, y}} {
		a.LineStyle.Width, a.LineStyle.Color = thin, s.Ink
		a.Tick.LineStyle.Width = 0 // see axisTicks
		a.Tick.Label.Font, a.Tick.Label.Color = sans, s.Ink
		a.Label.TextStyle.Font, a.Label.TextStyle.Color = sans, s.Ink
		a.Tick.Length = 2
		a.Padding = 0
		a.Tick.Marker = a.ticks
		if a.logarithmic {
			a.Scale = plot.LogScale{}
		}
		a.Min, a.Max = a.low, a.high
	}
	xTicks, yTicks := x.ticks.Ticks(x.low, x.high), y.ticks.Ticks(y.low, y.high)
	grid := &lines{style: draw.LineStyle{Color: s.Grid, Width: thin}}
	for _, t := range xTicks {
		if t.Label != "" {
			grid.segments = append(grid.segments, [4]float64{t.Value, y.low, t.Value, y.high})
		}
	}
	for _, t := range yTicks {
		if t.Label != "" {
			grid.segments = append(grid.segments, [4]float64{x.low, t.Value, x.high, t.Value})
		}
	}
	p.Add(grid, &axisTicks{xTicks, yTicks, draw.LineStyle{Color: s.Ink, Width: thin}})
	return p
}

// points returns the picked points of a function of their index.
func (d drawing) points(of func(i int) float64) plotter.XYs {
	var out plotter.XYs
	for _, i := range d.pick {
		out = append(out, plotter.XY{X: d.Freq[i], Y: of(i)})
	}
	return out
}

func (d drawing) curve(of func(z complex128) float64) plotter.XYs {
	var out plotter.XYs
	for i, z := range d.Curve {
		out = append(out, plotter.XY{X: d.CurveFreq[i], Y: of(z)})
	}
	return out
}

// resonances marks the self-resonances by dashed lines, the label at the top
// in the first panel only.
func (d drawing) resonances(p *plot.Plot, labelled bool) {
	for i, r := range d.Resonances {
		p.Add(&lines{
			segments: [][4]float64{{r.Freq, p.Y.Min, r.Freq, p.Y.Max}},
			style:    draw.LineStyle{Color: d.style.Resonance, Width: 0.7, Dashes: []vg.Length{3, 2}},
		})
		if labelled {
			// |Z| has a minimum at a series resonance, a maximum at a
			// parallel one: the text stands where the curve is not.
			p.Add(&note{r.Freq, string(r.Kind) + " " + quantity.Format(r.Freq, "Hz", 3), i, r.Kind == models.ParallelResonance, p.X.Tick.Label, d.style.Resonance})
		}
	}
}

// span returns the range of the positive values of some series, widened, and
// at least a fifth either way, so that a flat curve looks flat.
func span(series ...plotter.XYs) (low, high float64) {
	low, high = math.Inf(1), 0.0
	for _, s := range series {
		for _, v := range s {
			if v.Y > 0 {
				low, high = min(low, v.Y), max(high, v.Y)
			}
		}
	}
	if high == 0 {
		return 0.1, 10
	}
	margin := math.Pow(high/low, 0.05)
	low, high = low/margin, high*margin
	if high/low < 1.44 {
		middle := math.Sqrt(low * high)
		low, high = middle/1.2, middle*1.2
	}
	return low, high
}

func (d drawing) impedance() Panel {
	points, curve := d.points(func(i int) float64 { return cmplx.Abs(d.Measured[i]) }), d.curve(cmplx.Abs)
	low, high := span(points, curve)
	p := d.axes(logTicks{"Ω", 5}, true, low, high)
	d.resonances(p, true)
	p.Add(dots(points, d.style.Measured), line(curve, d.style.Model))
	return Panel{Name: "impedance", Title: "Impedance |Z|", plot: p, Legend: d.legend(),
		Alt: d.describe("|Z|", cmplx.Abs, "Ω") + d.resonancesInWords()}
}

func (d drawing) legend() []Entry {
	l := []Entry{{"dot", "measured"}, {"line", "fitted circuit"}}
	if len(d.Resonances) > 0 {
		l = append(l, Entry{"dashed", "self-resonance"})
	}
	return l
}

func (d drawing) phase() Panel {
	points, curve := d.points(func(i int) float64 { return report.Phase(d.Measured[i]) }), d.curve(report.Phase)
	low, high := math.Inf(1), math.Inf(-1)
	for _, s := range []plotter.XYs{points, curve} {
		for _, v := range s {
			low, high = min(low, v.Y), max(high, v.Y)
		}
	}
	margin := max(0.05*(high-low), 0.5)
	p := d.axes(angleTicks{}, false, low-margin, high+margin)
	d.resonances(p, false)
	p.Add(dots(points, d.style.Measured), line(curve, d.style.Model))
	return Panel{Name: "phase", Title: "Phase of Z", plot: p, Legend: d.legend(),
		Alt: d.describe("Phase", report.Phase, "°")}
}

// parts draws resistance and reactance. A logarithmic axis holds positive
// values only: points of no or negative resistance are counted instead.
func (d drawing) parts() Panel {
	var r, x plotter.XYs
	lost := 0
	for _, i := range d.pick {
		if v := real(d.Measured[i]); v > 0 {
			r = append(r, plotter.XY{X: d.Freq[i], Y: v})
		}
		if v := math.Abs(imag(d.Measured[i])); v > 0 {
			x = append(x, plotter.XY{X: d.Freq[i], Y: v})
		}
	}
	for _, z := range d.Measured {
		if !(real(z) > 0) {
			lost++
		}
	}
	curveR := d.curve(func(z complex128) float64 { return real(z) })
	curveX := d.curve(func(z complex128) float64 { return math.Abs(imag(z)) })
	// A reactance that passes zero goes to the bottom of a logarithmic axis:
	// the range is that of the points and of the resistance.
	low, high := span(r, x, curveR)
	if least, _ := span(curveR); least/20 > low {
		low = least / 20 // noise about zero has no end downwards
	}
	panel := Panel{Name: "parts", Title: "Resistance (ESR) and reactance |X|"}
	p := d.axes(logTicks{"Ω", 5}, true, low, high)
	low = p.Y.Min
	if d.MeterPhase != nil {
		var floor plotter.XYs
		for _, i := range d.pick {
			if v := cmplx.Abs(d.Measured[i]) * d.MeterPhase[i]; v > 0 && !math.IsInf(v, 0) {
				floor = append(floor, plotter.XY{X: d.Freq[i], Y: min(max(v, low), high)})
			}
		}
		if len(floor) > 1 {
			bottom := make(plotter.XYs, len(floor))
			for i, v := range floor {
				bottom[i] = plotter.XY{X: v.X, Y: low}
			}
			p.Add(band{floor, bottom, d.style.Meter})
			panel.Legend = append(panel.Legend, Entry{"meter", "R below the meter's resolution"})
		}
	}
	d.resonances(p, false)
	p.Add(crosses(above(x, low), d.style.Second), dots(above(r, low), d.style.Measured))
	for _, piece := range piecesAbove(curveX, low) {
		p.Add(line(piece, d.style.Second))
	}
	for _, piece := range piecesAbove(curveR, low) {
		p.Add(line(piece, d.style.Model))
	}
	panel.plot = p
	panel.Alt = d.describe("Resistance", func(z complex128) float64 { return real(z) }, "Ω") + " " +
		d.describe("Reactance, drawn without its sign,", func(z complex128) float64 { return imag(z) }, "Ω")
	panel.Legend = append([]Entry{{"dot", "R measured"}, {"line", "R fitted"}, {"cross", "|X| measured"}, {"second", "|X| fitted"}}, panel.Legend...)
	if lost > 0 {
		panel.Notes = append(panel.Notes, fmt.Sprintf("Not drawn: %d of %d points without a positive resistance.", lost, len(d.Measured)))
	}
	if n := len(r) - len(above(r, low)); n > 0 {
		panel.Notes = append(panel.Notes, fmt.Sprintf("Below the axis: %d more.", n))
	}
	if n := len(x) - len(above(x, low)); n > 0 {
		panel.Notes = append(panel.Notes, fmt.Sprintf("Below the axis: |X| of %d points.", n))
	}
	return panel
}

// above leaves out what lies below the axis.
func above(s plotter.XYs, low float64) plotter.XYs {
	var out plotter.XYs
	for _, v := range s {
		if v.Y >= low {
			out = append(out, v)
		}
	}
	return out
}

// piecesAbove cuts a curve where it passes below the axis. A line along the
// axis would be read as a value.
func piecesAbove(s plotter.XYs, low float64) []plotter.XYs {
	var out []plotter.XYs
	var piece plotter.XYs
	for i, v := range s {
		if i > 0 && (v.Y >= low) != (s[i-1].Y >= low) {
			piece = append(piece, crossing(s[i-1], v, low))
		}
		if v.Y >= low {
			piece = append(piece, v)
			continue
		}
		if len(piece) > 1 {
			out = append(out, piece)
		}
		piece = nil
	}
	if len(piece) > 1 {
		out = append(out, piece)
	}
	return out
}

// crossing is where the line from a to b, on logarithmic axes, passes y.
func crossing(a, b plotter.XY, y float64) plotter.XY {
	height := func(v float64) float64 { return math.Log(max(v/y, 1e-3)) } // of 0 and less, too
	u := height(a.Y) / (height(a.Y) - height(b.Y))
	return plotter.XY{X: a.X * math.Pow(b.X/a.X, u), Y: y}
}

// describe gives the course of a quantity in words: of the fitted circuit at
// the ends and at the extremes between them.
func (d drawing) describe(name string, of func(z complex128) float64, unit string) string {
	last := len(d.Curve) - 1
	at := func(i int) string {
		return quantity.Format(of(d.Curve[i]), unit, 3) + " at " + quantity.Format(d.CurveFreq[i], "Hz", 3)
	}
	lowest, highest := 0, 0
	for i, z := range d.Curve {
		if of(z) < of(d.Curve[lowest]) {
			lowest = i
		}
		if of(z) > of(d.Curve[highest]) {
			highest = i
		}
	}
	s := name + " of the fitted circuit: " + at(0)
	if lowest > 0 && lowest < last {
		s += ", least " + at(lowest)
	}
	if highest > 0 && highest < last {
		s += ", largest " + at(highest)
	}
	if last > 0 {
		s += ", " + at(last)
	}
	return s + "."
}

func (d drawing) resonancesInWords() string {
	s := ""
	for _, r := range d.Resonances {
		s += fmt.Sprintf(" %s self-resonance at %s.", r.Kind, quantity.Format(r.Freq, "Hz", 3))
	}
	return s
}

func (d drawing) residualMagnitude() Panel {
	panel := d.residual(d.MeterMagnitude, 100, "%", func(i int) float64 { return 100 * real(d.Residual[i]) })
	panel.Name, panel.Title = "residual-magnitude", "Residual of |Z|: fitted less measured"
	return panel
}

func (d drawing) residualPhase() Panel {
	const degrees = 180 / math.Pi
	panel := d.residual(d.MeterPhase, degrees, "°", func(i int) float64 { return degrees * imag(d.Residual[i]) })
	panel.Name, panel.Title = "residual-phase", "Residual of phase: fitted less measured"
	return panel
}

func (d drawing) residual(meter []float64, factor float64, unit string, of func(i int) float64) Panel {
	points := d.points(of)
	scatter := coverage * d.Scatter * factor
	// All points count for the range, also those not drawn.
	reach := scatter
	for i := range d.Freq {
		reach = max(reach, math.Abs(of(i)))
		if meter != nil && !math.IsNaN(meter[i]) {
			reach = max(reach, meter[i]*factor)
		}
	}
	reach *= 1.08
	if !(reach > 1e-9) {
		reach = 1e-9 // exact data: an axis nevertheless
	}
	p := d.axes(linearTicks{unit, 5}, false, -reach, reach)
	panel := Panel{plot: p, Legend: []Entry{{"dot", "fitted less measured"}}}
	if meter != nil {
		var upper, lower plotter.XYs
		for _, i := range d.pick {
			if !math.IsNaN(meter[i]) {
				upper = append(upper, plotter.XY{X: d.Freq[i], Y: meter[i] * factor})
				lower = append(lower, plotter.XY{X: d.Freq[i], Y: -meter[i] * factor})
			}
		}
		if len(upper) > 1 {
			p.Add(band{upper, lower, d.style.Meter})
			panel.Legend = append(panel.Legend, Entry{"meter", "meter's stated accuracy"})
		}
	}
	if scatter > 0 {
		edge := draw.LineStyle{Color: d.style.Model, Width: 0.7, Dashes: []vg.Length{1, 2}}
		p.Add(&lines{segments: [][4]float64{{p.X.Min, scatter, p.X.Max, scatter}, {p.X.Min, -scatter, p.X.Max, -scatter}}, style: edge})
		panel.Legend = append(panel.Legend, Entry{"scatter", "scatter of the points, 95 %"})
	}
	p.Add(&lines{segments: [][4]float64{{p.X.Min, 0, p.X.Max, 0}}, style: draw.LineStyle{Color: d.style.Ink, Width: thin}})
	d.resonances(p, false)
	p.Add(dots(points, d.style.Measured))
	square, worst := 0.0, 0
	for i := range d.Freq {
		square += of(i) * of(i)
		if math.Abs(of(i)) > math.Abs(of(worst)) {
			worst = i
		}
	}
	panel.Alt = fmt.Sprintf("Residuals: rms %s, largest %s at %s.", quantity.Format(math.Sqrt(square/float64(len(d.Freq))), unit, 2),
		quantity.Format(of(worst), unit, 2), quantity.Format(d.Freq[worst], "Hz", 3))
	return panel
}
