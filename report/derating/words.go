package derating

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"realpart/models/quantity"
	"realpart/report"
)

func celsius(v float64) string { return fmt.Sprintf("%.1f °C", v) }
func kelvins(v float64) string { return fmt.Sprintf("%.1f K", v) }
func amperes(v float64) string { return quantity.Format(v, "A", 3) }
func volts(v float64) string   { return quantity.Format(v, "V", 4) }

// exact is the relative width below which an interval is not worth digits.
const exact = 1e-6

// interval gives a value with the 95 % interval behind it, where there is one.
func interval(value float64, low, high *float64, unit string) string {
	if low == nil || high == nil || !(*high-*low > exact*math.Abs(value)) {
		return quantity.Format(value, unit, 3)
	}
	return quantity.FormatInterval(value, *low, *high, unit)
}

// title names the part or the lot, and what it is.
func (a *Assessment) title() (name string, under []string) {
	if a.Statistics == nil {
		name = a.Part
		under = []string{a.Parts[0].File, string(a.Kind) + ", " + a.Parts[0].Circuit}
	} else {
		name = strings.TrimSpace("lot " + a.Lot)
		under = []string{fmt.Sprintf("%d parts, %s", len(a.Parts), a.Kind)}
	}
	if a.Series != nil {
		var at []string
		for _, s := range a.Series {
			at = append(at, fmt.Sprintf("%g °C (%s)", *s.TemperatureC, s.File))
		}
		under = append(under, "resistance over temperature from sweeps at "+strings.Join(at, ", "))
	}
	return name, under
}

// headline is the verdict.
func (a *Assessment) headline() string {
	switch a.Verdict {
	case Within:
		return "WITHIN the limits given"
	case Exceeded:
		return "EXCEEDED"
	}
	return "No verdict: no temperature limit was given"
}

// answers say what is left to each limit.
func (a *Assessment) answers() []string {
	var lines []string
	switch {
	case a.Runaway:
		lines = append(lines, "thermal runaway: there is no hot spot at which the part comes to rest")
	case a.MarginK != nil:
		s := fmt.Sprintf("hot spot %s, %s below the limit of %s", celsius(*a.HotSpotC), kelvins(*a.MarginK), celsius(*a.LimitC))
		if *a.MarginK < 0 {
			s = fmt.Sprintf("hot spot %s, %s above the limit of %s", celsius(*a.HotSpotC), kelvins(-*a.MarginK), celsius(*a.LimitC))
		}
		if *a.RequiredMarginK > 0 {
			s += fmt.Sprintf("; a margin of %s is wanted", kelvins(*a.RequiredMarginK))
		}
		lines = append(lines, s)
	case a.HotSpotC != nil:
		lines = append(lines, "hot spot "+celsius(*a.HotSpotC))
	case a.RiseK != nil:
		lines = append(lines, "rise "+kelvins(*a.RiseK))
	}
	if a.MaxRippleA != nil {
		s := "largest ripple current with this spectrum: " + interval(*a.MaxRippleA, a.MaxRippleLow95A, a.MaxRippleHigh95A, "A") +
			" RMS; it is " + amperes(a.Ripple.RMSA) + " now"
		if a.Statistics != nil {
			s += ", for the tolerance bound of the lot"
		}
		lines = append(lines, s)
	}
	if s := a.Statistics; s != nil && s.ExceedingParts != nil {
		line := fmt.Sprintf("%d of the %d parts measured exceed", *s.ExceedingParts, s.N)
		if s.ExceedingShare != nil {
			line += "; predicted of the lot: " + shareText(*s.ExceedingShare)
		}
		lines = append(lines, line)
	}
	if v := a.Voltage; v != nil && v.MarginV != nil {
		of := "the rating of " + volts(*v.RatedV)
		if v.Factor != nil {
			of = fmt.Sprintf("%s (%s times %g)", volts(*v.RatedV**v.Factor), volts(*v.RatedV), *v.Factor)
		}
		side, margin := "below", *v.MarginV
		if margin < 0 {
			side, margin = "above", -margin
		}
		lines = append(lines, fmt.Sprintf("voltage peak %s, %s %s %s", volts(v.PeakV), volts(margin), side, of))
	}
	return append(lines, "loss "+interval(a.LossW, a.LossLow95W, a.LossHigh95W, "W"))
}

// stepped tells that the current jumps.
func (a *Assessment) stepped() bool {
	return slices.ContainsFunc(a.Warnings, func(w Warning) bool { return w.Code == steepEdges })
}

func shareText(v float64) string {
	if v < 1e-6 {
		return "less than 0.0001 %"
	}
	return report.FormatPercent(v)
}

// rippleInWords says what the current is.
func (a *Assessment) rippleInWords() string {
	s := a.Ripple.Text + ": " + amperes(a.Ripple.RMSA) + " RMS"
	if a.Ripple.CoveredShare < 1-1e-9 {
		n := len(a.Harmonics)
		if a.Ripple.DirectA > 0 {
			n--
		}
		s += fmt.Sprintf("; %s hold %.2f %% of its square", count(n, "harmonic", "harmonics"), 100*a.Ripple.CoveredShare)
	}
	if a.Ripple.DirectA > 0 {
		s += "; direct current " + amperes(a.Ripple.DirectA)
	}
	return s
}

// note explains a mark of the table.
type note struct{ mark, text string }

// tableAlign says of each column of the table whether it stands left or right.
const tableAlign = "rrrrrrrrrl"

// table returns the harmonics with the largest losses, at most so many, in the
// order of frequency, below a row of headings. Columns without a use are empty.
func (a *Assessment) table(most int) (rows [][]string, notes []note) {
	shown := make([]int, len(a.Harmonics))
	for i := range shown {
		shown[i] = i
	}
	slices.SortStableFunc(shown, func(x, y int) int { return cmp.Compare(a.Harmonics[y].LossW, a.Harmonics[x].LossW) })
	shown = shown[:min(len(shown), most)]
	slices.Sort(shown)
	ohms := ohmsOf(a, shown)
	rows = [][]string{{"at", "RMS", "ESR/" + ohms.unit, "95 % interval", "measured", "", "", "loss", "share", ""}}
	if a.Statistics != nil {
		rows[0] = []string{"at", "RMS", "bound/" + ohms.unit, "mean", "measured", "worst", "", "loss", "share", ""}
	}
	if a.Series != nil && a.HotSpotC != nil {
		rows[0][6] = "hot"
	}
	outside, below := false, false
	for _, i := range shown {
		h := a.Harmonics[i]
		row := []string{report.FormatFrequency(h.FHz), amperes(h.IRMSA), ohms.three(&h.ESROhm), "", ohms.three(h.Measured), "", ohms.three(h.Hot), quantity.Format(h.LossW, "W", 3), fmt.Sprintf("%.1f %%", 100*h.Share), ""}
		if h.FHz == 0 {
			row[0] = "direct"
		}
		if a.Statistics != nil {
			row[3], row[5] = ohms.three(h.Mean), ohms.three(h.Worst)
		} else if h.Low95 != nil && h.High95 != nil && *h.High95-*h.Low95 > exact*h.ESROhm {
			row[2], row[3] = ohms.interval(h.ESROhm, *h.Low95, *h.High95)
		}
		if !h.InSweep && h.FHz > 0 {
			row[9] += "o"
			outside = true
		}
		if h.BelowResolution != nil && *h.BelowResolution {
			row[9] += "*"
			below = true
		}
		rows = append(rows, row)
	}
	if n := len(a.Harmonics) - len(shown); n > 0 {
		loss, share := 0.0, 0.0
		for i, h := range a.Harmonics {
			if _, listed := slices.BinarySearch(shown, i); !listed {
				loss, share = loss+h.LossW, share+h.Share
			}
		}
		rows = append(rows, []string{fmt.Sprintf("%d more", n), "", "", "", "", "", "", quantity.Format(loss, "W", 3), fmt.Sprintf("%.1f %%", 100*share), ""})
	}
	if a.HotSpotC != nil && a.Series != nil {
		notes = append(notes, note{"hot", "the ESR at the hot spot, which the loss is made with"})
	}
	if outside {
		notes = append(notes, note{"o", "outside the sweep: by the circuit alone"})
	}
	if below {
		notes = append(notes, note{"*", "below the meter's resolution there: |Z| times the stated phase accuracy is more"})
	}
	return rows, notes
}

// ohms writes resistances with the one prefix of a column.
type ohms struct {
	unit  string
	scale float64
}

func ohmsOf(a *Assessment, shown []int) ohms {
	largest := 0.0
	for _, i := range shown {
		largest = max(largest, a.Harmonics[i].ESROhm)
	}
	for _, o := range []ohms{{"kΩ", 1e-3}, {"Ω", 1}, {"mΩ", 1e3}} {
		if largest*o.scale >= 1 {
			return o
		}
	}
	return ohms{"µΩ", 1e6}
}

// three writes a resistance with three significant digits, "" for none.
func (o ohms) three(v *float64) string {
	if v == nil {
		return ""
	}
	return o.decimals(*v, decimalsOf(*v*o.scale, 3))
}

func (o ohms) decimals(v float64, n int) string { return strconv.FormatFloat(v*o.scale, 'f', n, 64) }

// interval rounds a resistance and its interval to the place of the second
// digit of the nearer side's width (GUM 7.2.6).
func (o ohms) interval(v, low, high float64) (value, interval string) {
	n := decimalsOf(min(high-v, v-low)*o.scale, 2)
	return o.decimals(v, n), o.decimals(low, n) + " … " + o.decimals(high, n)
}

// decimalsOf is how many digits behind the point show so many significant ones.
func decimalsOf(v float64, significant int) int {
	if !(v > 0) {
		return significant - 1
	}
	return min(max(significant-1-int(math.Floor(math.Log10(v))), 0), 9)
}

// section is a part of the report in sentences.
type section struct {
	title string
	lines []string
}

// sections are those on temperature, lot, voltage and life, where there is
// something to say.
func (a *Assessment) sections() []section {
	var out []section
	if a.RthKPerW != nil {
		lines := []string{"thermal resistance " + quantity.Format(*a.RthKPerW, "K/W", 3) + ", " + a.RthFrom}
		if a.RiseK != nil {
			s := "rise " + kelvins(*a.RiseK)
			if a.HotSpotC != nil {
				s += " over " + celsius(*a.AmbientC) + ": hot spot " + celsius(*a.HotSpotC)
				if a.HotSpotLow95C != nil && a.HotSpotHigh95C != nil {
					s += fmt.Sprintf(" (%.1f … %.1f)", *a.HotSpotLow95C, *a.HotSpotHigh95C)
				}
			}
			lines = append(lines, s)
		}
		out = append(out, section{"Temperature", lines})
	}
	if s := a.Statistics; s != nil {
		worst := "worst part measured: " + s.WorstPart + ", " + quantity.Format(s.WorstLossW, "W", 3)
		if s.WorstHotSpotC != nil {
			worst += ", hot spot " + celsius(*s.WorstHotSpotC)
		}
		out = append(out, section{"Lot", []string{
			fmt.Sprintf("ESR is the upper one-sided tolerance bound at each frequency: mean + %.3f s, above %g %% of a normal lot with %g %% confidence (n = %d)",
				s.Factor, 100*s.CoveredShare, 100*s.Confidence, s.N),
			fmt.Sprintf("loss by the bound %s; mean of the parts %s, s %s", quantity.Format(a.LossW, "W", 3), quantity.Format(s.MeanLossW, "W", 3), quantity.Format(s.SDLossW, "W", 2)),
			worst,
		}})
	}
	if v := a.Voltage; v != nil {
		what := "√2·ΣI·|Z|, the worst case since phases are not known"
		switch {
		case v.OwnPeak && a.stepped():
			what = "of the harmonics above"
		case v.OwnPeak:
			what = "of the waveform itself"
		}
		lines := []string{fmt.Sprintf("%s direct and a ripple peak of %s (%s): %s", volts(v.DCV), volts(v.RipplePeakV), what, volts(v.PeakV))}
		if !v.OwnPeak {
			lines = append(lines, "beside it: √2 times the root sum of squares, "+volts(v.RippleRootSumV)+", is likelier where the phases are independent")
		}
		out = append(out, section{"Voltage", lines})
	}
	if a.Life != nil {
		s := fmt.Sprintf("%.0f h at the hot spot, from %.0f h at %g °C by %s; for wet aluminium electrolytics alone, not judged", *a.LifeH, a.Life.RatedH, a.Life.RatedC, a.Life.Rule)
		if a.Life.Capped {
			s = "capped: more than " + s
		}
		out = append(out, section{"Life", []string{s}})
	}
	return out
}

// inWords gives a source with its size.
func (s Source) inWords() string {
	switch {
	case s.Relative95 == nil:
		return s.Text
	case s.Source == "spread": // one-sided
		return report.FormatPercent(*s.Relative95) + " " + s.Text
	}
	return "± " + report.FormatPercent(*s.Relative95) + " " + s.Text
}
