package ingest

import (
	"crypto/sha256"
	"encoding/hex"
	"os"
	"path/filepath"
	"strings"
	"unicode"
)

// Words in file names that say which quantity a file holds.
var (
	magnitudeWords = []string{"MAG", "MAGNITUDE", "ABS", "AMP", "MOD", "IMPEDANCE"}
	angleWords     = []string{"ANG", "ANGLE", "PHASE", "PHA", "PH", "THETA", "DEG", "ARG"}
)

// splitPair cuts "mag.csv+phase.csv" into two paths that exist; the second may
// leave out the folder of the first.
func splitPair(path string) (one, two string, ok bool) {
	for i := 0; i < len(path); i++ {
		if path[i] != '+' || i == 0 || i == len(path)-1 {
			continue
		}
		one, two = path[:i], path[i+1:]
		if !exists(one) {
			continue
		}
		if exists(two) {
			return one, two, true
		}
		if beside := filepath.Join(filepath.Dir(one), two); exists(beside) {
			return one, beside, true
		}
	}
	// Neither exists: the first cut names the missing file.
	if one, two, ok := strings.Cut(path, "+"); ok && hasSweepEnding(one) && hasSweepEnding(two) {
		return one, two, true
	}
	return "", "", false
}

// nameRole is the quantity that a file name states, by its last such word.
func nameRole(path string) role {
	base := filepath.Base(path)
	words := strings.FieldsFunc(strings.ToUpper(strings.TrimSuffix(base, filepath.Ext(base))), func(r rune) bool { return !unicode.IsLetter(r) })
	for i := len(words) - 1; i >= 0; i-- {
		for _, w := range magnitudeWords {
			if words[i] == w {
				return roleMag
			}
		}
		for _, w := range angleWords {
			if words[i] == w {
				return roleAngle
			}
		}
	}
	return roleNone
}

// namesY reports whether the file name says admittance: a word Y.
func namesY(path string) bool {
	base := filepath.Base(path)
	for _, w := range strings.FieldsFunc(strings.ToUpper(strings.TrimSuffix(base, filepath.Ext(base))), func(r rune) bool { return !unicode.IsLetter(r) && r != '|' }) {
		if w == "Y" || w == "|Y|" {
			return true
		}
	}
	return false
}

// twinKey is a file name with the word of its quantity replaced, so that the
// files of one sweep have the same key.
func twinKey(path string) string {
	dir, base := filepath.Split(path)
	ext := filepath.Ext(base)
	stem := strings.TrimSuffix(base, ext)
	upper := strings.ToUpper(stem)
	if len(upper) != len(stem) { // letters whose capitals are longer
		return ""
	}
	isLetter := func(i int) bool {
		return i >= 0 && i < len(upper) && (upper[i] >= 'A' && upper[i] <= 'Z' || upper[i] >= 0x80)
	}
	for end := len(upper); end > 0; {
		for end > 0 && !isLetter(end-1) {
			end--
		}
		start := end
		for isLetter(start - 1) {
			start--
		}
		word := upper[start:end]
		for _, list := range [][]string{magnitudeWords, angleWords} {
			for _, w := range list {
				if word == w {
					return dir + stem[:start] + "\x00" + stem[end:] + strings.ToLower(ext)
				}
			}
		}
		end = start
	}
	return ""
}

// findTwin returns the file beside path that holds the other quantity, "" if
// there is none or more than one.
func findTwin(path string) string {
	r, key := nameRole(path), twinKey(path)
	if r == roleNone || key == "" {
		return ""
	}
	entries, err := os.ReadDir(filepath.Dir(path))
	if err != nil {
		return ""
	}
	dir, _ := filepath.Split(path)
	found := ""
	for _, e := range entries {
		other := dir + e.Name()
		if e.IsDir() || other == path || twinKey(other) != key || nameRole(other) == r || nameRole(other) == roleNone {
			continue
		}
		if found != "" {
			return ""
		}
		found = other
	}
	return found
}

// joinTwins replaces the two files of one sweep by "magnitude+phase", at the
// place of the first. Their names must pair and each must hold one quantity.
func joinTwins(files []string) []string {
	byKey := map[string][]int{}
	for i, f := range files {
		if key := twinKey(f); key != "" {
			byKey[key] = append(byKey[key], i)
		}
	}
	if len(byKey) == 0 {
		return files
	}
	skip := map[int]bool{}
	out := make([]string, 0, len(files))
	for i, f := range files {
		if skip[i] {
			continue
		}
		if pair := byKey[twinKey(f)]; twinKey(f) != "" && len(pair) == 2 && pair[0] == i {
			one, two := f, files[pair[1]]
			if nameRole(one) != nameRole(two) && isHalf(one) && isHalf(two) {
				if nameRole(one) == roleAngle {
					one, two = two, one
				}
				skip[pair[1]] = true
				out = append(out, one+"+"+two)
				continue
			}
		}
		out = append(out, f)
	}
	return out
}

// isHalf reports whether a file holds one quantity only.
func isHalf(path string) bool {
	o := (*Options)(nil).orDefault()
	data, err := readFile(path, o)
	if err != nil {
		return false
	}
	p, err := parseFile(path, data, o)
	return err == nil && len(p.faults) == 0 && len(p.parts) == 0 && len(p.halves) == 1
}

// openPair reads one sweep from two files. name is the path as given.
func openPair(name, one, two string, o Options) ([]*Sweep, error) {
	var files [2]*parsed
	var readers [2]*builder
	sum := sha256.New()
	for i, path := range []string{one, two} {
		data, err := readFile(path, o)
		if err != nil {
			return nil, err
		}
		sum.Write(data)
		p, err := parseFile(path, data, o)
		if err != nil {
			return nil, err
		}
		if len(p.faults) > 0 {
			return p.sweeps(o)
		}
		if len(p.parts) > 0 || len(p.halves) != 1 {
			return nil, &Error{File: path, Line: max(1, p.reading.HeaderLine), Column: 1, bare: true,
				Found: "a sweep of its own", Expected: "a file with frequency and one quantity", Hint: "the two files one by one"}
		}
		files[i], readers[i] = p, p.builder
	}
	a, b := files[0].halves[0], files[1].halves[0]
	for i, h := range []*half{a, b} {
		if h.col.role == roleNone {
			h.col.role = nameRole([]string{one, two}[i])
		}
	}
	if namesY(one) || namesY(two) {
		for _, h := range []*half{a, b} {
			if h.col.role == roleMag {
				h.col.role = roleAbsY
			}
		}
	}
	// What the files do not name is told from the other's name: a magnitude
	// beside an angle.
	for _, h := range [][2]*half{{a, b}, {b, a}} {
		if h[0].col.role == roleMag && (h[1].col.role == roleAngle || h[1].col.role == rolePhase) {
			h[0].col.role = roleAbsZ
		}
	}
	if !sameFreq(a.freq, b.freq) {
		return nil, &Error{File: two, Line: firstDifference(a, b), Column: 1, bare: true, Found: "others",
			Expected: "the same frequencies as in " + one, Hint: "files of the same sweep"}
	}
	bl := readers[0]
	bl.parsed.warnings = nil // those of the join follow
	for i, h := range []*half{a, b} {
		if named := files[i].halves[0].seg.plan.cols; countKnown(named) < 2 {
			bl.note("%s: %s by the file's name", []string{one, two}[i], roles[h.col.role].name)
		}
	}
	if !bl.joinable(a.col.role, b.col.role) {
		return nil, bl.pairError(two, a, b)
	}
	bl.joinPair(a, b)
	bl.assumptions()
	p := files[0]
	p.halves = nil
	p.dropped = append(p.dropped, files[1].dropped...)
	if len(p.parts) == 1 {
		p.parts[0].label = ""
		p.parts[0].meta = p.parts[0].meta.merge(files[1].meta)
	}
	p.reading.Columns = append(p.reading.Columns, files[1].reading.Columns...)
	p.reading.Notes = append(p.reading.Notes, "magnitude and phase come from two files: "+one+" and "+two)
	out, err := p.sweeps(o)
	for _, s := range out {
		s.File = name
		s.Part = partName(one)
		s.SHA256 = hex.EncodeToString(sum.Sum(nil))
	}
	return out, err
}

func (b *builder) pairError(file string, one, two *half) *Error {
	describe := func(h *half) string {
		if h.col.role == roleNone {
			return "a quantity without a name"
		}
		return roles[h.col.role].name
	}
	return &Error{File: file, Line: max(1, b.parsed.reading.HeaderLine), Column: 1, bare: true, Err: ErrAmbiguous,
		Found: describe(one) + " and " + describe(two), Expected: "two files that hold a magnitude and a phase",
		Hint: "file names or headers that say MAG and PHASE"}
}

// firstDifference is the line of b at which the frequencies part.
func firstDifference(a, b *half) int {
	for i := range b.freq {
		if i >= len(a.freq) || !sameFreq(a.freq[i:i+1], b.freq[i:i+1]) {
			return int(b.seg.line[i])
		}
	}
	if n := len(b.seg.line); n > 0 {
		return int(b.seg.line[n-1])
	}
	return 1
}
