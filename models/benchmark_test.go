package models

import (
	"math"
	"strings"
	"testing"
)

// benchmarked lists the circuits that are timed: three of plain elements, for
// which fused kernels in C served as the measure, and the library.
func benchmarked() []Model {
	var all []Model
	for _, expression := range []string{
		"ESR + ESL + C", "ESL + ESR + C + (R1 || C1)", "(R + L) || Cp || Rp",
	} {
		all = append(all, Model{Name: strings.ReplaceAll(expression, " ", ""), Circuit: mustParse(expression)})
	}
	return append(all, Library()...)
}

// benchmarkBlock times the evaluation of 201 frequencies by blocks, as a fit
// does it.
func benchmarkBlock(b *testing.B, wantDerivatives bool) {
	grid := NewGrid(logFrequencies(100, 100e6, 201))
	n := len(grid.Frequencies())
	for _, m := range benchmarked() {
		b.Run(m.Name, func(b *testing.B) {
			values := make([]float64, len(m.Circuit.Parameters()))
			for i, p := range m.Circuit.Parameters() {
				values[i] = typical(p)
			}
			var e Evaluator
			e.Use(m.Circuit, grid)
			z := make([]complex128, BlockSize)
			var derivatives [][]complex128
			if wantDerivatives {
				derivatives = columns(len(values), BlockSize)
			}
			b.ReportAllocs()
			for b.Loop() {
				for from := 0; from < n; from += BlockSize {
					e.Block(from, min(from+BlockSize, n), values, z, derivatives)
				}
			}
			reportPerPoint(b, n)
		})
	}
}

func BenchmarkImpedance(b *testing.B) { benchmarkBlock(b, false) }
func BenchmarkJacobian(b *testing.B)  { benchmarkBlock(b, true) }

// BenchmarkUse is the change to another circuit and grid.
func BenchmarkUse(b *testing.B) {
	grids := []*Grid{NewGrid(logFrequencies(100, 100e6, 201)), NewGrid(logFrequencies(1, 1e6, 11))}
	circuits := Library()
	var e Evaluator
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		e.Use(circuits[i%len(circuits)].Circuit, grids[i%2])
	}
}

// BenchmarkGrid is the change of the frequencies of a sweep.
func BenchmarkGrid(b *testing.B) {
	freq := logFrequencies(100, 100e6, 201)
	var g Grid
	b.ReportAllocs()
	for b.Loop() {
		g.Set(freq)
	}
	reportPerPoint(b, len(freq))
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
