package lots

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// The probability of Anderson–Darling is uniform for normal samples: the
// approximation's coefficients are from memory, so that simulation decides.
func TestAndersonDarlingLevel(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 0))
	const runs = 10000
	for _, n := range []int{8, 24, 200} {
		levels := []float64{0.01, 0.05, 0.1, 0.25, 0.5, 0.8}
		if n == 8 { // the approximation is meant for the levels that decide
			levels = levels[:4]
		}
		below := make([]int, len(levels))
		v := make([]float64, n)
		for range runs {
			for i := range v {
				v[i] = 3 + 0.01*r.NormFloat64()
			}
			_, p := AndersonDarling(v)
			for k, level := range levels {
				if p < level {
					below[k]++
				}
			}
		}
		for k, level := range levels {
			got := float64(below[k]) / runs
			if chance := 4 * math.Sqrt(level*(1-level)/runs); !(math.Abs(got-level) <= chance+0.03*level) {
				t.Errorf("n = %d: p below %g in %.4f of normal samples", n, level, got)
			}
		}
	}
	skewed := make([]float64, 40)
	for i := range skewed {
		skewed[i] = r.ExpFloat64()
	}
	if _, p := AndersonDarling(skewed); !(p < 0.01) {
		t.Errorf("exponential sample: p = %g, want below 0.01", p)
	}
}

// In samples without an outlier one is flagged about as often as the level
// says.
func TestOutlierLevel(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 0))
	const runs = 5000
	for _, n := range []int{6, 24, 60} {
		flagged := 0
		v := make([]float64, n)
		for range runs {
			for i := range v {
				v[i] = r.NormFloat64()
			}
			if c, _, _ := GeneralisedESD(v, mostOutliers(n), 0.05); c > 0 {
				flagged++
			}
		}
		if share := float64(flagged) / runs; !(share > 0.035 && share < 0.065) {
			t.Errorf("n = %d: outliers flagged in %.3f of normal samples, want about 0.05", n, share)
		}
	}
}

// A tolerance interval holds the stated share of the population with the
// stated confidence.
func TestToleranceCoverage(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 0))
	const runs = 10000
	cdf := func(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }
	for _, n := range []int{4, 24} {
		one, two := toleranceFactors(n)
		oneHolds, twoHolds := 0, 0
		v := make([]float64, n)
		for range runs {
			sum, square := 0.0, 0.0
			for i := range v {
				v[i] = r.NormFloat64()
				sum += v[i]
			}
			m := sum / float64(n)
			for _, x := range v {
				square += (x - m) * (x - m)
			}
			s := math.Sqrt(square / float64(n-1))
			if cdf(m+one*s) >= Coverage {
				oneHolds++
			}
			if cdf(m+two*s)-cdf(m-two*s) >= Coverage {
				twoHolds++
			}
		}
		for _, holds := range []int{oneHolds, twoHolds} {
			if share := float64(holds) / runs; !(math.Abs(share-Confidence) <= 4*math.Sqrt(0.05*0.95/runs)) {
				t.Errorf("n = %d: the bound holds in %.4f of the samples, want %g", n, share, Confidence)
			}
		}
	}
}

// Exact probabilities of Mann–Whitney by counting all arrangements.
func TestMannWhitneyByCounting(t *testing.T) {
	for _, c := range []struct{ nx, ny int }{{1, 1}, {2, 3}, {3, 3}, {4, 5}, {5, 5}} {
		n := c.nx + c.ny
		var us []int
		for mask := range 1 << n {
			u, x, seen := 0, 0, 0
			for i := range n {
				if mask>>i&1 == 1 {
					x++
					u += seen
				} else {
					seen++
				}
			}
			if x == c.nx {
				us = append(us, u)
			}
		}
		for u := 0; u <= c.nx*c.ny; u++ {
			far, distance := 0, math.Abs(float64(u)-float64(c.nx*c.ny)/2)
			for _, v := range us {
				if math.Abs(float64(v)-float64(c.nx*c.ny)/2) >= distance {
					far++
				}
			}
			want := float64(far) / float64(len(us))
			if got := exactMannWhitney(c.nx, c.ny, max(u, c.nx*c.ny-u)); !(math.Abs(got-want) <= 1e-12) {
				t.Errorf("%d and %d values, U = %d: got %g, want %g", c.nx, c.ny, u, got, want)
			}
		}
	}
	if p := exactMannWhitney(30, 30, 900); !(p > 0 && p < 1e-16) {
		t.Errorf("the smallest probability of 30 and 30 values: got %g", p)
	}
}

// Holm's adjustment for four tests worked by hand: 0.01·4, 0.013·3 raised to
// the first, 0.03·2, 0.04.
func TestHolm(t *testing.T) {
	got := Holm([]float64{0.04, 0.01, math.NaN(), 0.03, 0.013})
	want := []float64{0.06, 0.04, math.NaN(), 0.06, 0.04}
	for i := range want {
		if math.IsNaN(want[i]) != math.IsNaN(got[i]) || math.Abs(got[i]-want[i]) > 1e-15 {
			t.Errorf("got %v, want %v", got, want)
			break
		}
	}
	if got := Holm([]float64{0.9, 0.8}); got[0] != 1 || got[1] != 1 {
		t.Errorf("got %v, want no probability above 1", got)
	}
}

// Small lots, equal values and single values have defined results.
func TestDegenerate(t *testing.T) {
	s := Summarise(nil)
	if s.N != 0 || !math.IsNaN(s.Mean) {
		t.Errorf("empty: got %+v", s)
	}
	s = Summarise([]float64{2})
	if s.Mean != 2 || s.Median != 2 || !math.IsNaN(s.SD) || !math.IsNaN(s.ToleranceLow) {
		t.Errorf("one value: got %+v", s)
	}
	same := []float64{0.1, 0.1, 0.1, 0.1, 0.1, 0.1, 0.1, 0.1, 0.1}
	s = Summarise(same)
	if s.Mean != 0.1 || s.SD != 0 || !math.IsNaN(s.AndersonDarling) || s.ToleranceHigh != 0.1 {
		t.Errorf("equal values: got %+v", s)
	}
	d := Welch(same, same)
	if d.P() != 1 || !math.IsNaN(d.T()) || d.Detectable(0.05, 0.9) != 0 || d.Equivalence(0.01) != 0 {
		t.Errorf("equal lots: got %+v", d)
	}
	if d := Welch(same, []float64{0.2, 0.2, 0.2}); d.P() != 0 || d.Equivalence(0.05) != 1 {
		t.Errorf("without spread: got p = %v", d.P())
	}
	if d := Welch([]float64{1}, same); !math.IsNaN(d.P()) || !math.IsNaN(d.Detectable(0.05, 0.9)) || !math.IsNaN(d.Equivalence(1)) {
		t.Errorf("one value against nine: got p = %v", d.P())
	}
	if _, p := MannWhitney(same, same); p != 1 {
		t.Errorf("equal lots: Mann–Whitney gives p = %v", p)
	}
	if _, p := BrownForsythe(same, same); !math.IsNaN(p) {
		t.Errorf("equal lots: Brown–Forsythe gives p = %v", p)
	}
	if n, _, _ := GeneralisedESD(same, 3, 0.05); n != 0 {
		t.Errorf("equal values: %d outliers", n)
	}
}

// NIST/SEMATECH e-Handbook 6.1.6 defines the indices; with limits at x̄ ± 4s
// both are 4/3 (worked by hand).
func TestCapability(t *testing.T) {
	s := Summary{Mean: 10, SD: 0.5}
	cp, cpk := s.Capability(8, 12)
	near(t, "Cp", cp, 4.0/3, 1e-15)
	near(t, "Cpk", cpk, 4.0/3, 1e-15)
	cp, cpk = s.Capability(8, 11)
	near(t, "Cp off centre", cp, 1, 1e-15)
	near(t, "Cpk off centre", cpk, 2.0/3, 1e-15)
	if cp, cpk = s.Capability(math.NaN(), 11); !math.IsNaN(cp) || math.Abs(cpk-2.0/3) > 1e-15 {
		t.Errorf("one limit: got %g, %g", cp, cpk)
	}
	if _, cpk = s.Capability(math.NaN(), 9); !(cpk < 0) {
		t.Errorf("mean outside: Cpk = %g, want below 0", cpk)
	}
}

// No result depends on the order of the values or changes them, and all scale
// with the unit.
func TestOrderAndScale(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.Float64Range(0.5, 2), 3, 40).Draw(t, "x")
		y := rapid.SliceOfN(rapid.Float64Range(0.5, 2), 3, 40).Draw(t, "y")
		saved := slices.Clone(x)
		shuffled := slices.Clone(x)
		rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 0)).Shuffle(len(shuffled), func(i, j int) {
			shuffled[i], shuffled[j] = shuffled[j], shuffled[i]
		})
		a, b := Summarise(x), Summarise(shuffled)
		if !equalBits([]float64{a.Mean, a.SD, a.Median, a.AndersonDarling, a.AndersonDarlingP, a.ToleranceHigh, a.OneSidedLow},
			[]float64{b.Mean, b.SD, b.Median, b.AndersonDarling, b.AndersonDarlingP, b.ToleranceHigh, b.OneSidedLow}) {
			t.Fatalf("the order matters: %+v, %+v", a, b)
		}
		if d, e := Welch(x, y), Welch(shuffled, y); !equalBits([]float64{d.Value, d.StdError, d.DF}, []float64{e.Value, e.StdError, e.DF}) {
			t.Fatalf("the order matters to Welch: %+v, %+v", d, e)
		}
		_, p := MannWhitney(x, y)
		_, q := MannWhitney(shuffled, y)
		w1, p1 := BrownForsythe(x, y)
		w2, p2 := BrownForsythe(shuffled, y)
		if !equalBits([]float64{p, w1, p1}, []float64{q, w2, p2}) {
			t.Fatal("the order matters to Mann–Whitney or Brown–Forsythe")
		}
		// A power of two scales without rounding: from farads to picofarads.
		small := make([]float64, len(x))
		for i, v := range x {
			small[i] = v * 0x1p-40
		}
		c := Summarise(small)
		if !equalBits([]float64{a.Mean * 0x1p-40, a.SD * 0x1p-40, a.AndersonDarlingP}, []float64{c.Mean, c.SD, c.AndersonDarlingP}) {
			t.Fatalf("the unit matters: %+v, %+v", a, c)
		}
		if !slices.Equal(x, saved) {
			t.Fatal("the values were changed")
		}
	})
}

func equalBits(a, b []float64) bool {
	for i := range a {
		if math.Float64bits(a[i]) != math.Float64bits(b[i]) && !(math.IsNaN(a[i]) && math.IsNaN(b[i])) {
			return false
		}
	}
	return true
}

func BenchmarkSummarise(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 0))
	v := make([]float64, 200)
	for i := range v {
		v[i] = r.NormFloat64()
	}
	b.ReportAllocs()
	for b.Loop() {
		Summarise(v)
	}
}

func BenchmarkTolerance(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		ToleranceTwoSided(24, 0.95, 0.95)
	}
}
