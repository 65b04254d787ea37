package ingest

import (
	"archive/zip"
	"bytes"
	"fmt"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/xuri/excelize/v2"
)

// numbered is what xlsx.rows gives: row number → cells.
func numbered(t *testing.T, data []byte) map[string]map[int][]string {
	t.Helper()
	w, err := openXLSX(data, DefaultMaxBytes)
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]map[int][]string{}
	for _, s := range w.sheets {
		out[s.name] = map[int][]string{}
		if err := w.rows(s, func(num int, cells []string) error {
			out[s.name][num] = append([]string{}, cells...)
			return nil
		}); err != nil {
			t.Fatal(err)
		}
	}
	return out
}

// The cells are those that excelize, a library for the whole format, reads.
func TestXLSXAgreesWithLibrary(t *testing.T) {
	f := excelize.NewFile()
	set := func(sheet, cell string, v any) {
		t.Helper()
		if err := f.SetCellValue(sheet, cell, v); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := f.NewSheet("Second & last"); err != nil {
		t.Fatal(err)
	}
	for i, v := range []any{1, -2.5, 1e-12, 1.7976931348623157e308, 0.1, math.Pi, "text", "", " blanks around ", "a<b&c>\"d\"", "µΩ °", "line\nbreak", "tab\there",
		true, false, "_x000D_", "_x005F_x000D_", "_xyz_", "1,5", "=1+1", nil} {
		set("Sheet1", fmt.Sprintf("%c%d", 'A'+i%5, 1+2*(i/5)), v)
	}
	set("Sheet1", "XFD20", 20)
	set("Sheet1", "AB300", "far below")
	set("Second & last", "B2", "|Z|")
	if err := f.SetCellRichText("Second & last", "C3", []excelize.RichTextRun{{Text: "phase "}, {Text: "(deg)", Font: &excelize.Font{Bold: true}}}); err != nil {
		t.Fatal(err)
	}
	if err := f.SetCellFormula("Second & last", "D4", "SUM(A1:A2)"); err != nil {
		t.Fatal(err)
	}
	style, err := f.NewStyle(&excelize.Style{NumFmt: 10})
	if err != nil {
		t.Fatal(err)
	}
	set("Second & last", "E5", 0.25)
	if err := f.SetCellStyle("Second & last", "E5", "G7", style); err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := f.Write(&b); err != nil {
		t.Fatal(err)
	}
	lib, err := excelize.OpenReader(bytes.NewReader(b.Bytes()), excelize.Options{RawCellValue: true})
	if err != nil {
		t.Fatal(err)
	}
	defer lib.Close()
	want := map[string]map[int][]string{}
	for _, name := range lib.GetSheetList() {
		want[name] = map[int][]string{}
		rows, err := lib.Rows(name)
		if err != nil {
			t.Fatal(err)
		}
		for num := 1; rows.Next(); num++ {
			cells, err := rows.Columns()
			if err != nil {
				t.Fatal(err)
			}
			for len(cells) > 0 && cells[len(cells)-1] == "" {
				cells = cells[:len(cells)-1]
			}
			if len(cells) > 0 {
				want[name][num] = cells
			}
		}
		if err := rows.Close(); err != nil {
			t.Fatal(err)
		}
	}
	if len(want["Sheet1"]) != 6 || len(want["Second & last"]) != 3 {
		t.Fatalf("the library reads %v", want)
	}
	if d := cmp.Diff(want, numbered(t, b.Bytes())); d != "" {
		t.Error(d)
	}
}

// archive makes a workbook of the parts given; pairs of name and text.
func archive(t *testing.T, parts ...string) []byte {
	t.Helper()
	var b bytes.Buffer
	z := zip.NewWriter(&b)
	for i := 0; i < len(parts); i += 2 {
		w, err := z.Create(parts[i])
		if err != nil {
			t.Fatal(err)
		}
		if _, err := w.Write([]byte(parts[i+1])); err != nil {
			t.Fatal(err)
		}
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

const strictRelation = "http://purl.oclc.org/ooxml/officeDocument/relationships/"

// book is a workbook in the strict form of ECMA-376, with parts elsewhere than
// usual and one sheet of the rows given.
func book(t *testing.T, rows string) []byte {
	return archive(t,
		"_rels/.rels", `<Relationships><Relationship Id="r" Type="`+strictRelation+`officeDocument" Target="/Book/Main.xml"/></Relationships>`,
		"book/main.xml", `<x:workbook xmlns:x="http://purl.oclc.org/ooxml/spreadsheetml/main" xmlns:r="`+strictRelation+`"><x:sheets><x:sheet name="A" sheetId="1" r:id="q"/></x:sheets></x:workbook>`,
		"book/_rels/main.xml.rels", `<Relationships><Relationship Id="q" Type="`+strictRelation+`worksheet" Target="../s.xml"/><Relationship Id="p" Type="`+strictRelation+`sharedStrings" Target="t.xml"/></Relationships>`,
		"book/t.xml", `<sst><si><t>f (Hz)</t></si><si><r><t>R </t></r><rPh sb="0" eb="1"><t>hint</t></rPh><r><t>(Ohm)</t></r></si></sst>`,
		"s.xml", `<worksheet><cols><col min="1"/></cols><sheetData>`+rows+`</sheetData><tail><row/></tail></worksheet>`)
}

func TestXLSXForms(t *testing.T) {
	// Cells and rows without a place follow the one before.
	got := numbered(t, book(t, `<row><c t="s"><v>0</v></c><c t="s"><v> 1 </v></c><c t="inlineStr"><is><t>X (Ohm)</t></is></c></row>`+
		`<row r="4"><c r="B4"><v>1</v></c><c/><c t="str"><f>1&amp;2</f><v>12</v></c><c t="e"><v>#N/A</v></c><c t="s"><v>7</v></c></row><row/><row><c r="c6"><v>9</v></c></row>`))
	want := map[string]map[int][]string{"A": {1: {"f (Hz)", "R (Ohm)", "X (Ohm)"}, 4: {"", "1", "", "12", "#N/A"}, 6: {"", "", "9"}}}
	if d := cmp.Diff(want, got); d != "" {
		t.Error(d)
	}
	for rows, want := range map[string]string{
		`<row r="2"/><row r="2"/>`:                     "a.xlsx: expected a sheet of cells, found row 2 below row 2; try: save it again, or export CSV",
		`<row r="9999999"/>`:                           "found row 9999999 below row 0",
		`<row><c r="B1"/><c r="A1"/></row>`:            "found cell A1 behind column 2",
		`<row><c r="XFE1"/></row>`:                     "found cell XFE1 behind column 0",
		`<row><c r="ZZZZZZZZZZZZZZZZZZZZ1"/></row>`:    "found cell ZZZ",
		`<row><c><v>1</v></c>`:                         "found XML syntax error",
		`<row><c><v>1</v></c></row></sheetData><row/>`: "1:1: expected a header with a frequency column and rows of numbers, found \"1\"",
	} {
		_, err := Read("a.xlsx", bytes.NewReader(book(t, rows)), nil)
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v, want %s", rows, err, want)
		}
	}
	if _, err := Read("a.xlsx", bytes.NewReader(archive(t, "readme.txt", "hello")), nil); err == nil || err.Error() != "a.xlsx: expected a spreadsheet (.xlsx), found no part xl/workbook.xml; try: save it again, or export CSV" {
		t.Error(err)
	}
}
