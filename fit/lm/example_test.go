package lm_test

import (
	"fmt"
	"math"

	"realpart/fit/lm"
)

// A charging curve y = b₀·(1 − exp(−t/b₁)) through six points, in ln b so that both stay positive.
func ExampleSolve() {
	t := []float64{1, 2, 3, 5, 8, 13}
	y := []float64{1.57, 2.52, 3.11, 3.68, 3.92, 4.00}
	p := lm.Problem{
		Size: len(t),
		Residual: func(dst, x []float64) {
			for i := range t {
				dst[i] = math.Exp(x[0])*(1-math.Exp(-t[i]/math.Exp(x[1]))) - y[i]
			}
		},
	}
	r, err := lm.Solve(p, []float64{0, 0}, &lm.Settings{UnitScaling: true})
	if err != nil {
		fmt.Println(err)
		return
	}
	if !r.Status.Converged() {
		fmt.Println(r.Status, r.Reason())
		return
	}
	variance := 2 * r.Cost / float64(len(t)-len(r.X))
	c, err := lm.Covariance(r.Jacobian, variance)
	if err != nil {
		fmt.Println(err)
		return
	}
	for k, x := range r.X {
		fmt.Printf("b%d = %.3f, relative standard uncertainty %.1f %%\n", k, math.Exp(x), 100*math.Sqrt(c.At(k, k)))
	}
	// Output:
	// b0 = 4.004, relative standard uncertainty 0.1 %
	// b1 = 2.007, relative standard uncertainty 0.4 %
}
