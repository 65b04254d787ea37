package main

import (
	"context"
	"encoding/json"
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"realpart/fit"
	"realpart/ingest"
	"realpart/models/quantity"
	"realpart/report"
)

// checkSchema names the form of a checked in JSON.
const checkSchema = "realpart.check/1"

// checked is what is said of the measurement of one sweep. For one that could
// not be read there are Schema, Sweep and Error alone.
type checked struct {
	Schema         string           `json:"schema"`
	Sweep          report.Sweep     `json:"sweep"`
	Consistent     *bool            `json:"consistent,omitzero"`
	ConsistencyRMS *float64         `json:"consistency_rms,omitzero"`
	Noise          *float64         `json:"noise_relative,omitzero"`
	Steps          []checkedStep    `json:"steps,omitzero"`
	Warnings       []report.Warning `json:"warnings,omitzero"`
	Next           []string         `json:"next,omitzero"`
	Error          *report.Error    `json:"error,omitzero"`

	err error
}

type checkedStep struct {
	AtHz     float64 `json:"at_hz"`
	Relative float64 `json:"relative"`
}

func newCheck(s streams) *cobra.Command {
	f := newFitFlags()
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "check SWEEP…",
		Short: "Judge the measurement itself: consistency, noise, steps, coverage",
		Long: `Check judges each sweep before any circuit is fitted to it. Does any stable,
linear, causal impedance pass through the points (Kramers–Kronig)? How much do
they scatter? Does the level step where the meter changes its range? Do units and
signs look right? What does the sweep cover, and what should be measured next?

It cannot see an error that turns one possible impedance into another: a wrong
scale or frequency unit, the fixture's own R, L and C, a drift slow enough to look
like one more relaxation.

The exit code is 1 if a sweep is inconsistent.`,
		Example: `  realpart check c017.csv
  realpart check --accuracy 0.1%,0.05deg --json lot-heron/`,
		Args: sweepArguments,
		RunE: func(_ *cobra.Command, args []string) error {
			if err := f.check(); err != nil {
				return err
			}
			inputs, err := ingest.Find(args)
			if err != nil {
				return &exitError{exitFailure, err}
			}
			if f.showReading {
				return f.showReadings(inputs, s)
			}
			return f.checkAll(inputs, s, asJSON)
		},
	}
	flags := cmd.Flags()
	f.readFlags.register(flags)
	flags.StringVar(&f.accuracy, "accuracy", "", "the meter's stated accuracy: `0.1%,0.05deg` or the name of a table file; smaller misfits are let pass")
	flags.Var(&f.from, "from", "use only points from this `FREQUENCY` on")
	flags.Var(&f.to, "to", "use only points up to this `FREQUENCY`")
	flags.IntVar(&f.jobs, "jobs", 0, "sweeps judged in parallel; 0: as many as processors")
	flags.BoolVar(&asJSON, "json", false, "JSON Lines on standard output, one object a sweep")
	return cmd
}

func sweepArguments(_ *cobra.Command, args []string) error {
	if len(args) == 0 {
		return usagef("expected a sweep file, a folder or -, found none")
	}
	return nil
}

func (f *fitFlags) checkAll(inputs []ingest.Input, s streams, asJSON bool) error {
	failures, code, first := 0, 0, true
	err := fit.InOrder(context.Background(), len(inputs), f.jobs,
		func(i int) []checked { return f.checkInput(inputs[i], s) },
		func(_ int, results []checked) error {
			for _, r := range results {
				switch {
				case r.err != nil:
					failures++
					code = max(code, exitCode(r.err))
					fmt.Fprintln(s.err, "realpart:", oneLine(r.err.Error()))
				case !*r.Consistent:
					code = max(code, exitNo)
				}
				if asJSON {
					e := json.NewEncoder(s.out)
					e.SetEscapeHTML(false)
					if err := e.Encode(r); err != nil {
						return err
					}
				} else if r.err == nil {
					text := r.text()
					if !first {
						text = "\n" + text
					}
					first = false
					if _, err := fmt.Fprint(s.out, text); err != nil {
						return err
					}
				}
			}
			return nil
		})
	if err != nil {
		return err
	}
	if failures > 0 && len(inputs) > 1 {
		fmt.Fprintf(s.err, "realpart: %d of %d inputs failed\n", failures, len(inputs))
	}
	if code > 0 {
		return &exitError{code: code}
	}
	return nil
}

func (f *fitFlags) checkInput(in ingest.Input, s streams) []checked {
	fail := func(who report.Sweep, err error) checked {
		record := failed(who, err).record
		return checked{Schema: checkSchema, Sweep: record.Sweep, Error: record.Error, err: err}
	}
	sweeps, err := f.open(in, s)
	if err != nil {
		return []checked{fail(report.Sweep{File: in.Display, Part: partOf(in.Display), Lot: in.Lot}, err)}
	}
	var out []checked
	for _, sweep := range sweeps {
		who := describe(sweep)
		freq, z, sParameters := f.cut(sweep)
		j, err := fit.Check(freq, z, &fit.CheckSettings{
			Accuracy: f.request.Settings.Accuracy, S: sParameters, Connection: fit.Connection(sweep.Connection),
		})
		if err != nil {
			out = append(out, fail(who, fmt.Errorf("%s: %w", sweep.File, err)))
			continue
		}
		who.UsedPoints, who.FMin, who.FMax = len(freq), freq[0], freq[len(freq)-1]
		c := checked{
			Schema: checkSchema, Sweep: who, Consistent: &j.Consistent, ConsistencyRMS: &j.RMS, Noise: &j.Noise,
			Steps: []checkedStep{}, Warnings: []report.Warning{}, Next: j.Next,
		}
		for _, step := range j.Steps {
			c.Steps = append(c.Steps, checkedStep{step.At, step.Relative})
		}
		for _, w := range append(who.Warnings, j.Warnings...) {
			c.Warnings = append(c.Warnings, report.Warning{Code: w.Code, Text: w.Text})
		}
		out = append(out, c)
	}
	return out
}

// text is what a person reads: the answer first.
func (c checked) text() string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s\n", c.Sweep.File)
	if c.Sweep.Part != "" && c.Sweep.Part != partOf(c.Sweep.File) {
		fmt.Fprintf(&b, "part %s\n", c.Sweep.Part)
	}
	fmt.Fprintf(&b, "%d points, %s to %s\n\n", c.Sweep.UsedPoints, quantity.Format(c.Sweep.FMin, "Hz", 4), quantity.Format(c.Sweep.FMax, "Hz", 4))
	if *c.Consistent {
		b.WriteString("Consistent: a passive part can have this impedance.\n")
	} else {
		b.WriteString("NOT CONSISTENT: these points are not the impedance of one linear passive part.\n")
	}
	fmt.Fprintf(&b, "  scatter of the points  %s each of magnitude and phase\n", report.FormatPercent(*c.Noise))
	fmt.Fprintf(&b, "  misfit of the best stable impedance  rms %s\n", report.FormatPercent(*c.ConsistencyRMS))
	list := func(title string, items []string) {
		if len(items) == 0 {
			return
		}
		fmt.Fprintf(&b, "\n%s\n", title)
		for _, item := range items {
			fmt.Fprintf(&b, "  - %s\n", strings.ReplaceAll(wrap(item, 76), "\n", "\n    "))
		}
	}
	var warnings []string
	for _, w := range c.Warnings {
		warnings = append(warnings, w.Code+": "+w.Text)
	}
	list("Warnings", warnings)
	list("Next", c.Next)
	return b.String()
}
