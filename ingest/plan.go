package ingest

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"unicode"
)

// measured is one way to get Z from the columns of a group: a pair of
// quantities, or the parts of an S-parameter.
type measured struct {
	a, b int   // columns; b is -1 for a complex literal
	pair *pair // nil for S-parameters and complex literals
	port int   // of S-parameters
}

// group is the columns of one part: side by side there may be several.
type group struct {
	label string
	freq  int
	part  int        // column, -1 if there is none
	ways  []measured // in order of preference; empty if the group is a half
	half  int        // the only quantity of an incomplete group, -1
	// unnamed lists columns of numbers that the header says nothing about, where
	// it names no quantity at all.
	unnamed []int
}

// columns lists the columns of a group that must be numbers.
func (g *group) columns() []int {
	out := []int{g.freq}
	if len(g.ways) > 0 {
		out = append(out, g.ways[0].a)
		if b := g.ways[0].b; b >= 0 {
			out = append(out, b)
		}
	}
	if g.half >= 0 {
		out = append(out, g.half)
	}
	return append(out, g.unnamed...)
}

// plan is what is read from the rows below one header.
type plan struct {
	table
	groups []group
	// connection is how the caller says that the part was connected, "" if not.
	connection string
	loose      bool  // rows may have more cells than the header: columns are given by number
	need       []int // columns whose cells must be numbers
	also       []int // columns that are read if they are numbers, to compare
}

// plan decides which columns make the impedance. firstCells are the first
// row's, to see complex literals.
func (s *source) plan(t table, o Options, meta Metadata) (*plan, *Error) {
	p := &plan{table: t, connection: o.Connection}
	for _, v := range o.Columns {
		if _, err := strconv.Atoi(v); err == nil {
			p.loose = true
		}
	}
	p.applyUnits(o.Units)
	var first []string
	if i, cells := s.nextRow(p.first); i >= 0 {
		first = s.texts(cells)
	}
	if !p.loose && p.head >= 0 && s.delim == blanks && len(first) != len(p.cols) && len(first) > 0 && looksNumber(first[0], s.decimal) {
		// Which heading belongs to which column is anybody's guess.
		e := s.headError(p, -1, fmt.Sprintf("a heading for each of %d columns", len(first)), "--columns 'f=1,z=2,phase=3' with the columns' numbers")
		e.Found, e.bare, e.Err = fmt.Sprintf("%d", len(p.cols)), true, ErrAmbiguous
		return nil, e
	}
	settle(p.cols, first, meta)

	freqs := []int{}
	part := -1
	for i, c := range p.cols {
		switch c.role {
		case roleFreq, roleOmega:
			freqs = append(freqs, i)
		case rolePart:
			if part < 0 {
				part = i
			}
		}
	}
	if len(freqs) == 0 {
		return nil, s.headError(p, -1, "a frequency column", "--columns 'f=1,z=2,phase=3' with the columns' numbers")
	}
	var err *Error
	if len(freqs) > 1 {
		err = s.groupByFreq(p, freqs, part)
	} else {
		err = s.groupByLabel(p, freqs[0], part)
	}
	if err != nil {
		return nil, err
	}
	for n := range p.groups {
		g := &p.groups[n]
		if len(g.ways) > 0 || g.half >= 0 {
			continue
		}
		for i, c := range p.cols {
			if !c.known() && i < len(first) && first[i] != "" && looksNumber(first[i], s.decimal) {
				g.unnamed = append(g.unnamed, i)
			}
		}
		if len(g.unnamed) == 0 {
			return nil, s.noPair(p, nil, g.freq)
		}
	}
	p.collect()
	for _, i := range append(append([]int{}, p.need...), freqsOf(p)...) {
		c := p.cols[i]
		if c.fault != "" {
			return nil, s.headError(p, i, c.fault+" for "+roles[c.role].name, "--units "+roles[c.role].key+"=…")
		}
		if c.ambiguous && o.Units[roles[c.role].key] == "" {
			e := s.headError(p, i, "a unit that tells milli from mega", fmt.Sprintf("--units '%s=m…' or --units '%s=M…'", roles[c.role].key, roles[c.role].key))
			e.Err = ErrAmbiguous
			return nil, e
		}
	}
	return p, nil
}

func freqsOf(p *plan) []int {
	var out []int
	for _, g := range p.groups {
		out = append(out, g.freq)
	}
	return out
}

// nextRow is the next line that is no comment.
func (s *source) nextRow(from int) (int, []span) {
	for i := from; i < len(s.lines); i++ {
		if !s.isComment(s.lines[i]) {
			return i, s.split(s.lines[i], nil)
		}
	}
	return -1, nil
}

// applyUnits puts the units of --units in place of the header's.
func (p *plan) applyUnits(units Units) {
	for _, key := range columnKeys {
		text, ok := units[key]
		if !ok {
			continue
		}
		r, _ := keyRole(key)
		u, _, _ := readUnit(text)
		for i := range p.cols {
			c := &p.cols[i]
			same := c.role == r || r == roleFreq && c.role == roleOmega ||
				r == rolePhase && (c.role == roleAngle || c.role == roleSPhase) || r == roleAbsZ && c.role == roleMag ||
				(r == roleCs || r == roleCp) && c.role == roleCapacitance || (r == roleLs || r == roleLp) && c.role == roleInductance
			if !same {
				continue
			}
			c.unit, c.ambiguous, c.fault = u, false, ""
			if r == roleAbsZ {
				c.role = roleAbsZ
			}
			if r == roleFreq {
				c.role = roleFreq
				if u.dim == "rad/s" {
					c.role = roleOmega
				}
			}
		}
	}
}

// settle gives roles to the words that say too little alone.
func settle(cols []heading, first []string, meta Metadata) {
	var has [numRoles]bool
	port := 0
	for _, c := range cols {
		has[c.role] = true
		if c.port != 0 {
			port = c.port
		}
	}
	hasS := has[roleS] || has[roleSMag] || has[roleSdB] || has[roleSRe]
	presumeImpedance(cols)
	// A column of complex numbers in one cell.
	for i := range cols {
		c := &cols[i]
		if i >= len(first) {
			continue
		}
		if _, ok := parseComplex(first[i]); !ok {
			continue
		}
		switch c.role {
		case roleAbsZ, roleMag:
			c.role = roleZ
		case roleAbsY:
			c.role = roleY
		}
	}
	// An angle belongs to the magnitude before it, or to the only one there is.
	for i := range cols {
		c := &cols[i]
		if c.role != roleAngle && c.role != rolePhase {
			continue
		}
		var near *heading
		for j := i - 1; j >= 0 && near == nil; j-- {
			switch cols[j].role {
			case roleAbsZ, roleAbsY, roleSMag, roleSdB, roleS:
				near = &cols[j]
			}
		}
		zOnly := has[roleAbsZ] && !has[roleAbsY] && !hasS
		yOnly := has[roleAbsY] && !has[roleAbsZ] && !hasS
		switch {
		case yOnly:
			c.role = rolePhaseY
		case c.role == rolePhase:
		case zOnly:
			c.role = rolePhase
		case hasS && !has[roleAbsZ] && !has[roleAbsY] && near == nil:
			c.role, c.port = roleSPhase, port
		case near == nil:
		case near.role == roleAbsZ:
			c.role = rolePhase
		case near.role == roleAbsY:
			c.role = rolePhaseY
		default:
			c.role, c.port = roleSPhase, near.port
		}
	}
	for i := range cols {
		c := &cols[i]
		switch c.role {
		case roleMag:
			// |Z| only if it says ohms, or its angle says it is of Z.
			if has[rolePhase] && !has[roleAbsZ] && c.unit.dim == "" {
				c.role = roleAbsZ
			}
		case roleCapacitance:
			c.role = equivalent(meta.mode, has, "c", roleCs, roleCp, c.role)
		case roleInductance:
			c.role = equivalent(meta.mode, has, "l", roleLs, roleLp, c.role)
		}
	}
}

// presumeImpedance takes a magnitude and a phase of nothing named for those of Z
// where they are all there is beside the frequency. The values must bear it
// out, see [builder.bearsOut].
func presumeImpedance(cols []heading) {
	magnitude, angle := -1, -1
	for i, c := range cols {
		switch c.role {
		case roleNone, roleFreq, rolePart:
		case roleMag:
			if magnitude >= 0 || c.unit.dim != "" {
				return
			}
			magnitude = i
		case roleAngle:
			if angle >= 0 {
				return
			}
			angle = i
		default:
			return
		}
	}
	if magnitude < 0 || angle < 0 {
		return
	}
	cols[magnitude].role, cols[magnitude].presumed = roleAbsZ, true
	cols[angle].role = rolePhase
}

// equivalent tells a series from a parallel quantity: by the other column (Rs,
// ESR or X beside it means series; G or Rp parallel), or by the instrument's
// mode.
func equivalent(mode string, has [numRoles]bool, letter string, s, p, unknown role) role {
	series := has[roleRs] || modeNames(mode, letter+"s", "d", "q", "rs")
	par := has[roleRp] || has[roleG] || modeNames(mode, letter+"p", "d", "q", "g", "rp")
	switch {
	case series && !par:
		return s
	case par && !series:
		return p
	}
	return unknown
}

// modeNames reports whether one word of a mode is the quantity, alone or with
// its second ("Cs-D", "CSD").
func modeNames(mode, quantity string, seconds ...string) bool {
	for _, w := range strings.FieldsFunc(mode, func(r rune) bool { return !unicode.IsLetter(r) }) {
		rest, ok := strings.CutPrefix(w, quantity)
		if ok && (rest == "" || slices.Contains(seconds, rest)) {
			return true
		}
	}
	return false
}

// groupByFreq: each frequency column begins a group.
func (s *source) groupByFreq(p *plan, freqs []int, part int) *Error {
	for n, f := range freqs {
		end := len(p.cols)
		if n+1 < len(freqs) {
			end = freqs[n+1]
		}
		from := f
		if n == 0 {
			from = 0
		}
		var idx []int
		label := ""
		for i := from; i < end; i++ {
			if p.cols[i].label != "" {
				label = p.cols[i].label
			}
			idx = append(idx, i)
		}
		g, err := s.group(p, idx, f, part, label)
		if err != nil {
			return err
		}
		if g.label == "" {
			g.label = counted(n + 1)
		}
		p.groups = append(p.groups, g)
	}
	return nil
}

// groupByLabel: columns that share a label belong together; without labels,
// columns that repeat the same sequence of roles do.
func (s *source) groupByLabel(p *plan, freq, part int) *Error {
	if countKnown(p.cols) < len(p.cols) {
		s.labelColumns(p)
	}
	if !hasLabels(p.cols) && repeatsRole(p.cols) {
		numberRepeats(p.cols)
	}
	var order []string
	byLabel := map[string][]int{}
	for i, c := range p.cols {
		if !c.role.quantity() || i == freq {
			continue
		}
		if _, ok := byLabel[c.label]; !ok {
			order = append(order, c.label)
		}
		byLabel[c.label] = append(byLabel[c.label], i)
	}
	if len(order) == 0 {
		g, err := s.group(p, nil, freq, part, "")
		if err != nil {
			return err
		}
		p.groups = append(p.groups, g)
		return nil
	}
	for _, label := range order {
		g, err := s.group(p, byLabel[label], freq, part, label)
		if err != nil {
			return err
		}
		p.groups = append(p.groups, g)
	}
	return nil
}

func hasLabels(cols []heading) bool {
	for _, c := range cols {
		if c.label != "" {
			return true
		}
	}
	return false
}

// labelColumns recognises headers such as "|Z| part1" or "c017 phase (deg)":
// a known word and a label, if every label has the same known words and those
// make a pair.
func (s *source) labelColumns(p *plan) {
	type found struct {
		h     heading
		label string
		ok    bool
	}
	got := make([]found, len(p.cols))
	roleSets := map[string]map[role]bool{}
	words := map[string]heading{} // the same words come with every part
	for i, c := range p.cols {
		if c.known() {
			continue
		}
		h, label, ok := splitLabel(c.text, words)
		if !ok || !h.role.quantity() {
			continue
		}
		got[i] = found{h, label, true}
		if roleSets[label] == nil {
			roleSets[label] = map[role]bool{}
		}
		roleSets[label][h.role] = true
	}
	if len(roleSets) == 0 {
		return
	}
	// All labels must have the same words, at least two.
	var want map[role]bool
	for _, set := range roleSets {
		if want == nil {
			want = set
		}
		if len(set) < 2 || len(set) != len(want) {
			return
		}
		for r := range set {
			if !want[r] {
				return
			}
		}
	}
	trial := make([]heading, len(p.cols))
	copy(trial, p.cols)
	for i := range trial {
		if got[i].ok {
			u := trial[i].unit
			trial[i] = got[i].h
			if trial[i].unit.dim == "" && u.dim != "" {
				trial[i].setUnit(u, false)
			}
			trial[i].text, trial[i].label = p.cols[i].text, got[i].label
		}
	}
	byLabel := map[string][]heading{}
	for i, c := range trial {
		if got[i].ok {
			byLabel[c.label] = append(byLabel[c.label], c)
		}
	}
	for _, cols := range byLabel {
		settle(cols, nil, Metadata{})
	}
	count := map[string]int{}
	for i := range trial {
		if l := trial[i].label; got[i].ok {
			trial[i] = byLabel[l][count[l]]
			count[l]++
		}
	}
	copy(p.cols, trial)
}

// splitLabel takes a header apart into a known word (with its unit) and a label
// before or behind it.
func splitLabel(text string, words map[string]heading) (heading, string, bool) {
	if len(text) > maxHeading {
		return heading{}, "", false
	}
	t := tidy(strings.TrimSpace(text))
	try := func(word, label string) (heading, string, bool) {
		label = strings.Trim(label, " _-:.,()[]#")
		if label == "" || strings.TrimSpace(word) == "" {
			return heading{}, "", false
		}
		if _, isUnit, _ := readUnit(label); isUnit {
			return heading{}, "", false
		}
		label = withoutTrace(label)
		h, ok := words[word]
		if !ok {
			h = readHeading(word)
			words[word] = h
		}
		return h, label, h.known()
	}
	// The unit may stand in brackets at the very end: "|Z| c1 (Ω)".
	suffix := ""
	if n := len(t); n > 0 && (t[n-1] == ')' || t[n-1] == ']') {
		if i := strings.LastIndexAny(t, "(["); i > 0 {
			if _, ok, _ := readUnit(t[i+1 : n-1]); ok {
				t, suffix = strings.TrimSpace(t[:i]), " "+t[i:]
			}
		}
	}
	for _, sep := range []string{" ", "_", ":", "-", ".", "("} {
		if i := strings.Index(t, sep); i > 0 {
			if h, l, ok := try(t[:i]+suffix, t[i+len(sep):]); ok {
				return h, l, true
			}
		}
		if i := strings.LastIndex(t, sep); i > 0 {
			if h, l, ok := try(t[i+len(sep):]+suffix, t[:i]); ok {
				return h, l, true
			}
			if h, l, ok := try(t[:i]+suffix, t[i+len(sep):]); ok {
				return h, l, true
			}
		}
	}
	return heading{}, "", false
}

// traceWords name a curve on a screen, not a part.
var traceWords = map[string]bool{"trace": true, "trc": true, "tr": true, "channel": true, "chan": true, "ch": true, "curve": true, "plot": true,
	"data": true, "measurement": true, "value": true, "impedance": true, "z": true}

// withoutTrace returns "" for a label such as "Trace 1: Impedance".
func withoutTrace(label string) string {
	words := strings.FieldsFunc(strings.ToLower(label), func(r rune) bool { return !unicode.IsLetter(r) })
	for _, w := range words {
		if !traceWords[w] {
			return label
		}
	}
	if len(words) == 0 {
		return label
	}
	return ""
}

// counted labels a part that has no name of its own; the sign in front tells it
// from a part that is called by a number.
func counted(n int) string { return "\x00" + strconv.Itoa(n) }

// numberRepeats labels columns by the count of their role, if all measured
// roles repeat equally often.
func numberRepeats(cols []heading) {
	type key struct {
		role role
		port int
	}
	count := map[key]int{}
	for _, c := range cols {
		if c.role.quantity() {
			count[key{c.role, c.port}]++
		}
	}
	n := 0
	for _, k := range count {
		if n == 0 {
			n = k
		}
		if k != n {
			return
		}
	}
	if n < 2 || len(count) < 2 {
		return
	}
	seen := map[key]int{}
	for i := range cols {
		c := &cols[i]
		if c.role.quantity() {
			k := key{c.role, c.port}
			seen[k]++
			c.label = counted(seen[k])
		}
	}
}

// group finds the ways to get Z from some columns.
func (s *source) group(p *plan, idx []int, freq, part int, label string) (group, *Error) {
	g := group{label: label, freq: freq, part: part, half: -1}
	var at [numRoles]int
	for i := range at {
		at[i] = -1
	}
	var ports map[int]map[role]int
	var portOrder []int
	others := 0
	for _, i := range idx {
		c := p.cols[i]
		switch {
		case i == freq || !c.role.quantity():
			continue
		case c.port != 0:
			if ports == nil {
				ports = map[int]map[role]int{}
			}
			if ports[c.port] == nil {
				ports[c.port] = map[role]int{}
				portOrder = append(portOrder, c.port)
			}
			if _, dup := ports[c.port][c.role]; !dup {
				ports[c.port][c.role] = i
			}
			others++
			continue
		}
		if at[c.role] >= 0 {
			e := s.headError(p, i, "one column of "+roles[c.role].name, fmt.Sprintf("--columns 'f=%d,%s=%d,…' to choose", freq+1, orKey(c.role), i+1))
			e.Err = ErrAmbiguous
			return g, e
		}
		at[c.role] = i
		others++
	}
	for _, r := range []role{roleZ, roleY} {
		if at[r] >= 0 {
			g.ways = append(g.ways, measured{a: at[r], b: -1})
		}
	}
	for k := range pairs {
		q := &pairs[k]
		if at[q.a] >= 0 && at[q.b] >= 0 {
			g.ways = append(g.ways, measured{a: at[q.a], b: at[q.b], pair: q})
		}
	}
	ports2, err := s.usePorts(p, portOrder, ports, len(g.ways) > 0)
	if err != nil {
		return g, err
	}
	for _, port := range ports2 {
		have := ports[port]
		for _, q := range sPairs {
			a, okA := have[q[0]]
			if !okA {
				continue
			}
			if q[1] == roleNone {
				g.ways = append(g.ways, measured{a: a, b: -1, port: port})
				break
			}
			if b, okB := have[q[1]]; okB {
				g.ways = append(g.ways, measured{a: a, b: b, port: port})
				break
			}
		}
	}
	if len(g.ways) > 0 {
		return g, nil
	}
	// A single quantity: another file or block may hold its partner.
	if others == 1 {
		for _, i := range idx {
			if c := p.cols[i]; i != freq && c.role.quantity() {
				g.half = i
			}
		}
		return g, nil
	}
	if others == 0 {
		return g, nil // the columns of numbers are looked at when they are known
	}
	return g, s.noPair(p, idx, freq)
}

// usePorts chooses the S-parameters that fit the connection: S11 of one port is
// a reflection; with transmission beside it, only the caller can know. optional
// means that the impedance is there in other columns too.
func (s *source) usePorts(p *plan, order []int, at map[int]map[role]int, optional bool) ([]int, *Error) {
	var reflected, through []int
	for _, port := range order {
		if port == 11 || port == 22 {
			reflected = append(reflected, port)
		} else {
			through = append(through, port)
		}
	}
	fail := func(found, expected, hint string, cause error) ([]int, *Error) {
		if optional {
			return nil, nil
		}
		col := -1
		for i, c := range p.cols {
			if c.port == order[0] {
				col = i
				break
			}
		}
		e := s.headError(p, col, expected, hint)
		e.Found, e.bare, e.Err = found, true, cause
		return nil, e
	}
	switch {
	case len(order) == 0:
		return nil, nil
	case p.connection == ConnectionReflection && len(reflected) == 0:
		return fail(fmt.Sprintf("S%d only", order[0]), "S11 for a reflection", "--connection series or --connection shunt", ErrUsage)
	case p.connection == ConnectionReflection:
		return reflected, nil
	case p.connection != "" && len(through) == 0:
		return fail(fmt.Sprintf("S%d only", order[0]), "S21 for a part between or beside two ports", "--connection reflection", ErrUsage)
	case p.connection != "":
		return through, nil
	case len(through) > 0:
		return fail(fmt.Sprintf("S%d without it", through[0]), "how the part was connected", "--connection series or --connection shunt", ErrConnection)
	}
	return reflected, nil
}

// sPairs are the ways an S-parameter may be given, in order of preference.
var sPairs = [][2]role{{roleSRe, roleSIm}, {roleSMag, roleSPhase}, {roleSdB, roleSPhase}, {roleS, roleNone}}

func orKey(r role) string {
	if k := roles[r].key; k != "" {
		return k
	}
	return "z"
}

// noPair says which columns were found and how to name them.
func (s *source) noPair(p *plan, idx []int, freq int) *Error {
	var have []string
	for _, i := range idx {
		if c := p.cols[i]; c.role.quantity() && i != freq {
			have = append(have, roles[c.role].name)
		}
	}
	hint := fmt.Sprintf("--columns 'f=%d,z=…,phase=…' with the columns' numbers", freq+1)
	ambiguous := false
	for _, i := range idx {
		switch c := p.cols[i]; c.role {
		case roleCapacitance:
			hint, ambiguous = s.eitherHint(p, freq, i, "cs", "cp", idx), true
		case roleInductance:
			hint, ambiguous = s.eitherHint(p, freq, i, "ls", "lp", idx), true
		case roleRe, roleIm:
			hint, ambiguous = s.eitherHint(p, freq, i, "r=…,x", "g=…,b", nil), true
		case roleMag, roleAngle:
			hint, ambiguous = fmt.Sprintf("--columns 'f=%d,z=…,phase=…', or y and yphase, with the columns' numbers", freq+1), true
		}
		if ambiguous {
			break
		}
	}
	e := s.headError(p, -1, "two columns that give an impedance", hint)
	if len(have) > 0 {
		e.Found, e.bare = strings.Join(have, ", ")+" and "+roles[roleFreq].name, true
	}
	if ambiguous {
		e.Err = ErrAmbiguous
	}
	return e
}

func (s *source) eitherHint(p *plan, freq, col int, one, other string, idx []int) string {
	rest := ""
	for _, i := range idx {
		if c := p.cols[i]; i != col && i != freq && roles[c.role].key != "" {
			rest += fmt.Sprintf(",%s=%d", roles[c.role].key, i+1)
		}
	}
	return fmt.Sprintf("--columns 'f=%d,%s=%d%s' or --columns 'f=%d,%s=%d%s'", freq+1, one, col+1, rest, freq+1, other, col+1, rest)
}

// headError is a fault of the header, at column i of it if that is one.
func (s *source) headError(p *plan, i int, expected, hint string) *Error {
	e := &Error{File: s.name, Expected: expected, Hint: hint}
	at := p.head
	if at < 0 {
		at = min(p.first, len(s.lines)-1)
	}
	if at < 0 {
		e.Line, e.Column, e.Found, e.bare = 1, 1, "nothing", true
		return e
	}
	l := s.lines[at]
	e.Line, e.Column = int(l.num), 1
	e.Found = s.lineText(l)
	if i >= 0 && p.head >= 0 {
		_, cells := s.cellTexts(s.uncomment(l), len(p.cols))
		if i < len(cells) {
			e.Column = s.column(l, cells, i)
			e.Found = s.cell(cells[i])
		}
	}
	if s.sheet != "" {
		e.Found = strings.ReplaceAll(e.Found, string(rune(cellMark)), ", ")
	}
	return e
}

// collect lists the columns that the rows must have.
func (p *plan) collect() {
	needed := make([]bool, len(p.cols))
	also := make([]bool, len(p.cols))
	for _, g := range p.groups {
		for _, i := range g.columns() {
			if i != g.freq {
				needed[i] = true
			}
		}
		for _, w := range g.ways {
			for _, i := range []int{w.a, w.b} {
				if i >= 0 {
					also[i] = true
				}
			}
		}
	}
	for i, c := range p.cols {
		also[i] = also[i] || c.role == roleBias || c.role == roleTemperature
	}
	p.need, p.also = p.need[:0], p.also[:0]
	for i := range p.cols {
		switch {
		case needed[i]:
			p.need = append(p.need, i)
		case also[i]:
			p.also = append(p.also, i)
		}
	}
}
