package accept

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"

	"realpart/models/quantity"
	"realpart/report"
	"realpart/report/lots"
)

// The names of the forms in JSON.
const (
	Schema    = "realpart.accept/1"
	LotSchema = "realpart.accept-lot/1"
)

// Rule says how a value near a limit is judged.
type Rule string

// The rules of JCGM 106:2012, 8.3.
const (
	// Guarded: pass only if the value is inside the limits by at least its
	// expanded uncertainty U (guarded acceptance, guard band w = U), fail
	// only if it is outside by more than U; between them undecided.
	Guarded Rule = "guarded"
	// Simple: the value alone decides.
	Simple Rule = "simple"
)

// Verdict is the answer on a limit or part.
type Verdict string

// The verdicts.
const (
	Pass      Verdict = "pass"
	Fail      Verdict = "fail"
	Undecided Verdict = "undecided"
)

// Limit is what a figure must keep to; Low or High is NaN where there is no
// limit.
type Limit struct {
	Figure    lots.Figure
	Low, High float64
}

// Judged is a limit with the value of a part. Numbers that do not exist are
// absent in JSON.
type Judged struct {
	Figure string   `json:"figure"`
	AtHz   float64  `json:"at_hz,omitzero"`
	Unit   string   `json:"unit"`
	Low    *float64 `json:"low,omitzero"`
	High   *float64 `json:"high,omitzero"`
	// Value is absent where the sweep does not tell it.
	Value *float64 `json:"value,omitzero"`
	// ExpandedUncertainty U is the larger side of the 95 % interval.
	ExpandedUncertainty *float64 `json:"expanded_uncertainty,omitzero"`
	Verdict             Verdict  `json:"verdict"`
	// Conformity is the probability that the part keeps to the limit.
	Conformity *float64 `json:"conformity,omitzero"`
	// Reason says why a value is missing.
	Reason string `json:"reason,omitzero"`
}

// Part is the verdict on a part: fail if any limit fails, pass if all pass,
// else undecided.
type Part struct {
	Schema  string   `json:"schema"`
	Part    string   `json:"part"`
	File    string   `json:"file,omitzero"`
	Lot     string   `json:"lot,omitzero"`
	Verdict Verdict  `json:"verdict"`
	Limits  []Judged `json:"limits"`
	// Error says why there is no result to judge.
	Error string `json:"error,omitzero"`
}

// Judge judges the record of a part. A part that could not be fitted is
// undecided.
func Judge(f *report.Fit, limits []Limit, rule Rule) Part {
	p := Part{Schema: Schema, Part: f.Sweep.Part, File: f.Sweep.File, Lot: f.Sweep.Lot, Verdict: Pass, Limits: []Judged{}}
	switch f.Status {
	case report.FitFailed:
		p.Verdict = Undecided
		if f.Error != nil {
			p.Error = f.Error.Text
		}
		return p
	case report.NotConverged:
		p.Verdict, p.Error = Undecided, "the fit did not converge"
		return p
	}
	for _, l := range limits {
		j := l.judge(f, rule)
		p.Limits = append(p.Limits, j)
		switch {
		case j.Verdict == Fail:
			p.Verdict = Fail
		case j.Verdict == Undecided && p.Verdict == Pass:
			p.Verdict = Undecided
		}
	}
	return p
}

func (l Limit) judge(f *report.Fit, rule Rule) Judged {
	j := Judged{Figure: l.Figure.Name, AtHz: l.Figure.AtHz, Unit: l.Figure.Unit, Low: finite(l.Low), High: finite(l.High), Verdict: Undecided}
	r, ok := lots.Read(f, l.Figure)
	switch {
	case !ok && l.Figure.AtHz > 0:
		j.Reason = "the record has no such figure at this frequency"
		return j
	case !ok:
		j.Reason = "the circuit " + f.Circuit.Expression + " has no such parameter"
		return j
	case !r.Determined:
		return l.judgeBounds(j, r)
	}
	j.Value = finite(r.Value)
	u := max(r.High-r.Value, r.Value-r.Low)
	j.ExpandedUncertainty = finite(u)
	switch {
	case !math.IsNaN(u):
		j.Conformity = finite(conformity(l, r, f))
	case rule == Guarded && !r.Fixed:
		j.Reason = "the value has no interval"
		return j
	default:
		u = 0
	}
	inside := func(by float64) bool {
		return !(r.Value-by < l.Low) && !(r.Value+by > l.High) // NaN is no limit
	}
	if rule == Simple {
		u = 0
	}
	switch {
	case l.Figure.Outside(f):
		j.Reason = fmt.Sprintf("outside the sweep (%s to %s): from the circuit alone", report.FormatFrequency(f.Sweep.FMin), report.FormatFrequency(f.Sweep.FMax))
	case inside(u):
		j.Verdict = Pass
	case !inside(-u):
		j.Verdict = Fail
	}
	return j
}

// judgeBounds judges a figure of which the sweep tells only bounds: a
// capacitor whose "ESL < 0.3 nH" passes a limit of 5 nH. The bounds are those
// at 95 %, so that the rule does not matter.
func (l Limit) judgeBounds(j Judged, r lots.Reading) Judged {
	j.Reason = "not determined by the sweep"
	switch low, high := !math.IsNaN(r.Low), !math.IsNaN(r.High); {
	case low && high:
		j.Reason += " (" + quantity.Format(r.Low, j.Unit, 2) + " … " + quantity.Format(r.High, j.Unit, 2) + ")"
	case low:
		j.Reason += " (> " + quantity.Format(r.Low, j.Unit, 2) + ")"
	case high:
		j.Reason += " (< " + quantity.Format(r.High, j.Unit, 2) + ")"
	}
	aboveLow := math.IsNaN(l.Low) || r.Low >= l.Low
	belowHigh := math.IsNaN(l.High) || r.High <= l.High
	switch {
	case aboveLow && belowHigh:
		j.Verdict = Pass
		j.Reason += ", but what is known is inside the limits"
	case r.Low > l.High, r.High < l.Low:
		j.Verdict = Fail
		j.Reason += ", but what is known is outside the limits"
	}
	return j
}

// conformity is the probability that the true value is inside the limits, given
// the measured one (JCGM 106:2012, clause 7), for Student's t distribution at
// the degrees of freedom of the fit; of a positive figure in its logarithm, in
// which its interval is symmetric. Where a meter's accuracy was stated, it is
// the normal distribution.
func conformity(l Limit, r lots.Reading, f *report.Fit) float64 {
	free := 0
	for _, p := range f.Parameters {
		if !p.Fixed {
			free++
		}
	}
	nu := float64(2*f.Sweep.UsedPoints - free)
	cdf, t95 := func(z float64) float64 { return 0.5 * math.Erfc(-z/math.Sqrt2) }, distuv.UnitNormal.Quantile(0.975)
	if !f.AccuracyStated() && nu >= 1 {
		cdf = func(z float64) float64 {
			tail := mathext.RegIncBeta(nu/2, 0.5, nu/(nu+z*z)) / 2
			if z > 0 {
				return 1 - tail
			}
			return tail
		}
		t95 = distuv.StudentsT{Sigma: 1, Nu: nu}.Quantile(0.975)
	}
	scale := func(v float64) float64 { return v }
	logarithmic := l.Figure.Positive() && r.Value > 0 && r.Low > 0
	if logarithmic {
		scale = math.Log
	}
	u := (scale(r.High) - scale(r.Low)) / 2 / t95
	below := func(limit float64) float64 { // P(true value ≤ limit)
		switch {
		case logarithmic && limit <= 0:
			return 0
		case u > 0:
			return cdf((scale(limit) - scale(r.Value)) / u)
		case r.Value <= limit:
			return 1
		}
		return 0
	}
	p := 1.0
	if !math.IsNaN(l.High) {
		p = below(l.High)
	}
	if !math.IsNaN(l.Low) {
		p -= below(l.Low)
	}
	return min(max(p, 0), 1)
}

// Lot is the verdict on a lot.
type Lot struct {
	Schema    string `json:"schema"`
	Lot       string `json:"lot"`
	Parts     int    `json:"parts"`
	Pass      int    `json:"pass"`
	Fail      int    `json:"fail"`
	Undecided int    `json:"undecided"`
	// AcceptAtMost is the number of parts that may not pass.
	AcceptAtMost int `json:"accept_at_most"`
	// ShareAt10Percent is the share of nonconforming parts in the population
	// at which a sample of this size would still be accepted with 10 %
	// probability.
	ShareAt10Percent float64 `json:"share_accepted_at_10_percent"`
	Verdict          string  `json:"verdict"` // accepted or rejected
	// Figures are the statistics of the lot for the limits.
	Figures []lots.FigureStatistics `json:"figures"`
	// Cautions say what the verdicts leave out.
	Cautions []lots.Caution `json:"cautions,omitzero"`
}

// The verdicts on a lot.
const (
	Accepted = "accepted"
	Rejected = "rejected"
)

// JudgeLot counts the verdicts of a lot and accepts it if at most so many
// parts do not pass: an undecided part counts as one that does not, which is
// what guarded acceptance means for the buyer.
func JudgeLot(name string, parts []Part, acceptAtMost int) Lot {
	l := Lot{Schema: LotSchema, Lot: name, Parts: len(parts), AcceptAtMost: acceptAtMost, Verdict: Rejected, Figures: []lots.FigureStatistics{}}
	for _, p := range parts {
		switch p.Verdict {
		case Pass:
			l.Pass++
		case Fail:
			l.Fail++
		default:
			l.Undecided++
		}
	}
	if l.Parts > 0 && l.Fail+l.Undecided <= acceptAtMost {
		l.Verdict = Accepted
	}
	l.ShareAt10Percent = LimitingQuality(l.Parts, acceptAtMost, 0.1)
	return l
}

// Caution adds what the reader of the verdicts on a lot must know.
func (l *Lot) Caution(of *lots.Lot, rule Rule) {
	unstated := 0
	for _, f := range of.Fits {
		if !f.AccuracyStated() {
			unstated++
		}
	}
	if unstated > 0 {
		text := "The meter's accuracy is not stated: the probability of conformity covers the scatter of the points alone"
		if rule == Guarded {
			text = "The meter's accuracy is not stated: guard band and probability of conformity cover the scatter of the points alone"
		}
		if unstated < len(of.Fits) {
			text = fmt.Sprintf("For %d of %d parts: %s", unstated, len(of.Fits), text)
		}
		l.Cautions = append(l.Cautions, lots.Caution{Code: "accuracy-not-stated", Text: text + ". Give it with --accuracy."})
	}
	l.Cautions = append(l.Cautions, of.Cautions()...)
}

// Acceptance is the operating characteristic of a sampling plan: the
// probability that a sample of n parts has at most accept nonconforming ones if
// their share in the population is p (binomial).
//
//	P = Σ_{k ≤ accept} C(n, k) pᵏ (1−p)ⁿ⁻ᵏ = 1 − I_p(accept+1, n−accept)
//
// Source: NIST/SEMATECH e-Handbook 6.2.3.2.
func Acceptance(n, accept int, p float64) float64 {
	switch {
	case accept >= n || p <= 0:
		return 1
	case p >= 1:
		return 0
	}
	return mathext.RegIncBeta(float64(n-accept), float64(accept+1), 1-p)
}

// LimitingQuality is the share of nonconforming parts at which a sample of n
// parts with at most accept nonconforming ones is still accepted with the given
// probability: the point of [Acceptance] that the buyer should know. It is 1
// where every sample is accepted.
func LimitingQuality(n, accept int, probability float64) float64 {
	if accept >= n {
		return 1
	}
	return mathext.InvRegIncBeta(float64(accept+1), float64(n-accept), 1-probability)
}

func finite(v float64) *float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return nil
	}
	return &v
}
