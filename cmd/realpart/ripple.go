package main

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"slices"
	"strings"

	"realpart/ingest"
	"realpart/models/quantity"
	"realpart/report/derating"
)

// rippleRow is a line of a spectrum, periodRow one of a sampled period. Cells
// may carry units.
type rippleRow struct {
	Frequency string `csv:"frequency"`
	RMS       string `csv:"i_rms"`
}

type periodRow struct {
	Time    string `csv:"time"`
	Current string `csv:"current"`
}

// readRipple takes --ripple: the notation of a current, or a CSV file with the
// header frequency,i_rms or, for one sampled period, time,current.
func readRipple(text string) (*derating.Spectrum, error) {
	if derating.IsRipple(text) {
		s, err := derating.ParseRipple(text)
		if err != nil {
			return nil, usagef("--ripple: %w", err)
		}
		return s, nil
	}
	data, err := os.ReadFile(text)
	if err != nil {
		return nil, usagef("--ripple: expected a ripple current such as 100kHz=3.2A,200kHz=0.9A, triangle:2.4App@180kHz or rectangle:3A,duty=0.3@100kHz, or a CSV file, found %q: %w", text, cause(err))
	}
	var s *derating.Spectrum
	if hasColumn(data, "time") {
		s, err = readPeriod(text, data)
	} else {
		s, err = readLines(text, data)
	}
	if err != nil {
		return nil, &exitError{exitUsage, fmt.Errorf("--ripple: %w", err)}
	}
	s.Text = text + ": " + s.Text
	return s, nil
}

// hasColumn tells whether the first line that is not a comment names a column.
func hasColumn(data []byte, name string) bool {
	for line := range bytes.Lines(data) {
		s := strings.TrimSpace(strings.TrimPrefix(string(line), "\ufeff"))
		if s == "" || strings.HasPrefix(s, "#") {
			continue
		}
		return strings.Contains(strings.ToLower(s), name)
	}
	return false
}

// cell reads a value of a table.
func cell(file string, line int, text, name, unit string) (float64, error) {
	v, err := quantity.Parse(text, unit)
	if err != nil {
		return 0, fmt.Errorf("%s:%d: %s: %w", file, line, name, err)
	}
	return v, nil
}

func readLines(file string, data []byte) (*derating.Spectrum, error) {
	rows, at, err := ingest.ReadTableLines[rippleRow](file, bytes.NewReader(data))
	if err != nil {
		return nil, err
	}
	var lines []derating.Line
	for i, row := range rows {
		var l derating.Line
		if l.Freq, err = cell(file, at[i], row.Frequency, "frequency", "Hz"); err != nil {
			return nil, err
		}
		if l.RMS, err = cell(file, at[i], row.RMS, "i_rms", "A"); err != nil {
			return nil, err
		}
		if l.RMS == 0 {
			continue // a spectrum analyser lists what is not there, too
		}
		lines = append(lines, l)
	}
	s, err := derating.NewLines(lines)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", file, err)
	}
	return s, nil
}

// unevenStep is how far a step of time may be from the median one, relative to
// it: what the rounding of an oscilloscope's file gives.
const unevenStep = 0.01

// readPeriod reads one period in equal steps, its first value not repeated.
func readPeriod(file string, data []byte) (*derating.Spectrum, error) {
	rows, at, err := ingest.ReadTableLines[periodRow](file, bytes.NewReader(data))
	if err != nil {
		return nil, err
	}
	if len(rows) < 2 {
		return nil, fmt.Errorf("%s: expected the samples of a period, found %d", file, len(rows))
	}
	times, samples := make([]float64, len(rows)), make([]float64, len(rows))
	for i, row := range rows {
		if times[i], err = cell(file, at[i], row.Time, "time", "s"); err != nil {
			return nil, err
		}
		if samples[i], err = cell(file, at[i], row.Current, "current", "A"); err != nil {
			return nil, err
		}
	}
	n := len(times)
	steps := make([]float64, n-1)
	for i := range steps {
		steps[i] = times[i+1] - times[i]
	}
	slices.Sort(steps)
	step := steps[(n-1)/2] // the median: a gap shows, where a mean would hide it
	for i := 1; i < n; i++ {
		if d := times[i] - times[i-1]; !(step > 0 && math.Abs(d-step) <= unevenStep*step) {
			return nil, fmt.Errorf("%s:%d: expected equal steps of time, here %.4g s, found %.4g s; resample the period", file, at[i], step, d)
		}
	}
	step = (times[n-1] - times[0]) / float64(n-1)
	s, err := derating.NewSampled(samples, 1/(float64(n)*step))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", file, err)
	}
	return s, nil
}
