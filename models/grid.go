package models

import (
	"fmt"
	"math"
	"slices"
	"sync"
)

// BlockSize is the largest number of frequencies evaluated together. A series
// or parallel group of a circuit needs two complex numbers a frequency, and
// each derivative one: all of three groups and five parameters takes 22 KB and
// fits the first-level cache of any current processor. Half as many frequencies
// cost 5 to 15 % more time a point.
const BlockSize = 128

// Grid holds the frequencies of a sweep and what the laws of the elements need
// of them. Made once a sweep, it is shared by any number of evaluators, also
// concurrently as long as nobody calls [Grid.Set]. The zero Grid is without
// frequencies.
type Grid struct {
	freq    []float64 // Hz
	omega   []float64 // ω = 2πf
	inverse []float64 // 1/ω
	log     []float64 // ln ω, see logs
	once    sync.Once // for log
	buffer  []float64 // that the first three are cut from
}

// NewGrid returns a grid of frequencies in Hz. It panics unless each is
// positive and finite.
func NewGrid(freq []float64) *Grid {
	g := new(Grid)
	g.Set(freq)
	return g
}

// Frequencies returns the frequencies in Hz. The caller must not change them.
func (g *Grid) Frequencies() []float64 { return g.freq }

// Set changes the frequencies, in Hz. It panics, without a change, unless each
// is positive and finite. It allocates only if there are more than ever
// before.
func (g *Grid) Set(freq []float64) {
	for _, f := range freq {
		if !(f > 0) || math.IsInf(f, 1) {
			panic(fmt.Sprintf("models: frequency %v Hz is not positive and finite", f))
		}
	}
	n := len(freq)
	if cap(g.buffer) < 3*n {
		g.buffer = make([]float64, 3*n)
	}
	cut := func(i int) []float64 { return g.buffer[i*n : (i+1)*n : (i+1)*n] }
	g.buffer = g.buffer[:cap(g.buffer)]
	g.freq = cut(0)
	copy(g.freq, freq) // first: it may overlap with what is replaced
	g.omega, g.inverse = cut(1), cut(2)
	g.once = sync.Once{}
	for i, f := range g.freq {
		omega := 2 * math.Pi * f
		g.omega[i] = omega
		g.inverse[i] = 1 / omega
	}
}

// logs returns ln ω, which few elements need.
func (g *Grid) logs() []float64 {
	g.once.Do(func() {
		g.log = slices.Grow(g.log[:0], len(g.omega))
		for _, omega := range g.omega {
			g.log = append(g.log, math.Log(omega))
		}
	})
	return g.log
}
