package derating

import (
	"fmt"
	"io"
	"strings"

	"github.com/rivo/uniseg"

	"realpart/report"
)

// TextOptions steer [Assessment.WriteText].
type TextOptions struct {
	Width  int  // columns; 0 means 80
	Colour bool // for a terminal
	Quiet  bool // no cautions
}

// mostRows is how many harmonics a text has; JSON has all.
const mostRows = 12

// WriteText writes the assessment for a person to read: the answer first, then
// what it rests on.
func (a *Assessment) WriteText(w io.Writer, o TextOptions) error {
	if o.Width == 0 {
		o.Width = 80
	}
	l := report.NewLayout(o.Width, o.Colour)
	paragraph := func(first, s string) { l.Paragraph(first, strings.Repeat(" ", uniseg.StringWidth(first)), s) }
	title, under := a.title()
	l.Heading(title)
	for _, s := range under {
		paragraph("", s)
	}
	l.Title(a.headline())
	for _, s := range a.answers() {
		paragraph("  ", s)
	}
	if len(a.Warnings) > 0 {
		l.Title("Warnings")
		for i, w := range a.Warnings {
			paragraph(fmt.Sprintf("%3d  ", i+1), w.Code+": "+w.Text)
		}
	}
	l.Title("Loss by harmonic")
	paragraph("  ", a.rippleInWords())
	rows, notes := a.table(mostRows)
	l.Table(rows, tableAlign)
	for _, n := range notes {
		paragraph("  "+n.mark+"  ", n.text)
	}
	for _, section := range a.sections() {
		l.Title(section.title)
		for _, s := range section.lines {
			paragraph("  ", s)
		}
	}
	if len(a.Uncertainty) > 0 {
		l.Title("What the loss is uncertain by, and what would reduce it")
		for _, s := range a.Uncertainty {
			paragraph("  –  ", s.inWords()+". To reduce it: "+s.Remedy+".")
		}
	}
	if !o.Quiet {
		l.Title("Cautions")
		for _, c := range a.Cautions {
			paragraph("  ", c)
		}
	}
	_, err := io.WriteString(w, l.String())
	return err
}
