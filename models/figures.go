package models

import (
	"math"
)

// Figure is a quantity that data sheets state of a part at a frequency. All
// follow from its impedance Z = R + jX and its admittance Y = 1/Z = G + jB.
type Figure string

// The figures, with their definitions (IEC 60384-1 for capacitors; the
// definitions for inductors are their duals).
const (
	ESR   Figure = "ESR"   // equivalent series resistance R, Ω
	X     Figure = "X"     // reactance, Ω
	Cs    Figure = "Cs"    // series capacitance −1/(ωX), F; negative above a capacitor's resonance
	Cp    Figure = "Cp"    // parallel capacitance B/ω, F
	Ls    Figure = "Ls"    // series inductance X/ω, H
	Lp    Figure = "Lp"    // parallel inductance −1/(ωB), H
	D     Figure = "D"     // dissipation factor R/|X|
	Q     Figure = "Q"     // quality factor |X|/R
	Zabs  Figure = "Z"     // magnitude of the impedance, Ω
	Phase Figure = "phase" // of the impedance, degrees
)

// Figures returns all figures in the order in which a report gives them.
func Figures() []Figure {
	return []Figure{ESR, X, Cs, Cp, Ls, Lp, D, Q, Zabs, Phase}
}

// Unit returns the unit of a figure: Ω, F, H, ° or 1.
func (f Figure) Unit() string {
	switch f {
	case ESR, X, Zabs:
		return "Ω"
	case Cs, Cp:
		return "F"
	case Ls, Lp:
		return "H"
	case Phase:
		return "°"
	}
	return "1"
}

// Known reports whether the figure is one of [Figures].
func (f Figure) Known() bool {
	for _, g := range Figures() {
		if f == g {
			return true
		}
	}
	return false
}

// Of returns the figure for an impedance z in ohms at a frequency in Hz, and
// its derivatives by the real and the imaginary part of z. It panics for an
// unknown figure. A figure that does not exist there (C_s where X = 0) is
// infinite or NaN.
func (f Figure) Of(freq float64, z complex128) (value, byR, byX float64) {
	omega := 2 * math.Pi * freq
	r, x := real(z), imag(z)
	square := r*r + x*x
	sign := math.Copysign(1, x)
	switch f {
	case ESR:
		return r, 1, 0
	case X:
		return x, 0, 1
	case Cs:
		return -1 / (omega * x), 0, 1 / (omega * x * x)
	case Ls:
		return x / omega, 0, 1 / omega
	case Cp:
		// B = −x/square; ∂B/∂r = 2rx/square², ∂B/∂x = (x² − r²)/square²
		return -x / square / omega, 2 * r * x / square / square / omega, (x*x - r*r) / square / square / omega
	case Lp:
		// −1/(ωB) = square/(ωx)
		return square / (omega * x), 2 * r / (omega * x), (1 - r*r/(x*x)) / omega
	case D:
		return r / math.Abs(x), 1 / math.Abs(x), -sign * r / (x * x)
	case Q:
		return math.Abs(x) / r, -math.Abs(x) / (r * r), sign / r
	case Zabs:
		a := math.Hypot(r, x)
		return a, r / a, x / a
	case Phase:
		const degrees = 180 / math.Pi
		return degrees * math.Atan2(x, r), -degrees * x / square, degrees * r / square
	}
	panic("models: unknown figure " + string(f))
}
