package report

import (
	"cmp"
	"math"
	"slices"
	"sync"

	"gonum.org/v1/gonum/stat/distuv"

	"realpart/fit"
	"realpart/models"
)

// Schema names the form of a [Fit] in JSON.
const Schema = "realpart.fit/1"

// Fit is what is said of one sweep. In JSON it is an object of [Schema]. For
// a sweep that could not be read or fitted there are Schema, Sweep, Status and
// Error alone; else Error is nil and the lists, which may be empty, are not
// nil.
type Fit struct {
	Schema string `json:"schema"`
	Sweep  Sweep  `json:"sweep"`
	// Kind of part: capacitor, inductor, bead, resistor, resonator or any.
	Kind models.Kind `json:"kind,omitzero"`
	// KindReason says how the kind was told; "" where it was given.
	KindReason    string      `json:"kind_reason,omitzero"`
	Circuit       *Circuit    `json:"circuit,omitzero"`
	Status        Status      `json:"status"`
	Error         *Error      `json:"error,omitzero"`
	Parameters    []Parameter `json:"parameters,omitzero"`
	Correlation   [][]float64 `json:"correlation,omitzero"` // of the free parameters, in their order
	Residuals     *Residuals  `json:"residuals,omitzero"`
	SelfResonance []Resonance `json:"self_resonance,omitzero"`
	Figures       []Figure    `json:"figures,omitzero"`
	Candidates    []Candidate `json:"candidates,omitzero"`
	Warnings      []Warning   `json:"warnings,omitzero"`
	// Advice is on the next sweep, the best first; nil where none was asked
	// for.
	Advice []Advice `json:"advice,omitzero"`
}

// Sweep says what was measured, and where it was found. Points counts those
// of the file, UsedPoints those that were fitted; SHA256 is that of the file,
// in hexadecimal digits. All but File and Part are absent where the file could
// not be read.
type Sweep struct {
	File       string  `json:"file"`
	Part       string  `json:"part"`
	Lot        string  `json:"lot,omitzero"`
	Points     int     `json:"points,omitzero"`
	UsedPoints int     `json:"used_points,omitzero"`
	FMin       float64 `json:"f_min_hz,omitzero"` // of the used points
	FMax       float64 `json:"f_max_hz,omitzero"`
	SHA256     string  `json:"sha256,omitzero"`
	// Metadata is what the file says of itself, such as the meter, the bias
	// and the temperature.
	Metadata map[string]string `json:"metadata,omitzero"`
	// Warnings are those of reading; [New] puts them before those of the
	// analysis.
	Warnings []fit.Warning `json:"-"`
}

// Circuit is an equivalent circuit. Name is that of the library, "" for a
// user's own expression.
type Circuit struct {
	Name       string `json:"name,omitzero"`
	Expression string `json:"expression"`
}

// Status says how a fit ended.
type Status string

// The three ways for a fit to end.
const (
	Converged    Status = "converged"
	NotConverged Status = "not-converged"
	FitFailed    Status = "failed"
)

// Error says why a sweep could not be read or fitted. Line and Column count
// from 1; 0 where there is none to name.
type Error struct {
	File   string `json:"file"`
	Line   int    `json:"line,omitzero"`
	Column int    `json:"column,omitzero"`
	Text   string `json:"text"`
}

// Parameter is one value of the circuit. Value is the solver's also where it
// is not determined, so that the circuit can be evaluated; it is then no
// statement about the part.
type Parameter struct {
	Name  string  `json:"name"`
	Unit  string  `json:"unit"`
	Value float64 `json:"value"`
	// StdError is the standard uncertainty from scatter alone; nil where
	// there is none.
	StdError *float64 `json:"std_error,omitzero"`
	// Low95 and High95 bound the 95 % interval from scatter and meter; nil
	// on an open side.
	Low95  *float64 `json:"low95,omitzero"`
	High95 *float64 `json:"high95,omitzero"`
	// MeterError is the standard uncertainty from the meter's stated
	// accuracy; nil where none was stated.
	MeterError *float64 `json:"meter_error,omitzero"`
	Determined bool     `json:"determined"`
	Fixed      bool     `json:"fixed"`
}

// Residuals sum up ρ = ln(Z_model/Z_measured) over the used points:
// RMSRelative is √(mean |ρ|²), MaxRelative the largest |ρ|, at MaxAtHz. Lag1
// is the correlation of neighbours, nil for too few points.
type Residuals struct {
	RMSRelative float64  `json:"rms_relative"`
	MaxRelative float64  `json:"max_relative"`
	MaxAtHz     float64  `json:"max_at_hz"`
	Lag1        *float64 `json:"lag1,omitzero"`
	Structured  bool     `json:"structured"`
}

// Resonance is a self-resonance. StdErrorHz is the standard uncertainty from
// scatter alone, MeterErrorHz that from the meter's stated accuracy, Low95Hz
// and High95Hz bound the 95 % interval from both.
type Resonance struct {
	FHz          float64              `json:"f_hz"`
	StdErrorHz   *float64             `json:"std_error_hz,omitzero"`
	MeterErrorHz *float64             `json:"meter_error_hz,omitzero"`
	Low95Hz      *float64             `json:"low95_hz,omitzero"`
	High95Hz     *float64             `json:"high95_hz,omitzero"`
	Kind         models.ResonanceKind `json:"kind"`
	InSweep      bool                 `json:"in_sweep"`
	ImpedanceOhm float64              `json:"impedance_ohm"`
}

// Figure is a data-sheet quantity at a frequency. Measured is that of the
// sweep itself, nil outside it. BelowResolution, of ESR, D and Q, tells that the
// ESR is smaller than the meter can tell from zero; nil without a stated
// accuracy.
type Figure struct {
	Name            models.Figure `json:"name"`
	AtHz            float64       `json:"at_hz"`
	Value           float64       `json:"value"`
	Unit            string        `json:"unit"`
	Low95           *float64      `json:"low95,omitzero"`
	High95          *float64      `json:"high95,omitzero"`
	Measured        *float64      `json:"measured,omitzero"`
	BelowResolution *bool         `json:"below_resolution,omitzero"`
}

// Candidate is a circuit that was tried. AICc and RMSRelative are nil where
// its fit was not possible.
type Candidate struct {
	Name        string   `json:"name,omitzero"`
	Expression  string   `json:"expression"`
	AICc        *float64 `json:"aicc,omitzero"`
	RMSRelative *float64 `json:"rms_relative,omitzero"`
	Chosen      bool     `json:"chosen"`
	Reason      string   `json:"reason"`
}

// Warning is something that its reader must know. Code is stable.
type Warning struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// Advice is a sweep that would pin a parameter down: so many points between two
// frequencies. HalfWidthThen is the half-width of its 95 % interval from
// scatter that is to be expected, as a share of the value (of an exponent: in
// the exponent itself), HalfWidthNow that of the present sweep, nil where it
// does not determine the parameter. Text says it in words.
type Advice struct {
	Parameter     string   `json:"parameter"`
	FromHz        float64  `json:"from_hz"`
	ToHz          float64  `json:"to_hz"`
	Points        int      `json:"points"`
	HalfWidthNow  *float64 `json:"half_width_now,omitzero"`
	HalfWidthThen float64  `json:"half_width_then"`
	Text          string   `json:"text"`
}

// Options steer [New].
type Options struct {
	// At holds the frequencies in Hz for the figures; nil means
	// [DefaultAt] of the sweep.
	At []float64
	// AccuracyStated tells that the user stated the meter's accuracy.
	AccuracyStated bool
}

// DefaultAt returns those of the frequencies at which parts are commonly
// specified that lie in a sweep, in Hz: 100 Hz and 120 Hz (ripple of 50 Hz and
// 60 Hz mains), 1, 10 and 100 kHz, 1 and 10 MHz, and 100 MHz for beads
// (common practice, no source). If none does, it is the middle of the sweep
// on a log axis.
func DefaultAt(fMin, fMax float64) []float64 {
	var at []float64
	for _, f := range []float64{100, 120, 1e3, 10e3, 100e3, 1e6, 10e6, 100e6} {
		if f >= fMin && f <= fMax {
			at = append(at, f)
		}
	}
	if at == nil && fMin > 0 && fMax >= fMin {
		at = []float64{math.Sqrt(fMin) * math.Sqrt(fMax)}
	}
	return at
}

// New makes the record of an analysis. Figures that do not exist at a
// frequency, such as C_s where X = 0, are left out.
func New(s Sweep, a *fit.Analysis, o Options) *Fit {
	r := a.Result
	f := &Fit{
		Schema: Schema, Sweep: s, Kind: a.Kind, KindReason: a.KindReason, Status: NotConverged,
		Circuit:       &Circuit{Name: a.Name, Expression: r.Circuit.String()},
		Parameters:    []Parameter{},
		Correlation:   [][]float64{},
		SelfResonance: []Resonance{},
		Figures:       []Figure{},
		Candidates:    []Candidate{},
		Warnings:      []Warning{},
	}
	if r.Status.Converged() {
		f.Status = Converged
	}
	for _, p := range r.Parameters {
		f.Parameters = append(f.Parameters, Parameter{
			Name: p.Name, Unit: p.Unit, Value: p.Value, StdError: finite(p.StdError),
			Low95: finite(p.Low95), High95: finite(p.High95), MeterError: finite(p.MeterError),
			Determined: p.Determined, Fixed: p.Fixed,
		})
	}
	for i := range r.Free {
		row := make([]float64, len(r.Free))
		for k := range row {
			if v := r.Correlation.At(i, k); !math.IsNaN(v) {
				row[k] = min(max(v, -1), 1) // rounding may leave 1.0000000000000002
			}
		}
		f.Correlation = append(f.Correlation, row)
	}
	f.Residuals = &Residuals{
		RMSRelative: r.RMSRelative, MaxRelative: r.MaxRelative, MaxAtHz: r.MaxAtHz,
		Lag1: finite(r.Lag1), Structured: r.Structured,
	}
	for _, q := range r.Resonances() {
		u := halfWidth95(q.StdError, q.MeterError, r.DegreesOfFreedom)
		f.SelfResonance = append(f.SelfResonance, Resonance{
			FHz: q.Freq, StdErrorHz: finite(q.StdError), MeterErrorHz: finite(q.MeterError),
			Low95Hz: finite(q.Freq * math.Exp(-u/q.Freq)), High95Hz: finite(q.Freq * math.Exp(u/q.Freq)),
			Kind: q.Kind, InSweep: q.InSweep, ImpedanceOhm: q.Impedance,
		})
	}
	at := o.At
	if len(at) == 0 {
		at = DefaultAt(s.FMin, s.FMax)
	}
	values := r.Figures(at)
	f.Figures = make([]Figure, 0, len(values))
	// The numbers of all figures in one piece of memory: there are hundreds.
	numbers := make([]float64, 0, 3*len(values))
	kept := func(v float64) *float64 {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil
		}
		numbers = append(numbers, v)
		return &numbers[len(numbers)-1]
	}
	for _, v := range values {
		if math.IsNaN(v.Value) || math.IsInf(v.Value, 0) {
			continue
		}
		figure := Figure{
			Name: v.Figure, AtHz: v.At, Value: v.Value, Unit: v.Figure.Unit(),
			Low95: kept(v.Low95), High95: kept(v.High95), Measured: kept(v.Measured),
		}
		if o.AccuracyStated && !math.IsNaN(v.Resolution) && restsOnESR(v.Figure) {
			below := v.BelowResolution
			figure.BelowResolution = &below
		}
		f.Figures = append(f.Figures, figure)
	}
	for _, c := range a.Candidates {
		candidate := Candidate{Name: c.Name, Chosen: c.Chosen, Reason: c.Reason}
		if c.Circuit != nil {
			candidate.Expression = c.Circuit.String()
		}
		if c.Result != nil {
			candidate.AICc, candidate.RMSRelative = finite(c.AICc), finite(c.Result.RMSRelative)
		}
		f.Candidates = append(f.Candidates, candidate)
	}
	for _, warnings := range [][]fit.Warning{s.Warnings, a.Warnings} {
		for _, w := range warnings {
			f.Warnings = append(f.Warnings, Warning(w))
		}
	}
	for _, v := range a.Advice {
		f.Advice = append(f.Advice, Advice{
			Parameter: v.Parameter, FromHz: v.From, ToHz: v.To, Points: v.Points,
			HalfWidthNow: finite(v.Now), HalfWidthThen: v.Then, Text: v.String(),
		})
	}
	return f
}

// warned tells whether there is a warning with a code.
func (f *Fit) warned(code string) bool {
	return slices.ContainsFunc(f.Warnings, func(w Warning) bool { return w.Code == code })
}

// AllWarnings returns the warnings of a record, with one that the fit did not
// converge where that is so and none says it.
func (f *Fit) AllWarnings() []Warning {
	if f.Status != NotConverged || f.warned(string(NotConverged)) {
		return f.Warnings
	}
	return append([]Warning{{string(NotConverged), "The fit stopped before it converged; its values are the last ones, and their intervals mean little."}}, f.Warnings...)
}

// Failed makes the record of a sweep that could not be read or fitted.
func Failed(s Sweep, e Error) *Fit {
	e.File = cmp.Or(e.File, s.File)
	return &Fit{Schema: Schema, Sweep: s, Status: FitFailed, Error: &e}
}

// AccuracyStated tells whether the record was made with a stated accuracy of
// the meter, so that its intervals cover that too.
func (f *Fit) AccuracyStated() bool {
	for _, p := range f.Parameters {
		if p.MeterError != nil {
			return true
		}
	}
	for _, v := range f.Figures {
		if v.BelowResolution != nil {
			return true
		}
	}
	return false
}

// Values returns the values of the circuit in the order of its expression.
func (f *Fit) Values() []float64 {
	values := make([]float64, len(f.Parameters))
	for i, p := range f.Parameters {
		values[i] = p.Value
	}
	return values
}

// restsOnESR tells whether a figure is worth no more than the resistance is.
func restsOnESR(f models.Figure) bool {
	return f == models.ESR || f == models.D || f == models.Q
}

func finite(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}

// halfWidth95 is the half-width of the 95 % interval from a scatter with ν
// degrees of freedom and a meter's uncertainty with infinitely many, NaN for
// none (GUM G.4, Welch–Satterthwaite).
func halfWidth95(scatter, meter float64, nu int) float64 {
	if math.IsNaN(meter) {
		meter = 0
	}
	if nu < 1 {
		return math.Inf(1)
	}
	u := math.Hypot(scatter, meter)
	if scatter == 0 {
		return distuv.UnitNormal.Quantile(0.975) * u
	}
	effective := float64(nu) * math.Pow(u/scatter, 4)
	if effective > 1e6 { // Student's t is normal to 1e-6
		return distuv.UnitNormal.Quantile(0.975) * u
	}
	return studentQuantile(effective) * u
}

// studentQuantile is the 97.5 % quantile of Student's t. Those of whole degrees
// of freedom are kept: without a stated accuracy every sweep of a lot asks for
// the same one, and it takes some tens of microseconds.
func studentQuantile(nu float64) float64 {
	whole := nu == math.Trunc(nu)
	if whole {
		if t, ok := quantiles.Load(nu); ok {
			return t.(float64)
		}
	}
	t := distuv.StudentsT{Sigma: 1, Nu: nu}.Quantile(0.975)
	if whole {
		quantiles.Store(nu, t)
	}
	return t
}

var quantiles sync.Map // of studentQuantile, by the degrees of freedom
