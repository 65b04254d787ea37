package fit

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"math/cmplx"
	"os"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/optimize"

	"realpart/models"
)

// demoCircuits are the circuits that the demo sweeps were made from.
var demoCircuits = map[string]string{
	"electrolytic": "cap-two-branch", "ceramic": "cap-loss", "film": "cap-esr-esl",
	"choke": "ind-core", "bead": "bead", "resistor": "res-series-l",
}

// demo reads a demo sweep.
func demo(t testing.TB, name string) (freq []float64, z []complex128) {
	t.Helper()
	f, err := os.Open("../testdata/demo/" + name + ".csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for _, row := range rows[1:] {
		var v [3]float64
		for i := range v {
			if v[i], err = strconv.ParseFloat(row[i], 64); err != nil {
				t.Fatal(err)
			}
		}
		freq = append(freq, v[0])
		z = append(z, cmplx.Rect(v[1], v[2]*math.Pi/180))
	}
	return freq, z
}

// SciPy's least_squares gives the same values and standard errors for the
// demo sweeps (testdata/reference/scipy_fit.py made the reference). Its
// Jacobian is by differences, which limits the standard errors to about 1e-6.
func TestAgainstSciPy(t *testing.T) {
	data, err := os.ReadFile("../testdata/reference/scipy_fit.json")
	if err != nil {
		t.Fatal(err)
	}
	var reference map[string]struct {
		Points     int     `json:"points"`
		RMS        float64 `json:"rms_relative"`
		Parameters map[string]struct {
			Value    float64 `json:"value"`
			StdError float64 `json:"std_error"`
		} `json:"parameters"`
	}
	if err := json.Unmarshal(data, &reference); err != nil {
		t.Fatal(err)
	}
	if len(reference) != len(demoCircuits) {
		t.Fatalf("%d reference fits for %d demo sweeps", len(reference), len(demoCircuits))
	}
	for name, library := range demoCircuits {
		want := reference[name]
		freq, z := demo(t, name)
		m, _ := models.Lookup(library)
		r, err := Fit(freq, z, m.Circuit, nil)
		if err != nil {
			t.Fatal(err)
		}
		if len(freq) != want.Points || len(r.Parameters) != len(want.Parameters) {
			t.Errorf("%s: %d points and %d parameters, want %d and %d", name, len(freq), len(r.Parameters), want.Points, len(want.Parameters))
		}
		close := func(what string, got, want, tolerance float64) {
			t.Helper()
			if !(math.Abs(got/want-1) <= tolerance) {
				t.Errorf("%s: %s = %.10g, SciPy %.10g", name, what, got, want)
			}
		}
		close("rms", r.RMSRelative, want.RMS, 1e-9)
		for _, q := range r.Parameters {
			close(q.Name, q.Value, want.Parameters[q.Name].Value, 1e-7)
			close("u("+q.Name+")", q.StdError, want.Parameters[q.Name].StdError, 1e-5)
		}
	}
}

// The same cost minimised by another method (BFGS of gonum/optimize, from a
// start 20 % off) has its minimum at the same values.
func TestAgainstBFGS(t *testing.T) {
	for name, library := range demoCircuits {
		freq, z := demo(t, name)
		m, _ := models.Lookup(library)
		r, err := Fit(freq, z, m.Circuit, nil)
		if err != nil {
			t.Fatal(err)
		}
		pts, err := (&Settings{}).points(freq, z)
		if err != nil {
			t.Fatal(err)
		}
		p := newProblem(m.Circuit, pts, Relative, &Settings{})
		n := len(r.Free)
		residuals := make([]float64, 2*len(freq))
		jacobian := mat.NewDense(2*len(freq), n, nil)
		scale := 1 / r.Cost // gonum's thresholds are absolute
		start := make([]float64, n)
		for k := range start {
			start[k] = r.x[k] + 0.2*float64(1-2*(k%2))
		}
		result, err := optimize.Minimize(optimize.Problem{
			Func: func(x []float64) float64 {
				p.residual(residuals, x)
				sum := 0.0
				for _, v := range residuals {
					sum += v * v / 2
				}
				return scale * sum
			},
			Grad: func(grad, x []float64) {
				p.residual(residuals, x)
				p.jacobian(jacobian, x)
				g := mat.NewVecDense(n, grad)
				g.MulVec(jacobian.T(), mat.NewVecDense(len(residuals), residuals))
				g.ScaleVec(scale, g)
			},
		}, start, &optimize.Settings{GradientThreshold: 1e-6, Converger: optimize.NeverTerminate{}, MajorIterations: 2000}, &optimize.BFGS{})
		if result == nil {
			t.Fatalf("%s: %v", name, err)
		}
		for k, i := range r.Free {
			// in units of the standard error, which both know
			d := math.Abs(result.X[k]-r.x[k]) / (r.Parameters[i].StdError / r.Parameters[i].Value)
			if !(d < 1e-4) {
				t.Errorf("%s: %s differs by %.2g standard errors (%v)", name, r.Parameters[i].Name, d, result.Status)
			}
		}
	}
}
