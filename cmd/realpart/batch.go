package main

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"path/filepath"
	"strings"

	"realpart/fit"
	"realpart/ingest"
	"realpart/report"
)

// fitted is what became of one sweep: a record, and what it was made from
// unless it failed.
type fitted struct {
	record   *report.Fit
	sweep    *ingest.Sweep
	analysis *fit.Analysis
	err      error // nil unless it failed
}

// batch fits all sweeps of the inputs and emits them in the order of the
// inputs. Failed ones are told on standard error as they come, a line each,
// and counted in a last line if there were several inputs. It returns the
// error that carries the exit code.
func (f *fitFlags) batch(inputs []ingest.Input, s streams, emit func(fitted) error) error {
	failures, code := 0, 0
	err := fit.InOrder(context.Background(), len(inputs), f.jobs,
		func(i int) []fitted { return f.fitInput(inputs[i], s) },
		func(_ int, results []fitted) error {
			for _, r := range results {
				if r.err != nil {
					failures++
					code = max(code, exitCode(r.err))
					fmt.Fprintln(s.err, "realpart:", oneLine(r.err.Error()))
				} else if r.record.Status != report.Converged {
					failures++
					code = max(code, exitFailure)
					fmt.Fprintf(s.err, "realpart: %s: the fit did not converge: %s\n", r.record.Sweep.File, oneLine(r.analysis.Result.Reason))
				}
				if err := emit(r); err != nil {
					return err
				}
			}
			return nil
		})
	if err != nil {
		return err
	}
	if failures == 0 {
		return nil
	}
	if len(inputs) > 1 {
		fmt.Fprintf(s.err, "realpart: %d of %d inputs failed\n", failures, len(inputs))
	}
	return &exitError{code: code}
}

// fitInput reads one input and fits every sweep in it.
func (f *fitFlags) fitInput(in ingest.Input, s streams) []fitted {
	sweeps, err := f.open(in, s)
	if err != nil {
		return []fitted{failed(report.Sweep{File: in.Display, Part: partOf(in.Display), Lot: in.Lot}, err)}
	}
	var out []fitted
	for _, sweep := range sweeps {
		identity := report.Sweep{
			File: sweep.File, Part: sweep.Part, Lot: sweep.Lot, Points: len(sweep.Freq), SHA256: sweep.SHA256,
		}
		for _, w := range sweep.Warnings {
			identity.Warnings = append(identity.Warnings, fit.Warning{Code: w.Code, Text: w.Text})
		}
		analysis, err := f.analyse(sweep)
		if err != nil {
			where := sweep.File
			if len(sweeps) > 1 {
				where += " (" + sweep.Part + ")"
			}
			out = append(out, failed(identity, fmt.Errorf("%s: %w", where, err)))
			continue
		}
		used := analysis.Result.Freq
		identity.UsedPoints, identity.FMin, identity.FMax = len(used), used[0], used[len(used)-1]
		record := report.New(identity, analysis, report.Options{At: f.at, AccuracyStated: f.accuracy != ""})
		out = append(out, fitted{record: record, sweep: sweep, analysis: analysis})
	}
	return out
}

// open reads an input; - is standard input.
func (f *readFlags) open(in ingest.Input, s streams) ([]*ingest.Sweep, error) {
	if in.Path == "-" {
		return ingest.Read("-", s.in, &f.options)
	}
	return in.Open(&f.options)
}

// failed makes the record of a sweep that could not be read or fitted.
func failed(sweep report.Sweep, err error) fitted {
	e := report.Error{File: sweep.File, Text: oneLine(err.Error())}
	var place *ingest.Error
	var input *fit.InputError
	var missing *fs.PathError
	switch {
	case errors.As(err, &place):
		e.Line, e.Column, e.Text = place.Line, place.Column, place.Text()
	case errors.As(err, &input):
		e.Text = input.Error()
	case errors.As(err, &missing):
		e.Text = missing.Err.Error()
	}
	return fitted{record: report.Failed(sweep, e), err: err}
}

// partOf is the name of a part whose file could not be read: the file's name
// without its ending.
func partOf(file string) string {
	base := path.Base(filepath.ToSlash(file))
	if stem := strings.TrimSuffix(base, path.Ext(base)); stem != "" {
		return stem
	}
	return base
}
