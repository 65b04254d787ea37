package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"realpart/fit"
	"realpart/ingest"
	"realpart/report"
	"realpart/report/figure"
	"realpart/report/lotpage"
	"realpart/report/lots"
	"realpart/report/netlist"
	"realpart/report/page"
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
			if err := o.check(f); err != nil {
				return err
			}
			if err := distinct(f.outputs(o.files()), slices.Concat(f.besideSweeps(), args)); err != nil {
				return err
			}
			inputs, err := f.find(args, s)
			if err != nil {
				return err
			}
			if f.showReading {
				return f.showReadings(inputs, s)
			}
			if f.filesFrom != "" { // now that the list is read
				var listed []string
				for _, in := range inputs {
					listed = append(listed, in.Path)
				}
				if err := distinct(f.outputs(o.files()), listed); err != nil {
					return err
				}
			}
			if err := o.checkParts(len(inputs)); err != nil {
				return err
			}
			return o.run(f, inputs, s)
		},
	}
	f.register(cmd.Flags())
	o.register(cmd.Flags())
	return cmd
}

// fitOutputs are the forms in which `fit` reports.
type fitOutputs struct {
	json, all, sketch bool

	csv, html, netlist, plot, touchstone, residuals string

	points int // of --touchstone; 0: the sweep's own
}

func (o *fitOutputs) register(flags *pflag.FlagSet) {
	flags.BoolVar(&o.json, "json", false, "JSON Lines on standard output, one object a sweep")
	flags.BoolVar(&o.all, "all", false, "print the table of candidates with the reason each was not chosen")
	flags.BoolVar(&o.sketch, "sketch", false, "draw |Z| and phase in the terminal")
	flags.StringVar(&o.csv, "csv", "", "write a table with one row a part to `FILE`")
	flags.StringVar(&o.html, "html", "", "write a page with figures of all parts to `FILE`")
	flags.StringVar(&o.plot, "plot", "", "write the figures to `FILE` ending in .svg, .png or .pdf")
	flags.StringVar(&o.netlist, "netlist", "", "write a SPICE subcircuit for each part to `FILE`")
	flags.StringVar(&o.touchstone, "touchstone", "", "write the model as a one-port .s1p `FILE`")
	flags.IntVar(&o.points, "points", 0, "points of --touchstone at equal steps of log frequency; 0: those of the sweep")
	flags.StringVar(&o.residuals, "residuals", "", "write the points with measured, model and residual to `FILE`")
}

// files lists the output files by their flags.
func (o *fitOutputs) files() map[string]string {
	files := map[string]string{}
	for flag, path := range map[string]string{
		"--csv": o.csv, "--html": o.html, "--netlist": o.netlist, "--plot": o.plot,
		"--touchstone": o.touchstone, "--residuals": o.residuals,
	} {
		if path != "" {
			files[flag] = path
		}
	}
	return files
}

// needsPoints tells whether an output needs the points of every sweep.
func (o *fitOutputs) needsPoints() bool {
	return o.html != "" || o.plot != "" || o.touchstone != "" || o.residuals != "" || o.sketch
}

func (o *fitOutputs) check(f *fitFlags) error {
	if o.points != 0 && (o.points < 2 || o.touchstone == "") {
		return usagef("--points: expected 2 or more, with --touchstone, found %d", o.points)
	}
	if err := o.checkParts(1); err != nil {
		return err
	}
	for _, flag := range []string{"csv", "html", "netlist", "plot", "touchstone", "residuals"} {
		switch name := f.flags.Lookup(flag).Value.String(); {
		case name == "" && f.flags.Changed(flag):
			return usagef("--%s: expected the name of a file, found an empty one", flag)
		case name == "-":
			return usagef(`--%s: expected the name of a file, found "-"; /dev/stdout is standard output`, flag)
		}
	}
	if f.resume && o.needsPoints() {
		return usagef("--resume: expected no output that needs the points of the sweeps (--html, --plot, --touchstone, --residuals, --sketch), since those of an earlier run are not kept")
	}
	return nil
}

// besideSweeps lists the files that are read beside the sweeps.
func (f *fitFlags) besideSweeps() []string {
	files := f.fixture.files()
	for _, name := range []string{f.accuracy, f.filesFrom} {
		if info, err := os.Stat(name); err == nil && info.Mode().IsRegular() {
			files = append(files, name)
		}
	}
	return files
}

// checkParts refuses files that cannot hold so many parts. It is asked with the
// number of inputs, before the work, and with that of the parts in them.
func (o *fitOutputs) checkParts(n int) error {
	if o.touchstone != "" && n > 1 {
		return usagef("--touchstone: expected one sweep, found %d; a .s1p file holds one part", n)
	}
	if o.plot != "" {
		if err := figure.CheckFormat(o.format(), n); err != nil {
			return usagef("--plot %s: %w", o.plot, err)
		}
	}
	return nil
}

// format is the ending of --plot.
func (o *fitOutputs) format() string {
	return strings.ToLower(strings.TrimPrefix(filepath.Ext(o.plot), "."))
}

// kept is what the output files need of a fitted sweep at the end.
type kept struct {
	record *report.Fit
	traces *report.Traces
	model  *fit.Result // for --touchstone alone
}

// fullReports is the number of sweeps up to which each gets its full report in
// the terminal; more are listed with a line each.
const fullReports = 3

func (o *fitOutputs) run(f *fitFlags, inputs []ingest.Input, s streams) error {
	text := !o.json && f.jsonOut == ""
	f.streaming = o.json
	var all, shown []kept
	batchErr := f.batch(inputs, s, func(r fitted) error {
		k := kept{record: r.record}
		if o.needsPoints() && r.analysis != nil {
			k.traces = report.NewTraces(r.analysis.Result, f.request.Settings.Accuracy)
		}
		if o.touchstone != "" && r.analysis != nil {
			k.model = r.analysis.Result
		}
		if len(o.files()) > 0 {
			all = append(all, k)
		}
		if text && r.err == nil {
			shown = append(shown, k)
		}
		if o.json {
			_, err := s.out.Write(r.line)
			return err
		}
		return nil
	})
	if exit, ok := batchErr.(*exitError); batchErr != nil && (!ok || exit.err != nil) {
		return batchErr
	}
	// The files first: a reader of the report may have seen enough of it, and
	// then the pipe ends the program.
	writeErr := o.write(all, f, s)
	if errors.As(writeErr, new(*interruption)) {
		return writeErr
	}
	if len(shown) > 0 {
		if err := o.show(shown, f, s); err != nil {
			return err
		}
	}
	if writeErr != nil {
		return writeErr
	}
	return batchErr
}

// show prints the reports for a person: in full for a few sweeps or where that
// was asked for, else a line each.
func (o *fitOutputs) show(parts []kept, f *fitFlags, s streams) error {
	var b bytes.Buffer
	options := report.TextOptions{
		Width: terminalWidth(s.out), All: o.all, Colour: wantsColour(s.out),
		Quiet: true, // the cautions come once, at the end
	}
	if len(parts) > fullReports && !o.all && !o.sketch && f.advise == "" {
		var fits []*report.Fit
		for _, k := range parts {
			fits = append(fits, k.record)
		}
		if err := report.WriteSummary(&b, fits, options); err != nil {
			return err
		}
		if err := writeLots(&b, fits, f.at, options); err != nil {
			return err
		}
		b.WriteString("\nFit one sweep for its full report, or write a page of all with --html FILE.\n")
	} else {
		for i, k := range parts {
			if i > 0 {
				b.WriteByte('\n')
			}
			if err := report.WriteText(&b, k.record, options); err != nil {
				return err
			}
			if o.sketch {
				b.WriteByte('\n')
				if err := report.Sketch(&b, k.traces, options.Width); err != nil {
					return err
				}
			}
		}
	}
	if !f.quiet {
		if err := writeCautions(&b, options.Width); err != nil {
			return err
		}
	}
	_, err := s.out.Write(b.Bytes())
	return err
}

// writeLots writes the statistics of every lot.
func writeLots(b *bytes.Buffer, fits []*report.Fit, at []float64, o report.TextOptions) error {
	for _, l := range lotsOf(fits) {
		if err := l.WriteText(b, at, lots.TextOptions{Width: o.Width, Colour: o.Colour}); err != nil {
			return err
		}
	}
	return nil
}

// lotsOf groups records in lots of at least three parts: a folder, or a file
// with several parts.
func lotsOf(fits []*report.Fit) []*lots.Lot {
	var out []*lots.Lot
	var names []string
	parts := map[string][]*report.Fit{}
	for _, r := range fits {
		name := r.Sweep.Lot
		if name == "" {
			name = partOf(r.Sweep.File)
		}
		if parts[name] == nil {
			names = append(names, name)
		}
		parts[name] = append(parts[name], r)
	}
	for _, name := range names {
		if len(parts[name]) >= 3 {
			out = append(out, lots.New(name, parts[name]))
		}
	}
	return out
}

// write writes the output files, and none if no part could be fitted. Where
// there is a place for them, the parts that could not have their error.
func (o *fitOutputs) write(all []kept, f *fitFlags, s streams) error {
	var fits []*report.Fit
	var good []kept
	for _, k := range all {
		fits = append(fits, k.record)
		if k.record.Status != report.FitFailed {
			good = append(good, k)
		}
	}
	if len(good) == 0 {
		return nil
	}
	if err := o.checkParts(len(good)); err != nil {
		return err
	}
	jobs := f.jobs
	if jobs == 0 {
		jobs = runtime.GOMAXPROCS(0)
	}
	var failure error
	for _, output := range []struct {
		path  string
		write func(io.Writer) error
	}{
		{o.csv, func(w io.Writer) error { return report.WriteCSV(w, fits) }},
		{o.residuals, func(w io.Writer) error {
			var points []report.Points
			for _, k := range good {
				points = append(points, report.Points{File: k.record.Sweep.File, Part: k.record.Sweep.Part, Traces: k.traces})
			}
			return report.WriteResiduals(w, points)
		}},
		{o.netlist, func(w io.Writer) error {
			return netlist.Write(w, fits, netlist.Options{Jobs: jobs, Made: "realpart " + buildVersion()})
		}},
		{o.plot, func(w io.Writer) error {
			var parts []figure.Part
			for _, k := range good {
				parts = append(parts, figure.Part{Title: k.record.Sweep.Part, Detail: k.record.Circuit.Expression, Traces: k.traces})
			}
			return figure.Write(w, parts, o.format())
		}},
		{o.html, func(w io.Writer) error {
			p := page.Page{Made: []page.Entry{{Name: "Version", Value: buildVersion()}, {Name: "Command", Value: s.command}, {Name: "Weight", Value: f.weightName()}}}
			for _, k := range all {
				p.Parts = append(p.Parts, page.Part{Fit: k.record, Traces: k.traces})
			}
			var err error
			if p.Lots, err = lotpage.Sections(lotsOf(fits), f.at); err != nil {
				return err
			}
			return page.Write(w, p, jobs)
		}},
		{o.touchstone, func(w io.Writer) error { return o.writeTouchstone(w, good[0]) }},
	} {
		if output.path == "" {
			continue
		}
		err := writeFile(output.path, output.write)
		switch {
		case errors.As(err, new(*interruption)):
			return err
		case err != nil && failure == nil:
			failure = err
		case err != nil: // the other files are written all the same
			failure = fmt.Errorf("%w; %w", failure, err)
		}
	}
	return failure
}

// writeTouchstone writes the fitted model on the grid of the sweep or on one
// of --points.
func (o *fitOutputs) writeTouchstone(w io.Writer, k kept) error {
	freq, z := report.ModelSweep(k.model)
	if o.points > 0 {
		grid, err := grid(freq[0], freq[len(freq)-1], o.points, "log")
		if err != nil {
			return err
		}
		freq, z = grid, make([]complex128, len(grid))
		k.model.Circuit.NewEvaluator(freq).Impedance(z, k.model.Values())
	}
	comment := []string{"fitted model, not measured: " + k.record.Sweep.File, k.record.Circuit.Expression}
	for _, p := range k.record.Parameters {
		comment = append(comment, fmt.Sprintf("%s = %v %s", p.Name, p.Value, ascii(p.Unit)))
	}
	return ingest.WriteTouchstone(w, freq, z, comment)
}

// ascii spells a unit with the characters that a Touchstone file may hold.
func ascii(unit string) string {
	return strings.NewReplacer("Ω", "ohm", "·", "*", "½", "0.5", "−", "-").Replace(unit)
}
