package ingest

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"
	"sort"
	"strings"
)

// partData is the points of one part in the order of the file.
type partData struct {
	label string // "" for the only part of a file
	meta  Metadata
	freq  []float64
	z     []complex128
	line  []int32

	s          []complex128 // as measured, nil if not S-parameters
	reference  float64
	connection string
}

// half is a frequency and one quantity, whose partner stands elsewhere.
type half struct {
	seg  *segment
	freq []float64
	vals []float64
	col  heading
}

// parsed is a file understood, before sorting.
type parsed struct {
	name     string
	parts    []*partData
	halves   []*half
	reading  Reading
	meta     Metadata
	dropped  []Dropped
	warnings []Warning
	faults   []*Error
	more     int
	builder  *builder // to join two files, nil where nothing was built
}

// readDelimited reads delimited text, or the cells of a spreadsheet.
func readDelimited(src *source, o Options) (*parsed, error) {
	if src.delim == 0 {
		src.detectDelimiter()
	}
	r := &reader{source: src, opt: o}
	p := &parsed{name: src.name, reading: src.reading()}
	if err := r.readTables(); err != nil {
		r.fault(err)
		// The header's fault stands above those of rows.
		last := len(r.faults) - 1
		copy(r.faults[1:], r.faults[:last])
		r.faults[0] = err
		p.faults, p.more = r.faults, r.more
		p.meta, p.dropped = r.meta, r.dropped
		p.reading.fill(p, r)
		return p, nil
	}
	p.meta, p.dropped, p.faults, p.more = r.meta, r.dropped, r.faults, r.more
	p.reading.fill(p, r)
	if len(p.faults) > 0 {
		return p, nil
	}
	p.builder = &builder{reader: r, parsed: p}
	p.builder.build()
	return p, nil
}

// builder turns segments into parts.
type builder struct {
	*reader
	*parsed
	assumed []role // whose unit was taken for granted
	byName  map[string]*partData
}

func (b *builder) refuse(e *Error) {
	e.File = b.reader.name
	b.parsed.faults = append(b.parsed.faults, e)
}

func (b *builder) warn(code, format string, args ...any) {
	text := fmt.Sprintf(format, args...)
	for _, w := range b.parsed.warnings {
		if w.Code == code && w.Text == text {
			return
		}
	}
	b.parsed.warnings = append(b.parsed.warnings, Warning{code, text})
}

func (b *builder) note(format string, args ...any) {
	text := fmt.Sprintf(format, args...)
	for _, n := range b.reading.Notes {
		if n == text {
			return
		}
	}
	b.reading.Notes = append(b.reading.Notes, text)
}

func (b *builder) build() {
	if e := b.crumbs(); e != nil {
		b.refuse(e)
		return
	}
	for _, seg := range b.segments {
		for gi := range seg.plan.groups {
			g := &seg.plan.groups[gi]
			if len(g.ways) == 0 {
				b.addHalf(seg, g)
				continue
			}
			b.addGroup(seg, g)
			if len(b.parsed.faults) > 0 {
				return
			}
		}
	}
	b.joinHalves()
	b.assumptions()
	if b.byName != nil {
		for _, name := range b.names {
			if b.byName[name] == nil {
				b.warn(WarnPartEmpty, "no row of part %s could be used", name)
			}
		}
	}
	b.nameParts()
}

// crumbs refuses a table that blank lines would cut into parts of one point each:
// it is more likely a sweep in no order.
func (b *builder) crumbs() *Error {
	single := 0
	for _, seg := range b.segments {
		if len(seg.line) == 1 {
			single++
		}
	}
	if len(b.segments) <= 3 || 2*single <= len(b.segments) {
		return nil
	}
	e := b.headError(b.segments[0].plan, -1, "parts of several points", "remove the blank lines, or sort the rows by frequency")
	e.Found, e.bare, e.Err = fmt.Sprintf("%d blocks of one row", single), true, ErrAmbiguous
	return e
}

// assume warns of the units of used columns that were taken for granted.
func (b *builder) assume(seg *segment, columns ...int) {
	p := seg.plan
	if p.head < 0 && len(b.opt.Columns) == 0 {
		b.warn(WarnNoHeader, "no header: the three columns were taken as frequency in Hz, |Z| in Ω and phase in degrees; --columns and --units say otherwise")
		return
	}
	for _, i := range columns {
		if i < 0 {
			continue
		}
		c := p.cols[i]
		if dim := roles[c.role].dim; c.unit.dim == "" && dim != "" && dim != "1" && dim != "dB" && !c.role.isAngle() && !slices.Contains(b.assumed, c.role) {
			b.assumed = append(b.assumed, c.role)
		}
	}
}

// assumptions puts what was assumed into one warning.
func (b *builder) assumptions() {
	var texts []string
	for _, r := range b.assumed {
		texts = append(texts, fmt.Sprintf("%s in %s", roles[r].name, roles[r].dim))
	}
	if len(texts) > 0 {
		b.warn(WarnUnitAssumed, "no unit stated: %s; --units says otherwise", strings.Join(texts, ", "))
	}
}

// column returns the values of column i.
func (seg *segment) column(i int) []float64 { return seg.vals[seg.slot[i]] }

// freqs returns the frequencies of a group in Hz.
func (seg *segment) freqs(g *group) []float64 {
	f := seg.column(g.freq)
	if seg.plan.cols[g.freq].role != roleOmega {
		return f
	}
	hz := make([]float64, len(f))
	for i, w := range f {
		hz[i] = w / (2 * math.Pi)
	}
	return hz
}

// addGroup computes Z of the rows and deals them out to parts.
func (b *builder) addGroup(seg *segment, g *group) {
	f := seg.freqs(g)
	if len(f) == 0 {
		return
	}
	way, s, z, ok := b.bestWay(seg, g, f)
	if !ok {
		return
	}
	if !b.plausible(seg, g, way, f) {
		return
	}
	b.assume(seg, g.freq, way.a, way.b)
	b.reading.markUsed(seg.plan, way)
	meta := seg.meta.merge(b.reader.meta)
	if !b.conditions(seg, g, way, f, &meta) {
		return
	}
	conn, ref := "", 0.0
	if s != nil {
		conn, ref = b.connection(way.port)
		if ref == 0 {
			ref = b.reference(seg)
		}
	}
	add := func(label string) *partData {
		d := &partData{label: label, meta: meta, connection: conn, reference: ref}
		if s != nil {
			d.s = []complex128{}
		}
		b.parsed.parts = append(b.parsed.parts, d)
		return d
	}
	put := func(d *partData, i int) {
		d.freq = append(d.freq, f[i])
		d.z = append(d.z, z[i])
		d.line = append(d.line, seg.line[i])
		if s != nil {
			d.s = append(d.s, s[i])
		}
	}
	if seg.part != nil && len(f) > 1 && allDifferent(seg.part) && !repeats(f) {
		b.note("column %d numbers the rows and is no part column", g.part+1)
		seg.part = nil
	}
	if seg.part == nil {
		label := g.label
		if label == "" {
			label = firstNonEmpty(seg.meta.Part, seg.meta.Serial)
		}
		d := add(label)
		if len(seg.plan.groups) == 1 {
			d.freq, d.z, d.line, d.s = f, z, seg.line, s
			return
		}
		// Parts side by side share frequencies, sweeps must not; and what a part
		// lacks is NaN here.
		for i := range f {
			if !math.IsNaN(f[i]) && !cmplx.IsNaN(z[i]) {
				put(d, i)
			}
		}
		return
	}
	// A part column: rows of the same name belong together wherever they stand.
	if b.byName == nil {
		b.byName = map[string]*partData{}
	}
	for i := range f {
		d := b.byName[seg.part[i]]
		if d == nil {
			d = add(seg.part[i])
			b.byName[seg.part[i]] = d
		}
		put(d, i)
	}
}

// conditions looks at columns of bias and temperature: a constant one is
// metadata; one that varies while frequencies repeat makes several sweeps, and
// the caller must say so.
func (b *builder) conditions(seg *segment, g *group, w measured, f []float64, meta *Metadata) bool {
	p := seg.plan
	for i, c := range p.cols {
		if c.role != roleBias && c.role != roleTemperature || seg.slot[i] < 0 {
			continue
		}
		v := seg.column(i)
		low, high := math.Inf(1), math.Inf(-1)
		for _, x := range v {
			low, high = min(low, x), max(high, x) // NaN where a cell is empty
		}
		switch {
		case low == high:
			text := number(low) + " " + firstNonEmpty(c.unit.dim, roles[c.role].dim)
			if c.role == roleBias && meta.Bias == "" {
				meta.Bias = text
				meta.BiasV, meta.BiasA, meta.HasBias = voltsOrAmps(text, "")
			}
			if c.role == roleTemperature && meta.Temperature == "" {
				meta.Temperature, meta.TemperatureC, meta.HasTemperature = text, low, true
			}
		case low < high && seg.part == nil && repeats(f):
			hint := fmt.Sprintf("--columns 'f=%d", g.freq+1)
			for _, k := range []int{w.a, w.b} {
				if k >= 0 && roles[p.cols[k].role].key != "" {
					hint += fmt.Sprintf(",%s=%d", roles[p.cols[k].role].key, k+1)
				}
			}
			e := b.headError(p, i, "one sweep at one "+roles[c.role].name, fmt.Sprintf("%s,part=%d' to read one sweep for each", hint, i+1))
			e.Found, e.bare, e.Err = fmt.Sprintf("several, from %g to %g", low, high), true, ErrAmbiguous
			b.refuse(e)
			return false
		}
	}
	return true
}

func repeats(f []float64) bool {
	seen := make(map[float64]bool, len(f))
	for _, x := range f {
		if seen[x] {
			return true
		}
		seen[x] = true
	}
	return false
}

// allDifferent: each row has another "part", so the column counts rows.
func allDifferent(names []string) bool {
	seen := make(map[string]bool, len(names))
	for _, n := range names {
		if seen[n] {
			return false
		}
		seen[n] = true
	}
	return true
}

func firstNonEmpty(texts ...string) string {
	for _, t := range texts {
		if t != "" {
			return t
		}
	}
	return ""
}

// bestWay computes Z by the first way, compares it with the others, and
// prefers measured S-parameters where they agree with the impedance columns,
// which the analyser computed from them and rounded.
func (b *builder) bestWay(seg *segment, g *group, f []float64) (way measured, s, z []complex128, ok bool) {
	way = g.ways[0]
	s, z, ok = b.compute(seg, g, way, f, false)
	if !ok {
		return
	}
	for _, other := range g.ways[1:] {
		s2, z2, ok2 := b.compute(seg, g, other, f, true)
		if !ok2 || len(z2) == 0 {
			continue
		}
		d := medianDifference(z, z2)
		if math.IsNaN(d) {
			continue
		}
		names := [2]string{seg.plan.wayName(way), seg.plan.wayName(other)}
		switch {
		case s == nil && s2 != nil && d <= 0.05:
			if complete(z2) {
				b.note("%s agrees with %s (median difference %.2g %%) and is used: it is what was measured", names[1], names[0], 100*d)
				way, s, z = other, s2, z2
			}
		case s == nil && s2 != nil:
			b.warn(WarnColumnsDiffer, "%s differs from %s by %.3g %% (median); the latter is used", names[1], names[0], 100*d)
		case d > 0.1:
			e := b.headError(seg.plan, other.a, fmt.Sprintf("%s to agree with %s", names[1], names[0]), "--columns to choose two columns, or --units if one has another unit")
			e.Found, e.bare, e.Err = fmt.Sprintf("a median difference of %.3g %%", 100*d), true, ErrAmbiguous
			b.refuse(e)
			return way, nil, nil, false
		default:
			b.note("%s agrees with %s (median difference %.2g %%)", names[1], names[0], 100*d)
		}
	}
	return way, s, z, true
}

func complete(z []complex128) bool {
	for _, v := range z {
		if cmplx.IsNaN(v) || cmplx.IsInf(v) {
			return false
		}
	}
	return true
}

// medianDifference is the median of |a − b|/|a| where both are finite.
func medianDifference(a, b []complex128) float64 {
	var d []float64
	for i := range a {
		v := cmplx.Abs(a[i]-b[i]) / cmplx.Abs(a[i])
		if !math.IsNaN(v) {
			d = append(d, v)
		}
	}
	if len(d) == 0 {
		return math.NaN()
	}
	sort.Float64s(d)
	return d[len(d)/2]
}

func (p *plan) wayName(w measured) string {
	switch {
	case w.pair != nil:
		return w.pair.name()
	case w.port != 0:
		return fmt.Sprintf("S%d", w.port)
	}
	return roles[p.cols[w.a].role].name
}

// compute gets Z (and S, where that was measured) by one way. quiet is for
// comparison: what cannot be computed is no fault then.
func (b *builder) compute(seg *segment, g *group, w measured, f []float64, quiet bool) (s, z []complex128, ok bool) {
	p := seg.plan
	z = make([]complex128, len(f))
	if w.port != 0 {
		return b.computeS(seg, g, w, quiet)
	}
	if w.pair == nil {
		col := seg.cplx[w.a]
		if len(col) != len(f) {
			return nil, nil, false
		}
		for i, v := range col {
			if p.cols[w.a].role == roleY {
				v = 1 / v
			}
			z[i] = v
		}
		return nil, z, true
	}
	va, vb := seg.column(w.a), seg.column(w.b)
	ka, kb := sign(p.cols[w.a].negate), sign(p.cols[w.b].negate)
	if p.cols[w.b].role.isAngle() {
		kb, ok = b.radians(seg, w.b, f, va, quiet)
		if !ok || p.cols[w.a].presumed && !b.bearsOut(seg, w.a, f, va, vb, kb, quiet) {
			return nil, nil, false
		}
	}
	for i := range f {
		z[i] = w.pair.z(2*math.Pi*f[i], va[i]*ka, vb[i]*kb)
	}
	return nil, z, true
}

// sign is the factor of a column, of which the header may name the negative.
func sign(negate bool) float64 {
	if negate {
		return -1
	}
	return 1
}

// bearsOut tells whether a magnitude and a phase of nothing named can be those of
// an impedance: the phase follows the slope of the magnitude (Bode), or the
// magnitude is flat and above 1, which no reflection is. S-parameters do not pass.
// An admittance follows the relation as well: that |Z| in Ω was assumed is
// therefore said in a warning.
func (b *builder) bearsOut(seg *segment, col int, f, mag, phase []float64, radians float64, quiet bool) bool {
	degrees := make([]float64, len(phase))
	for i, v := range phase {
		degrees[i] = v * radians * 180 / math.Pi
	}
	line := slopeFactor(f, mag, degrees)
	flat := line.predicted < 3 && slices.Min(mag) > 1.1
	if flat || line.gainsays() && line.factor > 0 {
		return true
	}
	if !quiet {
		e := b.headError(seg.plan, col, "what the magnitude is of", "--columns 'f=1,z=2,phase=3' for |Z|, or y and yphase, with the columns' numbers")
		e.Found, e.bare, e.Err = "a magnitude and a phase that do not look like those of an impedance", true, ErrAmbiguous
		b.refuse(e)
	}
	return false
}

func negated(v []float64) []float64 {
	out := make([]float64, len(v))
	for i := range v {
		out[i] = -v[i]
	}
	return out
}

// radians is the factor that makes radians of a column of angles, whose unit is
// told from the values where the header does not state it.
func (b *builder) radians(seg *segment, col int, f, mag []float64, quiet bool) (float64, bool) {
	h := &seg.plan.cols[col]
	raw := seg.column(col)
	dim := h.unit.dim
	bare := seg.plan.head < 0 && len(b.opt.Columns) == 0
	switch {
	case dim == "" && b.angle != angleUnknown:
		dim = b.angle.dim()
	case dim == "":
		unit, why := b.tellAngle(f, mag, raw, h)
		if unit == angleUnknown {
			if !quiet {
				e := b.headError(seg.plan, col, "degrees or radians", "--units phase=deg or --units phase=rad")
				e.Found, e.bare, e.Err = fmt.Sprintf("no unit, and %s", why), true, ErrAmbiguous
				if h.role == rolePhaseY {
					e.Hint = "--units yphase=deg or --units yphase=rad"
				}
				b.refuse(e)
			}
			return 0, false
		}
		dim = unit.dim()
		if quiet {
			break
		}
		b.angle = unit
		name := map[string]string{"°": "degrees", "rad": "radians"}[dim]
		b.warn(WarnPhaseUnit, "the phase was taken in %s: %s; --units phase=deg or phase=rad says otherwise", name, why)
	case h.role != roleSPhase && !quiet && b.opt.Units[roles[h.role].key] == "" && h.unit.exp == 0:
		// A stated unit that the values contradict: the flag must say which is
		// right.
		signed := raw
		if h.negate {
			signed = negated(raw)
		}
		most, line := largest(signed), slopeFactor(f, mag, signed)
		unit := angleDegrees
		if !(most > beyondPi) {
			unit = line.unit()
		}
		if most <= beyondPi && !line.gainsays() {
			unit = angleUnknown
		}
		stated := angleDegrees
		if dim == "rad" {
			stated = angleRadians
		}
		if unit != angleUnknown && unit != stated {
			other := map[angleUnit]string{angleDegrees: "degrees", angleRadians: "radians"}
			where := ""
			if bare {
				where = " in a file without a header"
			}
			key := roles[h.role].key
			e := b.headError(seg.plan, col, "phase in "+other[stated]+where, fmt.Sprintf("--units %s=%s, or %s=%s if the header is right", key, unit.short(), key, stated.short()))
			_, why := phaseUnit(f, mag, signed)
			e.Found, e.bare, e.Err = "values that look like "+other[unit]+": "+why, true, ErrAmbiguous
			b.refuse(e)
			return 0, false
		}
		if k := line.factor; line.gainsays() && stated == angleDegrees && -mostFactor <= k && k <= -leastFactor {
			b.warn(WarnUnchecked, "the phase has the opposite sign of what the slope of the magnitude asks for (factor %.2f): a capacitor's phase is negative in Z and positive in Y", k)
		}
	}
	if dim == "°" {
		return sign(h.negate) * (math.Pi / 180), true
	}
	return sign(h.negate), true
}

func (b *builder) tellAngle(f, mag, raw []float64, h *heading) (angleUnit, string) {
	if h.negate {
		raw = negated(raw)
	}
	if h.role == roleSPhase {
		// No slope rule holds for a reflection.
		if v := largest(raw); v > beyondPi {
			return angleDegrees, fmt.Sprintf("values up to %.4g exceed π", v)
		}
		return angleUnknown, "no value exceeds π"
	}
	return phaseUnit(f, mag, raw)
}

// computeS gets S and Z from S-parameter columns.
func (b *builder) computeS(seg *segment, g *group, w measured, quiet bool) (s, z []complex128, ok bool) {
	p := seg.plan
	conn, _ := b.connection(w.port)
	if conn == "" {
		if !quiet {
			e := b.headError(p, w.a, "how the part was connected", "--connection series or --connection shunt")
			e.Found, e.bare, e.Err = fmt.Sprintf("S%d without it", w.port), true, ErrConnection
			b.refuse(e)
		}
		return nil, nil, false
	}
	n := len(seg.line)
	s = make([]complex128, n)
	if w.b < 0 {
		col := seg.cplx[w.a]
		if len(col) != n {
			return nil, nil, false
		}
		copy(s, col)
	} else {
		va, vb := seg.column(w.a), seg.column(w.b)
		switch p.cols[w.a].role {
		case roleSRe:
			for i := range s {
				s[i] = complex(va[i], vb[i])
			}
		default:
			phi := seg.column(w.b)
			radians, ok := b.radians(seg, w.b, seg.freqs(g), va, quiet)
			if !ok {
				return nil, nil, false
			}
			mag := va
			if p.cols[w.a].role == roleSdB {
				mag = make([]float64, n)
				sign := 1.0
				if p.cols[w.a].lossDB {
					var good bool
					if sign, good = lossSign(va); !good {
						if !quiet {
							e := b.headError(p, w.a, "losses of one sign", "a column S11 in dB instead of return loss")
							e.Found, e.bare, e.Err = "positive and negative ones", true, ErrAmbiguous
							b.refuse(e)
						}
						return nil, nil, false
					}
					if sign < 0 {
						b.note("the loss is positive: its negative is the level of S%d", w.port)
					}
				}
				for i := range va {
					mag[i] = fromDB(sign * va[i])
				}
			}
			for i := range s {
				s[i] = polar(mag[i], phi[i]*radians)
			}
		}
	}
	ref := b.reference(seg)
	z = make([]complex128, n)
	for i := range s {
		z[i] = ImpedanceFromS(s[i], ref, conn)
	}
	if !quiet {
		b.noteReference(seg)
	}
	return s, z, true
}

// lossSign tells which sign a loss column has: a passive part reflects less
// than all, so the level of S is negative. A few points within noise of zero do
// not count.
func lossSign(v []float64) (float64, bool) {
	pos, neg := 0, 0
	for _, x := range v {
		switch {
		case x > 0.05:
			pos++
		case x < -0.05:
			neg++
		}
	}
	switch {
	case pos > 0 && neg > 0:
		return 0, false
	case pos > 0:
		return -1, true
	}
	return 1, true
}

// connection is how the part sits at a port, "" if that must be asked.
func (b *builder) connection(port int) (string, float64) {
	switch port {
	case 11, 22:
		return ConnectionReflection, 0
	}
	if c := b.opt.Connection; c == ConnectionSeries || c == ConnectionShunt {
		return c, 0
	}
	return "", 0
}

// reference is the reference resistance: stated in the file, by the caller, or 50 Ω.
func (b *builder) reference(seg *segment) float64 {
	if r := seg.meta.merge(b.reader.meta).reference; r > 0 {
		return r
	}
	if b.opt.Reference > 0 {
		return b.opt.Reference
	}
	return 50
}

func (b *builder) noteReference(seg *segment) {
	if seg.meta.merge(b.reader.meta).reference > 0 || b.opt.Reference > 0 {
		return
	}
	b.warn(WarnReference, "no reference resistance stated: 50 Ω assumed")
}

// plausible refuses numbers that no part has in the unit that was taken for
// granted: 9.87 below "Cs" without a unit is µF or nF, not farads.
func (b *builder) plausible(seg *segment, g *group, w measured, f []float64) bool {
	p := seg.plan
	if len(f) == 0 || p.head < 0 && len(b.opt.Columns) == 0 {
		return true
	}
	check := func(i int, least, most float64, example string) bool {
		if i < 0 {
			return true
		}
		c := p.cols[i]
		if c.unit.dim != "" {
			return true
		}
		abs := make([]float64, 0, len(f))
		for _, v := range seg.column(i) {
			abs = append(abs, math.Abs(v))
		}
		sort.Float64s(abs)
		m := abs[len(abs)/2]
		if m >= least && m <= most {
			return true
		}
		e := b.headError(p, i, fmt.Sprintf("a unit for %s", roles[c.role].name), "--units "+example)
		e.Found, e.bare, e.Err = fmt.Sprintf("%.4g without a unit, which is not likely in %s", m, roles[c.role].dim), true, ErrAmbiguous
		b.refuse(e)
		return false
	}
	top := 0.0
	for _, v := range f {
		top = max(top, v)
	}
	if p.cols[g.freq].unit.dim == "" && top < 20 {
		e := b.headError(p, g.freq, "a unit for frequency", "--units f=MHz, or f=Hz if it is")
		e.Found, e.bare, e.Err = fmt.Sprintf("no frequency above %.4g without a unit", top), true, ErrAmbiguous
		b.refuse(e)
		return false
	}
	for _, i := range []int{w.a, w.b} {
		if i < 0 {
			continue
		}
		switch r := p.cols[i].role; r {
		case roleCs, roleCp:
			if !check(i, 1e-18, 0.03, roles[r].key+"=pF") {
				return false
			}
		case roleLs, roleLp:
			if !check(i, 1e-15, 30, roles[r].key+"=uH") {
				return false
			}
		}
	}
	return true
}
