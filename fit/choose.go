package fit

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"realpart/models"
)

// Warning is something that does not stop an analysis but that its reader
// must know. Code is stable, for programs; Text says what was seen and what
// to do.
type Warning struct {
	Code, Text string
}

// Candidate is one circuit that was tried on a sweep.
type Candidate struct {
	// Name is that of the library; "" for a user's own expression.
	Name    string
	Circuit *models.Circuit
	// Result is nil if the fit was not possible. Lag1 and Structured are the
	// chosen one's alone. The results of one analysis share the sweep: they are
	// not for use by several goroutines at once.
	Result *Result
	// AICc is Akaike's information criterion with the correction for small
	// samples (Hurvich and Tsai 1989); smaller is better. NaN without a
	// result.
	//
	//	AICc = n·ln(Σr²/n) + 2k + 2k(k+1)/(n−k−1),  n = 2·points, k = free + 1
	AICc float64
	// Chosen marks the one candidate that the analysis goes on with; Reason
	// says why, or why not.
	Chosen bool
	Reason string
	// sound tells that the fit converged with every parameter determined.
	sound bool
}

// Analysis is what is said of one sweep: the kind of part, the circuit
// chosen, its fit, and the candidates that were not chosen.
type Analysis struct {
	Kind       models.Kind
	KindReason string // "" where the user or the circuit said the kind
	Name       string // of the circuit in the library; "" for a user's own
	Result     *Result
	Candidates []Candidate
	Warnings   []Warning
	// Alternative holds other values of all parameters that describe the
	// sweep equally well; nil if none were found.
	Alternative []float64
	// Advice is on the next sweep, the best first, where it was asked for.
	Advice []Advice
}

// Request says how to analyse a sweep.
type Request struct {
	// Kind of part; "" lets the sweep tell.
	Kind models.Kind
	// Circuit to fit, and its name if it is one of the library; nil lets
	// the sweep choose among the circuits of the kind.
	Circuit *models.Circuit
	Name    string
	// Settings of each fit; nil means the defaults.
	Settings *Settings
	// Advise names a parameter that the next sweep should pin down; "": no
	// advice.
	Advise string
	// Profile replaces the intervals of all parameters by those of the
	// profile likelihood.
	Profile bool
}

// Analyse tells the kind of part, chooses the circuit, fits it and says what
// the sweep cannot tell. freq in Hz, z in Ω, as in [Fit].
func Analyse(freq []float64, z []complex128, request Request) (*Analysis, error) {
	settings := request.Settings
	if settings == nil {
		settings = &Settings{}
	}
	if len(freq) == 0 {
		return nil, &InputError{Found: "no points", Expected: "a sweep", Hint: "widen --from and --to"}
	}
	a := &Analysis{Kind: request.Kind, Name: request.Name}
	if m, ok := models.Lookup(request.Name); ok && a.Kind == "" && m.Kind != models.AnyPart {
		a.Kind = m.Kind
	}
	if a.Kind == "" {
		a.Kind, a.KindReason = TellKind(freq, z)
	}
	var tried []models.Model
	if request.Circuit != nil {
		tried = []models.Model{{Name: request.Name, Circuit: request.Circuit}}
	} else {
		tried = models.OfKind(a.Kind)
	}
	if err := a.fitAll(freq, z, tried, settings); err != nil {
		return nil, err
	}
	chosen := a.choose(settings, request.Circuit != nil)
	a.Name, a.Result = a.Candidates[chosen].Name, a.Candidates[chosen].Result
	return a.finish(freq, z, request, settings)
}

// finish adds to an analysis whose result is chosen what the sweep cannot
// tell, what was asked for, and the warnings.
func (a *Analysis) finish(freq []float64, z []complex128, request Request, settings *Settings) (*Analysis, error) {
	a.Result.structure()
	a.Result.testElements()
	if err := a.Result.bound(); err != nil {
		return nil, err
	}
	if request.Profile {
		if err := a.Result.ProfileIntervals(); err != nil {
			return nil, err
		}
	}
	if request.Advise != "" {
		if err := a.advise(request.Advise); err != nil {
			return nil, err
		}
	}
	a.warn(freq, z, settings)
	a.Warnings = sortedWarnings(a.Warnings)
	return a, nil
}

// advise gives advice on the next sweep. A parameter that the present sweep
// shows so little of that the chosen circuit lacks it is looked for in the
// candidates: there is most to gain.
func (a *Analysis) advise(parameter string) error {
	r := a.Result
	if _, ok := r.Circuit.Index(parameter); !ok {
		with := a.least(func(c *Candidate) bool {
			if c.Result == nil || c.Result.problem == nil { // of a lot, where only numbers are kept
				return false
			}
			_, ok := c.Circuit.Index(parameter)
			return ok
		})
		if with >= 0 {
			c := a.Candidates[with]
			if r = c.Result; r.givenUp != nil {
				r.uncertainty(r.problem.settings, r.givenUp)
				r.givenUp = nil
			}
			if err := r.bound(); err != nil {
				return err
			}
			a.Warnings = append(a.Warnings, Warning{"advice-for-other-circuit",
				fmt.Sprintf("%s is not in the chosen circuit %s: the advice is for %s, %s.", parameter, a.Result.Circuit, c.Name, c.Circuit)})
		}
	}
	var err error
	a.Advice, err = r.Advise(parameter)
	return err
}

// fitAll fits the circuits. It fails only if none could be fitted.
func (a *Analysis) fitAll(freq []float64, z []complex128, tried []models.Model, settings *Settings) error {
	s := settings.resolve()
	// With a stated accuracy any circuit inside it may be chosen, however far
	// behind the best it is: none may be fitted in brief.
	if s.Weight == Relative && !s.Robust && len(s.Start) == 0 && s.Accuracy == nil && len(tried) > 1 {
		return a.fitAllBy(race, freq, z, tried, s)
	}
	return a.fitAllBy(each, freq, z, tried, s)
}

func (a *Analysis) fitAllBy(fit func([]*problem) ([]*outcome, error), freq []float64, z []complex128, tried []models.Model, s *Settings) error {
	var pts *points
	var first error
	problems := make([]*problem, len(tried))
	for i, m := range tried {
		c := Candidate{Name: m.Name, Circuit: m.Circuit, AICc: math.NaN()}
		err := s.check(freq, m.Circuit)
		if err == nil && pts == nil {
			pts, err = s.points(freq, z)
		}
		switch {
		case err == nil:
			problems[i] = newProblem(m.Circuit, pts, s.Weight, s)
		case first == nil:
			first = err
			fallthrough
		default:
			c.Reason = "not fitted: " + err.Error()
		}
		a.Candidates = append(a.Candidates, c)
	}
	outcomes, err := fit(problems)
	if pts != nil {
		pts.release()
	}
	if err != nil {
		return err
	}
	for i, o := range outcomes {
		if o != nil {
			c := &a.Candidates[i]
			c.Result, c.Reason, c.sound = o.result, o.reason, o.sound
		}
	}
	a.compare()
	if !slices.ContainsFunc(a.Candidates, func(c Candidate) bool { return c.Result != nil }) {
		return first
	}
	return nil
}

// roundingFloor is the relative rms below which residuals are the rounding of
// the numbers in a file, and no reason to prefer one circuit to another.
const roundingFloor = 1e-8

// compare gives all candidates their AICc: on the same loss, which for
// robust fits means the scale of the one with the least noise.
func (a *Analysis) compare() {
	scale := 0.0
	for _, c := range a.Candidates {
		if c.Result != nil && c.Result.problem.scale > 0 && (scale == 0 || c.Result.problem.scale < scale) {
			scale = c.Result.problem.scale
		}
	}
	floor := math.NaN()
	for i := range a.Candidates {
		c := &a.Candidates[i]
		if c.Result == nil {
			continue
		}
		cost := c.Result.Cost
		if scale > 0 {
			cost = c.Result.problem.lossAt(c.Result.x, scale)
		}
		if math.IsNaN(floor) {
			floor = roundingSquares(c.Result.Measured)
		}
		c.AICc = c.Result.aicc(cost, floor)
	}
}

// lossAt returns ½Σr² of the soft-L1 residuals with a given scale.
func (p *problem) lossAt(x []float64, scale float64) float64 {
	own := p.scale
	p.scale = scale
	defer func() { p.scale = own }()
	r := make([]float64, 2*len(p.freq))
	p.residual(r, x)
	cost := 0.0
	for _, v := range r {
		cost += v * v / 2
	}
	return cost
}

// aicc returns Akaike's information criterion for a cost, see [Candidate].
// Sums of squares below the floor, which rounding explains, count as alike.
func (r *Result) aicc(cost, floor float64) float64 {
	n := 2 * len(r.Freq)
	squares := 2 * cost
	if r.Weight == Relative {
		squares = max(squares, floor, roundingFloor*roundingFloor*float64(n))
	}
	return aicc(squares, n, len(r.Free)+1)
}

// aicc returns n·ln(S/n) + 2k + 2k(k+1)/(n−k−1) for n residuals with the sum
// of squares S and k parameters, the variance among them.
func aicc(squares float64, residuals, parameters int) float64 {
	n, k := float64(residuals), float64(parameters)
	if n-k-1 <= 0 {
		return math.Inf(1)
	}
	return n*math.Log(squares/n) + 2*k + 2*k*(k+1)/(n-k-1)
}

// soundness reports whether every parameter is determined, and if not, why
// not.
func (r *Result) soundness() (string, bool) {
	if !r.Status.Converged() {
		return fmt.Sprintf("did not converge (%s)", r.Reason), false
	}
	// The tests cost more fits, and one reason is enough.
	for tested := false; ; tested = true {
		for _, p := range r.Parameters {
			if !p.Determined {
				return p.Name + " is not determined: " + p.Why, false
			}
		}
		if tested {
			return "", true
		}
		r.testElements()
	}
}

// similarAICc is the difference of the criterion below which two circuits
// explain a sweep equally well, so that the simpler is preferred (Burnham and
// Anderson 2002, Model Selection and Multimodel Inference, 2.6).
const similarAICc = 2

// choose marks one candidate and gives the others their reasons.
func (a *Analysis) choose(s *Settings, byUser bool) int {
	if byUser {
		a.Candidates[0].Chosen = true
		if a.Candidates[0].sound {
			a.Candidates[0].Reason = "asked for"
		} else {
			a.Candidates[0].Reason = "asked for; " + a.Candidates[0].Reason
		}
		return 0
	}
	eligible := func(c *Candidate) bool { return c.sound }
	converged := func(c *Candidate) bool { return c.Result != nil && c.Result.Status.Converged() }
	best := a.least(eligible)
	why, though := "smallest AICc of the circuits with every parameter determined", ""
	if best < 0 || a.missed(best, a.least(converged)) {
		eligible = converged
		if best = a.least(eligible); best < 0 {
			eligible = func(c *Candidate) bool { return c.Result != nil }
			best = a.least(eligible)
		}
		why = "smallest AICc"
		a.Warnings = append(a.Warnings, Warning{"no-candidate-determined",
			"No circuit of this kind that describes the sweep has all its parameters determined; the best by AICc is given, with bounds for what the sweep does not show. Widen the sweep, or name the circuit with --circuit."})
	}
	least := a.Candidates[best]
	for i, c := range a.Candidates { // simplest first
		if eligible(&c) && len(c.Result.Free) < len(a.Candidates[best].Result.Free) && c.AICc <= least.AICc+similarAICc {
			best = i
			why = fmt.Sprintf("as good as %s (AICc within %d) and simpler", least.Name, similarAICc)
		}
	}
	for i, c := range a.Candidates {
		if c.sound && len(c.Result.Free) < len(a.Candidates[best].Result.Free) && c.Result.insideAccuracy() {
			why = fmt.Sprintf("the simplest whose residual is inside the meter's stated accuracy; what %s would add is not the part's for certain", a.Candidates[best].Name)
			best = i
			break
		}
	}
	if !a.Candidates[best].sound {
		though = ", though " + a.Candidates[best].Reason
	}
	chosen := a.Candidates[best].Name
	for i := range a.Candidates {
		c := &a.Candidates[i]
		switch {
		case i == best:
			c.Chosen, c.Reason = true, why+though
		case c.sound && c.AICc < a.Candidates[best].AICc:
			c.Reason = fmt.Sprintf("AICc %+.1f against %s, but not the simplest that serves", c.AICc-a.Candidates[best].AICc, chosen)
		case c.sound:
			c.Reason = fmt.Sprintf("AICc %+.1f against %s", c.AICc-a.Candidates[best].AICc, chosen)
		}
	}
	return best
}

// missed reports whether a circuit with every parameter determined does not
// describe the sweep although another does: its residuals exceed the meter's
// stated accuracy, and the other's are less than half as large, which is not
// by luck. What the other does not determine is then better given as a bound
// than left out together with what the sweep shows.
func (a *Analysis) missed(sound, other int) bool {
	if other < 0 {
		return false
	}
	s, o := a.Candidates[sound], a.Candidates[other]
	return !s.Result.insideAccuracy() && o.Result.RMSRelative < s.Result.RMSRelative/2 && o.AICc < s.AICc-clearlyBetter
}

// least returns the eligible candidate with the smallest AICc, the first of
// equals, −1 if there is none.
func (a *Analysis) least(eligible func(*Candidate) bool) int {
	best := -1
	for i := range a.Candidates {
		c := &a.Candidates[i]
		if eligible(c) && (best < 0 || c.AICc < a.Candidates[best].AICc) {
			best = i
		}
	}
	return best
}

// insideAccuracy reports whether the rms residuals of magnitude and of phase
// are both inside the stated accuracy; false where none was stated.
func (r *Result) insideAccuracy() bool {
	p := r.problem
	if p.magnitude == nil {
		return false
	}
	var m, ph float64
	for i, rho := range r.Residuals {
		m += math.Pow(real(rho)/p.magnitude[i], 2)
		ph += math.Pow(imag(rho)/p.phase[i], 2)
	}
	n := float64(len(r.Residuals))
	return m <= n && ph <= n
}

// listed joins names in a sentence.
func listed(names []string) string {
	if len(names) < 2 {
		return strings.Join(names, "")
	}
	return strings.Join(names[:len(names)-1], ", ") + " and " + names[len(names)-1]
}
