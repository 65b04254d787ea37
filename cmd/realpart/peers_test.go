package main

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"testing"
	"time"

	"realpart/fit"
	"realpart/ingest"
	"realpart/models"
)

// BenchmarkPeers gives realpart's own figures for testdata/peers/run.sh, which
// measures others on the same sweeps in the same run. It prints lines of JSON,
// medians over the sweeps of the folder that REALPART_PEERS names.
func BenchmarkPeers(b *testing.B) {
	dir := os.Getenv("REALPART_PEERS")
	if dir == "" {
		b.Skip("REALPART_PEERS is not set: see testdata/peers/run.sh")
	}
	say := func(b *testing.B, line any) {
		text, err := json.Marshal(line)
		if err != nil {
			b.Fatal(err)
		}
		fmt.Printf("\n%s\n", text)
	}
	type figures map[string]any
	circuits := peerCircuits(b)
	b.Run("fit", func(b *testing.B) {
		for b.Loop() {
			for _, c := range circuits {
				sweeps := peerSweeps(b, filepath.Join(dir, c.name))
				for engine, work := range map[string]func(s *ingest.Sweep) error{
					"realpart from-start": func(s *ingest.Sweep) error {
						_, err := fit.Fit(s.Freq, s.Z, c.circuit, &fit.Settings{Start: c.start})
						return err
					},
					"realpart no-start": func(s *ingest.Sweep) error {
						_, err := fit.Fit(s.Freq, s.Z, c.circuit, nil)
						return err
					},
					"realpart choice": func(s *ingest.Sweep) error {
						_, err := fit.Analyse(s.Freq, s.Z, fit.Request{})
						return err
					},
				} {
					took := medianTime(b, 5, len(sweeps), func(i int) error { return work(sweeps[i]) })
					say(b, figures{"engine": engine, "circuit": c.name, "fit_us": took.Seconds() * 1e6})
				}
			}
		}
	})
	b.Run("evaluate", func(b *testing.B) {
		for b.Loop() {
			for _, c := range circuits {
				freq := peerSweeps(b, filepath.Join(dir, c.name))[0].Freq
				e, n := c.circuit.NewEvaluator(freq), len(c.values)
				z, dz := make([]complex128, len(freq)), make([][]complex128, n)
				for k := range dz {
					dz[k] = make([]complex128, len(freq))
				}
				const repeats = 2000
				took := medianTime(b, 0, 9, func(int) error {
					for range repeats {
						e.Jacobian(z, dz, c.values)
					}
					return nil
				})
				say(b, figures{"micro": "realpart", "circuit": c.name, "fj_ns": took.Seconds() * 1e9 / repeats / float64(len(freq))})
			}
		}
	})
	b.Run("read", func(b *testing.B) {
		for b.Loop() {
			small, err := os.ReadFile(filepath.Join(dir, "A", "000.csv"))
			if err != nil {
				b.Fatal(err)
			}
			big, err := os.ReadFile(filepath.Join(dir, "big.csv"))
			if err != nil {
				b.Fatal(err)
			}
			for _, file := range []struct {
				suffix  string
				data    []byte
				repeats int
			}{{"", big, 1}, {", 201 points", small, 500}} {
				for name, read := range map[string]func([]byte) error{
					"realpart": func(data []byte) error {
						_, err := ingest.Read("sweep.csv", bytes.NewReader(data), nil)
						return err
					},
					"encoding/csv + ParseFloat": readWithCSV,
				} {
					took := medianTime(b, 1, 5, func(int) error {
						for range file.repeats {
							if err := read(file.data); err != nil {
								return err
							}
						}
						return nil
					})
					say(b, figures{"parse": name + file.suffix, "mbs": float64(len(file.data)*file.repeats) / took.Seconds() / 1e6})
				}
			}
		}
	})
}

// medianTime runs work(0) … work(n−1) after some passes that don't count.
func medianTime(b *testing.B, passes, n int, work func(i int) error) time.Duration {
	b.Helper()
	took := make([]time.Duration, n)
	for range passes + 1 {
		for i := range took {
			start := time.Now()
			if err := work(i); err != nil {
				b.Fatal(err)
			}
			took[i] = time.Since(start)
		}
	}
	slices.Sort(took)
	return took[n/2]
}

type peerCircuit struct {
	name    string
	circuit *models.Circuit
	values  []float64
	start   map[string]float64
}

// peerCircuits returns the three circuits of the peers, with nominal values and
// starts three times off, in the order of the peers' parameters.
func peerCircuits(b *testing.B) []peerCircuit {
	var all []peerCircuit
	for _, c := range []struct {
		name, expression string
		names            []string
		values           []float64
	}{
		{"A", "R + L + C", []string{"R", "L", "C"}, []float64{20e-3, 5e-9, 10e-6}},
		{"B", "L + R + C + (R1 || C1)", []string{"L", "R", "C", "R1", "C1"}, []float64{15e-9, 30e-3, 100e-6, 200e-3, 20e-6}},
		{"C", "(R + L) || Cp || Rp", []string{"R", "L", "Cp", "Rp"}, []float64{0.1, 100e-6, 10e-12, 50e3}},
	} {
		circuit, err := models.Parse(c.expression)
		if err != nil {
			b.Fatal(err)
		}
		p := peerCircuit{name: c.name, circuit: circuit, values: make([]float64, len(c.values)), start: map[string]float64{}}
		for i, name := range c.names {
			k, ok := circuit.Index(name)
			if !ok {
				b.Fatalf("no %s in %s", name, circuit)
			}
			p.values[k] = c.values[i]
			p.start[name] = c.values[i] * []float64{3, 1. / 3}[i%2]
		}
		all = append(all, p)
	}
	return all
}

func peerSweeps(b *testing.B, dir string) []*ingest.Sweep {
	b.Helper()
	files, err := filepath.Glob(filepath.Join(dir, "[0-9]*.csv"))
	if err != nil || len(files) == 0 {
		b.Fatalf("no sweeps in %s: %v", dir, err)
	}
	var all []*ingest.Sweep
	for _, file := range files {
		data, err := os.ReadFile(file)
		if err != nil {
			b.Fatal(err)
		}
		sweeps, err := ingest.Read(file, bytes.NewReader(data), nil)
		if err != nil {
			b.Fatal(err)
		}
		all = append(all, sweeps...)
	}
	return all
}

// readWithCSV is the least that a reader of a sweep must do, with the standard
// library.
func readWithCSV(data []byte) error {
	r := csv.NewReader(bytes.NewReader(data))
	r.ReuseRecord = true
	var columns [3][]float64
	for n := 0; ; n++ {
		record, err := r.Read()
		switch {
		case errors.Is(err, io.EOF):
			return nil
		case err != nil:
			return err
		case n == 0:
			continue
		}
		for i := range columns {
			v, err := strconv.ParseFloat(record[i], 64)
			if err != nil {
				return err
			}
			columns[i] = append(columns[i], v)
		}
	}
}

// BenchmarkCost shows how the time of a fit grows with the points, from a start
// three times off, and with the unknowns: the slopes of a log-log table.
//
//	go test ./cmd/realpart -run xxx -bench Cost
func BenchmarkCost(b *testing.B) {
	electrolytic := peerCircuits(b)[1]
	for _, points := range []int{51, 201, 1001, 10001, 100000} {
		b.Run(fmt.Sprintf("points=%d", points), func(b *testing.B) {
			benchmarkFit(b, electrolytic.circuit, electrolytic.values, points)
		})
	}
	// A ladder of relaxations a decade apart: two unknowns a section.
	expression := "R0 + C0"
	values := []float64{0.1, 1 / (2 * math.Pi * 30)}
	for unknowns := 2; unknowns <= 12; unknowns += 2 {
		circuit, err := models.Parse(expression)
		if err != nil {
			b.Fatal(err)
		}
		b.Run(fmt.Sprintf("unknowns=%d", unknowns), func(b *testing.B) {
			benchmarkFit(b, circuit, values, 201)
		})
		k := unknowns / 2
		expression += fmt.Sprintf(" + (R%d || C%d)", k, k)
		values = append(values, 1, 1/(2*math.Pi*30*math.Pow(10, float64(k))))
	}
}

func benchmarkFit(b *testing.B, c *models.Circuit, values []float64, points int) {
	freq, err := grid(100, 10e6, points, "log")
	if err != nil {
		b.Fatal(err)
	}
	z := make([]complex128, points)
	c.NewEvaluator(freq).Impedance(z, values)
	addNoise(z, 0.001, 1)
	start := map[string]float64{}
	for i, p := range c.Parameters() {
		start[p.Name] = values[i] * []float64{3, 1. / 3}[i%2]
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := fit.Fit(freq, z, c, &fit.Settings{Start: start}); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(points), "ns/point")
}
