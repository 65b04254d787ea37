package derating

import (
	"bytes"
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"realpart/fit"
	"realpart/models"
	"realpart/report/lots"
)

// sweepOf fits a circuit to a sweep that it gives, with noise.
func sweepOf(t testing.TB, expression string, values []float64, noise float64, seed uint64, settings *fit.Settings) Sweep {
	t.Helper()
	c, err := models.Parse(expression)
	if err != nil {
		t.Fatal(err)
	}
	const points = 61
	freq, z := make([]float64, points), make([]complex128, points)
	for i := range freq {
		freq[i] = 1e3 * math.Pow(1e4, float64(i)/(points-1)) // 1 kHz to 10 MHz
	}
	c.NewEvaluator(freq).Impedance(z, values)
	random := rand.New(rand.NewPCG(seed, 7))
	for i := range z {
		z[i] *= complex(1+noise*random.NormFloat64(), noise*random.NormFloat64())
	}
	if settings == nil {
		settings = &fit.Settings{}
	}
	settings.Start = map[string]float64{}
	for i, p := range c.Parameters() {
		settings.Start[p.Name] = values[i]
	}
	r, err := fit.Fit(freq, z, c, settings)
	if err != nil {
		t.Fatal(err)
	}
	return Sweep{File: "part.csv", Part: "part", Kind: models.CapacitorPart, Fit: r, Temperature: math.NaN()}
}

func capacitor(t testing.TB, esr float64) Sweep {
	return sweepOf(t, "ESR + ESL + C", []float64{esr, 10e-9, 100e-6}, 0, 1, nil)
}

func atTemperature(s Sweep, celsius float64) Sweep {
	s.Temperature = celsius
	return s
}

func value(v float64) *float64 { return &v }

func assess(t testing.TB, parts, series []Sweep, ripple string, c Conditions) *Assessment {
	t.Helper()
	a, err := Assess(parts, series, parse(t, ripple), c)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func codes(a *Assessment) []string {
	var out []string
	for _, w := range a.Warnings {
		out = append(out, w.Code)
	}
	return out
}

var branched = "ESR + ESL + C + (R1 || C1)"
var branchedValues = []float64{31e-3, 14e-9, 452e-6, 58e-3, 40e-6}

// The loss interval carries the covariance of the ESR at different frequencies:
// it equals what the covariance matrix of all ESR gives by the law of
// propagation (GUM 5.2.2), and not what independent ESR would.
func TestLossInterval(t *testing.T) {
	part := sweepOf(t, branched, branchedValues, 0.003, 5, nil)
	a := assess(t, []Sweep{part}, nil, "20kHz=2A,400kHz=3A,1MHz=3A", Conditions{})
	r := part.Fit
	freq, power := []float64{20e3, 400e3, 1e6}, []float64{4, 9, 9}
	sensitivity := mat.NewDense(len(freq), len(r.Free), nil)
	for i, f := range freq {
		// ∂ESR/∂x by central differences, independent of the Jacobian.
		for c, k := range r.Free {
			const h = 1e-4
			var z [2]complex128
			for side, sign := range []float64{1, -1} {
				values := r.Values()
				values[k] *= math.Exp(sign * h)
				r.Circuit.NewEvaluator([]float64{f}).Impedance(z[side:side+1], values)
			}
			sensitivity.Set(i, c, real(z[0]-z[1])/(2*h))
		}
	}
	covariance := fit.Propagate(sensitivity, r.Covariance)
	w := mat.NewVecDense(len(power), power)
	together := math.Sqrt(mat.Inner(w, covariance, w))
	independent := 0.0
	for i, p := range power {
		independent += p * p * covariance.At(i, i)
	}
	independent = math.Sqrt(independent)
	factor := distuv.StudentsT{Sigma: 1, Nu: float64(r.DegreesOfFreedom)}.Quantile(0.975)
	near(t, "high end", *a.LossHigh95W, a.LossW*math.Exp(factor*together/a.LossW), 1e-6)
	near(t, "low end", *a.LossLow95W, a.LossW*math.Exp(-factor*together/a.LossW), 1e-6)
	if math.Abs(independent/together-1) < 0.1 {
		t.Errorf("independent sums give nearly the same (%v and %v): this case cannot tell them apart", independent, together)
	}
	// With one line the interval is that of the figure.
	a = assess(t, []Sweep{part}, nil, "100kHz=3A", Conditions{})
	v := r.Figure(models.ESR, 100e3)
	near(t, "one line, low", *a.LossLow95W, 9*v.Low95, 1e-9)
	near(t, "one line, high", *a.LossHigh95W, 9*v.High95, 1e-9)
}

// Of many sweeps of the same part, 95 % of the intervals of loss hold the true
// one. The bounds are three standard deviations of the binomial count.
func TestLossCoverage(t *testing.T) {
	c, _ := models.Parse(branched)
	z := make([]complex128, 3)
	c.NewEvaluator([]float64{20e3, 100e3, 1e6}).Impedance(z, branchedValues)
	truth := 4*real(z[0]) + 9*real(z[1]) + real(z[2])
	const n = 300
	hit := 0
	for seed := range uint64(n) {
		part := sweepOf(t, branched, branchedValues, 0.003, 100+seed, nil)
		a := assess(t, []Sweep{part}, nil, "20kHz=2A,100kHz=3A,1MHz=1A", Conditions{})
		if *a.LossLow95W <= truth && truth <= *a.LossHigh95W {
			hit++
		}
	}
	spread := 3 * math.Sqrt(n*0.95*0.05)
	if math.Abs(float64(hit)-0.95*n) > spread {
		t.Errorf("%d of %d intervals hold the true loss, want %v ± %.0f", hit, n, 0.95*n, spread)
	}
}

// A stated accuracy of the meter widens the interval and is named, and flags
// an ESR that it cannot tell from zero.
func TestMeterAccuracy(t *testing.T) {
	accuracy := func(float64, float64) (float64, float64, bool) { return 0.001, 0.001, true }
	part := sweepOf(t, "ESR + ESL + C", []float64{2e-3, 10e-9, 10e-6}, 0.0005, 3, &fit.Settings{Accuracy: accuracy})
	a := assess(t, []Sweep{part}, nil, "2kHz=1A,500kHz=1A", Conditions{AccuracyStated: true})
	low, high := a.Harmonics[0], a.Harmonics[1]
	// |Z|·0.001 rad is 8 mΩ at 2 kHz and 29 µΩ at 500 kHz; ESR is 2 mΩ.
	if low.BelowResolution == nil || !*low.BelowResolution || high.BelowResolution == nil || *high.BelowResolution {
		t.Errorf("below resolution: %v at 2 kHz, %v at 500 kHz", low.BelowResolution, high.BelowResolution)
	}
	if !slices.Contains(codes(a), "below-resolution") {
		t.Errorf("no warning of it in %v", codes(a))
	}
	names := map[string]bool{}
	for _, s := range a.Uncertainty {
		names[s.Source] = true
	}
	if !names["meter"] || names["meter-not-stated"] {
		t.Errorf("sources %v", names)
	}
	plain := assess(t, []Sweep{sweepOf(t, "ESR + ESL + C", []float64{2e-3, 10e-9, 10e-6}, 0.0005, 3, nil)}, nil, "2kHz=1A,500kHz=1A", Conditions{})
	if !(*a.LossHigh95W/a.LossW > *plain.LossHigh95W/plain.LossW) {
		t.Error("the meter's accuracy does not widen the interval")
	}
	if plain.Harmonics[0].BelowResolution != nil {
		t.Error("without a stated accuracy something is below it")
	}
}

// At the rated current and frequency the rise is the rated one, whatever the
// ESR, and without uncertainty: that of R_th and of the loss are one.
func TestRatingCancels(t *testing.T) {
	part := sweepOf(t, branched, branchedValues, 0.01, 9, nil)
	rating := &Rating{Current: 2.1, Freq: 100e3, Rise: 10}
	a := assess(t, []Sweep{part}, nil, "100kHz=2.1A", Conditions{Rating: rating, Ambient: value(60)})
	near(t, "rise", *a.RiseK, 10, 1e-12)
	near(t, "low end", *a.HotSpotLow95C, 70, 1e-9)
	near(t, "high end", *a.HotSpotHigh95C, 70, 1e-9)
	if !(*a.LossHigh95W > 1.001*a.LossW) {
		t.Error("the loss has no uncertainty")
	}
	rating.ESR = value(0.05)
	a = assess(t, []Sweep{part}, nil, "100kHz=2.1A", Conditions{Rating: rating, Ambient: value(60)})
	if !(*a.HotSpotHigh95C > *a.HotSpotC) {
		t.Error("with a stated ESR the hot spot has no uncertainty")
	}
}

// Thermal runaway: with R = A·exp(−B/T) the part comes to rest only below a
// critical current, at T_c = (B − √(B² − 4·B·T_a))/2, where heating and cooling
// touch (Semenov's criterion of thermal explosion, 1928; from memory, and it
// follows from T − T_a = c·exp(−B/T), 1 = c·B/T²·exp(−B/T)).
func TestRunaway(t *testing.T) {
	const b, ambient, rth = 5000.0, 40.0, 30.0
	ta := ambient + kelvin
	resistanceAt := func(celsius float64) float64 { return 0.02 * math.Exp(b/ta-b/(celsius+kelvin)) }
	var series []Sweep
	for _, c := range []float64{20, 40, 90, 130} {
		series = append(series, atTemperature(capacitor(t, resistanceAt(c)), c))
	}
	critical := (b - math.Sqrt(b*b-4*b*ta)) / 2
	current := math.Sqrt((critical - ta) / (rth * resistanceAt(critical-kelvin)))
	part := []Sweep{series[1]}
	conditions := Conditions{RTh: value(rth), Ambient: value(ambient), Limit: value(110)}
	run := func(factor float64) *Assessment {
		ripple, err := NewLines([]Line{{100e3, factor * current}})
		if err != nil {
			t.Fatal(err)
		}
		a, err := Assess(part, series, ripple, conditions)
		if err != nil {
			t.Fatal(err)
		}
		return a
	}
	below := run(0.98)
	if below.Runaway || below.HotSpotC == nil || !(*below.HotSpotC < critical-kelvin) || below.Verdict != Within {
		t.Fatalf("2 %% below the critical current: %+v", below)
	}
	loss := rth * 0.98 * 0.98 * current * current * resistanceAt(*below.HotSpotC)
	near(t, "balance at the hot spot", *below.HotSpotC, ambient+loss, 1e-6)
	near(t, "largest ripple current", *below.MaxRippleA, current, 1e-5)
	if !slices.Contains(codes(below), "thermal-runaway-first") {
		t.Errorf("that the part runs away before its limit is not said: %v", codes(below))
	}
	above := run(1.02)
	if !above.Runaway || above.HotSpotC != nil || above.RiseK != nil || above.Verdict != Exceeded || !slices.Contains(codes(above), "thermal-runaway") {
		t.Errorf("2 %% above the critical current: runaway %v, hot spot %v, verdict %v, %v", above.Runaway, above.HotSpotC, above.Verdict, codes(above))
	}
	near(t, "critical temperature", above.MaxRippleAt(), critical-kelvin, 1e-3)
	conditions.Limit = nil
	if a := run(1.02); a.Verdict != NoLimitGiven || !a.Runaway {
		t.Errorf("without a limit: verdict %v, runaway %v", a.Verdict, a.Runaway)
	}
	if curve := run(1.02).Curve(2*current, 201); !(curve[len(curve)-1].RippleA <= current && curve[len(curve)-1].RippleA > 0.97*current) {
		t.Errorf("the curve ends at %v A, critical %v A", curve[len(curve)-1].RippleA, current)
	}
}

// MaxRippleAt is the hot spot at the largest current, by its curve.
func (a *Assessment) MaxRippleAt() float64 {
	_, at := a.heating.largest(*a.LimitC)
	return at
}

// A part whose resistance falls finds its rest however large the current: at
// the resistance of the hottest sweep beyond it.
func TestFallingResistance(t *testing.T) {
	series := []Sweep{atTemperature(capacitor(t, 40e-3), 20), atTemperature(capacitor(t, 20e-3), 80)}
	a := assess(t, series[:1], series, "100kHz=100A", Conditions{RTh: value(10), Ambient: value(20), Limit: value(100)})
	if a.Runaway || a.HotSpotC == nil {
		t.Fatalf("runaway %v", a.Runaway)
	}
	near(t, "hot spot", *a.HotSpotC, 20+10*1e4*20e-3, 1e-6)
	if a.Verdict != Exceeded || !slices.Contains(codes(a), "outside-temperatures") {
		t.Errorf("verdict %v, warnings %v", a.Verdict, codes(a))
	}
}

// ln R goes linearly over 1/T between sweeps, and to the cautious side beyond.
func TestCourse(t *testing.T) {
	freq := []float64{100e3}
	falling, err := newCourse([]Sweep{atTemperature(capacitor(t, 10e-3), 100), atTemperature(capacitor(t, 40e-3), 0)}, 0, freq)
	if err != nil {
		t.Fatal(err)
	}
	middle := 2/(1/273.15+1/373.15) - kelvin // halfway in 1/T: the geometric mean
	factor := make([]float64, 1)
	for _, c := range []struct{ at, want float64 }{{0, 1}, {middle, 0.5}, {100, 0.25}, {150, 0.25}} {
		falling.factors(factor, c.at)
		near(t, "factor", factor[0], c.want, 1e-6)
	}
	if falling.factors(factor, -40); !(factor[0] > 1.5) {
		t.Errorf("below the coldest sweep a falling resistance is %v of it, want more", factor[0])
	}
	rising, err := newCourse([]Sweep{atTemperature(capacitor(t, 10e-3), 0), atTemperature(capacitor(t, 40e-3), 100)}, 0, freq)
	if err != nil {
		t.Fatal(err)
	}
	if rising.factors(factor, -40); math.Abs(factor[0]-1) > 1e-6 {
		t.Errorf("below the coldest sweep a rising resistance is %v of it", factor[0])
	}
	if rising.factors(factor, 150); !(factor[0] > 5) {
		t.Errorf("above the hottest sweep a rising resistance is %v of the coldest, want more than 4", factor[0])
	}
}

// The uncertainty of a resistance between two sweeps is that of both, weighted.
func TestCourseUncertainty(t *testing.T) {
	cold := atTemperature(sweepOf(t, "ESR + ESL + C", []float64{40e-3, 10e-9, 100e-6}, 0.004, 21, nil), 0)
	warm := atTemperature(sweepOf(t, "ESR + ESL + C", []float64{20e-3, 10e-9, 100e-6}, 0.004, 22, nil), 100)
	a := assess(t, []Sweep{cold}, []Sweep{cold, warm}, "100kHz=10A", Conditions{RTh: value(10), Ambient: value(20)})
	share := (1/273.15 - 1/(*a.HotSpotC+kelvin)) / (1/273.15 - 1/373.15)
	u := func(s Sweep) float64 { return s.Fit.Parameters[0].StdError / s.Fit.Parameters[0].Value }
	want := math.Hypot((1-share)*u(cold), share*u(warm))
	// ν is that of two sweeps, between 119 and 238; Student's t is 1.97 ± 0.01.
	low, high := a.HotSpotLow95C, a.HotSpotHigh95C
	if low == nil || high == nil || !(*low < *a.HotSpotC && *a.HotSpotC < *high) {
		t.Fatalf("hot spot %v in %v … %v", *a.HotSpotC, low, high)
	}
	var scatter float64
	for _, s := range a.Uncertainty {
		if s.Source == "scatter" {
			scatter = *s.Relative95
		}
	}
	near(t, "scatter of the loss", scatter, 1.975*want, 0.01)
	// A falling resistance damps: the rise spreads less than the loss would
	// at a fixed temperature.
	if spread := (*high - *low) / 2 / *a.RiseK; !(spread < scatter) {
		t.Errorf("the rise spreads by %v, the resistance by %v", spread, scatter)
	}
}

// The bound of a lot uses the published tolerance factor; the predicted share
// is that of Student's t table: a limit at mean + t·s·√(1+1/n) is exceeded by
// 5 % for t(0.95; 9) = 1.8331 (NIST/SEMATECH 1.3.6.7.2 prints 1.833).
func TestLot(t *testing.T) {
	var parts []Sweep
	esr := []float64{30, 31, 29, 33, 28, 30.5, 31.5, 29.5, 32, 27.5}
	mean, s := 0.0, 0.0
	for i, v := range esr {
		p := capacitor(t, v*1e-3)
		p.Part = string(rune('a' + i))
		parts = append(parts, p)
		mean += v * 1e-3 / 10
	}
	for _, v := range esr {
		s += (v*1e-3 - mean) * (v*1e-3 - mean) / 9
	}
	s = math.Sqrt(s)
	limit := 25 + 100*(mean+1.8331*s*math.Sqrt(1.1)) // 10 A, 1 K/W: 100 K per ohm
	a := assess(t, parts, nil, "100kHz=10A", Conditions{Lot: "heron", RTh: value(1), Ambient: value(25), Limit: &limit})
	near(t, "factor", a.Statistics.Factor, 2.9110, 2e-5) // ISO 16269-6, n = 10, 95/95
	near(t, "bound", a.Harmonics[0].ESROhm, mean+2.9110*s, 1e-5)
	near(t, "share", *a.Statistics.ExceedingShare, 0.05, 1e-3)
	if a.Statistics.WorstPart != "d" || a.Lot != "heron" || a.Part != "" {
		t.Errorf("worst part %q, lot %q, part %q", a.Statistics.WorstPart, a.Lot, a.Part)
	}
	near(t, "worst loss", a.Statistics.WorstLossW, 3.3, 1e-6)
	if *a.Statistics.ExceedingParts != 0 { // the worst is 33 mΩ, mean + 1.62 s
		t.Errorf("%d parts exceed", *a.Statistics.ExceedingParts)
	}
	if a.LossLow95W != nil || a.Harmonics[0].Low95 != nil {
		t.Error("a lot's bound has the interval of one part")
	}
	// The order of the parts is of no account.
	back := slices.Clone(parts)
	slices.Reverse(back)
	b := assess(t, back, nil, "100kHz=10A", Conditions{RTh: value(1), Ambient: value(25), Limit: &limit})
	near(t, "loss in another order", b.LossW, a.LossW, 1e-14)

	identical := assess(t, []Sweep{parts[0], parts[0], parts[0]}, nil, "100kHz=10A", Conditions{RTh: value(1), Ambient: value(25), Limit: value(30)})
	near(t, "bound without spread", identical.Harmonics[0].ESROhm, 30e-3, 1e-6)
	if *identical.Statistics.ExceedingShare != 0 {
		t.Errorf("share %v", *identical.Statistics.ExceedingShare)
	}
}

// A lot at one temperature follows the course of one part over temperature.
func TestLotWithCourse(t *testing.T) {
	lot := []Sweep{atTemperature(capacitor(t, 20e-3), 25), atTemperature(capacitor(t, 22e-3), 25.5), atTemperature(capacitor(t, 24e-3), 24.5)}
	series := []Sweep{atTemperature(capacitor(t, 30e-3), 25), atTemperature(capacitor(t, 15e-3), 85)}
	a := assess(t, lot, series, "100kHz=5A", Conditions{RTh: value(10), Ambient: value(85)})
	// Above 85 °C the resistance stays at half of that at 25 °C.
	near(t, "loss", a.LossW, 25*0.5*(22e-3+lots.ToleranceOneSided(3, 0.95, 0.95)*2e-3), 1e-6)
	near(t, "worst hot spot", *a.Statistics.WorstHotSpotC, 85+10*25*12e-3, 1e-6)
}

func TestVerdicts(t *testing.T) {
	part := []Sweep{capacitor(t, 50e-3)}
	check := func(what string, c Conditions, want, voltage Verdict) {
		t.Helper()
		a := assess(t, part, nil, "100kHz=2A,200kHz=1A", c) // 0.25 W
		if a.Verdict != want {
			t.Errorf("%s: %s, want %s", what, a.Verdict, want)
		}
		if a.Voltage != nil && a.Voltage.Verdict != voltage {
			t.Errorf("%s: voltage %s, want %s", what, a.Voltage.Verdict, voltage)
		}
	}
	volt := func(dc float64, rated, factor *float64) *VoltageConditions {
		return &VoltageConditions{dc, rated, factor}
	}
	check("nothing", Conditions{}, NoLimitGiven, "")
	check("no limit", Conditions{RTh: value(20), Ambient: value(60)}, NoLimitGiven, "")
	check("at the limit", Conditions{RTh: value(20), Ambient: value(60), Limit: value(75), Margin: 10}, Within, "")
	check("just above", Conditions{RTh: value(20), Ambient: value(60), Limit: value(75), Margin: 10.001}, Exceeded, "")
	check("voltage without a rating", Conditions{Voltage: volt(24, nil, nil)}, NoLimitGiven, NoLimitGiven)
	check("voltage without a factor", Conditions{Voltage: volt(24, value(35), nil)}, NoLimitGiven, NoLimitGiven)
	check("voltage above the rating", Conditions{Voltage: volt(34.9, value(35), nil)}, Exceeded, Exceeded)
	check("voltage within the factor", Conditions{Voltage: volt(24, value(35), value(0.8))}, NoLimitGiven, Within)
	check("voltage above the factor", Conditions{Voltage: volt(27.9, value(35), value(0.8))}, Exceeded, Exceeded)
	check("negative voltage", Conditions{Voltage: volt(-27.9, value(35), value(0.8))}, Exceeded, Exceeded)
	check("both", Conditions{RTh: value(20), Ambient: value(60), Limit: value(105), Voltage: volt(24, value(35), value(0.8))}, Within, Within)
	check("voltage alone exceeds", Conditions{RTh: value(20), Ambient: value(60), Limit: value(105), Voltage: volt(30, value(35), value(0.8))}, Exceeded, Exceeded)
}

// Life doubles each 10 K, up to the cap (common practice, no source).
func TestLife(t *testing.T) {
	rating := LifeRating{Hours: 5000, TemperatureC: 105}
	for _, c := range []struct {
		at, want float64
		capped   bool
	}{{105, 5000, false}, {95, 10000, false}, {85, 20000, false}, {110, 5000 / math.Sqrt2, false}, {57.8, 131490, true}, {-40, 131490, true}} {
		life, capped := rating.at(c.at)
		near(t, "life", life, c.want, 1e-3)
		if capped != c.capped {
			t.Errorf("at %v °C: capped %v", c.at, capped)
		}
	}
	a := assess(t, []Sweep{capacitor(t, 50e-3)}, nil, "100kHz=10A", Conditions{RTh: value(10), Ambient: value(60), Limit: value(200), Life: &rating})
	if a.Verdict != Within || *a.LifeH > 5000 || !slices.Contains(codes(a), "above-life-rating") {
		t.Errorf("110 °C: verdict %v, life %v, warnings %v", a.Verdict, *a.LifeH, codes(a))
	}
}

// Warnings are there when they should be, and not otherwise.
func TestWarnings(t *testing.T) {
	part := capacitor(t, 50e-3) // 1 kHz to 10 MHz
	inductor := sweepOf(t, "DCR + L", []float64{30e-3, 22e-6}, 0, 1, nil)
	inductor.Kind = models.InductorPart
	for _, c := range []struct {
		code   string
		part   Sweep
		ripple string
		c      Conditions
		want   bool
	}{
		{"outside-sweep", part, "100kHz=1A,20MHz=0.1A", Conditions{}, true},
		{"outside-sweep", part, "1kHz=1A,10MHz=0.1A", Conditions{}, false},
		{"outside-sweep", part, "100Hz=1A", Conditions{}, true},
		{"mean-left-out", part, "100kHz=1A,0=1A", Conditions{}, true},
		{"mean-left-out", inductor, "100kHz=1A,0=1A", Conditions{}, false},
		{"no-direct-current", inductor, "100kHz=1A", Conditions{}, true},
		{"no-direct-current", inductor, "100kHz=1A,0=1A", Conditions{}, false},
		{"no-direct-current", part, "100kHz=1A", Conditions{}, false},
		{"reverse-voltage", part, "100kHz=1A", Conditions{Voltage: &VoltageConditions{DC: 0.05}}, true},
		{"reverse-voltage", part, "100kHz=1A", Conditions{Voltage: &VoltageConditions{DC: 1}}, false},
		{"steep-edges", part, "rectangle:3A,duty=0.3@100kHz", Conditions{Voltage: &VoltageConditions{DC: 5}}, true},
		{"steep-edges", part, "trapezoid:3A,duty=0.3,rise=90ns@100kHz", Conditions{Voltage: &VoltageConditions{DC: 5}}, false},
		{"no-room", part, "100kHz=1A", Conditions{RTh: value(1), Ambient: value(90), Limit: value(95), Margin: 5}, true},
		{"no-room", part, "100kHz=1A", Conditions{RTh: value(1), Ambient: value(80), Limit: value(95), Margin: 5}, false},
	} {
		a := assess(t, []Sweep{c.part}, nil, c.ripple, c.c)
		if got := slices.Contains(codes(a), c.code); got != c.want {
			t.Errorf("%s for %s, %+v: %v, want %v; all: %v", c.code, c.ripple, c.c, got, c.want, codes(a))
		}
	}
	noisy := sweepOf(t, "ESR + ESL + C", []float64{50e-3, 10e-9, 100e-6}, 0.02, 4, nil)
	over := assess(t, []Sweep{noisy}, nil, "100kHz=10A", Conditions{RTh: value(10), Ambient: value(25), Limit: value(25 + 10.001*100*noisy.Fit.Parameters[0].Value)})
	if over.Verdict != Within || !slices.Contains(codes(over), "interval-over-limit") {
		t.Errorf("an interval over the limit: %v, %v", over.Verdict, codes(over))
	}
}

// A fitted ESR far from the measured one is said, where it matters, and what
// reading and fitting warned of is handed on.
func TestWarningsOfFits(t *testing.T) {
	good := capacitor(t, 50e-3)
	c, err := models.Parse("ESR + ESL + C")
	if err != nil {
		t.Fatal(err)
	}
	fixed, err := fit.Fit(good.Fit.Freq, good.Fit.Measured, c, &fit.Settings{Fixed: map[string]float64{"ESR": 35e-3, "ESL": 10e-9, "C": 100e-6}})
	if err != nil {
		t.Fatal(err)
	}
	bad := good
	bad.Fit, bad.Warnings = fixed, []Warning{{"odd", "something odd"}}
	if a := assess(t, []Sweep{bad}, nil, "100kHz=1A", Conditions{}); !slices.Contains(codes(a), "measured-differs") || !slices.Contains(codes(a), "odd") {
		t.Errorf("35 mΩ fitted, 50 mΩ measured: %v", codes(a))
	}
	if a := assess(t, []Sweep{good}, nil, "100kHz=1A", Conditions{}); slices.Contains(codes(a), "measured-differs") {
		t.Errorf("fitted as measured: %v", codes(a))
	}
	a := assess(t, []Sweep{bad, good, bad}, nil, "100kHz=1A", Conditions{})
	if i := slices.Index(codes(a), "odd"); i < 0 || !strings.HasPrefix(a.Warnings[i].Text, "2 of 3 sweeps; of part: something odd") {
		t.Errorf("warnings of a lot: %+v", a.Warnings)
	}
	// A rating that rests on the ESR of a cold sweep is doubtful when hot.
	series := []Sweep{atTemperature(good, 25), atTemperature(capacitor(t, 25e-3), 85)}
	rating := &Rating{Current: 2, Freq: 100e3, Rise: 5}
	if a := assess(t, series[:1], series, "100kHz=1A", Conditions{Rating: rating, Ambient: value(60)}); !slices.Contains(codes(a), "rated-esr-temperature") {
		t.Errorf("a rating by the ESR of the cold sweep: %v", codes(a))
	}
	rating.ESR = value(25e-3)
	if a := assess(t, series[:1], series, "100kHz=1A", Conditions{Rating: rating, Ambient: value(60)}); slices.Contains(codes(a), "rated-esr-temperature") {
		t.Errorf("a rating with its own ESR: %v", codes(a))
	}
}

func TestErrors(t *testing.T) {
	part, inductor := capacitor(t, 50e-3), sweepOf(t, "DCR + L", []float64{30e-3, 22e-6}, 0, 1, nil)
	inductor.Kind = models.InductorPart
	ideal := sweepOf(t, "C", []float64{1e-6}, 0, 1, nil)
	for _, c := range []struct {
		flag          string
		parts, series []Sweep
		c             Conditions
	}{
		{"--kind", []Sweep{part, inductor}, nil, Conditions{}},
		{"--dc", []Sweep{inductor}, nil, Conditions{Voltage: &VoltageConditions{DC: 5}}},
		{"--life", []Sweep{inductor}, nil, Conditions{Life: &LifeRating{5000, 105}}},
		{"--at-temperature", []Sweep{part}, []Sweep{atTemperature(part, 25), atTemperature(part, 85)}, Conditions{}},
		{"--at-temperature", []Sweep{atTemperature(part, 25)}, []Sweep{atTemperature(part, 25)}, Conditions{}},
		{"--at-temperature", []Sweep{atTemperature(part, 25)}, []Sweep{atTemperature(part, 25), atTemperature(part, 26)}, Conditions{}},
		{"--at-temperature", []Sweep{atTemperature(part, 25), atTemperature(part, 40)}, []Sweep{atTemperature(part, 25), atTemperature(part, 85)}, Conditions{}},
		{"--rated-ripple", []Sweep{ideal}, nil, Conditions{Rating: &Rating{Current: 1, Freq: 1e5, Rise: 5}}},
	} {
		_, err := Assess(c.parts, c.series, parse(t, "100kHz=1A"), c.c)
		var input *fit.InputError
		if !errors.As(err, &input) || input.Flag != c.flag {
			t.Errorf("error %v, want one of %s", err, c.flag)
		}
	}
	if a := assess(t, []Sweep{ideal}, nil, "100kHz=1A", Conditions{RTh: value(10), Ambient: value(20), Limit: value(100)}); a.LossW != 0 || !slices.Contains(codes(a), "no-resistance") || a.MaxRippleA != nil {
		t.Errorf("a circuit without resistance: loss %v, largest %v, %v", a.LossW, a.MaxRippleA, codes(a))
	}
}

// The JSON has the fields of its contract, finite numbers, and the cautions.
func TestJSON(t *testing.T) {
	part := sweepOf(t, branched, branchedValues, 0.001, 5, nil)
	full := assess(t, []Sweep{part}, nil, "triangle:2.4App@180kHz", Conditions{
		RTh: value(20), Ambient: value(60), Limit: value(105), Margin: 10,
		Voltage: &VoltageConditions{24, value(35), value(0.8)}, Life: &LifeRating{5000, 105},
	})
	read := func(a *Assessment) map[string]any {
		var b bytes.Buffer
		if err := a.WriteJSON(&b); err != nil {
			t.Fatal(err)
		}
		if strings.Count(b.String(), "\n") != 1 {
			t.Error("not one line")
		}
		var m map[string]any
		if err := json.Unmarshal(b.Bytes(), &m); err != nil {
			t.Fatal(err)
		}
		return m
	}
	m := read(full)
	for _, name := range []string{"schema", "harmonics", "loss_w", "rise_k", "hot_spot_c", "limit_c", "margin_k", "max_ripple_a", "voltage", "life_h", "verdict", "cautions"} {
		if m[name] == nil {
			t.Errorf("no %s", name)
		}
	}
	if m["schema"] != "realpart.derate/1" || m["verdict"] != "within" || len(m["cautions"].([]any)) < 4 {
		t.Errorf("schema %v, verdict %v, cautions %v", m["schema"], m["verdict"], m["cautions"])
	}
	for _, name := range []string{"f_hz", "i_rms_a", "esr_ohm", "esr_low95_ohm", "esr_high95_ohm", "loss_w"} {
		if _, ok := m["harmonics"].([]any)[0].(map[string]any)[name].(float64); !ok {
			t.Errorf("no %s in a harmonic", name)
		}
	}
	for _, name := range []string{"dc_v", "ripple_peak_v", "rated_v", "factor", "verdict"} {
		if m["voltage"].(map[string]any)[name] == nil {
			t.Errorf("no %s in voltage", name)
		}
	}
	least := read(assess(t, []Sweep{part}, nil, "100kHz=1A", Conditions{}))
	for _, name := range []string{"rise_k", "hot_spot_c", "limit_c", "margin_k", "max_ripple_a", "voltage", "life_h", "rth_k_per_w", "ambient_c", "lot_statistics"} {
		if _, there := least[name]; there {
			t.Errorf("%s, which was not asked for, is there", name)
		}
	}
	if least["verdict"] != "no-limit-given" {
		t.Errorf("verdict %v", least["verdict"])
	}
	all := strings.Join(full.Cautions, " ")
	for _, word := range []string{"Stored charge", "discharge", "one bias and one temperature", "Class 2", "data sheet", "derating standard in force", "local codes", "qualified engineer"} {
		if !strings.Contains(all, word) {
			t.Errorf("no caution of %q", word)
		}
	}
	inductor := sweepOf(t, "DCR + L", []float64{30e-3, 22e-6}, 0, 1, nil)
	inductor.Kind = models.InductorPart
	if a := assess(t, []Sweep{inductor}, nil, "100kHz=1A,0=2A", Conditions{}); !strings.Contains(strings.Join(a.Cautions, " "), "Saturation is out of scope") {
		t.Error("saturation is not said to be out of scope")
	}
}

// The text holds in 80 columns and names verdict and cautions.
func TestText(t *testing.T) {
	series := []Sweep{atTemperature(sweepOf(t, branched, branchedValues, 0.001, 5, nil), 20), atTemperature(capacitor(t, 20e-3), 80)}
	lot := []Sweep{capacitor(t, 20e-3), capacitor(t, 22e-3), capacitor(t, 24e-3)}
	for _, c := range []struct{ parts, series []Sweep }{{series[:1], series}, {lot, nil}} {
		a := assess(t, c.parts, c.series, "rectangle:3.123A,duty=0.3@100kHz", Conditions{
			RTh: value(20), Ambient: value(60), Limit: value(105), Margin: 10,
			Voltage: &VoltageConditions{24, value(35), nil}, Life: &LifeRating{5000, 105},
		})
		var b bytes.Buffer
		if err := a.WriteText(&b, TextOptions{}); err != nil {
			t.Fatal(err)
		}
		for line := range strings.Lines(b.String()) {
			if n := len([]rune(strings.TrimRight(line, "\n"))); n > 80 {
				t.Errorf("%d columns: %s", n, line)
			}
		}
		for _, want := range []string{"WITHIN", "Cautions", "largest ripple current", "share", "common practice"} {
			if !strings.Contains(b.String(), want) {
				t.Errorf("no %q in\n%s", want, b.String())
			}
		}
		b.Reset()
		if err := a.WriteText(&b, TextOptions{Quiet: true}); err != nil || strings.Contains(b.String(), "Cautions") {
			t.Errorf("cautions in a quiet text (%v)", err)
		}
	}
}

func BenchmarkAssessLot(b *testing.B) {
	var parts []Sweep
	for i := range 50 {
		parts = append(parts, atTemperature(sweepOf(b, branched, branchedValues, 0.001, uint64(i), nil), 25))
	}
	series := []Sweep{atTemperature(parts[0], 25), atTemperature(parts[1], 85)}
	ripple := parse(b, "rectangle:3A,duty=0.3@100kHz")
	c := Conditions{RTh: value(20), Ambient: value(60), Limit: value(105)}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Assess(parts, series, ripple, c); err != nil {
			b.Fatal(err)
		}
	}
}
