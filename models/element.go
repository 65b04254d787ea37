package models

import (
	"math"
	"strings"

	"gonum.org/v1/gonum/mathext"
)

// Element is the law of a two-terminal element in the sinusoidal steady
// state, ω = 2πf.
type Element int

const (
	// Resistor: Z = R. Parameter R in Ω.
	Resistor Element = iota
	// Inductor: Z = jωL. Parameter L in H.
	Inductor
	// Capacitor: Z = 1/(jωC). Parameter C in F.
	Capacitor
	// LossCapacitor is a capacitor whose loss tangent is the same at every
	// frequency. Parameters C in F, tand (1).
	//
	//	Z = √(1 + tand²)·(jω/ω₀)^(1−n)/(jωC),  n = 1 − (2/π)·atan(tand)
	//	  = (ω/ω₀)^(1−n)·(tand − j)/(ωC),       ω₀ = 2π·1 kHz
	//
	// C is the series capacitance at 1 kHz. A loss tangent that is constant
	// over frequency forces the capacitance to fall as ω^(n−1): this is the
	// only such law that obeys the Kramers–Kronig relations.
	LossCapacitor
	// ConstantPhase is the constant-phase element. Parameters Q in
	// F·s^(n−1), n (1) with 0 < n < 1.
	//
	//	Z = 1/(Q·(jω)^n)
	ConstantPhase
	// Skin is the high-frequency limit of skin effect, with equal real and
	// imaginary parts. Parameter K in Ω·s^½.
	//
	//	Z = K·√(jω)
	Skin
	// RCLine is an open-ended line of distributed resistance and
	// capacitance, as in porous or wound electrodes. Parameters: total R in
	// Ω, total C in F.
	//
	//	Z = √(R/(jωC))·coth √(jωRC)
	//
	// At low frequency Z → R/3 + 1/(jωC), at high frequency √(R/(jωC)).
	RCLine
)

// Scale says how a fit represents a parameter, so that it cannot leave its
// physical range.
type Scale int

const (
	// LogScale: the unknown is x = ln p, p > 0.
	LogScale Scale = iota
	// LogitScale: the unknown is x = ln(n/(1−n)), 0 < n < 1.
	LogitScale
)

// Unknown returns the unknown x of a parameter value.
func (s Scale) Unknown(value float64) float64 {
	if s == LogitScale {
		return math.Log(value / (1 - value))
	}
	return math.Log(value)
}

// Value returns the parameter value of an unknown x.
func (s Scale) Value(x float64) float64 {
	if s == LogitScale {
		return 1 / (1 + math.Exp(-x))
	}
	return math.Exp(x)
}

// Slope returns dp/dx at a parameter value: p for [LogScale], n(1−n) for
// [LogitScale].
func (s Scale) Slope(value float64) float64 {
	if s == LogitScale {
		return value * (1 - value)
	}
	return value
}

// MinValue and MaxValue bound the value of any parameter on a [LogScale]. The
// range is far beyond any part (1e-18 F, 1e18 Ω) and so narrow that no
// product or reciprocal formed during an evaluation between 1 mHz and 100 GHz
// leaves the range of a float64.
const (
	MinValue = 1e-40
	MaxValue = 1e40
)

// lossReference is ω₀ of the loss capacitor: 2π·1 kHz, the frequency at which
// small capacitors are commonly specified.
const lossReference = 2 * math.Pi * 1000

type parameterLaw struct {
	symbol string // in the form that an error suggests
	unit   string
	scale  Scale
	// quantity is the trade's word for the parameter.
	quantity string
}

// laws lists the parameters of each element, in the order in which an
// expression gives them. name is empty where a leading letter says the
// element, else the function of the notation.
var laws = [...]struct {
	name       string
	parameters []parameterLaw
}{
	Resistor:  {"", []parameterLaw{{"R", "Ω", LogScale, "resistance"}}},
	Inductor:  {"", []parameterLaw{{"L", "H", LogScale, "inductance"}}},
	Capacitor: {"", []parameterLaw{{"C", "F", LogScale, "capacitance"}}},
	LossCapacitor: {"loss", []parameterLaw{
		{"C", "F", LogScale, "series capacitance at 1 kHz"}, {"tand", "1", LogScale, "loss tangent"}}},
	ConstantPhase: {"cpe", []parameterLaw{
		{"Q", "F·s^(n−1)", LogScale, "constant-phase coefficient"}, {"n", "1", LogitScale, "exponent"}}},
	Skin: {"skin", []parameterLaw{{"K", "Ω·s^½", LogScale, "skin-effect coefficient"}}},
	RCLine: {"rcline", []parameterLaw{
		{"R", "Ω", LogScale, "total line resistance"}, {"C", "F", LogScale, "total line capacitance"}}},
}

// functionElement returns the element that a function name of the notation
// stands for.
func functionElement(name string) (Element, bool) {
	for e, law := range laws {
		if law.name != "" && law.name == name {
			return Element(e), true
		}
	}
	return 0, false
}

// form returns how a function is written, such as "loss(C, tand)".
func (e Element) form() string {
	var symbols []string
	for _, p := range laws[e].parameters {
		symbols = append(symbols, p.symbol)
	}
	return laws[e].name + "(" + strings.Join(symbols, ", ") + ")"
}

// leafElement returns the element that a plain name stands for: by its first
// letter R, L or C (the reference letters of IEEE 315 and IEC 81346-2), or by
// the trade names ESR, ESL and DCR with or without digits.
func leafElement(name string) (Element, bool) {
	if len(name) >= 3 && isDigits(name[3:]) {
		switch name[:3] {
		case "ESR", "DCR":
			return Resistor, true
		case "ESL":
			return Inductor, true
		}
	}
	switch name[0] {
	case 'R':
		return Resistor, true
	case 'L':
		return Inductor, true
	case 'C':
		return Capacitor, true
	}
	return 0, false
}

func isDigits(s string) bool {
	for i := range len(s) {
		if s[i] < '0' || s[i] > '9' {
			return false
		}
	}
	return true
}

// lineFactor returns g(u) = coth(√u)/√u for u = jθ with θ = ωRC > 0, and
// u·g′(u), the two functions from which the RC line and its derivatives are
// made:
//
//	Z = R·g(jωRC),  ∂Z/∂ln C = R·u·g′,  ∂Z/∂ln R = R·(g + u·g′).
//
// With √u = (1 + j)·t/2, t = √(2θ):
//
//	coth √u = (sinh t − j sin t)/(cosh t − cos t),  u·g′ = −(g + 1/sinh²√u)/2.
//
// Below θ = 0.5 the real part R/3 would drown in the rounding of 1/u, so
// that the Laurent series of coth is used there (coefficients from the
// Bernoulli numbers, 2^(2k)·B_2k/(2k)!).
func lineFactor(theta float64) (g, slope complex128) {
	if theta < 0.5 {
		// g = 1/u + Σ a_k u^k, u·g′ = −1/u + Σ k·a_k·u^k. The ratio of
		// successive coefficients tends to 1/π², so that 14 terms reach
		// (0.5/π²)^14 ≈ 1e-18. The even ones are real, the odd ones imaginary.
		square := theta * theta
		var re, im, reSlope, imSlope float64
		for i := len(cothSeries) - 2; i >= 0; i -= 2 {
			even, odd := cothSeries[i], cothSeries[i+1]
			re = even - square*re
			im = odd - square*im
			reSlope = float64(i)*even - square*reSlope
			imSlope = float64(i+1)*odd - square*imSlope
		}
		return complex(re, theta*im-1/theta), complex(reSlope, theta*imSlope+1/theta)
	}
	t := math.Sqrt(2 * theta)
	if t > 40 { // coth √u − 1 and 1/sinh²√u are below the rounding of 1
		return complex(1/t, -1/t), complex(-0.5/t, 0.5/t)
	}
	sin, cos := math.Sincos(t)
	grow := math.Exp(t)
	decay := 1 / grow
	d := 2 / (grow + decay - 2*cos)
	re, im := (grow-decay)/2*d, -sin*d // coth √u
	g = complex((re+im)/t, (im-re)/t)  // coth √u·(1 − j)/t
	return g, complex((1-re*re+im*im-real(g))/2, -re*im-imag(g)/2)
}

// cothSeries holds a_k of coth(√u)/√u = 1/u + Σ a_k·u^k, k = 0, 1, …:
// a_k = 2^(2k+2)·B_(2k+2)/(2k+2)! = 2·(−1)^k·ζ(2k+2)/π^(2k+2).
var cothSeries = func() (a [14]float64) {
	sign, power := 2.0, 1.0
	for k := range a {
		power *= math.Pi * math.Pi
		a[k] = sign * mathext.Zeta(float64(2*k+2), 1) / power
		sign = -sign
	}
	return a
}()
