package report

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// AppendJSON appends a record as one line of JSON (JSON Lines) to b. The bytes
// are those of encoding/json with units and names left readable (no escapes
// for HTML); written out by hand because most of a record is numbers, on each
// of which reflection spends as much time as its digits take. The error is that
// of a number that JSON does not have, NaN or an infinity.
func AppendJSON(b []byte, f *Fit) ([]byte, error) {
	e := encoder{b: b}
	e.begin('{')
	e.text("schema", f.Schema)
	e.sweep(&f.Sweep)
	e.textUnlessEmpty("kind", string(f.Kind))
	e.textUnlessEmpty("kind_reason", f.KindReason)
	if c := f.Circuit; c != nil {
		e.member("circuit", '{')
		e.textUnlessEmpty("name", c.Name)
		e.text("expression", c.Expression)
		e.end('}')
	}
	e.text("status", string(f.Status))
	if r := f.Error; r != nil {
		e.member("error", '{')
		e.text("file", r.File)
		e.countUnlessZero("line", r.Line)
		e.countUnlessZero("column", r.Column)
		e.text("text", r.Text)
		e.end('}')
	}
	list(&e, "parameters", f.Parameters, (*encoder).parameter)
	list(&e, "correlation", f.Correlation, (*encoder).row)
	if r := f.Residuals; r != nil {
		e.member("residuals", '{')
		e.number("rms_relative", r.RMSRelative)
		e.number("max_relative", r.MaxRelative)
		e.number("max_at_hz", r.MaxAtHz)
		e.optional("lag1", r.Lag1)
		e.boolean("structured", r.Structured)
		e.end('}')
	}
	list(&e, "self_resonance", f.SelfResonance, (*encoder).resonance)
	list(&e, "figures", f.Figures, (*encoder).figure)
	list(&e, "candidates", f.Candidates, (*encoder).candidate)
	list(&e, "warnings", f.Warnings, (*encoder).warning)
	list(&e, "advice", f.Advice, (*encoder).advice)
	e.end('}')
	if e.err != nil {
		return b, fmt.Errorf("report: the record of %s: %w", f.Sweep.File, e.err)
	}
	return append(e.b, '\n'), nil
}

// encoder appends JSON to b. Its methods are named for what they append; a name
// comes with the comma before it.
type encoder struct {
	b   []byte
	err error // the first

	atHz      float64 // of the last figure
	frequency []byte  // its digits
}

func (e *encoder) sweep(s *Sweep) {
	e.member("sweep", '{')
	e.text("file", s.File)
	e.text("part", s.Part)
	e.textUnlessEmpty("lot", s.Lot)
	e.countUnlessZero("points", s.Points)
	e.countUnlessZero("used_points", s.UsedPoints)
	e.numberUnlessZero("f_min_hz", s.FMin)
	e.numberUnlessZero("f_max_hz", s.FMax)
	e.textUnlessEmpty("sha256", s.SHA256)
	if s.Metadata != nil {
		e.member("metadata", '{')
		names := make([]string, 0, len(s.Metadata))
		for name := range s.Metadata {
			names = append(names, name)
		}
		slices.Sort(names)
		for _, name := range names {
			e.comma()
			e.quoted(name)
			e.b = append(e.b, ':')
			e.quoted(s.Metadata[name])
		}
		e.end('}')
	}
	e.end('}')
}

func (e *encoder) parameter(p *Parameter) {
	e.begin('{')
	e.text("name", p.Name)
	e.text("unit", p.Unit)
	e.number("value", p.Value)
	e.optional("std_error", p.StdError)
	e.optional("low95", p.Low95)
	e.optional("high95", p.High95)
	e.optional("meter_error", p.MeterError)
	e.boolean("determined", p.Determined)
	e.boolean("fixed", p.Fixed)
	e.end('}')
}

func (e *encoder) row(row *[]float64) {
	e.begin('[')
	for _, v := range *row {
		e.comma()
		e.digits(v)
	}
	e.end(']')
}

func (e *encoder) resonance(r *Resonance) {
	e.begin('{')
	e.number("f_hz", r.FHz)
	e.optional("std_error_hz", r.StdErrorHz)
	e.optional("meter_error_hz", r.MeterErrorHz)
	e.optional("low95_hz", r.Low95Hz)
	e.optional("high95_hz", r.High95Hz)
	e.text("kind", string(r.Kind))
	e.boolean("in_sweep", r.InSweep)
	e.number("impedance_ohm", r.ImpedanceOhm)
	e.end('}')
}

func (e *encoder) figure(v *Figure) {
	e.begin('{')
	e.text("name", string(v.Name))
	e.name("at_hz")
	// All figures of a frequency follow one another.
	if len(e.frequency) == 0 || v.AtHz != e.atHz {
		start := len(e.b)
		e.digits(v.AtHz)
		e.atHz, e.frequency = v.AtHz, append(e.frequency[:0], e.b[start:]...)
	} else {
		e.b = append(e.b, e.frequency...)
	}
	e.number("value", v.Value)
	e.text("unit", v.Unit)
	e.optional("low95", v.Low95)
	e.optional("high95", v.High95)
	e.optional("measured", v.Measured)
	if v.BelowResolution != nil {
		e.boolean("below_resolution", *v.BelowResolution)
	}
	e.end('}')
}

func (e *encoder) candidate(c *Candidate) {
	e.begin('{')
	e.textUnlessEmpty("name", c.Name)
	e.text("expression", c.Expression)
	e.optional("aicc", c.AICc)
	e.optional("rms_relative", c.RMSRelative)
	e.boolean("chosen", c.Chosen)
	e.text("reason", c.Reason)
	e.end('}')
}

func (e *encoder) warning(w *Warning) {
	e.begin('{')
	e.text("code", w.Code)
	e.text("text", w.Text)
	e.end('}')
}

func (e *encoder) advice(a *Advice) {
	e.begin('{')
	e.text("parameter", a.Parameter)
	e.number("from_hz", a.FromHz)
	e.number("to_hz", a.ToHz)
	e.name("points")
	e.b = strconv.AppendInt(e.b, int64(a.Points), 10)
	e.optional("half_width_now", a.HalfWidthNow)
	e.number("half_width_then", a.HalfWidthThen)
	e.text("text", a.Text)
	e.end('}')
}

// list appends an array, unless it is nil.
func list[T any](e *encoder, name string, items []T, item func(*encoder, *T)) {
	if items == nil {
		return
	}
	e.member(name, '[')
	for i := range items {
		e.comma()
		item(e, &items[i])
	}
	e.end(']')
}

// member begins an object or array with a name.
func (e *encoder) member(name string, bracket byte) {
	e.name(name)
	e.begin(bracket)
}

func (e *encoder) begin(bracket byte) { e.b = append(e.b, bracket) }
func (e *encoder) end(bracket byte)   { e.b = append(e.b, bracket) }

// comma appends one unless the first of an object or array follows.
func (e *encoder) comma() {
	if last := e.b[len(e.b)-1]; last != '{' && last != '[' {
		e.b = append(e.b, ',')
	}
}

// name appends the name of a member; it holds nothing to be escaped.
func (e *encoder) name(name string) {
	e.comma()
	e.b = append(e.b, '"')
	e.b = append(e.b, name...)
	e.b = append(e.b, '"', ':')
}

func (e *encoder) text(name, s string) {
	e.name(name)
	e.quoted(s)
}

func (e *encoder) textUnlessEmpty(name, s string) {
	if s != "" {
		e.text(name, s)
	}
}

func (e *encoder) countUnlessZero(name string, n int) {
	if n != 0 {
		e.name(name)
		e.b = strconv.AppendInt(e.b, int64(n), 10)
	}
}

func (e *encoder) boolean(name string, v bool) {
	e.name(name)
	e.b = strconv.AppendBool(e.b, v)
}

func (e *encoder) number(name string, v float64) {
	e.name(name)
	e.digits(v)
}

func (e *encoder) numberUnlessZero(name string, v float64) {
	if v != 0 {
		e.number(name, v)
	}
}

func (e *encoder) optional(name string, v *float64) {
	if v != nil {
		e.number(name, *v)
	}
}

// digits appends the fewest digits that give a number back, as ECMAScript
// writes them: with an exponent, without a zero before it, below 1e-6 and from
// 1e21 on.
func (e *encoder) digits(v float64) {
	size := math.Abs(v)
	if !(size <= math.MaxFloat64) {
		if e.err == nil {
			e.err = fmt.Errorf("expected a finite number, found %v", v)
		}
		return
	}
	if size == 0 || size >= 1e-6 && size < 1e21 {
		e.b = strconv.AppendFloat(e.b, v, 'f', -1, 64)
		return
	}
	e.b = strconv.AppendFloat(e.b, v, 'e', -1, 64)
	if n := len(e.b); e.b[n-4] == 'e' && e.b[n-3] == '-' && e.b[n-2] == '0' { // e-09
		e.b[n-2] = e.b[n-1]
		e.b = e.b[:n-1]
	}
}

// quoted appends a string. Those with something to be escaped are rare and
// left to encoding/json.
func (e *encoder) quoted(s string) {
	ascii := true
	for i := 0; i < len(s); i++ {
		switch c := s[i]; {
		case c < ' ', c == '"', c == '\\':
			e.escaped(s)
			return
		case c >= utf8.RuneSelf:
			ascii = false
		}
	}
	if !ascii && (!utf8.ValidString(s) || strings.ContainsAny(s, "\u2028\u2029")) {
		e.escaped(s)
		return
	}
	e.b = append(e.b, '"')
	e.b = append(e.b, s...)
	e.b = append(e.b, '"')
}

func (e *encoder) escaped(s string) {
	var b bytes.Buffer
	to := json.NewEncoder(&b)
	to.SetEscapeHTML(false)
	if err := to.Encode(s); err != nil {
		panic("report: " + err.Error()) // a string always has a form
	}
	e.b = append(e.b, bytes.TrimSuffix(b.Bytes(), []byte("\n"))...)
}
