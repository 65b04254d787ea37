package fit

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat"
)

// JCGM 100:2008 (GUM), Annex H.2: simultaneous resistance and reactance from
// five sets of voltage, current and phase. The correlations of the inputs
// matter: without them the uncertainties come out wrong.
func TestGUMAnnexH2(t *testing.T) {
	volts := []float64{5.007, 4.994, 5.005, 4.990, 4.999}
	amperes := []float64{19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3}
	radians := []float64{1.0456, 1.0438, 1.0468, 1.0428, 1.0433}
	data := mat.NewDense(5, 3, nil)
	data.SetCol(0, volts)
	data.SetCol(1, amperes)
	data.SetCol(2, radians)
	covariance := mat.NewSymDense(3, nil)
	stat.CovarianceMatrix(covariance, data, nil)
	for i := range 3 {
		for j := range i + 1 {
			covariance.SetSym(i, j, covariance.At(i, j)/5) // of the means
		}
	}
	v, i, phi := stat.Mean(volts, nil), stat.Mean(amperes, nil), stat.Mean(radians, nil)
	sin, cos := math.Sincos(phi)
	z := v / i
	r, x := z*cos, z*sin
	sensitivities := mat.NewDense(3, 3, []float64{
		r / v, -r / i, -x,
		x / v, -x / i, r,
		z / v, -z / i, 0,
	})
	c := Propagate(sensitivities, covariance)
	u := func(k int) float64 { return math.Sqrt(c.At(k, k)) }
	correlation := func(a, b int) float64 { return c.At(a, b) / u(a) / u(b) }
	for _, row := range []struct {
		name      string
		got, want float64
		tolerance float64 // absolute: one unit of the last printed digit
	}{
		// GUM Table H.3 as printed.
		{"R", r, 127.732, 0.001}, {"X", x, 219.847, 0.001}, {"Z", z, 254.260, 0.001},
		{"u(R)", u(0), 0.071, 0.001}, {"u(X)", u(1), 0.295, 0.001}, {"u(Z)", u(2), 0.236, 0.001},
		{"r(R,X)", correlation(0, 1), -0.588, 0.001}, {"r(R,Z)", correlation(0, 2), -0.485, 0.001}, {"r(X,Z)", correlation(1, 2), 0.993, 0.001},
		// The same in double precision, computed with another program (SciPy
		// 1.10) from the definition.
		{"u(R) exact", u(0), 0.07107141, 1e-8}, {"u(X) exact", u(1), 0.29558168, 1e-8}, {"u(Z) exact", u(2), 0.23633613, 1e-8},
		{"r(R,X) exact", correlation(0, 1), -0.5884297844, 1e-9}, {"r(X,Z) exact", correlation(1, 2), 0.9925116489, 1e-9},
	} {
		if !(math.Abs(row.got-row.want) <= row.tolerance) {
			t.Errorf("%s = %.10g, want %.10g ± %g", row.name, row.got, row.want, row.tolerance)
		}
	}
}
