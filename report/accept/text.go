package accept

import (
	"fmt"
	"math"
	"strconv"

	"realpart/models/quantity"
	"realpart/report"
	"realpart/report/lots"
)

// fullTable is the number of parts up to which a table lists all limits; of a
// larger lot it lists what does not pass.
const fullTable = 12

// WriteText adds the verdict on a lot to a text: the answer in words, then a
// table of the parts, then the statistics of the lot for the limits.
func WriteText(out *report.Layout, l Lot, parts []Part, rule Rule, samples []lots.Sample, limits []Limit) {
	out.Heading(l.Answer())
	for _, s := range l.Sentences() {
		out.Paragraph("  ", "  ", s)
	}
	for _, c := range l.Cautions {
		out.Warn(c.Text)
	}
	brief := len(parts) > fullTable
	if brief {
		out.Title("Parts that do not pass, and why; --json has all")
	} else {
		out.Title("Parts")
	}
	if rows := Table(parts, brief); len(rows) > 1 {
		out.Table(rows, "lllrrrl")
	} else {
		out.Line("  none")
	}
	out.Paragraph("  ", "  ", RuleNote(rule))
	if len(samples) > 0 && len(parts) > 1 {
		var of []lots.Limits
		for _, limit := range limits {
			of = append(of, lots.Limits{Low: limit.Low, High: limit.High})
		}
		lots.WriteTable(out, l.Lot, l.Parts, samples, of)
	}
}

// RuleNote says what the verdicts of a rule mean.
func RuleNote(rule Rule) string {
	if rule == Guarded {
		return "Guarded acceptance (JCGM 106:2012): pass is inside the limits by the expanded uncertainty ±, fail outside by more than that, else undecided. Conformity: probability that the part keeps to the limits."
	}
	return "Simple acceptance (JCGM 106:2012): the value alone decides; near a limit the risk of a wrong verdict is up to one half. Conformity: probability that the part keeps to the limits."
}

// Table lists the limits of parts for people, below a header; brief leaves out
// what passes.
func Table(parts []Part, brief bool) [][]string {
	rows := [][]string{{"part", "figure", "limits", "value", "±", "conformity", "verdict"}}
	for _, p := range parts {
		if brief && p.Verdict == Pass {
			continue
		}
		name := p.Part
		if p.Error != "" {
			rows = append(rows, []string{name, "", "", "", "", "", "undecided: " + p.Error})
			continue
		}
		for _, j := range p.Limits {
			if brief && j.Verdict == Pass {
				continue
			}
			rows = append(rows, append([]string{name}, j.cells()...))
			name = ""
		}
	}
	return rows
}

// Answer is the verdict on a lot in words.
func (l Lot) Answer() string {
	s := "Lot " + l.Lot + ": " + l.Verdict
	if l.AcceptAtMost > 0 {
		s += fmt.Sprintf(" (at most %d may not pass)", l.AcceptAtMost)
	}
	return s
}

// Sentences are the counts, and what a sample of this size can tell.
func (l Lot) Sentences() []string {
	parts := "parts"
	if l.Parts == 1 {
		parts = "part"
	}
	out := []string{fmt.Sprintf("%d %s: %d pass, %d fail, %d undecided.", l.Parts, parts, l.Pass, l.Fail, l.Undecided)}
	if l.Parts > 0 && l.ShareAt10Percent < 1 {
		out = append(out, fmt.Sprintf("What this sample can tell: a lot with %s of nonconforming parts would still be accepted with 10 %% probability (n = %d, at most %d).",
			report.FormatPercent(l.ShareAt10Percent), l.Parts, l.AcceptAtMost))
	}
	return out
}

// cells is a row of the table without the part.
func (j Judged) cells() []string {
	figure := lots.Figure{Name: j.Figure, AtHz: j.AtHz, Unit: j.Unit}
	limit := ""
	switch {
	case j.Low != nil && j.High != nil:
		limit = quantity.Format(*j.Low, j.Unit, significant(*j.Low)) + " … " + quantity.Format(*j.High, j.Unit, significant(*j.High))
	case j.Low != nil:
		limit = "≥ " + quantity.Format(*j.Low, j.Unit, significant(*j.Low))
	case j.High != nil:
		limit = "≤ " + quantity.Format(*j.High, j.Unit, significant(*j.High))
	}
	cells := []string{figure.String(), limit, "", "", "", string(j.Verdict)}
	if j.Value != nil && j.ExpandedUncertainty != nil {
		value, u, unit := quantity.FormatUncertain(*j.Value, *j.ExpandedUncertainty, j.Unit)
		cells[2], cells[3] = value+" "+unit, u
		if unit == "" {
			cells[2] = value
		}
	}
	if j.Conformity != nil {
		cells[4] = conformityText(*j.Conformity)
	}
	if j.Reason != "" {
		cells[5] += ": " + j.Reason
	}
	return cells
}

// significant is the number of digits that a limit needs, three at least.
func significant(v float64) int {
	for digits := 3; digits < 9; digits++ {
		rounded, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'e', digits-1, 64), 64)
		if math.Abs(rounded-v) <= 1e-12*math.Abs(v) {
			return digits
		}
	}
	return 9
}

// conformityText gives a probability in percent, without claiming certainty.
func conformityText(p float64) string {
	switch {
	case p > 0.9999:
		return "> 99.99 %"
	case p < 0.0001:
		return "< 0.01 %"
	}
	return strconv.FormatFloat(100*p, 'f', 2, 64) + " %"
}
