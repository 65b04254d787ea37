package main

import (
	"bytes"
	"io"

	"github.com/spf13/cobra"

	"realpart/ingest"
	"realpart/report"
)

func newFit(s streams) *cobra.Command {
	f := newFitFlags()
	var o fitOutputs
	cmd := &cobra.Command{
		Use:   "fit SWEEP…",
		Short: "Fit every sweep and report its equivalent circuit",
		Long: `Fit reads each sweep (a file, all files below a folder, or - for standard
input), tells the kind of part, fits the circuits that describe such parts,
chooses the one that the data support, and reports its values with their 95 %
intervals, the self-resonances, the residuals and the figures of data sheets.`,
		Example: `  realpart fit c017.csv
  realpart fit --circuit 'ESR + ESL + C' --at 120Hz,100kHz lot-heron/
  realpart fit --accuracy 0.1%,0.05deg --json lot-heron/ > heron.jsonl`,
		Args: f.arguments,
		RunE: func(_ *cobra.Command, args []string) error {
			if err := f.check(); err != nil {
				return err
			}
			if err := distinct(f.outputs(o.files()), args); err != nil {
				return err
			}
			inputs, err := f.find(args, s)
			if err != nil {
				return err
			}
			if f.showReading {
				return f.showReadings(inputs, s)
			}
			return o.run(f, inputs, s)
		},
	}
	f.register(cmd.Flags())
	flags := cmd.Flags()
	flags.BoolVar(&o.json, "json", false, "JSON Lines on standard output, one object a sweep")
	flags.StringVar(&o.csv, "csv", "", "write a table with one row a part to `FILE`")
	flags.BoolVar(&o.all, "all", false, "print the table of candidates with the reason each was not chosen")
	return cmd
}

// fitOutputs are the forms in which `fit` reports.
type fitOutputs struct {
	json, all bool
	csv       string
}

// files lists the output files by their flags.
func (o *fitOutputs) files() map[string]string {
	files := map[string]string{}
	if o.csv != "" {
		files["--csv"] = o.csv
	}
	return files
}

func (o *fitOutputs) run(f *fitFlags, inputs []ingest.Input, s streams) error {
	var kept []*report.Fit // only what a file needs at the end
	first := true
	batchErr := f.batch(inputs, s, func(r fitted) error {
		if o.csv != "" {
			kept = append(kept, r.record)
		}
		if o.json {
			return report.WriteJSON(s.out, r.record)
		}
		if r.err != nil || f.jsonOut != "" {
			return nil
		}
		var b bytes.Buffer
		if !first {
			b.WriteByte('\n')
		}
		first = false
		if err := report.WriteText(&b, r.record, report.TextOptions{
			Width: terminalWidth(s.out), All: o.all, Colour: wantsColour(s.out),
			Quiet: true, // once, at the end
		}); err != nil {
			return err
		}
		_, err := s.out.Write(b.Bytes())
		return err
	})
	if exit, ok := batchErr.(*exitError); batchErr != nil && (!ok || exit.err != nil) {
		return batchErr
	}
	if !o.json && !f.quiet && !first {
		if err := writeCautions(s.out); err != nil {
			return err
		}
	}
	if o.csv != "" && anyFitted(kept) {
		if err := writeFile(o.csv, func(w io.Writer) error { return report.WriteCSV(w, kept) }); err != nil {
			return err
		}
	}
	return batchErr
}

func anyFitted(fits []*report.Fit) bool {
	for _, f := range fits {
		if f.Status != report.FitFailed {
			return true
		}
	}
	return false
}
