package fit

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"
	"strings"

	"gonum.org/v1/gonum/mat"

	"realpart/models"
	"realpart/models/quantity"
)

// warn adds what the reader of the result must know.
func (a *Analysis) warn(freq []float64, z []complex128, s *Settings) {
	add := func(code, format string, args ...any) {
		a.Warnings = append(a.Warnings, Warning{code, fmt.Sprintf(format, args...)})
	}
	r := a.Result
	if !r.Status.Converged() {
		add("not-converged", "The fit did not converge: %s. The values are the best found.", r.Reason)
	}
	if n := countNonPassive(z); n > 0 {
		add("non-passive-points", "%s of %d with a negative resistance, which no passive part has; they were fitted as they are. Where the resistance is far below |Z| this is the meter's phase error.", pointCount(n), len(z))
	}
	for c, i := range r.Free {
		q := r.Parameters[i]
		if q.Determined {
			continue
		}
		text := fmt.Sprintf("%s is not determined by this sweep: %s.", q.Name, q.Why)
		if limit := q.Limit(); limit != "" {
			text += " All that can be said is " + limit + "."
		}
		if partner, where := r.confusedWith(c); partner != "" && !q.AtBound {
			text += fmt.Sprintf(" %s and %s cannot be told apart %s.", q.Name, partner, where)
		}
		add("not-determined", "%s", text)
	}
	if n := len(r.SetAside); n > 0 {
		var at []string
		for _, f := range r.SetAside[:min(n, 12)] {
			at = append(at, quantity.Format(f, "Hz", 4))
		}
		more := ""
		if n > 12 {
			more = fmt.Sprintf(" and %d more", n-12)
		}
		add("points-set-aside", "The robust fit set aside in effect %s: %s%s.", pointCount(n), strings.Join(at, ", "), more)
	}
	if r.Structured {
		a.structure(freq, z, s)
	}
	if a.Alternative = r.second(); a.Alternative != nil {
		var values []string
		for _, i := range r.Free {
			values = append(values, r.Parameters[i].Name+" = "+quantity.Format(a.Alternative[i], r.Parameters[i].Unit, 4))
		}
		add("second-solution", "Another set of values describes the sweep equally well: %s. The sweep cannot say which is the part's.", listed(values))
	}
	if from, below := r.resolvedFrom(); below {
		if from > 0 {
			add("below-resolution", "The resistance is smaller than the meter can resolve (|Z| times its phase accuracy) in part of the sweep; it is resolved from %s on.", quantity.Format(from, "Hz", 3))
		} else {
			add("below-resolution", "The resistance is smaller than the meter can resolve (|Z| times its phase accuracy) in the whole sweep.")
		}
	}
}

// percent prints a share with two significant digits.
func percent(share float64) string { return quantity.Format(100*share, "%", 2) }

func pointCount(n int) string { return quantity.Count(n, "point") }

// countNonPassive counts points with a negative resistance, beyond what the
// rounding of the numbers in a file explains.
func countNonPassive(z []complex128) int {
	n := 0
	for _, v := range z {
		if real(v) < -roundingFloor*abs(v) {
			n++
		}
	}
	return n
}

// Limit says in the notation of a bound, such as "ESL < 0.3 nH", what is
// known of a parameter that is not determined, rounded outwards; "" if nothing
// is.
func (p Parameter) Limit() string {
	low, high := !math.IsNaN(p.Low95), !math.IsNaN(p.High95)
	number := func(v float64, up bool) string {
		v = quantity.Outward(v, up)
		if p.Scale == models.LogitScale {
			return fmt.Sprintf("%.2g", v)
		}
		return quantity.Format(v, p.Unit, 2)
	}
	switch {
	case low && high:
		return fmt.Sprintf("%s < %s < %s", number(p.Low95, false), p.Name, number(p.High95, true))
	case low:
		return fmt.Sprintf("%s > %s", p.Name, number(p.Low95, false))
	case high:
		return fmt.Sprintf("%s < %s", p.Name, number(p.High95, true))
	}
	return ""
}

// Two parameters whose effects on the residual have at least this cosine over
// a range of frequencies cannot be told apart there.
const alike = 0.999

// confusedWith names the parameter that a free parameter, given by its
// column, is most correlated with, and where in the sweep the two have the
// same effect. It returns "" where there is none.
func (r *Result) confusedWith(column int) (name, where string) {
	p := r.problem
	j := p.jacobianAt(r.x)
	best, size := -1, 0.9
	for c := range r.Free {
		if c == column {
			continue
		}
		v := math.Abs(r.Correlation.At(column, c))
		if v == 0 { // left out of the covariance
			v = math.Abs(cosine(j, column, c, 0, len(r.Freq)))
		}
		if v > size {
			best, size = c, v
		}
	}
	if best < 0 {
		return "", ""
	}
	name = r.Parameters[r.Free[best]].Name
	n := len(r.Freq)
	below, above := 0, n
	for below < n && math.Abs(cosine(j, column, best, 0, below+1)) >= alike {
		below++
	}
	for above > 0 && math.Abs(cosine(j, column, best, above-1, n)) >= alike {
		above--
	}
	const few = 4
	switch {
	case below == n || above == 0:
		where = "anywhere in this sweep"
	case below >= n-above && below > few:
		where = "below " + quantity.Format(r.Freq[below], "Hz", 2)
	case n-above > few:
		where = "above " + quantity.Format(r.Freq[above-1], "Hz", 2)
	default:
		where = fmt.Sprintf("in this sweep (correlation %.3f)", size)
	}
	return name, where
}

// cosine returns the cosine of the angle between two columns of a Jacobian
// over the points from ≤ i < to.
func cosine(j *mat.Dense, a, b, from, to int) float64 {
	var ab, aa, bb float64
	for i := 2 * from; i < 2*to; i++ {
		x, y := j.At(i, a), j.At(i, b)
		ab += x * y
		aa += x * x
		bb += y * y
	}
	if aa == 0 || bb == 0 {
		return 0
	}
	return ab / math.Sqrt(aa) / math.Sqrt(bb)
}

// structure warns of a circuit that does not describe the part: where it
// deviates, and which other circuit of the kind does better.
func (a *Analysis) structure(freq []float64, z []complex128, s *Settings) {
	r := a.Result
	from, to, size := r.deviation()
	where := fmt.Sprintf("from %s to %s, by %s", quantity.Format(from, "Hz", 3), quantity.Format(to, "Hz", 3), percent(size))
	if r.insideAccuracy() {
		a.Warnings = append(a.Warnings, Warning{"structured-residual", fmt.Sprintf(
			"The residuals are not noise, but inside the meter's stated accuracy: what %s leaves, most %s, may be the meter's.", r.Circuit, where)})
		return
	}
	text := fmt.Sprintf("The residuals are not noise: the circuit %s does not describe the part to the accuracy of the points. It deviates most %s.", r.Circuit, where)
	name, rms, least := "", 0.0, math.Inf(1)
	consider := func(candidate string, relative, aicc float64) {
		if relative < 0.7*r.RMSRelative && aicc < least {
			name, rms, least = candidate, relative, aicc
		}
	}
	try := func(kind models.Kind) {
		free := *s
		free.Fixed, free.Start, free.Bounds = nil, nil, nil
		others := Analysis{Kind: kind}
		if others.fitAllBy(glance, freq, z, models.OfKind(kind), free.resolve()) != nil {
			return
		}
		for _, c := range others.Candidates {
			if c.Result != nil {
				consider(c.Name, c.Result.RMSRelative, c.Result.aicc(c.Result.Cost, 0))
			}
		}
	}
	if len(a.Candidates) > 1 {
		for _, c := range a.Candidates {
			if c.Result != nil {
				consider(c.Name, c.Result.RMSRelative, c.AICc)
			}
		}
	} else {
		try(a.Kind)
	}
	if name != "" {
		text += fmt.Sprintf(" %s takes up much of it (rms %s instead of %s).", name, percent(rms), percent(r.RMSRelative))
	} else {
		if r.RMSRelative > farOff {
			for _, kind := range models.Kinds() {
				if kind != a.Kind {
					try(kind)
				}
			}
		}
		if m, ok := models.Lookup(name); ok {
			text += fmt.Sprintf(" No other circuit of the library for %s does much better, but %s for %s does (rms %s instead of %s): see --kind.", article(a.Kind), name, article(m.Kind), percent(rms), percent(r.RMSRelative))
		} else {
			text += " No other circuit of the library for this kind of part does much better; check the measurement."
		}
	}
	a.Warnings = append(a.Warnings, Warning{"structured-residual", text})
}

// farOff is the relative rms residual above which a circuit misses a part by
// so much that it may be of another kind.
const farOff = 0.05

// deviation finds the range of frequencies in which the residual, smoothed
// over neighbours, is largest, and its size there.
func (r *Result) deviation() (from, to, size float64) {
	n := len(r.Freq)
	half := max(1, n/60)
	smooth := make([]float64, n)
	for i := range smooth {
		var sum complex128
		a, b := max(0, i-half), min(n-1, i+half)
		for k := a; k <= b; k++ {
			sum += r.Residuals[k]
		}
		smooth[i] = cmplx.Abs(sum) / float64(b-a+1)
	}
	top := 0
	for i, v := range smooth {
		if v > smooth[top] {
			top = i
		}
	}
	a, b := top, top
	for a > 0 && smooth[a-1] > smooth[top]/2 {
		a--
	}
	for b < n-1 && smooth[b+1] > smooth[top]/2 {
		b++
	}
	return r.Freq[a], r.Freq[b], smooth[top]
}

// resolvedFrom returns the lowest frequency in Hz from which on the
// resistance of the model exceeds what the meter resolves, |Z| times its
// phase accuracy. below is false where the resistance is resolved in the
// whole sweep or no accuracy was stated; from is 0 where it nowhere is.
func (r *Result) resolvedFrom() (from float64, below bool) {
	p := r.problem
	if p.phase == nil {
		return 0, false
	}
	for i, z := range r.Model {
		if real(z) >= abs(z)*p.phase[i] {
			if from == 0 {
				from = r.Freq[i]
			}
		} else {
			below = true
		}
	}
	return from, below
}

// second looks for another solution with other values that describes the
// sweep as well, within what the 95 % interval of one parameter allows, and
// returns the values of all parameters; nil if there is none. It looks where
// such solutions exist: circuits with at least four unknowns, but ladders only
// if an element is not clearly seen.
func (r *Result) second() []float64 {
	if len(r.Free) < 4 || r.Sigma == 0 || ladder(r.Circuit.Root()) && r.clearlySeen() {
		return nil
	}
	p := r.problem
	s := p.settings
	lower, upper := p.bounds(s)
	search := p.newSearch()
	search.all(false)
	t := studentQuantile(0.975, float64(r.DegreesOfFreedom))
	defer p.set(r.x)
	for _, c := range search.best {
		if c.cost > 3*search.best[0].cost {
			break
		}
		other, err := p.polish(c.x, lower, upper, s.Robust)
		if err != nil || !(2*(other.Cost-r.Cost) <= t*t*r.Sigma*r.Sigma) {
			continue
		}
		p.set(other.X)
		order(p.circuit, p.values, s)
		x := p.unknowns()
		for c, i := range r.Free {
			if r.Parameters[i].Determined && math.Abs(x[c]-r.x[c]) > max(0.01, 5*math.Sqrt(r.Covariance.At(c, c))) {
				return slices.Clone(p.values)
			}
		}
	}
	return nil
}

// clearlySeen reports whether every free parameter is, see the constant of this
// name.
func (r *Result) clearlySeen() bool {
	for c, i := range r.Free {
		if v := r.Covariance.At(c, c); !r.Parameters[i].Determined || !(v < clearlySeen*clearlySeen) {
			return false
		}
	}
	return true
}

// sortedWarnings puts warnings that question the whole result first.
func sortedWarnings(w []Warning) []Warning {
	rank := func(c string) int {
		return slices.Index([]string{"not-converged", "structured-residual", "no-candidate-determined"}, c)
	}
	out := slices.Clone(w)
	slices.SortStableFunc(out, func(a, b Warning) int {
		ra, rb := rank(a.Code), rank(b.Code)
		if ra < 0 {
			ra = 9
		}
		if rb < 0 {
			rb = 9
		}
		return ra - rb
	})
	return out
}
