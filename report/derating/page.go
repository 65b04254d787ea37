package derating

import (
	"bytes"
	_ "embed"
	"fmt"
	"html/template"
	"io"
	"slices"
	"sync"
)

//go:embed page.html
var pageHTML string

//go:embed page.css
var pageCSS string

var page = sync.OnceValue(func() *template.Template {
	return template.Must(template.New("derating").Parse(pageHTML))
})

// Made says how a page was made: a name, such as Command, and its value.
type Made struct{ Name, Value string }

// mostPageRows is how many harmonics a page lists; JSON has all.
const mostPageRows = 24

// WritePage writes the assessment as one self-contained page with figures:
// loss by harmonic, and temperature over ripple current with the limits.
// Nothing is written if there is an error.
func (a *Assessment) WritePage(w io.Writer, made []Made) error {
	title, under := a.title()
	rows, notes := a.table(mostPageRows)
	view := pageView{
		Title: title, Under: under, Verdict: a.Verdict, Headline: a.headline(), Answers: a.answers(),
		Warnings: a.Warnings, Ripple: a.rippleInWords(), Cautions: a.Cautions, Made: made, CSS: template.CSS(pageCSS),
	}
	for _, c := range a.charts() {
		view.Charts = append(view.Charts, chartView{c, template.HTML(c.SVG)})
	}
	view.table(rows)
	for _, n := range notes {
		view.Notes = append(view.Notes, n.mark+": "+n.text)
	}
	for _, s := range a.sections() {
		view.Sections = append(view.Sections, sectionView{s.title, s.lines})
	}
	for _, s := range a.Uncertainty {
		view.Sources = append(view.Sources, [2]string{s.inWords(), s.Remedy})
	}
	for _, list := range [][]Measured{a.Parts, a.Series} {
		for _, m := range list {
			if m.SHA256 != "" {
				view.Made = append(view.Made, Made{"SHA-256 of " + m.File, m.SHA256})
			}
		}
	}
	var b bytes.Buffer
	if err := page().Execute(&b, view); err != nil {
		return fmt.Errorf("derating: %w", err)
	}
	_, err := b.WriteTo(w)
	return err
}

// pageView is what the template shows.
type pageView struct {
	Title    string
	Under    []string
	Verdict  Verdict
	Headline string
	Answers  []string
	Warnings []Warning
	Ripple   string
	Charts   []chartView
	Head     []string
	Rows     [][]string
	Notes    []string
	Sections []sectionView
	Sources  [][2]string
	Cautions []string
	Made     []Made
	CSS      template.CSS
}

type chartView struct {
	chart
	Drawing template.HTML
}

type sectionView struct {
	Title string
	Lines []string
}

// table leaves out columns that are empty below their heading.
func (v *pageView) table(rows [][]string) {
	v.Rows = make([][]string, len(rows)-1)
	for i, heading := range rows[0] {
		if !slices.ContainsFunc(rows[1:], func(row []string) bool { return row[i] != "" }) {
			continue
		}
		v.Head = append(v.Head, heading)
		for k, row := range rows[1:] {
			v.Rows[k] = append(v.Rows[k], row[i])
		}
	}
}
