package derating

import (
	"cmp"
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"realpart/models/quantity"
	"realpart/report"
	"realpart/report/lots"
)

// steepEdges is the code of a warning that the text needs.
const steepEdges = "steep-edges"

// noticeable is the share of the loss below which a fault of its resistance is
// not worth words.
const noticeable = 0.001

// sources says what the loss is uncertain by and what would reduce it.
func (a *assessor) sources() {
	if !(a.LossW > 0) {
		return
	}
	main := 0 // the line with the largest loss
	for i, h := range a.Harmonics {
		if h.LossW > a.Harmonics[main].LossW {
			main = i
		}
	}
	at := "the low end of the sweep"
	if f := a.freq[main]; f > 0 {
		at = report.FormatFrequency(f)
	}
	numbers := func(source string, relative float64, text, remedy string) {
		a.Uncertainty = append(a.Uncertainty, Source{source, &relative, text, remedy})
	}
	words := func(source, text, remedy string) {
		a.Uncertainty = append(a.Uncertainty, Source{source, nil, text, remedy})
	}
	if s := a.Statistics; s != nil && s.MeanLossW > 0 {
		above := a.LossW/s.MeanLossW - 1
		text := fmt.Sprintf("spread between the %d parts: the bound is %s above their mean", s.N, report.FormatPercent(above))
		const enough = 30
		remedy := "parts that differ less; more of them would hardly lower the bound"
		if s.N < enough {
			remedy = fmt.Sprintf("more parts: the tolerance factor of %.3g falls to %.3g with %d", s.Factor, lots.ToleranceOneSided(enough, lots.Coverage, lots.Confidence), enough)
		}
		numbers("spread", above, text, remedy)
	}
	which := ""
	if a.Statistics != nil {
		which = " (of the part with the largest loss)"
	}
	if a.scatter > 0 && a.scatter < math.Inf(1) {
		remedy := "more points or averaging around " + at
		if name := a.of.leading(); name != "" {
			remedy += "; fit --advise " + name + " names the sweep that pins it down"
		}
		numbers("scatter", a.scatter, "scatter of the points"+which, remedy)
	}
	if a.meter > 0 {
		remedy := "a meter or range with a smaller error at " + at
		if f := a.freq[main]; f > 0 {
			if ratio := cmplx.Abs(impedance(a.parts[a.worst].Fit)([]float64{f})[0]) / a.all[a.worst].r[main]; ratio > 2 {
				remedy += fmt.Sprintf(", above all of phase: |Z| is %.2g times the ESR there, and a phase error weighs so much more in it", ratio)
			}
		}
		text := "the meter's stated accuracy" + which
		if a.Statistics != nil {
			text += "; alike for all parts, so that it is not in the bound"
		}
		numbers("meter", a.meter, text, remedy)
	}
	if m := a.Harmonics[main]; m.Measured != nil && a.structured() && a.Statistics == nil {
		if d := math.Abs(*m.Measured/m.ESROhm - 1); d > a.u {
			numbers("circuit", d, "fitted and measured ESR differ by so much at "+at+", and the residuals have a structure: the circuit does not describe the part to the accuracy of the points", "another circuit (fit --all lists the candidates)")
		}
	}
	slices.SortStableFunc(a.Uncertainty, func(x, y Source) int { return cmp.Compare(*y.Relative95, *x.Relative95) })

	if share, low, high := a.shareOf(func(h Harmonic) bool { return !h.InSweep && h.FHz > 0 }); share >= noticeable {
		words("outside-sweep", fmt.Sprintf("%s of the loss lies outside the sweep, by the circuit alone", report.FormatPercent(share)),
			"a sweep that holds "+span(low, high))
	}
	if share, low, high := a.shareOf(func(h Harmonic) bool { return h.BelowResolution != nil && *h.BelowResolution }); share >= noticeable {
		words("below-resolution", fmt.Sprintf("%s of the loss meets an ESR below the meter's resolution", report.FormatPercent(share)),
			"a meter or fixture that resolves the ESR at "+span(low, high))
	}
	if !a.c.AccuracyStated {
		words("meter-not-stated", "the meter's accuracy was not stated: its error is not in the intervals", "--accuracy with the meter's numbers")
	}
	if a.Statistics == nil {
		words("one-part", "one part was measured: how far parts differ is not in the interval", "a sweep of each of ten or more parts of the lot")
	}
	if a.RthKPerW != nil {
		if a.rated != nil {
			words("thermal-resistance", "the thermal resistance follows from a rating and this part's own ESR, so that a high ESR hardly shows in the rise", "--rated-esr with the ESR that the rating stands for, or a thermocouple on the part in its place")
		} else if a.c.Rating != nil {
			words("thermal-resistance", "the thermal resistance follows from a rating: cooling in service differs", "a thermocouple on the part in its place")
		} else {
			words("thermal-resistance", "the thermal resistance is taken as exact: its error goes into the rise in proportion", "a thermocouple on the part in its place")
		}
		if a.course == nil {
			words("temperature", "the ESR at the hot spot is taken as that of the sweep", "sweeps of the part at two or more temperatures (--at-temperature)")
		}
	}
}

// structured tells whether the circuit of a part fails to describe it.
func (a *assessor) structured() bool {
	return slices.ContainsFunc(a.parts, func(p Sweep) bool { return p.Fit.Structured })
}

// shareOf sums the loss of some lines and gives their lowest and highest
// frequency.
func (a *assessor) shareOf(is func(Harmonic) bool) (share, low, high float64) {
	for _, h := range a.Harmonics {
		if !is(h) {
			continue
		}
		if low == 0 {
			low = h.FHz
		}
		share, high = share+h.Share, h.FHz
	}
	return share, low, high
}

func span(low, high float64) string {
	if low == high {
		return report.FormatFrequency(low)
	}
	return report.FormatFrequency(low) + " to " + report.FormatFrequency(high)
}

// warn says what a reader must know of this result.
func (a *assessor) warn() {
	celsius := func(t float64) string { return fmt.Sprintf("%.1f °C", t) }
	if a.Runaway {
		a.warning("thermal-runaway", "Thermal runaway: there is no temperature at which the part comes to rest. Its loss grows faster than it gives off heat; the loss stated is that at the temperature of the sweep.")
	}
	if a.HotSpotC != nil && a.Statistics == nil && a.HotSpotHigh95C == nil && a.LossW > 0 {
		a.warning("thermal-runaway-near", "Thermal runaway lies inside the 95 % interval of the loss.")
	}
	if a.LimitC != nil && a.course != nil && a.MaxRippleA != nil && a.maxAt < a.permitted() && *a.MaxRippleA > 0 {
		a.warning("thermal-runaway-first", fmt.Sprintf("Above the largest ripple current the part would run away from %s on, before it comes to rest at the limit.", celsius(a.maxAt)))
	}
	if a.LimitC != nil && *a.AmbientC >= a.permitted() {
		a.warning("no-room", fmt.Sprintf("The ambient temperature leaves no room for a rise: %s against %s permitted.", celsius(*a.AmbientC), celsius(a.permitted())))
	}
	if a.LimitC != nil && a.HotSpotHigh95C != nil && a.MarginK != nil && *a.HotSpotC <= a.permitted() && *a.HotSpotHigh95C > a.permitted() {
		a.warning("interval-over-limit", fmt.Sprintf("The 95 %% interval of the hot spot reaches %s, beyond the %s permitted: the verdict rests on the fitted value.", celsius(*a.HotSpotHigh95C), celsius(a.permitted())))
	}
	if a.course != nil && a.HotSpotC != nil && !a.course.inside(*a.HotSpotC) {
		a.warning("outside-temperatures", fmt.Sprintf("The hot spot of %s lies outside the temperatures of the sweeps, %s to %s: the resistance there is extrapolated, to the cautious side.",
			celsius(*a.HotSpotC), celsius(a.course.temperature[0]), celsius(a.course.temperature[len(a.course.temperature)-1])))
	}
	if share, low, high := a.shareOf(func(h Harmonic) bool { return !h.InSweep && h.FHz > 0 }); low > 0 {
		a.warning("outside-sweep", fmt.Sprintf("Harmonics at %s lie outside the sweep: their ESR is the circuit's alone. They make %s of the loss.", span(low, high), report.FormatPercent(share)))
	}
	if share, low, high := a.shareOf(func(h Harmonic) bool { return h.BelowResolution != nil && *h.BelowResolution }); low > 0 {
		a.warning("below-resolution", fmt.Sprintf("The ESR at %s is smaller than the meter's stated accuracy can tell from zero. These harmonics make %s of the loss.", span(low, high), report.FormatPercent(share)))
	}
	a.warnMeasured()
	if a.LossW == 0 {
		a.warning("no-resistance", "The fitted circuit has no resistance, so that no loss follows; give a circuit with one, such as --circuit cap-esr-esl.")
	}
	if a.c.Rating != nil && a.c.Rating.ESR == nil && a.course != nil {
		a.warning("rated-esr-temperature", fmt.Sprintf("The thermal resistance rests on the ESR at %s. A rating stands for the ESR at its own temperature, as a rule a high one: state --rated-esr.", celsius(a.course.base)))
	}
	a.warnRipple()
	a.warnVoltage()
	if a.Ripple.DirectA == 0 && inductive(a.Kind) {
		a.warning("no-direct-current", "No direct current was given: the copper loss of a choke's load current is not in here. Add 0Hz=… to the currents or mean=… to the waveform.")
	}
	if a.Life != nil && *a.HotSpotC > a.Life.RatedC {
		a.warning("above-life-rating", fmt.Sprintf("The hot spot of %s is above the %s of the life rating, where the rule says nothing.", celsius(*a.HotSpotC), celsius(a.Life.RatedC)))
	}
	if s := a.Statistics; s != nil && s.N < 10 {
		a.warning("few-parts", fmt.Sprintf("With %d parts the tolerance bound is wide: a factor of %.3g, against 2.91 with 10 and 1.64 for a whole lot.", s.N, s.Factor))
	}
	a.warnFits()
}

// A fitted ESR that differs from the measured one by more than differing, at a
// harmonic with a share of the loss of weighty or more, is worth a warning.
const (
	differing = 0.2
	weighty   = 0.1
)

// warnMeasured compares with the measured ESR where it matters most.
func (a *assessor) warnMeasured() {
	worst, fitted := -1, 0.0
	for i, h := range a.Harmonics {
		if h.Measured == nil || h.Share < weighty {
			continue
		}
		esr := h.ESROhm
		if h.Mean != nil {
			esr = *h.Mean
		}
		if math.Abs(*h.Measured-esr) > differing*esr && (worst < 0 || h.Share > a.Harmonics[worst].Share) {
			worst, fitted = i, esr
		}
	}
	if worst >= 0 {
		h := a.Harmonics[worst]
		a.warning("measured-differs", fmt.Sprintf("At %s, which makes %s of the loss, the measured ESR is %s and the fitted one %s. Either the points scatter there, or the circuit does not describe the part.",
			report.FormatFrequency(h.FHz), report.FormatPercent(h.Share), quantity.Format(*h.Measured, "Ω", 3), quantity.Format(fitted, "Ω", 3)))
	}
}

// warnFits hands on what reading and fitting warned of: of a lot once for each
// code, with the number of sweeps.
func (a *assessor) warnFits() {
	type group struct {
		first Warning
		part  string
		n     int
	}
	var groups []group
	for _, p := range a.parts {
		for _, w := range p.Warnings {
			i := slices.IndexFunc(groups, func(g group) bool { return g.first.Code == w.Code })
			if i < 0 {
				groups = append(groups, group{w, p.Part, 1})
			} else {
				groups[i].n++
			}
		}
	}
	for _, g := range groups {
		if a.Statistics != nil {
			g.first.Text = fmt.Sprintf("%d of %d sweeps; of %s: %s", g.n, len(a.parts), g.part, g.first.Text)
		}
		a.warning(g.first.Code, g.first.Text)
	}
}

// warnRipple is on what the spectrum leaves out.
func (a *assessor) warnRipple() {
	if rest := 1 - a.ripple.Covered; rest > 1e-9 && a.LossW > 0 {
		// What is left out lies above the last harmonic. Its resistance is
		// not known; that of the last one gives the size.
		last := a.ac - 1
		if left := rest * a.ripple.RMS * a.ripple.RMS * a.r[last] / a.LossW; left > 0.01 {
			a.warning("harmonics-left-out", fmt.Sprintf("The harmonics that are left out hold %s of the squared current; at the ESR of the last one they would add some %s to the loss.", report.FormatPercent(rest), report.FormatPercent(left)))
		}
	}
	if a.ripple.Sampled && a.ripple.Alias > 1e-3 {
		a.warning("coarse-samples", fmt.Sprintf("The samples are coarse: %s of the squared current is in the upper half of the frequencies that they can show.", report.FormatPercent(a.ripple.Alias)))
	}
}

func (a *assessor) warnVoltage() {
	v := a.Voltage
	if v == nil {
		return
	}
	if v.OwnPeak && a.ripple.steps {
		a.warning(steepEdges, "The current jumps in its edges, where the voltage across an inductance has no bound: the ripple's peak is that of the harmonics listed. A trapezoid with the rise time gives it.")
	}
	if low := v.DCV + v.RippleTroughV; v.DCV > 0 && low < 0 {
		a.warning("reverse-voltage", fmt.Sprintf("The voltage falls to %s: a polarised capacitor must not be reversed.", quantity.Format(low, "V", 3)))
	}
	if v.RatedV != nil && v.Factor == nil {
		a.warning("no-voltage-factor", "No --voltage-factor was given: the margin is to the rating itself, and there is no verdict on it unless the rating is exceeded.")
	}
}
