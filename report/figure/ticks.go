package figure

import (
	"math"
	"strconv"

	"gonum.org/v1/plot"

	"realpart/models/quantity"
)

// logTicks are the ticks of a logarithmic axis, labelled with SI prefixes and
// the unit: "100 kHz", "1 MHz".
type logTicks struct {
	unit string
	most int // of labels
}

var _ plot.Ticker = logTicks{}

// Ticks returns ticks at decades with their 2 to 9; as many decades are
// labelled as there is room for, and 2 and 5 too where there are few. A range
// without two such has ticks at equal steps.
func (t logTicks) Ticks(low, high float64) []plot.Tick {
	if !(low > 0 && high > low) {
		return nil
	}
	if high/low < 2.2 {
		return linearTicks(t).Ticks(low, high)
	}
	first, last := int(math.Floor(math.Log10(low))), int(math.Ceil(math.Log10(high)))
	decades := math.Log10(high / low)
	every := max(1, int(math.Ceil(decades/float64(t.most))))
	var ticks []plot.Tick
	labels := 0
	for e := first; e <= last; e++ {
		for m := 1; m <= 9; m++ {
			v := decimal(m, e)
			if v < low*(1-1e-12) || v > high*(1+1e-12) {
				continue
			}
			tick := plot.Tick{Value: v}
			labelled := m == 1 && floorMod(e, every) == 0
			if every == 1 && decades*3 <= float64(t.most) {
				labelled = m == 1 || m == 2 || m == 5
			}
			if labelled {
				tick.Label = label(v, t.unit)
				labels++
			} else if every > 1 && m != 1 || decades > 5 && m != 1 {
				continue // too dense to be told apart
			}
			ticks = append(ticks, tick)
		}
	}
	if labels < 2 {
		return linearTicks(t).Ticks(low, high)
	}
	return ticks
}

// linearTicks are ticks at equal steps, labelled like [logTicks].
type linearTicks logTicks

var _ plot.Ticker = linearTicks{}

// Ticks returns ticks at a step of 1, 2 or 5 times a power of ten.
func (t linearTicks) Ticks(low, high float64) []plot.Tick {
	if !(high > low) {
		return nil
	}
	rough := (high - low) / float64(t.most)
	power := math.Floor(math.Log10(rough))
	step := 10 * math.Pow(10, power)
	for _, m := range []float64{1, 2, 5} {
		if m*math.Pow(10, power) >= rough*(1-1e-9) {
			step = m * math.Pow(10, power)
			break
		}
	}
	var ticks []plot.Tick
	for k := math.Ceil(low/step - 1e-9); k*step <= high+1e-9*step; k++ {
		// The decimal nearest to the step's multiple, without its rounding.
		v, _ := strconv.ParseFloat(strconv.FormatFloat(k*step, 'g', 12, 64), 64)
		ticks = append(ticks, plot.Tick{Value: v, Label: label(v, t.unit)})
	}
	return ticks
}

// angleTicks are ticks at multiples of a number of degrees.
type angleTicks struct{}

var _ plot.Ticker = angleTicks{}

// Ticks returns ticks every 45°, 30° or 15°, or finer ones for a small range.
func (angleTicks) Ticks(low, high float64) []plot.Tick {
	for _, step := range []float64{45, 30, 15} {
		if high-low >= 3*step {
			var ticks []plot.Tick
			for k := math.Ceil(low / step); k*step <= high; k++ {
				ticks = append(ticks, plot.Tick{Value: k * step, Label: label(k*step, "°")})
			}
			return ticks
		}
	}
	return linearTicks{unit: "°", most: 5}.Ticks(low, high)
}

// label writes a number with as few digits as give it back, four at most in
// sight of its neighbours' step.
func label(v float64, unit string) string {
	if v == 0 {
		return "0"
	}
	for digits := 1; digits < 7; digits++ {
		rounded, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', digits-1, 64), 64)
		if math.Abs(rounded-v) <= 1e-9*math.Abs(v) {
			exponent := int(math.Floor(math.Log10(math.Abs(rounded)) + 1e-9))
			whole := floorMod(exponent, 3) + 1 // digits before the point
			if unit == "%" || unit == "°" {
				return strconv.FormatFloat(v, 'f', max(0, digits-1-exponent), 64) + suffix(unit)
			}
			return quantity.Format(v, unit, max(digits, whole))
		}
	}
	return quantity.Format(v, unit, 7)
}

func suffix(unit string) string {
	if unit == "%" {
		return " %"
	}
	return unit
}

func decimal(m, e int) float64 {
	v, _ := strconv.ParseFloat(strconv.Itoa(m)+"e"+strconv.Itoa(e), 64)
	return v
}

func floorMod(a, b int) int { return ((a % b) + b) % b }
