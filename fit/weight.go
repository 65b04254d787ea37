package fit

import (
	"fmt"
	"math"
	"strings"
)

// Weight says what a fit minimises: how the difference between the model and
// the measured impedance is weighed at each point.
type Weight string

const (
	// Relative: ρ = ln(Z_model/Z_measured). Its real part is the relative
	// error of |Z|, its imaginary part the phase error in radians.
	Relative Weight = "relative"
	// Uniform: Z_model − Z_measured in Ω.
	Uniform Weight = "uniform"
	// Accuracy: the two parts of ρ, divided by the meter's stated accuracy
	// of magnitude and of phase at that point.
	Accuracy Weight = "accuracy"
	// SParameter: the difference of the S-parameters of model and measured
	// impedance, whose noise is uniform where they were what was measured.
	SParameter Weight = "s-parameter"
)

// Weights returns all weights, the default first.
func Weights() []Weight { return []Weight{Relative, Uniform, Accuracy, SParameter} }

// Connection says how a part was connected to a network analyser.
type Connection string

// The connections: the part ends a one-port, stands in series between two
// ports, or from the through line to ground.
const (
	Reflection Connection = "reflection"
	SeriesThru Connection = "series"
	ShuntThru  Connection = "shunt"
)

// MeterAccuracy gives a meter's stated accuracy at a frequency in Hz and an
// impedance in Ω: the relative error of magnitude and the error of phase in
// radians. ok is false where nothing is stated.
type MeterAccuracy func(freq, absZ float64) (magnitude, phase float64, ok bool)

// ParseWeight finds a weight by its name.
func ParseWeight(name string) (Weight, error) {
	var names []string
	for _, w := range Weights() {
		if string(w) == name {
			return w, nil
		}
		names = append(names, string(w))
	}
	return "", fmt.Errorf("expected one of %s, found %q", strings.Join(names, ", "), name)
}

// sParameter returns S and dS/dZ of an impedance z between equal reference
// resistances z0, all in Ω:
//
//	reflection S₁₁ = (Z − Z₀)/(Z + Z₀)
//	series     S₂₁ = 2Z₀/(2Z₀ + Z)
//	shunt      S₂₁ = 2Z/(2Z + Z₀)
func (c Connection) sParameter(z complex128, z0 float64) (s, slope complex128) {
	r := complex(z0, 0)
	switch c {
	case SeriesThru:
		d := 2*r + z
		return 2 * r / d, -2 * r / (d * d)
	case ShuntThru:
		d := 2*z + r
		return 2 * z / d, 2 * r / (d * d)
	}
	d := z + r
	return (z - r) / d, 2 * r / (d * d)
}

// softL1 returns the factor g and its derivative by s that turn a residual f
// into f·g(s), s = |f|²/scale², whose square is the soft-L1 loss
// 2·scale²·(√(1+s) − 1): quadratic for small residuals, linear for large.
func softL1(s float64) (g, slope float64) {
	root := math.Sqrt(1 + s)
	g = math.Sqrt(2 / (1 + root))
	return g, -g / (4 * root * (1 + root))
}
