// Package netlist writes fitted circuits as subcircuits for circuit
// simulators that read SPICE netlists.
//
// Only what every such simulator understands is used: comment lines with an
// asterisk, .SUBCKT and .ENDS, the elements R, L and C with plain numbers with
// exponents (no suffix letters, of which M means different things in different
// simulators), names of letters, digits and underscores, and ASCII throughout.
//
// Elements that no simulator has (loss, cpe, skin, rcline) become ladders of
// positive R and C, or R and L, that equal them within an error over the range
// of the sweep ([Options.LadderError]); what was reached is written in the
// header of the subcircuit.
//
// Simulators begin with the operating point at direct current, where a
// capacitor is open and an inductor a short. A node that would float then is
// given a resistor across a capacitor beside it, and a loop of inductors alone
// a resistor in it, so large or so small that they do not count (see bleeder).
package netlist

import (
	"fmt"
	"io"
	"math"
	"math/cmplx"
	"strconv"
	"strings"

	"golang.org/x/sync/errgroup"

	"realpart/models"
	"realpart/report"
)

// Options steer [Write].
type Options struct {
	// LadderError is the largest relative error of the impedance that
	// ladders may cause between the first and the last frequency of the
	// sweep; 0 means 0.001.
	LadderError float64
	// LadderRealError is the same for the resistance, the real part, which
	// may be small beside the impedance; 0 means 0.01.
	LadderRealError float64
	// Jobs is the number of parts worked on at the same time; 0 means 1. The
	// result does not depend on it.
	Jobs int
	// Made is a line for the head of the file that says what wrote it, such
	// as program and version.
	Made string
}

// Write writes one subcircuit for each fit, in their order; for a failed one
// a comment. Names of subcircuits are made of the parts' names and are unique.
// Nothing is written if there is an error.
func Write(w io.Writer, fits []*report.Fit, o Options) error {
	if o.LadderError == 0 {
		o.LadderError = 0.001
	}
	if o.LadderRealError == 0 {
		o.LadderRealError = 0.01
	}
	for _, e := range []float64{o.LadderError, o.LadderRealError} {
		if !(e >= 1e-6 && e < 1) {
			return fmt.Errorf("netlist: ladder error %v: expected a fraction from 1e-6 to 1", e)
		}
	}
	b := new(strings.Builder)
	if o.Made != "" {
		comment(b, o.Made)
	}
	comment(b, "Equivalent circuits fitted to small-signal sweeps. Each holds for the part, bias, temperature and signal level that were measured,")
	comment(b, "in the stated frequency range. Ratings and nonlinear behaviour are not in them: the data sheet decides.")
	taken := names{}
	parts := make([]strings.Builder, len(fits))
	var group errgroup.Group
	group.SetLimit(max(1, o.Jobs))
	for i, f := range fits {
		part := &parts[i]
		part.WriteString("*\n")
		if f.Status == report.FitFailed {
			comment(part, f.Sweep.Part+": no circuit, "+f.Error.Location()+f.Error.Text)
			continue
		}
		name := taken.unique(identifier(f.Sweep.Part))
		group.Go(func() error {
			if err := writePart(part, f, name, o); err != nil {
				return fmt.Errorf("netlist of %s: %w", f.Sweep.File, err)
			}
			return nil
		})
	}
	if err := group.Wait(); err != nil {
		return err
	}
	for i := range parts {
		b.WriteString(parts[i].String())
	}
	_, err := io.WriteString(w, b.String())
	return err
}

func writePart(b *strings.Builder, f *report.Fit, name string, o Options) error {
	c, err := models.Parse(f.Circuit.Expression)
	if err != nil {
		return err
	}
	values := f.Values()
	if len(values) != len(c.Parameters()) {
		return fmt.Errorf("%d values for the %d parameters of %s", len(values), len(c.Parameters()), c)
	}
	for i, p := range c.Parameters() {
		if err := p.CheckValue(values[i]); err != nil {
			return err
		}
	}
	if !(f.Sweep.FMin > 0 && f.Sweep.FMin <= f.Sweep.FMax) || math.IsInf(f.Sweep.FMax, 1) {
		return fmt.Errorf("frequencies %v Hz to %v Hz: expected a positive, rising range", f.Sweep.FMin, f.Sweep.FMax)
	}
	n, err := build(c, values, f.Sweep.FMin, f.Sweep.FMax, o)
	if err != nil {
		return err
	}
	header(b, f, c, name)
	for _, l := range n.ladders {
		comment(b, l.String())
	}
	if len(n.ladders) > 0 {
		comment(b, fmt.Sprintf("With them the whole equals the fit within %.2g %% of its impedance, %.2g %% of its resistance, in that range.", 100*n.error, 100*n.realError))
	}
	for _, text := range n.remarks {
		comment(b, text)
	}
	fmt.Fprintf(b, ".SUBCKT %s a b\n", name)
	for _, e := range n.elements {
		fmt.Fprintf(b, "%s %s %s %s\n", e.name, e.a, e.b, plain(e.value))
	}
	fmt.Fprintf(b, ".ENDS %s\n", name)
	return nil
}

func header(b *strings.Builder, f *report.Fit, c *models.Circuit, name string) {
	title := name
	if f.Sweep.Part != name {
		title += ": part " + f.Sweep.Part
	}
	if f.Sweep.Lot != "" {
		title += ", lot " + f.Sweep.Lot
	}
	if f.Kind != "" {
		title += ", " + string(f.Kind)
	}
	comment(b, title)
	source := "source: " + f.Sweep.File
	if f.Sweep.SHA256 != "" {
		source += ", sha256 " + f.Sweep.SHA256
	}
	comment(b, source)
	circuit := "circuit: " + c.String()
	if f.Circuit.Name != "" {
		circuit += " (" + f.Circuit.Name + ")"
	}
	comment(b, circuit)
	if f.Status == report.NotConverged {
		comment(b, "WARNING: the fit did not converge")
	}
	for _, p := range f.Parameters {
		text := fmt.Sprintf("  %s = %s", p.Name, quantityText(p.Value, p.Unit))
		switch {
		case p.Fixed:
			text += ", fixed"
		case !p.Determined:
			text += ", NOT DETERMINED by the sweep" + bounds(p)
		default:
			text += bounds(p)
		}
		comment(b, text)
	}
	if f.AccuracyStated() {
		comment(b, "  intervals: 95 %, scatter and stated meter accuracy")
	} else {
		comment(b, "  intervals: 95 %, scatter only; meter accuracy not stated")
	}
	comment(b, fmt.Sprintf("residual rms %.2g %%, worst %.2g %% at %s Hz", 100*f.Residuals.RMSRelative, 100*f.Residuals.MaxRelative, plain(f.Residuals.MaxAtHz)))
	comment(b, fmt.Sprintf("valid from %s Hz to %s Hz", plain(f.Sweep.FMin), plain(f.Sweep.FMax)))
}

func quantityText(v float64, unit string) string {
	s := strconv.FormatFloat(v, 'e', 5, 64)
	if unit != "1" {
		s += " " + unit
	}
	return s
}

func bounds(p report.Parameter) string {
	switch {
	case p.Low95 != nil && p.High95 != nil:
		return fmt.Sprintf(" (%.4e to %.4e)", *p.Low95, *p.High95)
	case p.Low95 != nil:
		return fmt.Sprintf(" (above %.1e)", *p.Low95)
	case p.High95 != nil:
		return fmt.Sprintf(" (below %.1e)", *p.High95)
	}
	return ""
}

// plain writes a number with an exponent, to the last bit.
func plain(v float64) string { return strconv.FormatFloat(v, 'e', -1, 64) }

// comment writes a comment line of ASCII characters.
func comment(b *strings.Builder, s string) {
	b.WriteString("* " + ascii(s) + "\n")
}

var asciiSpelling = strings.NewReplacer("Ω", "ohm", "µ", "u", "·", "*", "½", "0.5", "−", "-", "°", "deg", "…", "..", "≥", ">=", "≤", "<=", "²", "2", "√", "sqrt")

func ascii(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r > '~' {
			return '?'
		}
		return r
	}, asciiSpelling.Replace(s))
}

// identifier makes a name that every simulator takes: a letter, then letters,
// digits and underscores, at most 40 of them.
func identifier(s string) string {
	s = strings.Map(func(r rune) rune {
		switch {
		case r >= 'a' && r <= 'z', r >= 'A' && r <= 'Z', r >= '0' && r <= '9':
			return r
		}
		return '_'
	}, s)
	if s == "" || s[0] >= '0' && s[0] <= '9' || s[0] == '_' {
		s = "part_" + strings.TrimLeft(s, "_")
	}
	return s[:min(len(s), 40)]
}

// names holds the names taken, in small letters, since simulators do not tell
// letters' case.
type names map[string]bool

func (n names) unique(name string) string {
	free := name
	for i := 2; n[strings.ToLower(free)]; i++ {
		free = fmt.Sprintf("%s_%d", name, i)
	}
	n[strings.ToLower(free)] = true
	return free
}

// gridDensity is the number of frequencies a decade at which a network with
// ladders is checked.
const gridDensity = 200

func grid(from, to float64) []float64 {
	n := max(25, int(math.Ceil(gridDensity*math.Log10(to/from)))+1)
	if from == to {
		to *= 1 + 1e-6
	}
	f := make([]float64, n)
	for i := range f {
		f[i] = from * math.Pow(to/from, float64(i)/float64(n-1))
	}
	return f
}

// relativeErrors returns the largest |a/b − 1| of the impedances, and of their
// real parts.
func relativeErrors(a, b []complex128) (impedance, resistance float64) {
	for i := range a {
		if d := cmplx.Abs(a[i]/b[i] - 1); !(d <= impedance) {
			impedance = d
		}
		if d := math.Abs(real(a[i])/real(b[i]) - 1); !(d <= resistance) {
			resistance = d
		}
	}
	return impedance, resistance
}
