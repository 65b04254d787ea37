package main

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"realpart/ingest"
	"realpart/models/quantity"
	"realpart/report"
	"realpart/report/derating"
	"realpart/report/lots"
)

func newDerate(s streams) *cobra.Command {
	f := newFitFlags()
	d := newDerateFlags()
	cmd := &cobra.Command{
		Use:   "derate SWEEP… --ripple CURRENT",
		Short: "Take a part to a ripple current: loss, temperature, margins",
		Long: `Derate fits the sweep of a part, or the sweeps of a lot, and says what a ripple
current does to it: the loss by harmonic, the temperature, the voltage, the
margins to the limits that you give, and the largest ripple current. It judges
only against limits that you give. Of a lot it takes the upper one-sided
tolerance bound of the ESR (95 % of the lot with 95 % confidence). A JSON Lines
file written by realpart fit --json stands for the sweeps that it is of; all
arguments together are one lot, and NAME=PATH names it.

A ripple current is written as RMS values at frequencies, as a waveform, or is
the name of a CSV file with the header frequency,i_rms or, for one period in
equal steps, time,current:

  100kHz=3.2A,200kHz=0.9A
  triangle:2.4App@180kHz             peak to peak; duty= the share that rises
  rectangle:3A,duty=0.3@100kHz       3 A is the step
  trapezoid:3A,duty=0.3,rise=80ns@100kHz
                                     duty between the middles of the edges,
                                     fall= where it differs from rise

Direct current, which heats a choke, is 0Hz=5A or mean=5A.

Several sweeps that state temperatures 5 K or more apart, in the file or by
--at-temperature, are one part at several temperatures.`,
		Example: `  realpart derate c017.csv --ripple triangle:2.4App@180kHz --rth 18 --ambient 60 --limit 105 --margin 10
  realpart derate lot-heron/ --ripple 120Hz=1.1A,100kHz=0.8A --rated-ripple 2.1A@100kHz --rated-rise 5K --ambient 60 --limit 105
  realpart derate c017.csv --at-temperature c017.csv=23 --at-temperature c017-hot.csv=85 --ripple spectrum.csv --rth 18 --ambient 60`,
		Args: f.arguments,
		RunE: func(_ *cobra.Command, args []string) error {
			if err := f.check(); err != nil {
				return err
			}
			if err := d.check(f); err != nil {
				return err
			}
			if err := distinct(f.outputs(d.files()), slices.Concat(f.besideSweeps(), d.inputs(args))); err != nil {
				return err
			}
			sources, err := f.derateSources(args, s)
			if err != nil {
				return err
			}
			if f.showReading {
				return f.showReadings(inputsOf(sources), s)
			}
			return d.run(f, sources, s)
		},
	}
	f.register(cmd.Flags())
	d.register(cmd.Flags())
	return cmd
}

// amount is a flag of a value with a unit, nil until it is given.
type amount struct {
	unit  string
	value *float64
}

func (a *amount) String() string {
	if a.value == nil {
		return ""
	}
	return quantity.Format(*a.value, a.unit, 6)
}
func (a *amount) Type() string { return a.unit }
func (a *amount) Set(text string) error {
	v, err := quantity.Parse(text, a.unit)
	if err != nil {
		return err
	}
	a.value = &v
	return nil
}

// pair is a flag of two values, such as 2.1A@100kHz; nil until it is given.
type pair struct {
	units  [2]string
	sample string
	values *[2]float64
}

func (p *pair) String() string {
	if p.values == nil {
		return ""
	}
	return quantity.Format(p.values[0], p.units[0], 6) + "@" + quantity.Format(p.values[1], p.units[1], 6)
}
func (p *pair) Type() string { return p.sample }
func (p *pair) Set(text string) error {
	first, second, ok := strings.Cut(text, "@")
	if !ok {
		return fmt.Errorf("expected two values such as %s, found %q", p.sample, text)
	}
	var v [2]float64
	for i, part := range []string{first, second} {
		var err error
		if v[i], err = quantity.Parse(part, p.units[i]); err != nil {
			return err
		}
	}
	p.values = &v
	return nil
}

// temperatures is the repeatable flag FILE=T.
type temperatures struct {
	files  []string
	values []float64 // °C
}

func (t *temperatures) String() string { return "" }
func (t *temperatures) Type() string   { return "FILE=T" }
func (t *temperatures) Set(text string) error {
	i := strings.LastIndex(text, "=")
	if i <= 0 || i == len(text)-1 {
		return fmt.Errorf("expected FILE=T, such as c017-hot.csv=85, found %q", text)
	}
	v, err := quantity.Parse(text[i+1:], "°C")
	if err != nil {
		return err
	}
	file := text[:i]
	if slices.ContainsFunc(t.files, func(f string) bool { return identity(f) == identity(file) }) {
		return fmt.Errorf("expected each file once, found %s again", file)
	}
	t.files, t.values = append(t.files, file), append(t.values, v)
	return nil
}

// of returns the temperature stated for a file.
func (t *temperatures) of(file string) (float64, bool) {
	for i, f := range t.files {
		if identity(f) == identity(file) {
			return t.values[i], true
		}
	}
	return 0, false
}

// derateFlags are those of `derate` alone.
type derateFlags struct {
	ripple                                             string
	json                                               bool
	html                                               string
	rth, ratedRise, ratedESR                           amount
	ratedRipple, life                                  pair
	ambient, limit, margin, dc, ratedVoltage, fraction amount
	temperatures                                       temperatures

	// filled by check
	spectrum   *derating.Spectrum
	conditions derating.Conditions
}

func newDerateFlags() *derateFlags {
	return &derateFlags{
		rth: amount{unit: "K/W"}, ratedRise: amount{unit: "K"}, ratedESR: amount{unit: "Ω"},
		ratedRipple: pair{units: [2]string{"A", "Hz"}, sample: "2.1A@100kHz"},
		life:        pair{units: [2]string{"h", "°C"}, sample: "5000h@105C"},
		ambient:     amount{unit: "°C"}, limit: amount{unit: "°C"}, margin: amount{unit: "K"},
		dc: amount{unit: "V"}, ratedVoltage: amount{unit: "V"}, fraction: amount{unit: "1"},
	}
}

func (d *derateFlags) register(flags *pflag.FlagSet) {
	flags.StringVar(&d.ripple, "ripple", "", "the ripple `CURRENT`: 100kHz=3.2A,200kHz=0.9A (RMS), triangle:2.4App@180kHz, a CSV file …")
	flags.Var(&d.rth, "rth", "thermal resistance from the part's hot spot to ambient, `K/W`")
	flags.Var(&d.ratedRipple, "rated-ripple", "the data sheet's ripple current (RMS) and its frequency, such as `2.1A@100kHz`: with --rated-rise it gives the thermal resistance")
	flags.Var(&d.ratedRise, "rated-rise", "the rise that the rated ripple current permits, in `K`")
	flags.Var(&d.ratedESR, "rated-esr", "the `ESR` that the rating stands for; without it that of the fit, for a lot the mean")
	flags.Var(&d.ambient, "ambient", "ambient temperature in `°C`")
	flags.Var(&d.limit, "limit", "highest hot spot in `°C`")
	flags.Var(&d.margin, "margin", "what the hot spot must stay below the limit, in `K`")
	flags.Var(&d.dc, "dc", "direct voltage across the capacitor, `V`")
	flags.Var(&d.ratedVoltage, "rated-voltage", "rated voltage, `V`")
	flags.Var(&d.fraction, "voltage-factor", "the share of the rated voltage that you permit, a `NUMBER` up to 1")
	flags.Var(&d.life, "life", "life of a wet aluminium electrolytic and the temperature that it is stated for, such as `5000h@105C`")
	flags.Var(&d.temperatures, "at-temperature", "`FILE=T`: a sweep of the same part at a temperature in °C; may be repeated")
	flags.BoolVar(&d.json, "json", false, "one JSON object on standard output")
	flags.StringVar(&d.html, "html", "", "write a page with figures to `FILE`: loss by harmonic, temperature over ripple current")
}

// files lists the output files by their flags.
func (d *derateFlags) files() map[string]string {
	if d.html == "" {
		return map[string]string{}
	}
	return map[string]string{"--html": d.html}
}

// inputs lists the files that are read.
func (d *derateFlags) inputs(args []string) []string {
	in := slices.Clone(d.temperatures.files)
	for _, a := range args {
		_, path := splitName(a)
		in = append(in, path)
	}
	if !derating.IsRipple(d.ripple) {
		in = append(in, d.ripple)
	}
	// A file may be named as a sweep and for its temperature.
	slices.Sort(in)
	return slices.Compact(in)
}

// check reads all flags before any sweep is opened.
func (d *derateFlags) check(f *fitFlags) error {
	if d.ripple == "" {
		return usagef("--ripple: expected a ripple current such as triangle:2.4App@180kHz, found none")
	}
	if f.resume {
		return usagef("--resume: expected a fit of every sweep, which derate needs, found the wish to skip some; leave it out")
	}
	positive := []struct {
		flag  string
		value *float64
	}{
		{"--rth", d.rth.value}, {"--rated-rise", d.ratedRise.value}, {"--rated-esr", d.ratedESR.value},
		{"--rated-voltage", d.ratedVoltage.value}, {"--voltage-factor", d.fraction.value},
	}
	if p := d.ratedRipple.values; p != nil {
		positive = append(positive, struct {
			flag  string
			value *float64
		}{"--rated-ripple", &p[0]}, struct {
			flag  string
			value *float64
		}{"--rated-ripple", &p[1]})
	}
	if p := d.life.values; p != nil {
		positive = append(positive, struct {
			flag  string
			value *float64
		}{"--life", &p[0]})
	}
	for _, q := range positive {
		if q.value != nil && !(*q.value > 0) {
			return usagef("%s: expected a value above 0, found %v", q.flag, *q.value)
		}
	}
	const zero = -273.15 // °C
	temperatures := append([]float64{}, d.temperatures.values...)
	for _, t := range []*float64{d.ambient.value, d.limit.value} {
		if t != nil {
			temperatures = append(temperatures, *t)
		}
	}
	if p := d.life.values; p != nil {
		temperatures = append(temperatures, p[1])
	}
	for _, t := range temperatures {
		if !(t > zero) {
			return usagef("--ambient, --limit, --life, --at-temperature: expected a temperature above −273.15 °C, found %v °C", t)
		}
	}
	given := func(v *float64) bool { return v != nil }
	hot := given(d.rth.value) || d.ratedRipple.values != nil
	for _, rule := range []struct {
		broken bool
		text   string
	}{
		{given(d.rth.value) && d.ratedRipple.values != nil, "--rth, --rated-ripple: expected one of them, found both"},
		{d.ratedRipple.values != nil && !given(d.ratedRise.value), "--rated-ripple: expected --rated-rise with it, found none; state the rise that the data sheet gives for that current"},
		{given(d.ratedRise.value) && d.ratedRipple.values == nil, "--rated-rise: expected --rated-ripple with it, found none"},
		{given(d.ratedESR.value) && d.ratedRipple.values == nil, "--rated-esr: expected --rated-ripple with it, found none"},
		{given(d.limit.value) && !(hot && given(d.ambient.value)), "--limit: expected --ambient, and --rth or --rated-ripple, so that there is a hot spot to compare with, found not all of them"},
		{given(d.ambient.value) && !hot, "--ambient: expected --rth or --rated-ripple with it, found neither"},
		{d.life.values != nil && !(hot && given(d.ambient.value)), "--life: expected --ambient, and --rth or --rated-ripple, so that there is a hot spot, found not all of them"},
		{given(d.margin.value) && !given(d.limit.value), "--margin: expected --limit with it, found none"},
		{given(d.margin.value) && *orZero(d.margin.value) < 0, "--margin: expected 0 K or more, found less"},
		{given(d.ratedVoltage.value) && !given(d.dc.value), "--rated-voltage: expected --dc with it, found none; 0 stands for no direct voltage"},
		{given(d.fraction.value) && !given(d.ratedVoltage.value), "--voltage-factor: expected --rated-voltage with it, found none"},
		{*orZero(d.fraction.value) > 1, "--voltage-factor: expected a number up to 1, found more"},
	} {
		if rule.broken {
			return usagef("%s", rule.text)
		}
	}
	var err error
	if d.spectrum, err = readRipple(d.ripple); err != nil {
		return err
	}
	c := derating.Conditions{
		RTh: d.rth.value, Ambient: d.ambient.value, Limit: d.limit.value, Margin: *orZero(d.margin.value),
	}
	if p := d.ratedRipple.values; p != nil {
		c.Rating = &derating.Rating{Current: p[0], Freq: p[1], Rise: *d.ratedRise.value, ESR: d.ratedESR.value}
	}
	if d.dc.value != nil {
		c.Voltage = &derating.VoltageConditions{DC: *d.dc.value, Rated: d.ratedVoltage.value, Factor: d.fraction.value}
	}
	if p := d.life.values; p != nil {
		c.Life = &derating.LifeRating{Hours: p[0], TemperatureC: p[1]}
	}
	d.conditions = c
	return nil
}

func orZero(v *float64) *float64 {
	if v == nil {
		return new(float64)
	}
	return v
}

// derateSources opens the arguments and --files-from: sweeps, or records of
// fits.
func (f *fitFlags) derateSources(args []string, s streams) ([]*lotSource, error) {
	var sources []*lotSource
	for _, a := range args {
		l, err := f.findLot(a, s)
		if err != nil {
			return nil, err
		}
		if name, _ := splitName(a); name != "" {
			for i := range l.inputs {
				l.inputs[i].Lot = name
			}
		}
		sources = append(sources, l)
	}
	if f.filesFrom != "" {
		listed, err := f.find(nil, s)
		if err != nil {
			return nil, err
		}
		sources = append(sources, &lotSource{inputs: listed})
	}
	return sources, nil
}

// furtherSources opens the files that only --at-temperature names: they are of
// the part, not of the lot.
func (d *derateFlags) furtherSources(f *fitFlags, sources []*lotSource, s streams) ([]*lotSource, error) {
	known := map[string]bool{}
	for _, l := range sources {
		if l.records != nil {
			known[identity(l.path)] = true
		}
		for _, in := range l.inputs {
			known[identity(in.Path)] = true
		}
		for _, r := range l.records {
			known[identity(r.Sweep.File)] = true
		}
	}
	var further []*lotSource
	for _, file := range d.temperatures.files {
		if known[identity(file)] {
			continue
		}
		l, err := f.findLot(file, s)
		if err != nil {
			return nil, err
		}
		further = append(further, l)
	}
	return further, nil
}

// gathered are the sweeps that an assessment is made of.
type gathered struct {
	parts, series []derating.Sweep
	named         []derating.Sweep // the parts that --at-temperature names
	lots          []string         // of the parts, "" for none
	noAccuracy    bool             // a sweep was fitted without a stated accuracy
}

// add takes a sweep of the part or the lot; a further one is of the series
// alone. files are the names by which --at-temperature may know it.
func (d *derateFlags) add(g *gathered, sweep derating.Sweep, lot string, further bool, files ...string) {
	i := slices.IndexFunc(files, func(file string) bool { _, ok := d.temperatures.of(file); return ok })
	if i >= 0 {
		sweep.Temperature, _ = d.temperatures.of(files[i])
	}
	if further {
		g.series = append(g.series, sweep)
		return
	}
	if i >= 0 {
		g.named = append(g.named, sweep)
	}
	g.parts, g.lots = append(g.parts, sweep), append(g.lots, lot)
}

// addRecords takes the records of a source, each sweep once. Those that failed
// are told on standard error, a line each, and counted.
func (d *derateFlags) addRecords(g *gathered, l *lotSource, further bool, s streams) error {
	failed := 0
	fail := func(where, why string) {
		failed++
		fmt.Fprintf(s.err, "realpart: %s: the record of %s: %s\n", l.path, where, oneLine(why))
	}
	for _, r := range l.records {
		switch {
		case r.Status == report.FitFailed:
			where := r.Sweep.File
			if r.Error.Line > 0 {
				where += fmt.Sprintf(":%d", r.Error.Line)
				if r.Error.Column > 0 {
					where += fmt.Sprintf(":%d", r.Error.Column)
				}
			}
			fail(where, r.Error.Text)
		case r.Status != report.Converged:
			fail(r.Sweep.File, "the fit did not converge")
		}
	}
	for _, r := range lots.New(l.name, l.records).Fits {
		sweep, err := derating.FromRecord(r)
		if err != nil {
			fail(r.Sweep.File, err.Error())
			continue
		}
		g.noAccuracy = g.noAccuracy || !r.AccuracyStated()
		d.add(g, sweep, l.name, further, r.Sweep.File, l.path)
	}
	if failed == 0 {
		return nil
	}
	if len(l.records) > 1 {
		fmt.Fprintf(s.err, "realpart: %s: %d of %d records failed\n", l.path, failed, len(l.records))
	}
	return &exitError{code: exitFailure}
}

// gather fits the sweeps of all sources and takes the records. The error has
// been told where there are parts to go on with.
func (d *derateFlags) gather(f *fitFlags, sources []*lotSource, s streams) (*gathered, error) {
	further, err := d.furtherSources(f, sources, s)
	if err != nil {
		return nil, err
	}
	f.adopt(slices.Concat(sources, further))
	g := &gathered{}
	var failure error
	for i, l := range slices.Concat(sources, further) {
		if err := d.addRecords(g, l, i >= len(sources), s); err != nil {
			failure = err
		}
	}
	arguments := inputsOf(sources)
	inputs := slices.Concat(arguments, inputsOf(further))
	var groups []lot
	for _, in := range [][]ingest.Input{arguments, inputs[len(arguments):]} {
		if len(in) > 0 {
			groups = append(groups, lot{in, len(in) > 1})
		}
	}
	if len(groups) == 0 {
		return g, failure
	}
	err = f.batchLots(groups, s, func(r fitted) error {
		if r.err != nil || r.record.Status != report.Converged {
			return nil
		}
		sweep := derating.Sweep{
			File: r.record.Sweep.File, Part: r.record.Sweep.Part, SHA256: r.record.Sweep.SHA256,
			Kind: r.analysis.Kind, Fit: r.analysis.Result, Temperature: math.NaN(),
		}
		for _, w := range r.record.Warnings {
			sweep.Warnings = append(sweep.Warnings, derating.Warning(w))
		}
		if m := r.sweep.Metadata; m.HasTemperature {
			sweep.Temperature = m.TemperatureC
		}
		g.noAccuracy = g.noAccuracy || f.accuracy == ""
		d.add(g, sweep, r.record.Sweep.Lot, r.input >= len(arguments), inputs[r.input].Path)
		return nil
	})
	if !told(err) {
		return nil, err
	}
	if err == nil {
		err = failure
	}
	return g, err
}

func (d *derateFlags) run(f *fitFlags, sources []*lotSource, s streams) error {
	g, batchErr := d.gather(f, sources, s)
	if !told(batchErr) || len(g.parts) == 0 {
		return batchErr
	}
	parts, series, named := g.parts, g.series, g.named
	d.conditions.AccuracyStated = !g.noAccuracy
	if len(slices.Compact(g.lots)) == 1 {
		d.conditions.Lot = g.lots[0]
	}
	if d.conditions.Lot == "" && !slices.ContainsFunc(parts, func(p derating.Sweep) bool { return p.File != parts[0].File }) {
		d.conditions.Lot = partOf(parts[0].File) // several parts in a file
	}
	if onePart(parts) {
		series = append(parts[:len(parts):len(parts)], series...)
		parts = parts[:1]
	} else if len(parts) > 1 && len(named) > 0 {
		// One part of a lot is the one of the series, and the lot was
		// measured with it.
		series = append(named, series...)
		for i := range parts {
			if math.IsNaN(parts[i].Temperature) {
				parts[i].Temperature = named[0].Temperature
			}
		}
	}
	assessment, err := derating.Assess(parts, series, d.spectrum, d.conditions)
	if err != nil {
		return worse(batchErr, err)
	}
	if d.html != "" {
		made := []derating.Made{{Name: "Version", Value: buildVersion()}, {Name: "Command", Value: s.command}}
		if err := writeFile(d.html, func(w io.Writer) error { return assessment.WritePage(w, made) }); err != nil {
			return err
		}
	}
	if d.json {
		err = assessment.WriteJSON(s.out)
	} else {
		err = assessment.WriteText(s.out, derating.TextOptions{Width: min(terminalWidth(s.out), 100), Colour: wantsColour(s.out), Quiet: f.quiet})
	}
	if err != nil {
		return err
	}
	if batchErr == nil && assessment.Verdict == derating.Exceeded {
		return &exitError{code: exitNo}
	}
	return batchErr
}

// apart is the difference in K from which two stated temperatures are meant to
// differ; a lot is measured at one, give or take the room's.
const apart = 5

// onePart tells one part at several temperatures from a lot: all sweeps state
// one, and no two are alike.
func onePart(sweeps []derating.Sweep) bool {
	if len(sweeps) < 2 {
		return false
	}
	var t []float64
	for _, s := range sweeps {
		if math.IsNaN(s.Temperature) {
			return false
		}
		t = append(t, s.Temperature)
	}
	slices.Sort(t)
	for i := 1; i < len(t); i++ {
		if t[i]-t[i-1] < apart {
			return false
		}
	}
	return true
}
