package netlist

import (
	"bytes"
	"fmt"
	"math"
	"math/cmplx"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"realpart/models"
	"realpart/report"
)

// record makes the record of a circuit with values, as a fit would.
func record(t testing.TB, part, name, expression string, values []float64, from, to float64) *report.Fit {
	t.Helper()
	c, err := models.Parse(expression)
	if err != nil {
		t.Fatal(err)
	}
	f := &report.Fit{
		Schema: report.Schema, Status: report.Converged, Kind: models.CapacitorPart,
		Sweep:     report.Sweep{File: part + ".csv", Part: part, FMin: from, FMax: to, Points: 50, UsedPoints: 50},
		Circuit:   &report.Circuit{Name: name, Expression: expression},
		Residuals: &report.Residuals{RMSRelative: 0.001, MaxRelative: 0.003, MaxAtHz: from},
	}
	for i, p := range c.Parameters() {
		low, high := values[i]*0.99, values[i]*1.01
		f.Parameters = append(f.Parameters, report.Parameter{Name: p.Name, Unit: p.Unit, Value: values[i], Low95: &low, High95: &high, Determined: true})
	}
	return f
}

// simulate returns the impedance of a subcircuit at n frequencies, as an AC
// analysis of ngspice (a general-purpose circuit simulator, Debian package
// ngspice) finds it: a source of 1 V behind a resistor drives the part.
func simulate(t *testing.T, netlist, name string, from, to float64, n int, series float64) (freq []float64, z []complex128) {
	t.Helper()
	dir := t.TempDir()
	perDecade := int(math.Ceil(float64(n-1) / math.Log10(to/from)))
	deck := fmt.Sprintf(`impedance of a subcircuit
.include part.lib
V1 s 0 DC 0 AC 1
Rs s t %g
X1 t 0 %s
.control
set numdgt=16
set wr_singlescale
ac dec %d %g %g
wrdata out.txt v(t) i(v1)
quit
.endc
.end
`, series, name, perDecade, from, to)
	for file, text := range map[string]string{"part.lib": netlist, "deck.cir": deck} {
		if err := os.WriteFile(filepath.Join(dir, file), []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	command := exec.Command("ngspice", "-b", "deck.cir")
	command.Dir = dir
	log, err := command.CombinedOutput()
	if err != nil {
		t.Fatalf("ngspice: %v\n%s", err, log)
	}
	for line := range strings.Lines(string(log)) {
		for _, word := range []string{"error", "singular", "warning", "gmin", "failed"} {
			if strings.Contains(strings.ToLower(line), word) {
				t.Errorf("ngspice says: %s\n%s", line, netlist)
			}
		}
	}
	out, err := os.ReadFile(filepath.Join(dir, "out.txt"))
	if err != nil {
		t.Fatalf("%v\n%s\n%s", err, log, netlist)
	}
	for line := range strings.Lines(string(out)) {
		var v [5]float64
		for i, word := range strings.Fields(line) {
			if v[i], err = strconv.ParseFloat(word, 64); err != nil {
				t.Fatal(err)
			}
		}
		freq = append(freq, v[0])
		z = append(z, complex(v[1], v[2])/-complex(v[3], v[4]))
	}
	return freq, z
}

func needSimulator(t *testing.T) {
	t.Helper()
	if _, err := exec.LookPath("ngspice"); err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("ngspice, which simulates the netlist, is not installed")
		}
		t.Skip("ngspice, which simulates the netlist, is not installed")
	}
}

// parts are the library circuits with values of usual parts.
var parts = map[string]struct {
	values   []float64
	from, to float64
}{
	"cap-ideal":      {[]float64{1e-12}, 1e3, 1e8},
	"cap-esr":        {[]float64{0.02, 47e-6}, 20, 2e5},
	"cap-esr-esl":    {[]float64{0.0213, 4.1e-9, 9.87e-6}, 100, 1e7},
	"cap-leak":       {[]float64{0.0213, 4.1e-9, 9.87e-6, 4.7e6}, 0.001, 1e7},
	"cap-loss":       {[]float64{0.004, 12e-9, 1e-6, 0.012}, 100, 1e7},
	"cap-two-branch": {[]float64{0.09, 15e-9, 470e-6, 0.25, 330e-6}, 20, 2e6},
	"cap-line":       {[]float64{0.01, 2e-9, 0.15, 220e-6}, 20, 1e7},
	"ind-ideal":      {[]float64{10e-6}, 1e3, 1e8},
	"ind-dcr":        {[]float64{0.12, 22e-6}, 20, 1e6},
	"ind-cp":         {[]float64{0.12, 220e-6, 3.5e-12}, 100, 2e7},
	"ind-core":       {[]float64{0.12, 220e-6, 40e3, 3.5e-12}, 100, 2e7},
	"ind-skin":       {[]float64{0.12, 2e-4, 220e-6, 3.5e-12}, 100, 2e7},
	"ind-eddy":       {[]float64{0.12, 200e-6, 50, 20e-6, 3.5e-12}, 100, 2e7},
	"bead":           {[]float64{0.2, 1.2e-6, 600, 0.6e-12}, 1e6, 1e9},
	"bead-two":       {[]float64{0.2, 1.2e-6, 300, 0.6e-12, 3e-6, 200, 2e-12}, 1e5, 1e9},
	"res-ideal":      {[]float64{100}, 20, 1e6},
	"res-series-l":   {[]float64{0.01, 5e-9}, 20, 1e7},
	"res-shunt-c":    {[]float64{1e6, 0.2e-12}, 20, 1e7},
	"res-full":       {[]float64{50, 2e-9, 0.15e-12}, 1e5, 1e10},
	"res-bvd":        {[]float64{5e-12, 20, 12.7e-3, 20e-15}, 9.5e6, 10.5e6},
	"series-rlc":     {[]float64{1, 1e-6, 1e-9}, 1e5, 1e8},
	"parallel-rlc":   {[]float64{1e4, 1e-6, 1e-9}, 1e5, 1e8},
}

// Lumped circuits simulate to the fit within 1e-6, those with distributed
// elements within the stated error; at 50 frequencies.
func TestLibraryInSimulator(t *testing.T) {
	needSimulator(t)
	for _, m := range models.Library() {
		t.Run(m.Name, func(t *testing.T) {
			t.Parallel()
			p, ok := parts[m.Name]
			if !ok {
				t.Fatal("no values for this circuit of the library")
			}
			text := check(t, record(t, m.Name, m.Name, m.Circuit.String(), p.values, p.from, p.to), 0.001)
			// Only an insulation resistance lets direct current through a
			// capacitor, whatever its ladder is made of.
			blocks := m.Kind == models.CapacitorPart && m.Name != "cap-leak" || m.Name == "res-bvd" || m.Name == "series-rlc"
			if said := strings.Contains(text, "* no path for direct current"); said != blocks {
				t.Errorf("direct current is blocked: %v, want %v", said, blocks)
			}
		})
	}
}

// Circuits of the user's own that have no operating point without help.
func TestOwnCircuitsInSimulator(t *testing.T) {
	needSimulator(t)
	for _, test := range []struct {
		expression string
		values     []float64
		from, to   float64
		stated     float64
	}{
		{"C1 + C2", []float64{1e-12, 3e-12}, 100, 1e7, 0.001},
		{"C1 + R + C2 + (C3 || C4) + L", []float64{1e-9, 10, 1e-6, 1e-12, 1e-9, 1e-9}, 100, 1e7, 0.001},
		{"L1 || L2 || (L3 + L4)", []float64{1e-6, 2e-6, 1e-9, 3e-6}, 100, 1e7, 0.001},
		{"(L1 || L2) + (C1 || (C2 + C3))", []float64{1e-9, 1e-6, 1e-9, 1e-9, 1e-10}, 100, 1e7, 0.001},
		{"L1 || (L2 + (L3 || R3)) || (skin(K) + L4)", []float64{1e-6, 2e-6, 1e-9, 10, 1e-5, 3e-6}, 1e3, 1e6, 0.001},
		// Alone, so that nothing hides the capacitor that blocks direct current.
		{"ESR + cpe(Q, n)", []float64{1, 1e-6, 0.8}, 10, 1e6, 0.001},
		{"cpe(Q, n)", []float64{1e-6, 0.4}, 10, 1e5, 0.001},
		{"cpe(Q, n) + C", []float64{1e-7, 0.8, 1e-8}, 1, 1e6, 0.001},
		{"R || cpe(Q, n)", []float64{1e5, 1e-9, 0.5}, 1, 1e6, 0.0001},
		{"loss(C1, tand1) + rcline(R, C2) + loss(C3, tand3)", []float64{1e-7, 0.002, 100, 1e-7, 2e-8, 0.05}, 10, 1e6, 0.001},
		{"skin(K) || (L + skin(K2))", []float64{1e-3, 1e-7, 1e-4}, 10, 1e7, 0.001},
		{"ESR + ESL + loss(C, tand)", []float64{0.0002, 5e-9, 1e-6, 0.0003}, 100, 1e8, 0.001}, // Q above 100 at resonance
		{"R", []float64{47}, 1e6, 1e6, 0.001},                                                 // a sweep of one frequency
	} {
		t.Run(test.expression, func(t *testing.T) {
			t.Parallel()
			check(t, record(t, "own", "", test.expression, test.values, test.from, test.to), test.stated)
		})
	}
}

var statedError = regexp.MustCompile(`(?m)^\* With them the whole equals the fit within ([0-9.e+-]+) % of its impedance, ([0-9.e+-]+) % of its resistance, in that range\.$`)

func check(t *testing.T, f *report.Fit, ladderError float64) (text string) {
	t.Helper()
	var b bytes.Buffer
	if err := Write(&b, []*report.Fit{f}, Options{LadderError: ladderError}); err != nil {
		t.Fatal(err)
	}
	text = b.String()
	c, _ := models.Parse(f.Circuit.Expression)
	tolerance, realTolerance := 1e-6, math.Inf(1)
	distributed := strings.ContainsRune(f.Circuit.Expression, ',') || strings.Contains(f.Circuit.Expression, "skin")
	if m := statedError.FindStringSubmatch(text); m != nil {
		percent, err := strconv.ParseFloat(m[1], 64)
		if err != nil {
			t.Fatal(err)
		}
		realPercent, err := strconv.ParseFloat(m[2], 64)
		if err != nil {
			t.Fatal(err)
		}
		tolerance = percent/100*1.05 + 1e-6 // two digits are printed
		realTolerance = realPercent/100*1.05 + 1e-6
		if strings.Contains(text, "Rloop") {
			realTolerance = math.Inf(1) // it adds resistance, which the header says
		}
		if realPercent > 1.05 {
			t.Errorf("stated error of the resistance %v %%, wanted at most 1 %%", realPercent)
		}
		if !distributed || tolerance > 1.05*ladderError+1e-6 {
			t.Errorf("stated error %v %%, wanted at most %v", percent, ladderError)
		}
	} else if distributed {
		t.Error("no error is stated for the ladders")
	}
	name := regexp.MustCompile(`(?m)^\.SUBCKT (\S+) a b$`).FindStringSubmatch(text)[1]
	to := f.Sweep.FMax
	if to == f.Sweep.FMin {
		to *= 2
	}
	middle := c.At(math.Sqrt(f.Sweep.FMin*f.Sweep.FMax), f.Values())
	freq, z := simulate(t, text, name, f.Sweep.FMin, to, 50, cmplx.Abs(middle))
	if len(freq) < 50 {
		t.Errorf("%d frequencies, want 50", len(freq))
	}
	worst, at := 0.0, 0.0
	for i, freq := range freq {
		if d := cmplx.Abs(z[i]/c.At(freq, f.Values()) - 1); !(d <= worst) {
			worst, at = d, freq
		}
		if d := math.Abs(real(z[i])/real(c.At(freq, f.Values())) - 1); d > realTolerance {
			t.Errorf("resistance off by %.3g at %.6g Hz, want at most %.3g", d, freq, realTolerance)
		}
	}
	if !(worst <= tolerance) {
		t.Errorf("off by %.3g at %.6g Hz, want at most %.3g\n%s", worst, at, tolerance, text)
	}
	t.Logf("error %.2g, tolerance %.2g, %d lines", worst, tolerance, strings.Count(text, "\n"))
	return text
}
