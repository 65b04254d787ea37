package ingest

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"math/cmplx"
	"path"
	"strconv"
	"strings"
)

// Touchstone is the open standard of the IBIS Open Forum; what is read here is
// versions 1.1, 2.0 and 2.1 for one and two ports.

// touchstonePorts returns the number of ports that a file name states: .s2p is
// 2; 0 if it states none.
func touchstonePorts(file string) int {
	ext := strings.ToLower(path.Ext(file))
	if len(ext) < 4 || !strings.HasPrefix(ext, ".s") || !strings.HasSuffix(ext, "p") {
		return 0
	}
	n, err := strconv.Atoi(ext[2 : len(ext)-1])
	if err != nil || n < 1 {
		return 0
	}
	return n
}

// isTouchstone tells by the file's ending, or by its first line that is no
// comment: a version keyword or an option line.
func isTouchstone(file string, s *source) bool {
	if touchstonePorts(file) > 0 {
		return true
	}
	for _, l := range s.lines {
		text := strings.TrimSpace(s.lineText(l))
		if text == "" || text[0] == '!' {
			continue
		}
		if strings.HasPrefix(strings.ToLower(text), "[version]") {
			return true
		}
		if text[0] != '#' {
			return false
		}
		text, _, _ = strings.Cut(text[1:], "!")
		opt, bad := parseOptionLine(strings.Fields(text))
		return bad < 0 && (opt.stated >= 2 || strings.EqualFold(path.Ext(file), ".ts"))
	}
	return false
}

// optionLine is "# <unit> <parameter> <format> R <resistance>" with the
// standard's defaults.
type optionLine struct {
	exp       int // of the frequency unit
	unit      string
	parameter byte   // S, Y, Z, H or G
	format    string // DB, MA or RI
	reference []float64
	stated    int // words understood
}

// parseOptionLine returns the options and the index of the first word that is
// none, −1 if all are.
func parseOptionLine(words []string) (optionLine, int) {
	o := optionLine{exp: 9, unit: "GHz", parameter: 'S', format: "MA", reference: []float64{50}}
	for i := 0; i < len(words); i++ {
		switch w := strings.ToUpper(words[i]); w {
		case "HZ":
			o.exp, o.unit = 0, "Hz"
		case "KHZ":
			o.exp, o.unit = 3, "kHz"
		case "MHZ":
			o.exp, o.unit = 6, "MHz"
		case "GHZ":
			o.exp, o.unit = 9, "GHz"
		case "S", "Y", "Z", "H", "G":
			o.parameter = w[0]
		case "DB", "MA", "RI":
			o.format = w
		case "R":
			var refs []float64
			for i+1 < len(words) {
				v, kind := parseNumber(words[i+1], '.')
				if kind != isNumber {
					break
				}
				if v <= 0 {
					return o, i + 1
				}
				refs = append(refs, v)
				i++
			}
			if len(refs) == 0 {
				return o, i
			}
			o.reference = refs
		default:
			return o, i
		}
		o.stated++
	}
	return o, -1
}

// touchstone is the state while a file is read.
type touchstone struct {
	*source
	p       *parsed
	opt     Options
	option  optionLine
	hasOpt  bool
	optLine line
	version string
	ports   int
	order   string // 21_12 or 12_21
	matrix  string // full, lower or upper
	count   int    // stated number of frequencies, −1 if not
	freq    []float64
	data    [][4]complex128 // N11 N21 N12 N22
	rows    []int32
}

func (t *touchstone) fault(l line, c span, expected, hint string) {
	e := &Error{File: t.name, Line: int(l.num), Column: 1, Found: t.lineText(l), Expected: expected, Hint: hint}
	if c.end > c.start {
		e.Column, e.Found = t.column(l, []span{c}, 0), t.cell(c)
	}
	if len(t.p.faults) < maxFaults {
		t.p.faults = append(t.p.faults, e)
	} else {
		t.p.more++
	}
}

// readTouchstone reads one sweep.
func readTouchstone(src *source, o Options) (*parsed, error) {
	src.delim, src.decimal = blanks, '.'
	t := &touchstone{source: src, opt: o, p: &parsed{name: src.name, reading: src.reading()}, order: "21_12", matrix: "full", count: -1,
		version: "1.1", ports: touchstonePorts(src.name)}
	if o.Connection != "" {
		if err := CheckConnection(o.Connection); err != nil {
			return nil, &Error{File: src.name, Found: o.Connection, Expected: "reflection, series or shunt (--connection)", Err: ErrUsage}
		}
	}
	t.readLines()
	p := t.p
	p.reading.Format = "Touchstone " + t.version
	if len(p.faults) > 0 {
		return p, nil
	}
	t.build()
	return p, nil
}

// readLines goes through keywords, option line and numbers.
func (t *touchstone) readLines() {
	var record []float64
	var recordLine line
	var cells []span
	information, network := false, false
	referenceLeft := 0
	last := math.Inf(-1)
lines:
	for _, l := range t.lines {
		full := l
		if i := strings.IndexByte(t.lineText(l), '!'); i >= 0 {
			t.p.meta.read(t.text[l.start+int32(i)+1 : l.end])
			l.end = l.start + int32(i)
		}
		cells = t.split(l, cells)
		if len(cells) == 0 {
			continue
		}
		first := strings.TrimLeft(t.lineText(l), " \t\v\f")
		if first[0] == '[' {
			key, rest := t.keyword(l)
			referenceLeft = 0
			if information && key != "end information" {
				continue
			}
			switch key {
			case "version":
				t.version = rest
				if !strings.HasPrefix(rest, "2.") {
					t.fault(full, span{}, "[Version] 2.0 or 2.1", "")
					return
				}
			case "number of ports":
				n, err := strconv.Atoi(rest)
				if err != nil || n < 1 {
					t.fault(full, span{}, "[Number of Ports] with a number", "")
					return
				}
				t.ports = n
			case "two-port data order", "two-port order":
				if rest != "12_21" && rest != "21_12" {
					t.fault(full, span{}, "12_21 or 21_12", "")
					return
				}
				t.order = rest
			case "number of frequencies":
				n, err := strconv.Atoi(rest)
				if err != nil || n < 1 {
					t.fault(full, span{}, "[Number of Frequencies] with a number", "")
					return
				}
				t.count = n
			case "reference":
				t.option.reference = nil
				referenceLeft = max(t.ports, 1)
				for _, w := range strings.Fields(rest) {
					v, kind := parseNumber(w, '.')
					if kind != isNumber || v <= 0 {
						t.fault(full, span{}, "a positive reference resistance in Ω", "")
						return
					}
					t.option.reference = append(t.option.reference, v)
					referenceLeft--
				}
			case "matrix format":
				t.matrix = strings.ToLower(rest)
				if t.matrix != "full" && t.matrix != "lower" && t.matrix != "upper" {
					t.fault(full, span{}, "Full, Lower or Upper", "")
					return
				}
			case "mixed-mode order":
				t.fault(full, span{}, "single-ended parameters", "a file without mixed modes")
				return
			case "begin information":
				information = true
			case "end information":
				information = false
			case "network data":
				network = true
			case "noise data", "end":
				break lines
			case "number of noise frequencies":
			default:
				t.p.reading.Notes = append(t.p.reading.Notes, fmt.Sprintf("line %d: keyword [%s] passed over", l.num, key))
			}
			continue
		}
		if information {
			t.p.meta.read(t.lineText(l))
			continue
		}
		if first[0] == '#' {
			if t.hasOpt {
				// Only the first option line counts.
				t.p.reading.Notes = append(t.p.reading.Notes, fmt.Sprintf("line %d: a further option line passed over", l.num))
				continue
			}
			t.readOption(full, l, cells)
			if len(t.p.faults) > 0 {
				return
			}
			continue
		}
		if referenceLeft > 0 {
			for _, c := range cells {
				v, kind := parseNumber(t.cell(c), '.')
				if kind != isNumber || v <= 0 {
					t.fault(full, c, "a positive reference resistance in Ω", "")
					return
				}
				t.option.reference = append(t.option.reference, v)
				referenceLeft--
			}
			continue
		}
		if !t.hasOpt {
			t.fault(full, span{}, "an option line such as # Hz S RI R 50 before the data", "")
			return
		}
		if t.version != "1.1" && !network {
			t.fault(full, span{}, "[Network Data] before the numbers", "")
			return
		}
		if t.ports == 0 {
			switch len(cells) {
			case 3:
				t.ports = 1
			case 9:
				t.ports = 2
			default:
				t.fault(full, span{}, "3 numbers (one port) or 9 (two ports) a line", "an ending .s1p or .s2p")
				return
			}
		}
		if t.ports > 2 {
			t.fault(full, span{}, "one or two ports", "a file of the two ports that the part was connected to")
			return
		}
		want := t.perRecord()
		if len(record) == 0 {
			recordLine = full
			if t.version == "1.1" && t.ports == 2 && len(cells) == 5 {
				if f, kind := parseNumber(t.cell(cells[0]), '.'); kind == isNumber && scale(f, t.option.exp) <= last {
					t.p.reading.Notes = append(t.p.reading.Notes, fmt.Sprintf("noise data from line %d passed over", l.num))
					break lines
				}
			}
		}
		for _, c := range cells {
			v, kind := parseNumber(t.cell(c), '.')
			switch kind {
			case isText:
				t.fault(full, c, "a number", "remove the line")
				record = record[:0]
				continue lines
			case isOverload:
				v = math.NaN()
			}
			record = append(record, v)
		}
		if len(record) < want {
			if t.version == "1.1" && t.ports == 1 {
				t.fault(full, span{}, "3 numbers a line (frequency and one pair)", "complete or remove the line")
				record = record[:0]
			}
			continue
		}
		if len(record) > want {
			t.fault(full, span{}, fmt.Sprintf("%d numbers for %d-port data", want, t.ports), "the file ending that fits the number of ports")
			record = record[:0]
			continue
		}
		f := scale(record[0], t.option.exp)
		if f < 0 {
			t.fault(recordLine, span{}, "a frequency that is not negative", "")
		}
		last = f
		t.add(f, record, recordLine)
		record = record[:0]
	}
	if len(record) > 0 {
		t.fault(recordLine, span{}, fmt.Sprintf("%d numbers for %d-port data", t.perRecord(), t.ports), "complete or remove the last lines")
	}
	if !t.hasOpt && len(t.p.faults) == 0 {
		t.p.faults = append(t.p.faults, &Error{File: t.name, Line: 1, Column: 1, bare: true, Found: "none", Expected: "an option line such as # Hz S RI R 50"})
	}
	if t.hasOpt && len(t.option.reference) == 0 && len(t.p.faults) == 0 {
		t.fault(t.optLine, span{}, "a resistance after [Reference]", "")
	}
	if t.count >= 0 && t.count != len(t.freq) && len(t.p.faults) == 0 {
		t.p.faults = append(t.p.faults, &Error{File: t.name, Line: int(t.lines[len(t.lines)-1].num), Column: 1, bare: true,
			Found: fmt.Sprint(len(t.freq)), Expected: fmt.Sprintf("%d frequencies ([Number of Frequencies])", t.count), Hint: "a complete file"})
	}
}

// keyword cuts "[Number of Ports] 2".
func (t *touchstone) keyword(l line) (key, rest string) {
	text := strings.TrimSpace(t.lineText(l))
	i := strings.IndexByte(text, ']')
	if i < 0 {
		return text, ""
	}
	return strings.ToLower(strings.Join(strings.Fields(text[1:i]), " ")), strings.TrimSpace(text[i+1:])
}

func (t *touchstone) readOption(full, l line, cells []span) {
	// The sign may stand against the first word.
	if c := cells[0]; c.end-c.start > 1 {
		cells = append([]span{{c.start, c.start + 1}, {c.start + 1, c.end}}, cells[1:]...)
	}
	var words []string
	for _, c := range cells[1:] {
		words = append(words, t.cell(c))
	}
	o, bad := parseOptionLine(words)
	if bad >= 0 {
		t.fault(full, cells[1+bad], "an option: a frequency unit, S, Y or Z, DB, MA or RI, R and a resistance", "")
		return
	}
	if o.parameter == 'H' || o.parameter == 'G' {
		t.fault(full, span{}, "S-, Y- or Z-parameters", "")
		return
	}
	ref := t.option.reference
	t.option, t.hasOpt, t.optLine = o, true, l
	if ref != nil { // [Reference] stood above the option line
		t.option.reference = ref
	}
}

// perRecord is how many numbers make up one frequency.
func (t *touchstone) perRecord() int {
	switch {
	case t.ports == 1:
		return 3
	case t.matrix != "full":
		return 7
	}
	return 9
}

// add stores one frequency's parameters as N11 N21 N12 N22.
func (t *touchstone) add(f float64, rec []float64, l line) {
	var v [4]complex128
	value := func(i int) complex128 {
		a, b := rec[1+2*i], rec[2+2*i]
		switch t.option.format {
		case "RI":
			return complex(a, b)
		case "DB":
			return polar(fromDB(a), b*math.Pi/180)
		}
		return polar(a, b*math.Pi/180)
	}
	switch {
	case t.ports == 1:
		v[0] = value(0)
	case t.matrix != "full":
		v = [4]complex128{value(0), value(1), value(1), value(2)}
	default:
		v = [4]complex128{value(0), value(1), value(2), value(3)}
		if t.order == "12_21" {
			v[1], v[2] = v[2], v[1]
		}
	}
	t.freq = append(t.freq, f)
	t.data = append(t.data, v)
	t.rows = append(t.rows, l.num)
}

// build converts the parameters to the part's impedance.
func (t *touchstone) build() {
	p := t.p
	refs := t.option.reference
	ref := refs[0]
	conn := t.opt.Connection
	name := string(t.option.parameter)
	where := &Error{File: t.name, Line: int(t.optLine.num), Column: 1, bare: true}
	switch {
	case len(t.freq) == 0:
		where.Found, where.Expected = "only an option line", "rows of numbers"
		p.faults = append(p.faults, where)
		return
	case t.ports <= 1 && (conn == ConnectionSeries || conn == ConnectionShunt):
		where.Found, where.Expected, where.Hint, where.Err = "one port", "two ports for --connection "+conn, "--connection reflection, or none", ErrUsage
		p.faults = append(p.faults, where)
		return
	case t.ports <= 1:
		conn = ConnectionReflection
	case conn == "":
		where.Found, where.Expected, where.Hint, where.Err = "two ports", "how the part was connected",
			"--connection series, shunt or reflection", ErrConnection
		p.faults = append(p.faults, where)
		return
	case conn != ConnectionReflection && len(refs) > 1 && refs[0] != refs[1]:
		where.Found, where.Expected = fmt.Sprintf("%g Ω and %g Ω", refs[0], refs[1]), "the same reference resistance at both ports"
		p.faults = append(p.faults, where)
		return
	}
	d := &partData{meta: p.meta, freq: t.freq, line: t.rows, z: make([]complex128, len(t.freq))}
	direct := t.ports <= 1 && t.option.parameter != 'S'
	if !direct {
		d.reference, d.connection = ref, conn
		d.s = make([]complex128, len(t.freq))
	}
	normalised := t.version == "1.1"
	for i, v := range t.data {
		if direct {
			switch n := v[0]; {
			case t.option.parameter == 'Z' && normalised:
				d.z[i] = n * complex(ref, 0)
			case t.option.parameter == 'Z':
				d.z[i] = n
			case normalised:
				d.z[i] = complex(ref, 0) / n
			default:
				d.z[i] = 1 / n
			}
			continue
		}
		s := t.scattering(v, ref, normalised)
		k := 1 // S21
		if conn == ConnectionReflection {
			k = 0
		}
		d.s[i] = s[k]
		d.z[i] = ImpedanceFromS(s[k], ref, conn)
	}
	p.parts = append(p.parts, d)
	r := &p.reading
	r.RowsUsed = len(t.freq)
	r.HeaderLine = int(t.optLine.num)
	r.Notes = append(r.Notes, fmt.Sprintf("%d port(s), %s-parameters, %s, frequency in %s, reference %g Ω", t.ports, name, t.option.format, t.option.unit, ref))
	if !direct {
		r.Notes = append(r.Notes, "connection: "+conn)
	}
}

// scattering converts two-port Y- or Z-parameters to S-parameters at the
// reference resistance r of both ports (usual network theory), N11 N21 N12 N22.
func (t *touchstone) scattering(v [4]complex128, r float64, normalised bool) [4]complex128 {
	if t.option.parameter == 'S' {
		return v
	}
	y := t.option.parameter == 'Y'
	if !normalised {
		k := complex(1/r, 0)
		if y {
			k = complex(r, 0)
		}
		for i := range v {
			v[i] *= k
		}
	}
	a, c, b, d := v[0], v[1], v[2], v[3] // N11 N21 N12 N22, normalised
	den := (1+a)*(1+d) - b*c
	if y {
		return [4]complex128{((1-a)*(1+d) + b*c) / den, -2 * c / den, -2 * b / den, ((1+a)*(1-d) + b*c) / den}
	}
	return [4]complex128{((a-1)*(d+1) - b*c) / den, 2 * c / den, 2 * b / den, ((a+1)*(d-1) - b*c) / den}
}

// TouchstoneFormat says how WriteTouchstone writes; the zero value means S, RI,
// Hz and 50 Ω.
type TouchstoneFormat struct {
	Parameter string  // S, Z or Y
	Format    string  // RI, MA or DB
	Unit      string  // Hz, kHz, MHz or GHz
	Reference float64 // Ω
}

// WriteTouchstone writes an impedance as a one-port file of version 1.1. The
// frequencies, in Hz, must be strictly ascending; comment lines get a ! in
// front. At most one format may be given. Numbers are written so that reading
// them gives the same float64, but S-parameters hold an impedance far from the
// reference only to a relative error of about 1e-16·R/|Z| or 1e-16·|Z|/R.
func WriteTouchstone(w io.Writer, freq []float64, z []complex128, comment []string, format ...TouchstoneFormat) error {
	f := TouchstoneFormat{}
	if len(format) > 0 {
		f = format[0]
	}
	if f.Parameter == "" {
		f.Parameter = "S"
	}
	if f.Format == "" {
		f.Format = "RI"
	}
	if f.Unit == "" {
		f.Unit = "Hz"
	}
	if f.Reference == 0 {
		f.Reference = 50
	}
	option := fmt.Sprintf("# %s %s %s R %s", f.Unit, f.Parameter, f.Format, strconv.FormatFloat(f.Reference, 'g', -1, 64))
	parsed, bad := parseOptionLine(strings.Fields(option[1:]))
	if bad >= 0 || parsed.parameter == 'H' || parsed.parameter == 'G' || len(format) > 1 {
		return fmt.Errorf("touchstone: expected S, Y or Z, RI, MA or DB, Hz to GHz and a positive resistance, found %q", option)
	}
	if len(freq) != len(z) {
		return fmt.Errorf("touchstone: expected as many impedances as frequencies, found %d and %d", len(z), len(freq))
	}
	out := bufio.NewWriter(w)
	for _, c := range comment {
		for _, l := range strings.Split(strings.ReplaceAll(c, "\r", ""), "\n") {
			fmt.Fprintf(out, "! %s\n", asciiOnly(l))
		}
	}
	fmt.Fprintln(out, option)
	for i, v := range z {
		if !(freq[i] >= 0) || math.IsInf(freq[i], 0) || i > 0 && !(freq[i] > freq[i-1]) {
			return fmt.Errorf("touchstone: expected ascending frequencies, found %g Hz as point %d", freq[i], i+1)
		}
		n := v / complex(f.Reference, 0)
		switch parsed.parameter {
		case 'S':
			n = SFromImpedance(v, f.Reference, ConnectionReflection)
		case 'Y':
			n = complex(f.Reference, 0) / v
		}
		a, b := real(n), imag(n)
		switch parsed.format {
		case "MA":
			a, b = cmplx.Abs(n), cmplx.Phase(n)*180/math.Pi
		case "DB":
			// A perfect match has no level; −400 dB is as good.
			a, b = max(-400, 20*math.Log10(cmplx.Abs(n))), cmplx.Phase(n)*180/math.Pi
		}
		if math.IsNaN(a) || math.IsInf(a, 0) || math.IsNaN(b) || math.IsInf(b, 0) {
			return fmt.Errorf("touchstone: expected a finite impedance, found %v at %g Hz", v, freq[i])
		}
		fmt.Fprintf(out, "%s %s %s\n", number(scale(freq[i], -parsed.exp)), number(a), number(b))
	}
	return out.Flush()
}

func number(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// asciiOnly replaces what the standard does not allow.
func asciiOnly(s string) string {
	s = strings.NewReplacer("µ", "u", "μ", "u", "Ω", "Ohm", "°", "deg", "–", "-", "−", "-", "…", "...").Replace(s)
	return strings.Map(func(r rune) rune {
		if r < 0x20 && r != '\t' || r > 0x7e {
			return '?'
		}
		return r
	}, s)
}
