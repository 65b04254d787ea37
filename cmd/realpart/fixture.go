package main

import (
	"github.com/spf13/pflag"

	"realpart/ingest"
)

// fixtureFlags name the sweeps of a test fixture by itself.
type fixtureFlags struct {
	open, short, load, loadValue string
	fixture                      *ingest.Fixture // nil: none; filled by read
}

func (f *fixtureFlags) register(flags *pflag.FlagSet) {
	flags.StringVar(&f.open, "open", "", "sweep of the open fixture, a `FILE`; applied before anything else")
	flags.StringVar(&f.short, "short", "", "sweep of the shorted fixture, a `FILE`")
	flags.StringVar(&f.load, "load", "", "sweep of a known load in the fixture, a `FILE`")
	flags.StringVar(&f.loadValue, "load-value", "", "impedance of that load in Ω: `50` or 50+2j")
}

// read opens the fixture's sweeps.
func (f *fixtureFlags) read(o *ingest.Options) error {
	if f.open == "" && f.short == "" && f.load == "" {
		if f.loadValue != "" {
			return usagef("--load-value: expected --load with it, found none")
		}
		return nil
	}
	if (f.load == "") != (f.loadValue == "") {
		return usagef("--load, --load-value: expected both or none, found one")
	}
	if f.load != "" && (f.open == "" || f.short == "") {
		return usagef("--load: expected --open and --short with it")
	}
	fixture := &ingest.Fixture{}
	for _, part := range []struct {
		flag, path string
		sweep      **ingest.Sweep
	}{{"--open", f.open, &fixture.Open}, {"--short", f.short, &fixture.Short}, {"--load", f.load, &fixture.Load}} {
		if part.path == "" {
			continue
		}
		sweeps, err := ingest.Open(part.path, o)
		if err != nil {
			return err
		}
		if len(sweeps) != 1 {
			return usagef("%s: expected a file with one sweep, found %d in %s", part.flag, len(sweeps), part.path)
		}
		*part.sweep = sweeps[0]
	}
	if f.loadValue != "" {
		value, err := ingest.ParseImpedance(f.loadValue)
		if err != nil {
			return usagef("--load-value: %w", err)
		}
		fixture.LoadValue = value
	}
	f.fixture = fixture
	return nil
}

// files lists the fixture's sweeps, which no output may replace.
func (f *fixtureFlags) files() []string {
	var files []string
	for _, path := range []string{f.open, f.short, f.load} {
		if path != "" {
			files = append(files, path)
		}
	}
	return files
}

// apply corrects a sweep for the fixture.
func (f *fixtureFlags) apply(s *ingest.Sweep) (*ingest.Sweep, error) {
	if f.fixture == nil {
		return s, nil
	}
	corrected, err := f.fixture.Apply(s)
	if err != nil {
		return nil, &exitError{exitFailure, err}
	}
	return corrected, nil
}
