package figure

import (
	"bytes"
	"fmt"
	"image/color"
	"io"
	"math"
	"regexp"
	"strconv"
	"strings"
	"sync"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgpdf"
	"gonum.org/v1/plot/vg/vgsvg"

	"realpart/report"
)

// Part is what [Write] draws of one sweep.
type Part struct {
	Title  string // such as the part's name
	Detail string // such as the circuit with its values
	Traces *report.Traces
}

// Formats returns the formats that [Write] knows.
func Formats() []string { return []string{"svg", "png", "pdf"} }

// CheckFormat returns an error unless so many parts can be drawn in a format:
// only pdf has pages.
func CheckFormat(format string, parts int) error {
	switch format {
	case "pdf":
		return nil
	case "svg", "png":
		if parts > 1 {
			return fmt.Errorf("expected one sweep for a figure in %s, found %d; a file that ends in .pdf holds a page for each", format, parts)
		}
		return nil
	}
	return fmt.Errorf("expected a file that ends in .%s, found %q", strings.Join(Formats(), ", ."), "."+format)
}

// A sheet is A5 upright: it fits a column of A4 or Letter.
const (
	sheetWidth  = 420 * vg.Length(1)
	sheetHeight = 640 * vg.Length(1)
)

// Write draws the figures of each part on a sheet of its own, in svg, png (300
// dots an inch) or pdf. Nothing is written if there is an error.
func Write(w io.Writer, parts []Part, format string) error {
	if err := CheckFormat(format, len(parts)); err != nil {
		return err
	}
	if len(parts) == 0 {
		return fmt.Errorf("expected a fitted sweep for a figure, found none")
	}
	var out io.WriterTo
	switch format {
	case "svg":
		c := vgsvg.NewWith(vgsvg.UseWH(sheetWidth, sheetHeight))
		sheet(draw.New(c), parts[0])
		out = c
	case "png":
		c := vgimg.NewWith(vgimg.UseWH(sheetWidth, sheetHeight), vgimg.UseDPI(300), vgimg.UseBackgroundColor(color.White))
		sheet(draw.New(c), parts[0])
		out = vgimg.PngCanvas{Canvas: c}
	case "pdf":
		c := vgpdf.New(sheetWidth, sheetHeight)
		for i, part := range parts {
			if i > 0 {
				c.NextPage()
			}
			sheet(draw.NewCanvas(outlined{c}, sheetWidth, sheetHeight), part)
		}
		out = c
	}
	var b bytes.Buffer
	if _, err := out.WriteTo(&b); err != nil {
		return fmt.Errorf("figure: %w", err)
	}
	content := b.Bytes()
	if format == "pdf" {
		// Same input, same bytes: the time of writing is left out.
		content = pdfDate().ReplaceAll(content, []byte("${1}20000101000000"))
	}
	_, err := w.Write(content)
	return err
}

var pdfDate = sync.OnceValue(func() *regexp.Regexp { return regexp.MustCompile(`(/(?:Creation|Mod)Date \(D:)\d{14}`) })

// sheet draws one part: title, then all panels with equal data areas.
func sheet(c draw.Canvas, part Part) {
	heading := text.Style{Color: Paper.Ink, Font: font.Font{Typeface: "Liberation", Variant: "Sans", Size: Paper.FontSize + 3}, XAlign: draw.XLeft, YAlign: draw.YTop, Handler: plot.DefaultTextHandler}
	small := heading
	small.Font.Size = Paper.FontSize
	const margin = 12
	c.SetColor(color.White)
	c.Fill(c.Rectangle.Path())
	c.FillText(heading, vg.Point{X: c.Min.X + margin, Y: c.Max.Y - margin}, part.Title)
	c.FillText(small, vg.Point{X: c.Min.X + margin, Y: c.Max.Y - margin - 15}, part.Detail)
	body := draw.Crop(c, margin, -margin, margin, -margin-28)
	panels := Panels(part.Traces, Paper, nil)
	plots := make([][]*plot.Plot, len(panels))
	for i := range panels {
		plots[i] = []*plot.Plot{panels[i].plot}
	}
	const caption = 24
	canvases := plot.Align(plots, draw.Tiles{Rows: len(panels), Cols: 1, PadY: caption, PadTop: caption}, body)
	for i, p := range panels {
		area := canvases[i][0]
		p.plot.Draw(area)
		at := vg.Point{X: body.Min.X, Y: area.Max.Y + caption - 4}
		c.FillText(small, at, p.Title)
		legend(c, vg.Point{X: body.Min.X, Y: at.Y - 10}, p.Legend, small)
	}
}

// legend draws marks with their meaning in a row.
func legend(c draw.Canvas, at vg.Point, entries []Entry, style text.Style) {
	style.Font.Size--
	for _, e := range entries {
		middle := vg.Point{X: at.X + 6, Y: at.Y - 4}
		ends := []vg.Point{{X: at.X, Y: middle.Y}, {X: at.X + 12, Y: middle.Y}}
		var path vg.Path
		path.Move(ends[0])
		path.Line(ends[1])
		switch e.Mark {
		case "dot":
			dots(nil, nil).draw(c, []vg.Point{middle}, Paper.Measured)
		case "cross":
			crosses(nil, nil).draw(c, []vg.Point{middle}, Paper.Second)
		case "line":
			stroke(c, path, draw.LineStyle{Color: Paper.Model, Width: lineWidth})
		case "second":
			stroke(c, path, draw.LineStyle{Color: Paper.Second, Width: lineWidth})
		case "dashed":
			stroke(c, path, draw.LineStyle{Color: Paper.Resonance, Width: 0.7, Dashes: []vg.Length{3, 2}})
		case "scatter":
			stroke(c, path, draw.LineStyle{Color: Paper.Model, Width: 0.7, Dashes: []vg.Length{1, 2}})
		case "meter":
			c.SetColor(Paper.Meter)
			c.Fill(vg.Rectangle{Min: vg.Point{X: at.X, Y: middle.Y - 3}, Max: vg.Point{X: at.X + 12, Y: middle.Y + 3}}.Path())
		}
		c.FillText(style, vg.Point{X: at.X + 15, Y: at.Y}, e.Text)
		at.X += 15 + style.Width(e.Text) + 12
	}
}

// Area is where the data of a figure lie, as fractions of its width and height
// from the upper left corner.
type Area struct{ Left, Right, Top, Bottom float64 }

// Page is the style of a figure in a page, where each colour stands for a
// custom property of the style sheet: [Panel.SVG] puts them in.
var Page = Style{
	FontSize: 9.5,
	Ink:      token(1), Grid: token(2), Measured: token(3), Model: token(4), Second: token(5),
	Scatter: token(6), Meter: token(7), Resonance: token(8),
}

func token(n uint8) color.Color { return color.RGBA{0, 0, n, 0xff} }

// properties turns the colours of [Page] into custom properties.
var properties = strings.NewReplacer("#000001", "var(--ink)", "#000002", "var(--grid)", "#000003", "var(--measured)", "#000004", "var(--model)",
	"#000005", "var(--second)", "#000006", "var(--scatter)", "#000007", "var(--meter)", "#000008", "var(--resonance)")

// textStyle is how the canvas sets the font of a text, which the style sheet
// of the page does instead.
var textStyle = sync.OnceValue(func() *regexp.Regexp {
	return regexp.MustCompile(`transform="scale\(1, -1\)"\s+style="font-family:[^"]*fill:([^;"]+)"`)
})

// SVG returns the figure as an svg element without a size of its own, and
// where the data lie in it. It is for a page whose style sheet sets the font
// and the custom properties --ink, --grid, --measured, --model, --second,
// --scatter, --meter and --resonance; the panel must have been drawn with the
// style [Page]. width and height are in points.
func (p Panel) SVG(width, height float64) (string, Area) {
	c := vgsvg.NewWith(vgsvg.UseWH(vg.Length(width), vg.Length(height)))
	whole := draw.New(c)
	canvas := draw.Crop(whole, 1, -2, 1, -4)
	p.plot.Draw(canvas)
	data := p.plot.DataCanvas(canvas)
	var b bytes.Buffer
	c.WriteTo(&b) // a bytes.Buffer takes everything
	svg := b.String()
	svg = fmt.Sprintf(`<svg viewBox="0 0 %g %g" xmlns="http://www.w3.org/2000/svg">`, width, height) + svg[strings.Index(svg, "<g transform"):]
	svg = properties.Replace(compactPaths(svg))
	svg = textStyle().ReplaceAllString(svg, `transform="scale(1,-1)" fill="$1"`)
	return svg, Area{
		Left: float64(data.Min.X) / width, Right: float64(data.Max.X) / width,
		Top: 1 - float64(data.Max.Y)/height, Bottom: 1 - float64(data.Min.Y)/height,
	}
}

// compactPaths makes all path data of an svg compact.
func compactPaths(svg string) string {
	var b strings.Builder
	b.Grow(len(svg))
	for {
		before, rest, found := strings.Cut(svg, ` d="`)
		b.WriteString(before)
		if !found {
			return b.String()
		}
		data, after, _ := strings.Cut(rest, `"`)
		b.WriteString(` d="` + compact(data) + `"`)
		svg = after
	}
}

// compact writes the path data of straight lines (M, L and Z with absolute
// coordinates) with relative coordinates in tenths of a unit, which takes half
// the bytes. Each step leads to the rounded point, so that nothing adds up.
func compact(d string) string {
	var b strings.Builder
	var x, y, startX, startY int64 // tenths
	number := func(n int64) {
		// A leading zero is left out, and a minus sign separates by itself.
		if n >= 0 && b.Len() > 0 {
			if last := b.String()[b.Len()-1]; last >= '0' && last <= '9' {
				b.WriteByte(' ')
			}
		}
		if n < 0 {
			b.WriteByte('-')
			n = -n
		}
		if n >= 10 || n == 0 {
			b.WriteString(strconv.FormatInt(n/10, 10))
		}
		if n%10 != 0 {
			b.WriteByte('.')
			b.WriteByte(byte('0' + n%10))
		}
	}
	for i := 0; i < len(d); {
		command := d[i]
		i++
		if command == 'Z' {
			b.WriteByte('z')
			x, y = startX, startY
			continue
		}
		end := i
		for end < len(d) && d[end] != 'M' && d[end] != 'L' && d[end] != 'Z' {
			end++
		}
		first, second, _ := strings.Cut(d[i:end], ",")
		px, errX := strconv.ParseFloat(first, 64)
		py, errY := strconv.ParseFloat(second, 64)
		if command != 'M' && command != 'L' || errX != nil || errY != nil {
			return d // not one of ours
		}
		i = end
		nx, ny := int64(math.Round(10*px)), int64(math.Round(10*py))
		if command == 'M' {
			b.WriteByte('m') // pairs after it are lines
			startX, startY = nx, ny
		}
		number(nx - x)
		number(ny - y)
		x, y = nx, ny
	}
	return b.String()
}
