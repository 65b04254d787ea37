package fit

import (
	"math/rand/v2"
	"testing"
)

// A fit of 201 points: with starting values three times off, without any, and
// with the choice of the circuit.
func BenchmarkFit(b *testing.B) {
	for _, p := range []part{
		exact(b, "series-rlc", map[string]float64{"R": 20e-3, "L": 5e-9, "C": 10e-6}, 100, 1e7, 201),
		exact(b, "cap-two-branch", map[string]float64{"ESR": 30e-3, "ESL": 15e-9, "C": 100e-6, "R1": 200e-3, "C1": 20e-6}, 100, 1e7, 201),
		exact(b, "ind-core", map[string]float64{"DCR": 0.1, "L": 100e-6, "Rp": 50e3, "Cp": 10e-12}, 100, 1e7, 201),
	} {
		z := p.noisy(rand.New(rand.NewPCG(1, 10)), 0.001)
		start := map[string]float64{}
		for i, q := range p.circuit.Parameters() {
			start[q.Name] = p.values[i] * []float64{3, 1. / 3}[i%2]
		}
		b.Run(p.name+"/from-start", func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				if _, err := Fit(p.freq, z, p.circuit, &Settings{Start: start}); err != nil {
					b.Fatal(err)
				}
			}
		})
		b.Run(p.name+"/no-start", func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				if _, err := Fit(p.freq, z, p.circuit, nil); err != nil {
					b.Fatal(err)
				}
			}
		})
		b.Run(p.name+"/choice", func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				if _, err := Analyse(p.freq, z, Request{}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
