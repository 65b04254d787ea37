package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"strings"
	"sync"

	"realpart/fit"
	"realpart/ingest"
	"realpart/report"
)

// fitted is what became of one sweep: a record, and what it was made from
// unless it failed.
type fitted struct {
	record   *report.Fit
	sweep    *ingest.Sweep
	analysis *fit.Analysis // nil also for a sweep that --resume skipped
	err      error         // nil unless it failed
	input    int           // the index of its input
	held     *held         // where --json-out holds it from an earlier run

	line    []byte // the record in JSON, where an output wants it; until it is written
	lineErr error
	memory  *[]byte // that of line
}

// usualLine is the room for a line of JSON; most take some 13 kB.
const usualLine = 16 << 10

// encoded adds the line of JSON that the outputs want. It is called where the
// fits are made, in parallel: what is done in order is writing alone.
func (b *batch) encoded(r fitted) fitted {
	if b.streaming || b.store != nil && r.held == nil {
		memory := lines.Get().(*[]byte)
		*memory, r.lineErr = report.AppendJSON((*memory)[:0], r.record)
		r.memory = memory
		r.line = *memory
	}
	return r
}

// lines is the memory of lines that are written.
var lines = sync.Pool{New: func() any {
	line := make([]byte, 0, usualLine)
	return &line
}}

// batch fits all sweeps of the inputs and emits them in the order of the
// inputs. A bad input never stops the rest: failures are told on standard
// error at the end, a line each, and counted in a last line if there were
// several inputs. It returns the error that carries the exit code.
//
// Only what is in work is in memory, so that a batch may be of any length: the
// choice of a lot's circuit reads the lot twice, with what the first pass
// found of each sweep in a file.
func (f *fitFlags) batch(inputs []ingest.Input, s streams, emit func(fitted) error) error {
	return f.batchLots(f.lots(inputs), s, emit)
}

// batchLots is batch of inputs that are grouped in lots.
func (f *fitFlags) batchLots(lots []lot, s streams, emit func(fitted) error) error {
	total := 0
	for _, l := range lots {
		total += len(l.inputs)
	}
	b := &batch{fitFlags: f, s: s, emit: emit}
	b.expect(total)
	if f.jsonOut != "" {
		var err error
		if b.store, err = openStore(f.jsonOut, f.settings(), f.resume); err != nil {
			return err
		}
		defer b.store.Close()
		b.complete = b.resume && b.holds(lots)
	}
	for _, l := range lots {
		if err := b.lot(l, total); err != nil {
			return err
		}
	}
	if b.store != nil {
		if err := b.store.finish(); err != nil {
			return err
		}
		os.Remove(f.jsonOut + trialsEnding) // if there is one
	}
	for _, line := range b.failures {
		fmt.Fprintln(s.err, "realpart:", line)
	}
	if len(b.failures) == 0 {
		return nil
	}
	switch failed := len(b.failures); {
	case failed > b.failedInputs && total > 1:
		fmt.Fprintf(s.err, "realpart: %d of %d inputs failed, with %d sweeps\n", b.failedInputs, total, failed)
	case total > 1:
		fmt.Fprintf(s.err, "realpart: %d of %d inputs failed\n", failed, total)
	case b.sweeps > 1:
		fmt.Fprintf(s.err, "realpart: %d of %d sweeps failed\n", failed, b.sweeps)
	}
	return &exitError{code: b.code}
}

// batch is the state of a run.
type batch struct {
	*fitFlags
	s        streams
	store    *store
	emit     func(fitted) error
	complete bool // the store holds the results of all sweeps, and no others
	tried    bool // a lot has been through its first pass
	first    int  // the index of the lot's first input
	failures []string
	code     int

	sweeps, failedInputs int

	slackOnce sync.Once
	slack     []byte // see expect
}

// A batch of manySweeps or more gets slackBytes of slack.
const (
	manySweeps = 32
	slackBytes = 8 << 20
)

// expect prepares for a number of sweeps. The garbage collector runs when the
// heap has grown by as much as is in use; that is 3 MB here for any number of
// sweeps, each of which leaves a tenth of it, so that every seventh part of the
// time went into collections. A block that counts as in use lets it run every
// 8 MB more; with 16 MB the first touch of each page costs more than the
// collections that it saves. Nothing is ever written to the block, so that it takes addresses
// and no memory. (A higher percentage of growth would do the same for a small
// heap but let the large one of a big file grow by several times its size; and
// for a few sweeps the block costs more than it saves.)
func (b *batch) expect(sweeps int) {
	if sweeps >= manySweeps {
		b.slackOnce.Do(func() { b.slack = make([]byte, slackBytes) })
	}
}

// lot fits the inputs of a lot, or inputs that are none.
func (b *batch) lot(l lot, total int) error {
	defer func() { b.first += len(l.inputs) }()
	var found *firstPass
	if l.one && b.chooses() && len(l.inputs) > 1 && !b.complete {
		var err error
		if found, err = b.tryAll(l); err != nil {
			return err
		}
		defer found.Close()
	}
	bar := b.newBar("fitting", len(l.inputs))
	defer bar.finish()
	return fit.InOrder(context.Background(), len(l.inputs), b.jobs,
		func(i int) []fitted {
			in := l.inputs[i]
			sweeps, err := b.open(in, b.s)
			bar.grow(len(sweeps) - 1)
			if err != nil {
				bar.add()
				return []fitted{b.encoded(failed(report.Sweep{File: in.Display, Part: partOf(in.Display), Lot: in.Lot}, err))}
			}
			var trials []*fit.Trial
			var choice *fit.LotChoice
			if found != nil {
				if trials, err = found.at(i, sweeps); err != nil {
					return []fitted{b.encoded(failed(describe(sweeps[0]), fmt.Errorf("%s: %w", in.Display, err)))}
				}
				choice = found.choice
			}
			jobs := 1
			if len(l.inputs) == 1 {
				jobs = b.jobs
			}
			return b.fitSweeps(sweeps, trials, choice, jobs, bar)
		},
		func(i int, results []fitted) error {
			before := len(b.failures)
			for _, r := range results {
				r.input = b.first + i
				if err := b.take(r); err != nil {
					return err
				}
			}
			b.sweeps += len(results)
			if len(b.failures) > before {
				b.failedInputs++
			}
			return nil
		})
}

// take hands a result on, and notes its failure.
func (b *batch) take(r fitted) error {
	if r.memory != nil {
		defer lines.Put(r.memory)
	}
	if r.lineErr != nil {
		return r.lineErr
	}
	switch {
	case r.err != nil:
		b.code = max(b.code, exitCode(r.err))
		b.failures = append(b.failures, oneLine(r.err.Error()))
	case r.record.Status != report.Converged:
		b.code = max(b.code, exitFailure)
		b.failures = append(b.failures, fmt.Sprintf("%s: the fit did not converge: %s", r.record.Sweep.File, oneLine(r.analysis.Result.Reason)))
	}
	if b.store != nil {
		if err := b.store.add(r); err != nil {
			return err
		}
	}
	return b.emit(r)
}

// fitSweeps fits the sweeps of one input. Several without a lot's choice are
// a lot of their own.
func (b *batch) fitSweeps(sweeps []*ingest.Sweep, trials []*fit.Trial, choice *fit.LotChoice, jobs int, bar *bar) []fitted {
	b.expect(len(sweeps))
	if choice == nil && b.chooses() && len(sweeps) > 1 && !b.complete {
		tally := new(fit.Tally)
		trials = make([]*fit.Trial, len(sweeps))
		bar.grow(len(sweeps))
		_ = fit.InOrder(context.Background(), len(sweeps), jobs,
			func(i int) *fit.Trial { defer bar.add(); return b.try(sweeps[i]) },
			func(i int, t *fit.Trial) error {
				if trials[i] = t; t != nil {
					tally.Add(t)
				}
				return nil
			})
		choice = tally.Choose()
	}
	out := make([]fitted, 0, len(sweeps))
	// The error could only be that of emit or of the context.
	_ = fit.InOrder(context.Background(), len(sweeps), jobs,
		func(i int) fitted {
			defer bar.add()
			var trial *fit.Trial
			if i < len(trials) {
				trial = trials[i]
			}
			return b.encoded(b.fitSweep(sweeps[i], trial, choice, len(sweeps) > 1))
		},
		func(_ int, r fitted) error {
			out = append(out, r)
			return nil
		})
	return out
}

// try fits all circuits of a sweep's kind; nil where that failed, which the
// fit itself will say.
func (b *batch) try(sweep *ingest.Sweep) *fit.Trial {
	freq, z, request, err := b.prepare(sweep)
	if err != nil {
		return nil
	}
	t, err := fit.Try(freq, z, request)
	if err != nil {
		return nil
	}
	return t
}

// fitSweep fits one sweep, with the circuit of its lot if there is a trial.
func (b *batch) fitSweep(sweep *ingest.Sweep, trial *fit.Trial, choice *fit.LotChoice, several bool) fitted {
	if r, ok := b.reuse(sweep, trial, choice); ok {
		return r
	}
	who := describe(sweep)
	fail := func(err error) fitted {
		where := sweep.File
		if several {
			where += " (" + sweep.Part + ")"
		}
		r := failed(who, fmt.Errorf("%s: %w", where, err))
		r.sweep = sweep
		return r
	}
	freq, z, request, err := b.prepare(sweep)
	if err != nil {
		return fail(err)
	}
	var analysis *fit.Analysis
	if trial != nil && choice != nil {
		analysis, err = choice.Analyse(freq, z, request, trial)
	} else {
		analysis, err = fit.Analyse(freq, z, request)
	}
	if err != nil {
		return fail(err)
	}
	used := analysis.Result.Freq
	who.UsedPoints, who.FMin, who.FMax = len(used), used[0], used[len(used)-1]
	record := report.New(who, analysis, report.Options{At: b.at, AccuracyStated: b.accuracy != ""})
	return fitted{record: record, sweep: sweep, analysis: analysis}
}

// describe says which sweep a record is of.
func describe(sweep *ingest.Sweep) report.Sweep {
	who := report.Sweep{
		File: sweep.File, Part: sweep.Part, Lot: sweep.Lot, Points: len(sweep.Freq), SHA256: sweep.SHA256,
		Metadata: metadata(sweep.Metadata),
	}
	for _, w := range sweep.Warnings {
		who.Warnings = append(who.Warnings, fit.Warning{Code: w.Code, Text: w.Text})
	}
	return who
}

// metadata names what a file says of the measurement; nil where it says
// nothing.
func metadata(m ingest.Metadata) map[string]string {
	var out map[string]string
	for _, entry := range [...]struct{ name, text string }{
		{"serial", m.Serial}, {"date", m.Date}, {"test level", m.TestLevel}, {"bias", m.Bias}, {"temperature", m.Temperature},
	} {
		if entry.text == "" {
			continue
		}
		if out == nil {
			out = map[string]string{}
		}
		out[entry.name] = entry.text
	}
	return out
}

// open reads an input, - being standard input, and corrects its sweeps for the
// fixture if there is one.
func (f *readFlags) open(in ingest.Input, s streams) ([]*ingest.Sweep, error) {
	var sweeps []*ingest.Sweep
	var err error
	if in.Path == "-" {
		var text []byte
		if text, err = f.standardInput(s); err != nil {
			return nil, err
		}
		sweeps, err = ingest.Read("-", bytes.NewReader(text), &f.options)
	} else {
		sweeps, err = in.Open(&f.options)
	}
	if err != nil {
		return nil, err
	}
	for i, sweep := range sweeps {
		if sweeps[i], err = f.fixture.apply(sweep); err != nil {
			return nil, fmt.Errorf("%s: %w", in.Display, err)
		}
	}
	return sweeps, nil
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
