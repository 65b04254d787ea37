package models

import (
	"math"
	"testing"
)

// Circuits that span the kinds of work: plain elements, two levels of
// grouping, and the elements that need a power or a hyperbolic function.
var benchmarked = []string{"cap-esr-esl", "cap-two-branch", "ind-core", "cap-loss", "cap-line"}

func benchmarkCircuit(b *testing.B, name string) (*Evaluator, []float64) {
	b.Helper()
	m, ok := Lookup(name)
	if !ok {
		b.Fatalf("no circuit %s", name)
	}
	values := make([]float64, len(m.Circuit.Parameters()))
	for i, p := range m.Circuit.Parameters() {
		values[i] = typical(p)
	}
	return m.Circuit.NewEvaluator(logFrequencies(100, 100e6, 201)), values
}

func BenchmarkImpedance(b *testing.B) {
	for _, name := range benchmarked {
		b.Run(name, func(b *testing.B) {
			e, values := benchmarkCircuit(b, name)
			dst := make([]complex128, len(e.Frequencies()))
			b.ReportAllocs()
			for b.Loop() {
				e.Impedance(dst, values)
			}
			reportPerPoint(b, len(dst))
		})
	}
}

func BenchmarkJacobian(b *testing.B) {
	for _, name := range benchmarked {
		b.Run(name, func(b *testing.B) {
			e, values := benchmarkCircuit(b, name)
			dst := make([]complex128, len(e.Frequencies()))
			derivatives := columns(len(values), len(dst))
			b.ReportAllocs()
			for b.Loop() {
				e.Jacobian(dst, derivatives, values)
			}
			reportPerPoint(b, len(dst))
		})
	}
}

func BenchmarkResonances(b *testing.B) {
	c := mustParse("C0 || (R1 + L1 + C1)")
	values := []float64{5e-12, 30, 0.01, 20e-15}
	b.ReportAllocs()
	for b.Loop() {
		if got := c.Resonances(values, 1e5, 1e9); len(got) != 2 {
			b.Fatalf("%d resonances, want 2", len(got))
		}
	}
}

func reportPerPoint(b *testing.B, points int) {
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(points), "ns/point")
}

// typical returns a value of ordinary size for a parameter.
func typical(p Parameter) float64 {
	switch {
	case p.Scale == LogitScale:
		return 0.8
	case p.Unit == "Ω":
		return 0.5
	case p.Unit == "H":
		return 10e-9
	case p.Unit == "1":
		return 0.01
	case p.Unit == "Ω·s^½":
		return 1e-4
	}
	return 1e-6
}

func logFrequencies(from, to float64, n int) []float64 {
	f := make([]float64, n)
	for i := range f {
		f[i] = from * math.Pow(to/from, float64(i)/float64(max(1, n-1)))
	}
	return f
}

// columns returns k columns of n values that are NaN, so that a value that is
// never set shows.
func columns(k, n int) [][]complex128 {
	d := make([][]complex128, k)
	for i := range d {
		d[i] = poisoned(n)
	}
	return d
}

func poisoned(n int) []complex128 {
	dst := make([]complex128, n)
	for i := range dst {
		dst[i] = complex(math.NaN(), math.NaN())
	}
	return dst
}

func mustParse(expression string) *Circuit {
	c, err := Parse(expression)
	if err != nil {
		panic(err)
	}
	return c
}
