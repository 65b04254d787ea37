package ingest

import (
	"fmt"
	"strings"
)

// addHalf keeps a segment that holds one quantity only.
func (b *builder) addHalf(seg *segment, g *group) {
	h := &half{seg: seg, freq: seg.freqs(g)}
	col := g.half
	if col < 0 {
		col = seg.onlyVarying(g)
	}
	if col < 0 {
		b.refuse(b.noPair(seg.plan, nil, g.freq))
		return
	}
	h.col, h.vals = seg.plan.cols[col], seg.column(col)
	b.parsed.halves = append(b.parsed.halves, h)
}

// onlyVarying is the only column of numbers, besides the frequency, that is
// not zero throughout: analysers write an empty second part of a trace so.
func (seg *segment) onlyVarying(g *group) int {
	found := -1
	for i, s := range seg.slot {
		if s < 0 || i == g.freq {
			continue
		}
		zero := true
		for _, v := range seg.vals[s] {
			if v != 0 {
				zero = false
				break
			}
		}
		if zero {
			continue
		}
		if found >= 0 {
			return -1
		}
		found = i
	}
	return found
}

// joinHalves pairs blocks of one quantity each that stand one below the other,
// with the same frequencies.
func (b *builder) joinHalves() {
	var left []*half
	for i := 0; i < len(b.parsed.halves); i++ {
		one := b.parsed.halves[i]
		if i+1 == len(b.parsed.halves) || !sameFreq(one.freq, b.parsed.halves[i+1].freq) || !b.joinable(one.col.role, b.parsed.halves[i+1].col.role) {
			left = append(left, one)
			continue
		}
		b.joinPair(one, b.parsed.halves[i+1])
		i++
	}
	b.parsed.halves = left
	if len(b.parsed.halves) > 0 && len(b.parsed.parts) > 0 {
		h := b.parsed.halves[0]
		b.refuse(b.halfError(h))
	}
}

func (b *builder) halfError(h *half) *Error {
	e := b.headError(h.seg.plan, -1, "two columns that give an impedance", "the file with the other quantity behind a plus: mag.csv+phase.csv")
	if h.col.role != roleNone {
		e.Found = "frequency and " + roles[h.col.role].name + " only"
	} else {
		e.Found = fmt.Sprintf("frequency and %q only", h.col.text)
	}
	e.bare = true
	return e
}

func sameFreq(a, b []float64) bool {
	if len(a) != len(b) {
		return false
	}
	for i := range a {
		if !(a[i] <= b[i]*(1+1e-9) && b[i] <= a[i]*(1+1e-9)) {
			return false
		}
	}
	return true
}

// joinable reports whether two roles make a pair.
func (b *builder) joinable(x, y role) bool {
	_, _, ok := b.halfPair(x, y)
	return ok
}

// halfPair orders two roles as a pair of the table.
func (b *builder) halfPair(x, y role) (*pair, bool, bool) {
	// A plain angle or magnitude belongs to its partner.
	adopt := func(m, a role) (role, role) {
		if m == roleMag && a == rolePhase {
			m = roleAbsZ
		}
		if m == roleAbsZ && a == roleAngle {
			a = rolePhase
		}
		if m == roleAbsY && (a == roleAngle || a == rolePhase) {
			a = rolePhaseY
		}
		return m, a
	}
	for k := range pairs {
		q := &pairs[k]
		if m, a := adopt(x, y); q.a == m && q.b == a {
			return q, false, true
		}
		if m, a := adopt(y, x); q.a == m && q.b == a {
			return q, true, true
		}
	}
	return nil, false, false
}

// joinPair computes Z from two halves. The columns go into a plan of their own
// so that units and errors are those of their headers.
func (b *builder) joinPair(one, two *half) {
	q, swapped, ok := b.halfPair(one.col.role, two.col.role)
	if !ok {
		return
	}
	if swapped {
		one, two = two, one
	}
	ca, cb := one.col, two.col
	ca.role, cb.role = q.a, q.b
	p := &plan{table: one.seg.plan.table}
	p.cols = []heading{one.seg.plan.cols[one.seg.plan.groups[0].freq], ca, cb}
	p.groups = []group{{freq: 0, part: -1, half: -1, ways: []measured{{a: 1, b: 2, pair: q}}, label: one.seg.plan.groups[0].label}}
	p.need = []int{1, 2}
	// Frequencies are in hertz by now.
	p.cols[0].role = roleFreq
	seg := &segment{plan: p, meta: one.seg.meta.merge(two.seg.meta), line: one.seg.line, slot: []int{0, 1, 2},
		vals: [][]float64{one.freq, one.vals, two.vals}}
	b.addGroup(seg, &p.groups[0])
}

// nameParts gives the parts of one file their names: the label of the column
// or block; else the file's name, with a number where there are several.
func (b *builder) nameParts() {
	parts := b.parsed.parts
	if len(parts) <= 1 {
		if len(parts) == 1 && !b.explicitLabel() {
			parts[0].label = ""
		}
		return
	}
	// The first block's name may stand in the lines above the table.
	if first := parts[0]; first.label == "" && parts[1].label != "" {
		first.label = firstNonEmpty(first.meta.Part, first.meta.Serial)
	}
	count := map[string]int{}
	for _, d := range parts {
		count[d.label]++
	}
	seen := map[string]int{}
	base := partName(b.reader.name)
	for _, d := range parts {
		label := strings.TrimSpace(d.label)
		seen[d.label]++
		switch {
		case label == "":
			d.label = fmt.Sprintf("%s-%d", base, seen[d.label])
		case isCount(label) && count[d.label] == 1:
			d.label = base + "-" + label[1:]
		case count[d.label] > 1:
			d.label = fmt.Sprintf("%s-%d", strings.TrimPrefix(label, "\x00"), seen[d.label])
		default:
			d.label = label
		}
	}
}

// explicitLabel: a part column, or labels in the header.
func (b *builder) explicitLabel() bool {
	for _, seg := range b.segments {
		if seg.part != nil || seg.plan.groups[0].label != "" && !isCount(seg.plan.groups[0].label) {
			return true
		}
	}
	return false
}

// isCount recognises the labels of counted.
func isCount(s string) bool { return strings.HasPrefix(s, "\x00") }
