package lots

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"realpart/report"
)

// Lot is a number of parts that were made or bought together.
type Lot struct {
	Name string
	// Fits are the records of the sweeps that were fitted; Failed counts the
	// others.
	Fits   []*report.Fit
	Failed int
	// Repeated counts records that were there before: the same sweep twice.
	Repeated int
}

// New makes a lot of records. Sweeps that failed or did not converge are
// counted and left out, and of records of the same sweep the first remains.
// The order of the records does not matter to any result.
func New(name string, fits []*report.Fit) *Lot {
	l := &Lot{Name: name}
	type sweep struct{ file, part, sha256 string }
	seen := map[sweep]bool{}
	for _, f := range fits {
		if f.Status != report.Converged {
			l.Failed++
			continue
		}
		s := sweep{f.Sweep.File, f.Sweep.Part, f.Sweep.SHA256}
		if seen[s] {
			l.Repeated++
			continue
		}
		seen[s] = true
		l.Fits = append(l.Fits, f)
	}
	slices.SortStableFunc(l.Fits, func(a, b *report.Fit) int {
		if c := strings.Compare(a.Sweep.Part, b.Sweep.Part); c != 0 {
			return c
		}
		if c := strings.Compare(a.Sweep.File, b.Sweep.File); c != 0 {
			return c
		}
		return strings.Compare(a.Sweep.SHA256, b.Sweep.SHA256)
	})
	return l
}

// Circuit returns the circuit that most parts of lots were fitted with; nil
// if there are no parts.
func Circuit(lots []*Lot) *report.Circuit {
	fits := all(lots)
	if len(fits) == 0 {
		return nil
	}
	expression := majority(fits, func(f *report.Fit) string { return f.Circuit.Expression })
	for _, f := range fits {
		if f.Circuit.Expression == expression {
			return f.Circuit
		}
	}
	return nil
}

func all(lots []*Lot) []*report.Fit {
	var fits []*report.Fit
	for _, l := range lots {
		fits = append(fits, l.Fits...)
	}
	return fits
}

// Sample is a figure over the parts of a lot.
type Sample struct {
	Figure
	Values []float64
	Parts  []string // of the values
	// NotDetermined counts the parts whose sweep does not tell the value,
	// Missing those whose record does not have the figure, which is so where
	// another circuit was fitted. Neither are among the values.
	NotDetermined, Missing int
	// Outliers are the parts whose values are flagged by the generalised
	// ESD test (Grubbs' test repeated) at 5 %, the farthest first. They are
	// among the values unless Excluded is set.
	Outliers []Outlier
	Excluded bool
	Summary
}

// Outlier is a part whose value lies outside what the others let expect.
type Outlier struct {
	Part  string  `json:"part"`
	Value float64 `json:"value"`
}

// Sample collects a figure over the lot. circuit is the expression whose
// parameters are meant; exclude leaves outliers out of the values.
func (l *Lot) Sample(figure Figure, circuit string, exclude bool) Sample {
	s := Sample{Figure: figure}
	for _, f := range l.Fits {
		r, ok := Read(f, figure)
		switch {
		case !ok, figure.AtHz == 0 && figure.Name != SRF && f.Circuit.Expression != circuit:
			s.Missing++
		case !r.Determined || math.IsNaN(r.Value):
			s.NotDetermined++
		default:
			s.Values, s.Parts = append(s.Values, r.Value), append(s.Parts, f.Sweep.Part)
		}
	}
	sorted := slices.Sorted(slices.Values(s.Values))
	removed, _, _, _ := generalisedESD(sorted, mostOutliers(len(sorted)), significance)
	taken := make([]bool, len(s.Values))
	for _, v := range removed {
		for i, w := range s.Values {
			if w == v && !taken[i] {
				taken[i] = true
				s.Outliers = append(s.Outliers, Outlier{s.Parts[i], v})
				break
			}
		}
	}
	if exclude && len(removed) > 0 {
		s.Excluded = true
		var values []float64
		var parts []string
		for i, v := range s.Values {
			if !taken[i] {
				values, parts = append(values, v), append(parts, s.Parts[i])
			}
		}
		s.Values, s.Parts = values, parts
	}
	s.Summary = Summarise(s.Values)
	return s
}

// Caution is something that the reader of a comparison or lot must know. Code
// is stable.
type Caution struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// Cautions says what keeps a lot from being what it seems.
func (l *Lot) Cautions() []Caution {
	var out []Caution
	add := func(code, format string, args ...any) {
		out = append(out, Caution{code, fmt.Sprintf(format, args...)})
	}
	if l.Failed > 0 {
		add("failed-sweeps", "%s: %s could not be read or fitted and %s left out.", l.Name, count(l.Failed, "sweep"), was(l.Failed))
	}
	if l.Repeated > 0 {
		add("repeated-sweeps", "%s: %s there twice and counted once.", l.Name, count(l.Repeated, "sweep")+" "+was(l.Repeated))
	}
	if n := l.copies(); n > 0 {
		add("copied-sweeps", "%s: %s the same content as another of a different name, and %s counted all the same.", l.Name, count(n, "sweep")+" "+has(n), is(n))
	}
	expressions := distinct(l.Fits, func(f *report.Fit) string { return f.Circuit.Expression })
	if len(expressions) > 1 {
		add("different-circuits", "%s: its parts were fitted with different circuits (%s). Parameters are those of the parts with the most frequent one. Fit all with --circuit.", l.Name, strings.Join(expressions, "; "))
	}
	structured := 0
	for _, f := range l.Fits {
		if f.Residuals.Structured {
			structured++
		}
	}
	if 2*structured > len(l.Fits) {
		add("structured-residual", "%s: in %d of %s the circuit does not describe the part to the accuracy of the points (structured residuals). Figures at frequencies suffer less than parameters.", l.Name, structured, count(len(l.Fits), "part"))
	}
	return out
}

// copies counts the files whose content another file of the lot has too.
func (l *Lot) copies() int {
	files := map[string][]string{} // by content
	n := 0
	for _, f := range l.Fits {
		names := files[f.Sweep.SHA256]
		if f.Sweep.SHA256 == "" || slices.Contains(names, f.Sweep.File) {
			continue
		}
		if len(names) > 0 {
			n++
		}
		files[f.Sweep.SHA256] = append(names, f.Sweep.File)
	}
	return n
}

func has(n int) string {
	if n == 1 {
		return "has"
	}
	return "have"
}

// distinct lists the different texts of records, sorted.
func distinct(fits []*report.Fit, of func(*report.Fit) string) []string {
	var out []string
	for _, f := range fits {
		if s := of(f); !slices.Contains(out, s) {
			out = append(out, s)
		}
	}
	slices.Sort(out)
	return out
}

func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

func is(n int) string {
	if n == 1 {
		return "is"
	}
	return "are"
}

func was(n int) string {
	if n == 1 {
		return "was"
	}
	return "were"
}

// FigureStatistics is a [Sample] in JSON. Numbers that do not exist are absent.
type FigureStatistics struct {
	Name             string    `json:"name"`
	AtHz             float64   `json:"at_hz,omitzero"`
	Unit             string    `json:"unit"`
	N                int       `json:"n"`
	Mean             *float64  `json:"mean,omitzero"`
	SD               *float64  `json:"sd,omitzero"`
	Median           *float64  `json:"median,omitzero"`
	Min              *float64  `json:"min,omitzero"`
	Max              *float64  `json:"max,omitzero"`
	ToleranceLow     *float64  `json:"tolerance_low,omitzero"`
	ToleranceHigh    *float64  `json:"tolerance_high,omitzero"`
	OneSidedLow      *float64  `json:"one_sided_low,omitzero"`
	OneSidedHigh     *float64  `json:"one_sided_high,omitzero"`
	AndersonDarling  *float64  `json:"anderson_darling,omitzero"`
	AndersonDarlingP *float64  `json:"anderson_darling_p,omitzero"`
	NotDetermined    int       `json:"not_determined,omitzero"`
	Missing          int       `json:"missing,omitzero"`
	Outliers         []Outlier `json:"outliers,omitzero"`
	OutliersExcluded bool      `json:"outliers_excluded,omitzero"`
	Low              *float64  `json:"low,omitzero"` // the limits, if there are
	High             *float64  `json:"high,omitzero"`
	Cp               *float64  `json:"cp,omitzero"`
	Cpk              *float64  `json:"cpk,omitzero"`
}

// Statistics gives a sample in the form of JSON, with its capability for limits;
// NaN is no limit.
func (s Sample) Statistics(low, high float64) FigureStatistics {
	cp, cpk := s.Capability(low, high)
	return FigureStatistics{
		Name: s.Name, AtHz: s.AtHz, Unit: s.Unit, N: s.N,
		Mean: finite(s.Mean), SD: finite(s.SD), Median: finite(s.Median), Min: finite(s.Min), Max: finite(s.Max),
		ToleranceLow: finite(s.ToleranceLow), ToleranceHigh: finite(s.ToleranceHigh),
		OneSidedLow: finite(s.OneSidedLow), OneSidedHigh: finite(s.OneSidedHigh),
		AndersonDarling: finite(s.AndersonDarling), AndersonDarlingP: finite(s.AndersonDarlingP),
		NotDetermined: s.NotDetermined, Missing: s.Missing, Outliers: s.Outliers, OutliersExcluded: s.Excluded,
		Low: finite(low), High: finite(high), Cp: finite(cp), Cpk: finite(cpk),
	}
}

func finite(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}
