package figure

import (
	"bytes"
	"encoding/xml"
	"errors"
	"fmt"
	"image/png"
	"io"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"

	"realpart/fit"
	"realpart/models"
	"realpart/report"
)

func traces(t testing.TB, name string, values []float64, from, to float64, points int, noise float64, accuracy fit.MeterAccuracy) *report.Traces {
	t.Helper()
	m, _ := models.Lookup(name)
	freq := make([]float64, points)
	for i := range freq {
		freq[i] = from * math.Pow(to/from, float64(i)/float64(max(1, points-1)))
	}
	z := make([]complex128, points)
	m.Circuit.NewEvaluator(freq).Impedance(z, values)
	random := rand.New(rand.NewPCG(1, 2))
	for i := range z {
		z[i] *= complex(1+noise*random.NormFloat64(), noise*random.NormFloat64())
	}
	r, err := fit.Fit(freq, z, m.Circuit, nil)
	if err != nil {
		t.Fatal(err)
	}
	return report.NewTraces(r, accuracy)
}

func meter(f, z float64) (float64, float64, bool) { return 0.001, 0.001, f < 1e6 }

func ceramic(t testing.TB) *report.Traces {
	return traces(t, "cap-esr-esl", []float64{0.0213, 4.1e-9, 9.87e-6}, 100, 1e7, 101, 0.002, meter)
}

// A curve below the axis is not drawn along it.
func TestPiecesAbove(t *testing.T) {
	curve := plotter.XYs{{X: 1, Y: 100}, {X: 10, Y: 1}, {X: 20, Y: 0}, {X: 100, Y: 1}, {X: 1000, Y: 100}, {X: 2000, Y: -3}, {X: 3000, Y: 2}}
	want := []plotter.XYs{
		{{X: 1, Y: 100}, {X: math.Sqrt(10), Y: 10}},
		{{X: 100 * math.Sqrt(10), Y: 10}, {X: 1000, Y: 100}, {X: 1000 * math.Pow(2, 0.25), Y: 10}},
	}
	near := cmp.Comparer(func(a, b float64) bool { return math.Abs(a/b-1) < 1e-12 })
	if diff := cmp.Diff(want, piecesAbove(curve, 10), near); diff != "" {
		t.Errorf("-want +got:\n%s", diff)
	}
	if got := piecesAbove(curve[5:6], 10); len(got) != 0 {
		t.Errorf("%v of a curve below the axis", got)
	}
}

// The lowest label of a vertical axis is clear of the corner, where the first
// label of the horizontal axis stands, wherever the values end.
func TestCorner(t *testing.T) {
	for _, esr := range []float64{0.008, 0.0095, 0.0105, 0.02, 0.05} {
		for _, panel := range Panels(traces(t, "cap-esr-esl", []float64{esr, 4.1e-9, 9.87e-6}, 100, 1e7, 51, 0.002, meter), Page, nil) {
			y := panel.plot.Y
			for _, tick := range y.Tick.Marker.Ticks(y.Min, y.Max) {
				if tick.Label == "" || tick.Value < y.Min {
					continue
				}
				if share := y.Norm(tick.Value); !(share > 0.999*cornerShare) {
					t.Errorf("ESR %v, %s: the label %q is at %.3f of the axis, want %v at least", esr, panel.Name, tick.Label, share, cornerShare)
				}
			}
		}
	}
}

// Ticks lie at round values, are labelled with prefix and unit, and there are
// some on any axis.
func TestTicks(t *testing.T) {
	labels := func(ticker plot.Ticker, low, high float64) []string {
		var out []string
		for _, tick := range ticker.Ticks(low, high) {
			if tick.Label != "" {
				out = append(out, tick.Label)
			}
		}
		return out
	}
	check := func(ticker plot.Ticker, low, high float64, want ...string) {
		t.Helper()
		if diff := cmp.Diff(want, labels(ticker, low, high)); diff != "" {
			t.Errorf("%v to %v (-want +got):\n%s", low, high, diff)
		}
	}
	hertz, ohm := logTicks{"Hz", 6}, logTicks{"Ω", 5}
	check(hertz, 100, 1e7, "100 Hz", "1 kHz", "10 kHz", "100 kHz", "1 MHz", "10 MHz")
	check(hertz, 20, 2e6, "100 Hz", "1 kHz", "10 kHz", "100 kHz", "1 MHz")
	check(ohm, 0.03, 20, "100 mΩ", "1 Ω", "10 Ω")
	check(ohm, 0.3, 9, "500 mΩ", "1 Ω", "2 Ω", "5 Ω")
	check(ohm, 1e-3, 1e6, "10 mΩ", "1 Ω", "100 Ω", "10 kΩ", "1 MΩ")
	check(hertz, 9.5e6, 10.5e6, "9.6 MHz", "9.8 MHz", "10 MHz", "10.2 MHz", "10.4 MHz")
	check(ohm, 22, 49, "30 Ω", "40 Ω")
	check(ohm, 83, 120, "90 Ω", "100 Ω", "110 Ω", "120 Ω")
	check(linearTicks{"%", 5}, -0.45, 0.45, "-0.4 %", "-0.2 %", "0", "0.2 %", "0.4 %")
	check(linearTicks{"°", 5}, -1e-9, 1e-9, "-0.000000001°", "-0.0000000005°", "0", "0.0000000005°", "0.000000001°")
	check(angleTicks{}, -92, 92, "-90°", "-45°", "0", "45°", "90°")
	check(angleTicks{}, -91, -40, "-90°", "-75°", "-60°", "-45°")
	check(angleTicks{}, -90.1, -89.2, "-90°", "-89.8°", "-89.6°", "-89.4°", "-89.2°")
	random := rand.New(rand.NewPCG(3, 3))
	for range 2000 {
		low := math.Pow(10, -15+25*random.Float64())
		high := low * math.Pow(10, 0.1+9*random.Float64()*random.Float64())
		got := labels(ohm, low, high)
		if len(got) < 1 || len(got) > 9 {
			t.Errorf("%v to %v Ω: labels %q", low, high, got)
		}
		for _, tick := range ohm.Ticks(low, high) {
			if tick.Value < low*(1-1e-9) || tick.Value > high*(1+1e-9) {
				t.Errorf("%v to %v Ω: a tick at %v", low, high, tick.Value)
			}
		}
	}
}

// The figure shows the numbers: each point of the path, carried back through
// the axes, is a measured value.
func TestPanelShowsTheNumbers(t *testing.T) {
	tr := ceramic(t)
	const width, height = 340, 200
	for i, p := range Panels(tr, Page, nil)[:2] {
		svg, area := p.SVG(width, height)
		d := regexp.MustCompile(`d="([^"]*)" style="fill:var\(--measured\)"`).FindStringSubmatch(svg)
		if d == nil {
			t.Fatal("no points")
		}
		var of func(z complex128) float64
		inverse := func(y float64) float64 { return y }
		if of = report.Phase; i == 0 {
			of, inverse = cmplx.Abs, math.Exp
		}
		points := diamonds(t, d[1])
		if len(points) != len(tr.Freq) {
			t.Fatalf("%d points, want %d", len(points), len(tr.Freq))
		}
		low, high := p.plot.Y.Min, p.plot.Y.Max
		if i == 0 {
			low, high = math.Log(low), math.Log(high)
		}
		for k, q := range points {
			u := (q[0]/width - area.Left) / (area.Right - area.Left)
			if f := tr.Freq[0] * math.Pow(tr.Freq[len(tr.Freq)-1]/tr.Freq[0], u); !(math.Abs(math.Log(f/tr.Freq[k])) < 0.006) {
				t.Errorf("%s: point %d lies at %v Hz, want %v", p.Name, k, f, tr.Freq[k])
			}
			v := (q[1]/height - (1 - area.Bottom)) / (area.Bottom - area.Top)
			got, want := inverse(low+v*(high-low)), of(tr.Measured[k])
			tolerance := 0.08 // degrees: a twentieth of a unit of the drawing
			if i == 0 {
				tolerance = 0.004 * want
			}
			if !(math.Abs(got-want) <= tolerance) {
				t.Errorf("%s: point %d lies at %v, want %v", p.Name, k, got, want)
			}
		}
	}
}

// diamonds returns the middles of the diamonds in a path as compact writes it.
func diamonds(t *testing.T, d string) [][2]float64 {
	t.Helper()
	var out [][2]float64
	x, y := 0.0, 0.0
	number := regexp.MustCompile(`-?(\d+\.\d|\d+|\.\d)`)
	for _, part := range strings.Split(strings.TrimSuffix(d, "z"), "z") {
		n := number.FindAllString(part, -1)
		if len(n) != 8 {
			t.Fatalf("a diamond of %d numbers: %q", len(n), part)
		}
		step := func(i int) float64 {
			v, err := strconv.ParseFloat(n[i], 64)
			if err != nil {
				t.Fatal(err)
			}
			return v
		}
		x, y = x+step(0), y+step(1) // the left corner, to which z leads back
		out = append(out, [2]float64{x + (step(2)+step(4))/2, y})
	}
	return out
}

// compact keeps every corner of a path to a twentieth of a unit (and the rounding
// of the input to five digits), however long it is.
func TestCompact(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 1))
	var long strings.Builder
	var want [][2]float64
	for i := range 3000 {
		x, y := 1000*random.Float64()-500, random.Float64()-0.5
		command := "L"
		if i%7 == 0 {
			command = "M"
		}
		fmt.Fprintf(&long, "%s%.5g,%.5g", command, x, y)
		want = append(want, [2]float64{x, y})
		if i%7 == 6 {
			long.WriteByte('Z')
		}
	}
	x, y, startX, startY, i := 0.0, 0.0, 0.0, 0.0, 0
	token := regexp.MustCompile(`[mz]|-?(?:\d*\.\d|\d+)`)
	numbers := token.FindAllString(compact(long.String()), -1)
	first := false
	for k := 0; k < len(numbers); k++ {
		switch numbers[k] {
		case "m":
			first = true
			continue
		case "z":
			x, y = startX, startY
			continue
		}
		dx, _ := strconv.ParseFloat(numbers[k], 64)
		dy, _ := strconv.ParseFloat(numbers[k+1], 64)
		k++
		x, y = x+dx, y+dy
		if first {
			startX, startY, first = x, y, false
		}
		if math.Abs(x-want[i][0]) > 0.0551 || math.Abs(y-want[i][1]) > 0.0551 {
			t.Fatalf("corner %d is at %v, %v, want %v", i, x, y, want[i])
		}
		i++
	}
	if i != len(want) {
		t.Errorf("%d corners, want %d", i, len(want))
	}
	if d := "M1,2C3,4 5,6 7,8"; compact(d) != d {
		t.Error("a curve was changed")
	}
	if got := compact("M0.5,-0.04L0.5,1L-0.5,1Z"); got != "m.5 0 0 1-1 0z" {
		t.Errorf("got %q", got)
	}
}

// What cannot be drawn on a logarithmic axis is counted, and odd sweeps are
// drawn without a panic.
func TestPanels(t *testing.T) {
	tr := ceramic(t)
	tr.Measured[3] = complex(-1, imag(tr.Measured[3]))
	tr.Measured[4] = complex(0, imag(tr.Measured[4]))
	lost := 0
	for _, z := range tr.Measured {
		if !(real(z) > 0) {
			lost++
		}
	}
	found := false
	for _, p := range Panels(tr, Page, nil) {
		if p.Alt == "" || p.Title == "" || len(p.Legend) == 0 {
			t.Errorf("%s: nothing to read", p.Name)
		}
		for _, n := range p.Notes {
			found = found || strings.Contains(n, fmt.Sprintf("%d of 101 points without a positive resistance", lost))
		}
	}
	if !found {
		t.Errorf("%d points are lost without a word", lost)
	}
	for name, odd := range map[string]*report.Traces{
		"one point":          traces(t, "res-ideal", []float64{50}, 1e3, 1e3, 1, 0, nil),
		"flat":               traces(t, "res-ideal", []float64{50}, 20, 1e6, 31, 0, nil),
		"no R":               traces(t, "cap-ideal", []float64{1e-9}, 20, 1e6, 31, 0, meter),
		"no meter":           traces(t, "bead", []float64{0.2, 1.2e-6, 600, 0.6e-12}, 1e6, 1e9, 51, 0.01, nil),
		"crystal":            traces(t, "res-bvd", []float64{5e-12, 20, 12.7e-3, 20e-15}, 9.5e6, 10.5e6, 401, 0.001, nil),
		"meter says nothing": traces(t, "cap-esr", []float64{1, 1e-6}, 2e6, 1e7, 31, 0.001, meter),
	} {
		for _, p := range Panels(odd, Page, nil) {
			svg, area := p.SVG(340, 200)
			if strings.Contains(svg, "NaN") || strings.Contains(svg, "Inf") || !(area.Left < area.Right && area.Top < area.Bottom) {
				t.Errorf("%s, %s: area %v, svg %.300s", name, p.Name, area, svg)
			}
		}
	}
}

// Documents are whole, and the same input gives the same bytes.
func TestWrite(t *testing.T) {
	parts := []Part{{"c017 <&>", "ESR + ESL + C, 9.87 µF, 21 mΩ", ceramic(t)}}
	write := func(format string, n int) []byte {
		var b bytes.Buffer
		var all []Part
		for range n {
			all = append(all, parts...)
		}
		if err := Write(&b, all, format); err != nil {
			t.Fatal(err)
		}
		return b.Bytes()
	}
	svg := write("svg", 1)
	decoder := xml.NewDecoder(bytes.NewReader(svg))
	for {
		if _, err := decoder.Token(); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatalf("svg: %v", err)
		}
	}
	for _, want := range []string{"c017 &lt;&amp;&gt;", "9.87 µF", "Resistance (ESR) and reactance |X|", "10 MHz"} {
		if !bytes.Contains(svg, []byte(want)) {
			t.Errorf("svg has no %q", want)
		}
	}
	img, err := png.Decode(bytes.NewReader(write("png", 1)))
	if err != nil {
		t.Fatal(err)
	}
	if b := img.Bounds(); b.Dx() != 1750 { // 420 points at 300 dots an inch
		t.Errorf("png is %d wide, want 1750", b.Dx())
	}
	pdf := write("pdf", 3)
	if n := len(regexp.MustCompile(`/Type /Page\b[^s]`).FindAll(pdf, -1)); n != 3 {
		t.Errorf("pdf has %d pages, want 3", n)
	}
	if !bytes.HasPrefix(pdf, []byte("%PDF-")) || !bytes.Equal(pdf, write("pdf", 3)) || !bytes.Equal(svg, write("svg", 1)) {
		t.Error("a document differs from one time to the next")
	}
	var b bytes.Buffer
	for _, bad := range []struct {
		format string
		parts  []Part
		want   string
	}{
		{"gif", parts, "gif"}, {"svg", append(parts, parts...), "pdf"}, {"pdf", nil, "none"},
	} {
		if err := Write(&b, bad.parts, bad.format); err == nil || !strings.Contains(err.Error(), bad.want) {
			t.Errorf("%s: error %v, want one with %q", bad.format, err, bad.want)
		}
	}
	if b.Len() > 0 {
		t.Error("an error left output behind")
	}
}

func BenchmarkPanels(b *testing.B) {
	tr := ceramic(b)
	b.ReportAllocs()
	for b.Loop() {
		for _, p := range Panels(tr, Page, nil) {
			p.SVG(340, 200)
		}
	}
}
