package lm

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/floats/scalar"
	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/optimize"
)

// decay is y = b_0·exp(−b_1·t) + b_2 on m points of t from 0 to 3, with ripple for residuals that do not vanish.
func decay(m int, truth []float64, ripple float64) Problem {
	t, y := make([]float64, m), make([]float64, m)
	for i := range t {
		t[i] = 3 * float64(i) / float64(m-1)
		y[i] = truth[0]*math.Exp(-truth[1]*t[i]) + truth[2] + ripple*math.Sin(float64(7*i*i))
	}
	return Problem{
		Size: m,
		Residual: func(dst, b []float64) {
			for i, t := range t {
				dst[i] = b[0]*math.Exp(-b[1]*t) + b[2] - y[i]
			}
		},
		Jacobian: func(dst *mat.Dense, b []float64) {
			for i, t := range t {
				row := dst.RawRowView(i)
				row[0] = math.Exp(-b[1] * t)
				row[1] = -b[0] * t * row[0]
				row[2] = 1
			}
		},
	}
}

// linear is r = A·x − y.
func linear(a *mat.Dense, y []float64) Problem {
	m, n := a.Dims()
	return Problem{
		Size: m,
		Residual: func(dst, x []float64) {
			v := mat.NewVecDense(m, dst)
			v.MulVec(a, mat.NewVecDense(n, x))
			for i := range dst {
				dst[i] -= y[i]
			}
		},
		Jacobian: func(dst *mat.Dense, x []float64) { dst.Copy(a) },
	}
}

// rosenbrock is the valley of J. J. Moré, B. S. Garbow, K. E. Hillstrom, ACM Trans. Math. Software 7 (1981) 17, problem
// 1: zero residuals at (1, 1).
func rosenbrock() Problem {
	return Problem{
		Size: 2,
		Residual: func(dst, x []float64) {
			dst[0] = 10 * (x[1] - x[0]*x[0])
			dst[1] = 1 - x[0]
		},
		Jacobian: func(dst *mat.Dense, x []float64) {
			dst.SetRow(0, []float64{-20 * x[0], 10})
			dst.SetRow(1, []float64{-1, 0})
		},
	}
}

func solve(t *testing.T, p Problem, start []float64, s *Settings) *Result {
	t.Helper()
	r, err := Solve(p, start, s)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func checkClose(t *testing.T, what string, got, want []float64, tolerance float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%s: got %v, want %v", what, got, want)
	}
	for k := range got {
		if !scalar.EqualWithinAbsOrRel(got[k], want[k], 0, tolerance) && !(got[k] == 0 && want[k] == 0) {
			t.Errorf("%s[%d]: got %v, want %v, relative difference %.3g", what, k, got[k], want[k], math.Abs(got[k]-want[k])/math.Abs(want[k]))
		}
	}
}

func sameBits(a, b []float64) bool {
	return slices.EqualFunc(a, b, func(x, y float64) bool { return math.Float64bits(x) == math.Float64bits(y) })
}

func sameResult(a, b *Result) bool {
	return sameBits(a.X, b.X) && sameBits(a.Residuals, b.Residuals) && sameBits(a.Gradient, b.Gradient) &&
		sameBits(a.Jacobian.RawMatrix().Data, b.Jacobian.RawMatrix().Data) && slices.Equal(a.AtBound, b.AtBound) &&
		math.Float64bits(a.Cost) == math.Float64bits(b.Cost) && a.Status == b.Status && a.Reason() == b.Reason() &&
		a.Iterations == b.Iterations && a.ResidualEvaluations == b.ResidualEvaluations && a.JacobianEvaluations == b.JacobianEvaluations
}

// problems are solved under every invariant.
func problems(t *testing.T) map[string]struct {
	p     Problem
	start []float64
	s     Settings
} {
	type entry = struct {
		p     Problem
		start []float64
		s     Settings
	}
	all := map[string]entry{
		"decay":             {p: decay(50, []float64{3, 2, 1}, 0.01), start: []float64{1, 0.3, 0}},
		"decay differenced": {p: decay(50, []float64{3, 2, 1}, 0.01), start: []float64{1, 0.3, 0}},
		"decay exact":       {p: decay(50, []float64{3, 2, 1}, 0), start: []float64{1, 0.3, 0}},
		"decay unit":        {p: decay(50, []float64{3, 2, 1}, 0.01), start: []float64{1, 0.3, 0}, s: Settings{UnitScaling: true, MaxStep: 0.5}},
		"decay bounded":     {p: decay(50, []float64{3, 2, 1}, 0.01), start: []float64{1, 0.3, 0}, s: Settings{Lower: []float64{0, 0, 0}, Upper: []float64{2.5, math.Inf(1), 2}}},
		"decay to a step":   {p: decay(50, []float64{3, 2, 1}, 0.01), start: []float64{1, 0.3, 0}, s: Settings{GradientTolerance: 1e-99, CostTolerance: 1e-99, StepTolerance: 1e-4}},
		"rosenbrock":        {p: rosenbrock(), start: []float64{-1.2, 1}},
		"few iterations":    {p: rosenbrock(), start: []float64{-1.2, 1}, s: Settings{MaxIterations: 5}},
	}
	e := all["decay differenced"]
	e.p.Jacobian = nil
	all["decay differenced"] = e
	for _, p := range nistProblems(t) {
		if p.name == "Thurber" || p.name == "MGH10" {
			all[p.name] = entry{p: p.problem(true), start: p.starts[1]}
		}
	}
	return all
}

func TestInvariants(t *testing.T) {
	for name, c := range problems(t) {
		t.Run(name, func(t *testing.T) {
			start := slices.Clone(c.start)
			n := len(start)
			s := c.s
			last := make([]float64, n)
			watched := c.p
			watched.Residual = func(dst, x []float64) {
				copy(last, x)
				for k := range x {
					if low, high := s.bounds(k); !(x[k] >= low && x[k] <= high) {
						t.Errorf("residuals asked for at x[%d] = %v, out of %v to %v", k, x[k], low, high)
					}
				}
				for i := range dst {
					dst[i] = math.NaN()
				}
				c.p.Residual(dst, x)
			}
			if c.p.Jacobian != nil {
				watched.Jacobian = func(dst *mat.Dense, x []float64) {
					if !sameBits(x, last) {
						t.Errorf("Jacobian asked for at %v, residuals last at %v", x, last)
					}
					for i := range c.p.Size {
						for k := range n {
							dst.Set(i, k, math.NaN())
						}
					}
					c.p.Jacobian(dst, x)
				}
			}
			first := solve(t, watched, start, &s)
			if !sameBits(start, c.start) {
				t.Errorf("start changed to %v", start)
			}
			if !first.Status.Usable() || !first.Status.Converged() && s.MaxIterations == 0 {
				t.Errorf("%v: %s", first.Status, first.Reason())
			}

			r := make([]float64, c.p.Size)
			c.p.Residual(r, first.X)
			if !sameBits(r, first.Residuals) || first.Cost != dot(r, r)/2 {
				t.Errorf("cost %v, recomputed %v", first.Cost, dot(r, r)/2)
			}
			c.p.Residual(r, start)
			if !(first.Cost <= dot(r, r)/2) {
				t.Errorf("cost %v, at the start %v", first.Cost, dot(r, r)/2)
			}
			if c.p.Jacobian != nil {
				j := mat.NewDense(c.p.Size, n, nil)
				c.p.Jacobian(j, first.X)
				if !mat.Equal(j, first.Jacobian) {
					t.Error("the Jacobian does not belong to X")
				}
			}
			var g mat.VecDense
			g.MulVec(first.Jacobian.T(), mat.NewVecDense(c.p.Size, first.Residuals))
			for k := range n {
				size := mat.Norm(first.Jacobian.ColView(k), 2) * norm(first.Residuals)
				if !(math.Abs(g.AtVec(k)-first.Gradient[k]) <= 1e-13*size) {
					t.Errorf("gradient[%d] %v, recomputed %v", k, first.Gradient[k], g.AtVec(k))
				}
			}

			if again := solve(t, c.p, start, &s); !sameResult(first, again) {
				t.Errorf("second run: got %+v, want %+v", again, first)
			}
			s.Workspace = new(Workspace)
			solve(t, decay(200, []float64{1, 1, 1}, 0.1), []float64{2, 2, 2}, &Settings{Workspace: s.Workspace})
			if again := solve(t, c.p, start, &s); !sameResult(first, again) {
				t.Errorf("after a larger problem in the workspace: got %+v, want %+v", again, first)
			}
			for i := range s.Workspace.floats {
				s.Workspace.floats[i] = math.NaN()
			}
			for i := range s.Workspace.ints {
				s.Workspace.ints[i], s.Workspace.bools[i] = math.MaxInt, true
			}
			second := solve(t, c.p, start, &s)
			if !sameResult(first, second) {
				t.Errorf("poisoned workspace: got %+v, want %+v", second, first)
			}
			solve(t, rosenbrock(), []float64{5, 5}, &Settings{Workspace: s.Workspace})
			if !sameResult(first, second) {
				t.Error("a later solve in the same workspace changed a result")
			}
		})
	}
}

// TestScaleInvariance multiplies variables and residuals by constants. With powers of two that is exact in float64, so
// the answers must agree to the bit; with powers of ten, to rounding. An absolute tolerance anywhere fails this.
func TestScaleInvariance(t *testing.T) {
	for name, c := range problems(t) {
		if c.s.UnitScaling {
			continue // it is there to give this up
		}
		t.Run(name, func(t *testing.T) {
			n := len(c.start)
			for _, scales := range [][2]float64{{0x1p-40, 0x1p40}, {0x1p40, 0x1p-40}, {1e-12, 1e12}, {1e12, 1e-12}} {
				exact := math.Abs(math.Log2(scales[0])) == 40
				factor := func(k int) float64 { return scales[k%2] }
				s := c.s
				start := make([]float64, n)
				s.Lower, s.Upper = nil, nil
				for k := range n {
					start[k] = c.start[k] * factor(k)
					low, high := c.s.bounds(k)
					s.Lower, s.Upper = append(s.Lower, low*factor(k)), append(s.Upper, high*factor(k))
				}
				x := make([]float64, n)
				unscale := func(scaled []float64) []float64 {
					for k := range x {
						x[k] = scaled[k] / factor(k)
					}
					return x
				}
				p := Problem{Size: c.p.Size, Residual: func(dst, scaled []float64) {
					c.p.Residual(dst, unscale(scaled))
					for i := range dst {
						dst[i] *= scales[1]
					}
				}}
				if c.p.Jacobian != nil {
					p.Jacobian = func(dst *mat.Dense, scaled []float64) {
						c.p.Jacobian(dst, unscale(scaled))
						for k := range n {
							for i := range p.Size {
								dst.Set(i, k, dst.At(i, k)*scales[1]/factor(k))
							}
						}
					}
				}
				want := solve(t, c.p, c.start, &c.s)
				got := solve(t, p, start, &s)
				x = make([]float64, n)
				got.X = slices.Clone(unscale(got.X))
				if exact && c.p.Jacobian != nil {
					if !sameBits(got.X, want.X) || got.Iterations != want.Iterations || got.Status != want.Status || got.Cost != want.Cost*scales[1]*scales[1] {
						t.Errorf("scales %v: got %v after %d steps, %v; want %v after %d, %v", scales, got.X, got.Iterations, got.Status, want.X, want.Iterations, want.Status)
					}
					continue
				}
				if got.Status.Converged() != want.Status.Converged() {
					t.Errorf("scales %v: %v, want %v", scales, got.Status, want.Status)
				}
				checkClose(t, "x", got.X, want.X, 1e-8)
			}
		})
	}
}

// TestBoundsLinear compares bounded linear problems with the exact solution: of all 3ⁿ choices of which variables are at
// which bound, the one that satisfies the optimality conditions.
func TestBoundsLinear(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	active := 0
	for range 200 {
		n := 1 + random.IntN(4)
		m := n + random.IntN(4)
		a := mat.NewDense(m, n, nil)
		y := make([]float64, m)
		for i := range m {
			y[i] = random.NormFloat64()
			for k := range n {
				a.Set(i, k, random.NormFloat64())
			}
		}
		low, high, start := make([]float64, n), make([]float64, n), make([]float64, n)
		for k := range n {
			low[k] = random.NormFloat64()
			high[k] = low[k] + random.Float64()
			start[k] = low[k] + (high[k]-low[k])*random.Float64()
			if random.IntN(4) == 0 {
				start[k] = high[k]
			}
		}
		want := boxed(t, a, y, low, high)
		for _, unit := range []bool{false, true} {
			got := solve(t, linear(a, y), start, &Settings{Lower: low, Upper: high, UnitScaling: unit})
			if !got.Status.Converged() {
				t.Errorf("%v: %s", got.Status, got.Reason())
			}
			for k := range n {
				if !(math.Abs(got.X[k]-want[k]) <= 1e-9*(math.Abs(low[k])+math.Abs(high[k]))) {
					t.Errorf("x = %v, want %v", got.X, want)
				}
				at := want[k] == low[k] || want[k] == high[k]
				if got.AtBound[k] != at {
					t.Errorf("AtBound[%d] = %v, x = %v in %v to %v", k, got.AtBound[k], got.X[k], low[k], high[k])
				}
				if at {
					active++
				}
			}
		}
	}
	if active < 100 {
		t.Errorf("only %d bounds were active", active)
	}
}

// boxed solves min ‖A·x − y‖ within bounds by enumeration.
func boxed(t *testing.T, a *mat.Dense, y, low, high []float64) []float64 {
	m, n := a.Dims()
	choice := make([]int, n) // 0 free, 1 low, 2 high
	for {
		x := make([]float64, n)
		var free []int
		rest := slices.Clone(y)
		for k := range n {
			switch choice[k] {
			case 0:
				free = append(free, k)
			case 1:
				x[k] = low[k]
			case 2:
				x[k] = high[k]
			}
			for i := range m {
				rest[i] -= a.At(i, k) * x[k]
			}
		}
		if len(free) > 0 {
			part := mat.NewDense(m, len(free), nil)
			for j, k := range free {
				part.SetCol(j, mat.Col(nil, k, a))
			}
			var s mat.VecDense
			if err := s.SolveVec(part, mat.NewVecDense(m, rest)); err != nil {
				t.Fatal(err)
			}
			for j, k := range free {
				x[k] = s.AtVec(j)
			}
		}
		r := make([]float64, m)
		linear(a, y).Residual(r, x)
		optimal := true
		for k := range n {
			g := mat.Dot(a.ColView(k), mat.NewVecDense(m, r))
			switch choice[k] {
			case 0:
				optimal = optimal && x[k] >= low[k] && x[k] <= high[k]
			case 1:
				optimal = optimal && g >= 0
			case 2:
				optimal = optimal && g <= 0
			}
		}
		if optimal {
			return x
		}
		k := 0
		for ; k < n && choice[k] == 2; k++ {
			choice[k] = 0
		}
		if k == n {
			t.Fatal("no choice of bounds is optimal")
		}
		choice[k]++
	}
}

// TestBoundsOneStep: a linear problem with an active bound takes one step, the others being solved for with the
// variable at its bound. min (x_0 + x_1 − 4)² + (x_0 − 3)² + (x_1)² with x_0 ≤ 1 is at x_1 = 3/2.
func TestBoundsOneStep(t *testing.T) {
	a := mat.NewDense(3, 2, []float64{1, 1, 1, 0, 0, 1})
	r := solve(t, linear(a, []float64{4, 3, 0}), []float64{-5, -5}, &Settings{Upper: []float64{1, math.Inf(1)}, InitialRadius: 1e6})
	checkClose(t, "x", r.X, []float64{1, 1.5}, 1e-14)
	if r.Iterations != 1 || !slices.Equal(r.AtBound, []bool{true, false}) {
		t.Errorf("%d steps, want 1; AtBound %v", r.Iterations, r.AtBound)
	}
}

func TestBoundsNonlinear(t *testing.T) {
	p := decay(50, []float64{3, 2, 1}, 0.01)
	start := []float64{1, 0.3, 0}
	free := solve(t, p, start, nil)
	wide := &Settings{Lower: []float64{-100, -100, -100}, Upper: []float64{100, 100, 100}}
	if got := solve(t, p, start, wide); !sameBits(got.X, free.X) {
		t.Errorf("bounds that are never met change the answer: %v, want %v", got.X, free.X)
	}
	// With the rate held the problem is linear in the two others: its closed form is the regression line on exp(−t).
	held := &Settings{Lower: []float64{-10, 1, -10}, Upper: []float64{10, 1, 10}}
	got := solve(t, p, []float64{1, 1, 0}, held)
	var e, y, ee, ey float64
	r := make([]float64, 50)
	p.Residual(r, []float64{0, 1, 0})
	for i, v := range r {
		x := math.Exp(-3 * float64(i) / 49)
		e, y, ee, ey = e+x/50, y-v/50, ee+x*x/50, ey-x*v/50
	}
	slope := (ey - e*y) / (ee - e*e)
	checkClose(t, "x", got.X, []float64{slope, 1, y - slope*e}, 1e-9)
	if want := []bool{false, true, false}; !slices.Equal(got.AtBound, want) || !got.Status.Converged() {
		t.Errorf("AtBound %v, want %v; %v", got.AtBound, want, got.Status)
	}
	// All variables held: the start is the answer.
	all := solve(t, p, start, &Settings{Lower: start, Upper: start})
	if !sameBits(all.X, start) || !all.Status.Converged() || all.Iterations != 0 {
		t.Errorf("all held: %v after %d steps, %v", all.X, all.Iterations, all.Status)
	}
}

// TestMaxStep checks that no variable moves further than allowed between two accepted points.
func TestMaxStep(t *testing.T) {
	for _, unit := range []bool{false, true} {
		p := rosenbrock()
		jacobian := p.Jacobian
		var points [][]float64
		p.Jacobian = func(dst *mat.Dense, x []float64) {
			points = append(points, slices.Clone(x))
			jacobian(dst, x)
		}
		const most = 0.03
		r := solve(t, p, []float64{-1.2, 1}, &Settings{MaxStep: most, UnitScaling: unit})
		checkClose(t, "x", r.X, []float64{1, 1}, 1e-9)
		if len(points) < 50 {
			t.Errorf("%d points for a way of 2.2 in steps of %v", len(points), most)
		}
		for i := 1; i < len(points); i++ {
			for k := range points[i] {
				if d := math.Abs(points[i][k] - points[i-1][k]); !(d <= most*(1+1e-12)) {
					t.Errorf("step %d moved variable %d by %v", i, k, d)
				}
			}
		}
	}
}

// TestStep checks a damped step against its definition, (JᵀJ + λD²)·p = −Jᵀr with ‖D·p‖ equal to the radius, and
// the prediction against ½‖r‖² − ½‖r + J·p‖².
func TestStep(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 4))
	const m, n = 9, 4
	for trial := range 50 {
		s := new(Workspace).prepare(m, n, false)
		for k := range n {
			s.x[k], s.low[k], s.high[k] = 1, math.Inf(-1), math.Inf(1)
			s.scale[k] = math.Exp(5 * random.NormFloat64())
			for i := range m {
				s.jac.Set(i, k, s.scale[k]*random.NormFloat64())
			}
		}
		for i := range m {
			s.r[i] = random.NormFloat64()
		}
		s.tri.factorise(s.jac, s.r)
		j, r := mat.DenseCopyOf(s.jac), mat.NewVecDense(m, slices.Clone(s.r))
		var g mat.VecDense
		g.MulVec(j.T(), r)
		copy(s.gradient, g.RawVector().Data)
		s.hold()
		s.resolve(s.tri.projected())
		radius := math.Exp(3 * random.NormFloat64())
		s.step(radius, math.Inf(1))

		if s.lambda > 0 && !(math.Abs(s.length-radius) <= 0.011*radius) || s.lambda == 0 && !(s.length <= radius*1.011) {
			t.Errorf("trial %d: length %v for radius %v, λ = %v", trial, s.length, radius, s.lambda)
		}
		p := mat.NewVecDense(n, s.p)
		var jp, left mat.VecDense
		jp.MulVec(j, p)
		left.MulVec(j.T(), &jp)
		for k := range n {
			got := (left.AtVec(k) + s.lambda*s.scale[k]*s.scale[k]*s.p[k] + g.AtVec(k)) / s.scale[k]
			if !(math.Abs(got) <= 1e-12*mat.Norm(r, 2)*float64(m)*(1+s.lambda*radius)) {
				t.Errorf("trial %d: equation %d is off by %v", trial, k, got)
			}
		}
		jp.AddVec(&jp, r)
		want := (mat.Dot(r, r) - mat.Dot(&jp, &jp)) / 2
		if !(math.Abs(s.predicted()-want) <= 1e-12*mat.Dot(r, r)) {
			t.Errorf("trial %d: predicted %v, want %v", trial, s.predicted(), want)
		}

		// A step above MaxStep is bent, not only cut.
		s.step(math.Inf(1), math.Inf(1))
		most := largest(s.p) / 10
		s.step(math.Inf(1), most)
		if !s.cut || !(s.lambda > 0) || !(largest(s.p) <= most*(1+1e-12)) || !(largest(s.p) > most/100) {
			t.Errorf("trial %d: λ %v, largest change %v of %v", trial, s.lambda, largest(s.p), most)
		}
	}
}

// TestRightSingular compares with the singular values of gonum, and looks at a matrix whose columns differ by 2⁹⁰: its
// small singular values must not drown.
func TestRightSingular(t *testing.T) {
	random := rand.New(rand.NewPCG(5, 6))
	for n := 1; n <= 9; n++ {
		a := mat.NewDense(n, n, nil) // rows are the columns of A
		for i := range n {
			for k := range n {
				a.Set(i, k, random.NormFloat64())
			}
		}
		var svd mat.SVD
		if !svd.Factorize(a, mat.SVDNone) {
			t.Fatal("gonum failed")
		}
		want := svd.Values(nil)
		v := make([]float64, n*n)
		b := mat.DenseCopyOf(a).RawMatrix().Data
		rightSingular(b, n, n, v)
		got := make([]float64, n)
		for i := range n {
			got[i] = norm(b[i*n : (i+1)*n])
		}
		slices.SortFunc(got, func(x, y float64) int { return -int(math.Copysign(1, x-y)) })
		checkClose(t, "singular value", got, want, 1e-12)
		var back mat.Dense
		back.Mul(mat.NewDense(n, n, v).T(), mat.NewDense(n, n, b))
		if !mat.EqualApprox(&back, a, 1e-13) {
			t.Errorf("n = %d: V·(rows) is not the matrix", n)
		}
	}
	b := []float64{1, 0, 0x1p-90, 0x1p-90}
	rightSingular(b, 2, 2, make([]float64, 4))
	checkClose(t, "singular value", []float64{norm(b[:2]), norm(b[2:])}, []float64{1, 0x1p-90}, 1e-14)
}

// TestCrossCheck compares with a quasi-Newton minimiser of gonum on the same cost, in variables scaled to 1.
func TestCrossCheck(t *testing.T) {
	wood := Problem{ // Moré, Garbow, Hillstrom, problem 14
		Size: 6,
		Residual: func(dst, x []float64) {
			dst[0], dst[1] = 10*(x[1]-x[0]*x[0]), 1-x[0]
			dst[2], dst[3] = math.Sqrt(90)*(x[3]-x[2]*x[2]), 1-x[2]
			dst[4], dst[5] = math.Sqrt(10)*(x[1]+x[3]-2), (x[1]-x[3])/math.Sqrt(10)
		},
	}
	for _, c := range []struct {
		name  string
		p     Problem
		start []float64
	}{
		{"decay", decay(50, []float64{3, 2, 1}, 0.3), []float64{1, 0.3, 0}},
		{"wood", wood, []float64{-3, -1, -3, -1}},
	} {
		t.Run(c.name, func(t *testing.T) {
			got := solve(t, c.p, c.start, nil)
			r := make([]float64, c.p.Size)
			cost := func(x []float64) float64 {
				c.p.Residual(r, x)
				return dot(r, r) / 2
			}
			want, err := optimize.Minimize(optimize.Problem{Func: cost, Grad: func(g, x []float64) {
				probe := slices.Clone(x)
				for k := range x {
					const h = 1e-5
					probe[k] = x[k] + h
					up := cost(probe)
					probe[k] = x[k] - h
					g[k] = (up - cost(probe)) / (2 * h)
					probe[k] = x[k]
				}
			}}, c.start, &optimize.Settings{GradientThreshold: 1e-8}, &optimize.BFGS{})
			if want == nil || want.Status != optimize.GradientThreshold && want.Status != optimize.FunctionConvergence {
				t.Fatalf("gonum: %v, %v", want, err)
			}
			checkClose(t, "x", got.X, want.X, 1e-5)
			if !(got.Cost <= want.F*(1+1e-12)) {
				t.Errorf("cost %v, gonum found %v", got.Cost, want.F)
			}
		})
	}
}

// TestNonFinite: steps to where there are no residuals, or no derivatives, are refused; at the start they are errors.
func TestNonFinite(t *testing.T) {
	// r = ln x − c needs x > 0; a full step from far above goes below.
	log := func(jacobianFloor float64) Problem {
		return Problem{
			Size:     2,
			Residual: func(dst, x []float64) { dst[0], dst[1] = math.Log(x[0])-1, math.Log(x[0])-2 },
			Jacobian: func(dst *mat.Dense, x []float64) {
				d := 1 / x[0]
				if x[0] < jacobianFloor {
					d = math.NaN()
				}
				dst.Set(0, 0, d)
				dst.Set(1, 0, d)
			},
		}
	}
	want := []float64{math.Exp(1.5)}
	wide := &Settings{InitialRadius: 100}
	for name, c := range map[string]struct {
		p       Problem
		start   float64
		refused float64 // where the first full step leads
	}{
		"residuals":   {log(0), 50, -70.6},
		"Jacobian":    {log(4), 9, 2.73},
		"differences": {Problem{Size: 2, Residual: log(0).Residual}, 50, -70.6},
	} {
		first := math.NaN()
		p := c.p
		p.Residual = func(dst, x []float64) {
			if math.IsNaN(first) && math.Abs(x[0]-c.start) > 1e-3*c.start {
				first = x[0]
			}
			c.p.Residual(dst, x)
		}
		r := solve(t, p, []float64{c.start}, wide)
		if !(math.Abs(first-c.refused) <= 0.1) {
			t.Errorf("%s: the first step led to %v, expected %v", name, first, c.refused)
		}
		if !r.Status.Converged() {
			t.Errorf("%s: %v, %s", name, r.Status, r.Reason())
		}
		checkClose(t, name, r.X, want, 1e-9)
	}
	// A Jacobian that is never finite but at the start leaves the start.
	start := []float64{50}
	r := solve(t, log(50), start, wide)
	if r.Status != Stalled || !sameBits(r.X, start) {
		t.Errorf("no finite Jacobian below the start: %v at %v", r.Status, r.X)
	}
	j := mat.NewDense(2, 1, nil)
	log(0).Jacobian(j, start)
	if !mat.Equal(r.Jacobian, j) {
		t.Errorf("Jacobian %v after refused steps, want %v", r.Jacobian, j)
	}

	for _, c := range []struct {
		name  string
		p     Problem
		start float64
		want  NonFiniteError
		text  string
	}{
		{"residual", log(0), -1, NonFiniteError{0, -1, math.NaN()}, "residual 0 is NaN at the start"},
		{"square", Problem{Size: 1, Residual: func(dst, x []float64) { dst[0] = 1e200 }}, 1, NonFiniteError{0, -1, 1e200}, "residual 0 is 1e+200 at the start"},
		{"derivative", log(2), 1, NonFiniteError{0, 0, math.NaN()}, "derivative of residual 0 by variable 0 is NaN at the start"},
	} {
		r, err := Solve(c.p, []float64{c.start}, nil)
		var got *NonFiniteError
		if !errors.As(err, &got) || got.Residual != c.want.Residual || got.Variable != c.want.Variable || !scalar.Same(got.Value, c.want.Value) || !strings.Contains(err.Error(), c.text) {
			t.Errorf("%s: error %v, want %v", c.name, err, &c.want)
		}
		if r == nil || r.Status != NonFinite || r.Status.Usable() {
			t.Errorf("%s: result %+v", c.name, r)
		}
	}
}

// TestDifferences checks the three stencils on r = exp(x) − exp(start), which ends at once, at a point with room and at
// bounds on either side, and that bounds are kept.
func TestDifferences(t *testing.T) {
	for _, c := range []struct{ x, low, high float64 }{
		{1, 0, 2}, {1, 1, 2}, {1, 0, 1}, {0, -1, 1}, {0, 0, 1}, {0, -1, 0}, {1, math.Inf(-1), math.Inf(1)},
	} {
		p := Problem{Size: 1, Residual: func(dst, x []float64) {
			if !(x[0] >= c.low && x[0] <= c.high) {
				t.Errorf("asked for x = %v, out of %v to %v", x[0], c.low, c.high)
			}
			dst[0] = math.Exp(x[0]) - math.Exp(c.x)
		}}
		r := solve(t, p, []float64{c.x}, &Settings{Lower: []float64{c.low}, Upper: []float64{c.high}})
		checkClose(t, "derivative", r.Jacobian.RawMatrix().Data, []float64{math.Exp(c.x)}, 1e-9)
		if r.ResidualEvaluations != 3 {
			t.Errorf("%d evaluations, want 3", r.ResidualEvaluations)
		}
	}
}

// TestRankDeficient: with r depending on x_0 + x_1 only, the step shares the change by the scales, and the rest stays.
func TestRankDeficient(t *testing.T) {
	a := mat.NewDense(3, 3, []float64{1, 1, 0, 2, 2, 0, 1, 1, 0})
	r := solve(t, linear(a, []float64{3, 6, 3}), []float64{0.5, 0.25, 7}, nil)
	if !r.Status.Converged() || !(r.Cost <= 1e-28) || r.X[2] != 7 {
		t.Errorf("%v at %v, cost %v", r.Status, r.X, r.Cost)
	}
	checkClose(t, "x", r.X[:2], []float64{1.625, 1.375}, 1e-12)
	var singular *SingularError
	if _, err := Covariance(r.Jacobian, 1); !errors.As(err, &singular) || !slices.Equal(singular.Columns, []int{0, 1, 2}) || !math.IsInf(singular.Condition, 1) {
		t.Errorf("covariance error %v", err)
	}
}

func TestStatuses(t *testing.T) {
	p := decay(50, []float64{3, 2, 1}, 0.01)
	start := []float64{1, 0.3, 0}
	wrong := p
	wrong.Jacobian = func(dst *mat.Dense, x []float64) {
		p.Jacobian(dst, x)
		dst.Scale(-1, dst)
	}
	for _, c := range []struct {
		want   Status
		p      Problem
		s      Settings
		reason string
	}{
		{GradientConvergence, p, Settings{StepTolerance: 1e-99, CostTolerance: 1e-99}, "cosine between residuals and Jacobian "},
		{StepConvergence, p, Settings{GradientTolerance: 1e-99, StepTolerance: 1e-3, CostTolerance: 1e-99}, " <= 0.001 (StepTolerance)"},
		{CostConvergence, p, Settings{GradientTolerance: 1e-99, StepTolerance: 1e-99, CostTolerance: 1e-4}, " <= 0.0001 (CostTolerance)"},
		{SlowConvergence, p, Settings{GradientTolerance: 1e-99, StepTolerance: 1e-99, CostTolerance: 1e-99, InitialRadius: 1e-3, SlowTolerance: 0.2}, " <= 0.2 (SlowTolerance)"},
		{RoundingConvergence, decay(50, []float64{3, 2, 1}, 0), Settings{}, "reachable change of the residuals "},
		{Stalled, wrong, Settings{}, "no decrease of the cost down to a step of length "},
		{IterationLimit, p, Settings{MaxIterations: 3}, "steps tried 3 >= 3 (MaxIterations)"},
	} {
		r := solve(t, c.p, start, &c.s)
		if r.Status != c.want || !strings.Contains(r.Reason(), c.reason) {
			t.Errorf("%v: %s, want %v: %s", r.Status, r.Reason(), c.want, c.reason)
		}
		if converged := c.want <= RoundingConvergence; r.Status.Converged() != converged || !r.Status.Usable() {
			t.Errorf("%v: converged %v, usable %v", c.want, r.Status.Converged(), r.Status.Usable())
		}
		if r.Status.Converged() && !strings.Contains(r.Reason(), "<=") {
			t.Errorf("%v: reason %q has no comparison", c.want, r.Reason())
		}
	}
	for s, text := range map[Status]string{NotRun: "not run", NonFinite: "not finite", -1: "Status(-1)", 99: "Status(99)"} {
		if s.String() != text || s.Converged() || s.Usable() {
			t.Errorf("%d: %q, converged %v, usable %v; want %q", int(s), s, s.Converged(), s.Usable(), text)
		}
	}
	for s := NotRun; s <= NonFinite; s++ {
		if s.String() == "" {
			t.Errorf("status %d has no text", int(s))
		}
	}
	// Zero residuals at the start are a solution, too.
	zero := solve(t, rosenbrock(), []float64{1, 1}, nil)
	if zero.Status != RoundingConvergence || zero.Iterations != 0 || zero.Cost != 0 {
		t.Errorf("exact start: %+v", zero)
	}
}

func TestSettingsErrors(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	ok := []float64{1, 1}
	for _, c := range []struct {
		s     Settings
		start []float64
		want  string
	}{
		{Settings{GradientTolerance: -1}, ok, "lm: GradientTolerance is -1, must be at least 0 and below 1"},
		{Settings{StepTolerance: nan}, ok, "lm: StepTolerance is NaN, must be at least 0 and below 1"},
		{Settings{CostTolerance: 1}, ok, "lm: CostTolerance is 1, must be at least 0 and below 1"},
		{Settings{MaxIterations: -2}, ok, "lm: MaxIterations is -2, must not be negative"},
		{Settings{InitialRadius: inf}, ok, "lm: InitialRadius is +Inf, must be finite and not negative"},
		{Settings{InitialRadius: nan}, ok, "lm: InitialRadius is NaN, must be finite and not negative"},
		{Settings{MaxStep: nan}, ok, "lm: MaxStep is NaN, must not be negative"},
		{Settings{}, []float64{1, nan}, "lm: start[1] is NaN, must be finite"},
		{Settings{}, []float64{inf, 1}, "lm: start[0] is +Inf, must be finite"},
		{Settings{Lower: []float64{0, 2}}, ok, "lm: start[1] is 1, must lie within its bounds 2 and +Inf"},
		{Settings{Upper: []float64{0.5, 2}}, ok, "lm: start[0] is 1, must lie within its bounds -Inf and 0.5"},
		{Settings{Lower: []float64{0, 2}, Upper: []float64{2, 1}}, ok, "lm: Lower[1] is 2 and Upper[1] is 1, must be numbers in ascending order"},
		{Settings{Upper: []float64{nan, 1}}, ok, "lm: Lower[0] is -Inf and Upper[0] is NaN, must be numbers in ascending order"},
	} {
		r, err := Solve(rosenbrock(), c.start, &c.s)
		if err == nil || err.Error() != c.want || r != nil {
			t.Errorf("got %v, %v; want %q", r, err, c.want)
		}
	}
	p := rosenbrock()
	if _, err := Solve(p, []float64{1, 2, 3}, nil); err == nil || err.Error() != "lm: 2 residuals for 3 variables, must be at least as many" {
		t.Errorf("too few residuals: %v", err)
	}
	for name, f := range map[string]func(){
		"lm: Problem.Residual is nil":             func() { Solve(Problem{Size: 1}, ok, nil) },
		"lm: Problem.Size is 0, must be positive": func() { Solve(Problem{Residual: p.Residual}, ok, nil) },
		"lm: start is empty":                      func() { Solve(p, nil, nil) },
		"lm: 1 lower bounds for 2 variables":      func() { Solve(p, ok, &Settings{Lower: []float64{1}}) },
		"lm: 3 upper bounds for 2 variables":      func() { Solve(p, ok, &Settings{Upper: []float64{1, 1, 1}}) },
	} {
		func() {
			defer func() {
				if got := recover(); got != name {
					t.Errorf("panic %v, want %q", got, name)
				}
			}()
			f()
		}()
	}
}

// TestCovariance compares with the closed form of a straight line (any book on regression):
//
//	var(slope) = s²/Σ(t−t̄)², var(intercept) = s²·Σt²/(m·Σ(t−t̄)²), cov = −s²·t̄/Σ(t−t̄)²
//
// with the columns in units 10²⁴ apart.
func TestCovariance(t *testing.T) {
	const up, down, s2 = 1e12, 1e-12, 0.04
	times := []float64{1, 2, 4, 7, 11}
	j := mat.NewDense(len(times), 2, nil)
	var mean, tt float64
	for i, v := range times {
		j.Set(i, 0, up)
		j.Set(i, 1, down*v)
		mean += v / float64(len(times))
		tt += v * v
	}
	var spread float64
	for _, v := range times {
		spread += (v - mean) * (v - mean)
	}
	before := mat.DenseCopyOf(j)
	c, err := Covariance(j, s2)
	if err != nil {
		t.Fatal(err)
	}
	checkClose(t, "covariance", []float64{c.At(0, 0), c.At(0, 1), c.At(1, 1)}, []float64{
		s2 * tt / float64(len(times)) / spread / (up * up), -s2 * mean / spread / (up * down), s2 / spread / (down * down),
	}, 1e-13)
	if !mat.Equal(before, j) {
		t.Error("the Jacobian was changed")
	}

	// Column 3 is column 1 doubled, to rounding; 0 and 2 are independent of them and of each other.
	random := rand.New(rand.NewPCG(7, 8))
	dependent := mat.NewDense(10, 4, nil)
	for i := range 10 {
		v := random.NormFloat64()
		dependent.SetRow(i, []float64{1e9 * random.NormFloat64(), v, 1e-9 * random.NormFloat64(), 2 * v})
	}
	var singular *SingularError
	got, err := Covariance(dependent, 1)
	if !errors.As(err, &singular) || got != nil || !slices.Equal(singular.Columns, []int{1, 3}) || !(singular.Condition > 1e14) {
		t.Errorf("dependent columns: %v, %v", got, err)
	} else if !strings.Contains(err.Error(), "variables [1 3]") {
		t.Errorf("message %q does not name the columns", err)
	}
	dependent.Set(0, 3, dependent.At(0, 3)*1.0001)
	if _, err := Covariance(dependent, 1); err != nil {
		t.Errorf("nearly dependent columns: %v", err)
	}
	for i := range 10 {
		dependent.Set(i, 2, 0)
	}
	if _, err := Covariance(dependent, 1); !errors.As(err, &singular) || !slices.Equal(singular.Columns, []int{2}) || !math.IsInf(singular.Condition, 1) {
		t.Errorf("zero column: %v", err)
	}
	for _, c := range []struct {
		j        mat.Matrix
		variance float64
		want     string
	}{
		{j, -1, "lm: variance is -1, must be finite and not negative"},
		{j, math.NaN(), "lm: variance is NaN, must be finite and not negative"},
		{mat.NewDense(1, 2, nil), 1, "lm: the Jacobian is 1×2, must have at least as many rows as columns"},
		{mat.NewDense(2, 2, []float64{1, 2, 3, math.NaN()}), 1, "lm: column 1 of the Jacobian is not finite"},
	} {
		if _, err := Covariance(c.j, c.variance); err == nil || err.Error() != c.want {
			t.Errorf("error %v, want %q", err, c.want)
		}
	}
}

// TestNormalFromZero: the first radius is ‖r‖ with Normal, too.
func TestNormalFromZero(t *testing.T) {
	p := linear(mat.NewDense(4, 2, []float64{1, 0, 0, 1, 1, 1, 1, -1}), []float64{1, 2, 3, -1})
	want := solve(t, p, []float64{0, 0}, nil)
	p.Normal = normalOf(p, 2)
	got := solve(t, p, []float64{0, 0}, nil)
	checkClose(t, "x", got.X, want.X, 1e-9)
}
