package ingest

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

type tableRow struct {
	Figure string  `csv:"figure"`
	Low    float64 `csv:"low"`
	High   float64 `csv:"high,optional"`
}

func TestReadTable(t *testing.T) {
	want := []tableRow{{"ESR", 1, 2}, {"Cs, parallel", -3e-6, math.NaN()}}
	for name, text := range map[string]string{
		"plain":                "figure,low,high\nESR,1,2\n\"Cs, parallel\",-3e-6,\n",
		"comments and blanks":  "# limits\n\nfigure,low,high\n\n# more\nESR, 1, 2\n\"Cs, parallel\",-3e-6,\n\n",
		"another order":        "High,LOW,Figure\n2,1,ESR\n,-3e-6,\"Cs, parallel\"\n",
		"CR LF and mark":       "\ufefffigure,low,high\r\nESR,1,2\r\n\"Cs, parallel\",-3e-6,\r\n",
		"CR":                   "figure,low,high\rESR,1,2\r\"Cs, parallel\",-3e-6,\r",
		"UTF-16 little endian": string(utf16Bytes("figure,low,high\nESR,1,2\n\"Cs, parallel\",-3e-6,\n", false, true)),
	} {
		got, err := ReadTable[tableRow]("l.csv", strings.NewReader(text))
		if err != nil {
			t.Errorf("%s: %v", name, err)
		} else if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
			t.Errorf("%s: %s", name, d)
		}
	}
	// The line of each row, blank lines and comments counted.
	_, lines, err := ReadTableLines[tableRow]("l.csv", strings.NewReader("figure,low,high\n\n\nESR,1,2\n# x\nX,1,2\n"))
	if err != nil || !cmp.Equal(lines, []int{4, 6}) {
		t.Errorf("lines %v, %v", lines, err)
	}
}

// What gocsv lets through in silence must be one line here.
func TestReadTableErrors(t *testing.T) {
	for text, want := range map[string]string{
		"":                                   `l.csv:1:1: expected a table with the header figure,low,high, found an empty file`,
		"figure,low,high\n":                  `l.csv:1:1: expected rows below the header figure,low,high, found only a header`,
		"figure,low\nESR,1\n":                `l.csv:1:1: expected a column high, found "figure,low"; try: the header figure,low,high`,
		"figure,low,hihg\nESR,1,2\n":         `l.csv:1:12: expected the header figure,low,high, found "hihg"`,
		"figure,low,low,high\nESR,1,1,2\n":   `l.csv:1:12: expected each column once, found "low"`,
		"figure;low;high\nESR;1;2\n":         `l.csv:1:1: expected commas between the columns figure,low,high, found "figure;low;high"; try: save as CSV with commas`,
		"figure,low,high\n\n\nESR,,2\n":      `l.csv:4:5: expected a number for low, found ""`,
		"figure,low,high\nESR,\"1,000\",2\n": `l.csv:2:5: expected a number for low, found "1,000"`,
		"figure,low,high\nESR,NaN,2\n":       `l.csv:2:5: expected a number for low, found "NaN"`,
		"figure,low,high\nESR,1,inf\nX,y,\n": `l.csv:2:7: expected a number for high, found "inf" (and 1 more)`,
		"figure,low,high\nESR,1\n":           `l.csv:2:1: expected 3 cells, found 2`,
		"figure,low,high\nE\"S\"R,1,2\n":     `l.csv:2:2: expected comma-separated cells, found bare " in non-quoted-field`,
	} {
		_, err := ReadTable[tableRow]("l.csv", strings.NewReader(text))
		if err == nil || err.Error() != want {
			t.Errorf("%q:\n got %v\nwant %s", text, err, want)
		}
	}
}

func TestWriteTable(t *testing.T) {
	rows := []tableRow{{"ESR", 1e-9, 0}, {"a, \"b\"", -3.3e-6, math.NaN()}}
	var b bytes.Buffer
	if err := WriteTable(&b, rows); err != nil {
		t.Fatal(err)
	}
	if want := "figure,low,high\nESR,0.000000001,0\n\"a, \"\"b\"\"\",-0.0000033,\n"; b.String() != want {
		t.Errorf("got %q, want %q", b.String(), want)
	}
	got, err := ReadTable[tableRow]("l.csv", &b)
	if d := cmp.Diff(rows, got, cmpopts.EquateNaNs()); err != nil || d != "" {
		t.Errorf("%v %s", err, d)
	}
}
