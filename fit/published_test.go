package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"realpart/fit/lm"
	"realpart/models"
)

// AICc of a published example: the cement data of Hald (13 observations), for
// the model with the first two regressors, K = 4 with intercept and variance.
// Residual sum of squares 57.90: Draper and Smith, Applied Regression
// Analysis; AICc 32.41: Burnham and Anderson 2002, Model Selection and
// Multimodel Inference, chapter 3. Both from memory.
func TestAICcPublished(t *testing.T) {
	if got := aicc(57.90, 13, 4); !(math.Abs(got-32.41) < 0.01) {
		t.Errorf("AICc = %.3f, want 32.41", got)
	}
}

// Profile intervals of a published example: the rate of an enzyme reaction
// with puromycin, v = θ₁·x/(θ₂ + x) (Bates and Watts 1988, Nonlinear
// Regression Analysis and Its Applications, table A1.3; data and results from
// memory). Least squares gives θ₁ = 212.7, θ₂ = 0.0641, s = 10.93; the 95 %
// profile t intervals are 197.3 to 229.3 and 0.0469 to 0.0862.
func TestProfilePublished(t *testing.T) {
	x := []float64{0.02, 0.02, 0.06, 0.06, 0.11, 0.11, 0.22, 0.22, 0.56, 0.56, 1.10, 1.10}
	v := []float64{76, 47, 97, 107, 123, 139, 159, 152, 191, 201, 207, 200}
	rate := lm.Problem{
		Size: len(x),
		Residual: func(dst, theta []float64) {
			for i := range x {
				dst[i] = theta[0]*x[i]/(theta[1]+x[i]) - v[i]
			}
		},
		Jacobian: func(dst *mat.Dense, theta []float64) {
			for i := range x {
				d := theta[1] + x[i]
				dst.Set(i, 0, x[i]/d)
				dst.Set(i, 1, -theta[0]*x[i]/(d*d))
			}
		},
	}
	solution, err := lm.Solve(rate, []float64{205, 0.08}, nil)
	if err != nil {
		t.Fatal(err)
	}
	const nu = 10
	s := math.Sqrt(2 * solution.Cost / nu)
	covariance, err := lm.Covariance(solution.Jacobian, s*s)
	if err != nil {
		t.Fatal(err)
	}
	lower, upper := []float64{1, 1e-4}, []float64{1e4, 10}
	q := &profiler{
		result: &Result{Covariance: covariance}, lm: rate, x: solution.X, cost: solution.Cost,
		lower: lower, upper: upper, sigma: s, settings: new(problem).precise([]float64{1, 1e-4}, []float64{1e4, 10}),
	}
	q.settings.UnitScaling, q.settings.MaxStep = false, 0
	level := studentQuantile(0.975, nu)
	for _, row := range []struct {
		name            string
		got, want, last float64 // last: a unit of the last printed digit
	}{
		{"θ₁", solution.X[0], 212.7, 0.1}, {"θ₂", solution.X[1], 0.0641, 0.0001}, {"s", s, 10.93, 0.01},
		{"low θ₁", limitOf(t, q, 0, -1, level), 197.3, 0.1}, {"high θ₁", limitOf(t, q, 0, 1, level), 229.3, 0.1},
		{"low θ₂", limitOf(t, q, 1, -1, level), 0.0469, 0.0001}, {"high θ₂", limitOf(t, q, 1, 1, level), 0.0862, 0.0001},
	} {
		if !(math.Abs(row.got-row.want) <= row.last) {
			t.Errorf("%s = %.6g, want %v", row.name, row.got, row.want)
		}
	}
}

func limitOf(t *testing.T, q *profiler, column int, direction, level float64) float64 {
	t.Helper()
	x, open, err := q.limit(column, direction, level)
	if err != nil || open {
		t.Fatalf("column %d, direction %v: open %v, error %v", column, direction, open, err)
	}
	return x
}

// Every weight finds the values when the noise is what the weight assumes,
// with intervals that cover them.
func TestWeights(t *testing.T) {
	p := exact(t, "cap-esr-esl", map[string]float64{"ESR": 20e-3, "ESL": 5e-9, "C": 10e-6}, 1e4, 1e7, 101)
	const z0 = 50.0
	for _, c := range []struct {
		name     string
		settings Settings
		noise    func(r *rand.Rand, z complex128) complex128
	}{
		{"relative", Settings{}, func(r *rand.Rand, z complex128) complex128 {
			return z * complex(1+0.001*r.NormFloat64(), 0.001*r.NormFloat64())
		}},
		{"uniform", Settings{Weight: Uniform}, func(r *rand.Rand, z complex128) complex128 {
			return z + complex(1e-4*r.NormFloat64(), 1e-4*r.NormFloat64())
		}},
		// Magnitude ten times worse than phase, as stated.
		{"accuracy", Settings{Weight: Accuracy, Accuracy: func(_, _ float64) (float64, float64, bool) { return 0.01, 0.001, true }},
			func(r *rand.Rand, z complex128) complex128 {
				return z * complex(1+0.003*r.NormFloat64(), 0.0003*r.NormFloat64())
			}},
		{"s-parameter shunt", Settings{Weight: SParameter, Reference: z0, Connection: ShuntThru}, sNoise(ShuntThru, z0)},
		{"s-parameter reflection", Settings{Weight: SParameter, Reference: z0, Connection: Reflection}, sNoise(Reflection, z0)},
		{"s-parameter series", Settings{Weight: SParameter, Reference: z0, Connection: SeriesThru}, sNoise(SeriesThru, z0)},
	} {
		const cases = 200
		covered := 0
		for seed := range cases {
			r := rand.New(rand.NewPCG(uint64(seed), 16))
			z := make([]complex128, len(p.z))
			for i, v := range p.z {
				z[i] = c.noise(r, v)
			}
			result, err := Fit(p.freq, z, p.circuit, &c.settings)
			if err != nil {
				t.Fatalf("%s: %v", c.name, err)
			}
			for i, q := range result.Parameters {
				scatter := studentQuantile(0.975, float64(result.DegreesOfFreedom)) * q.StdError
				if math.Abs(q.Value-p.values[i]) <= scatter {
					covered++
				}
			}
		}
		share := float64(covered) / (3 * cases)
		t.Logf("%s: truth within the scatter interval in %.1f %%", c.name, 100*share)
		// three standard errors of a share of 95 % in 600 (the three are
		// correlated little)
		if !(math.Abs(share-0.95) < 0.027) {
			t.Errorf("%s: covered in %.1f %%, want 95 %%", c.name, 100*share)
		}
	}
}

// sNoise adds uniform noise to the S-parameter that an impedance shows.
func sNoise(c Connection, z0 float64) func(*rand.Rand, complex128) complex128 {
	return func(r *rand.Rand, z complex128) complex128 {
		s, _ := c.sParameter(z, z0)
		s += complex(1e-5*r.NormFloat64(), 1e-5*r.NormFloat64())
		ref := complex(z0, 0)
		switch c {
		case SeriesThru:
			return 2 * ref * (1 - s) / s
		case ShuntThru:
			return ref / 2 * s / (1 - s)
		}
		return ref * (1 + s) / (1 - s)
	}
}

// S-parameters of known impedances, Z₀ = 50 Ω, computed by hand from the
// definitions of the reflection, series-thru and shunt-thru methods (general
// measurement literature).
func TestSParameters(t *testing.T) {
	for _, row := range []struct {
		z                         complex128
		reflection, series, shunt complex128
	}{
		{25, -1. / 3, 0.8, 0.5},
		{complex(50, 50), complex(0.2, 0.4), complex(0.6, -0.2), complex(0.7692307692, 0.1538461538)},
		{complex(0, -100), complex(0.6, -0.8), complex(0.5, 0.5), complex(0.9411764706, -0.2352941176)},
		{10000, 0.9900497512, 9.900990099e-3, 0.9975062344},
	} {
		for c, want := range map[Connection]complex128{Reflection: row.reflection, SeriesThru: row.series, ShuntThru: row.shunt} {
			got, slope := c.sParameter(row.z, 50)
			if !(abs(got-want) < 1e-9) {
				t.Errorf("%s of %v Ω: S = %v, want %v", c, row.z, got, want)
			}
			step := complex(1e-6*abs(row.z), 0)
			up, _ := c.sParameter(row.z+step, 50)
			down, _ := c.sParameter(row.z-step, 50)
			if !(abs((up-down)/(2*step)-slope) < 1e-7*abs(slope)) {
				t.Errorf("%s of %v Ω: slope %v, by differences %v", c, row.z, slope, (up-down)/(2*step))
			}
		}
	}
}

// The Jacobian of every weight, with and without the robust loss and with the
// meter's unknowns, agrees with central differences.
func TestJacobians(t *testing.T) {
	m, _ := models.Lookup("cap-two-branch")
	p := coverageParts(t, 21)[1]
	z := p.noisy(rand.New(rand.NewPCG(1, 17)), 0.05)
	accuracy := func(f, _ float64) (float64, float64, bool) { return 0.001 + 1e-9*f, 0.002, true }
	for _, w := range Weights() {
		for _, scale := range []float64{0, 0.03} {
			s := &Settings{Weight: w, Accuracy: accuracy, Reference: 50, Connection: ShuntThru}
			pts, err := s.points(p.freq, z)
			if err != nil {
				t.Fatal(err)
			}
			q := newProblem(m.Circuit, pts, w, s)
			q.scale = scale
			x := make([]float64, len(p.values)+2)
			for k, v := range p.values {
				x[k] = math.Log(v) + 0.1
			}
			x[len(x)-2], x[len(x)-1] = 0.3, -0.2
			problem := q.withMeter(0.01)
			j := mat.NewDense(problem.Size, len(x), nil)
			problem.Jacobian(j, x)
			up, down := make([]float64, problem.Size), make([]float64, problem.Size)
			for k := range x {
				const step = 1e-5
				x[k] += step
				problem.Residual(up, x)
				x[k] -= 2 * step
				problem.Residual(down, x)
				x[k] += step
				largest, worst := 0.0, 0.0
				for i := range up {
					largest = max(largest, math.Abs(j.At(i, k)))
					worst = max(worst, math.Abs((up[i]-down[i])/(2*step)-j.At(i, k)))
				}
				if !(worst < 1e-6*largest) {
					t.Errorf("%s, loss scale %v, unknown %d: differs by %.2g of %.2g", w, scale, k, worst, largest)
				}
			}
		}
	}
}
