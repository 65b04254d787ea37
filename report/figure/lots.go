package figure

import (
	"fmt"
	"image/color"
	"math"
	"slices"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"realpart/models/quantity"
)

// Strip is one quantity of the parts of a lot. Low and High are its tolerance
// interval; NaN where there is none.
type Strip struct {
	Lot              string
	Values, Outliers []float64 // outliers are values too, or were left out
	Mean, Low, High  float64
}

// Strips draws a strip for each lot side by side: a dot a part, outliers as
// crosses, the mean and the tolerance interval. low and high are limits; NaN
// for none.
func Strips(title, unit string, strips []Strip, low, high float64, s Style) Panel {
	var all []float64
	for _, t := range strips {
		all = append(all, t.Values...)
		all = append(all, t.Outliers...)
		all = append(all, t.Low, t.High)
	}
	all = append(all, low, high)
	all = slices.DeleteFunc(all, math.IsNaN)
	if len(all) == 0 {
		all = []float64{0}
	}
	bottom, top := slices.Min(all), slices.Max(all)
	margin := 0.05 * (top - bottom)
	if !(margin > 0) {
		margin = max(0.05*math.Abs(top), 1e-30)
	}
	bottom, top = bottom-margin, top+margin
	var names plot.ConstantTicks
	for i, t := range strips {
		names = append(names, plot.Tick{Value: float64(i + 1), Label: t.Lot})
	}
	right := float64(len(strips)) + 0.5
	p := s.axes(axis{names, false, 0.5, right}, axis{linearTicks{unit, 5}, false, bottom, top})
	panel := Panel{Name: "strip", Title: title, plot: p, Legend: []Entry{{"dot", "part"}}}
	var points, outliers plotter.XYs
	interval := &lines{style: draw.LineStyle{Color: s.Model, Width: thin}}
	means := &lines{style: draw.LineStyle{Color: s.Model, Width: lineWidth}}
	for i, t := range strips {
		x := float64(i + 1)
		values := slices.Sorted(slices.Values(t.Values))
		for k, v := range values {
			if slices.Contains(t.Outliers, v) {
				continue
			}
			// Side by side in a way that is even and always the same.
			_, shift := math.Modf(float64(k) * 0.6180339887498949)
			points = append(points, plotter.XY{X: x + 0.36*(shift-0.5), Y: v})
		}
		for _, v := range t.Outliers {
			outliers = append(outliers, plotter.XY{X: x, Y: v})
		}
		if !math.IsNaN(t.Mean) {
			means.segments = append(means.segments, [4]float64{x - 0.24, t.Mean, x + 0.24, t.Mean})
			panel.Alt += fmt.Sprintf("%s: %d parts, mean %s. ", t.Lot, len(t.Values), quantity.Format(t.Mean, unit, 4))
		}
		if !math.IsNaN(t.Low) && !math.IsNaN(t.High) {
			const cap = 0.07
			interval.segments = append(interval.segments, [4]float64{x + 0.3, t.Low, x + 0.3, t.High},
				[4]float64{x + 0.3 - cap, t.Low, x + 0.3 + cap, t.Low}, [4]float64{x + 0.3 - cap, t.High, x + 0.3 + cap, t.High})
		}
	}
	p.Add(interval, dots(points, s.Measured), crosses(outliers, s.Second), means)
	if len(outliers) > 0 {
		panel.Legend = append(panel.Legend, Entry{"cross", "outlier"})
	}
	panel.Legend = append(panel.Legend, Entry{"line", "mean; beside it the tolerance interval"})
	limits := &lines{style: draw.LineStyle{Color: s.Resonance, Width: 0.9, Dashes: []vg.Length{3, 2}}}
	for _, v := range []float64{low, high} {
		if !math.IsNaN(v) {
			limits.segments = append(limits.segments, [4]float64{0.5, v, right, v})
		}
	}
	if len(limits.segments) > 0 {
		p.Add(limits)
		panel.Legend = append(panel.Legend, Entry{"dashed", "limit"})
	}
	return panel
}

// Curves are a positive quantity of the parts of a lot, |Z| in Ω, each at the
// same frequencies. There is at least one part.
type Curves struct {
	Lot   string
	Parts [][]float64
}

// band returns the least, the middle and the largest value at each frequency.
func (c Curves) band() (least, middle, largest []float64) {
	for i := range c.Parts[0] {
		var column []float64
		for _, part := range c.Parts {
			column = append(column, part[i])
		}
		slices.Sort(column)
		n := len(column)
		least, largest = append(least, column[0]), append(largest, column[n-1])
		middle = append(middle, (column[(n-1)/2]+column[n/2])/2)
	}
	return least, middle, largest
}

// Overlay draws |Z| of all parts of a lot over frequency in Hz, and how far
// each is from the median of the lot.
func Overlay(freq []float64, c Curves, s Style) []Panel {
	_, middle, _ := c.band()
	var all, relative []plotter.XYs
	for _, part := range c.Parts {
		all, relative = append(all, over(freq, part)), append(relative, over(freq, deviation(part, middle)))
	}
	legend := []Entry{{"thin", "a part"}, {"line", "median"}}
	low, high := span(all...)
	p := s.axes(frequencies(freq), axis{logTicks{"Ω", 5}, true, low, high})
	for _, curve := range all {
		p.Add(thinLine(curve, s.Resonance))
	}
	p.Add(line(over(freq, middle), s.Model))
	q := s.axes(frequencies(freq), percents(relative...))
	for _, curve := range relative {
		q.Add(thinLine(curve, s.Resonance))
	}
	least, most := extremes(relative...)
	return []Panel{
		{Name: "overlay", Title: "|Z| of all parts of " + c.Lot, Legend: legend, plot: p,
			Alt: fmt.Sprintf("%d curves of |Z| between %s and %s.", len(c.Parts), quantity.Format(low, "Ω", 3), quantity.Format(high, "Ω", 3))},
		{Name: "overlay-relative", Title: "|Z| of all parts less the median of " + c.Lot, Legend: legend[:1], plot: q,
			Alt: fmt.Sprintf("Deviations from the median between %s and %s.", quantity.Format(least, "%", 2), quantity.Format(most, "%", 2))},
	}
}

// Bands draws the bands of |Z| of two lots over frequency in Hz, from the least
// to the largest with the median, and both relative to the median of the
// reference.
func Bands(freq []float64, reference, lot Curves, s Style) []Panel {
	var all, relative [2][3]plotter.XYs
	_, middle, _ := reference.band()
	for i, c := range []Curves{reference, lot} {
		least, median, largest := c.band()
		for k, v := range [][]float64{least, median, largest} {
			all[i][k], relative[i][k] = over(freq, v), over(freq, deviation(v, middle))
		}
	}
	legend := []Entry{{"line", reference.Lot + ": median, between the least and the largest"}, {"second", lot.Lot}}
	low, high := span(append(all[0][:], all[1][:]...)...)
	p := s.axes(frequencies(freq), axis{logTicks{"Ω", 5}, true, low, high})
	q := s.axes(frequencies(freq), percents(append(relative[0][:], relative[1][:]...)...))
	for i, colour := range []color.Color{s.Model, s.Second} {
		for k := range all[i] {
			if k == 1 {
				p.Add(line(all[i][k], colour))
				q.Add(line(relative[i][k], colour))
			} else {
				p.Add(thinLine(all[i][k], colour))
				q.Add(thinLine(relative[i][k], colour))
			}
		}
	}
	least, most := extremes(relative[1][1])
	return []Panel{
		{Name: "bands", Title: "|Z| of " + reference.Lot + " and " + lot.Lot, Legend: legend, plot: p,
			Alt: fmt.Sprintf("Bands of |Z| between %s and %s.", quantity.Format(low, "Ω", 3), quantity.Format(high, "Ω", 3))},
		{Name: "bands-relative", Title: "|Z| less the median of " + reference.Lot, Legend: legend, plot: q,
			Alt: fmt.Sprintf("The median of %s is between %s and %s from that of %s.", lot.Lot, quantity.Format(least, "%", 2), quantity.Format(most, "%", 2), reference.Lot)},
	}
}

func over(freq, values []float64) plotter.XYs {
	out := make(plotter.XYs, len(freq))
	for i := range freq {
		out[i] = plotter.XY{X: freq[i], Y: values[i]}
	}
	return out
}

// deviation is in percent of the middle.
func deviation(values, middle []float64) []float64 {
	out := make([]float64, len(values))
	for i, v := range values {
		out[i] = 100 * (v/middle[i] - 1)
	}
	return out
}

func extremes(curves ...plotter.XYs) (least, most float64) {
	least, most = math.Inf(1), math.Inf(-1)
	for _, c := range curves {
		for _, v := range c {
			least, most = min(least, v.Y), max(most, v.Y)
		}
	}
	return least, most
}

// percents is an axis for deviations in percent.
func percents(curves ...plotter.XYs) axis {
	low, high := extremes(curves...)
	margin := max(0.05*(high-low), 1e-6)
	return axis{linearTicks{"%", 5}, false, low - margin, high + margin}
}

func thinLine(values plotter.XYs, colour color.Color) series {
	s := line(values, colour)
	s.draw = func(c draw.Canvas, points []vg.Point, colour color.Color) {
		var path vg.Path
		for i, p := range simplify(points, 0.15) {
			if i == 0 {
				path.Move(p)
			} else {
				path.Line(p)
			}
		}
		stroke(c, path, draw.LineStyle{Color: colour, Width: thin})
	}
	return s
}
