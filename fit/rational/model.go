// Package rational approximates a measured impedance sweep by a stable rational function with real coefficients,
//
//	Z(s) = d + s·e + q/s + Σ r_k/(s − p_k),  s = j·2πf,  Re p_k < 0,
//
// and knows nothing of circuits. It serves three ends.
//
// Check judges a sweep: does any stable, linear, causal impedance pass through the points? Every lumped or distributed passive part
// is such a function; a sweep with a fault in it (a range step, a part that warmed up, swapped columns) is not. The order is raised
// until more poles no longer help (an F test), so what the function leaves behind estimates the noise without any circuit. Steps looks
// for level steps between neighbouring points, PointNoise estimates the noise from the points alone.
//
// Ladder turns a distributed element into R-C or R-L sections with positive values for a circuit simulator.
//
// The poles of Fit are starting values for a circuit fit.
//
// # Method
//
// Poles are relocated by vector fitting: with σ(s) = d̃ + Σ c̃_k/(s − p_k), the linear problem σ·Z = N over the same poles is solved,
// and the zeros of σ, eigenvalues of a small real matrix, are the better poles. Poles that come out unstable are flipped. The function
// is then polished by a damped Gauss–Newton iteration on ρ = ln(Z_model/Z), whose real part is the relative error of |Z| and whose
// imaginary part is the phase error. Poles are added one (real) or two (a pair) at a time, where the remaining residual projects on
// them best, and those already found stay as a start.
//
// Internally a pair of poles is a second-order section (r₁s + r₀)/(s² + 2αs + β), so that two real poles can meet and part as a complex
// pair without a singular step; frequencies are normalised to the middle of the sweep and columns are scaled before every solve.
//
// # What cannot be seen
//
// A finite sweep does not determine an analytic function outside its band, and poles outside can mimic any smooth change inside: in
// principle every continuous error can be approximated, at the price of huge residues. Poles are therefore held to the swept band and
// a margin beside it (Settings.Margin), and each must earn its place. A drift much slower than the sweep, a common error of magnitude or
// of scale, and any fault that equals the response of another passive part (a lead inductance, a fixture's stray capacitance) are
// indistinguishable from the part and are not claimed. A resonance narrower than the spacing of the points is not seen, either.
//
// Sources: Gustavsen, Semlyen 1999, IEEE Trans. Power Delivery 14, 1052–1061, doi:10.1109/61.772353; relaxed form: Gustavsen 2006,
// IEEE Trans. Power Delivery 21, 1587–1592, doi:10.1109/TPWRD.2005.860281.
package rational

import "math"

// A Model is a rational impedance in ohms,
//
//	Z(s) = Constant + s·Slope + Origin/s + Σ Residues[k]/(s − Poles[k]),  s = j·2πf.
type Model struct {
	Constant float64 // d, Ω
	Slope    float64 // e, Ω·s (an inductance in henries)
	Origin   float64 // residue of the pole at 0, Ω/s (the reciprocal of a capacitance in farads)

	Poles    []complex128 // 1/s (rad/s), Re < 0; of a pair both are listed, the upper one first
	Residues []complex128 // Ω/s, one for each pole
}

// At returns Z in Ω at the frequency freq in Hz. At 0 Hz the pole at the origin, if any, gives an infinity.
func (m *Model) At(freq float64) complex128 {
	s := complex(0, 2*math.Pi*freq)
	z := complex(m.Constant, m.Slope*imag(s))
	if m.Origin != 0 {
		z += complex(0, -m.Origin/imag(s))
	}
	for k, p := range m.Poles {
		z += m.Residues[k] / (s - p)
	}
	return z
}

// NonPassive returns the indices of the points with a negative real part: no passive part has one, so noise at a low-loss point,
// a wrong compensation, or swapped or sign-reversed columns are behind them. A NaN counts as non-passive.
func NonPassive(z []complex128) []int {
	var out []int
	for i, v := range z {
		if !(real(v) >= 0) {
			out = append(out, i)
		}
	}
	return out
}
