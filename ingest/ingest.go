// Package ingest reads impedance sweeps: whatever an LCR meter, impedance
// analyser or network analyser saved, as frequencies in hertz and complex
// impedances in ohms.
//
// Reading runs in steps, one file of this package each:
//
//  1. the bytes become UTF-8 text (encoding) and lines (tokenize);
//  2. Touchstone files and spreadsheets are told from delimited text
//     (touchstone, spreadsheet);
//  3. the header is found and each column gets a role and a unit (header,
//     units, layout); what stands above it becomes metadata (metadata);
//  4. cells become numbers; rows that cannot be used are dropped and counted,
//     anything doubtful is a fault with line and column (number, rows);
//  5. a pair of quantities becomes Z (quantities, sparameter), with the phase in
//     degrees or radians as the data show where the header does not
//     (phaseunit);
//  6. the points are sorted into sweeps, one a part (finish).
//
// A reading that could mean two things is refused with the flag that settles
// it. [Reading] says how a file was understood.
//
// Use [Find] to expand folders, [Open] to read a path and [Read] to read a
// stream; [Fixture] corrects for a test fixture, [Accuracy] holds the meter's
// stated accuracy, [ReadTable] reads tables with a fixed header.
package ingest

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"path"
	"path/filepath"
	"slices"
	"strings"
)

// Sweep is the impedance of one part over frequency.
type Sweep struct {
	File string // as given; joined with the path below a folder
	Part string // the file's name without its ending, or the value of the part column
	Lot  string // from the file's metadata, "" if it does not say

	Freq []float64    // Hz, positive, strictly ascending
	Z    []complex128 // Ω, finite, not zero

	SHA256   string // of the file's bytes, in hexadecimal; of a pair of files, one after the other
	Metadata Metadata
	Reading  Reading
	Dropped  []Dropped // rows not used
	Warnings []Warning

	// For sweeps measured as S-parameters; S is nil otherwise.
	Reference  float64      // reference resistance in Ω
	Connection string       // ConnectionReflection, ConnectionSeries or ConnectionShunt
	S          []complex128 // S11 for reflection, else S21, at each of Freq
}

// Ways to connect the part to a network analyser.
const (
	ConnectionReflection = "reflection" // one port ends in the part
	ConnectionSeries     = "series"     // the part lies between the two ports
	ConnectionShunt      = "shunt"      // the part lies from the through line to ground
)

// Dropped is a row that was not used.
type Dropped struct {
	Line   int
	Reason string
}

// Warning is something that does not stop the reading, and what to do about it.
// Code is stable; Text is for people.
type Warning struct {
	Code, Text string
}

// Codes of warnings.
const (
	WarnNoHeader      = "no-header"         // three columns of numbers without a header
	WarnUnitAssumed   = "unit-assumed"      // a column without a unit was taken in SI units
	WarnPhaseUnit     = "phase-unit"        // degrees or radians were told from the values
	WarnDropped       = "rows-dropped"      // overload, empty, zero
	WarnDuplicate     = "duplicate-points"  // points at one frequency were averaged
	WarnUnsorted      = "unsorted"          // the frequencies were not in order
	WarnReference     = "reference-assumed" // S-parameters without a reference resistance
	WarnColumnsDiffer = "columns-differ"    // two pairs of columns give different Z
	WarnCoverage      = "few-points"        // fewer points than a circuit needs
	WarnUnchecked     = "not-checked"       // values that contradict what is stated
	WarnPartEmpty     = "part-empty"        // a part of which no row could be used
)

// DefaultMaxBytes is the size above which an input is refused.
const DefaultMaxBytes = 128 << 20

// Options says how to read. The nil pointer and the zero value let the reader
// recognise everything.
type Options struct {
	Columns    Columns // overrides the recognition of columns
	Units      Units   // overrides units
	Connection string  // for two-port S-parameters: reflection, series or shunt
	// Reference is the reference resistance in Ω of S-parameters in files that
	// do not state it; 0 means 50.
	Reference float64
	// MaxBytes is the largest input read; 0 means DefaultMaxBytes.
	MaxBytes int64

	general bool // all rows go the general way; for tests of the plain one
}

func (o *Options) orDefault() Options {
	if o == nil {
		return Options{MaxBytes: DefaultMaxBytes}
	}
	c := *o
	if c.MaxBytes <= 0 {
		c.MaxBytes = DefaultMaxBytes
	}
	return c
}

// Read reads one input and returns the sweeps in it, one a part, in the order of
// the file. name is the file's name: it appears in errors, gives the part its
// name, and its ending (.s1p, .s2p, .ts, .xlsx) says which format to expect;
// without such an ending the content does. The error is an [*Error].
func Read(name string, r io.Reader, o *Options) ([]*Sweep, error) {
	opt := o.orDefault()
	data, err := readAll(name, r, opt.MaxBytes)
	if err != nil {
		return nil, err
	}
	return parse(name, data, opt)
}

// readAll reads at most limit bytes.
func readAll(name string, r io.Reader, limit int64) ([]byte, error) {
	size := 0
	if known, ok := r.(interface{ Len() int }); ok { // what is left of a buffer
		size = known.Len()
	}
	data, err := slurp(r, int64(size), limit)
	switch {
	case errors.Is(err, ErrTooLarge):
		return nil, tooLarge(name, limit)
	case err != nil:
		return nil, &Error{File: name, Found: err.Error(), Expected: "a readable input", Err: err}
	}
	return data, nil
}

// slurp reads at most limit bytes, or returns ErrTooLarge. size is how many
// there should be, 0 if that is not known; where it is right, the buffer does
// not grow.
func slurp(r io.Reader, size, limit int64) ([]byte, error) {
	data := make([]byte, 0, min(size, limit)+bytes.MinRead)
	for {
		n, err := r.Read(data[len(data):cap(data)])
		data = data[:len(data)+n]
		switch {
		case int64(len(data)) > limit:
			return nil, ErrTooLarge
		case err == io.EOF:
			return data, nil
		case err != nil:
			return nil, err
		case len(data) == cap(data):
			data = slices.Grow(data, len(data))
		}
	}
}

func tooLarge(name string, limit int64) *Error {
	return &Error{File: name, Found: fmt.Sprintf("more than %d bytes", limit), Expected: "a sweep of smaller size", Hint: "split the file", Err: ErrTooLarge}
}

// parse reads the bytes of one file.
func parse(name string, data []byte, o Options) ([]*Sweep, error) {
	parsed, err := parseFile(name, data, o)
	if err != nil {
		return nil, err
	}
	return parsed.finished(data, o)
}

// finished completes the sweeps with the digest of the file's bytes.
func (p *parsed) finished(data []byte, o Options) ([]*Sweep, error) {
	if len(p.faults) == 0 && len(p.halves) > 0 && p.builder != nil {
		p.fault(p.builder.halfError(p.halves[0]))
	}
	sweeps, err := p.sweeps(o)
	if p.builder != nil {
		p.builder.release()
	}
	if err != nil {
		return nil, err
	}
	sum := sha256.Sum256(data)
	for _, s := range sweeps {
		s.SHA256 = hex.EncodeToString(sum[:])
	}
	return sweeps, nil
}

// parseFile dispatches on the format.
func parseFile(name string, data []byte, o Options) (*parsed, error) {
	file, sheet := splitSheet(name)
	switch {
	case isSpreadsheet(data):
		return readSpreadsheet(name, data, sheet, o)
	case isCompound(data):
		return nil, &Error{File: name, Found: "an old or encrypted document", Expected: "text or a spreadsheet", Hint: "save as .xlsx without password, or as CSV", bare: true}
	case len(data) == 0:
		return nil, &Error{File: name, Line: 1, Column: 1, Found: "an empty file", Expected: "a header and rows of numbers", bare: true}
	}
	text, enc, err := decode(data)
	if err != nil {
		return nil, &Error{File: name, Line: 1, Column: 1, Found: err.Error(), bare: true,
			Expected: "text or a spreadsheet", Hint: "export the sweep as CSV or Touchstone"}
	}
	src := newSource(name, text, enc)
	if isTouchstone(file, src) {
		return readTouchstone(src, o)
	}
	return readDelimited(src, o)
}

// partName is the file's name without its ending.
func partName(file string) string {
	file, _ = splitSheet(file)
	base := path.Base(filepath.ToSlash(file))
	if base == "-" {
		return "-"
	}
	if name := strings.TrimSuffix(base, path.Ext(base)); name != "" {
		return name
	}
	return base
}
