package lots

import (
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"realpart/models/quantity"
	"realpart/report"
)

// TextOptions steer the texts for people.
type TextOptions struct {
	Width  int // columns; at least 60
	Colour bool
}

// WriteText writes the answer in words, then the tables.
func (c *Comparison) WriteText(w io.Writer, o TextOptions) error {
	l := report.NewLayout(o.Width, o.Colour)
	for i, answer := range c.Answers() {
		if i > 0 {
			l.Line("")
		}
		l.Heading(answer.Title)
		for _, s := range answer.Sentences {
			l.Paragraph("  ", "  ", s)
		}
	}
	if len(c.Cautions) > 0 {
		l.Line("")
		for _, caution := range c.Cautions {
			l.Warn(caution.Text)
		}
	}
	for i, s := range c.Lots[1:] {
		l.Title(fmt.Sprintf("%s less %s", s.Name, c.Lots[0].Name))
		wide := o.Width >= wideTable
		align := "lrrrrrl"
		if wide {
			align = "lrrrrrrrrl"
		}
		l.Table(c.Table(i+1, wide), align)
	}
	l.Paragraph("  ", "  ", c.CircuitNote())
	l.Paragraph("  ", "  ", TestNote)
	for i, samples := range c.Samples {
		lotTable(l, c.Lots[i].Name, c.Lots[i].N, samples, nil)
	}
	l.Paragraph("  ", "  ", ToleranceNote)
	_, err := io.WriteString(w, l.String())
	return err
}

// Table gives the comparison of a lot, by its index, with the reference for
// people: a row a figure, below a header. wide adds what would have been
// detected, and the tests of location and spread that need no normal values.
func (c *Comparison) Table(lot int, wide bool) [][]string {
	rows := [][]string{{"figure", c.Lots[0].Name, c.Lots[lot].Name, "change", "95 % interval", "p (Holm)"}}
	if wide {
		rows[0] = append(rows[0], "detectable", "Mann–Whitney p", "Brown–Forsythe p")
	}
	rows[0] = append(rows[0], "verdict")
	for _, r := range c.rows(lot) {
		rows = append(rows, r.cells(wide))
	}
	return rows
}

// CircuitNote says whose parameters are compared.
func (c *Comparison) CircuitNote() string {
	s := "Parameters are those of the circuit "
	if c.Circuit.Name != "" {
		s += c.Circuit.Name + ": "
	}
	return s + c.Circuit.Expression + "."
}

// rows are those of a lot by its index, from 1 on.
func (c *Comparison) rows(lot int) []Row {
	k := len(c.Samples[0])
	return c.Comparisons[(lot-1)*k : lot*k]
}

// wideTable is the width of a terminal that has room for all columns.
const wideTable = 130

// TestNote says what the table of a comparison holds.
const TestNote = "Means and their change, Welch's t test, p adjusted by Holm for all rows. A meter error common to the lots cancels in the difference to first order and is not added."

// ToleranceNote says what the tables of a lot hold.
const ToleranceNote = "Tolerance interval: holds 95 % of a normal lot with 95 % confidence. Normality: probability of Anderson–Darling, small where the lot is not normal. Outliers: Grubbs, repeated, 5 %."

// WriteText writes the statistics of a lot's figures; at as in
// [CommonFigures].
func (l *Lot) WriteText(w io.Writer, at []float64, o TextOptions) error {
	samples := l.Samples(at)
	out := report.NewLayout(o.Width, o.Colour)
	lotTable(out, l.Name, len(l.Fits), samples, nil)
	out.Paragraph("  ", "  ", ToleranceNote)
	for _, c := range l.Cautions() {
		out.Warn(c.Text)
	}
	_, err := io.WriteString(w, out.String())
	return err
}

// Samples collects the figures of a lot; at as in [CommonFigures].
func (l *Lot) Samples(at []float64) []Sample {
	circuit := Circuit([]*Lot{l})
	if circuit == nil {
		return nil
	}
	var out []Sample
	for _, f := range CommonFigures(l.Fits, circuit.Expression, at, nil) {
		out = append(out, l.Sample(f, circuit.Expression, false))
	}
	return out
}

// Limits are those of a figure; NaN is no limit.
type Limits struct{ Low, High float64 }

// WriteTable adds the statistics of a lot of n parts to a text. limits has
// those of each sample, or is nil.
func WriteTable(l *report.Layout, name string, n int, samples []Sample, limits []Limits) {
	lotTable(l, name, n, samples, limits)
	l.Paragraph("  ", "  ", ToleranceNote)
}

func lotTable(l *report.Layout, name string, n int, samples []Sample, limits []Limits) {
	l.Title(fmt.Sprintf("Lot %s: %s", name, count(n, "part")))
	values, spread := Tables(samples, limits)
	l.Table(values, "lrrrrrrr")
	l.Line("")
	l.Table(spread, "lrrrrrl")
}

// Tables gives the statistics of a lot for people in two tables of a row a
// figure, below a header; columns without a heading are empty. limits has those
// of each sample, or is nil.
func Tables(samples []Sample, limits []Limits) (values, spread [][]string) {
	values = [][]string{{"figure", "n", "mean", "s", "median", "least", "largest", "not determined"}}
	spread = [][]string{{"figure", "tolerance interval", "one-sided bounds", "normality", "Cp", "Cpk", "outliers"}}
	open := false
	for i, s := range samples {
		row := []string{s.Figure.String(), strconv.Itoa(s.N), s.text(s.Mean), spreadText(s), s.text(s.Median), s.text(s.Min), s.text(s.Max), ""}
		if s.NotDetermined > 0 {
			row[7] = strconv.Itoa(s.NotDetermined)
			open = true
		}
		values = append(values, row)
		row = []string{s.Figure.String(), "", "", probability(s.AndersonDarlingP), "", "", ""}
		if !math.IsNaN(s.ToleranceLow) {
			row[1] = s.text(s.ToleranceLow) + " … " + s.text(s.ToleranceHigh)
			row[2] = "> " + s.text(s.OneSidedLow) + ", < " + s.text(s.OneSidedHigh)
		}
		if limits != nil {
			cp, cpk := s.Capability(limits[i].Low, limits[i].High)
			row[4], row[5] = index(cp), index(cpk)
		}
		var outliers []string
		for _, o := range s.Outliers {
			outliers = append(outliers, o.Part)
		}
		row[6] = strings.Join(outliers, ", ")
		spread = append(spread, row)
	}
	if !open {
		values[0][7] = ""
	}
	if limits == nil {
		spread[0][4], spread[0][5] = "", ""
	}
	return values, spread
}

func index(v float64) string {
	if math.IsNaN(v) {
		return ""
	}
	return strconv.FormatFloat(v, 'f', 2, 64)
}

// text gives a value to the place of the second digit of the spread.
func (s Sample) text(v float64) string {
	if math.IsNaN(v) {
		return ""
	}
	digits := 4
	if s.SD > 0 && v != 0 {
		digits = max(1, exponent(v)-exponent(s.SD)+2)
	}
	return quantity.Format(v, s.Unit, min(digits, 9))
}

func spreadText(s Sample) string {
	if math.IsNaN(s.SD) {
		return ""
	}
	return quantity.Format(s.SD, s.Unit, 2)
}

func exponent(v float64) int { return int(math.Floor(math.Log10(math.Abs(v)))) }

// probability gives a p with two digits, and below 0.0001 as a bound.
func probability(p float64) string {
	switch {
	case math.IsNaN(p):
		return ""
	case p < 1e-4:
		return "< 0.0001"
	}
	return strconv.FormatFloat(p, 'f', max(2, 1-exponent(min(p, 0.999))), 64)
}

// cells is a row of the table.
func (r Row) cells(wide bool) []string {
	cells := []string{r.name(), r.reference.text(r.reference.Mean), r.lot.text(r.lot.Mean), "", "", ""}
	if r.Difference != nil {
		cells[3] = r.change(*r.Difference, true)
	}
	if r.Low95 != nil {
		cells[4] = strings.TrimSuffix(r.change(*r.Low95, true), " %") + " … " + r.change(*r.High95, true)
		cells[5] = probability(number(r.PHolm))
	}
	if wide {
		detectable := ""
		if r.Detectable != nil {
			detectable = r.change(*r.Detectable, false)
		}
		cells = append(cells, detectable, probability(number(r.MannWhitneyP)), probability(number(r.BrownForsytheP)))
	}
	if r.P == nil {
		return append(cells, "not tested")
	}
	return append(cells, string(r.Verdict))
}

// relative tells whether differences are given as a share of the reference's
// mean: not where values change their sign or are angles.
func (r *Row) relative() bool {
	return r.reference.N > 0 && r.reference.Min > 0 && r.Unit != "°"
}

// change gives a difference for people, in percent of the reference's mean or
// in the unit.
func (r *Row) change(v float64, signed bool) string {
	sign := ""
	if signed && v > 0 {
		sign = "+"
	}
	if r.relative() {
		return sign + percent(v/r.reference.Mean)
	}
	return sign + quantity.Format(v, r.Unit, 2)
}

// percent gives a share with two digits, one decimal at most below 10 %.
func percent(share float64) string {
	p := 100 * share
	digits := 0
	if a := math.Abs(p); a < 9.95 {
		digits = 1
		if a < 0.995 {
			digits = 2
		}
	}
	s := strconv.FormatFloat(p, 'f', digits, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return s + " %"
}

// Answer is what is said in words of one lot against the reference.
type Answer struct {
	Title     string
	Sentences []string
}

// Answers says what was found, a lot at a time: differences first, then what is
// the same, then what this sample does not decide.
func (c *Comparison) Answers() []Answer {
	var out []Answer
	for i, lot := range c.Lots[1:] {
		rows := c.rows(i + 1)
		a := Answer{Title: fmt.Sprintf("%s (%s) against %s (%s)", lot.Name, count(lot.N, "part"), c.Lots[0].Name, count(c.Lots[0].N, "part"))}
		var different, same, open, untested []string
		for i := range rows {
			r := &rows[i]
			switch {
			case r.P == nil:
				untested = append(untested, r.name())
			case r.Verdict == Different:
				different = append(different, r.sentence())
			case r.Verdict == Same:
				same = append(same, r.sentence())
			case r.margin > 0:
				open = append(open, r.sentence())
			}
		}
		a.Sentences = append(a.Sentences, different...)
		a.Sentences = append(a.Sentences, same...)
		a.Sentences = append(a.Sentences, open...)
		a.Sentences = append(a.Sentences, undecided(rows)...)
		if len(untested) > 0 {
			a.Sentences = append(a.Sentences, "Not tested, too few values: "+strings.Join(untested, ", ")+".")
		}
		if len(a.Sentences) == 0 {
			a.Sentences = []string{"The lots have no figure in common."}
		}
		out = append(out, a)
	}
	return out
}

// sentence says what is known of one figure.
func (r *Row) sentence() string {
	d, low, high := *r.Difference, *r.Low95, *r.High95
	level := ""
	if r.Verdict == Same { // two one-sided tests at 5 % are an interval of 90 %
		low, high = Welch(r.lot.Values, r.reference.Values).Interval(1 - 2*significance)
		level = " at 90 %"
	}
	direction := "higher"
	if d < 0 {
		direction = "lower"
		d, low, high = -d, -high, -low
	}
	interval := fmt.Sprintf("%s to %s%s", strings.TrimSuffix(r.change(low, false), " %"), r.change(high, false), level)
	s := fmt.Sprintf("%s: %s is %s %s (%s)", r.name(), r.Lot, r.change(d, false), direction, interval)
	if r.Margin == nil {
		return s + "."
	}
	margin := "the " + percent(r.margin) + " margin"
	if share := 100 * r.margin; share == math.Trunc(share) {
		margin = fmt.Sprintf("the %.0f %% margin", share)
	}
	switch {
	case r.Verdict == Same && r.PHolm != nil && *r.PHolm < significance:
		return s + ", a real difference but inside " + margin + "."
	case r.Verdict == Same:
		return s + ", inside " + margin + "."
	case low > *r.Margin:
		return s + ", beyond " + margin + "."
	case r.Verdict == Different:
		return s + ", not shown to be inside " + margin + "."
	}
	return s + ", not shown to differ and not shown to be inside " + margin + "."
}

// undecided says what was not seen, and what would have been.
func undecided(rows []Row) []string {
	var names, detectable []string
	least, most := math.MaxInt, 0
	for i := range rows {
		r := &rows[i]
		if r.P == nil || r.Verdict != Undecided || r.margin > 0 {
			continue
		}
		names = append(names, r.name())
		least, most = min(least, r.lot.N, r.reference.N), max(most, r.lot.N, r.reference.N)
		if r.Detectable != nil && *r.Detectable > 0 {
			detectable = append(detectable, r.change(*r.Detectable, false)+" in "+r.name())
		}
	}
	if names == nil {
		return nil
	}
	n := fmt.Sprint(least)
	if most > least {
		n += " to " + fmt.Sprint(most)
	}
	s := []string{strings.Join(names, ", ") + ": no difference shown."}
	if detectable != nil {
		s = append(s, fmt.Sprintf("At n = %s a difference of %s would have been seen with 90 %% power.", n, strings.Join(detectable, ", ")))
	}
	return s
}
