package derating

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"

	"github.com/rivo/uniseg"

	"realpart/models/quantity"
	"realpart/report"
)

// TextOptions steer [Assessment.WriteText].
type TextOptions struct {
	Width  int  // columns; 0 means 80
	Colour bool // for a terminal
	Quiet  bool // no cautions
}

// WriteText writes the assessment for a person to read: the answer first, then
// what it rests on.
func (a *Assessment) WriteText(w io.Writer, o TextOptions) error {
	if o.Width == 0 {
		o.Width = 80
	}
	t := text{report.NewLayout(o.Width, o.Colour)}
	t.heading(a)
	t.answer(a)
	if len(a.Warnings) > 0 {
		t.Title("Warnings")
		for i, w := range a.Warnings {
			t.paragraph(fmt.Sprintf("%3d  ", i+1), w.Code+": "+w.Text)
		}
	}
	t.ripple(a)
	t.temperature(a)
	t.lot(a)
	t.voltage(a)
	t.life(a)
	if len(a.Uncertainty) > 0 {
		t.Title("What the loss is uncertain by, and what would reduce it")
		for _, s := range a.Uncertainty {
			lead := "  –  "
			if s.Relative95 != nil {
				s.Text = "± " + report.FormatPercent(*s.Relative95) + " " + s.Text
				if s.Source == "spread" {
					s.Text = strings.TrimPrefix(s.Text, "± ")
				}
			}
			t.paragraph(lead, s.Text+". To reduce it: "+s.Remedy+".")
		}
	}
	if !o.Quiet {
		t.Title("Cautions")
		for _, c := range a.Cautions {
			t.paragraph("  ", c)
		}
	}
	_, err := io.WriteString(w, t.String())
	return err
}

// text is a layout whose paragraphs have one indent.
type text struct{ *report.Layout }

// paragraph wraps a text behind a first indent; further lines are indented
// alike.
func (t text) paragraph(first, s string) {
	t.Paragraph(first, strings.Repeat(" ", uniseg.StringWidth(first)), s)
}

func celsius(v float64) string { return fmt.Sprintf("%.1f °C", v) }
func kelvins(v float64) string { return fmt.Sprintf("%.1f K", v) }
func amperes(v float64) string { return quantity.Format(v, "A", 3) }
func volts(v float64) string   { return quantity.Format(v, "V", 4) }

// interval gives a value with the 95 % interval behind it, where there is one.
func interval(value float64, low, high *float64, unit string) string {
	if low == nil || high == nil || !(*low < *high) {
		return quantity.Format(value, unit, 3)
	}
	return quantity.FormatInterval(value, *low, *high, unit)
}

func (t text) heading(a *Assessment) {
	switch {
	case a.Statistics == nil:
		t.Heading(a.Part)
		t.Line(a.Parts[0].File)
		t.paragraph("", string(a.Kind)+", "+a.Parts[0].Circuit)
	default:
		name := "lot"
		if a.Lot != "" {
			name += " " + a.Lot
		}
		t.Heading(name)
		t.Line(fmt.Sprintf("%d parts, %s", len(a.Parts), a.Kind))
	}
	if a.Series != nil {
		var at []string
		for _, s := range a.Series {
			at = append(at, fmt.Sprintf("%g °C (%s)", *s.TemperatureC, s.File))
		}
		t.paragraph("", "resistance over temperature from sweeps at "+strings.Join(at, ", "))
	}
}

// answer is the verdict and what is left to each limit.
func (t text) answer(a *Assessment) {
	switch a.Verdict {
	case Within:
		t.Title("WITHIN the limits given")
	case Exceeded:
		t.Title("EXCEEDED")
	default:
		t.Title("No verdict: no temperature limit was given")
	}
	switch {
	case a.Runaway:
		t.paragraph("  ", "thermal runaway: there is no hot spot at which the part comes to rest")
	case a.MarginK != nil:
		s := fmt.Sprintf("hot spot %s, %s below the limit of %s", celsius(*a.HotSpotC), kelvins(*a.MarginK), celsius(*a.LimitC))
		if *a.MarginK < 0 {
			s = fmt.Sprintf("hot spot %s, %s above the limit of %s", celsius(*a.HotSpotC), kelvins(-*a.MarginK), celsius(*a.LimitC))
		}
		if *a.RequiredMarginK > 0 {
			s += fmt.Sprintf("; a margin of %s is wanted", kelvins(*a.RequiredMarginK))
		}
		t.paragraph("  ", s)
	case a.HotSpotC != nil:
		t.paragraph("  ", "hot spot "+celsius(*a.HotSpotC))
	case a.RiseK != nil:
		t.paragraph("  ", "rise "+kelvins(*a.RiseK))
	}
	if a.MaxRippleA != nil {
		s := "largest ripple current with this spectrum: " + interval(*a.MaxRippleA, a.MaxRippleLow95A, a.MaxRippleHigh95A, "A") +
			" RMS; it is " + amperes(a.Ripple.RMSA) + " now"
		if a.Statistics != nil {
			s += ", for the tolerance bound of the lot"
		}
		t.paragraph("  ", s)
	}
	if s := a.Statistics; s != nil && s.ExceedingParts != nil {
		line := fmt.Sprintf("%d of the %d parts measured exceed", *s.ExceedingParts, s.N)
		if s.ExceedingShare != nil {
			line += "; predicted of the lot: " + shareText(*s.ExceedingShare)
		}
		t.paragraph("  ", line)
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
		t.paragraph("  ", fmt.Sprintf("voltage peak %s, %s %s %s", volts(v.PeakV), volts(margin), side, of))
	}
	t.paragraph("  ", "loss "+interval(a.LossW, a.LossLow95W, a.LossHigh95W, "W"))
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

// mostRows is how many harmonics are printed; JSON has all.
const mostRows = 12

func (t text) ripple(a *Assessment) {
	t.Title("Loss by harmonic")
	ripple := len(a.Harmonics)
	if a.Ripple.DirectA > 0 {
		ripple--
	}
	s := a.Ripple.Text + ": " + amperes(a.Ripple.RMSA) + " RMS"
	if a.Ripple.CoveredShare < 1-1e-9 {
		s += fmt.Sprintf("; %s hold %.2f %% of its square", count(ripple, "harmonic", "harmonics"), 100*a.Ripple.CoveredShare)
	}
	if a.Ripple.DirectA > 0 {
		s += "; direct current " + amperes(a.Ripple.DirectA)
	}
	t.paragraph("  ", s)
	// Those with the largest losses, in the order of frequency.
	shown := make([]int, len(a.Harmonics))
	for i := range shown {
		shown[i] = i
	}
	slices.SortStableFunc(shown, func(x, y int) int {
		switch dx, dy := a.Harmonics[x].LossW, a.Harmonics[y].LossW; {
		case dx > dy:
			return -1
		case dx < dy:
			return 1
		}
		return 0
	})
	shown = shown[:min(len(shown), mostRows)]
	slices.Sort(shown)
	ohms := ohmsOf(a, shown)
	rows := [][]string{{"at", "RMS", "ESR/" + ohms.unit, "95 % interval", "measured", "", "", "loss", "share", ""}}
	if a.Statistics != nil {
		rows[0] = []string{"at", "RMS", "bound/" + ohms.unit, "mean", "measured", "worst", "", "loss", "share", ""}
	}
	if a.Series != nil && a.HotSpotC != nil {
		rows[0][6] = "hot"
	}
	var rest Harmonic
	outside, below := false, false
	for i, h := range a.Harmonics {
		if !slices.Contains(shown, i) {
			rest.LossW += h.LossW
			rest.Share += h.Share
			continue
		}
		row := []string{report.FormatFrequency(h.FHz), amperes(h.IRMSA), ohms.three(&h.ESROhm), "", ohms.three(h.Measured), "", ohms.three(h.Hot), quantity.Format(h.LossW, "W", 3), fmt.Sprintf("%.1f %%", 100*h.Share), ""}
		if h.FHz == 0 {
			row[0] = "direct"
		}
		if a.Statistics != nil {
			row[3], row[5] = ohms.three(h.Mean), ohms.three(h.Worst)
		} else if h.Low95 != nil && h.High95 != nil && *h.Low95 < *h.High95 {
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
		rows = append(rows, []string{fmt.Sprintf("%d more", n), "", "", "", "", "", "", quantity.Format(rest.LossW, "W", 3), fmt.Sprintf("%.1f %%", 100*rest.Share), ""})
	}
	t.Table(rows, "rrrrrrrrrl")
	if a.HotSpotC != nil && a.Series != nil {
		t.paragraph("  ", "hot: the ESR at the hot spot, which the loss is made with")
	}
	if outside {
		t.paragraph("  o  ", "outside the sweep: by the circuit alone")
	}
	if below {
		t.paragraph("  *  ", "below the meter's resolution there: |Z| times the stated phase accuracy is more")
	}
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

func (t text) temperature(a *Assessment) {
	if a.RthKPerW == nil {
		return
	}
	t.Title("Temperature")
	t.paragraph("  ", "thermal resistance "+quantity.Format(*a.RthKPerW, "K/W", 3)+", "+a.RthFrom)
	if a.RiseK == nil {
		return
	}
	s := "rise " + kelvins(*a.RiseK)
	if a.HotSpotC != nil {
		s += " over " + celsius(*a.AmbientC) + ": hot spot " + celsius(*a.HotSpotC)
		if a.HotSpotLow95C != nil && a.HotSpotHigh95C != nil {
			s += fmt.Sprintf(" (%.1f … %.1f)", *a.HotSpotLow95C, *a.HotSpotHigh95C)
		}
	}
	t.paragraph("  ", s)
}

func (t text) lot(a *Assessment) {
	s := a.Statistics
	if s == nil {
		return
	}
	t.Title("Lot")
	t.paragraph("  ", fmt.Sprintf("ESR is the upper one-sided tolerance bound at each frequency: mean + %.3f s, above %g %% of a normal lot with %g %% confidence (n = %d)",
		s.Factor, 100*s.CoveredShare, 100*s.Confidence, s.N))
	t.paragraph("  ", fmt.Sprintf("loss by the bound %s; mean of the parts %s, s %s", quantity.Format(a.LossW, "W", 3), quantity.Format(s.MeanLossW, "W", 3), quantity.Format(s.SDLossW, "W", 2)))
	line := "worst part measured: " + s.WorstPart + ", " + quantity.Format(s.WorstLossW, "W", 3)
	if s.WorstHotSpotC != nil {
		line += ", hot spot " + celsius(*s.WorstHotSpotC)
	}
	t.paragraph("  ", line)
}

func (t text) voltage(a *Assessment) {
	v := a.Voltage
	if v == nil {
		return
	}
	t.Title("Voltage")
	what := "√2·ΣI·|Z|, the worst case since phases are not known"
	switch {
	case v.OwnPeak && a.stepped():
		what = "of the harmonics above"
	case v.OwnPeak:
		what = "of the waveform itself"
	}
	t.paragraph("  ", fmt.Sprintf("%s direct and a ripple peak of %s (%s): %s", volts(v.DCV), volts(v.RipplePeakV), what, volts(v.PeakV)))
	if !v.OwnPeak {
		t.paragraph("  ", "beside it: √2 times the root sum of squares, "+volts(v.RippleRootSumV)+", is likelier where the phases are independent")
	}
}

func (t text) life(a *Assessment) {
	if a.Life == nil {
		return
	}
	t.Title("Life")
	s := fmt.Sprintf("%.0f h at the hot spot, from %.0f h at %g °C by %s; for wet aluminium electrolytics alone, not judged", *a.LifeH, a.Life.RatedH, a.Life.RatedC, a.Life.Rule)
	if a.Life.Capped {
		s = "capped: more than " + s
	}
	t.paragraph("  ", s)
}
