package fit

import (
	"fmt"
	"math"
	"slices"

	"realpart/models"
)

// Trial is what one sweep of a lot says about the circuits of its kind of
// part. It is small, so that the trials of a whole lot can be kept or written
// away, and holds only numbers that JSON has.
type Trial struct {
	Kind       models.Kind      `json:"kind"`
	KindReason string           `json:"kind_reason,omitzero"`
	Candidates []TrialCandidate `json:"candidates"`
}

// TrialCandidate is a circuit of the library that was tried on a sweep.
type TrialCandidate struct {
	Name string `json:"name"`
	// AICc as in [Candidate], and the relative rms of the residuals; nil
	// where the fit was not possible.
	AICc        *float64 `json:"aicc,omitzero"`
	RMSRelative *float64 `json:"rms_relative,omitzero"`
	// Determined tells that the fit converged with every parameter
	// determined, WithinAccuracy that its residuals are inside the meter's
	// stated accuracy.
	Determined     bool   `json:"determined"`
	WithinAccuracy bool   `json:"within_accuracy,omitzero"`
	Reason         string `json:"reason,omitzero"`
}

// Try fits all circuits of the sweep's kind, or of request.Kind, and keeps of
// them what the choice of a lot's circuit needs. It costs what [Analyse]
// costs without its warnings.
func Try(freq []float64, z []complex128, request Request) (*Trial, error) {
	if len(freq) == 0 {
		return nil, &InputError{Found: "no points", Expected: "a sweep", Hint: "widen --from and --to"}
	}
	settings := request.Settings
	if settings == nil {
		settings = &Settings{}
	}
	a := &Analysis{Kind: request.Kind}
	if a.Kind == "" {
		a.Kind, a.KindReason = TellKind(freq, z)
	}
	if err := a.fitAll(freq, z, models.OfKind(a.Kind), settings); err != nil {
		return nil, err
	}
	t := &Trial{Kind: a.Kind, KindReason: a.KindReason}
	for _, c := range a.Candidates {
		k := TrialCandidate{Name: c.Name, Determined: c.sound, Reason: c.Reason}
		if c.Result != nil {
			k.AICc, k.RMSRelative = finite(c.AICc), finite(c.Result.RMSRelative)
			k.WithinAccuracy = c.Result.insideAccuracy()
		}
		t.Candidates = append(t.Candidates, k)
	}
	return t, nil
}

func finite(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}

// least is the smallest AICc of the circuits with every parameter determined;
// +Inf if there is none. (A circuit with a capacitance run off to infinity
// describes an inductor too.)
func (t *Trial) least() float64 {
	least := math.Inf(1)
	for _, c := range t.Candidates {
		if c.AICc != nil && c.Determined {
			least = min(least, *c.AICc)
		}
	}
	return least
}

// Tally sums the trials of a lot. Its size does not grow with the lot.
type Tally struct {
	kinds map[models.Kind]*kindTally
}

type kindTally struct {
	parts    int
	circuits map[string]*circuitTally
}

type circuitTally struct {
	fitted, determined, within int     // parts
	sum                        float64 // of AICc
	logRMS                     float64 // sum of ln of the relative rms residuals
}

// Add counts a sweep. The sums depend on the order of the sweeps in their last
// bits: keep it the same.
func (t *Tally) Add(trial *Trial) {
	if t.kinds == nil {
		t.kinds = map[models.Kind]*kindTally{}
	}
	k := t.kinds[trial.Kind]
	if k == nil {
		k = &kindTally{circuits: map[string]*circuitTally{}}
		t.kinds[trial.Kind] = k
	}
	k.parts++
	for _, c := range trial.Candidates {
		s := k.circuits[c.Name]
		if s == nil {
			s = &circuitTally{}
			k.circuits[c.Name] = s
		}
		if c.AICc == nil {
			continue
		}
		s.fitted++
		s.sum += *c.AICc
		if c.RMSRelative != nil {
			s.logRMS += math.Log(max(*c.RMSRelative, roundingFloor))
		}
		if c.Determined {
			s.determined++
		}
		if c.WithinAccuracy {
			s.within++
		}
	}
}

// LotCircuit is the one circuit for all parts of a lot.
type LotCircuit struct {
	Kind  models.Kind
	Model models.Model
	// Reason says why it was chosen, Reasons why the others of the kind
	// were not.
	Reason  string
	Reasons map[string]string
	parts   int
}

// LotChoice holds the circuits of a lot: that of its kind of part, and one for
// each other kind that some of its sweeps look like.
type LotChoice struct {
	Kind     models.Kind
	Circuits map[models.Kind]*LotCircuit
}

// Choose gives the lot its kind of part, that of most of its sweeps, and each
// kind one circuit: that with the smallest sum of AICc over the parts, of the
// circuits that could be fitted to all of them with every parameter determined
// in at least half, unless those miss what another describes. The simpler one
// is preferred, as in [Analyse], where it is as good or is inside the meter's
// stated accuracy in at least half. It returns nil if nothing was added.
func (t *Tally) Choose() *LotChoice {
	var choice *LotChoice
	for _, kind := range models.Kinds() { // in their order, so that a tie is decided alike
		k := t.kinds[kind]
		if k == nil {
			continue
		}
		if choice == nil {
			choice = &LotChoice{Circuits: map[models.Kind]*LotCircuit{}}
		}
		choice.Circuits[kind] = k.choose(kind)
		if choice.Kind == "" || k.parts > t.kinds[choice.Kind].parts {
			choice.Kind = kind
		}
	}
	return choice
}

func (k *kindTally) choose(kind models.Kind) *LotCircuit {
	all := models.OfKind(kind) // from the simplest on
	least := func(eligible func(*circuitTally) bool) int {
		best := -1
		for i, m := range all {
			c := k.circuits[m.Name]
			if c != nil && c.fitted > 0 && eligible(c) && (best < 0 || c.sum < k.circuits[all[best].Name].sum) {
				best = i
			}
		}
		return best
	}
	most := 0
	for _, c := range k.circuits {
		most = max(most, c.fitted)
	}
	everywhere := func(c *circuitTally) bool { return c.fitted == most }
	determined := func(c *circuitTally) bool { return everywhere(c) && 2*c.determined >= most }
	best := least(determined)
	why := fmt.Sprintf("smallest AICc summed over the lot (%s), of the circuits determined in at least half", partCount(k.parts))
	if free := least(everywhere); best < 0 || k.missed(all[best].Name, all[free].Name) {
		best = free
		why = fmt.Sprintf("smallest AICc summed over the lot (%s), though not determined in most of them", partCount(k.parts))
	} else {
		smallest := best
		for i, m := range all[:best] {
			c := k.circuits[m.Name]
			if c != nil && determined(c) && c.sum <= k.circuits[all[smallest].Name].sum+similarAICc {
				best = i
				why = fmt.Sprintf("as good as %s over the lot (summed AICc within %d) and simpler", all[smallest].Name, similarAICc)
				break
			}
		}
		for i, m := range all[:best] {
			c := k.circuits[m.Name]
			if c != nil && determined(c) && 2*c.within >= most {
				why = fmt.Sprintf("the simplest whose residual is inside the meter's stated accuracy in at least half of the lot; what %s would add is not the parts' for certain", all[best].Name)
				best = i
				break
			}
		}
	}
	lot := &LotCircuit{Kind: kind, Model: all[best], Reason: why, Reasons: map[string]string{}, parts: k.parts}
	for _, m := range all {
		c := k.circuits[m.Name]
		switch {
		case c == nil || m.Name == lot.Model.Name:
		case !everywhere(c):
			lot.Reasons[m.Name] = fmt.Sprintf("could not be fitted to %d of %s of the lot", k.parts-c.fitted, partCount(k.parts))
		case !determined(c):
			lot.Reasons[m.Name] = fmt.Sprintf("not determined in %d of %s of the lot", k.parts-c.determined, partCount(k.parts))
		default:
			lot.Reasons[m.Name] = fmt.Sprintf("summed AICc %+.1f against %s", c.sum-k.circuits[lot.Model.Name].sum, lot.Model.Name)
		}
	}
	return lot
}

// missed is as in [Analysis], with the geometric mean of the residuals.
func (k *kindTally) missed(determined, other string) bool {
	d, o := k.circuits[determined], k.circuits[other]
	n := float64(d.fitted)
	return 2*d.within < d.fitted && o.logRMS < d.logRMS-n*math.Ln2 && o.sum < d.sum-n*clearlyBetter
}

func partCount(n int) string {
	if n == 1 {
		return "1 part"
	}
	return fmt.Sprintf("%d parts", n)
}

// WarnOtherKind is the code of the warning that a sweep looks like another
// kind of part than its lot.
const WarnOtherKind = "other-kind"

// clearlyBetter is the difference of AICc from which on one of two circuits has
// essentially no support (Burnham and Anderson 2002, 2.6).
const clearlyBetter = 10

// Analyse is [Analyse] of one sweep of the lot with the lot's circuit; trial is
// its own from [Try]. The values are those of a fit that asks for this circuit,
// to the bit. A sweep that looks like another kind of part is fitted with the
// lot's circuit too, unless no circuit of the lot's kind describes it, with
// every parameter determined, nearly as well as those of its own do; it has a
// warning either way.
func (l *LotChoice) Analyse(freq []float64, z []complex128, request Request, trial *Trial) (*Analysis, error) {
	settings := request.Settings
	if settings == nil {
		settings = &Settings{}
	}
	var warnings []Warning
	circuit := l.Circuits[trial.Kind]
	if trial.Kind != l.Kind {
		inKind := request
		inKind.Kind = l.Kind
		other, err := Try(freq, z, inKind)
		fits := err == nil && other.least() <= trial.least()+clearlyBetter
		text := fmt.Sprintf("This sweep looks like that of another kind of part, %s (%s), than most of the lot, %s", article(trial.Kind), trial.KindReason, article(l.Kind))
		if fits || circuit == nil {
			circuit, trial = l.Circuits[l.Kind], other
			text += "; the lot's circuit describes it as well and is used."
		} else {
			text += ", and no circuit of that kind describes it. It was fitted as what it looks like; check that it belongs to the lot."
		}
		if trial == nil {
			return nil, err
		}
		warnings = []Warning{{WarnOtherKind, text}}
	}
	a := &Analysis{Kind: circuit.Kind, KindReason: trial.KindReason, Name: circuit.Model.Name, Warnings: warnings}
	if err := a.fitAll(freq, z, []models.Model{circuit.Model}, settings); err != nil {
		return nil, err
	}
	chosen := a.Candidates[0]
	a.Result = chosen.Result
	if !chosen.sound && chosen.Result.Status.Converged() && circuit.parts > 0 {
		chosen.Reason = circuit.Reason + "; in this part " + chosen.Reason
	} else {
		chosen.Reason = circuit.Reason
	}
	chosen.Chosen = true
	a.Candidates = nil
	for _, t := range trial.Candidates {
		m, _ := models.Lookup(t.Name)
		c := Candidate{Name: t.Name, Circuit: m.Circuit, AICc: math.NaN(), Reason: t.Reason, sound: t.Determined}
		if reason, ok := circuit.Reasons[t.Name]; ok && t.AICc != nil {
			c.Reason = reason
		}
		if t.AICc != nil && t.RMSRelative != nil {
			// Of the trial's result only this number was kept.
			c.AICc, c.Result = *t.AICc, &Result{RMSRelative: *t.RMSRelative}
		}
		if t.Name == circuit.Model.Name {
			if !math.IsNaN(c.AICc) {
				chosen.AICc = c.AICc // robust fits: on the same loss as the others
			}
			c = chosen
		}
		a.Candidates = append(a.Candidates, c)
	}
	if !slices.ContainsFunc(a.Candidates, func(c Candidate) bool { return c.Chosen }) {
		a.Candidates = append(a.Candidates, chosen)
	}
	return a.finish(freq, z, request, settings)
}

// article puts the indefinite article before a kind of part.
func article(kind models.Kind) string {
	if kind == models.InductorPart {
		return "an " + string(kind)
	}
	return "a " + string(kind)
}
