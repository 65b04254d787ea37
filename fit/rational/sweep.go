package rational

import (
	"fmt"
	"math"
	"math/cmplx"
)

// sweep is the data in normalised frequency x = ω/w0.
type sweep struct {
	x    []float64
	z    []complex128
	w0   float64
	band band
	free ends
}

// ends says which of the terms s·e and q/s the model has.
type ends struct{ slope, origin bool }

// checkSweep returns an error that names the first point that cannot be used.
func checkSweep(freq []float64, z []complex128, least int) error {
	if len(freq) != len(z) {
		return fmt.Errorf("rational: %d frequencies but %d impedances", len(freq), len(z))
	}
	if len(freq) < least {
		return fmt.Errorf("rational: %d points; at least %d are needed", len(freq), least)
	}
	for i, f := range freq {
		switch {
		case !(f > 0) || math.IsInf(f, 0):
			return fmt.Errorf("rational: point %d: frequency %g Hz; must be positive and finite", i+1, f)
		case i > 0 && !(f > freq[i-1]):
			return fmt.Errorf("rational: point %d: frequency %g Hz after %g Hz; must rise from point to point", i+1, f, freq[i-1])
		case z[i] == 0 || cmplx.IsNaN(z[i]) || cmplx.IsInf(z[i]):
			return fmt.Errorf("rational: point %d (%g Hz): impedance %g Ω; must be finite and not 0", i+1, f, z[i])
		}
	}
	return nil
}

func newSweep(freq []float64, z []complex128, margin float64, free ends) *sweep {
	n := len(freq)
	w0 := 2 * math.Pi * math.Sqrt(freq[0]) * math.Sqrt(freq[n-1])
	d := &sweep{x: make([]float64, n), z: z, w0: w0, free: free}
	for i, f := range freq {
		d.x[i] = 2 * math.Pi * f / w0
	}
	d.band = band{d.x[0] / margin, d.x[n-1] * margin}
	return d
}

// residuals returns ρ = ln(m/Z) as 2n reals, the real parts first, and their sum of squares; NaN or infinite models give +Inf.
func (d *sweep) residuals(m *sections) ([]float64, float64) {
	n := len(d.x)
	r := make([]float64, 2*n)
	sum := 0.0
	for i, x := range d.x {
		rho := cmplx.Log(m.at(x) / d.z[i])
		r[i], r[n+i] = real(rho), imag(rho)
		sum += real(rho)*real(rho) + imag(rho)*imag(rho)
	}
	if !(sum < math.Inf(1)) {
		sum = math.Inf(1)
	}
	return r, sum
}

// coefficients is the number of free real numbers of a model.
func (d *sweep) coefficients(m *sections) int {
	k := 1 + 2*m.order()
	if d.free.slope {
		k++
	}
	if d.free.origin {
		k++
	}
	return k
}

// realColumn writes the complex column v as 2n reals, the real parts first.
func realColumn(n int, v func(i int) complex128) []float64 {
	c := make([]float64, 2*n)
	for i := range n {
		w := v(i)
		c[i], c[n+i] = real(w), imag(w)
	}
	return c
}
