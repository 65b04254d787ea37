package ingest

import (
	"slices"
	"strings"
	"sync"
	"unicode"
	"unicode/utf8"
)

// heading is what a column's header says.
type heading struct {
	text      string // as written
	name      string // without the unit
	role      role
	port      int    // 11, 21, 12 or 22 for S-parameters, else 0
	unit      unit   // dim "" if none is stated
	negate    bool   // -Im(Z), loss in dB
	lossDB    bool   // return or insertion loss: sign from the values
	label     string // part, where columns of several parts stand side by side
	fault     string // why the header cannot be taken as it stands
	ambiguous bool   // the unit's m could be milli or mega
	presumed  bool   // a magnitude of nothing named, taken for |Z| if the values bear it out
}

// known reports whether the heading says anything about a measured quantity.
func (h heading) known() bool { return h.role != roleNone }

// maxHeading is the longest header cell, in bytes, that is looked at.
const maxHeading = 200

// seenHeadings keeps what header cells say: the files of a folder mostly have the
// same header, and to recognise it takes as long as to read dozens of rows.
var seenHeadings = struct {
	sync.RWMutex
	of map[string]heading
}{of: map[string]heading{}}

// maxSeen bounds seenHeadings.
const maxSeen = 1000

// readHeading recognises one header cell.
func readHeading(text string) heading {
	seenHeadings.RLock()
	h, ok := seenHeadings.of[text]
	seenHeadings.RUnlock()
	switch {
	case ok:
		return h
	case len(text) > maxHeading:
		return recogniseHeading(text)
	}
	text = strings.Clone(text) // not to keep the file
	h = recogniseHeading(text)
	seenHeadings.Lock()
	if len(seenHeadings.of) < maxSeen {
		seenHeadings.of[text] = h
	}
	seenHeadings.Unlock()
	return h
}

// recogniseHeading does the work of readHeading.
func recogniseHeading(text string) heading {
	h := heading{text: strings.TrimSpace(text)}
	t := strings.ReplaceAll(h.text, `""`, `"`)
	t = strings.TrimSpace(tidy(strings.Trim(t, `"`)))
	if t == "" || len(t) > maxHeading {
		return h
	}
	if h.identify(t) {
		return h
	}
	var cuts [16]unitCut
	for _, cut := range unitCuts(t, cuts[:0]) {
		u, ok, ambiguous := readUnit(cut.unit)
		if !ok {
			continue
		}
		g := h
		if strings.TrimSpace(cut.name) == "" {
			continue
		}
		if g.identify(cut.name) {
			g.setUnit(u, ambiguous)
			return g
		}
		if h.unit.dim == "" { // a unit, but a name that says nothing
			h.unit, h.ambiguous, h.name = u, ambiguous, strings.TrimSpace(cut.name)
		}
	}
	// A unit alone: "Hz", "GHz", "Ω"? Only hertz names a quantity.
	if u, ok, _ := readUnitCell(t); ok && (u.dim == "Hz" || u.dim == "rad/s") {
		h.name, h.unit = t, u
		h.role = roleFreq
		if u.dim == "rad/s" {
			h.role = roleOmega
		}
	}
	return h
}

var tidyHeader = strings.NewReplacer("\u03bc", "µ", "\u2126", "Ω", "’", "'", "‘", "'", "′", "'", "″", "''", "”", "''",
	"\u2212", "-", "ϕ", "φ", "Φ", "φ", "ϑ", "θ", "Θ", "θ", "\u00a0", " ", "\u2009", " ", "\ufeff", "", "\n", " ", "\r", " ")

// tidy writes the variants of a sign in one way. Most headers have none.
func tidy(t string) string {
	for i := 0; i < len(t); i++ {
		if c := t[i]; c >= utf8.RuneSelf || c == '\n' || c == '\r' {
			return tidyHeader.Replace(t)
		}
	}
	return t
}

// unitCut is one way to take a header apart.
type unitCut struct{ name, unit string }

// unitCuts lists the places where people put units: in brackets, behind a
// slash, a comma, an underscore, "in", or the last blank. They are appended to cuts.
func unitCuts(t string, cuts []unitCut) []unitCut {
	for _, b := range [...]string{"()", "[]", "{}", "<>"} {
		i := strings.LastIndexByte(t, b[0])
		if i < 0 {
			continue
		}
		if j := strings.IndexByte(t[i:], b[1]); j > 0 {
			cuts = append(cuts, unitCut{t[:i] + t[i+j+1:], t[i+1 : i+j]})
		}
	}
	for _, sep := range [...]string{" / ", "/", ",", " in ", "_", ":", " ", "-", "."} {
		if i := strings.LastIndex(t, sep); i > 0 {
			cuts = append(cuts, unitCut{t[:i], strings.TrimSpace(t[i+len(sep):])})
		}
	}
	// deg/rad may contain the slash themselves (rad/s).
	if i := strings.Index(t, "/"); i > 0 {
		cuts = append(cuts, unitCut{t[:i], t[i+1:]})
	}
	return cuts
}

// setUnit stores a stated unit and refines the role by it.
func (h *heading) setUnit(u unit, ambiguous bool) {
	h.unit, h.ambiguous = u, ambiguous
	switch {
	case h.role == roleMag && u.dim == "Ω":
		h.role = roleAbsZ
	case h.role == roleMag && u.dim == "S":
		h.role = roleAbsY
	case h.role == roleRe && u.dim == "Ω":
		h.role = roleR
	case h.role == roleIm && u.dim == "Ω":
		h.role = roleX
	case h.role == roleRe && u.dim == "S":
		h.role = roleG
	case h.role == roleIm && u.dim == "S":
		h.role = roleB
	case (h.role == roleAbsZ) && isAngleDim(u.dim):
		h.role = rolePhase
	case (h.role == roleAbsY) && isAngleDim(u.dim):
		h.role = rolePhaseY
	case h.role == roleFreq && u.dim == "rad/s":
		h.role = roleOmega
	case (h.role == roleS || h.role == roleSMag) && u.dim == "dB":
		h.role = roleSdB
	case (h.role == roleS || h.role == roleSMag) && isAngleDim(u.dim):
		h.role = roleSPhase
	}
	if want := roles[h.role].dim; want != "" && !dimFits(want, u.dim) {
		h.fault = dimName(want)
	}
}

func isAngleDim(dim string) bool { return dim == "°" || dim == "rad" }

func dimFits(want, got string) bool {
	return want == got || want == "°" && got == "rad"
}

// identify finds the role of a name without unit. It tries the whole name, then
// S-parameter words.
func (h *heading) identify(name string) bool {
	name = strings.TrimSpace(name)
	key, negate := squeeze(name)
	if r, ok := namedRole(key); ok {
		h.name, h.role, h.negate = name, r, negate
		if negate && r != roleX && r != roleB && r != roleIm && !r.isAngle() {
			h.role, h.negate = roleNone, false
			return false
		}
		return true
	}
	return h.identifyS(name)
}

// squeeze makes the key for names: small letters without blanks and
// punctuation; a leading minus is taken off and reported.
func squeeze(name string) (key string, negate bool) {
	name = strings.TrimSpace(name)
	if len(name) > 1 && name[0] == '-' {
		negate, name = true, name[1:]
	}
	if !slices.ContainsFunc([]byte(name), func(c byte) bool { return !('a' <= c && c <= 'z' || '0' <= c && c <= '9') }) {
		return name, negate
	}
	var b strings.Builder
	b.Grow(len(name))
	for _, r := range name {
		switch r {
		case ' ', '.', '_', '-', '\t', '"', ':', '*', '=', '#':
			continue
		case '´', '`':
			r = '\''
		}
		b.WriteRune(unicode.ToLower(r))
	}
	key = b.String()
	if key == `z"` {
		key = "z''"
	}
	return key, negate
}

// identifyS recognises S-parameter columns: s11 or s21 (or the loss that stands
// for it) with words for the part of it.
func (h *heading) identifyS(name string) bool {
	port, part := 0, roleS
	loss := false
	angle := ""
	i := -1
	for w := range strings.FieldsFuncSeq(strings.ToLower(name), func(r rune) bool { return !(unicode.IsLetter(r) || unicode.IsDigit(r)) }) {
		i++
		switch {
		case len(w) >= 3 && w[0] == 's' && (w[1] == '1' || w[1] == '2') && (w[2] == '1' || w[2] == '2'):
			port = int(w[1]-'0')*10 + int(w[2]-'0')
			switch rest := w[3:]; rest {
			case "":
			default:
				if p, ok := sWords[rest]; ok {
					part = p
				} else {
					return false
				}
			}
			continue
		case w == "gamma" || w == "γ" || w == "reflection" || w == "rho" || w == "reflexion":
			port = 11
			continue
		case w == "coefficient" || w == "coeff" || w == "loss" || w == "of" || w == "log" || w == "lin" || w == "linear" || w == "format":
			continue
		case w == "return" || w == "rl" && i == 0:
			port, loss = 11, true
			continue
		case w == "insertion" || w == "il" && i == 0:
			port, loss = 21, true
			continue
		case strings.HasPrefix(w, "trc") || strings.HasPrefix(w, "ch") && len(w) <= 3 || strings.HasPrefix(w, "tr") && len(w) <= 3:
			continue
		}
		p, ok := sWords[w]
		if !ok {
			return false
		}
		part = p
		switch w {
		case "deg", "degrees", "°", "rad":
			angle = w
		}
	}
	if port == 0 {
		return false
	}
	h.name, h.port, h.role = name, port, part
	if u, ok, _ := readUnit(angle); ok && isAngleDim(u.dim) {
		h.unit = u
	}
	if loss && part != roleSPhase {
		h.role, h.lossDB = roleSdB, true
	}
	if part == roleS && strings.Contains(name, "|") {
		h.role = roleSMag
	}
	if part == roleS && strings.Contains(name, "∠") {
		h.role = roleSPhase
	}
	return true
}

var sWords = map[string]role{
	"db": roleSdB, "logmag": roleSdB,
	"mag": roleSMag, "magnitude": roleSMag, "abs": roleSMag, "linmag": roleSMag, "mg": roleSMag, "amp": roleSMag, "amplitude": roleSMag,
	"re": roleSRe, "real": roleSRe, "r": roleSRe,
	"im": roleSIm, "imag": roleSIm, "imaginary": roleSIm, "i": roleSIm,
	"phase": roleSPhase, "angle": roleSPhase, "ang": roleSPhase, "arg": roleSPhase, "ph": roleSPhase, "pha": roleSPhase,
	"deg": roleSPhase, "degrees": roleSPhase, "°": roleSPhase, "rad": roleSPhase,
}

// readHeadings recognises a whole header line and settles what one cell alone
// leaves open.
func readHeadings(texts []string) []heading {
	hs := make([]heading, len(texts))
	for i, t := range texts {
		hs[i] = readHeading(t)
	}
	return hs
}
