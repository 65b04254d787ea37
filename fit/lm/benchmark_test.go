package lm

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// benchmarks are problems of the size of a fitted sweep: 402 residuals.
func benchmarks() map[string]struct {
	p     Problem
	start []float64
} {
	const m = 402
	sampled := func(model nistModel, truth []float64, reach float64) Problem {
		t, y := make([][]float64, m), make([]float64, m)
		for i := range t {
			t[i] = []float64{reach * float64(i) / (m - 1)}
			y[i] = model.value(truth, t[i]) + 1e-3*math.Sin(float64(7*i*i))
		}
		p := &nistProblem{model: model, y: y, x: t}
		return p.problem(true)
	}
	return map[string]struct {
		p     Problem
		start []float64
	}{
		"402x3 exponential": {sampledDecay(m), []float64{1, 0.5, 0}},
		"402x4 rational":    {sampled(nistModels["MGH09"], []float64{0.2, 0.2, 0.12, 0.14}, 4), []float64{0.25, 0.39, 0.415, 0.39}},
		"402x5 exponential": {sampled(nistModels["MGH17"], []float64{0.4, 2, -1.5, 0.013, 0.022}, 320), []float64{0.5, 1.5, -1, 0.01, 0.02}},
		"402x8 peaks": {
			sampled(nistModels["Gauss1"], []float64{99, 0.01, 100, 67, 23, 72, 179, 18}, 250),
			[]float64{94, 0.0105, 99, 63, 25, 71, 180, 20},
		},
	}
}

// sampledDecay is decay as one would write it for speed: the Jacobian takes the exponentials from the residuals.
func sampledDecay(m int) Problem {
	p := decay(m, []float64{3, 2, 1}, 1e-3)
	t, y, e := make([]float64, m), make([]float64, m), make([]float64, m)
	p.Residual(y, []float64{0, 0, 0})
	for i := range t {
		t[i] = 3 * float64(i) / float64(m-1)
		y[i] = -y[i]
	}
	return Problem{
		Size: m,
		Residual: func(dst, b []float64) {
			for i, t := range t {
				e[i] = math.Exp(-b[1] * t)
				dst[i] = b[0]*e[i] + b[2] - y[i]
			}
		},
		Jacobian: func(dst *mat.Dense, b []float64) {
			raw := dst.RawMatrix()
			for i, t := range t {
				row := raw.Data[i*raw.Stride : i*raw.Stride+3]
				row[0] = e[i]
				row[1] = -b[0] * t * e[i]
				row[2] = 1
			}
		},
	}
}

func BenchmarkSolve(b *testing.B) {
	for name, c := range benchmarks() {
		b.Run(name, func(b *testing.B) {
			s := &Settings{Workspace: new(Workspace)}
			b.ReportAllocs()
			var r *Result
			for b.Loop() {
				var err error
				if r, err = Solve(c.p, c.start, s); err != nil {
					b.Fatal(err)
				}
			}
			if !r.Status.Converged() {
				b.Fatalf("%v: %s", r.Status, r.Reason())
			}
			b.ReportMetric(float64(r.Iterations), "steps")
			b.ReportMetric(r.X[0], "x0")
		})
	}
}

// BenchmarkModel is the part of the work that is not the solver's: one evaluation of residuals and Jacobian.
func BenchmarkModel(b *testing.B) {
	for name, c := range benchmarks() {
		b.Run(name, func(b *testing.B) {
			r, j := make([]float64, c.p.Size), mat.NewDense(c.p.Size, len(c.start), nil)
			b.ReportAllocs()
			for b.Loop() {
				c.p.Residual(r, c.start)
				c.p.Jacobian(j, c.start)
			}
		})
	}
}

func BenchmarkCovariance(b *testing.B) {
	j := mat.NewDense(402, 5, nil)
	for i := range 402 {
		for k := range 5 {
			j.Set(i, k, math.Cos(float64(i*(k+1))))
		}
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Covariance(j, 1); err != nil {
			b.Fatal(err)
		}
	}
}

// TestAllocations: with a workspace a solve allocates its result and nothing else, however many steps it takes.
func TestAllocations(t *testing.T) {
	for name, c := range benchmarks() {
		s := &Settings{Workspace: new(Workspace)}
		got := testing.AllocsPerRun(20, func() {
			if _, err := Solve(c.p, c.start, s); err != nil {
				t.Fatal(err)
			}
		})
		if !(got <= 6) {
			t.Errorf("%s: %v allocations per solve, want at most 6", name, got)
		}
	}
}
