package derating

import (
	"realpart/fit"
	"realpart/models"
)

// direct is the fraction of a sweep's lowest frequency at which a fitted
// circuit stands for direct current.
const direct = 1e-6

// resistance is R of a fitted circuit in Ω at the lines of a spectrum, with
// ∂ln R/∂x of each free parameter's unknown x.
type resistance struct {
	fit *fit.Result
	r   []float64
	dln [][]float64 // [free parameter][line]
}

// resistanceOf evaluates a fit at frequencies in Hz; 0 is direct current.
func resistanceOf(r *fit.Result, freq []float64) *resistance {
	at := make([]float64, len(freq))
	for i, f := range freq {
		at[i] = f
		if f == 0 {
			at[i] = r.Freq[0] * direct
		}
	}
	z := make([]complex128, len(at))
	dz := make([][]complex128, len(r.Parameters))
	for k := range dz {
		dz[k] = make([]complex128, len(at))
	}
	r.Circuit.NewEvaluator(at).Jacobian(z, dz, r.Values())
	out := &resistance{fit: r, r: make([]float64, len(at)), dln: make([][]float64, len(r.Free))}
	for i := range z {
		out.r[i] = real(z[i])
	}
	for c, k := range r.Free {
		out.dln[c] = make([]float64, len(at))
		for i := range at {
			if out.r[i] != 0 {
				out.dln[c][i] = real(dz[k][i]) / out.r[i]
			}
		}
	}
	return out
}

// impedance returns Z in Ω of a fitted circuit over frequency in Hz.
func impedance(r *fit.Result) func(freq []float64) []complex128 {
	return func(freq []float64) []complex128 {
		z := make([]complex128, len(freq))
		if len(freq) > 0 {
			r.Circuit.NewEvaluator(freq).Impedance(z, r.Values())
		}
		return z
	}
}

// esrAt is the fit's ESR with its interval, the measured one and the meter's
// resolution.
func esrAt(r *fit.Result, freq float64) fit.FigureValue {
	if freq == 0 {
		freq = r.Freq[0] * direct
	}
	return r.Figure(models.ESR, freq)
}

func inSweep(r *fit.Result, freq float64) bool {
	// Frequencies in files are rounded.
	const slack = 1e-9
	return freq >= r.Freq[0]*(1-slack) && freq <= r.Freq[len(r.Freq)-1]*(1+slack)
}
