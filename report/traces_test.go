package report

import (
	"bytes"
	"encoding/csv"
	"math"
	"math/cmplx"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func choke(t testing.TB, points int, noise float64) *Traces {
	s := simulated(t, "ind-cp", []float64{0.12, 220e-6, 3.5e-12}, logGrid(100, 2e7, points), noise, nil)
	return NewTraces(s.analysis.Result, nil)
}

// The curve of a circuit with a sharp resonance (Q of 66 000) reaches its peak
// between the points, and passes through the model at each point.
func TestTraces(t *testing.T) {
	tr := choke(t, 41, 0.001)
	if !slices.IsSorted(tr.CurveFreq) || tr.CurveFreq[0] != tr.Freq[0] || tr.CurveFreq[len(tr.CurveFreq)-1] != tr.Freq[len(tr.Freq)-1] {
		t.Error("the curve does not run from end to end")
	}
	for i, f := range tr.Freq {
		k, ok := slices.BinarySearch(tr.CurveFreq, f)
		if !ok || !(cmplx.Abs(tr.Curve[k]/tr.Model[i]-1) < 1e-12) {
			t.Errorf("at %v Hz the curve leaves the model", f)
		}
	}
	if len(tr.Resonances) != 1 {
		t.Fatalf("%d resonances", len(tr.Resonances))
	}
	// At the resonance f₀ = 1/(2π√(LC)) of a coil with series resistance R,
	// Z = L/(RC) (any textbook on circuits).
	peak := 0.0
	for _, z := range tr.Curve {
		peak = max(peak, cmplx.Abs(z))
	}
	if want := 220e-6 / (0.12 * 3.5e-12); !(math.Abs(peak/want-1) < 0.05) {
		t.Errorf("peak %v Ω, want %v", peak, want)
	}
	// The scatter is that of the noise that was put in.
	if !(math.Abs(tr.Scatter/0.001-1) < 0.2) {
		t.Errorf("scatter %v, want %v", tr.Scatter, 0.001)
	}
	one := choke(t, 41, 0)
	one.Freq = one.Freq[:1]
	if Thin(one, 4)[0] != 0 {
		t.Error("a sweep of one point cannot be drawn")
	}
}

func TestThin(t *testing.T) {
	tr := choke(t, 1601, 0.001)
	tr.Residual[777] = 0.5
	tr.Residual[778] = 0.5i
	pick := Thin(tr, 60)
	if len(pick) > 60 || len(pick) < 40 || !slices.IsSorted(pick) || len(slices.Compact(slices.Clone(pick))) != len(pick) {
		t.Errorf("%d points: %v", len(pick), pick)
	}
	for _, must := range []int{0, 1600, 777, 778} {
		if !slices.Contains(pick, must) {
			t.Errorf("point %d was left out", must)
		}
	}
	if got := Thin(tr, 1601); len(got) != 1601 {
		t.Errorf("%d of 1601 points though all may be drawn", len(got))
	}
}

// A sketch has the width asked for, marks what is off the line, and only that.
func TestSketch(t *testing.T) {
	write := func(tr *Traces, width int) string {
		var b bytes.Buffer
		if err := Sketch(&b, tr, width); err != nil {
			t.Fatal(err)
		}
		return b.String()
	}
	clean := choke(t, 101, 1e-4)
	golden(t, "sketch.txt", write(clean, 0))
	for _, width := range []int{50, 80, 120} {
		if w := textWidth(write(clean, width)); w > width || w < width-2 {
			t.Errorf("a sketch of %d columns is %d wide", width, w)
		}
	}
	marks := func(s string) int { return strings.Count(s, "+") - 1 } // less the one of the legend
	if n := marks(write(clean, 80)); n != 0 {
		t.Errorf("%d marks on a sweep without noise", n)
	}
	clean.Measured = slices.Clone(clean.Measured)
	clean.Measured[20] *= 1000 // of both plots only |Z| shows it, beyond the edge
	if n := marks(write(clean, 80)); n != 1 {
		t.Errorf("%d marks for one wild point, want 1", n)
	}
	// A flat resistor and a single point have a scale nevertheless.
	s := simulated(t, "res-ideal", []float64{100}, logGrid(100, 1e6, 31), 0, nil)
	flat := NewTraces(s.analysis.Result, nil)
	if text := write(flat, 80); strings.Contains(text, "NaN") || strings.Contains(text, "∞") {
		t.Error(text)
	}
}

// The table holds what the fit saw: with full precision, so that ρ can be
// computed from it again.
func TestResiduals(t *testing.T) {
	accuracy := func(f, z float64) (float64, float64, bool) { return 0.001, 0.002, f < 1e5 }
	s := simulated(t, "cap-esr", []float64{0.0213, 9.87e-6}, logGrid(100, 1e6, 21), 0.01, nil)
	r := s.analysis.Result
	var b bytes.Buffer
	if err := WriteResiduals(&b, []Points{{"@a.csv", "x", NewTraces(r, accuracy)}, {"b.csv", "=x", NewTraces(r, nil)}}); err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(&b).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	header := []string{"file", "part", "f (Hz)", "measured Z (Ω)", "measured phase (°)", "measured R (Ω)", "measured X (Ω)",
		"model Z (Ω)", "model phase (°)", "model R (Ω)", "model X (Ω)", "residual of ln Z (1)", "residual of phase (°)", "meter Z (1)", "meter phase (°)"}
	if diff := cmp.Diff(header, rows[0]); diff != "" {
		t.Error(diff)
	}
	if len(rows) != 43 {
		t.Fatalf("%d rows, want 43", len(rows))
	}
	number := func(s string) float64 {
		v, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	for i, row := range rows[1:22] {
		if row[0] != "'@a.csv" || number(row[2]) != r.Freq[i] || number(row[5]) != real(r.Measured[i]) || number(row[10]) != imag(r.Model[i]) {
			t.Errorf("row %d: %v", i, row)
		}
		rho := cmplx.Log(complex(number(row[9]), number(row[10])) / complex(number(row[5]), number(row[6])))
		if !(math.Abs(real(rho)-number(row[11])) < 1e-12) || !(math.Abs(imag(rho)*180/math.Pi-number(row[12])) < 1e-10) {
			t.Errorf("row %d: residual %s, %s, want %v", i, row[11], row[12], rho)
		}
		if stated := row[13] == "0.001" && row[14] != ""; stated != (r.Freq[i] < 1e5) {
			t.Errorf("row %d: accuracy %q, %q at %v Hz", i, row[13], row[14], r.Freq[i])
		}
	}
	if rows[22][1] != "'=x" || rows[22][13] != "" {
		t.Errorf("row %v", rows[22])
	}
}

func TestModelSweep(t *testing.T) {
	s := simulated(t, "cap-esr", []float64{0.0213, 9.87e-6}, logGrid(100, 1e6, 21), 0.01, nil)
	r := s.analysis.Result
	freq, z := ModelSweep(r)
	freq[0], z[0] = 0, 0
	if r.Freq[0] == 0 || r.Model[0] == 0 {
		t.Error("the fit can be changed through its model sweep")
	}
	if _, z := ModelSweep(r); !cmp.Equal(z, r.Model) {
		t.Error("the model sweep is not the model")
	}
}

func BenchmarkNewTraces(b *testing.B) {
	s := simulated(b, "ind-cp", []float64{0.12, 220e-6, 3.5e-12}, logGrid(100, 2e7, 201), 0.001, nil)
	b.ReportAllocs()
	for b.Loop() {
		NewTraces(s.analysis.Result, nil)
	}
}

func BenchmarkWriteText(b *testing.B) {
	f := heron()
	b.ReportAllocs()
	for b.Loop() {
		var out bytes.Buffer
		if err := WriteText(&out, f, TextOptions{}); err != nil {
			b.Fatal(err)
		}
	}
}
