package main

import (
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"realpart/models/quantity"
	"realpart/report/lotpage"
	"realpart/report/lots"
	"realpart/report/page"
)

func newCompare(s streams) *cobra.Command {
	f := newFitFlags()
	m := margins{}
	var asJSON, exclude bool
	var html string
	cmd := &cobra.Command{
		Use:   "compare LOT LOT…",
		Short: "Compare lots with the first of them",
		Long: `Compare fits the sweeps of each lot and compares every figure with that of the
first lot, the reference: parameters of the circuit, the first self-resonance,
and the figures of data sheets at --at. The answer comes in words first.

A lot is a folder, a file with several parts, or a JSON Lines file written by
realpart fit --json; NAME=PATH names it. All lots get one circuit, the one with
the smallest sum of AICc over all parts, unless --circuit says which.`,
		Example: `  realpart compare lot-heron/ lot-otter/
  realpart compare --margin C=5% --margin ESR=10% --at 100kHz a=heron.jsonl b=otter.jsonl`,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) < 2 {
				return usagef("expected two lots or more, found %d; a lot is a folder, a file with several parts or a JSON Lines file", len(args))
			}
			return nil
		},
		RunE: func(_ *cobra.Command, args []string) error {
			if err := f.check(); err != nil {
				return err
			}
			if f.filesFrom != "" {
				return usagef("--files-from: expected lots as arguments, found a list; a list has no lots")
			}
			var paths []string
			for _, a := range args {
				_, path := splitName(a)
				paths = append(paths, path)
			}
			if err := distinct(f.outputs(htmlOutput(html)), slices.Concat(f.besideSweeps(), paths)); err != nil {
				return err
			}
			var sources []*lotSource
			for i, a := range args {
				l, err := f.findLot(a, s)
				if err != nil {
					return err
				}
				for _, other := range sources {
					if other.name == l.name {
						_, l.name = splitName(args[i]) // the path tells them apart
					}
				}
				sources = append(sources, l)
			}
			if f.showReading {
				return f.showReadings(inputsOf(sources), s)
			}
			f.adopt(sources)
			batchErr := f.fitLots(sources, true, s)
			if !told(batchErr) {
				return batchErr
			}
			var all []*lots.Lot
			for _, l := range sources {
				all = append(all, lots.New(l.name, l.fits()))
			}
			c, err := lots.Compare(all, lots.Options{At: f.at, Margins: m, ExcludeOutliers: exclude})
			switch {
			case errors.Is(err, lots.ErrEmpty) && batchErr != nil:
				return batchErr // which has told why
			case err != nil:
				return worse(batchErr, usagef("%w", err))
			}
			if asJSON {
				err = writeJSON(s.out, c)
			} else {
				err = c.WriteText(s.out, lots.TextOptions{Width: terminalWidth(s.out), Colour: wantsColour(s.out)})
				if err == nil && !f.quiet {
					err = writeCautions(s.out, terminalWidth(s.out))
				}
			}
			if err != nil {
				return err
			}
			if html != "" {
				if err := writeFile(html, func(w io.Writer) error {
					return lotpage.WriteComparison(w, c, all, madeOf(sources, s))
				}); err != nil {
					return err
				}
			}
			if len(m) > 0 && !c.AllSame() {
				return worse(batchErr, &exitError{code: exitNo})
			}
			return batchErr
		},
	}
	f.register(cmd.Flags())
	flags := cmd.Flags()
	flags.Var(&m, "margin", "`FIGURE=SHARE` within which a figure counts as the same, such as C=5%; repeatable")
	flags.BoolVar(&exclude, "exclude-outliers", false, "leave flagged outliers out")
	flags.StringVar(&html, "html", "", "write a page with strips of every figure and the bands of |Z| to `FILE`")
	flags.BoolVar(&asJSON, "json", false, "one JSON object on standard output")
	return cmd
}

// htmlOutput lists the page among the output files.
func htmlOutput(path string) map[string]string {
	if path == "" {
		return map[string]string{}
	}
	return map[string]string{"--html": path}
}

// madeOf says how a page on lots was made.
func madeOf(sources []*lotSource, s streams) []page.Entry {
	made := []page.Entry{{Name: "Version", Value: buildVersion()}, {Name: "Command", Value: s.command}}
	for _, l := range sources {
		h := sha256.New()
		for _, f := range l.fits() {
			fmt.Fprintln(h, f.Sweep.SHA256)
		}
		made = append(made, page.Entry{Name: "Lot " + l.name, Value: fmt.Sprintf("%d sweeps, SHA-256 of their SHA-256: %x", len(l.fits()), h.Sum(nil))})
	}
	return made
}

// worse returns the error that decides the exit code; a sweep that could not
// be read outranks everything.
func worse(batchErr, err error) error {
	if batchErr == nil {
		return err
	}
	if exit, ok := err.(*exitError); ok && exit.err != nil {
		return &exitError{max(exit.code, exitCode(batchErr)), exit.err}
	}
	return batchErr
}

// writeJSON writes one object as a line.
func writeJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	return e.Encode(v)
}

// margins is a repeatable flag FIGURE=SHARE.
type margins map[string]float64

func (m *margins) String() string { return "" }
func (m *margins) Type() string   { return "FIGURE=SHARE" }
func (m *margins) Set(text string) error {
	name, value, ok := strings.Cut(text, "=")
	name = strings.TrimSpace(name)
	if !ok || name == "" {
		return fmt.Errorf("expected FIGURE=SHARE, such as C=5%%, found %q", text)
	}
	if _, twice := (*m)[name]; twice {
		return fmt.Errorf("expected each figure once, found %s again", name)
	}
	v, err := quantity.ParsePercent(strings.TrimSpace(value))
	if err != nil {
		return err
	}
	if !(v > 0 && v < 1) {
		return fmt.Errorf("expected a margin between 0 %% and 100 %%, found %q", value)
	}
	(*m)[name] = v
	return nil
}
