package fit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"realpart/models"
)

// FigureValue is a data-sheet quantity of a fitted circuit at a frequency.
type FigureValue struct {
	Figure models.Figure
	At     float64 // Hz
	Value  float64
	// Low95 and High95 bound the 95 % interval; NaN if there is none.
	Low95, High95 float64
	// Measured is the figure of the sweep itself, interpolated between its
	// points; NaN outside the sweep.
	Measured float64
	// Resolution is the smallest series resistance that the meter's stated
	// phase accuracy can tell from zero there, |Z| times that accuracy, in
	// Ω; NaN without a stated accuracy or outside the sweep.
	Resolution float64
	// BelowResolution tells that ESR is smaller than Resolution.
	BelowResolution bool
}

// Figure returns a figure at a frequency in Hz with its uncertainty by the
// delta method. Figures that are positive for every passive part have an
// interval symmetric in their logarithm. Where a parameter is not determined,
// the delta method sees nothing of what its element could do; the interval
// then also holds the figure of every circuit at the limits of the profiles.
func (r *Result) Figure(f models.Figure, freq float64) FigureValue {
	return r.figures([]models.Figure{f}, []float64{freq})[0]
}

// Figures returns all figures at frequencies in Hz: those of [models.Figures],
// in their order, at the first, and so on; see [Result.Figure]. The circuit is
// evaluated once.
func (r *Result) Figures(freq []float64) []FigureValue {
	return r.figures(models.Figures(), freq)
}

func (r *Result) figures(names []models.Figure, freq []float64) []FigureValue {
	out := make([]FigureValue, 0, len(freq)*len(names))
	z, dz := r.jacobian(freq)
	for i, f := range freq {
		measured, inside := r.measuredAt(f)
		for _, name := range names {
			value, byR, byX := name.Of(f, z[i])
			scatter, meter := r.variance(func(k int) float64 {
				return byR*real(dz[k][i]) + byX*imag(dz[k][i])
			})
			v := FigureValue{Figure: name, At: f, Value: value, Measured: math.NaN(), Resolution: math.NaN()}
			u := expand(scatter, meter, float64(r.DegreesOfFreedom))
			switch name {
			case models.ESR, models.D, models.Q, models.Zabs:
				v.Low95, v.High95 = value*math.Exp(-u/value), value*math.Exp(u/value)
			default:
				v.Low95, v.High95 = value-u, value+u
			}
			r.widen(&v)
			if inside {
				v.Measured, _, _ = name.Of(f, measured)
				if accuracy := r.phaseAccuracyAt(f); accuracy > 0 {
					v.Resolution = abs(measured) * accuracy
					v.BelowResolution = real(z[i]) < v.Resolution
				}
			}
			out = append(out, v)
		}
	}
	return out
}

// widen takes the circuits at the limits of profiled parameters into the
// interval of a figure.
func (r *Result) widen(v *FigureValue) {
	if len(r.extremes) == 0 {
		return
	}
	values := r.Values()
	e := r.Circuit.NewEvaluator([]float64{v.At})
	var z [1]complex128
	for _, x := range r.extremes {
		for c, i := range r.Free {
			values[i] = r.Parameters[i].Scale.Value(x[c])
		}
		e.Impedance(z[:], values)
		if value, _, _ := v.Figure.Of(v.At, z[0]); !math.IsNaN(value) && !math.IsInf(value, 0) {
			v.Low95, v.High95 = min(v.Low95, value), max(v.High95, value)
		}
	}
}

// at returns Z and ∂Z/∂x of all parameters at a frequency.
func (r *Result) at(freq float64) (complex128, []complex128) {
	z, columns := r.jacobian([]float64{freq})
	dz := make([]complex128, len(columns))
	for k, column := range columns {
		dz[k] = column[0]
	}
	return z[0], dz
}

// jacobian returns Z and the columns of ∂Z/∂x of all parameters at frequencies.
func (r *Result) jacobian(freq []float64) (z []complex128, columns [][]complex128) {
	n := len(freq)
	z, columns = make([]complex128, n), make([][]complex128, len(r.Parameters))
	flat := make([]complex128, n*len(columns))
	for k := range columns {
		columns[k] = flat[k*n : (k+1)*n]
	}
	r.Circuit.NewEvaluator(freq).Jacobian(z, columns, r.Values())
	return z, columns
}

// variance returns the variances from scatter and from the meter of a
// quantity whose derivative by the unknown of parameter k is given.
func (r *Result) variance(derivative func(k int) float64) (scatter, meter float64) {
	if len(r.Free) == 0 {
		return 0, 0
	}
	var memory [12]float64
	g := memory[:0]
	for _, k := range r.Free {
		g = append(g, derivative(k))
	}
	scatter = quadratic(g, r.Covariance)
	if r.MeterCovariance != nil {
		meter = quadratic(g, r.MeterCovariance)
	}
	return max(scatter, 0), max(meter, 0)
}

// quadratic returns gᵀ·C·g. Every figure at every frequency asks for one.
func quadratic(g []float64, c *mat.SymDense) (sum float64) {
	raw := c.RawSymmetric()
	for i, gi := range g {
		row := raw.Data[i*raw.Stride : i*raw.Stride+raw.N]
		sum += gi * gi * row[i]
		for j := i + 1; j < raw.N; j++ {
			sum += 2 * gi * g[j] * row[j]
		}
	}
	return sum
}

// measuredAt interpolates the sweep in ln f: its resistance linearly, its
// reactance as a power of f where it keeps its sign.
func (r *Result) measuredAt(freq float64) (complex128, bool) {
	n := len(r.Freq)
	if n == 0 || freq < r.Freq[0] || freq > r.Freq[n-1] {
		return 0, false
	}
	i, exact := slices.BinarySearch(r.Freq, freq)
	if exact {
		return r.Measured[i], true
	}
	a, b := r.Measured[i-1], r.Measured[i]
	t := math.Log(freq/r.Freq[i-1]) / math.Log(r.Freq[i]/r.Freq[i-1])
	x := imag(a) + t*(imag(b)-imag(a))
	if imag(a)*imag(b) > 0 {
		x = math.Copysign(math.Exp((1-t)*math.Log(math.Abs(imag(a)))+t*math.Log(math.Abs(imag(b)))), imag(a))
	}
	return complex(real(a)+t*(real(b)-real(a)), x), true
}

// phaseAccuracyAt returns the stated phase accuracy of the nearest point in
// radians, 0 if none was stated.
func (r *Result) phaseAccuracyAt(freq float64) float64 {
	if r.problem.phase == nil {
		return 0
	}
	i, _ := slices.BinarySearch(r.Freq, freq)
	if i == len(r.Freq) || i > 0 && freq/r.Freq[i-1] < r.Freq[i]/freq {
		i--
	}
	return r.problem.phase[i]
}

// Resonance is a self-resonance of a fitted circuit.
type Resonance struct {
	models.Resonance
	// StdError is the standard uncertainty of the frequency from scatter,
	// MeterError that from the meter's stated accuracy, in Hz; the latter is
	// NaN where none was stated.
	StdError, MeterError float64
	// InSweep tells whether the frequency lies inside the sweep.
	InSweep bool
}

// Resonances returns the self-resonances from a decade below to a decade
// above the sweep. With X(f₀, x) = 0, the sensitivities of f₀ are
//
//	∂ln f₀/∂x_k = −(∂X/∂x_k)/(∂X/∂ln f).
func (r *Result) Resonances() []Resonance {
	first, last := r.Freq[0], r.Freq[len(r.Freq)-1]
	values := r.Values()
	var out []Resonance
	for _, found := range r.Circuit.Resonances(values, first/10, last*10) {
		_, dz := r.at(found.Freq)
		slope := imag(r.Circuit.FrequencyDerivative(dz, values))
		scatter, meter := r.variance(func(k int) float64 { return -imag(dz[k]) / slope })
		resonance := Resonance{
			Resonance: found,
			StdError:  found.Freq * math.Sqrt(scatter), MeterError: math.NaN(),
			InSweep: found.Freq >= first && found.Freq <= last,
		}
		if r.MeterCovariance != nil {
			resonance.MeterError = found.Freq * math.Sqrt(meter)
		}
		out = append(out, resonance)
	}
	return out
}
