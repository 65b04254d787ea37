package lots

import (
	"cmp"
	"math"
	"slices"

	"realpart/models"
	"realpart/report"
)

// SRF is the name of the first self-resonance as a figure.
const SRF = "SRF"

// Figure is what is told of a part by one number: a parameter of its circuit or
// the [SRF], without a frequency, or one of [models.Figures] at a frequency.
type Figure struct {
	Name string
	AtHz float64 // 0 for a parameter and the SRF
	Unit string
}

// String gives the name for people: "ESR at 100 kHz", "C".
func (f Figure) String() string {
	if f.AtHz == 0 {
		return f.Name
	}
	return f.Name + " at " + report.FormatFrequency(f.AtHz)
}

// Positive tells whether a passive part has only positive values of it, so
// that its interval is symmetric in its logarithm.
func (f Figure) Positive() bool {
	if f.AtHz == 0 {
		return true // exponents lie between 0 and 1
	}
	switch models.Figure(f.Name) {
	case models.ESR, models.D, models.Q, models.Zabs:
		return true
	}
	return false
}

// Outside tells whether its frequency lies outside a sweep, so that only the
// circuit tells its value. A range that the record does not state is no limit.
func (f Figure) Outside(r *report.Fit) bool {
	const rounding = 1e-9
	return f.AtHz > 0 && r.Sweep.FMax > 0 && (f.AtHz < r.Sweep.FMin*(1-rounding) || f.AtHz > r.Sweep.FMax*(1+rounding))
}

// Reading is the value of a figure of one part with its 95 % interval.
type Reading struct {
	Value float64
	// Low and High are NaN on an open side.
	Low, High float64
	// Determined is false where the sweep does not tell the value; Low and
	// High are then all that is known.
	Determined bool
	// Fixed tells that the value was given, not found.
	Fixed bool
}

// widest is the ratio of the ends of an interval above which a positive figure
// counts as not determined, as a parameter does.
const widest = 4

// Read finds a figure in a record; false where the record does not have it.
func Read(f *report.Fit, figure Figure) (Reading, bool) {
	switch {
	case f.Status == report.FitFailed:
		return Reading{}, false
	case figure.AtHz > 0:
		i := slices.IndexFunc(f.Figures, func(v report.Figure) bool {
			return string(v.Name) == figure.Name && v.AtHz == figure.AtHz
		})
		if i < 0 {
			return Reading{}, false
		}
		v := f.Figures[i]
		r := Reading{Value: v.Value, Low: number(v.Low95), High: number(v.High95), Determined: true}
		if figure.Positive() && !(r.High <= widest*r.Low) {
			r.Determined = false
		}
		return r, true
	case figure.Name == SRF:
		return resonance(f), true
	}
	i := slices.IndexFunc(f.Parameters, func(p report.Parameter) bool { return p.Name == figure.Name })
	if i < 0 {
		return Reading{}, false
	}
	p := f.Parameters[i]
	return Reading{Value: p.Value, Low: number(p.Low95), High: number(p.High95), Determined: p.Determined, Fixed: p.Fixed}, true
}

// resonance reads the first self-resonance inside the sweep. Where there is
// none, the sweep says on which side of it the first one must lie.
func resonance(f *report.Fit) Reading {
	nan := math.NaN()
	for _, r := range f.SelfResonance {
		if r.InSweep {
			return Reading{Value: r.FHz, Low: number(r.Low95Hz), High: number(r.High95Hz), Determined: true}
		}
	}
	if len(f.SelfResonance) > 0 && f.SelfResonance[0].FHz < f.Sweep.FMin {
		return Reading{Value: nan, Low: nan, High: f.Sweep.FMin}
	}
	return Reading{Value: nan, Low: f.Sweep.FMax, High: nan}
}

func number(v *float64) float64 {
	if v == nil {
		return math.NaN()
	}
	return *v
}

// usual lists what data sheets of a kind of part state at which frequency in
// Hz, the first of them that the records have (common practice, no source).
var usual = map[models.Kind][]struct {
	names []models.Figure
	at    []float64
}{
	models.CapacitorPart: {
		{[]models.Figure{models.Cs, models.D}, []float64{120, 1e3, 100, 1e6}},
		{[]models.Figure{models.ESR, models.Zabs}, []float64{100e3, 10e3, 1e6}},
	},
	models.InductorPart: {{[]models.Figure{models.Ls, models.ESR, models.Q}, []float64{100e3, 10e3, 1e3, 1e6}}},
	models.BeadPart:     {{[]models.Figure{models.Zabs, models.ESR, models.X}, []float64{100e6, 10e6}}},
	models.ResistorPart: {{[]models.Figure{models.ESR}, []float64{1e3, 100, 10e3, 100e3}}},
}

// CommonFigures lists the figures that records have in common, in the order in
// which a report gives them: the parameters of a circuit, the self-resonance,
// and at each frequency in Hz of at those that a report shows of the kind of part,
// besides the figures named in more. Where at is nil and nobody chose
// frequencies for the fits, they are what data sheets usually state; else the
// frequencies that all records have.
func CommonFigures(fits []*report.Fit, circuit string, at []float64, more []string) []Figure {
	var out []Figure
	for _, f := range fits {
		if f.Circuit == nil || f.Circuit.Expression != circuit {
			continue
		}
		for _, p := range f.Parameters {
			figure := Figure{Name: p.Name, Unit: p.Unit}
			if !p.Fixed && !slices.Contains(out, figure) {
				out = append(out, figure)
			}
		}
	}
	if slices.ContainsFunc(fits, func(f *report.Fit) bool { return len(f.SelfResonance) > 0 }) {
		out = append(out, Figure{Name: SRF, Unit: "Hz"})
	}
	kind := majority(fits, func(f *report.Fit) models.Kind { return f.Kind })
	has := func(figure Figure) bool {
		return slices.ContainsFunc(fits, func(f *report.Fit) bool { _, ok := Read(f, figure); return ok })
	}
	add := func(name models.Figure, freq float64) {
		figure := Figure{Name: string(name), AtHz: freq, Unit: name.Unit()}
		if !slices.Contains(out, figure) && has(figure) {
			out = append(out, figure)
		}
	}
	named := slices.DeleteFunc(models.Figures(), func(name models.Figure) bool { return !slices.Contains(more, string(name)) })
	if at == nil {
		common, chosen := commonFrequencies(fits)
		if !chosen {
			for _, u := range usual[kind] {
				for _, freq := range u.at {
					if slices.Contains(common, freq) && positive(fits, u.names[0], freq) {
						for _, name := range slices.Concat(u.names, named) {
							add(name, freq)
						}
						break
					}
				}
			}
			return out
		}
		at = common
	}
	for _, freq := range at {
		for _, name := range slices.Concat(report.ShownFigures(kind), named) {
			add(name, freq)
		}
	}
	return out
}

// positive tells whether a figure is positive in all records: a capacitor above
// its resonance has a capacitance that no data sheet states.
func positive(fits []*report.Fit, name models.Figure, freq float64) bool {
	for _, f := range fits {
		if r, ok := Read(f, Figure{Name: string(name), AtHz: freq}); ok && !(r.Value > 0) {
			return false
		}
	}
	return true
}

// commonFrequencies lists the frequencies that all records have figures at,
// and tells whether somebody chose them.
func commonFrequencies(fits []*report.Fit) (common []float64, chosen bool) {
	for i, f := range fits {
		var own []float64
		for _, v := range f.Figures {
			if !slices.Contains(own, v.AtHz) {
				own = append(own, v.AtHz)
			}
		}
		if !slices.Equal(own, report.DefaultAt(f.Sweep.FMin, f.Sweep.FMax)) {
			chosen = true
		}
		if i == 0 {
			common = own
		} else {
			common = slices.DeleteFunc(common, func(at float64) bool { return !slices.Contains(own, at) })
		}
	}
	return common, chosen
}

// majority returns what most records have; of equals the least.
func majority[T cmp.Ordered](fits []*report.Fit, of func(*report.Fit) T) T {
	count := map[T]int{}
	var best T
	for _, f := range fits {
		count[of(f)]++
	}
	most := 0
	for k, n := range count {
		if n > most || n == most && k < best {
			best, most = k, n
		}
	}
	return best
}
