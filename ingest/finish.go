package ingest

import (
	"cmp"
	"fmt"
	"math"
	"math/cmplx"
	"slices"
)

// sortedOrder returns the indices of v in ascending order, equal values in the
// order they stand.
func sortedOrder(v []float64) []int {
	order := make([]int, len(v))
	for i := range order {
		order[i] = i
	}
	if !slices.IsSorted(v) {
		slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(v[a], v[b]) })
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
		if len(out) == 0 && len(p.faults) == 0 {
			p.faults = append(p.faults, p.nothing())
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
		switch {
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
		s.Warnings = append(s.Warnings, Warning{WarnCoverage, fmt.Sprintf("only %d points", len(f))})
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

func ascending(f []float64) bool {
	for i := 1; i < len(f); i++ {
		if !(f[i] > f[i-1]) {
			return false
		}
	}
	return true
}

// mergePoints sorts the points and averages those at the same frequency. Where
// a large part of the sweep is there twice and the two differ, they are more
// likely two parts or two bias levels, and the file is refused.
func mergePoints(f []float64, z, sp []complex128, line []int32, order []int) ([]float64, []complex128, []complex128, *Warning, *Error) {
	var of []float64
	var oz, os []complex128
	merged, apart := 0, 0
	worst, worstLine := 0.0, int32(0)
	for i := 0; i < len(order); {
		j := i + 1
		for j < len(order) && f[order[j]] == f[order[i]] {
			j++
		}
		first := order[i]
		var sumZ, sumS complex128
		for _, k := range order[i:j] {
			// Dividing before adding keeps the sum finite.
			sumZ += z[k] / complex(float64(j-i), 0)
			if sp != nil {
				sumS += sp[k] / complex(float64(j-i), 0)
			}
			if k != first {
				if d := cmplx.Abs(z[k]-z[first]) / max(cmplx.Abs(z[first]), cmplx.Abs(z[k])); d > 0.1 {
					apart++
					if d > worst {
						worst, worstLine = d, line[k]
					}
				}
			}
		}
		if j-i == 1 {
			sumZ = z[first]
		} else {
			merged += j - i - 1
		}
		if sumZ != 0 && !cmplx.IsNaN(sumZ) && !math.IsInf(cmplx.Abs(sumZ), 0) {
			of = append(of, f[first])
			oz = append(oz, sumZ)
			if sp != nil {
				if j-i == 1 {
					sumS = sp[first]
				}
				os = append(os, sumS)
			}
		}
		i = j
	}
	if merged > 0 && apart > 0 && 4*apart >= len(of) {
		return nil, nil, nil, nil, &Error{Line: int(worstLine), Column: 1, bare: true, Err: ErrAmbiguous,
			Found:    fmt.Sprintf("%d repeated frequencies with impedances up to %.3g %% apart", apart, 100*worst),
			Expected: "one impedance at each frequency of a part",
			Hint:     "--columns with part=…, or a blank line between the parts"}
	}
	var w *Warning
	if merged > 0 {
		w = &Warning{WarnDuplicate, fmt.Sprintf("%d points at a frequency that occurs more than once were averaged with it", merged)}
	}
	return of, oz, os, w, nil
}
