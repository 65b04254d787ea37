package rational

import (
	"math"
	"math/cmplx"
	"slices"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"
)

// A Step is a sudden change of level between two neighbouring points, such as a meter changing its range makes.
type Step struct {
	Index    int     // of the first point after the step
	Freq     float64 // Hz, geometric mean of the two neighbours
	Relative float64 // change of level upwards in frequency: |Z| after the step is (1 + Relative) times what it should be
	Sigma    float64 // standard deviation of ln(1 + Relative)
	P        float64 // probability of such a step anywhere in a sweep of pure noise (t test, times the number of positions)
}

// StepSettings of Steps. The zero value of a field means its default.
type StepSettings struct {
	Settings           // of the rational model
	FalseAlarm float64 // largest P to report; default 0.001
	MaxSteps   int     // most steps to look for; default 6
}

const defaultMaxSteps = 6

// edge is how many points must lie on either side of a step: fewer are outliers, not a level.
const edge = 4

// Steps finds multiplicative level steps: it compares the rational model of the sweep with and without a factor exp(δ) on all points
// from a position on, at each position, by the likelihood ratio in the model linearised about its fit. As extra poles can mimic a step in
// part, every accepted order is compared, fewer poles with a step against more poles without, by the Bayesian information criterion;
// what is found is confirmed by a new fit of the levelled sweep, and must not be
// denied by the neighbouring points alone. A single outlying point is not a step and is kept apart.
//
// The steps come in the order of frequency; none is an empty slice. Errors are those of Fit; 24 points are needed.
func Steps(freq []float64, z []complex128, s *StepSettings) ([]Step, error) {
	var c StepSettings
	if s != nil {
		c = *s
	}
	if c.FalseAlarm == 0 {
		c.FalseAlarm = 0.001
	}
	if c.MaxSteps == 0 {
		c.MaxSteps = defaultMaxSteps
	}
	if err := checkSweep(freq, z, 24); err != nil {
		return nil, err
	}
	settings, err := c.Settings.checked(len(freq))
	if err != nil {
		return nil, err
	}
	d := newSweep(freq, z, settings.Margin, ends{!settings.NoSlope, !settings.NoOrigin})
	return d.steps(freq, d.grow(&settings), &settings, &c), nil
}

// steps continues from the growth of the sweep as measured.
func (d *sweep) steps(freq []float64, g *growth, settings *Settings, c *StepSettings) []Step {
	n := len(d.x)
	level := append([]complex128(nil), d.z...)
	found := []Step{}
	for len(found) < c.MaxSteps {
		place, delta := d.propose(g)
		if place < 0 {
			break
		}
		trial := *d
		trial.z = levelled(level, place, delta)
		h := trial.grow(settings)
		// With the poles of the levelled sweep, free of the step, its place, size and scatter are told once more.
		t := trial.scan(h.last(), place, delta)
		if t.at < 0 {
			break
		}
		at, total := t.at, t.delta[t.at]
		if slices.ContainsFunc(found, func(s Step) bool { return s.Index == at }) {
			break
		}
		k := trial.coefficients(h.last().m)
		dof := float64(2*n - k - 1)
		sigma := math.Sqrt(t.rest[at] / dof / t.weight[at])
		p := float64(n) * 2 * distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}.Survival(math.Abs(total)/sigma)
		if !(p < c.FalseAlarm) || refuted(freq, level, at, total) ||
			!(d.criterion(t.rest[at], k+1)+d.evidence() < d.criterion(g.last().rss, d.coefficients(g.last().m))) {
			break
		}
		level = levelled(level, at, total)
		found = append(found, Step{Index: at, Freq: math.Sqrt(freq[at-1] * freq[at]), Relative: math.Expm1(total), Sigma: sigma, P: min(p, 1)})
		trial.z = level
		if at != place || math.Abs(total-delta) > sigma {
			h = trial.grow(settings)
		}
		d, g = &trial, h
	}
	slices.SortFunc(found, func(a, b Step) int { return a.Index - b.Index })
	return found
}

// levelled divides the points from at on by exp(delta).
func levelled(z []complex128, at int, delta float64) []complex128 {
	out := append([]complex128(nil), z...)
	for i := at; i < len(out); i++ {
		out[i] /= complex(math.Exp(delta), 0)
	}
	return out
}

// criterion is the Bayesian information criterion of k coefficients, 2n real residuals.
func (d *sweep) criterion(rss float64, k int) float64 {
	n := float64(2 * len(d.x))
	return n*math.Log(rss/n) + float64(k)*math.Log(n)
}

// evidence is how much better the criterion must be with a step. Its position is one more parameter, chosen among n; and poles are
// there in every sweep but steps in few: at even odds, one step would often stand for two weak poles. 15 are odds of e^7.5 to 1.
func (d *sweep) evidence() float64 { return 2*math.Log(float64(len(d.x))) + 15 }

// propose returns the position and size of the step that helps most, or −1 where no order is better with one.
func (d *sweep) propose(g *growth) (at int, delta float64) {
	at = -1
	best := math.Inf(1)
	for _, st := range g.accepted {
		k := d.coefficients(st.m)
		best = min(best, d.criterion(st.rss, k))
	}
	for _, st := range g.accepted {
		k := d.coefficients(st.m)
		t := d.scan(st, 0, 0)
		if t.at < 0 {
			continue
		}
		if v := d.criterion(t.rest[t.at], k+1) + d.evidence(); v < best {
			best, at, delta = v, t.at, t.delta[t.at]
		}
	}
	return at, delta
}

// A scan holds, for a step at each position, its least-squares size, the weight gᵀ(1−QQᵀ)g, and the sum of squares with it.
type scan struct {
	delta, weight, rest []float64
	at                  int // the position of the smallest rest, −1 where a single outlying point explains it better
}

// scan tries a step at each position in the linearised model: ρ + J·Δθ − δ·1(i ≥ k) in the real (magnitude) rows. A step of size
// removed, already taken out of the data from position from on, is put back first.
func (d *sweep) scan(st *state, from int, removed float64) *scan {
	n := len(d.x)
	// Poles at the edge of the band are not frozen here: what they could take up across it is no step.
	f := factor(d.jacobian(st.m), true)
	r := make([]float64, len(st.r)) // ln(measured/model), which a level raised by δ raises by δ
	for i, v := range st.r {
		r[i] = -v
	}
	for i := from; i < n; i++ {
		r[i] += removed
	}
	f.project(r)
	rr := floats.Dot(r, r)
	t := &scan{make([]float64, n), make([]float64, n), make([]float64, n), -1}
	// 1(i ≥ k) projected: with c_k = Qᵀ1(i ≥ k) by suffix sums, gᵀ(1−QQᵀ)g = (n−k) − |c_k|², gᵀr = Σ_{i≥k} r_i.
	c := make([]float64, len(f.q))
	sum := 0.0
	for k := n - 1; k >= 0; k-- {
		sum += r[k]
		for j, q := range f.q {
			c[j] += q[k]
		}
		w := float64(n-k) - floats.Dot(c, c)
		t.rest[k] = math.Inf(1)
		if k < edge || k > n-edge || !(w > 1e-6) {
			continue
		}
		t.delta[k], t.weight[k], t.rest[k] = sum/w, w, rr-sum*sum/w
		if t.at < 0 || t.rest[k] < t.rest[t.at] {
			t.at = k
		}
	}
	if t.at >= 0 && d.outlier(f, r, t.at) > rr-t.rest[t.at] {
		t.at = -1
	}
	return t
}

// refuted says whether the points next to position at deny a step of size delta: a cubic of ln|Z| in ln f with a free step, through ten
// points on either side, gives another size by more than four standard deviations. This needs no rational model: where none fits, a
// step may mend the misfit of the whole sweep and yet be nowhere in the points.
func refuted(freq []float64, z []complex128, at int, delta float64) bool {
	const reach, terms = 10, 5
	lo, hi := max(at-reach, 0), min(at+reach, len(z))
	n := hi - lo
	cols := make([][]float64, terms)
	for j := range cols {
		cols[j] = make([]float64, n)
	}
	b := make([]float64, n)
	for i := range n {
		u := math.Log(freq[lo+i]/freq[at]) / math.Log(freq[hi-1]/freq[lo])
		cols[0][i], cols[1][i], cols[2][i], cols[3][i] = 1, u, u*u, u*u*u
		if lo+i >= at {
			cols[4][i] = 1
		}
		b[i] = math.Log(cmplx.Abs(z[lo+i]) / cmplx.Abs(z[at]))
	}
	f := factor(cols, false)
	size := f.solve(f.project(b))[terms-1]
	// The step is the last column, so its variance is s²/(r·scale)².
	sigma := floats.Norm(b, 2) / math.Sqrt(float64(n-terms)) / (f.r[terms-1][terms-1] * f.scale[terms-1])
	return math.Abs(size-delta) > 4*sigma
}

// outlier returns the largest fall of the sum of squares that freeing one point next to position k gives.
func (d *sweep) outlier(f *factored, r []float64, k int) float64 {
	n := len(d.x)
	best := 0.0
	for i := k - 2; i <= k+1; i++ {
		gain := 0.0
		for _, row := range []int{i, n + i} {
			w := 1.0
			for _, q := range f.q {
				w -= q[row] * q[row]
			}
			if w > 1e-6 {
				gain += r[row] * r[row] / w
			}
		}
		best = max(best, gain)
	}
	return best
}
