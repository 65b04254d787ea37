package fit

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/mat"

	"realpart/models"
	"realpart/models/quantity"
)

// Advice is a sweep that would pin a parameter down.
type Advice struct {
	Parameter string
	// From and To bound the points to add, in Hz; they lie at equal steps of
	// ln f, the ends included, except that an end of the present sweep is
	// not measured again.
	From, To float64
	Points   int
	// Assumed is the value of the parameter that the prediction holds for:
	// the fitted one, or the limit where the sweep gives no value.
	Assumed float64
	// Now and Then are the half-widths of the 95 % interval from scatter, as
	// a share of the value (of an exponent: in the exponent itself), now and
	// with the added points. Now is +Inf where the present sweep does not
	// determine the parameter.
	Now, Then float64
	unit      string // of Assumed
}

// String says what to measure and what it would give.
func (a Advice) String() string {
	now := "± " + percent(a.Now) + " now"
	if math.IsInf(a.Now, 1) {
		now = fmt.Sprintf("not determined now; if %s is %s", a.Parameter, quantity.Format(a.Assumed, a.unit, 2))
	}
	return fmt.Sprintf("%s more from %s to %s: 95 %% interval of %s ± %s (%s)",
		pointCount(a.Points), quantity.Format(a.From, "Hz", 3), quantity.Format(a.To, "Hz", 3), a.Parameter, percent(a.Then), now)
}

// An advice is given if it makes the interval at least that much smaller, and
// no more than so many.
const (
	worthwhile = 0.95
	mostAdvice = 5
)

// Advise predicts from the fit's information matrix how the interval of a
// parameter shrinks when points are added: the sweep extended to lower or
// higher frequencies with the present density of points, or the density
// doubled in a part of it. The best come first. It assumes that the circuit
// holds at the added points and that their scatter is that of the present
// ones.
//
//	C = s²·(JᵀJ + J₊ᵀJ₊)⁻¹
func (r *Result) Advise(name string) ([]Advice, error) {
	i, ok := r.Circuit.Index(name)
	if !ok || r.Parameters[i].Fixed {
		var names []string
		for _, k := range r.Free {
			names = append(names, r.Parameters[k].Name)
		}
		return nil, &InputError{Flag: "--advise", Found: fmt.Sprintf("%q", name), Expected: "a fitted parameter of " + r.Circuit.String() + " (" + strings.Join(names, ", ") + ")"}
	}
	if r.Sigma == 0 || r.DegreesOfFreedom < 1 {
		return nil, nil
	}
	column := slices.Index(r.Free, i)
	values := r.Values()
	q := r.Parameters[i]
	if !q.Determined {
		if v := q.High95; v > 0 {
			values[i] = v
		}
		if v := q.Low95; v > 0 {
			values[i] = v
		}
	}
	present, err := r.rowsAt(r.Freq, values)
	if err != nil {
		return nil, err
	}
	// Parameters that have vanished carry no information and would make the
	// matrix singular.
	var columns []int
	for c, k := range r.Free {
		if c == column || !r.Parameters[k].AtBound {
			columns = append(columns, c)
		}
	}
	halfWidth := func(j *mat.Dense, points int) float64 {
		covariance, rest, _ := regularCovariance(j, columns, r.Sigma*r.Sigma)
		at := slices.Index(rest, column)
		if at < 0 {
			return math.Inf(1)
		}
		u := studentQuantile(0.975, float64(2*points-len(r.Free))) * math.Sqrt(covariance.At(at, at))
		if q.Scale == models.LogitScale {
			u *= q.Scale.Slope(values[i])
		}
		return u
	}
	n := len(r.Freq)
	present95 := halfWidth(present, n)
	now := present95
	if !q.Determined {
		now = math.Inf(1)
	}
	var out []Advice
	for _, freq := range r.extensions() {
		added, err := r.rowsAt(freq, values)
		if err != nil {
			continue // no accuracy stated there
		}
		var both mat.Dense
		both.Stack(present, added)
		then := halfWidth(&both, n+len(freq))
		if !(then < worthwhile*present95) {
			continue
		}
		out = append(out, Advice{Parameter: name, From: freq[0], To: freq[len(freq)-1], Points: len(freq), Assumed: values[i], Now: now, Then: then, unit: q.Unit})
	}
	slices.SortStableFunc(out, func(a, b Advice) int {
		switch {
		case a.Then < b.Then:
			return -1
		case a.Then > b.Then:
			return 1
		}
		return 0
	})
	return out[:min(len(out), mostAdvice)], nil
}

// rowsAt returns the Jacobian of the weighted residuals that points at the
// given frequencies would have.
func (r *Result) rowsAt(freq []float64, values []float64) (*mat.Dense, error) {
	z := make([]complex128, len(freq))
	r.Circuit.NewEvaluator(freq).Impedance(z, values)
	s := *r.problem.settings
	s.Weight, s.S = r.Weight, nil
	pts, err := s.points(freq, z)
	if err != nil {
		return nil, err
	}
	p := newProblem(r.Circuit, pts, r.Weight, &s)
	copy(p.values, values)
	return p.jacobianAt(p.unknowns()), nil
}

// extensions returns the sets of frequencies that an advice considers.
func (r *Result) extensions() [][]float64 {
	n := len(r.Freq)
	first, last := r.Freq[0], r.Freq[n-1]
	if n < 2 {
		return nil
	}
	step := math.Log(last/first) / float64(n-1) // mean distance of points in ln f
	var sets [][]float64
	add := func(from, to float64, skipFrom, skipTo bool) {
		count := max(2, int(math.Round(math.Log(to/from)/step)))
		var freq []float64
		for k := range count + 1 {
			if k == 0 && skipFrom || k == count && skipTo {
				continue
			}
			freq = append(freq, from*math.Pow(to/from, float64(k)/float64(count)))
		}
		sets = append(sets, freq)
	}
	for _, factor := range []float64{2, 5, 10, 30, 100} {
		add(last, last*factor, true, false)
		add(first/factor, first, false, true)
	}
	const parts = 4
	for k := range parts {
		add(first*math.Pow(last/first, float64(k)/parts), first*math.Pow(last/first, float64(k+1)/parts), false, false)
	}
	return sets
}
