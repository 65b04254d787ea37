package derating

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"

	"realpart/fit"
	"realpart/models"
	"realpart/models/quantity"
	"realpart/report/lots"
)

// Sweep is a fitted sweep.
type Sweep struct {
	File, Part, SHA256 string
	Kind               models.Kind
	Fit                *fit.Result
	Temperature        float64 // °C; NaN where it is not known
	// Warnings are those of reading and fitting.
	Warnings []Warning
}

// Rating is a data sheet's ripple current, the rise that it permits, and the
// resistance that it stands for; R_th = Rise/(Current²·ESR).
type Rating struct {
	Current float64  // A, RMS
	Freq    float64  // Hz
	Rise    float64  // K
	ESR     *float64 // Ω; nil: the fitted one, of a lot the mean
}

// Conditions are what the user knows and wants. What is nil was not given.
type Conditions struct {
	Lot     string   // the lot's name, for several parts
	RTh     *float64 // K/W, from hot spot to ambient
	Rating  *Rating  // instead of RTh
	Ambient *float64 // °C
	Limit   *float64 // °C
	Margin  float64  // K that the hot spot must stay below the limit
	Voltage *VoltageConditions
	Life    *LifeRating
	// AccuracyStated tells that the fits know the meter's accuracy.
	AccuracyStated bool
}

// Assess takes a part, or a lot of several, to a ripple current. series holds
// sweeps of one part at several temperatures; nil: the resistance is taken as
// the same at every temperature. For a lot the series tells the course only:
// each part's resistance is scaled by it.
//
// The error is a [*fit.InputError] for wishes that do not go together.
func Assess(parts, series []Sweep, ripple *Spectrum, c Conditions) (*Assessment, error) {
	if len(parts) == 0 {
		panic("derating: no parts")
	}
	kind := parts[0].Kind
	for _, p := range parts[1:] {
		if p.Kind != kind {
			return nil, &fit.InputError{Flag: "--kind", Found: fmt.Sprintf("a lot with parts of two kinds: %s is a %s, %s a %s", parts[0].Part, kind, p.Part, p.Kind),
				Expected: "parts of one kind", Hint: "state it with --kind"}
		}
	}
	if inductive(kind) && c.Voltage != nil {
		return nil, &fit.InputError{Flag: "--dc", Found: "a voltage for the " + string(kind) + " " + parts[0].Part, Expected: "a capacitor"}
	}
	if c.Life != nil && kind != models.CapacitorPart {
		return nil, &fit.InputError{Flag: "--life", Found: "a life for the " + string(kind) + " " + parts[0].Part, Expected: "a wet aluminium electrolytic capacitor"}
	}
	a := &assessor{
		Assessment: &Assessment{Schema: Schema, Kind: kind, Lot: c.Lot, Harmonics: []Harmonic{}, Uncertainty: []Source{}, Warnings: []Warning{}},
		parts:      parts, ripple: ripple, c: c,
	}
	if len(parts) == 1 {
		a.Part, a.Lot = parts[0].Part, ""
	}
	for _, p := range parts {
		a.Parts = append(a.Parts, measured(p))
	}
	a.Ripple = Ripple{Text: ripple.Text, RMSA: ripple.RMS, CoveredShare: ripple.Covered}
	a.lines()
	if err := a.temperatures(series); err != nil {
		return nil, err
	}
	a.resistances()
	if err := a.thermalResistance(); err != nil {
		return nil, err
	}
	a.heat()
	a.harmonics()
	a.limit()
	a.lot()
	a.intervals()
	if c.Voltage != nil {
		a.Voltage = c.Voltage.assess(parts, ripple)
	}
	if c.Life != nil && a.HotSpotC != nil {
		hours, capped := c.Life.at(*a.HotSpotC)
		a.LifeH = &hours
		a.Life = &Life{RatedH: c.Life.Hours, RatedC: c.Life.TemperatureC, Capped: capped, CapH: mostLife, Rule: "L0·2^((T0−T)/10 K), common practice, no source"}
	}
	a.sources()
	a.warn()
	a.judge()
	a.Cautions = cautions(kind, c.Life != nil)
	return a.Assessment, nil
}

func inductive(kind models.Kind) bool {
	return kind == models.InductorPart || kind == models.BeadPart
}

func measured(s Sweep) Measured {
	m := Measured{File: s.File, Part: s.Part, SHA256: s.SHA256, Circuit: s.Fit.Circuit.String()}
	if !math.IsNaN(s.Temperature) {
		m.TemperatureC = &s.Temperature
	}
	return m
}

// assessor holds what an assessment is made from.
type assessor struct {
	*Assessment
	parts  []Sweep
	ripple *Spectrum
	c      Conditions

	ac    int       // how many of the lines are ripple; one more may be direct current
	freq  []float64 // Hz
	power []float64 // A², of each line
	all   []*resistance
	r     []float64 // Ω, that the loss is made with: fitted, or the tolerance bound
	rated *resistance
	// course is that over temperature, nil: none.
	course  *course
	factor  []float64 // scratch of the course
	hot     float64   // °C, of the loss; NaN where resistance is that of the sweeps
	rise    spread    // of ln ΔT for a single part
	u       float64   // half-widths of the 95 % intervals of ln P
	uRise   float64   // and of ln ΔT
	scatter float64
	meter   float64
	of      spread  // of ln P
	maxAt   float64 // °C, the hot spot at the largest ripple current
	worst   int     // the part of a lot with the largest loss; 0
}

// lines lists the frequencies, direct current last. A capacitor carries none.
func (a *assessor) lines() {
	for _, l := range a.ripple.Lines {
		a.freq, a.power = append(a.freq, l.Freq), append(a.power, l.RMS*l.RMS)
	}
	a.ac = len(a.freq)
	switch mean := math.Abs(a.ripple.Mean); {
	case mean == 0:
	case a.Kind == models.CapacitorPart:
		a.warning("mean-left-out", fmt.Sprintf("The direct part of the current, %s, is left out: a capacitor carries none.", quantity.Format(a.ripple.Mean, "A", 3)))
	default:
		a.freq, a.power = append(a.freq, 0), append(a.power, mean*mean)
		a.Ripple.DirectA = mean
	}
}

func (a *assessor) warning(code, text string) {
	a.Warnings = append(a.Warnings, Warning{code, text})
}

// temperatures sets the course of resistance over temperature.
func (a *assessor) temperatures(series []Sweep) error {
	if len(series) == 0 {
		return nil
	}
	sum := 0.0
	for _, p := range a.parts {
		if math.IsNaN(p.Temperature) {
			return &fit.InputError{Flag: "--at-temperature", Found: "no temperature of " + p.File, Expected: "that of every sweep",
				Hint: "add --at-temperature " + p.File + "=T"}
		}
		if d := math.Abs(p.Temperature - a.parts[0].Temperature); d > sameTemperature {
			return &fit.InputError{Flag: "--at-temperature", Found: fmt.Sprintf("%s at %v °C and %s at %v °C in one lot", a.parts[0].Part, a.parts[0].Temperature, p.Part, p.Temperature),
				Expected: "a lot measured at one temperature", Hint: "give the sweeps of one part at others with --at-temperature alone"}
		}
		sum += p.Temperature
	}
	base := sum / float64(len(a.parts))
	if len(a.parts) == 1 && !slices.ContainsFunc(series, func(s Sweep) bool { return math.Abs(s.Temperature-base) < sameTemperature }) {
		series = append(slices.Clone(series), a.parts[0])
	}
	course, err := newCourse(series, base, a.freq)
	if err != nil {
		return err
	}
	a.course = course
	for _, s := range byTemperature(series) {
		a.Series = append(a.Series, measured(s))
	}
	return nil
}

// resistances finds those that the loss is made with.
func (a *assessor) resistances() {
	for _, p := range a.parts {
		a.all = append(a.all, resistanceOf(p.Fit, a.freq))
	}
	a.factor = make([]float64, len(a.freq))
	a.r = a.all[0].r
	if len(a.parts) == 1 {
		return
	}
	n := len(a.parts)
	factor := lots.ToleranceOneSided(n, lots.Coverage, lots.Confidence)
	a.Statistics = &Statistics{N: n, Factor: factor, CoveredShare: lots.Coverage, Confidence: lots.Confidence}
	a.r = make([]float64, len(a.freq))
	for i := range a.freq {
		mean, sd := stat.MeanStdDev(a.column(i), nil)
		a.r[i] = mean + factor*sd
	}
}

// column returns the parts' resistances at a line.
func (a *assessor) column(line int) []float64 {
	column := make([]float64, len(a.all))
	for i, r := range a.all {
		column[i] = r.r[line]
	}
	return column
}

// loss returns the loss in W at a temperature in °C with resistances that are
// given at that of the sweeps.
func (a *assessor) loss(r []float64, t float64) (ripple, direct float64) {
	a.setFactors(t)
	for i, p := range a.power {
		if i < a.ac {
			ripple += p * r[i] * a.factor[i]
		} else {
			direct += p * r[i] * a.factor[i]
		}
	}
	return ripple, direct
}

func (a *assessor) setFactors(t float64) {
	if a.course == nil || math.IsNaN(t) {
		for i := range a.factor {
			a.factor[i] = 1
		}
		return
	}
	a.course.factors(a.factor, t)
}

// thermalResistance takes R_th as given, or from the rating.
func (a *assessor) thermalResistance() error {
	switch rating := a.c.Rating; {
	case a.c.RTh != nil:
		a.RthKPerW, a.RthFrom = a.c.RTh, "given"
	case rating != nil:
		esr, from := 0.0, "the stated ESR"
		if rating.ESR != nil {
			esr = *rating.ESR
		} else {
			from = "the fitted ESR"
			if len(a.parts) > 1 {
				from = "the lot's mean ESR"
			}
			for _, p := range a.parts {
				r := resistanceOf(p.Fit, []float64{rating.Freq})
				esr += r.r[0] / float64(len(a.parts))
				if len(a.parts) == 1 {
					a.rated = r
				}
			}
		}
		if !(esr > 0) {
			return &fit.InputError{Flag: "--rated-ripple", Found: "a fitted circuit without resistance at " + quantity.Format(rating.Freq, "Hz", 3), Expected: "an ESR that the rating stands for", Hint: "state --rated-esr"}
		}
		rth := rating.Rise / (rating.Current * rating.Current * esr)
		a.RthKPerW = &rth
		a.RthFrom = fmt.Sprintf("rated %s at %s for %s, %s %s", quantity.Format(rating.Current, "A", 3), quantity.Format(rating.Freq, "Hz", 3), quantity.Format(rating.Rise, "K", 3), from, quantity.Format(esr, "Ω", 3))
	}
	return nil
}

// heatingOf is the heating of a part with the given resistances.
func (a *assessor) heatingOf(r []float64) heating {
	h := heating{ambient: *a.c.Ambient, rth: *a.RthKPerW, top: math.NaN(), loss: func(t float64) (float64, float64) { return a.loss(r, t) }}
	if a.course != nil {
		h.top = max(a.course.temperature[len(a.course.temperature)-1], *a.c.Ambient)
		if a.c.Limit != nil {
			h.top = max(h.top, *a.c.Limit)
		}
		h.top += beyond
	}
	return h
}

// beyond is how far above limit and sweeps, in K, a hot spot is looked for.
const beyond = 100

// heat finds hot spot and loss.
func (a *assessor) heat() {
	a.hot = math.NaN()
	if a.RthKPerW != nil && a.c.Ambient != nil {
		a.AmbientC = a.c.Ambient
		a.heating = a.heatingOf(a.r)
		if t, stable := a.heating.hotSpot(1); stable {
			rise := t - *a.AmbientC
			a.HotSpotC, a.RiseK = &t, &rise
			if a.course != nil {
				a.hot = t
			}
		} else {
			a.Runaway = true
		}
	}
	ripple, direct := a.loss(a.r, a.hot)
	a.LossW = ripple + direct
	if a.RthKPerW != nil && a.RiseK == nil && !a.Runaway && a.course == nil {
		rise := a.LossW * *a.RthKPerW // without an ambient temperature
		a.RiseK = &rise
	}
}

// harmonics makes the table.
func (a *assessor) harmonics() {
	a.setFactors(a.hot)
	lot := len(a.parts) > 1
	for i, f := range a.freq {
		h := Harmonic{FHz: f, IRMSA: math.Sqrt(a.power[i]), ESROhm: a.r[i], LossW: a.power[i] * a.r[i] * a.factor[i], InSweep: true}
		if a.LossW > 0 {
			h.Share = h.LossW / a.LossW
		}
		if a.course != nil && !math.IsNaN(a.hot) {
			hot := a.r[i] * a.factor[i]
			h.Hot = &hot
		}
		measured := 0.0
		for _, p := range a.parts {
			v := esrAt(p.Fit, f)
			h.InSweep = h.InSweep && inSweep(p.Fit, f)
			measured += v.Measured / float64(len(a.parts))
			if a.c.AccuracyStated && !math.IsNaN(v.Resolution) {
				below := v.BelowResolution || h.BelowResolution != nil && *h.BelowResolution
				h.BelowResolution = &below
			}
			if !lot {
				h.Low95, h.High95 = finite(v.Low95), finite(v.High95)
			}
		}
		h.Measured = finite(measured)
		if lot {
			column := a.column(i)
			mean, sd := stat.MeanStdDev(column, nil)
			worst := slices.Max(column)
			h.Mean, h.SD, h.Worst = &mean, &sd, &worst
		}
		a.Harmonics = append(a.Harmonics, h)
	}
}

// intervals carries the fits' covariances to loss and hot spot of a single
// part. Of a lot, it does so for the part with the largest loss, to tell what
// the meter does.
func (a *assessor) intervals() {
	if !(a.LossW > 0) {
		return
	}
	share := func(line int) float64 { return a.Harmonics[line].Share }
	for _, s := range []*spread{&a.of, &a.rise} {
		s.add(a.all[a.worst], share)
		if a.course == nil || math.IsNaN(a.hot) {
			continue
		}
		weights := make([][]float64, len(a.freq))
		for line := range weights {
			weights[line] = a.course.weights(a.hot, line)
		}
		for j, node := range a.course.nodes {
			s.add(node, func(line int) float64 { return share(line) * weights[line][j] })
		}
	}
	if a.rated != nil {
		// R_th falls as the rated ESR rises: common errors cancel.
		a.rise.add(a.rated, func(int) float64 { return -1 })
	}
	a.u, a.scatter, a.meter = a.of.relative()
	if len(a.parts) > 1 {
		return
	}
	a.uRise, _, _ = a.rise.relative()
	scaled := func(sign float64) (loss, hot float64) {
		k := math.Exp(sign * a.u)
		if a.HotSpotC == nil {
			return k * a.LossW, math.NaN()
		}
		h := a.heating
		h.rth *= math.Exp(sign * a.uRise)
		t, stable := h.hotSpot(1)
		if !stable {
			return math.NaN(), math.NaN()
		}
		ripple, direct := a.loss(a.r, t)
		return k * (ripple + direct), t
	}
	low, lowT := scaled(-1)
	high, highT := scaled(1)
	a.LossLow95W, a.LossHigh95W = finite(low), finite(high)
	a.HotSpotLow95C, a.HotSpotHigh95C = finite(lowT), finite(highT)
	if a.LimitC != nil {
		a.MaxRippleLow95A, _ = a.largest(a.uRise)
		a.MaxRippleHigh95A, _ = a.largest(-a.uRise)
	}
}

// limit compares with the user's.
func (a *assessor) limit() {
	if a.c.Limit == nil || a.heating.loss == nil {
		return
	}
	a.LimitC, a.RequiredMarginK = a.c.Limit, &a.c.Margin
	if a.HotSpotC != nil {
		margin := *a.LimitC - *a.HotSpotC
		a.MarginK = &margin
	}
	a.MaxRippleA, a.maxAt = a.largest(0)
}

// permitted is the highest hot spot in °C that the user permits.
func (a *assessor) permitted() float64 { return *a.LimitC - a.c.Margin }

// largest returns the largest ripple current in A for a rise that is exp(u)
// times as high, and the hot spot in °C at it.
func (a *assessor) largest(u float64) (current *float64, hotSpot float64) {
	h := a.heating
	h.rth *= math.Exp(u)
	k, at := h.largest(a.permitted())
	return finite(math.Sqrt(k) * a.ripple.RMS), at
}

// lot compares the parts.
func (a *assessor) lot() {
	s := a.Statistics
	if s == nil {
		return
	}
	losses := make([]float64, len(a.parts))
	for i, r := range a.all {
		ripple, direct := a.loss(r.r, a.hot)
		losses[i] = ripple + direct
	}
	s.MeanLossW, s.SDLossW = stat.MeanStdDev(losses, nil)
	worst := floats.MaxIdx(losses)
	a.worst = worst
	s.WorstPart, s.WorstLossW = a.parts[worst].Part, losses[worst]
	if a.heating.loss != nil {
		if t, stable := a.heatingOf(a.all[worst].r).hotSpot(1); stable {
			s.WorstHotSpotC = &t
		}
	}
	if a.LimitC == nil {
		return
	}
	// Load is 1 where the part's hot spot is the permitted one; it is
	// proportional to the loss where resistance does not go with temperature.
	load := make([]float64, len(a.parts))
	exceeding := 0
	for i, r := range a.all {
		k, _ := a.heatingOf(r.r).largest(a.permitted())
		load[i] = 1 / k
		if !(load[i] <= 1) {
			exceeding++
		}
	}
	s.ExceedingParts = &exceeding
	if slices.Max(load) < math.Inf(1) {
		s.ExceedingShare = finite(predictedAbove(load, 1))
	} else if exceeding == s.N {
		s.ExceedingShare = finite(1)
	}
	if _, p := lots.AndersonDarling(losses); p < 0.05 {
		a.warning("lot-not-normal", fmt.Sprintf("The losses of the %d parts do not look normal (Anderson–Darling, p = %.2g): tolerance bound and predicted share rest on that.", s.N, p))
	}
}

// predictedAbove returns the share of a normal lot predicted above a limit from
// a sample of n ≥ 2: the probability that the next part is,
//
//	P = 1 − F_t((limit − x̄)/(s·√(1 + 1/n)); ν = n − 1)
//
// the prediction interval of one further value (Hahn and Meeker, Statistical
// Intervals, 1991, from memory).
func predictedAbove(sample []float64, limit float64) float64 {
	mean, sd := stat.MeanStdDev(sample, nil)
	n := float64(len(sample))
	if sd == 0 {
		if mean > limit {
			return 1
		}
		return 0
	}
	return 1 - distuv.StudentsT{Sigma: 1, Nu: n - 1}.CDF((limit-mean)/(sd*math.Sqrt(1+1/n)))
}

// rounding in K is what a hot spot that was scaled to the limit may miss it by.
const rounding = 1e-9

// judge gives the verdict: exceeded if a limit of the user is, within if there
// is one of temperature and none is exceeded.
func (a *assessor) judge() {
	a.Verdict = NoLimitGiven
	if a.LimitC != nil {
		a.Verdict = Within
		if a.MarginK == nil || !(*a.MarginK >= a.c.Margin-rounding) {
			a.Verdict = Exceeded
		}
	}
	if a.Voltage != nil && a.Voltage.Verdict == Exceeded {
		a.Verdict = Exceeded
	}
}

func finite(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}
