package derating

import (
	"cmp"
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"gonum.org/v1/gonum/dsp/fourier"

	"realpart/models/quantity"
)

// Line is one frequency of a ripple current.
type Line struct {
	Freq float64 // Hz; 0 is direct current
	RMS  float64 // A
}

// Spectrum is a ripple current.
type Spectrum struct {
	// Text says what it is.
	Text string
	// Lines are those that the loss is summed over, in rising frequency, of
	// the AC part alone.
	Lines []Line
	// RMS in A is that of the whole AC part: of a waveform in closed form,
	// of samples from the samples, else the root sum of squares.
	RMS float64
	// Covered is the share of RMS² that Lines hold.
	Covered float64
	// Mean is the direct current in A, 0 where none is known.
	Mean float64
	// Sampled tells that Lines come from samples; Alias then holds the share
	// of RMS² in the upper half of the frequencies that the samples can show.
	Sampled bool
	Alias   float64

	fundamental float64      // Hz, of a waveform
	phasors     []complex128 // A, RMS, of the harmonics 1, 2, … that make a waveform's voltage; nil where phases are unknown
	// steps tells that the current jumps, so that the voltage across an
	// inductance has no bound.
	steps bool
}

const (
	// coverage is the share of the squared RMS that the harmonics of a
	// waveform must hold.
	coverage = 0.999
	// mostHarmonics bounds the lines of a waveform.
	mostHarmonics = 20000
	// voltageHarmonics is how many a waveform's voltage takes, or, where the
	// edges are short, edgeHarmonics divided by their share of the period:
	// an inductance turns edges into steps.
	voltageHarmonics = 1000
	edgeHarmonics    = 16
)

// NewLines makes a spectrum of stated lines. A line at 0 Hz is direct current.
// Lines must have positive currents and different frequencies.
func NewLines(lines []Line) (*Spectrum, error) {
	s := &Spectrum{Covered: 1}
	sum := 0.0
	for _, l := range slices.SortedStableFunc(slices.Values(lines), func(a, b Line) int { return cmp.Compare(a.Freq, b.Freq) }) {
		switch n := len(s.Lines); {
		case !(l.Freq >= 0) || math.IsInf(l.Freq, 1):
			return nil, fmt.Errorf("expected a frequency of 0 Hz or more, found %v Hz", l.Freq)
		case !(l.RMS > 0) || math.IsInf(l.RMS, 1):
			return nil, fmt.Errorf("expected an RMS current above 0 A at %v Hz, found %v A", l.Freq, l.RMS)
		case n > 0 && s.Lines[n-1].Freq == l.Freq || l.Freq == 0 && s.Mean > 0:
			return nil, fmt.Errorf("expected each frequency once, found %v Hz again", l.Freq)
		case l.Freq == 0:
			s.Mean = l.RMS
		default:
			s.Lines = append(s.Lines, l)
			sum += l.RMS * l.RMS
		}
	}
	if len(s.Lines) == 0 {
		return nil, fmt.Errorf("expected at least one frequency above 0 Hz, found none")
	}
	if len(s.Lines) > mostHarmonics {
		return nil, fmt.Errorf("expected at most %d frequencies, found %d", mostHarmonics, len(s.Lines))
	}
	s.RMS = math.Sqrt(sum)
	s.Text = "currents at " + count(len(s.Lines), "frequency", "frequencies")
	return s, nil
}

// NewWaveform makes the spectrum of a trapezoid, triangle or rectangle that
// repeats with a frequency in Hz: as many harmonics as hold 99.9 % of the
// squared RMS.
func NewWaveform(kind string, w Trapezoid, fundamental float64) (*Spectrum, error) {
	if err := w.check(); err != nil {
		return nil, err
	}
	s := &Spectrum{Text: w.describe(kind, fundamental), RMS: w.RMS(), fundamental: fundamental, steps: w.Rise == 0 || w.Fall == 0}
	if err := s.cover(func(n int) complex128 { return w.Harmonic(n) }, mostHarmonics); err != nil {
		return nil, fmt.Errorf("%w; a real current has edges: give trapezoid with its rise time, or a longer duty", err)
	}
	if edge := min(w.Rise, w.Fall); edge > 0 {
		n := max(len(s.phasors), voltageHarmonics, min(mostHarmonics, int(math.Ceil(edgeHarmonics/edge))))
		for k := len(s.phasors) + 1; k <= n; k++ {
			s.phasors = append(s.phasors, w.Harmonic(k))
		}
		// Lanczos's factors: the sum overshoots a step by 1 % of it, to the
		// cautious side, not by 9 %.
		for k := range s.phasors {
			s.phasors[k] *= complex(sinc(math.Pi*float64(k+1)/float64(n+1)), 0)
		}
	}
	return s, nil
}

// NewSampled makes the spectrum of one period of a current in A, sampled in
// equal steps with the first value not repeated at the end.
func NewSampled(samples []float64, fundamental float64) (*Spectrum, error) {
	const fewest = 8
	if len(samples) < fewest || len(samples) > 2*mostHarmonics {
		return nil, fmt.Errorf("expected %d to %d samples of a period, found %d", fewest, 2*mostHarmonics, len(samples))
	}
	phasors, rms, mean := sampledPeriod(samples)
	if !(rms > 1e-9*math.Abs(mean)) {
		return nil, fmt.Errorf("expected a current that changes over the period, found a constant one")
	}
	s := &Spectrum{
		Text: fmt.Sprintf("period of %d samples at %s", len(samples), quantity.Format(fundamental, "Hz", 4)),
		RMS:  rms, Mean: mean, Sampled: true, fundamental: fundamental,
	}
	if err := s.cover(func(n int) complex128 { return phasors[n-1] }, len(phasors)); err != nil {
		return nil, err
	}
	for _, c := range phasors[len(phasors)/2:] {
		s.Alias += square(c) / (rms * rms)
	}
	s.phasors = phasors
	return s, nil
}

// cover takes harmonics until they hold the share [coverage] of the squared
// RMS. Those that are nothing, such as the even ones of a symmetric triangle,
// have no line.
func (s *Spectrum) cover(harmonic func(n int) complex128, most int) error {
	total, sum := s.RMS*s.RMS, 0.0
	for n := 1; sum < coverage*total; n++ {
		if n > most {
			return fmt.Errorf("expected a current whose first %d harmonics hold 99.9 %% of its squared RMS, found %.2f %%", most, 100*sum/total)
		}
		c := harmonic(n)
		s.phasors = append(s.phasors, c)
		if q := square(c); q > 1e-20*total {
			sum += q
			s.Lines = append(s.Lines, Line{float64(n) * s.fundamental, math.Sqrt(q)})
		}
	}
	s.Covered = sum / total
	return nil
}

func square(c complex128) float64 { return real(c)*real(c) + imag(c)*imag(c) }

// voltage returns the ripple voltage in V across an impedance in Ω over
// frequency in Hz: of a waveform the highest and the lowest value over a
// period. Where the phases of the lines are not known it is ±√2·ΣI·|Z|, which
// none exceed, and rootSum is √2 times the root sum of squares, which
// independent phases make likely.
func (s *Spectrum) voltage(impedance func(freq []float64) []complex128) (high, low, rootSum float64) {
	var freq []float64
	if s.phasors == nil {
		for _, l := range s.Lines {
			freq = append(freq, l.Freq)
		}
		sum := 0.0
		for i, z := range impedance(freq) {
			v := s.Lines[i].RMS * cmplx.Abs(z)
			high += math.Sqrt2 * v
			sum += v * v
		}
		return high, -high, math.Sqrt2 * math.Sqrt(sum)
	}
	for k := range s.phasors {
		freq = append(freq, float64(k+1)*s.fundamental)
	}
	// A sequence of n harmonics at eight points for the shortest period
	// misses at most 1 − cos(π/8) = 8 % of the last one's peak.
	n := 8 * (len(s.phasors) + 1)
	c := make([]complex128, n/2+1)
	for k, z := range impedance(freq) {
		c[k+1] = s.phasors[k] * z / complex(math.Sqrt2, 0)
	}
	for _, v := range fourier.NewFFT(n).Sequence(nil, c) {
		high, low = max(high, v), min(low, v)
	}
	return high, low, 0
}

// count gives a number with its noun.
func count(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %s", n, many)
}
