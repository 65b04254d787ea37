package main

import (
	"errors"
	"fmt"
	"io/fs"
	"slices"
	"strings"
	"sync"

	"github.com/spf13/pflag"

	"realpart/fit"
	"realpart/ingest"
	"realpart/models"
	"realpart/models/quantity"
)

// readFlags are the flags of every command that reads sweeps.
type readFlags struct {
	columns, units, connection string
	fixture                    fixtureFlags
	showReading                bool
	options                    ingest.Options // filled by check
	stdin                      struct {
		once sync.Once
		text []byte
		err  error
	}
}

func (f *readFlags) register(flags *pflag.FlagSet) {
	flags.StringVar(&f.columns, "columns", "", "override the recognition of columns, such as `'f=1,z=2,phase=3'` (number or header text)")
	flags.StringVar(&f.units, "units", "", "override units, such as `'f=kHz,z=mOhm,phase=rad'`")
	flags.StringVar(&f.connection, "connection", "", "for S-parameters: `reflection`, series or shunt")
	flags.BoolVar(&f.showReading, "show-reading", false, "print how each file was understood and stop")
	f.fixture.register(flags)
}

func (f *readFlags) check() error {
	columns, err := ingest.ParseColumns(f.columns)
	if err != nil {
		return err
	}
	units, err := ingest.ParseUnits(f.units)
	if err != nil {
		return err
	}
	if f.connection != "" {
		if err := ingest.CheckConnection(f.connection); err != nil {
			return err
		}
	}
	f.options = ingest.Options{Columns: columns, Units: units, Connection: f.connection}
	return f.fixture.read(&f.options)
}

// fitFlags are the flags shared by the commands that fit.
type fitFlags struct {
	readFlags
	batchFlags
	kind, circuit, weight string
	accuracy              string
	fix, start            assignments
	bounds                ranges
	robust, profile       bool
	advise                string
	from, to              hertz
	at                    frequencies
	jobs                  int

	flags   *pflag.FlagSet
	shared  *pflag.FlagSet // the names of these flags, see isShared
	request fit.Request    // filled by check
}

func newFitFlags() *fitFlags {
	return &fitFlags{
		kind:   "auto",
		fix:    assignments{flag: "--fix"},
		start:  assignments{flag: "--start"},
		bounds: ranges{assignments{flag: "--bounds"}},
	}
}

func (f *fitFlags) register(flags *pflag.FlagSet) {
	f.readFlags.register(flags)
	f.batchFlags.register(flags)
	flags.StringVar(&f.kind, "kind", "auto", "`kind` of part: auto, capacitor, inductor, bead, resistor or resonator")
	flags.StringVar(&f.circuit, "circuit", "", "library name or expression, such as `'ESR + ESL + (C || Rp)'`; without it the sweep chooses")
	flags.Var(&f.fix, "fix", "hold a parameter: `NAME=VALUE`; may be repeated")
	flags.Var(&f.start, "start", "starting value: `NAME=VALUE`; may be repeated")
	flags.Var(&f.bounds, "bounds", "keep a parameter inside: `NAME=LOW..HIGH`; may be repeated")
	flags.StringVar(&f.weight, "weight", "", "`relative` (default), uniform, accuracy, or s-parameter (default for sweeps measured as S-parameters)")
	flags.StringVar(&f.accuracy, "accuracy", "", "the meter's stated accuracy: `0.1%,0.05deg` or the name of a table file")
	flags.BoolVar(&f.robust, "robust", false, "soft-L1 loss, so that single wild points lose their pull")
	flags.BoolVar(&f.profile, "profile", false, "profile-likelihood intervals, which may be lopsided")
	flags.StringVar(&f.advise, "advise", "", "say what next sweep would pin the parameter `NAME` down")
	flags.Var(&f.from, "from", "use only points from this `FREQUENCY` on")
	flags.Var(&f.to, "to", "use only points up to this `FREQUENCY`")
	flags.Var(&f.at, "at", "`FREQUENCIES` at which to give figures, such as 120Hz,100kHz")
	flags.IntVar(&f.jobs, "jobs", 0, "parallel fits; 0: as many as processors")
	f.flags = flags
}

// check reads all flags before any sweep is opened.
func (f *fitFlags) check() error {
	if err := f.readFlags.check(); err != nil {
		return err
	}
	if err := f.batchFlags.check(); err != nil {
		return err
	}
	kind := models.Kind(f.kind)
	if f.kind == "auto" {
		kind = ""
	} else if !slices.Contains(models.Kinds(), kind) {
		return usagef("--kind: expected auto, capacitor, inductor, bead, resistor or resonator, found %q", f.kind)
	}
	circuit, name, err := findCircuit(f.circuit)
	if err != nil {
		return err
	}
	settings := &fit.Settings{Robust: f.robust}
	if f.weight != "" {
		if settings.Weight, err = fit.ParseWeight(f.weight); err != nil {
			return usagef("--weight: %w", err)
		}
	}
	if settings.Fixed, err = f.fix.resolve(circuit); err != nil {
		return err
	}
	if settings.Start, err = f.start.resolve(circuit); err != nil {
		return err
	}
	if settings.Bounds, err = f.bounds.resolve(circuit); err != nil {
		return err
	}
	if f.from > 0 && f.to > 0 && f.from >= f.to {
		return usagef("--from, --to: expected rising frequencies, found %v to %v", f.from.String(), f.to.String())
	}
	if f.jobs < 0 {
		return usagef("--jobs: expected 0 or more, found %d", f.jobs)
	}
	if f.accuracy != "" {
		accuracy, err := ingest.ParseAccuracy(f.accuracy)
		if err != nil {
			var missing *fs.PathError
			if errors.As(err, &missing) {
				return usagef("--accuracy: expected an accuracy such as 0.1%%,0.05deg or the name of a table file, found %q: %w", f.accuracy, missing.Err)
			}
			return err
		}
		settings.Accuracy = accuracy.At
	} else if settings.Weight == fit.Accuracy {
		return usagef("--weight accuracy: expected the meter's accuracy, found none; add --accuracy 0.1%%,0.05deg with your meter's numbers")
	}
	f.request = fit.Request{Kind: kind, Circuit: circuit, Name: name, Settings: settings, Profile: f.profile, Advise: f.advise}
	return nil
}

// ranges is a repeatable flag NAME=LOW..HIGH.
type ranges struct{ assignments }

func (r *ranges) Type() string { return "NAME=LOW..HIGH" }

func (r *ranges) Set(text string) error {
	if _, value, ok := strings.Cut(text, "="); ok && !strings.Contains(value, "..") {
		return errors.New("expected NAME=LOW..HIGH, such as ESL=1nH..20nH")
	}
	return r.assignments.Set(text)
}

func (r *ranges) resolve(c *models.Circuit) (map[string]fit.Interval, error) {
	out := map[string]fit.Interval{}
	for _, name := range r.names {
		p, err := r.parameter(c, name)
		if err != nil {
			return nil, err
		}
		low, high, _ := strings.Cut(r.texts[name], "..")
		var interval fit.Interval
		if interval.Low, err = r.value(p, strings.TrimSpace(low)); err != nil {
			return nil, err
		}
		if interval.High, err = r.value(p, strings.TrimSpace(high)); err != nil {
			return nil, err
		}
		if interval.Low > interval.High {
			return nil, usagef("--bounds %s: expected LOW..HIGH with LOW not above HIGH, found %s", name, r.texts[name])
		}
		out[name] = interval
	}
	return out, nil
}

// cut returns the part of a sweep inside --from and --to.
func (f *fitFlags) cut(s *ingest.Sweep) (freq []float64, z, sParameters []complex128) {
	a, _ := slices.BinarySearch(s.Freq, float64(f.from))
	b := len(s.Freq)
	if f.to > 0 {
		var exact bool
		if b, exact = slices.BinarySearch(s.Freq, float64(f.to)); exact {
			b++
		}
	}
	a = min(a, b)
	if s.S != nil {
		sParameters = s.S[a:b]
	}
	return s.Freq[a:b], s.Z[a:b], sParameters
}

// prepare returns what package fit needs of one sweep.
func (f *fitFlags) prepare(s *ingest.Sweep) (freq []float64, z []complex128, request fit.Request, err error) {
	freq, z, sParameters := f.cut(s)
	if len(freq) == 0 {
		return nil, nil, request, &fit.InputError{Found: "no points from " + orEnd(f.from, "the start") + " to " + orEnd(f.to, "the end"),
			Expected: "points in a sweep from " + quantity.Format(s.Freq[0], "Hz", 4) + " to " + quantity.Format(s.Freq[len(s.Freq)-1], "Hz", 4),
			Hint:     "change --from and --to"}
	}
	request = f.request
	settings := *request.Settings
	if s.S != nil {
		settings.Reference, settings.Connection, settings.S = s.Reference, fit.Connection(s.Connection), sParameters
		if settings.Weight == "" {
			settings.Weight = fit.SParameter
		}
	}
	request.Settings = &settings
	return freq, z, request, nil
}

func orEnd(h hertz, other string) string {
	if h == 0 {
		return other
	}
	return h.String()
}

// showReadings prints how each input was understood, its faults included.
func (f *readFlags) showReadings(inputs []ingest.Input, s streams) error {
	failures, code := 0, 0
	for i, in := range inputs {
		if i > 0 {
			fmt.Fprintln(s.out)
		}
		sweeps, err := f.open(in, s)
		fmt.Fprintf(s.out, "%s\n", in.Display)
		if err != nil {
			failures++
			code = max(code, exitCode(err))
			fmt.Fprintln(s.err, "realpart:", oneLine(err.Error()))
			var e *ingest.Error
			if errors.As(err, &e) && e.Reading != nil {
				if err := e.Reading.WriteText(s.out); err != nil {
					return err
				}
			}
			continue
		}
		for _, sweep := range sweeps[:1] { // one reading for all parts of a file
			if err := sweep.Reading.WriteText(s.out); err != nil {
				return err
			}
		}
	}
	if failures > 0 {
		return &exitError{code: code}
	}
	return nil
}

// weightName is the weight as the user gave it, or what stands for none.
func (f *fitFlags) weightName() string {
	if f.weight == "" {
		return "relative, or s-parameter for sweeps measured as S-parameters"
	}
	return f.weight
}
