package ingest

import (
	"cmp"
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"realpart/models/quantity"
)

// sortedOrder returns the indices of v in ascending order, equal values in the
// order they stand. It merges neighbouring runs that are in order, so that
// several passes through the frequencies cost little.
func sortedOrder(v []float64) []int {
	type point struct {
		v float64
		i int
	}
	points := make([]point, len(v))
	starts := []int{0} // of the runs
	if descending(v) { // one run from the end
		for i := range points {
			k := len(v) - 1 - i
			points[i] = point{v[k], k}
		}
	} else {
		for i, x := range v {
			points[i] = point{x, i}
			if i > 0 && cmp.Less(x, v[i-1]) {
				starts = append(starts, i)
			}
		}
	}
	for spare := make([]point, len(v)*min(1, len(starts)-1)); len(starts) > 1; points, spare = spare, points {
		merged := starts[:0]
		for r := 0; r < len(starts); r += 2 {
			from, mid, end := starts[r], len(v), len(v)
			if r+1 < len(starts) {
				mid = starts[r+1]
			}
			if r+2 < len(starts) {
				end = starts[r+2]
			}
			merged = append(merged, from)
			i, j := from, mid
			for k := from; k < end; k++ {
				if i < mid && (j >= end || !cmp.Less(points[j].v, points[i].v)) {
					spare[k] = points[i]
					i++
				} else {
					spare[k] = points[j]
					j++
				}
			}
		}
		starts = merged
	}
	order := make([]int, len(v))
	for i, p := range points {
		order[i] = p.i
	}
	return order
}

// sweeps turns what was parsed into sweeps, or the error for its faults.
func (p *parsed) sweeps(o Options) ([]*Sweep, error) {
	var out []*Sweep
	if len(p.faults) == 0 {
		for _, d := range p.parts {
			if s := p.finish(d); s != nil {
				out = append(out, s)
			} else if len(p.faults) == 0 && len(p.parts) > 1 {
				p.warnings = append(p.warnings, Warning{WarnPartEmpty, fmt.Sprintf("no row of part %s could be used", d.label)})
			}
		}
		switch {
		case len(p.faults) > 0:
		case len(out) == 0:
			p.fault(p.nothing())
		}
	}
	p.reading.close(p)
	if len(p.faults) > 0 {
		e := *p.faults[0]
		e.File = p.name
		e.More = len(p.faults) - 1 + p.more
		reading := p.reading
		e.Reading = &reading
		return nil, &e
	}
	for i, s := range out {
		s.Reading = p.reading
		s.Warnings = append(append(make([]Warning, 0, len(p.warnings)+len(s.Warnings)+1), p.warnings...), s.Warnings...)
		if i == 0 || len(out) == 1 {
			s.Dropped = p.dropped
			if n := len(p.dropped); n > 0 {
				s.Warnings = append(s.Warnings, Warning{WarnDropped, droppedText(p.dropped)})
			}
		}
	}
	return out, nil
}

func droppedText(d []Dropped) string {
	rows := "rows were"
	if len(d) == 1 {
		rows = "row was"
	}
	return fmt.Sprintf("%d %s not used, the first in line %d: %s", len(d), rows, d[0].Line, d[0].Reason)
}

// nothing is the error of a file without a usable row.
func (p *parsed) nothing() *Error {
	e := &Error{File: p.name, Line: max(1, p.reading.HeaderLine), Column: 1, bare: true, Expected: "rows of numbers", Found: "only a header"}
	if n := len(p.dropped); n > 0 {
		e.Line, e.Found = p.dropped[0].Line, fmt.Sprintf("no usable row: %d dropped, the first for %s", n, p.dropped[0].Reason)
	}
	return e
}

// finish checks, sorts and merges the points of one part. It returns nil where
// no point is left or a fault was found.
func (p *parsed) finish(d *partData) *Sweep {
	s := &Sweep{File: p.name, Part: d.label, Lot: d.meta.Lot, Metadata: d.meta,
		Reference: d.reference, Connection: d.connection}
	if s.Part == "" {
		s.Part = partName(p.name)
	}
	n := 0
	faults := len(p.faults)
	for i, f := range d.freq {
		z := d.z[i]
		switch size := math.Abs(real(z)) + math.Abs(imag(z)); {
		case f > 0 && f <= math.MaxFloat64 && size > 0 && size <= math.MaxFloat64:
			// A good point; the cases below are for all others.
		case math.IsNaN(f) || math.IsInf(f, 0):
			p.drop(d.line[i], "overload or no number in frequency")
			continue
		case f == 0:
			p.drop(d.line[i], "frequency of exactly 0")
			continue
		case f < 0:
			p.fault(&Error{Line: int(d.line[i]), Column: 1, Found: fmt.Sprint(f), Expected: "a frequency that is not negative", Hint: "--columns to name the columns"})
			continue
		case z == 0:
			p.drop(d.line[i], "magnitude of exactly 0")
			continue
		case cmplx.IsNaN(z) || cmplx.IsInf(z):
			p.drop(d.line[i], "no finite impedance")
			continue
		}
		d.freq[n], d.z[n], d.line[n] = f, z, d.line[i]
		if d.s != nil {
			d.s[n] = d.s[i]
		}
		n++
	}
	if len(p.faults) > faults || n == 0 {
		return nil
	}
	f, z := d.freq[:n], d.z[:n]
	var sp []complex128
	if d.s != nil {
		sp = d.s[:n]
	}
	if !ascending(f) {
		order := sortedOrder(f)
		if !slices.IsSorted(f) && !slices.IsSortedFunc(f, func(a, b float64) int { return cmp.Compare(b, a) }) {
			s.Warnings = append(s.Warnings, Warning{WarnUnsorted, "the frequencies were not in order and have been sorted"})
		}
		var e *Error
		var w *Warning
		f, z, sp, w, e = mergePoints(f, z, sp, d.line[:n], order)
		if e != nil {
			p.fault(e)
			return nil
		}
		if w != nil {
			s.Warnings = append(s.Warnings, *w)
		}
	}
	s.Freq, s.Z, s.S = f, z, sp
	if len(f) < 3 {
		s.Warnings = append(s.Warnings, Warning{WarnCoverage, "only " + quantity.Count(len(f), "point")})
	}
	return s
}

func (p *parsed) fault(e *Error) {
	e.File = p.name
	p.faults = append(p.faults, e)
}

func (p *parsed) drop(line int32, reason string) {
	p.dropped = append(p.dropped, Dropped{int(line), reason})
}

func descending(f []float64) bool {
	for i := 1; i < len(f); i++ {
		if !(f[i] < f[i-1]) {
			return false
		}
	}
	return true
}

func ascending(f []float64) bool {
	for i := 1; i < len(f); i++ {
		if !(f[i] > f[i-1]) {
			return false
		}
	}
	return true
}

// mergePoints sorts the points and averages those at the same frequency, unless
// the repetitions look like several sweeps in one.
func mergePoints(f []float64, z, sp []complex128, line []int32, order []int) ([]float64, []complex128, []complex128, *Warning, *Error) {
	var of []float64
	var oz, os []complex128
	var seen repetition
	for i := 0; i < len(order); {
		j := i + 1
		for j < len(order) && f[order[j]] == f[order[i]] {
			j++
		}
		same := order[i:j]
		seen.add(z, line, same)
		if mean := average(z, same); mean != 0 && !cmplx.IsInf(mean) {
			of = append(of, f[same[0]])
			oz = append(oz, mean)
			if sp != nil {
				os = append(os, average(sp, same))
			}
		}
		i = j
	}
	if seen.merged == 0 {
		return of, oz, os, nil, nil
	}
	if e := seen.refuse(len(of)); e != nil {
		return nil, nil, nil, nil, e
	}
	return of, oz, os, &Warning{WarnDuplicate, fmt.Sprintf("%d points at a frequency that occurs more than once were averaged with it", seen.merged)}, nil
}

// average is the mean of some values; dividing before adding keeps it finite.
func average(v []complex128, at []int) complex128 {
	if len(at) == 1 {
		return v[at[0]]
	}
	var sum complex128
	for _, k := range at {
		sum += v[k] / complex(float64(len(at)), 0)
	}
	return sum
}

// repetition counts points at frequencies that were there before, and how far
// they lie from the first.
type repetition struct {
	merged int
	far    int       // more than 10 %
	again  []float64 // differences in a later run through the frequencies, not in the next row
	worst  float64
	line   int32 // of the worst
}

func (r *repetition) add(z []complex128, line []int32, same []int) {
	first := z[same[0]]
	for n, k := range same[1:] {
		d := cmplx.Abs(z[k]-first) / max(cmplx.Abs(first), cmplx.Abs(z[k]))
		r.merged++
		if d > 0.1 {
			r.far++
		}
		if d > r.worst {
			r.worst, r.line = d, line[k]
		}
		if k != same[n]+1 {
			r.again = append(r.again, d)
		}
	}
}

// refuse is the error where a large part of a sweep of so many points is there
// twice and the two differ, a quarter of it by more than 10 %, or in a second run
// through the frequencies half of it by more than 1 %: then they are more likely
// two parts or two bias levels than one part measured again.
func (r *repetition) refuse(points int) *Error {
	slices.Sort(r.again)
	n := len(r.again)
	if !(r.far > 0 && 4*r.far >= points || n > 0 && 2*n >= points && r.again[n/2] > 0.01) {
		return nil
	}
	return &Error{Line: int(r.line), Column: 1, bare: true, Err: ErrAmbiguous,
		Found:    fmt.Sprintf("%d repeated frequencies with impedances up to %.3g %% apart", r.merged, 100*r.worst),
		Expected: "one impedance at each frequency of a part",
		Hint:     "--columns with part=…, or a blank line between the parts"}
}
