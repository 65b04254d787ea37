package fit

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"realpart/models"
	"realpart/models/quantity"
)

// Limits between the kinds of part. They are common practice, no source: what
// parts sold under these names look like.
const (
	reactivePhase = 45.0 // degrees: beyond it an end of the sweep counts as reactive
	inductorQ     = 3.0  // least Q of a parallel resonance of an inductor; a bead's is lower
	resonatorQ    = 20.0 // least Q of the series resonance of a resonator
	inductiveRise = 5.0  // least rise of |Z| over its low end of an inductor or bead that begins resistive
)

// TellKind tells the kind of part from a sweep (Hz, Ω): from the phase at both
// ends, the resonances and their Q, and how |Z| goes. It also says why, in
// words.
func TellKind(freq []float64, z []complex128) (models.Kind, string) {
	n := len(z)
	phase := make([]float64, n)
	for i, v := range z {
		phase[i] = 180 / math.Pi * cmplx.Phase(v)
	}
	few := max(1, min(5, n/10))
	first, last := middle(phase[:few]), middle(phase[n-few:])
	low := abs(z[0])
	_, most := extremes(z)
	largest := abs(z[most])
	series, parallel := turns(freq, phase)
	ends := fmt.Sprintf("phase %.0f° at the low and %.0f° at the high end", first, last)

	inductive := func() (models.Kind, string) {
		switch {
		case len(parallel) > 0 && parallel[0].q >= inductorQ:
			return models.InductorPart, fmt.Sprintf("%s, parallel resonance of Q ≈ %.2g at %s", ends, parallel[0].q, quantity.Format(parallel[0].freq, "Hz", 3))
		case len(parallel) > 0:
			return models.BeadPart, fmt.Sprintf("%s, parallel resonance at %s with a Q of only about %.2g", ends, quantity.Format(parallel[0].freq, "Hz", 3), parallel[0].q)
		case last < reactivePhase && largest > inductiveRise*low:
			return models.BeadPart, ends + ", resistive after an inductive rise"
		}
		return models.InductorPart, ends
	}
	switch {
	case first < -reactivePhase:
		if len(series) > 0 && len(parallel) > 0 && series[0].q >= resonatorQ && last < -reactivePhase &&
			parallel[0].freq > series[0].freq && parallel[0].freq < 2*series[0].freq {
			return models.ResonatorPart, fmt.Sprintf("capacitive at both ends with a series resonance of Q ≈ %.2g and a parallel resonance just above", series[0].q)
		}
		return models.CapacitorPart, ends
	case first > reactivePhase:
		return inductive()
	}
	// Resistive at the low end.
	highest := slices.Max(phase)
	switch {
	case first < -5 && len(series) > 0 && len(parallel) == 0, first < -5 && last > first+5 && largest < 2*low:
		return models.CapacitorPart, ends + ", capacitive at the low end"
	case highest > reactivePhase && largest > inductiveRise*low:
		return inductive()
	case highest > 75 && len(series) == 0:
		return models.InductorPart, fmt.Sprintf("%s, up to %.0f° between", ends, highest)
	}
	return models.ResistorPart, ends
}

// turn is a place where the phase goes from one side to the other.
type turn struct{ freq, q float64 }

// turns returns the series resonances (phase from below −20° to above +20°)
// and the parallel ones of a sweep.
func turns(freq, phase []float64) (series, parallel []turn) {
	const certain = 20.0
	side, from := 0, 0
	for i, p := range phase {
		now := 0
		if p > certain {
			now = 1
		} else if p < -certain {
			now = -1
		}
		if now == 0 {
			continue
		}
		if side != 0 && now != side {
			found := describe(freq, phase, from, i)
			if now > 0 {
				series = append(series, found)
			} else {
				parallel = append(parallel, found)
			}
		}
		side, from = now, i
	}
	return series, parallel
}

// describe measures the passage of the phase between two points on either
// side of it. Q follows from the frequencies at which the phase passes ±45°,
// f₀/(f₂ − f₁), and is 0.5 where it doesn't get there. Where the points are so
// far apart that it passes both between two of them, f₀ and Q are those of the
// resonant circuit that has these two phases,
//
//	|tan φ| = Q·|f/f₀ − f₀/f|.
func describe(freq, phase []float64, a, b int) turn {
	if math.Abs(phase[a]) >= 45 && math.Abs(phase[b]) >= 45 {
		const steepest = 89.9 // degrees; the noise of a phase near 90° is no Q
		tangent := func(i int) float64 { return math.Tan(math.Pi / 180 * min(math.Abs(phase[i]), steepest)) }
		ratio := tangent(a) / tangent(b)
		f0 := math.Sqrt((freq[a] + ratio*freq[b]) / (1/freq[a] + ratio/freq[b]))
		return turn{freq: f0, q: tangent(a) / (f0/freq[a] - freq[a]/f0)}
	}
	cross := func(level float64, i, j int) float64 {
		t := (level - phase[i]) / (phase[j] - phase[i])
		return freq[i] * math.Pow(freq[j]/freq[i], min(max(t, 0), 1))
	}
	sign := 1.0
	if phase[b] < phase[a] {
		sign = -1
	}
	found := turn{freq: cross(0, a, b), q: 0.5}
	i := a
	for i > 0 && sign*phase[i] > -45 && sign*phase[i] < 0 {
		i--
	}
	j := b
	for j < len(phase)-1 && sign*phase[j] < 45 && sign*phase[j] > 0 {
		j++
	}
	if sign*phase[i] > -45 || sign*phase[j] < 45 {
		return found
	}
	low, high := cross(-45*sign, i, min(i+1, j)), cross(45*sign, max(j-1, i), j)
	found.q = found.freq / (high - low)
	return found
}

func middle(v []float64) float64 {
	s := slices.Clone(v)
	slices.Sort(s)
	return s[len(s)/2]
}
