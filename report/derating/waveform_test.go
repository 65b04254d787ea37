package derating

import (
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"gonum.org/v1/gonum/floats/scalar"
)

// near checks a number against a wanted one with a relative tolerance. NaN
// fails.
func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !scalar.EqualWithinRel(got, want, tolerance) {
		t.Errorf("%s is %v, want %v, difference %.2g, tolerance %v of it", what, got, want, got-want, tolerance)
	}
}

func parse(t testing.TB, text string) *Spectrum {
	t.Helper()
	s, err := ParseRipple(text)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// Fourier series of handbooks (Bronstein et al., Handbook of Mathematics, table
// of Fourier expansions; from memory), with their amplitudes divided by √2:
// triangle of height H: 4H/(π²n²) for odd n; rectangle of height H and duty d:
// 2H·|sin πnd|/(πn). RMS of both: Erickson and Maksimović, Fundamentals of Power
// Electronics, appendix on RMS values (from memory).
func TestHandbookSeries(t *testing.T) {
	triangle := parse(t, "triangle:2.4App@180kHz")
	near(t, "RMS of the triangle", triangle.RMS, 2.4/math.Sqrt(12), 1e-14)
	if len(triangle.Lines) != 3 {
		t.Errorf("the triangle has %d lines, want 3", len(triangle.Lines))
	}
	for i, l := range triangle.Lines {
		n := float64(2*i + 1)
		near(t, "frequency", l.Freq, n*180e3, 1e-14)
		near(t, "triangle", l.RMS, 4*2.4/(math.Pi*math.Pi*n*n)/math.Sqrt2, 1e-12)
	}
	for _, d := range []float64{0.3, 0.5, 0.07} {
		w := Trapezoid{Height: 3, Width: d}
		near(t, "RMS of the rectangle", w.RMS(), 3*math.Sqrt(d*(1-d)), 1e-14)
		for n := 1; n <= 40; n++ {
			want := 2 * 3 * math.Abs(math.Sin(math.Pi*float64(n)*d)) / (math.Pi * float64(n)) / math.Sqrt2
			if got := cmplx.Abs(w.Harmonic(n)); math.Abs(got-want) > 1e-13 {
				t.Errorf("rectangle of duty %v: harmonic %d is %v, want %v", d, n, got, want)
			}
		}
	}
	// A sawtooth is the limit of a triangle: H/(πn).
	saw := Trapezoid{Height: 1, Rise: 1 - 1e-9, Fall: 1e-9, Width: 0.5}
	for n := 1; n <= 20; n++ {
		near(t, "sawtooth", cmplx.Abs(saw.Harmonic(n)), 1/(math.Pi*float64(n))/math.Sqrt2, 1e-6)
	}
	near(t, "RMS of the sawtooth", saw.RMS(), 1/math.Sqrt(12), 1e-12)
}

// value is the trapezoid at a phase in periods from the middle of its rising
// edge.
func (w Trapezoid) value(phase float64) float64 {
	phase -= math.Floor(phase)
	switch {
	case phase < w.Rise/2:
		return w.Height * (0.5 + phase/w.Rise)
	case phase <= w.Width-w.Fall/2:
		return w.Height
	case phase < w.Width+w.Fall/2:
		return w.Height * (0.5 - (phase-w.Width)/w.Fall)
	case phase <= 1-w.Rise/2:
		return 0
	}
	return w.Height * (0.5 + (phase-1)/w.Rise)
}

// The closed forms agree with the discrete Fourier transform of the waveform
// itself, phases included.
func TestTrapezoidAgainstSamples(t *testing.T) {
	for _, w := range []Trapezoid{
		{Height: 3, Width: 0.3, Rise: 0.05, Fall: 0.02},
		{Height: 0.7, Width: 0.5, Rise: 0.3, Fall: 0.7},
		{Height: 2, Width: 0.85, Rise: 0.01, Fall: 0.2},
		{Height: 5, Width: 0.06, Rise: 0.06, Fall: 0.06},
	} {
		const n = 1 << 16
		samples := make([]float64, n)
		for i := range samples {
			samples[i] = w.value(float64(i) / n)
		}
		phasors, rms, mean := sampledPeriod(samples)
		near(t, "RMS", w.RMS(), rms, 1e-6)
		near(t, "mean", mean, w.Height*w.Width, 1e-6)
		for k := 1; k <= 60; k++ {
			if d := cmplx.Abs(phasors[k-1] - w.Harmonic(k)); d > 1e-7*w.Height {
				t.Errorf("%+v: harmonic %d is %v, by samples %v", w, k, w.Harmonic(k), phasors[k-1])
			}
		}
	}
}

// Lines stop at the first harmonic that covers 99.9 % of the squared RMS, and
// what they hold is what they say.
func TestCoverage(t *testing.T) {
	for _, text := range []string{
		"triangle:2.4App@180kHz", "triangle:2.4App,duty=0.12@180kHz", "rectangle:3A,duty=0.3@100kHz", "rectangle:3A,duty=2%@100kHz",
		"trapezoid:3A,duty=0.3,rise=80ns@100kHz", "trapezoid:3A,duty=0.3,rise=0.1,fall=0.4@100kHz",
	} {
		s := parse(t, text)
		sum, last := 0.0, 0.0
		for _, l := range s.Lines {
			last = sum
			sum += l.RMS * l.RMS
		}
		near(t, text+": covered", s.Covered, sum/(s.RMS*s.RMS), 1e-12)
		if !(s.Covered >= 0.999 && s.Covered <= 1+1e-12) || last/(s.RMS*s.RMS) >= 0.999 {
			t.Errorf("%s: %d lines cover %v, without the last %v", text, len(s.Lines), s.Covered, last/(s.RMS*s.RMS))
		}
	}
}

// All harmonics together hold the squared RMS (Parseval's theorem).
func TestParseval(t *testing.T) {
	for _, w := range []Trapezoid{{Height: 3, Width: 0.3, Rise: 0.05, Fall: 0.02}, {Height: 2, Width: 0.5, Rise: 0.5, Fall: 0.5}} {
		sum := 0.0
		for n := 1; n <= 200000; n++ {
			sum += square(w.Harmonic(n))
		}
		near(t, "sum of squares", sum, w.RMS()*w.RMS(), 1e-9)
	}
}

// A sampled period gives the lines of the waveform that it samples; a mean is
// no ripple.
func TestSampledPeriod(t *testing.T) {
	w := Trapezoid{Height: 2.4, Width: 0.5, Rise: 0.3, Fall: 0.7}
	samples := make([]float64, 2000)
	for i := range samples {
		samples[i] = 5 + w.value(float64(i)/2000)
	}
	s, err := NewSampled(samples, 50e3)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "mean", s.Mean, 6.2, 1e-12)
	near(t, "RMS", s.RMS, 2.4/math.Sqrt(12), 1e-5)
	for i, l := range s.Lines {
		near(t, "line", l.RMS, cmplx.Abs(w.Harmonic(i+1)), 1e-4)
	}
	if s.Alias > 1e-6 {
		t.Errorf("2000 samples of a triangle count as coarse: %v", s.Alias)
	}
	// The highest frequency that samples can show has one phasor, not two.
	alternating := []float64{1, -1, 1, -1, 1, -1, 1, -1}
	s, err = NewSampled(alternating, 1e3)
	if err != nil {
		t.Fatal(err)
	}
	if len(s.Lines) != 1 || s.Lines[0].Freq != 4e3 || s.Alias < 0.99 {
		t.Errorf("alternating samples give %+v with %v in the upper half", s.Lines, s.Alias)
	}
	near(t, "alternating", s.Lines[0].RMS, 1, 1e-12)
	if _, err := NewSampled(make([]float64, 100), 1e3); err == nil {
		t.Error("a constant current gives a spectrum")
	}
}

// The peak of a waveform's voltage: across a resistance H·R/2, across an
// inductance L·di/dt; a triangle across a capacitance makes ΔI/(8·f·C) peak to
// peak. Lanczos's factors overshoot a step by 1.2 % of it. The last is the textbook formula of a converter's output ripple (Erickson and
// Maksimović, Fundamentals of Power Electronics, from memory).
func TestVoltageOfWaveform(t *testing.T) {
	s := parse(t, "triangle:2.4App@180kHz")
	of := func(f func(omega float64) complex128) func([]float64) []complex128 {
		return func(freq []float64) []complex128 {
			z := make([]complex128, len(freq))
			for i, v := range freq {
				z[i] = f(2 * math.Pi * v)
			}
			return z
		}
	}
	high, low, _ := s.voltage(of(func(float64) complex128 { return 0.1 }))
	near(t, "resistance, high", high, 0.12, 2e-3)
	near(t, "resistance, low", low, -0.12, 2e-3)
	high, low, _ = s.voltage(of(func(w float64) complex128 { return complex(0, w*20e-9) }))
	near(t, "inductance, high", high, 20e-9*2.4*2*180e3, 0.025)
	near(t, "inductance, low", low, -20e-9*2.4*2*180e3, 0.025)
	high, low, _ = s.voltage(of(func(w float64) complex128 { return 1 / complex(0, w*10e-6) }))
	near(t, "capacitance, peak to peak", high-low, 2.4/(8*180e3*10e-6), 1e-4)
	s = parse(t, "trapezoid:3A,duty=0.3,rise=50ns,fall=200ns@100kHz")
	high, low, _ = s.voltage(of(func(w float64) complex128 { return complex(0, w*14e-9) }))
	near(t, "steep edge", high, 14e-9*3/50e-9, 0.02)
	near(t, "slow edge", low, -14e-9*3/200e-9, 0.02)
	// Without phases: the worst case, and the root sum of squares.
	s = parse(t, "100kHz=3A,200kHz=4A")
	high, low, rootSum := s.voltage(of(func(float64) complex128 { return complex(0, 1) }))
	near(t, "worst", high, 7*math.Sqrt2, 1e-14)
	near(t, "worst, low", low, -7*math.Sqrt2, 1e-14)
	near(t, "root sum", rootSum, 5*math.Sqrt2, 1e-14)
}

func TestParseRipple(t *testing.T) {
	s := parse(t, "200kHz=0.9A, 100k=3.2Arms,0Hz=5A")
	if len(s.Lines) != 2 || s.Lines[0] != (Line{100e3, 3.2}) || s.Lines[1] != (Line{200e3, 0.9}) || s.Mean != 5 {
		t.Errorf("read as %+v with a mean of %v", s.Lines, s.Mean)
	}
	near(t, "RMS", s.RMS, math.Hypot(3.2, 0.9), 1e-14)
	if s := parse(t, "Triangle:800mApp,duty=30%,mean=3A@0.2MHz"); s.Mean != 3 || s.fundamental != 200e3 {
		t.Errorf("mean %v, frequency %v", s.Mean, s.fundamental)
	}
	time := parse(t, "trapezoid:3A,duty=0.3,rise=80ns,fall=2%@100kHz")
	share := parse(t, "trapezoid:3A,duty=30%,rise=0.008,fall=0.02@100kHz")
	if len(time.Lines) != len(share.Lines) {
		t.Errorf("times and shares differ: %d and %d lines", len(time.Lines), len(share.Lines))
	}

	for text, want := range map[string]string{
		"100kHz":                          "expected FREQUENCY=CURRENT",
		"100kHz=3.2V":                     "in V",
		"100kHz=-1A":                      "above 0 A",
		"100kHz=1A,100kHz=2A":             "each frequency once",
		"0Hz=1A":                          "at least one frequency above 0 Hz",
		"-5Hz=1A":                         "0 Hz or more",
		"triangle:2.4A@180kHz":            "peak to peak",
		"triangle:2.4App":                 "expected @",
		"triangle:2.4App@0Hz":             "positive frequency",
		"triangle:2.4App,duty=1@180kHz":   "duty above 0 and below 1",
		"triangle:2.4App,rise=3ns@180kHz": "expected duty, mean",
		"triangle:2.4App,duty=0.2,duty=0.3@180kHz":   "duty once",
		"rectangle:3A@100kHz":                        "expected duty=",
		"rectangle:3A,duty=1.2@100kHz":               "below 1",
		"rectangle:0A,duty=0.3@100kHz":               "above 0 A",
		"rectangle:3A,duty=0.001@100kHz":             "give trapezoid with its rise time",
		"rectangle:3Vpp,duty=0.3@100kHz":             "in V",
		"trapezoid:3A,duty=0.3@100kHz":               "expected rise=",
		"trapezoid:3A,duty=0.3,rise=5us@100kHz":      "edges that fit",
		"trapezoid:3A,duty=0.9,rise=0.3@100kHz":      "edges that fit",
		"trapezoid:3A,duty=0.3,rise=1@100kHz":        "time with its unit",
		"trapezoid:3A,duty=0.3,rise=1mV@100kHz":      "in V",
		"trapezoid:3A,duty=0.3,rise=-0.1@100kHz":     "0 or more",
		"trapezoid:NaNA,duty=0.3,rise=0.01@100kHz":   "expected a value in A",
		"trapezoid:3A,duty=0.3,rise=10ns,ms=@100kHz": "expected duty, rise, fall, mean",
	} {
		_, err := ParseRipple(text)
		switch {
		case err == nil || !strings.Contains(err.Error(), want):
			t.Errorf("%s: error %v, want one with %q", text, err, want)
		case strings.Contains(err.Error(), "\n"):
			t.Errorf("%s: the error has more than one line", text)
		}
	}
	for text, want := range map[string]bool{
		"triangle:2App@1kHz": true, "100kHz=1A": true, "1e5=1": true, "triangle:oops": true,
		"spectrum.csv": false, "./a=b.csv": false, "C:\\data\\x.csv": false, "": false,
	} {
		if got := IsRipple(text); got != want {
			t.Errorf("IsRipple(%q) is %v", text, got)
		}
	}
}

func FuzzParseRipple(f *testing.F) {
	for _, s := range []string{"triangle:2.4App@180kHz", "100kHz=3A,0=1", "trapezoid:3A,duty=0.3,rise=80ns,fall=2%,mean=1A@100kHz", "rectangle:3A,duty=0.01@1Hz"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		s, err := ParseRipple(text)
		if err != nil {
			if strings.Contains(err.Error(), "\n") && !strings.Contains(text, "\n") {
				t.Errorf("%q: error of several lines: %v", text, err)
			}
			return
		}
		if len(s.Lines) == 0 || !(s.RMS > 0) || !(s.Covered >= coverage && s.Covered < 1+1e-9) {
			t.Errorf("%q: %d lines, RMS %v, covered %v", text, len(s.Lines), s.RMS, s.Covered)
		}
	})
}
