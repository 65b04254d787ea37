package main

import (
	"fmt"
	"io"
	"io/fs"
	"math"
	"os"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"realpart/ingest"
	"realpart/models"
	"realpart/models/quantity"
	"realpart/report"
	"realpart/report/accept"
	"realpart/report/lotpage"
	"realpart/report/lots"
)

func newAccept(s streams) *cobra.Command {
	f := newFitFlags()
	o := acceptFlags{}
	cmd := &cobra.Command{
		Use:   "accept --limits LIMITS SWEEP…",
		Short: "Judge parts and lots against limits: pass, fail or undecided",
		Long: `Accept fits the sweeps and judges every part against a table of limits, with a
guard band of the expanded uncertainty (JCGM 106:2012): pass is inside the limits
by that much, fail is outside by more than that, else the verdict is undecided.

The table is CSV with the header figure,at,low,high; an empty cell is no limit:

  figure,at,low,high
  Cs,120Hz,376uF,564uF
  ESR,100kHz,,35mOhm
  SRF,,1MHz,

A name with a frequency is a figure (ESR, X, Cs, Cp, Ls, Lp, D, Q, Z, phase); one
without is a parameter of the circuit or SRF, the first self-resonance.

Each folder, file with several parts or JSON Lines file of realpart fit --json is
a lot, and so are single files together. A lot is accepted if at most
--accept-at-most parts do not pass; undecided ones do not.`,
		Example: `  realpart accept --limits limits.csv --accuracy 0.1%,0.05deg lot-heron/
  realpart accept --limits limits.csv --accept-at-most 1 heron.jsonl`,
		Args: f.arguments,
		RunE: func(_ *cobra.Command, args []string) error {
			if err := f.check(); err != nil {
				return err
			}
			return o.run(f, args, s)
		},
	}
	f.register(cmd.Flags())
	flags := cmd.Flags()
	flags.StringVar(&o.limits, "limits", "", "`FILE` with the table of limits")
	flags.StringVar(&o.rule, "rule", string(accept.Guarded), "`guarded` or simple: simple takes the value alone")
	flags.IntVar(&o.acceptAtMost, "accept-at-most", 0, "accept a lot in which at most `N` parts do not pass")
	flags.StringVar(&o.html, "html", "", "write a page with the verdicts and strips of every figure to `FILE`")
	flags.BoolVar(&o.json, "json", false, "JSON Lines on standard output: an object a part, then one for the lot")
	return cmd
}

type acceptFlags struct {
	limits, rule string
	acceptAtMost int
	json         bool
	html         string
}

func (o *acceptFlags) run(f *fitFlags, args []string, s streams) error {
	rule := accept.Rule(o.rule)
	if rule != accept.Guarded && rule != accept.Simple {
		return usagef("--rule: expected guarded or simple, found %q", o.rule)
	}
	if o.acceptAtMost < 0 {
		return usagef("--accept-at-most: expected 0 or more, found %d", o.acceptAtMost)
	}
	if o.limits == "" {
		return usagef("--limits: expected a table of limits, found none")
	}
	var paths []string
	for _, a := range args {
		_, path := splitName(a)
		paths = append(paths, path)
	}
	if err := distinct(f.outputs(htmlOutput(o.html)), slices.Concat(f.besideSweeps(), paths, []string{o.limits})); err != nil {
		return err
	}
	limits, lines, err := readLimits(o.limits, f.request.Circuit)
	if err != nil {
		return err
	}
	for _, l := range limits {
		if at := l.Figure.AtHz; at > 0 && !slices.Contains(f.at, at) {
			f.at = append(f.at, at)
		}
	}
	slices.Sort(f.at)
	sources, err := f.acceptLots(args, s)
	if err != nil {
		return err
	}
	if f.showReading {
		return f.showReadings(inputsOf(sources), s)
	}
	batchErr := f.fitLots(sources, false, s)
	if !told(batchErr) {
		return batchErr
	}
	if err := o.checkFigures(limits, lines, sources); err != nil {
		return err
	}
	layout := report.NewLayout(terminalWidth(s.out), wantsColour(s.out))
	accepted := true
	var judged []lotpage.Judged
	for i, source := range sources {
		verdict, parts, samples := judge(source, limits, rule, o.acceptAtMost)
		accepted = accepted && verdict.Verdict == accept.Accepted
		judged = append(judged, lotpage.Judged{Lot: lots.New(source.name, source.fits()), Verdict: verdict, Parts: parts, Samples: samples})
		if o.json {
			for _, p := range parts {
				if err := writeJSON(s.out, p); err != nil {
					return err
				}
			}
			if err := writeJSON(s.out, verdict); err != nil {
				return err
			}
			continue
		}
		if i > 0 {
			layout.Line("")
		}
		accept.WriteText(layout, verdict, parts, rule, samples, limits)
	}
	if !o.json {
		if _, err := io.WriteString(s.out, layout.String()); err != nil {
			return err
		}
		if !f.quiet {
			if err := writeCautions(s.out, terminalWidth(s.out)); err != nil {
				return err
			}
		}
	}
	if o.html != "" {
		if err := writeFile(o.html, func(w io.Writer) error {
			return lotpage.WriteAcceptance(w, judged, rule, limits, madeOf(sources, s))
		}); err != nil {
			return err
		}
	}
	if !accepted {
		return worse(batchErr, &exitError{code: exitNo})
	}
	return batchErr
}

// acceptLots groups the arguments: single files and --files-from make one lot.
func (f *fitFlags) acceptLots(args []string, s streams) ([]*lotSource, error) {
	var sources []*lotSource
	var loose *lotSource
	add := func(l *lotSource) {
		if loose == nil {
			loose = l
			sources = append(sources, l)
			return
		}
		loose.inputs = append(loose.inputs, l.inputs...)
		loose.name = "files"
	}
	for _, a := range args {
		l, err := f.findLot(a, s)
		if err != nil {
			return nil, err
		}
		name, _ := splitName(a)
		if name == "" && len(l.inputs) == 1 && l.inputs[0].Lot == "" {
			add(l)
		} else {
			sources = append(sources, l)
		}
	}
	if f.filesFrom != "" {
		listed, err := f.find(nil, s)
		if err != nil {
			return nil, err
		}
		add(&lotSource{name: "files", inputs: listed})
	}
	return sources, nil
}

// judge judges the parts of a lot and the lot.
func judge(source *lotSource, limits []accept.Limit, rule accept.Rule, acceptAtMost int) (accept.Lot, []accept.Part, []lots.Sample) {
	parts := []accept.Part{}
	for _, fit := range source.fits() {
		parts = append(parts, accept.Judge(fit, limits, rule))
	}
	verdict := accept.JudgeLot(source.name, parts, acceptAtMost)
	var samples []lots.Sample
	l := lots.New(source.name, source.fits())
	verdict.Caution(l, rule)
	if circuit := lots.Circuit([]*lots.Lot{l}); circuit != nil {
		for _, limit := range limits {
			sample := l.Sample(limit.Figure, circuit.Expression, false)
			samples = append(samples, sample)
			verdict.Figures = append(verdict.Figures, sample.Statistics(limit.Low, limit.High))
		}
	}
	return verdict, parts, samples
}

// checkFigures finds limits that no part can be judged by: a misspelt
// parameter, or records without the figure.
func (o *acceptFlags) checkFigures(limits []accept.Limit, lines []int, sources []*lotSource) error {
	for i, l := range limits {
		fitted, found := 0, false
		var known []string
		for _, source := range sources {
			for _, fit := range source.fits() {
				if fit.Status == report.FitFailed {
					continue
				}
				fitted++
				_, ok := lots.Read(fit, l.Figure)
				found = found || ok
				for _, p := range fit.Parameters {
					if !slices.Contains(known, p.Name) {
						known = append(known, p.Name)
					}
				}
			}
		}
		switch {
		case found || fitted == 0:
		case l.Figure.AtHz > 0:
			return usagef("%s:%d: expected a figure that the records have, found %s; fit again with --at %s", o.limits, lines[i], l.Figure, quantity.Format(l.Figure.AtHz, "Hz", 6))
		default:
			return usagef("%s:%d: expected a parameter of the circuit (%s) or SRF, found %q%s; name the circuit with --circuit, or give a frequency for a figure", o.limits, lines[i], strings.Join(known, ", "), l.Figure.Name, didYouMean(l.Figure.Name, known))
		}
	}
	return nil
}

// limitRow is a row of the table of limits.
type limitRow struct {
	Figure string `csv:"figure"`
	At     string `csv:"at"`
	Low    string `csv:"low"`
	High   string `csv:"high"`
}

// readLimits reads the table of limits, with the line of each.
func readLimits(path string, circuit *models.Circuit) ([]accept.Limit, []int, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, nil, usagef("--limits: cannot read %q: %w", path, cause(err))
	}
	defer file.Close()
	rows, lines, err := ingest.ReadTableLines[limitRow](path, file)
	if err != nil {
		if pathErr, ok := err.(*fs.PathError); ok {
			return nil, nil, usagef("--limits: cannot read %q: %w", path, pathErr.Err)
		}
		return nil, nil, &exitError{exitUsage, err}
	}
	var out []accept.Limit
	for i, row := range rows {
		l, err := row.limit(circuit)
		if err != nil {
			return nil, nil, usagef("%s:%d: %w", path, lines[i], err)
		}
		for k, other := range out {
			if other.Figure == l.Figure {
				return nil, nil, usagef("%s:%d: expected each figure once, found %s again (line %d)", path, lines[i], l.Figure, lines[k])
			}
		}
		out = append(out, l)
	}
	return out, lines, nil
}

func (row limitRow) limit(circuit *models.Circuit) (accept.Limit, error) {
	l := accept.Limit{Figure: lots.Figure{Name: row.Figure}, Low: math.NaN(), High: math.NaN()}
	name := models.Figure(row.Figure)
	switch {
	case row.Figure == "":
		return l, fmt.Errorf("expected the name of a figure, found an empty cell")
	case row.At != "":
		at, err := frequency(row.At)
		if err != nil {
			return l, fmt.Errorf("at: %w", err)
		}
		if !name.Known() {
			var known []string
			for _, f := range models.Figures() {
				known = append(known, string(f))
			}
			return l, fmt.Errorf("expected a figure (%s), found %q%s; a parameter or SRF has no frequency", strings.Join(known, ", "), row.Figure, didYouMean(row.Figure, known))
		}
		l.Figure.AtHz, l.Figure.Unit = at, name.Unit()
	case row.Figure == lots.SRF:
		l.Figure.Unit = "Hz"
	default:
		p, ok := parameterOf(circuit, row.Figure)
		if !ok && name.Known() {
			return l, fmt.Errorf("expected a frequency for %s in the column at, found none", row.Figure)
		}
		if !ok {
			return l, fmt.Errorf("expected a parameter of a circuit, SRF, or a figure with a frequency, found %q", row.Figure)
		}
		l.Figure.Unit = p.Unit
	}
	for _, side := range []struct {
		name, text string
		limit      *float64
	}{{"low", row.Low, &l.Low}, {"high", row.High, &l.High}} {
		if side.text == "" {
			continue
		}
		v, err := parseParameter(models.Parameter{Unit: l.Figure.Unit}, side.text)
		if l.Figure.AtHz > 0 || l.Figure.Name == lots.SRF {
			v, err = quantity.Parse(side.text, l.Figure.Unit)
		}
		if err != nil {
			return l, fmt.Errorf("%s: %w", side.name, err)
		}
		*side.limit = v
	}
	switch {
	case math.IsNaN(l.Low) && math.IsNaN(l.High):
		return l, fmt.Errorf("expected a limit in low or high, found none for %s", l.Figure)
	case l.Low > l.High:
		return l, fmt.Errorf("expected low not above high, found %s and %s for %s", row.Low, row.High, l.Figure)
	}
	return l, nil
}

// parameterOf finds a parameter by its name: in the circuit if it is known,
// else in the library, else by the letter that says the element.
func parameterOf(circuit *models.Circuit, name string) (models.Parameter, bool) {
	circuits := []*models.Circuit{circuit}
	if circuit == nil {
		circuits = nil
		for _, m := range models.Library() {
			circuits = append(circuits, m.Circuit)
		}
		if c, err := models.Parse(name); err == nil {
			circuits = append(circuits, c)
		}
	}
	for _, c := range circuits {
		if i, ok := c.Index(name); ok {
			return c.Parameters()[i], true
		}
	}
	return models.Parameter{}, false
}
