package ingest

import (
	"bytes"
	"errors"
	"fmt"
	"slices"
	"strings"
)

// splitSheet cuts "file.xlsx#sheet" in two.
func splitSheet(path string) (file, sheet string) {
	if i := strings.LastIndex(strings.ToLower(path), ".xlsx#"); i >= 0 {
		return path[:i+5], path[i+6:]
	}
	return path, ""
}

// isSpreadsheet tells by the first bytes: .xlsx is a zip archive.
func isSpreadsheet(data []byte) bool { return bytes.HasPrefix(data, []byte("PK\x03\x04")) }

// isCompound: an old binary document (.xls), or an encrypted new one.
func isCompound(data []byte) bool {
	return bytes.HasPrefix(data, []byte("\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"))
}

// readSpreadsheet reads a sheet, the first without a name, as rows of cells.
func readSpreadsheet(name string, data []byte, sheet string, o Options) (*parsed, error) {
	src, err := openSheet(name, data, sheet, o)
	if err != nil {
		return nil, err
	}
	return readDelimited(src, o)
}

// openSheet turns a sheet into a source whose lines are its rows.
func openSheet(name string, data []byte, sheet string, o Options) (*source, error) {
	bad := func(found, expected, hint string) *Error {
		return &Error{File: name, Found: found, Expected: expected, Hint: hint, bare: true}
	}
	book, oerr := openXLSX(data, o.MaxBytes)
	switch {
	case errors.Is(oerr, ErrTooLarge):
		return nil, tooLarge(name, o.MaxBytes)
	case oerr != nil:
		return nil, bad(shorten(oneLine(oerr.Error())), "a spreadsheet (.xlsx)", "save it again, or export CSV")
	}
	var names []string
	for _, s := range book.sheets {
		names = append(names, s.name)
	}
	at := 0
	switch {
	case len(names) == 0:
		return nil, bad("none", "a spreadsheet with sheets", "")
	case sheet != "":
		if at = slices.Index(names, sheet); at < 0 {
			at = slices.IndexFunc(names, func(s string) bool { return strings.EqualFold(s, sheet) })
		}
		if at < 0 {
			e := bad(fmt.Sprintf("no %q", sheet), "a sheet of "+strings.Join(names, ", "), "")
			e.Err = ErrUsage
			return nil, e
		}
	}
	src := &source{name: name, delim: cellMark, decimal: '.', sheet: names[at]}
	var b strings.Builder
	clean := strings.NewReplacer("\n", " ", "\r", " ", string(rune(cellMark)), " ")
	rerr := book.rows(book.sheets[at], func(num int, cells []string) error {
		start := b.Len()
		empty := true
		for i, c := range cells {
			if i > 0 {
				b.WriteByte(cellMark)
			}
			c = clean.Replace(c)
			empty = empty && strings.TrimSpace(c) == ""
			b.WriteString(c)
		}
		if !empty {
			src.lines = append(src.lines, line{int32(start), int32(b.Len()), int32(num)})
		}
		if int64(b.Len()) > o.MaxBytes {
			return ErrTooLarge
		}
		return nil
	})
	switch {
	case errors.Is(rerr, ErrTooLarge):
		return nil, tooLarge(name, o.MaxBytes)
	case rerr != nil:
		return nil, bad(shorten(oneLine(rerr.Error())), "a sheet of cells", "save it again, or export CSV")
	}
	src.text = b.String()
	src.detectDecimal()
	return src, nil
}

// detectDecimal chooses the decimal sign of cells that hold text: a comma if
// that makes numbers of more cells.
func (s *source) detectDecimal() {
	var cells []span
	point, comma := 0, 0
	for _, l := range s.lines[:min(len(s.lines), 500)] {
		cells = s.split(l, cells)
		for _, c := range cells {
			t := s.cell(c)
			if strings.IndexByte(t, ',') >= 0 && looksNumber(t, ',') {
				comma++
			}
			if strings.IndexByte(t, '.') >= 0 && looksNumber(t, '.') {
				point++
			}
		}
	}
	if comma > point {
		s.decimal = ','
	}
}
