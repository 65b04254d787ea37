package main

import (
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"realpart/ingest"
	"realpart/models"
)

// makeLot writes sweeps of invented parts with a spread of 3 % and 0.2 % of
// noise.
func makeLot(t testing.TB, dir, circuit string, values []float64, parts, points int) {
	t.Helper()
	m, ok := models.Lookup(circuit)
	if !ok {
		t.Fatalf("no circuit %s", circuit)
	}
	freq, err := grid(100, 10e6, points, "log")
	if err != nil {
		t.Fatal(err)
	}
	evaluator, z, own := m.Circuit.NewEvaluator(freq), make([]complex128, points), make([]float64, len(values))
	for i := range parts {
		r := rand.New(rand.NewPCG(uint64(i), 1))
		for k, v := range values {
			own[k] = v * (1 + 0.03*r.NormFloat64())
		}
		evaluator.Impedance(z, own)
		addNoise(z, 0.002, uint64(i))
		file, err := os.Create(filepath.Join(dir, fmt.Sprintf("p%05d.csv", i)))
		if err != nil {
			t.Fatal(err)
		}
		if err := writeSweep(file, freq, z, nil); err != nil {
			t.Fatal(err)
		}
		if err := file.Close(); err != nil {
			t.Fatal(err)
		}
	}
}

// BenchmarkBatch fits lots of electrolytics of 201 points with automatic choice
// of the circuit, as `fit --json` does, and gives the rate and the peak of the
// memory that the program holds.
//
//	go test ./cmd/realpart -run xxx -bench Batch -benchtime 1x -timeout 30m
func BenchmarkBatch(b *testing.B) {
	for _, parts := range []int{100, 1000, 10000} {
		b.Run(fmt.Sprintf("sweeps=%d", parts), func(b *testing.B) {
			dir := b.TempDir()
			makeLot(b, dir, "cap-two-branch", []float64{0.031, 14e-9, 452e-6, 0.058, 240e-6}, parts, 201)
			var peak atomic.Uint64
			done := make(chan struct{})
			go func() {
				var m runtime.MemStats
				for {
					select {
					case <-done:
						return
					case <-time.After(50 * time.Millisecond):
						runtime.ReadMemStats(&m)
						peak.Store(max(peak.Load(), m.Sys-m.HeapReleased))
					}
				}
			}()
			b.ReportAllocs()
			start := time.Now()
			for b.Loop() {
				if code := run([]string{"fit", "--json", dir}, streams{in: strings.NewReader(""), out: io.Discard, err: io.Discard}); code != 0 {
					b.Fatalf("exit code %d", code)
				}
			}
			close(done)
			b.ReportMetric(float64(parts*b.N)/time.Since(start).Seconds(), "sweeps/s")
			b.ReportMetric(float64(peak.Load())/1e6, "MB-peak")
		})
	}
}

// What is in memory does not grow with the number of sweeps: after a collection
// there is as much after 220 as after 40. (The record of a sweep takes some
// 10 kB, so that keeping them would add 2 MB.)
func TestMemoryIsFlat(t *testing.T) {
	dir := t.TempDir()
	makeLot(t, dir, "cap-esr-esl", []float64{0.02, 5e-9, 10e-6}, 240, 31)
	inputs, err := ingest.Find([]string{dir})
	if err != nil {
		t.Fatal(err)
	}
	alive := func() float64 {
		runtime.GC()
		var m runtime.MemStats
		runtime.ReadMemStats(&m)
		return float64(m.HeapAlloc)
	}
	// Results that wait for their turn come and go: the means of ten.
	var early, late float64
	n := 0
	quiet := streams{in: strings.NewReader(""), out: io.Discard, err: io.Discard}
	if err := batchFlagsOf(t, "--jobs", "1").batch(inputs, quiet, func(fitted) error {
		switch n++; {
		case n > 30 && n <= 40:
			early += alive() / 10
		case n > 210 && n <= 220:
			late += alive() / 10
		}
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	grown := late - early
	t.Logf("memory grew by %.2f MB", grown/1e6)
	if !(grown < 1e6) {
		t.Errorf("memory grew by %.2f MB over 180 sweeps", grown/1e6)
	}
}
