package ingest

import (
	"archive/zip"
	"bytes"
	"encoding/xml"
	"fmt"
	"io"
	"path"
	"strconv"
	"strings"
)

// xlsx is an .xlsx file as far as a sweep needs it: the cells of its sheets
// as they are stored, without their formats (ECMA-376 part 1, 18.2 workbook, 18.3
// worksheets, 18.4 shared strings; part 2 for the package).
//
// Note: a library for all of the format was here before. It prepared its tables
// at each start of the program, which took longer than reading a sweep.
type xlsx struct {
	parts   map[string]*zip.File // by name in small letters: names do not tell case
	budget  int64                // bytes that may still be unpacked
	sheets  []worksheet
	strings []string // shared by the sheets
}

type worksheet struct {
	name string
	part string
}

// A worksheet has no more columns and rows.
const (
	maxSheetColumns = 16384
	maxSheetRows    = 1 << 20
)

// openXLSX reads all but the sheets. No more than limit bytes are unpacked, now
// and later, else the error is ErrTooLarge.
func openXLSX(data []byte, limit int64) (*xlsx, error) {
	archive, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
	if err != nil {
		return nil, err
	}
	w := &xlsx{parts: map[string]*zip.File{}, budget: limit}
	for _, f := range archive.File {
		w.parts[partKey(f.Name)] = f
	}
	main := "xl/workbook.xml"
	if rels, err := w.relations(""); err != nil {
		return nil, err
	} else if r, ok := rels.ofType("officeDocument"); ok {
		main = r.Target
	}
	rels, err := w.relations(main)
	if err != nil {
		return nil, err
	}
	var book struct {
		Sheets []struct {
			Name string     `xml:"name,attr"`
			Attr []xml.Attr `xml:",any,attr"`
		} `xml:"sheets>sheet"`
	}
	if err := w.decode(main, &book); err != nil {
		return nil, err
	}
	for _, s := range book.Sheets {
		sheet := worksheet{name: s.Name}
		for _, a := range s.Attr {
			if a.Name.Local == "id" && a.Name.Space != "" {
				sheet.part = rels.byID(a.Value)
			}
		}
		w.sheets = append(w.sheets, sheet)
	}
	if r, ok := rels.ofType("sharedStrings"); ok {
		if err := w.readStrings(r.Target); err != nil {
			return nil, err
		}
	}
	return w, nil
}

// readStrings reads the shared strings, one after the other: what stands between
// them is not kept.
func (w *xlsx) readStrings(part string) error {
	r, err := w.open(part)
	if err != nil {
		return err
	}
	defer r.Close()
	d := xml.NewDecoder(r)
	for {
		token, err := d.Token()
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return err
		}
		if t, ok := token.(xml.StartElement); ok && t.Name.Local == "si" {
			var item richText
			if err := d.DecodeElement(&item, &t); err != nil {
				return err
			}
			w.strings = append(w.strings, item.String())
		}
	}
}

func partKey(name string) string {
	return strings.ToLower(strings.TrimPrefix(strings.ReplaceAll(name, `\`, "/"), "/"))
}

// open unpacks a part within the budget.
func (w *xlsx) open(part string) (io.ReadCloser, error) {
	f := w.parts[partKey(part)]
	if f == nil {
		return nil, fmt.Errorf("no part %s", part)
	}
	// The archive's reader gives no more than the size it states.
	if w.budget -= int64(min(f.UncompressedSize64, 1<<62)); w.budget < 0 {
		return nil, ErrTooLarge
	}
	return f.Open()
}

// decode reads a part into a structure.
func (w *xlsx) decode(part string, v any) error {
	r, err := w.open(part)
	if err != nil {
		return err
	}
	defer r.Close()
	return xml.NewDecoder(r).Decode(v)
}

// relations are what a part refers to.
type relations []struct {
	ID     string `xml:"Id,attr"`
	Type   string `xml:",attr"`
	Target string `xml:",attr"`
}

// relations reads those of a part, or of the package for "". There may be none.
func (w *xlsx) relations(part string) (relations, error) {
	dir, base := path.Split(part)
	name := dir + "_rels/" + base + ".rels"
	if w.parts[partKey(name)] == nil {
		return nil, nil
	}
	var list struct {
		Relations relations `xml:"Relationship"`
	}
	if err := w.decode(name, &list); err != nil {
		return nil, err
	}
	for i := range list.Relations {
		if r := &list.Relations[i]; !strings.HasPrefix(r.Target, "/") {
			r.Target = path.Join(dir, r.Target)
		}
	}
	return list.Relations, nil
}

// ofType finds a relation by the last word of its type: what stands before it is
// one of two, the transitional or the strict.
func (rs relations) ofType(word string) (r struct{ Target string }, ok bool) {
	for _, x := range rs {
		if path.Base(x.Type) == word {
			return struct{ Target string }{x.Target}, true
		}
	}
	return r, false
}

func (rs relations) byID(id string) string {
	for _, r := range rs {
		if r.ID == id {
			return r.Target
		}
	}
	return ""
}

// richText is text that may be in pieces of several formats. Phonetic hints are
// not read.
type richText struct {
	T    string   `xml:"t"`
	Runs []string `xml:"r>t"`
}

func (t richText) String() string { return unescape(t.T + strings.Join(t.Runs, "")) }

// unescape resolves _x000D_, the way to write what XML has no character for.
func unescape(s string) string {
	for from := 0; ; {
		i := strings.Index(s[from:], "_x")
		if i < 0 {
			return s
		}
		i += from
		from = i + 1
		if len(s) < i+7 || s[i+6] != '_' {
			continue
		}
		if c, err := strconv.ParseUint(s[i+2:i+6], 16, 16); err == nil {
			s = s[:i] + string(rune(c)) + s[i+7:]
		}
	}
}

// rows calls each with the cells of the rows that have any, and the row's number.
func (w *xlsx) rows(sheet worksheet, each func(num int, cells []string) error) error {
	r, err := w.open(sheet.part)
	if err != nil {
		return err
	}
	defer r.Close()
	d := xml.NewDecoder(r)
	num, column := 0, 0
	var cells []string
	for {
		token, err := d.Token()
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return err
		}
		switch t := token.(type) {
		case xml.StartElement:
			switch t.Name.Local {
			case "row":
				cells, column = cells[:0], 0
				if num, err = rowNumber(&t, num+1); err != nil {
					return err
				}
			case "c":
				var c cell
				if err := d.DecodeElement(&c, &t); err != nil {
					return err
				}
				if column, err = c.column(column + 1); err != nil {
					return err
				}
				if text := w.text(&c); text != "" {
					for len(cells) < column-1 {
						cells = append(cells, "")
					}
					cells = append(cells, text)
				}
			}
		case xml.EndElement:
			switch t.Name.Local {
			case "row":
				if len(cells) > 0 {
					if err := each(num, cells); err != nil {
						return err
					}
				}
			case "sheetData":
				return nil
			}
		}
	}
}

// rowNumber is the number of a row, which is next where it states none.
func rowNumber(row *xml.StartElement, next int) (int, error) {
	for _, a := range row.Attr {
		if a.Name.Local == "r" {
			n, err := strconv.Atoi(a.Value)
			if err != nil || n < next || n > maxSheetRows {
				return 0, fmt.Errorf("row %s below row %d", a.Value, next-1)
			}
			return n, nil
		}
	}
	return next, nil
}

// cell is a cell of a sheet.
type cell struct {
	Place string   `xml:"r,attr"` // such as AB12
	Type  string   `xml:"t,attr"`
	Value string   `xml:"v"`
	Text  richText `xml:"is"`
}

// column is the number of a cell's column, from 1, which is next where the cell
// does not state its place.
func (c *cell) column(next int) (int, error) {
	if c.Place == "" {
		return next, nil
	}
	n := 0
	for i := 0; i < len(c.Place) && n <= maxSheetColumns; i++ {
		letter := c.Place[i] | 0x20 - 'a'
		if letter >= 26 {
			break
		}
		n = n*26 + int(letter) + 1
	}
	if n < next || n > maxSheetColumns {
		return 0, fmt.Errorf("cell %s behind column %d", c.Place, next-1)
	}
	return n, nil
}

// text is what a cell holds: a number or a formula's result as it is stored, or a
// text.
func (w *xlsx) text(c *cell) string {
	switch c.Type {
	case "s":
		if n, err := strconv.Atoi(strings.TrimSpace(c.Value)); err == nil && 0 <= n && n < len(w.strings) {
			return w.strings[n]
		}
		return ""
	case "inlineStr":
		return c.Text.String()
	}
	return c.Value
}
