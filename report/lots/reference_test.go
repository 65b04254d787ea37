package lots

import (
	"bufio"
	"encoding/json"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"
)

// near fails unless got is within a relative tolerance of want; NaN fails.
func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance*math.Abs(want)) {
		t.Errorf("%s: got %.15g, want %.15g (relative tolerance %g)", what, got, want, tolerance)
	}
}

// columns reads a NIST file: the rows after skip lines.
func columns(t *testing.T, name string, skip int) [][]float64 {
	t.Helper()
	f, err := os.Open("../../testdata/nist-handbook/" + name)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	var out [][]float64
	lines := bufio.NewScanner(f)
	for i := 0; lines.Scan(); i++ {
		words := strings.Fields(lines.Text())
		if i < skip || len(words) == 0 {
			continue
		}
		row := make([]float64, len(words))
		for k, w := range words {
			if row[k], err = strconv.ParseFloat(w, 64); err != nil {
				t.Fatalf("%s:%d: %v", name, i+1, err)
			}
		}
		out = append(out, row)
	}
	if err := lines.Err(); err != nil {
		t.Fatal(err)
	}
	return out
}

func column(rows [][]float64, c int, keep func(row []float64) bool) []float64 {
	var out []float64
	for _, row := range rows {
		if keep == nil || keep(row) {
			out = append(out, row[c])
		}
	}
	return out
}

// NIST/SEMATECH e-Handbook 1.3.5.3: the sizes, means and standard deviations
// are printed there; Welch's numbers are computed by SciPy, see
// testdata/reference/scipy_lots.py.
func TestTwoSampleHandbook(t *testing.T) {
	rows := columns(t, "AUTO83B.DAT", 25)
	us := column(rows, 0, nil)
	japan := column(rows, 1, func(row []float64) bool { return row[1] > 0 })
	a, b := Summarise(us), Summarise(japan)
	if a.N != 249 || b.N != 79 {
		t.Fatalf("got %d and %d cars, want 249 and 79", a.N, b.N)
	}
	near(t, "mean US", a.Mean, 20.14458, 5e-7)
	near(t, "s US", a.SD, 6.41470, 1e-6)
	near(t, "mean Japan", b.Mean, 30.48101, 5e-7)
	near(t, "s Japan", b.SD, 6.10771, 1e-6)
	d := Welch(us, japan)
	near(t, "t", d.T(), -12.946273274932006, 1e-12)
	near(t, "df", d.DF, 136.87497667258336, 1e-12)
	near(t, "p", d.P(), 1.5709e-25, 1e-4)
	low, high := d.Interval(0.95)
	near(t, "low", low, -11.915248094625337, 1e-11)
	near(t, "high", high, -8.757620595324337, 1e-11)
}

// NIST/SEMATECH e-Handbook 1.3.5.10: W = 1.705910 is printed; more digits by
// SciPy.
func TestBrownForsytheHandbook(t *testing.T) {
	rows := columns(t, "GEAR.DAT", 25)
	var batches [][]float64
	for b := 1; b <= 10; b++ {
		batches = append(batches, column(rows, 0, func(row []float64) bool { return row[1] == float64(b) }))
	}
	w, p := BrownForsythe(batches...)
	near(t, "W printed", w, 1.705910, 1e-5) // the page's run was in fewer digits
	near(t, "W", w, 1.7059176930008937, 1e-9)
	near(t, "p", p, 0.0990829755522, 1e-9)

	rows = columns(t, "JAHANMI2.DAT", 50) // page 1.3.5.9
	one := column(rows, 4, func(row []float64) bool { return row[13] == 1 })
	two := column(rows, 4, func(row []float64) bool { return row[13] == 2 })
	near(t, "batch 1 mean", Summarise(one).Mean, 688.9987, 1e-7)
	near(t, "batch 2 s", Summarise(two).SD, 61.85425, 1e-7)
	w, _ = BrownForsythe(one, two)
	near(t, "W of JAHANMI2", w, 0.38560167602422213, 1e-9)
	near(t, "Welch df of JAHANMI2", Welch(one, two).DF, 476.39995744059536, 1e-10)
}

// NIST/SEMATECH e-Handbook 1.3.5.17.1: G = 2.4687 and the one-sided critical
// value 2.032 are printed.
func TestGrubbsHandbook(t *testing.T) {
	v := column(columns(t, "grubbs-uranium.txt", 0), 0, nil)
	g, critical := Grubbs(v, 0.05)
	near(t, "G printed", g, 2.4687, 3e-5)
	near(t, "G", g, 2.46876461121245, 1e-12)
	near(t, "two-sided critical", critical, 2.126645087195628, 1e-10)
	near(t, "one-sided critical printed", grubbsCritical(8, 0.05), 2.032, 2e-4)
	near(t, "one-sided critical", grubbsCritical(8, 0.05), 2.031652001549951, 1e-10)
}

// NIST/SEMATECH e-Handbook 1.3.5.17.3, 10 repetitions; the page truncates to
// three decimals, more digits are computed by SciPy. There are 3 outliers,
// though neither of the first two repetitions exceeds its critical value.
func TestGeneralisedESDHandbook(t *testing.T) {
	v := column(columns(t, "rosner-esd-54.txt", 0), 0, nil)
	if len(v) != 54 {
		t.Fatalf("got %d values, want 54", len(v))
	}
	count, r, lambda := GeneralisedESD(v, 10, 0.05)
	if count != 3 {
		t.Errorf("got %d outliers, want 3", count)
	}
	wantR := []float64{3.118906, 2.942973, 3.179424, 2.810181, 2.815580, 2.848172, 2.279327, 2.310366, 2.101581, 2.067178}
	wantL := []float64{3.158794, 3.151430, 3.143890, 3.136165, 3.128247, 3.120128, 3.111796, 3.103243, 3.094456, 3.085425}
	for i := range wantR {
		near(t, "R", r[i], wantR[i], 3e-7)
		near(t, "λ", lambda[i], wantL[i], 3e-7)
	}
	if once, _, _ := GeneralisedESD(v, 1, 0.05); once != 0 {
		t.Errorf("Grubbs' test alone finds %d, want 0: it is masked", once)
	}
}

// Grubbs' critical values from the formula of NIST/SEMATECH e-Handbook
// 1.3.5.17.1, computed in double precision with SciPy (printed tables on the
// web carry misprints).
func TestGrubbsTable(t *testing.T) {
	for _, row := range []struct {
		n                               int
		one5, one25, one1, both5, both1 float64
	}{
		{3, 1.1531, 1.1543, 1.1546, 1.1543, 1.1547},
		{5, 1.6714, 1.7150, 1.7489, 1.7150, 1.7637},
		{7, 1.9381, 2.0200, 2.0973, 2.0200, 2.1391},
		{10, 2.1761, 2.2900, 2.4097, 2.2900, 2.4821},
		{15, 2.4090, 2.5483, 2.7049, 2.5483, 2.8061},
		{20, 2.5566, 2.7082, 2.8838, 2.7082, 3.0008},
		{25, 2.6629, 2.8217, 3.0086, 2.8217, 3.1353},
		{50, 2.9570, 3.1282, 3.3366, 3.1282, 3.4825},
		{100, 3.2095, 3.3841, 3.6002, 3.3841, 3.7540},
	} {
		for _, c := range []struct{ alpha, want float64 }{{0.05, row.one5}, {0.025, row.one25}, {0.01, row.one1}, {0.025, row.both5}, {0.005, row.both1}} {
			if got := grubbsCritical(row.n, c.alpha); !(math.Abs(got-c.want) <= 0.51e-4) {
				t.Errorf("n = %d, one-sided level %g: got %.5f, want %.4f", row.n, c.alpha, got, c.want)
			}
		}
	}
}

// NIST/SEMATECH e-Handbook 7.2.6.3: n = 43, 90 % of the population, 99 %
// confidence; 1.8740 (exact, one-sided) and 4.4111 for n = 6 are printed. The
// often quoted 1.8752 is an approximation.
func TestToleranceHandbook(t *testing.T) {
	near(t, "one-sided, n = 43", ToleranceOneSided(43, 0.90, 0.99), 1.8739536058511987, 1e-10)
	near(t, "one-sided printed", ToleranceOneSided(43, 0.90, 0.99), 1.8740, 3e-5)
	near(t, "one-sided, n = 6", ToleranceOneSided(6, 0.90, 0.99), 4.411080572397619, 1e-10)
	near(t, "two-sided, n = 43", ToleranceTwoSided(43, 0.90, 0.99), 2.222825, 3e-7)
}

// The factors of normal tolerance bounds that tables print to four decimals
// (definitions of ISO 16269-6; computed in double precision, the anchors 2.911
// and 3.393 for n = 10, 95 %/95 % as commonly printed).
func TestToleranceTable(t *testing.T) {
	for _, row := range []struct {
		confidence float64
		n          int
		one, two   [3]float64 // shares 0.90, 0.95, 0.99
	}{
		{0.90, 3, [3]float64{4.2582, 5.3115, 7.3404}, [3]float64{5.7881, 6.8233, 8.8186}},
		{0.90, 20, [3]float64{1.7652, 2.2078, 3.0515}, [3]float64{2.1583, 2.5696, 3.3715}},
		{0.95, 3, [3]float64{6.1553, 7.6559, 10.5527}, [3]float64{8.3059, 9.7888, 12.6471}},
		{0.95, 5, [3]float64{3.4066, 4.2027, 5.7411}, [3]float64{4.2906, 5.0769, 6.5980}},
		{0.95, 10, [3]float64{2.3546, 2.9110, 3.9811}, [3]float64{2.8563, 3.3934, 4.4369}},
		{0.95, 25, [3]float64{1.8381, 2.2917, 3.1580}, [3]float64{2.2151, 2.6377, 3.4621}},
		{0.95, 100, [3]float64{1.5267, 1.9265, 2.6840}, [3]float64{1.8748, 2.2339, 2.9355}},
		{0.95, 200, [3]float64{1.4496, 1.8372, 2.5697}, [3]float64{1.7984, 2.1429, 2.8162}},
		{0.99, 3, [3]float64{13.9954, 17.3702, 23.8956}, [3]float64{18.7824, 22.1308, 28.5857}},
		{0.99, 43, [3]float64{1.8740, 2.3314, 3.2059}, [3]float64{2.2228, 2.6479, 3.4779}},
	} {
		for i, share := range []float64{0.90, 0.95, 0.99} {
			one, two := ToleranceOneSided(row.n, share, row.confidence), ToleranceTwoSided(row.n, share, row.confidence)
			if !(math.Abs(one-row.one[i]) <= 0.51e-4) {
				t.Errorf("one-sided, n = %d, share %g, confidence %g: got %.5f, want %.4f", row.n, share, row.confidence, one, row.one[i])
			}
			if !(math.Abs(two-row.two[i]) <= 0.51e-4) {
				t.Errorf("two-sided, n = %d, share %g, confidence %g: got %.5f, want %.4f", row.n, share, row.confidence, two, row.two[i])
			}
		}
	}
}

// NIST StRD, univariate: certified (exact) means and standard deviations. Lots
// with a spread of 1 ppm have the same shape of problem.
func TestSummaryStRD(t *testing.T) {
	for _, c := range []struct {
		file     string
		mean, sd float64
		digits   float64 // that s keeps: the data carry no more
	}{
		{"NUMACC1.DAT", 10000002, 1, 1e-14},
		{"NUMACC2.DAT", 1.2, 0.1, 1e-13},
		{"NUMACC3.DAT", 1000000.2, 0.1, 1e-8},
		{"NUMACC4.DAT", 10000000.2, 0.1, 1e-7},
	} {
		s := Summarise(column(columns(t, c.file, 60), 0, nil))
		near(t, c.file+" mean", s.Mean, c.mean, 1e-15)
		near(t, c.file+" s", s.SD, c.sd, c.digits)
	}
	// Page 1.3.5.2.
	z := Summarise(column(columns(t, "ZARR13.DAT", 25), 0, nil))
	near(t, "ZARR13 mean", z.Mean, 9.261460, 1e-7)
	near(t, "ZARR13 s", z.SD, 0.022789, 2e-5)
}

// Reference values of SciPy 1.10.1; testdata/reference/scipy_lots.py made
// them.
func TestSciPy(t *testing.T) {
	var ref struct {
		Pairs []struct {
			Name                                        string
			X, Y                                        []float64
			Difference, T, DF, P, Low95, High95, Margin float64
			TOST                                        float64 `json:"tost_p"`
			U                                           float64
			UP                                          float64 `json:"u_p"`
			LeveneW                                     float64 `json:"levene_w"`
			LeveneP                                     float64 `json:"levene_p"`
			Alpha                                       float64 `json:"detectable_alpha"`
			Detectable                                  float64
		}
		Normality []struct {
			Name   string
			Values []float64
			A2     float64
		}
		Noncentral []struct{ T, Nu, Delta, P float64 } `json:"noncentral_t"`
		Tolerance  []struct {
			N                 int
			Share, Confidence float64
			One               float64 `json:"one_sided"`
			Two               float64 `json:"two_sided"`
		}
	}
	data, err := os.ReadFile("../../testdata/reference/scipy_lots.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(data, &ref); err != nil {
		t.Fatal(err)
	}
	if len(ref.Pairs) != 8 || len(ref.Normality) != 6 || len(ref.Noncentral) != 8 || len(ref.Tolerance) != 12 {
		t.Fatalf("the reference is incomplete")
	}
	for _, c := range ref.Pairs {
		d := Welch(c.X, c.Y)
		near(t, c.Name+" difference", d.Value, c.Difference, 1e-11)
		near(t, c.Name+" t", d.T(), c.T, 1e-10)
		near(t, c.Name+" df", d.DF, c.DF, 1e-10)
		near(t, c.Name+" p", d.P(), c.P, 1e-9)
		low, high := d.Interval(0.95)
		near(t, c.Name+" width", high-low, c.High95-c.Low95, 1e-8) // distuv's quantile has 8 digits
		near(t, c.Name+" middle", (high+low)/2, c.Difference, 1e-9)
		near(t, c.Name+" TOST", d.Equivalence(c.Margin), c.TOST, 1e-9)
		near(t, c.Name+" detectable", d.Detectable(c.Alpha, 0.9), c.Detectable, 1e-7)
		u, p := MannWhitney(c.X, c.Y)
		near(t, c.Name+" U", u, c.U, 1e-15)
		near(t, c.Name+" p of U", p, c.UP, 1e-9)
		w, p := BrownForsythe(c.X, c.Y)
		near(t, c.Name+" W", w, c.LeveneW, 1e-9)
		near(t, c.Name+" p of W", p, c.LeveneP, 1e-9)
	}
	for _, c := range ref.Normality {
		a2, _ := AndersonDarling(c.Values)
		near(t, c.Name+" A²", a2, c.A2, 1e-9)
	}
	for _, c := range ref.Noncentral {
		if got := noncentralT(c.T, c.Nu, c.Delta); !(math.Abs(got-c.P) <= 1e-10) {
			t.Errorf("noncentral t(%g; %g, %g): got %.13g, want %.13g", c.T, c.Nu, c.Delta, got, c.P)
		}
	}
	for _, c := range ref.Tolerance {
		near(t, "one-sided factor", ToleranceOneSided(c.N, c.Share, c.Confidence), c.One, 1e-8)
		near(t, "two-sided factor", ToleranceTwoSided(c.N, c.Share, c.Confidence), c.Two, 1e-8)
	}
}
