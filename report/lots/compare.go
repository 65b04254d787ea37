package lots

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"realpart/report"
)

// ErrEmpty is the error of a lot in which no part could be fitted.
var ErrEmpty = errors.New("expected a lot with fitted parts, found none")

// Schema names the form of a [Comparison] in JSON.
const Schema = "realpart.compare/1"

// fewestParts is the number of values of a figure below which a lot is not
// tested.
const fewestParts = 3

// power is that with which a detectable difference would have been seen.
const power = 0.9

// Verdict is the answer on one figure.
type Verdict string

// The verdicts. Undecided means that the lots may differ or be the same: this
// sample does not tell.
const (
	Same      Verdict = "same"
	Different Verdict = "different"
	Undecided Verdict = "undecided"
)

// Comparison is what is said of lots against the first of them. Numbers that do
// not exist are absent in JSON.
type Comparison struct {
	Schema      string          `json:"schema"`
	Circuit     *report.Circuit `json:"circuit,omitzero"` // whose parameters are compared
	Lots        []LotStatistics `json:"lots"`
	Comparisons []Row           `json:"comparisons"`
	Cautions    []Caution       `json:"cautions"`

	// Samples hold the values behind the statistics, for each lot those of
	// each figure.
	Samples [][]Sample `json:"-"`
}

// LotStatistics is a lot in JSON; N counts the parts that were fitted.
type LotStatistics struct {
	Name    string             `json:"name"`
	N       int                `json:"n"`
	Failed  int                `json:"failed,omitzero"`
	Figures []FigureStatistics `json:"figures"`
}

// Row compares one figure of one lot with that of the reference.
type Row struct {
	Figure    string  `json:"figure"`
	AtHz      float64 `json:"at_hz,omitzero"`
	Unit      string  `json:"unit"`
	Lot       string  `json:"lot"`
	Reference string  `json:"reference"`
	// Difference is the lot's mean less that of the reference, with its 95 %
	// interval after Welch.
	Difference *float64 `json:"difference,omitzero"`
	Low95      *float64 `json:"low95,omitzero"`
	High95     *float64 `json:"high95,omitzero"`
	WelchT     *float64 `json:"welch_t,omitzero"`
	DF         *float64 `json:"df,omitzero"`
	P          *float64 `json:"p,omitzero"`
	PHolm      *float64 `json:"p_holm,omitzero"`
	// MannWhitneyP and BrownForsytheP are not adjusted for their number.
	MannWhitneyP   *float64 `json:"mann_whitney_p,omitzero"`
	BrownForsytheP *float64 `json:"brown_forsythe_p,omitzero"`
	// Margin is the user's, in the unit of the figure; EquivalenceP is the
	// larger of the two one-sided tests against it, and Equivalent tells
	// whether it is at most 5 %.
	Margin       *float64 `json:"margin,omitzero"`
	EquivalenceP *float64 `json:"equivalence_p,omitzero"`
	Equivalent   *bool    `json:"equivalent,omitzero"`
	// Detectable is the difference that this test, adjusted for the number
	// of tests, would have shown with 90 % power.
	Detectable *float64 `json:"detectable,omitzero"`
	Verdict    Verdict  `json:"verdict"`

	lot, reference Sample
	margin         float64 // relative; 0: none
}

// Options steer [Compare].
type Options struct {
	// At holds the frequencies of the figures in Hz; nil as in
	// [CommonFigures].
	At []float64
	// Margins within which a figure counts as the same, by its name, relative
	// to the mean of the reference: 0.05 for 5 %. A name means the figure at
	// all its frequencies.
	Margins map[string]float64
	// ExcludeOutliers leaves flagged values out of everything.
	ExcludeOutliers bool
}

// Compare compares lots with the first of them, figure by figure, with the
// parameters of the circuit that most parts were fitted with. An error says
// which lot has no parts, or which margin has no figure.
func Compare(lots []*Lot, o Options) (*Comparison, error) {
	if len(lots) < 2 {
		return nil, errors.New("expected two lots or more, found fewer")
	}
	for i, l := range lots {
		if len(l.Fits) == 0 {
			return nil, fmt.Errorf("%s: %w", l.Name, ErrEmpty)
		}
		for _, other := range lots[:i] {
			if other.Name == l.Name {
				return nil, fmt.Errorf("expected lots of different names, found %s twice; name them with NAME=PATH", l.Name)
			}
		}
	}
	c := &Comparison{Schema: Schema, Circuit: Circuit(lots), Comparisons: []Row{}, Cautions: []Caution{}}
	var wanted []string
	for name := range o.Margins {
		wanted = append(wanted, name)
	}
	slices.Sort(wanted)
	figures := CommonFigures(all(lots), c.Circuit.Expression, o.At, wanted)
	for _, name := range wanted {
		if !slices.ContainsFunc(figures, func(f Figure) bool { return f.Name == name }) {
			var known []string
			for _, f := range figures {
				if !slices.Contains(known, f.Name) {
					known = append(known, f.Name)
				}
			}
			return nil, fmt.Errorf("--margin: expected a figure of the comparison (%s), found %q", strings.Join(known, ", "), name)
		}
	}
	for _, at := range o.At {
		if !slices.ContainsFunc(figures, func(f Figure) bool { return f.AtHz == at }) {
			return nil, fmt.Errorf("--at: expected a frequency that the records have figures at, found %s; fit again with --at", report.FormatFrequency(at))
		}
	}
	for _, l := range lots {
		s := LotStatistics{Name: l.Name, N: len(l.Fits), Failed: l.Failed, Figures: []FigureStatistics{}}
		var samples []Sample
		for _, f := range figures {
			sample := l.Sample(f, c.Circuit.Expression, o.ExcludeOutliers)
			samples = append(samples, sample)
			s.Figures = append(s.Figures, sample.Statistics(math.NaN(), math.NaN()))
		}
		c.Lots, c.Samples = append(c.Lots, s), append(c.Samples, samples)
	}
	for i, l := range lots[1:] {
		for k := range figures {
			c.Comparisons = append(c.Comparisons, newRow(lots[0].Name, l.Name, c.Samples[0][k], c.Samples[i+1][k], o.Margins))
		}
	}
	judge(c.Comparisons)
	detect(c.Comparisons)
	c.caution(lots)
	return c, nil
}

// newRow makes the tests of one figure that need no other figure.
func newRow(referenceName, lotName string, reference, lot Sample, margins map[string]float64) Row {
	r := Row{Figure: lot.Name, AtHz: lot.AtHz, Unit: lot.Unit, Lot: lotName, Reference: referenceName,
		Verdict: Undecided, lot: lot, reference: reference, margin: margins[lot.Name]}
	if reference.N > 0 {
		if r.margin > 0 {
			r.Margin = finite(r.margin * math.Abs(reference.Mean))
		}
		if lot.N > 0 {
			r.Difference = finite(lot.Mean - reference.Mean)
		}
	}
	if !r.tested() {
		return r
	}
	d := Welch(lot.Values, reference.Values)
	low, high := d.Interval(0.95)
	r.Low95, r.High95, r.WelchT, r.DF, r.P = finite(low), finite(high), finite(d.T()), finite(d.DF), finite(d.P())
	_, p := MannWhitney(lot.Values, reference.Values)
	r.MannWhitneyP = finite(p)
	_, p = BrownForsythe(lot.Values, reference.Values)
	r.BrownForsytheP = finite(p)
	if r.Margin != nil {
		p := d.Equivalence(*r.Margin)
		inside := p <= significance
		r.EquivalenceP, r.Equivalent = finite(p), &inside
	}
	return r
}

// tested tells whether both lots have parts enough.
func (r *Row) tested() bool { return r.lot.N >= fewestParts && r.reference.N >= fewestParts }

// judge adjusts the probabilities for their number and gives the verdicts.
func judge(rows []Row) {
	p := make([]float64, len(rows))
	for i := range rows {
		p[i] = number(rows[i].P)
	}
	for i, adjusted := range Holm(p) {
		r := &rows[i]
		r.PHolm = finite(adjusted)
		switch {
		case r.Equivalent != nil && *r.Equivalent:
			r.Verdict = Same
		case adjusted < significance:
			r.Verdict = Different
		}
	}
}

// detect says what each test would have shown. The first step of Holm's
// procedure is the hardest: a difference that passes it needs no other.
func detect(rows []Row) {
	tests := 0
	for _, r := range rows {
		if r.P != nil {
			tests++
		}
	}
	for i := range rows {
		if r := &rows[i]; r.P != nil {
			r.Detectable = finite(Welch(r.lot.Values, r.reference.Values).Detectable(significance/float64(tests), power))
		}
	}
}

// AllSame tells whether every figure with a margin is inside it.
func (c *Comparison) AllSame() bool {
	for _, r := range c.Comparisons {
		if r.margin > 0 && r.Verdict != Same {
			return false
		}
	}
	return true
}

// conditions are the words of a file's metadata under which lots must have
// been measured alike.
var conditions = []struct{ key, code string }{
	{"bias", "different-bias"}, {"temperature", "different-temperature"}, {"test level", "different-test-level"},
}

// caution says what could mislead.
func (c *Comparison) caution(lots []*Lot) {
	add := func(code, format string, args ...any) {
		c.Cautions = append(c.Cautions, Caution{code, fmt.Sprintf(format, args...)})
	}
	perLot := func(of func(l *Lot) string) (texts []string, differ bool) {
		first := of(lots[0])
		for _, l := range lots {
			s := of(l)
			differ = differ || s != first
			texts = append(texts, l.Name+": "+s)
		}
		return texts, differ
	}
	if texts, differ := perLot(func(l *Lot) string {
		return strings.Join(distinct(l.Fits, func(f *report.Fit) string { return string(f.Kind) }), ", ")
	}); differ {
		add("different-kinds", "The lots are not the same kind of part (%s).", strings.Join(texts, "; "))
	}
	if texts, differ := perLot(func(l *Lot) string {
		return strings.Join(distinct(l.Fits, func(f *report.Fit) string { return f.Circuit.Expression }), ", ")
	}); differ {
		add("different-circuits", "The lots were fitted with different circuits (%s). Parameters are compared only between parts with %s; give all the same with --circuit.", strings.Join(texts, "; "), c.Circuit.Expression)
	}
	if texts, differ := perLot(func(l *Lot) string {
		ranges := distinct(l.Fits, func(f *report.Fit) string {
			return report.FormatFrequency(f.Sweep.FMin) + " to " + report.FormatFrequency(f.Sweep.FMax)
		})
		if len(ranges) > 3 {
			ranges = append(ranges[:3], fmt.Sprintf("%d more", len(ranges)-3))
		}
		return strings.Join(ranges, ", ")
	}); differ {
		add("different-frequencies", "The frequency ranges differ (%s). A circuit fitted to another range has other values; cut all to the same with --from and --to.", strings.Join(texts, "; "))
	}
	for _, condition := range conditions {
		if texts, differ := perLot(func(l *Lot) string {
			values := distinct(l.Fits, func(f *report.Fit) string {
				if v := f.Sweep.Metadata[condition.key]; v != "" {
					return v
				}
				return "not stated"
			})
			return strings.Join(values, ", ")
		}); differ {
			add(condition.code, "The files state different conditions of measurement, %s (%s). A difference may be that of the conditions.", condition.key, strings.Join(texts, "; "))
		}
	}
	if accurate := distinct(all(lots), func(f *report.Fit) string { return fmt.Sprint(f.AccuracyStated()) }); len(accurate) > 1 {
		add("different-accuracy", "The meter's accuracy was stated for some of the sweeps only.")
	}
	for _, l := range lots {
		if len(l.Fits) < fewestParts {
			add("few-parts", "%s has %s: a lot below %d is described but not tested.", l.Name, count(len(l.Fits), "part"), fewestParts)
		}
		for _, caution := range l.Cautions() {
			if caution.Code != "different-circuits" || !slices.ContainsFunc(c.Cautions, func(d Caution) bool { return d.Code == "different-circuits" }) {
				c.Cautions = append(c.Cautions, caution)
			}
		}
	}
	for i, l := range lots[1:] {
		if n := shared(lots[0], l); n > 0 {
			add("shared-sweeps", "%s of %s %s in %s too: the same measurement.", count(n, "sweep"), l.Name, is(n), lots[0].Name)
		}
		for _, other := range lots[1 : i+1] {
			if n := shared(other, l); n > 0 {
				add("shared-sweeps", "%s of %s %s in %s too: the same measurement.", count(n, "sweep"), l.Name, is(n), other.Name)
			}
		}
	}
	for i, samples := range c.Samples {
		var left, few, outliers, skewed, constant []string
		excluded := false
		for _, s := range samples {
			if s.N >= fewestParts && s.SD == 0 {
				constant = append(constant, s.Figure.String())
			}
			if n := s.NotDetermined; n > 0 {
				left = append(left, fmt.Sprintf("%s in %d", s.Figure, n))
			}
			if s.N < fewestParts && len(lots[i].Fits) >= fewestParts {
				few = append(few, s.Figure.String())
			}
			for _, o := range s.Outliers {
				outliers = append(outliers, fmt.Sprintf("%s in %s", o.Part, s.Figure))
				excluded = s.Excluded
			}
			if s.AndersonDarlingP < 0.01 {
				skewed = append(skewed, s.Figure.String())
			}
		}
		name := lots[i].Name
		if len(constant) > 0 {
			add("no-spread", "%s: no spread at all in %s. Parts differ; these may be one measurement several times.", name, strings.Join(constant, ", "))
		}
		if len(left) > 0 {
			add("not-determined", "%s: left out because the sweeps do not tell the value: %s of %s.", name, strings.Join(left, ", "), count(len(lots[i].Fits), "part"))
		}
		if len(few) > 0 {
			add("few-values", "%s: fewer than %d values, not tested: %s.", name, fewestParts, strings.Join(few, ", "))
		}
		if len(outliers) > 0 {
			what := "flagged and kept; --exclude-outliers leaves them out"
			if excluded {
				what = "left out as asked"
			}
			add("outliers", "%s: outliers at 5 %% (Grubbs, repeated), %s: %s.", name, what, strings.Join(outliers, ", "))
		}
		if len(skewed) > 0 {
			add("not-normal", "%s: not normal at 1 %% (Anderson–Darling): %s. Tolerance bounds assume a normal lot; see the Mann–Whitney test for the location.", name, strings.Join(skewed, ", "))
		}
	}
	for i, l := range lots {
		var beyond []string
		for _, s := range c.Samples[i] {
			if slices.ContainsFunc(l.Fits, s.Figure.Outside) {
				beyond = append(beyond, s.Figure.String())
			}
		}
		if len(beyond) > 0 {
			add("outside-sweep", "%s: outside the sweeps, from the circuit alone: %s.", l.Name, strings.Join(beyond, ", "))
		}
	}
	var disagree, spread []string
	for _, r := range c.Comparisons {
		if r.MannWhitneyP != nil && r.PHolm != nil && *r.MannWhitneyP < 0.001 && r.Verdict == Undecided {
			disagree = append(disagree, r.name()+" ("+r.Lot+")")
		}
		if r.BrownForsytheP != nil && *r.BrownForsytheP < 0.01 {
			spread = append(spread, r.name()+" ("+r.Lot+")")
		}
	}
	if len(disagree) > 0 {
		add("ranks-disagree", "The ranks of the values differ clearly (Mann–Whitney, p below 0.1 %%) where the means do not: %s. Look for outliers.", strings.Join(disagree, ", "))
	}
	if len(spread) > 0 {
		add("different-spread", "The spread differs (Brown–Forsythe, p below 1 %%): %s.", strings.Join(spread, ", "))
	}
}

// shared counts the sweeps that are in both lots, by their content.
func shared(a, b *Lot) int {
	seen := map[string]bool{}
	for _, f := range a.Fits {
		if f.Sweep.SHA256 != "" {
			seen[f.Sweep.SHA256+" "+f.Sweep.Part] = true
		}
	}
	n := 0
	for _, f := range b.Fits {
		if seen[f.Sweep.SHA256+" "+f.Sweep.Part] {
			n++
		}
	}
	return n
}

func (r *Row) name() string { return Figure{r.Figure, r.AtHz, r.Unit}.String() }
