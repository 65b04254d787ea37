package main

import (
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"realpart/ingest"
)

func newCompensate(s streams) *cobra.Command {
	var f readFlags
	var out string
	cmd := &cobra.Command{
		Use:   "compensate RAW --open O --short S [--load L --load-value Z]",
		Short: "Correct a sweep for the test fixture and write it",
		Long: `Compensate takes the fixture's stray admittance (--open), its residual
impedance (--short) and, with a load of known impedance, any other linear
two-port between the meter and the part out of a sweep. The fixture's sweeps are
interpolated linearly in log frequency; they must reach over the whole sweep.`,
		Example: `  realpart compensate raw.csv --open open.csv --short short.csv --out part.csv`,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) != 1 {
				return usagef("expected one sweep to correct, found %d", len(args))
			}
			return nil
		},
		RunE: func(_ *cobra.Command, args []string) error {
			if f.fixture.open == "" && f.fixture.short == "" {
				return usagef("expected --open, --short or both, found neither")
			}
			if out != "" && out != "-" {
				if err := distinct(map[string]string{"--out": out}, append(f.fixture.files(), args...)); err != nil {
					return err
				}
			}
			if err := f.check(); err != nil {
				return err
			}
			in := ingest.Input{Path: args[0], Display: args[0]}
			if f.showReading {
				return f.showReadings([]ingest.Input{in}, s)
			}
			sweeps, err := f.open(in, s)
			if err != nil {
				return err
			}
			if len(sweeps) != 1 {
				return usagef("expected a file with one sweep, found %d in %s", len(sweeps), args[0])
			}
			sweep := sweeps[0]
			comment := []string{fmt.Sprintf("%s, corrected for %s", filepath.Base(args[0]), strings.Join(f.fixture.used(), ", "))}
			if out == "" || out == "-" {
				return writeSweep(s.out, sweep.Freq, sweep.Z, comment)
			}
			return writeFile(out, func(w io.Writer) error { return writeSweep(w, sweep.Freq, sweep.Z, comment) })
		},
	}
	f.register(cmd.Flags())
	cmd.Flags().StringVar(&out, "out", "", "write to `FILE` instead of standard output")
	return cmd
}

// used names what the correction was made with.
func (f *fixtureFlags) used() []string {
	var used []string
	for _, part := range []struct{ name, path string }{{"open", f.open}, {"short", f.short}, {"load", f.load}} {
		if part.path != "" {
			used = append(used, part.name+" "+filepath.Base(part.path))
		}
	}
	return used
}
