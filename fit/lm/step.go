package lm

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// state is what a solve knows at its current point x. All slices lie in the Workspace.
type state struct {
	problem  Problem
	settings Settings
	m, n     int

	x, trial  []float64
	r, trialR []float64
	cost      float64    // ½‖r‖²
	jac       *mat.Dense // J
	spare     *mat.Dense // for the J of the next point
	tri       triangle   // R and Qᵀr

	normal        bool      // the problem gives JᵀJ and Jᵀr
	jtj, trialJTJ []float64 // JᵀJ at x and at trial, n×n by rows
	jtr, trialJTR []float64 // Jᵀr there
	regular       bool      // R came from JᵀJ, which is clearly regular
	workspace     *Workspace

	gradient  []float64 // Jᵀr
	rounding  float64   // change of r by the rounding of x
	low, high []float64 // bounds
	bounded   bool      // there is a finite bound

	scale  []float64 // D, the diagonal of the trust region's norm ‖D·p‖; zero while a column of J never was anything else
	radius float64   // zero before the first step

	free     []int     // variables that may move, ascending
	split    bool      // b, v, sigma and c are for the variables that are free at x
	b, v     []float64 // k×n and k×k for k free variables, see rightSingular
	sigma, c []float64 // singular values of R·D⁻¹, and Uᵀ·rhs
	rhs      []float64 // Qᵀr plus what the variables set to a bound add
	a        []float64 // the step in the basis V

	p      []float64 // the step
	onto   []bool    // the step ends exactly at the variable's bound
	image  []float64 // R·p
	length float64   // ‖D·p‖
	lambda float64   // the Marquardt parameter
	cut    bool      // the step was shortened for MaxStep

	probe, near, far []float64 // a point beside x for differences, and r at two of them

	recent [slowSteps]float64 // relative decreases by the last steps taken
	taken  int                // steps taken

	iterations, residuals, jacobians int
	lastStep, lastDecrease           float64 // relative, of the last step taken if it was a full one, else +Inf
	status                           Status
	measured, limit                  float64
}

// hold lists the variables that may move: all but those at a bound whose gradient points outward.
func (s *state) hold() {
	s.free = s.free[:0]
	for k := range s.n {
		if s.low[k] == s.x[k] && s.gradient[k] >= 0 || s.high[k] == s.x[k] && s.gradient[k] <= 0 {
			continue
		}
		s.free = append(s.free, k)
	}
}

// decompose finds V and Σ of R·D⁻¹ for the free variables.
func (s *state) decompose() {
	n, k := s.n, len(s.free)
	for i, f := range s.free {
		row := s.b[i*n : (i+1)*n]
		clear(row)
		if d := s.scale[f]; d > 0 {
			for l, v := range s.tri.column(f) {
				row[l] = v / d
			}
		}
	}
	rightSingular(s.b[:k*n], k, n, s.v)
	for i := range k {
		s.sigma[i] = norm(s.b[i*n : (i+1)*n])
	}
}

// resolve decomposes R·D⁻¹ for the free variables and resolves rhs in it.
func (s *state) resolve(rhs []float64) {
	s.split = true
	s.decompose()
	n, k := s.n, len(s.free)
	// A direction whose singular value is nothing but rounding is no direction: it takes no part in a step.
	floor := float64(n) * epsilon * largest(s.sigma[:k])
	for i, sigma := range s.sigma[:k] {
		if sigma <= floor {
			s.sigma[i], s.c[i] = 0, 0
			continue
		}
		s.c[i] = dot(s.b[i*n:(i+1)*n], rhs) / sigma
	}
}

// damp finds the step in the scaled variables,
//
//	a_i = −σ_i·c_i/(σ_i² + λ)
//
// with λ = 0 if that is not longer than the radius and else with the λ that gives it the length of the radius. Newton's
// method on 1/‖a(λ)‖ − 1/radius (Hebden 1973, Moré 1978): that function is concave, so the iterates rise to the root
// from λ = 0.
func (s *state) damp(radius float64) {
	const (
		tolerance = 1e-2
		limit     = 50
	)
	k := len(s.free)
	s.lambda = 0
	for range limit {
		var aa, slope float64
		for i := range k {
			if s.sigma[i] == 0 {
				s.a[i] = 0
				continue
			}
			den := s.sigma[i]*s.sigma[i] + s.lambda
			s.a[i] = -s.sigma[i] * s.c[i] / den
			aa += s.a[i] * s.a[i]
			slope += s.a[i] * s.a[i] / den
		}
		length := math.Sqrt(aa)
		if !(length > radius*(1+tolerance)) {
			return
		}
		s.lambda += (length - radius) / radius * aa / slope
	}
}

// expand writes the step of the free variables, D⁻¹·V·a, into p and leaves the other elements alone.
func (s *state) expand() {
	k := len(s.free)
	for j, f := range s.free {
		var sum float64
		for i := range k {
			sum += s.v[i*k+j] * s.a[i]
		}
		if s.scale[f] > 0 {
			s.p[f] = sum / s.scale[f]
		}
	}
}

// step computes p for a radius, inside the bounds and not above maxStep (+Inf: no limit) in any variable.
func (s *state) step(radius, maxStep float64) {
	clear(s.p)
	clear(s.onto)
	if s.regular && len(s.free) == s.n && s.regularStep(radius, maxStep) {
		return
	}
	if !s.split {
		s.hold()
		s.resolve(s.tri.projected())
	}
	s.damp(radius)
	s.expand()
	s.cut = false
	if big := largest(s.p); big > maxStep {
		// A smaller radius bends the step towards the gradient, which is better than the same step cut short.
		s.cut = true
		s.damp(norm(s.a[:len(s.free)]) * maxStep / big)
		s.expand()
	}
	if s.bounded {
		s.confine(radius)
	}
	if big := largest(s.p); big > maxStep {
		s.cut = true
		for i := range s.p {
			s.p[i] *= maxStep / big
		}
		clear(s.onto)
	}
	s.length = 0
	clear(s.image)
	for k, v := range s.p {
		if v == 0 {
			continue
		}
		s.length = math.Hypot(s.length, s.scale[k]*v)
		for l, u := range s.tri.column(k) {
			s.image[l] += u * v
		}
	}
}

// regularStep computes p from JᵀJ, which is clearly regular, with all variables free, and reports whether it stays inside
// the bounds: the same step as from the singular values, without their price.
func (s *state) regularStep(radius, maxStep float64) bool {
	s.lambda, s.cut = 0, false
	s.newton()
	if s.length > radius {
		s.dampNormal(radius)
	}
	if big := largest(s.p); big > maxStep {
		s.cut = true
		if short := s.length * maxStep / big; s.length > short {
			s.dampNormal(short)
		}
		if big = largest(s.p); big > maxStep {
			for i := range s.p {
				s.p[i] *= maxStep / big
			}
			s.length *= maxStep / big
		}
	}
	for k, p := range s.p {
		if to := s.x[k] + p; !(to > s.low[k] && to < s.high[k]) {
			clear(s.p)
			return false
		}
	}
	clear(s.image)
	for k, v := range s.p {
		for l, u := range s.tri.column(k) {
			s.image[l] += u * v
		}
	}
	return true
}

// newton computes the full step, R·p = −Qᵀr.
func (s *state) newton() {
	projected := s.tri.projected()
	var squares float64
	for k := s.n - 1; k >= 0; k-- {
		sum := -projected[k]
		for l := k + 1; l < s.n; l++ {
			sum -= s.tri.column(l)[k] * s.p[l]
		}
		s.p[k] = sum / s.tri.column(k)[k]
		squares += s.scale[k] * s.p[k] * s.scale[k] * s.p[k]
	}
	s.length = math.Sqrt(squares)
}

// dampNormal shortens the full step to the one, (JᵀJ + λD²)·p = −Jᵀr, that is as long as the radius, as damp does:
//
//	JᵀJ + λD² = Lᵀ·L,  Lᵀ·q = D²·p,  λ ← λ + (‖D·p‖/‖q‖)²·(‖D·p‖ − radius)/radius
func (s *state) dampNormal(radius float64) {
	const (
		tolerance = 1e-2
		limit     = 50
	)
	s.split = false // b and a serve as memory
	q := s.a
	s.factoriseDamped()
	for range limit {
		if !(s.length > radius*(1+tolerance)) {
			return
		}
		for k := range q {
			q[k] = s.scale[k] * s.scale[k] * s.p[k]
		}
		s.forward(q)
		s.lambda += s.length * s.length / dot(q, q) * (s.length - radius) / radius
		s.factoriseDamped()
		for k := range q {
			q[k] = -s.gradient[k]
		}
		s.forward(q)
		s.backward(q)
	}
}

// factoriseDamped writes the Cholesky factor Lᵀ of JᵀJ + λD² into b, by rows.
func (s *state) factoriseDamped() {
	n := s.n
	for k := range n {
		row := s.b[k*n : k*n+k+1]
		pivot := s.jtj[k*n+k] + s.lambda*s.scale[k]*s.scale[k]
		for i := range k {
			other := s.b[i*n : i*n+i+1]
			sum := s.jtj[k*n+i]
			for j := range i {
				sum -= row[j] * other[j]
			}
			row[i] = sum / other[i]
			pivot -= row[i] * row[i]
		}
		row[k] = math.Sqrt(pivot)
	}
}

// forward replaces q by the solution y of Lᵀ·y = q.
func (s *state) forward(q []float64) {
	for k := range q {
		row := s.b[k*s.n : k*s.n+k+1]
		for i := range k {
			q[k] -= row[i] * q[i]
		}
		q[k] /= row[k]
	}
}

// backward solves L·p = y and sets the length of the step.
func (s *state) backward(y []float64) {
	n := s.n
	var squares float64
	for k := n - 1; k >= 0; k-- {
		sum := y[k]
		for i := k + 1; i < n; i++ {
			sum -= s.b[i*n+k] * s.p[i]
		}
		s.p[k] = sum / s.b[k*n+k]
		squares += s.scale[k] * s.p[k] * s.scale[k] * s.p[k]
	}
	s.length = math.Sqrt(squares)
}

// confine keeps the step inside the bounds: a variable that would leave is set to its bound, and the others are
// solved for again with it there, until none leaves.
func (s *state) confine(radius float64) {
	copy(s.rhs, s.tri.projected())
	for {
		kept := s.free[:0]
		for _, f := range s.free {
			to := math.Min(math.Max(s.x[f]+s.p[f], s.low[f]), s.high[f])
			if to == s.x[f]+s.p[f] {
				kept = append(kept, f)
				continue
			}
			s.p[f], s.onto[f] = to-s.x[f], true
			for l, u := range s.tri.column(f) {
				s.rhs[l] += u * s.p[f]
			}
		}
		if len(kept) == len(s.free) {
			return
		}
		s.free = kept
		s.resolve(s.rhs)
		s.split = false // for the next radius the variables set to a bound are free again
		s.damp(radius)
		s.expand()
	}
}

// move writes x + p into trial, exactly onto a bound where the step ends there, and reports whether it differs from x.
func (s *state) move() bool {
	moved := false
	for k, v := range s.x {
		to := v + s.p[k]
		switch {
		case s.onto[k] && s.p[k] < 0:
			to = s.low[k]
		case s.onto[k] && s.p[k] > 0:
			to = s.high[k]
		}
		s.trial[k] = to
		moved = moved || to != v
	}
	return moved
}

// predicted returns the reduction of the cost that the linear model promises for the step.
//
//	−(Qᵀr)·(R·p) − ½‖R·p‖²
func (s *state) predicted() float64 {
	return -dot(s.tri.projected(), s.image) - dot(s.image, s.image)/2
}

func dot(x, y []float64) float64 {
	var sum float64
	for i, v := range x {
		sum += v * y[i]
	}
	return sum
}

func norm(x []float64) float64 { return math.Sqrt(dot(x, x)) }

func largest(x []float64) float64 {
	var big float64
	for _, v := range x {
		big = math.Max(big, math.Abs(v))
	}
	return big
}
