package ingest

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"reflect"
	"slices"
	"strings"

	"github.com/gocarina/gocsv"
)

// ReadTable reads a CSV table with a fixed header into structs of type T, whose
// fields carry `csv:"name"` tags. Every column must be there once and no other;
// their order is free. A field of type float64 needs a finite number, unless
// its tag says `csv:"name,optional"`: then an empty cell is NaN. (Not omitempty,
// with which gocsv would write a zero as nothing.) Lines that
// start with # and blank lines are passed over. A field of type string takes
// the cell as it is, for values with units. The error is an [*Error] with line
// and column.
//
// The rows are decoded by gocsv, which takes a missing column, an empty cell
// and "1,000" without complaint, so all of that is checked here first.
func ReadTable[T any](name string, r io.Reader) ([]T, error) {
	out, _, err := ReadTableLines[T](name, r)
	return out, err
}

// ReadTableLines is ReadTable that also returns the line of each row, for
// errors that only the caller can find.
func ReadTableLines[T any](name string, r io.Reader) ([]T, []int, error) {
	data, err := readAll(name, r, DefaultMaxBytes)
	if err != nil {
		return nil, nil, err
	}
	text, _, err := decode(data)
	if err != nil {
		return nil, nil, &Error{File: name, Line: 1, Column: 1, Found: err.Error(), Expected: "a CSV table", bare: true}
	}
	if !strings.Contains(text, "\n") {
		text = strings.ReplaceAll(text, "\r", "\n")
	}
	fields := tableFields(reflect.TypeFor[T]())
	var wanted []string
	for _, f := range fields {
		wanted = append(wanted, f.name)
	}
	header := strings.Join(wanted, ",")

	cr := csv.NewReader(strings.NewReader(text))
	cr.Comment = '#'
	cr.FieldsPerRecord = -1
	cr.TrimLeadingSpace = true
	names, err := cr.Read()
	if err != nil {
		return nil, nil, tableSyntax(name, err, header)
	}
	line, column := cr.FieldPos(0)
	if len(names) == 1 && len(wanted) > 1 {
		for _, d := range []string{";", "\t", "|"} {
			if strings.Contains(names[0], d) {
				return nil, nil, &Error{File: name, Line: line, Column: column, Found: names[0], Expected: "commas between the columns " + header, Hint: "save as CSV with commas"}
			}
		}
	}
	order := make([]*tableField, len(names))
	for i, n := range names {
		line, column = cr.FieldPos(i)
		n = strings.ToLower(strings.TrimSpace(n))
		k := slices.IndexFunc(fields, func(f tableField) bool { return f.name == n })
		if k < 0 {
			return nil, nil, &Error{File: name, Line: line, Column: column, Found: names[i], Expected: "the header " + header}
		}
		if fields[k].seen {
			return nil, nil, &Error{File: name, Line: line, Column: column, Found: names[i], Expected: "each column once"}
		}
		fields[k].seen = true
		order[i] = &fields[k]
		names[i] = n
	}
	for _, f := range fields {
		if !f.seen {
			line, _ = cr.FieldPos(0)
			return nil, nil, &Error{File: name, Line: line, Column: 1, Found: strings.Join(names, ","), Expected: "a column " + f.name, Hint: "the header " + header}
		}
	}

	var clean bytes.Buffer
	cw := csv.NewWriter(&clean)
	if err := cw.Write(names); err != nil {
		return nil, nil, err
	}
	var first *Error
	var lines []int
	for {
		rec, err := cr.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, nil, tableSyntax(name, err, header)
		}
		line, column := cr.FieldPos(0)
		fault := func(e Error) {
			if first == nil {
				e.File = name
				first = &e
			} else {
				first.More++
			}
		}
		if len(rec) != len(names) {
			fault(Error{Line: line, Column: column, Found: fmt.Sprint(len(rec)), Expected: fmt.Sprintf("%d cells", len(names)), bare: true})
			continue
		}
		for i, cell := range rec {
			line, column := cr.FieldPos(i)
			rec[i] = strings.TrimSpace(cell)
			if order[i].kind != reflect.Float64 {
				continue
			}
			v, kind := parseNumber(rec[i], '.')
			switch {
			case kind == isEmpty && order[i].optional:
				rec[i] = "NaN"
			case kind != isNumber || math.Abs(v) >= overload:
				fault(Error{Line: line, Column: column, Found: cell, Expected: "a number for " + order[i].name})
			}
		}
		lines = append(lines, line)
		if err := cw.Write(rec); err != nil {
			return nil, nil, err
		}
	}
	if first != nil {
		return nil, nil, first
	}
	if len(lines) == 0 {
		return nil, nil, &Error{File: name, Line: line, Column: 1, Found: "only a header", Expected: "rows below the header " + header, bare: true}
	}
	cw.Flush()
	var out []T
	if err := gocsv.UnmarshalBytes(clean.Bytes(), &out); err != nil {
		return nil, nil, &Error{File: name, Line: line, Found: err.Error(), Expected: "a table " + header, bare: true}
	}
	return out, lines, nil
}

type tableField struct {
	name     string
	kind     reflect.Kind
	optional bool
	seen     bool
}

// tableFields lists the tagged fields of a struct type; anything else is the
// programmer's mistake and panics.
func tableFields(t reflect.Type) []tableField {
	var out []tableField
	for i := range t.NumField() {
		f := t.Field(i)
		tag := f.Tag.Get("csv")
		if tag == "" || tag == "-" {
			continue
		}
		n, rest, _ := strings.Cut(tag, ",")
		if k := f.Type.Kind(); k != reflect.Float64 && k != reflect.String {
			panic("ingest: table field " + f.Name + " is neither float64 nor string")
		}
		out = append(out, tableField{name: n, kind: f.Type.Kind(), optional: strings.Contains(rest, "optional")})
	}
	if len(out) == 0 {
		panic("ingest: table type without csv tags")
	}
	return out
}

func tableSyntax(name string, err error, header string) *Error {
	if errors.Is(err, io.EOF) {
		return &Error{File: name, Line: 1, Column: 1, Found: "an empty file", Expected: "a table with the header " + header, bare: true}
	}
	var p *csv.ParseError
	if errors.As(err, &p) {
		return &Error{File: name, Line: p.Line, Column: p.Column, Found: p.Err.Error(), Expected: "comma-separated cells", bare: true}
	}
	return &Error{File: name, Found: err.Error(), Expected: "a readable table", Err: err}
}

// WriteTable writes structs with csv tags as a CSV table with a header. Numbers
// are written so that reading gives the same float64; NaN is an empty cell.
func WriteTable[T any](w io.Writer, rows []T) error {
	var b bytes.Buffer
	if err := gocsv.Marshal(rows, &b); err != nil {
		return err
	}
	cr := csv.NewReader(&b)
	records, err := cr.ReadAll()
	if err != nil {
		return err
	}
	for _, rec := range records {
		for i, cell := range rec {
			if cell == "NaN" {
				rec[i] = ""
			}
		}
	}
	cw := csv.NewWriter(w)
	if err := cw.WriteAll(records); err != nil {
		return err
	}
	return cw.Error()
}
