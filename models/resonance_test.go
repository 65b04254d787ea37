package models

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"
)

// requireExact fails unless the reactance changes its sign, in the direction
// of the kind, between the frequency of each resonance and a neighbouring
// float64.
func requireExact(t *testing.T, c *Circuit, values []float64, found []Resonance) {
	t.Helper()
	negative := func(f float64) bool { return math.Signbit(imag(c.At(f, values))) }
	last := 0.0
	for _, r := range found {
		below, above := math.Nextafter(r.Freq, 0), math.Nextafter(r.Freq, math.Inf(1))
		rising := r.Kind == SeriesResonance
		crosses := func(a, b float64) bool { return negative(a) == rising && negative(b) == !rising }
		if !crosses(below, r.Freq) && !crosses(r.Freq, above) {
			t.Errorf("%s with %v: no sign change for a %s resonance at %v Hz", c, values, r.Kind, r.Freq)
		}
		if r.Freq <= last {
			t.Errorf("%s with %v: %v Hz after %v Hz", c, values, r.Freq, last)
		}
		last = r.Freq
	}
}

func requireResonances(t *testing.T, expression string, values []float64, from, to, tolerance float64, want ...Resonance) {
	t.Helper()
	c := mustParse(expression)
	got := c.Resonances(values, from, to)
	requireExact(t, c, values, got)
	if len(got) != len(want) {
		t.Errorf("%s with %v: %v, want %v", c, values, got, want)
		return
	}
	for i, w := range want {
		what := fmt.Sprintf("%s with %v: resonance %d", c, values, i)
		if got[i].Kind != w.Kind {
			t.Errorf("%s is %s, want %s", what, got[i].Kind, w.Kind)
		}
		requireRelative(t, what, got[i].Freq, w.Freq, tolerance)
		if w.Impedance > 0 {
			requireRelative(t, what+": impedance", got[i].Impedance, w.Impedance, 1e-7)
		}
	}
}

// Printed textbook and handbook values. [seen] values are as printed in an open
// physics textbook (series circuit) and an open textbook of electricity (tank);
// the digits beyond are computed from the definitions.
func TestPublishedResonances(t *testing.T) {
	const printed = 5e-10 // ten digits
	rlc := []float64{40, 3e-3, 5e-6}
	requireResonances(t, "R + L + C", rlc, 1, 1e6, printed, Resonance{1299.494669, SeriesResonance, 40})
	c := mustParse("R + L + C")
	requireRelative(t, "|Z| at 60 Hz", cmplx.Abs(c.At(60, rlc)), 530.894539, 5e-9)
	requireRelative(t, "|Z| at 60 Hz as printed", cmplx.Abs(c.At(60, rlc)), 531, 1e-3)
	requireRelative(t, "|Z| at 10 kHz", cmplx.Abs(c.At(10e3, rlc)), 189.580347, 5e-9)
	requireRelative(t, "|Z| at 10 kHz as printed", cmplx.Abs(c.At(10e3, rlc)), 190, 3e-3)
	f0 := c.Resonances(rlc, 1, 1e6)[0].Freq
	requireRelative(t, "f0 as printed, kHz", f0/1e3, 1.30, 4e-3)
	requireRelative(t, "Q = ω0·L/R", 2*math.Pi*f0*3e-3/40, 0.6123724357, printed)
	requireRelative(t, "current at 120 V", 120/cmplx.Abs(c.At(f0, rlc)), 3.00, 1e-12)

	for _, tank := range []struct{ l, c, want float64 }{
		{100e-3, 10e-6, 159.1549431},
		{10e-6, 10e-12, 15.91549431e6},
		{220e-6, 3.5e-12, 5.735546024e6},
	} {
		requireResonances(t, "L || C", []float64{tank.l, tank.c}, 1, 1e9, printed, Resonance{tank.want, ParallelResonance, 0})
	}
	for _, part := range []struct{ c, esl, want float64 }{
		{10e-6, 1e-9, 1.591549431e6},
		{10e-6, 0.7e-9, 1.902265413e6},
		{100e-9, 0.5e-9, 22.50790790e6},
	} {
		requireResonances(t, "ESR + ESL + C", []float64{0.01, part.esl, part.c}, 1e3, 1e9, printed, Resonance{part.want, SeriesResonance, 0.01})
	}
	// The phase zero of an inductor is not at 1/(2π√(LC)), 7.117625434 MHz.
	requireResonances(t, "(DCR + L) || Cp", []float64{2, 100e-6, 5e-12}, 1e5, 1e8, printed, Resonance{7.117624722e6, ParallelResonance, 100e-6 / (5e-12 * 2)})

	// With 100 Ω in series with L the reactance never passes zero, because
	// R/L = 1/√(LC) exactly; the same resistance in series with C leaves no
	// zero at a finite frequency either. |Z| still peaks.
	lossy := []float64{100, 100e-3, 10e-6}
	for expression, peak := range map[string]float64{"(R + L) || C": 136.1729179, "(R + C) || L": 186.0156456} {
		c := mustParse(expression)
		values := slices.Clone(lossy)
		if expression == "(R + C) || L" {
			values = []float64{100, 10e-6, 100e-3}
		}
		if got := c.Resonances(values, 0.01, 1e5); len(got) != 0 {
			t.Errorf("%s with %v: %v, want no zero of the reactance", c, values, got)
		}
		top := cmplx.Abs(c.At(peak, values))
		requireRelative(t, "largest |Z|", top, 146.7889825, 5e-10)
		if cmplx.Abs(c.At(peak*0.999, values)) > top || cmplx.Abs(c.At(peak*1.001, values)) > top {
			t.Errorf("%s: |Z| is not largest at %v Hz", c, peak)
		}
	}
}

// For (R + jωL) ∥ C the phase zero is at ω² = 1/(LC) − (R/L)² with Z = L/(RC).
func TestResonanceOfLossyParallelCircuit(t *testing.T) {
	const l, c = 47e-6, 20e-12
	for _, part := range []float64{1e-6, 1e-3, 0.1, 0.5, 0.9, 0.99} { // R as a part of √(L/C)
		r := part * math.Sqrt(l/c)
		f := math.Sqrt(1/(l*c)-r/l*(r/l)) / (2 * math.Pi)
		requireResonances(t, "(R + L) || C", []float64{r, l, c}, 1e5, 1e8, 1e-13, Resonance{f, ParallelResonance, l / (r * c)})
	}
	requireResonances(t, "(R + L) || C", []float64{1.01 * math.Sqrt(l/c), l, c}, 1e5, 1e8, 1e-13)
}

func TestResonanceClosedForms(t *testing.T) {
	rng := rand.New(rand.NewPCG(6, 1))
	for range 200 {
		r := math.Pow(10, -9+15*rng.Float64())
		l := math.Pow(10, -10+8*rng.Float64())
		c := math.Pow(10, -13+9*rng.Float64())
		f := 1 / (2 * math.Pi * math.Sqrt(l*c))
		values := []float64{r, l, c}
		requireResonances(t, "R + L + C", values, f/50, f*50, 4e-16, Resonance{f, SeriesResonance, r})
		requireResonances(t, "R || L || C", values, f/50, f*50, 4e-16, Resonance{f, ParallelResonance, 0})
		requireResonances(t, "R + L + C", values, f*1.001, f*50, 0)
		if t.Failed() {
			return
		}
	}
}

// With s = ωL1 − 1/(ωC1), the reactance of the motional branch, Im Y = 0 of
// C0 ∥ (R1 + L1 + C1) is ωC0·(R1² + s²) = s, so that
//
//	s = (1 ∓ √(1 − (2ωC0·R1)²))/(2ωC0)
//
// at the series and at the parallel resonance. As s changes with ω far faster
// than ωC0 does, iterating between s and ω converges at once.
func TestResonancesOfCrystals(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 1))
	for i := range 300 {
		fs := math.Pow(10, 4.5+3.5*rng.Float64())
		c0 := math.Pow(10, -12+1.5*rng.Float64())
		c1 := c0 / math.Pow(10, 2+1.5*rng.Float64())
		quality := math.Pow(10, 4+2*rng.Float64())
		l1 := 1 / (4 * math.Pi * math.Pi * fs * fs * c1)
		r1 := 2 * math.Pi * fs * l1 / quality
		if i%3 == 0 { // the reactance hardly reaches zero
			r1 = (1 - math.Pow(10, -1-4*rng.Float64())) / (4 * math.Pi * fs * c0)
		}
		if 4*math.Pi*fs*c0*r1*(1+c1/c0) >= 1 {
			continue // it does not
		}
		values := []float64{c0, r1, l1, c1}
		expected := func(sign float64) float64 {
			omega := 2 * math.Pi * fs
			for range 60 {
				b := omega * c0
				s := (1 + sign*math.Sqrt(1-4*b*r1*b*r1)) / (2 * b)
				if sign < 0 { // the same without cancellation
					s = 2 * b * r1 * r1 / (1 + math.Sqrt(1-4*b*r1*b*r1))
				}
				// ω²·L1 − s·ω − 1/C1 = 0
				omega = (s + math.Sqrt(s*s+4*l1/c1)) / (2 * l1)
			}
			return omega / (2 * math.Pi)
		}
		requireResonances(t, "C0 || (R1 + L1 + C1)", values, fs/50, fs*50, 1e-12,
			Resonance{expected(-1), SeriesResonance, 0}, Resonance{expected(1), ParallelResonance, 0})
		if t.Failed() {
			return
		}
	}
}

// Crystals whose resonances are near, but not at, that of one inductance with
// one capacitance: two modes, a motional capacitance with a loss tangent, a
// load in series or across. A scan around each mode, with many points in a
// bandwidth, says what there is to find.
func TestSharpResonancesBesideTheGrid(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 1))
	scan := make([]float64, 40001)
	z := make([]complex128, len(scan))
	for _, expression := range []string{
		"C0 || (R1 + L1 + C1) || (R2 + L2 + C2)", "C0 || (R1 + L1 + loss(C1, tand))", "Cload + (C0 || (R1 + L1 + C1))",
		"Lload + (C0 || (R1 + L1 + C1))", "ESR + ESL + (C0 || Rp || (R1 + L1 + C1) || (R2 + L2 + C2))",
	} {
		c := mustParse(expression)
		for range 15 {
			f1 := math.Pow(10, 5+2*rng.Float64())
			f2 := f1 * (1 + math.Pow(10, -4*rng.Float64()))
			c0 := math.Pow(10, -12+1.5*rng.Float64())
			quality := math.Pow(10, 4+2*rng.Float64())
			values := make([]float64, len(c.Parameters()))
			set := func(name string, v float64) {
				if k, ok := c.Index(name); ok {
					values[k] = v
				}
			}
			var modes []float64
			for i, f := range []float64{f1, f2} {
				motional := c0 / math.Pow(10, 2+(math.Log10(quality)-2.5)*rng.Float64())
				l := 1 / (4 * math.Pi * math.Pi * f * f * motional)
				set(fmt.Sprintf("R%d", i+1), 2*math.Pi*f*l/quality)
				set(fmt.Sprintf("L%d", i+1), l)
				set(fmt.Sprintf("C%d", i+1), motional)
				if _, ok := c.Index(fmt.Sprintf("R%d", i+1)); ok {
					modes = append(modes, f)
				}
			}
			set("C0", c0)
			set("tand", 1/quality)
			set("Cload", c0*5*rng.Float64())
			set("Lload", 1e-3/(4*math.Pi*math.Pi*f1*f1*c0))
			set("ESR", 0.1)
			set("ESL", 1e-9)
			set("Rp", 1e9)
			got := c.Resonances(values, f1/5, f2*5)
			requireExact(t, c, values, got)
			for _, f := range modes {
				copy(scan, logFrequencies(f*0.997, f*1.008, len(scan)))
				c.NewEvaluator(scan).Impedance(z, values)
				next := 0
				for i := 1; i < len(scan); i++ {
					inside := 0
					for ; next < len(got) && got[next].Freq <= scan[i]; next++ {
						if got[next].Freq > scan[i-1] {
							inside++
						}
					}
					if want := math.Signbit(imag(z[i-1])) != math.Signbit(imag(z[i])); want != (inside%2 == 1) {
						t.Fatalf("%s with %v: %d resonances between %v and %v Hz, where the sign of the reactance changes: %v", c, values, inside, scan[i-1], scan[i], want)
					}
				}
			}
		}
	}
}

// Two modes so near to each other that the reactance hardly reaches zero at
// the first: its two resonances are 4 ppm apart.
func TestResonancesThatHardlyTouch(t *testing.T) {
	c := mustParse("ESR + ESL + (C0 || Rp || (R1 + L1 + C1) || (R2 + L2 + C2))")
	values := []float64{
		0.1, 1e-09, 1.8956603588886997e-12, 1e+09, 1106.0367198433196, 0.7350403692472587, 1.0332228867539635e-15,
		217.7505389847316, 0.14467191510301095, 5.246717369207278e-15,
	}
	got := c.Resonances(values, 1e6, 1e7)
	requireExact(t, c, values, got)
	var kinds []ResonanceKind
	for _, r := range got {
		kinds = append(kinds, r.Kind)
	}
	if want := []ResonanceKind{SeriesResonance, ParallelResonance, SeriesResonance, ParallelResonance}; !slices.Equal(kinds, want) {
		t.Errorf("%s with %v: %v, want kinds %v", c, values, got, want)
	}
}

func TestNoResonance(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 1))
	for _, expression := range []string{
		"R", "C", "L", "R1 || R2", "R1 + (R2 || R3)", "R + C", "R || C", "R + L", "R1 + (R2 || L)", "skin(K)", "DCR + skin(K) + L",
		"ESR + C + (R1 || C1)", "loss(C, tand)", "R + cpe(Q, n)", "rcline(R, C)", "R1 + rcline(R, C)", "R1 + (C1 || (R2 + C2))",
	} {
		c := mustParse(expression)
		for range 20 {
			values := realistic(rng, c)
			if got := c.Resonances(values, 1e-3, 1e11); len(got) != 0 {
				t.Errorf("%s with %v: %v, want none", c, values, got)
			}
		}
	}
}

// Without any loss: zeros and poles on the axis, the closed forms of the
// crystal without R1.
func TestResonancesWithoutLoss(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 1))
	for range 100 {
		l := math.Pow(10, -9+6*rng.Float64())
		c := math.Pow(10, -12+6*rng.Float64())
		c0 := c * math.Pow(10, 3*rng.Float64())
		fs := 1 / (2 * math.Pi * math.Sqrt(l*c))
		fp := fs * math.Sqrt(1+c/c0)
		requireResonances(t, "C0 || (L1 + C1)", []float64{c0, l, c}, fs/40, fs*40, 1e-14, Resonance{fs, SeriesResonance, 0}, Resonance{fp, ParallelResonance, 0})
		requireResonances(t, "L0 + (L1 || C1)", []float64{l * c0 / c, l, c}, fs/40, fs*40, 1e-14,
			Resonance{fs, ParallelResonance, 0}, Resonance{fp, SeriesResonance, 0})
		// Next to its pole |Z| is beyond 1e14 times the reactances.
		tank := mustParse("L || C").Resonances([]float64{l, c}, fs/10, fs*10)
		if len(tank) != 1 || !(tank[0].Impedance > 1e14*math.Sqrt(l/c)) || math.IsInf(tank[0].Impedance, 0) {
			t.Errorf("L || C with %v, %v: %v, want a finite |Z| beyond 1e14·√(L/C)", l, c, tank)
		}
	}
}

// Random circuits against a dense scan for sign changes. Values are such that
// resonances are at most a few thousand sharp, which the scan resolves.
func TestResonancesAgainstDenseScan(t *testing.T) {
	rng := rand.New(rand.NewPCG(10, 1))
	freq := logFrequencies(1e3, 1e9, 40001)
	z := make([]complex128, len(freq))
	several := 0
	compare := func(c *Circuit, values []float64) {
		e := c.NewEvaluator(freq)
		e.Impedance(z, values)
		got := c.Resonances(values, freq[0], freq[len(freq)-1])
		requireExact(t, c, values, got)
		next := 0
		for i := 1; i < len(freq); i++ {
			before, after := math.Signbit(imag(z[i-1])), math.Signbit(imag(z[i]))
			inside := 0
			for ; next < len(got) && got[next].Freq <= freq[i]; next++ {
				inside++
			}
			if want := before != after; want != (inside%2 == 1) {
				t.Errorf("%s with %v: %d resonances between %v and %v Hz, where the sign of the reactance changes: %v", c, values, inside, freq[i-1], freq[i], want)
				return
			}
		}
		if len(got) > 1 {
			several++
		}
	}
	expressions := []string{
		"DCR + (L1 || R1 || C1) + (L2 || R2 || C2)", "ESR1 + ESL1 + C1 || (ESR2 + ESL2 + C2)", "C0 || (R1 + L1 + C1)",
		"C0 || (R1 + L1 + C1) || (R2 + L2 + C2)", "ESR + ESL + loss(C, tand) || (R2 + L2 + C2)", "(ESR1 + ESL1 + C1) || (ESR2 + ESL2 + C2) || (ESR3 + ESL3 + C3)",
	}
	for _, m := range Library() {
		expressions = append(expressions, m.Circuit.String())
	}
	for _, expression := range expressions {
		for range 8 {
			c := mustParse(expression)
			values := realistic(rng, c)
			for k, p := range c.Parameters() {
				switch p.Unit {
				case "Ω":
					values[k] = math.Pow(10, -2+4*rng.Float64())
				case "H":
					values[k] = math.Pow(10, -8+3*rng.Float64())
				case "F":
					values[k] = math.Pow(10, -11+5*rng.Float64())
				}
			}
			compare(c, values)
		}
	}
	for range 80 {
		c := mustParse(randomExpression(rng.IntN, 2+rng.IntN(7)))
		compare(c, realistic(rng, c))
	}
	if several < 20 {
		t.Errorf("only %d circuits of more than one resonance: little was tested", several)
	}
}
