package ingest

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"os"
	"strings"

	"realpart/models/quantity"
)

// Accuracy is a meter's stated accuracy: the limits of a rectangular
// distribution, relative for the magnitude and in radians for the phase. It is
// constant, or a table over frequency and |Z|. The zero value states none.
type Accuracy struct {
	magnitude, phase float64 // constant
	ranges           []accuracyRange
	stated           bool
}

// accuracyRange is a row of a table.
type accuracyRange struct {
	fFrom, fTo, zFrom, zTo float64 // Hz and Ω, both ends included
	magnitude, phase       float64 // relative and rad
}

// ConstantAccuracy is the same everywhere: magnitude relative, phase in rad.
func ConstantAccuracy(magnitude, phase float64) Accuracy {
	return Accuracy{magnitude: magnitude, phase: phase, stated: true}
}

// Stated reports whether there is an accuracy at all.
func (a Accuracy) Stated() bool { return a.stated }

// At returns the accuracy at a frequency (Hz) and |Z| (Ω): of the magnitude,
// relative, and of the phase, in radians. ok is false where none is stated. Of
// a table the first row that covers the point counts.
func (a Accuracy) At(freq, absZ float64) (magnitude, phase float64, ok bool) {
	if a.ranges == nil {
		return a.magnitude, a.phase, a.stated
	}
	for _, r := range a.ranges {
		if r.fFrom <= freq && freq <= r.fTo && r.zFrom <= absZ && absZ <= r.zTo {
			return r.magnitude, r.phase, true
		}
	}
	return 0, 0, false
}

// ParseAccuracy reads the text of --accuracy: "0.1%" (the phase is then as many
// radians: 0.001), "0.1%,0.05deg" (or rad), or the name of a table file; see
// [ReadAccuracy]. A file named like a number wins over the number only if a
// folder is given with it (./0.1%).
func ParseAccuracy(flagText string) (Accuracy, error) {
	text := strings.TrimSpace(flagText)
	mag, phase, two := strings.Cut(text, ",")
	m, err := parseRelative(mag)
	if err != nil {
		if looksConstant(mag) {
			return Accuracy{}, &FlagError{"--accuracy", flagText, "a magnitude accuracy such as 0.1% between 0 and 100%, or the name of a table file"}
		}
		return openAccuracy(text)
	}
	if !two {
		return ConstantAccuracy(m, m), nil
	}
	p, err := parseAngle(phase)
	if err != nil || !(p > 0) || p > math.Pi {
		return Accuracy{}, &FlagError{"--accuracy", flagText, "a phase accuracy such as 0.05deg or 0.001rad after the comma"}
	}
	return ConstantAccuracy(m, p), nil
}

// parseRelative reads a magnitude accuracy: more than zero, less than one.
func parseRelative(text string) (float64, error) {
	m, err := quantity.ParsePercent(text)
	if err == nil && (!(m > 0) || m >= 1) {
		err = errors.New("out of range")
	}
	return m, err
}

// looksConstant: a number, with or without %, that is not the name of a file.
func looksConstant(text string) bool {
	_, err := quantity.ParsePercent(text)
	return err == nil
}

// parseAngle reads an angle; a plain number is in degrees, as everywhere.
func parseAngle(text string) (float64, error) {
	deg, err := quantity.Parse(text, "°")
	if err != nil {
		return 0, err
	}
	if rad, err := quantity.Parse(text, "rad"); err == nil && strings.Contains(text, "rad") {
		return rad, nil
	}
	return deg * math.Pi / 180, nil
}

func openAccuracy(path string) (Accuracy, error) {
	f, err := os.Open(path)
	if err != nil {
		var pathErr *fs.PathError
		text := err.Error()
		if errors.As(err, &pathErr) {
			text = pathErr.Err.Error()
		}
		return Accuracy{}, &Error{File: path, Found: text, Expected: "an accuracy such as 0.1%, or 0.1%,0.05deg, or a table file", bare: true, Err: err}
	}
	defer f.Close()
	if info, err := f.Stat(); err == nil && info.IsDir() {
		return Accuracy{}, &Error{File: path, Found: "a folder", Expected: "a table file", bare: true, Err: fs.ErrInvalid}
	}
	return ReadAccuracy(path, f)
}

// accuracyRow is a line of the table file.
type accuracyRow struct {
	FFrom     string `csv:"f_from"`
	FTo       string `csv:"f_to"`
	ZFrom     string `csv:"z_from"`
	ZTo       string `csv:"z_to"`
	Magnitude string `csv:"magnitude"`
	Phase     string `csv:"phase"`
}

// ReadAccuracy reads a table of the meter's accuracy, CSV with the header
//
//	f_from,f_to,z_from,z_to,magnitude,phase
//
// Frequencies are in Hz and impedances in Ω, with prefixes and units if they
// have them (1kHz, 10mOhm); an empty limit is none. The magnitude is a fraction
// or has a % sign; the phase is in degrees, or has its unit (0.05deg, 1mrad); an
// empty phase is as many radians as the magnitude.
func ReadAccuracy(name string, r io.Reader) (Accuracy, error) {
	rows, lines, err := ReadTableLines[accuracyRow](name, r)
	if err != nil {
		return Accuracy{}, err
	}
	a := Accuracy{stated: true, ranges: []accuracyRange{}}
	for i, row := range rows {
		limits := [4]float64{0, math.Inf(1), 0, math.Inf(1)}
		for k, cell := range []struct{ text, unit, name string }{{row.FFrom, "Hz", "f_from"}, {row.FTo, "Hz", "f_to"}, {row.ZFrom, "Ω", "z_from"}, {row.ZTo, "Ω", "z_to"}} {
			if cell.text == "" {
				continue
			}
			v, err := quantity.Parse(cell.text, cell.unit)
			if err != nil || v < 0 {
				return Accuracy{}, &Error{File: name, Line: lines[i], Column: 1, Found: cell.text, Expected: fmt.Sprintf("%s in %s", cell.name, cell.unit), Hint: "a value such as 1k" + cell.unit}
			}
			limits[k] = v
		}
		if limits[0] > limits[1] || limits[2] > limits[3] {
			return Accuracy{}, &Error{File: name, Line: lines[i], Column: 1, Found: strings.Join([]string{row.FFrom, row.FTo, row.ZFrom, row.ZTo}, ","), Expected: "limits from low to high"}
		}
		m, err := parseRelative(row.Magnitude)
		if err != nil {
			return Accuracy{}, &Error{File: name, Line: lines[i], Column: 1, Found: row.Magnitude, Expected: "a magnitude accuracy above 0 and below 1", Hint: "0.1% or 0.001"}
		}
		p := m
		if row.Phase != "" {
			if p, err = parseAngle(row.Phase); err != nil || !(p > 0) || p > math.Pi {
				return Accuracy{}, &Error{File: name, Line: lines[i], Column: 1, Found: row.Phase, Expected: "a phase accuracy in degrees, above 0", Hint: "0.05 or 0.05deg or 0.001rad"}
			}
		}
		a.ranges = append(a.ranges, accuracyRange{limits[0], limits[1], limits[2], limits[3], m, p})
	}
	return a, nil
}
