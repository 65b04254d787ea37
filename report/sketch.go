package report

import (
	"fmt"
	"io"
	"math"
	"math/cmplx"
	"strings"

	"github.com/rivo/uniseg"

	"realpart/models/quantity"
)

// sketchRows is the height of each of the two plots of [Sketch], in lines.
const sketchRows = 9 // odd, so that one line is the middle

// Sketch draws |Z| and phase over frequency in characters: the model as a line
// of braille dots, the measured points as "+" where they lie off that line by
// a dot or more. width is in columns, 50 at least; 0 means 80.
func Sketch(w io.Writer, t *Traces, width int) error {
	if width == 0 {
		width = 80
	}
	const margin = 11 // for the scale
	columns := max(width, 50) - margin - 2
	logs := func(v []float64) []float64 {
		out := make([]float64, len(v))
		for i, x := range v {
			out[i] = math.Log(x)
		}
		return out
	}
	x, curveX := logs(t.Freq), logs(t.CurveFreq)
	magnitude := func(z []complex128) []float64 {
		out := make([]float64, len(z))
		for i, v := range z {
			out[i] = math.Log(cmplx.Abs(v))
		}
		return out
	}
	phase := func(z []complex128) []float64 {
		out := make([]float64, len(z))
		for i, v := range z {
			out[i] = Phase(v)
		}
		return out
	}
	var b strings.Builder
	panel := func(title string, points, curve []float64, low, high float64, label func(float64) string) {
		fmt.Fprintf(&b, "%s\n", title)
		c := newCanvas(columns, sketchRows, x[0], x[len(x)-1], low, high)
		for i := 1; i < len(curve); i++ {
			c.line(curveX[i-1], curve[i-1], curveX[i], curve[i])
		}
		for i, v := range points {
			c.mark(x[i], v)
		}
		for i, row := range c.rows() {
			scale := ""
			switch i {
			case 0:
				scale = label(high)
			case sketchRows / 2:
				scale = label(high + (low-high)*(float64(i)+0.5)/sketchRows)
			case sketchRows - 1:
				scale = label(low)
			}
			pad := strings.Repeat(" ", max(0, margin-2-uniseg.StringWidth(scale)))
			b.WriteString(strings.TrimRight(pad+scale+" │"+row, " ") + "\n")
		}
		b.WriteString(strings.Repeat(" ", margin-1) + "└" + strings.Repeat("─", columns) + "\n")
		left, right := FormatFrequency(t.Freq[0]), FormatFrequency(t.Freq[len(t.Freq)-1])
		gap := max(1, columns-uniseg.StringWidth(left)-uniseg.StringWidth(right))
		b.WriteString(strings.Repeat(" ", margin) + left + strings.Repeat(" ", gap) + right + "\n")
	}
	points, curve := magnitude(t.Measured), magnitude(t.Curve)
	low, high := extent(points, curve)
	if high-low < 0.02 { // a flat curve is flat
		low, high = low-0.01, high+0.01
	}
	panel("|Z|, logarithmic", points, curve, low, high, func(v float64) string { return quantity.Format(math.Exp(v), "Ω", 3) })
	points, curve = phase(t.Measured), phase(t.Curve)
	low, high = extent(curve)
	low, high = math.Floor(low/15)*15, math.Ceil(high/15)*15
	if low == high {
		low, high = low-15, high+15
	}
	panel("Phase", points, curve, low, high, func(v float64) string { return fmt.Sprintf("%.0f°", v) })
	b.WriteString("⠒ fitted circuit   + measured, where it differs\n")
	_, err := io.WriteString(w, b.String())
	return err
}

func extent(series ...[]float64) (low, high float64) {
	low, high = math.Inf(1), math.Inf(-1)
	for _, s := range series {
		for _, v := range s {
			low, high = min(low, v), max(high, v)
		}
	}
	return low, high
}

// canvas is a plot of braille characters, each of 2 by 4 dots.
type canvas struct {
	columns, lines         int
	left, right, low, high float64
	dots                   []byte // of each character, bits as in Unicode's braille block
	marked                 []bool
}

func newCanvas(columns, lines int, left, right, low, high float64) *canvas {
	if left == right {
		left, right = left-1, right+1
	}
	return &canvas{columns, lines, left, right, low, high, make([]byte, columns*lines), make([]bool, columns*lines)}
}

// dot returns the dot of a point, in dots from the upper left corner.
func (c *canvas) dot(x, y float64) (float64, float64) {
	return (x - c.left) / (c.right - c.left) * float64(2*c.columns-1), (c.high - y) / (c.high - c.low) * float64(4*c.lines-1)
}

// brailleBits are the bits of a character's dots, by row and column (Unicode
// Standard, chapter 21, Braille Patterns: dots 1 2 3 7 and 4 5 6 8).
var brailleBits = [4][2]byte{{0x01, 0x08}, {0x02, 0x10}, {0x04, 0x20}, {0x40, 0x80}}

func (c *canvas) cell(i, j int) (int, bool) {
	if i < 0 || j < 0 || i >= 2*c.columns || j >= 4*c.lines {
		return 0, false
	}
	return j/4*c.columns + i/2, true
}

func (c *canvas) line(x0, y0, x1, y1 float64) {
	a, b := c.dot(x0, y0)
	d, e := c.dot(x1, y1)
	n := int(math.Ceil(max(math.Abs(d-a), math.Abs(e-b), 1)))
	for k := range n + 1 {
		s := float64(k) / float64(n)
		i, j := int(math.Round(a+s*(d-a))), int(math.Round(b+s*(e-b)))
		if at, ok := c.cell(i, j); ok {
			c.dots[at] |= brailleBits[j%4][i%2]
		}
	}
}

// mark sets a point, unless there is a dot of the line within one dot of it.
func (c *canvas) mark(x, y float64) {
	a, b := c.dot(x, y)
	i, j := int(math.Round(a)), int(math.Round(b))
	for di := -1; di <= 1; di++ {
		for dj := -1; dj <= 1; dj++ {
			if at, ok := c.cell(i+di, j+dj); ok && c.dots[at]&brailleBits[(j+dj)%4][(i+di)%2] != 0 {
				return
			}
		}
	}
	// A point beyond the edge is marked at the edge.
	if at, ok := c.cell(min(max(i, 0), 2*c.columns-1), min(max(j, 0), 4*c.lines-1)); ok {
		c.marked[at] = true
	}
}

func (c *canvas) rows() []string {
	var rows []string
	for l := range c.lines {
		var b strings.Builder
		for k := range c.columns {
			switch at := l*c.columns + k; {
			case c.marked[at]:
				b.WriteByte('+')
			case c.dots[at] == 0:
				b.WriteByte(' ')
			default:
				b.WriteRune(rune(0x2800) + rune(c.dots[at]))
			}
		}
		rows = append(rows, b.String())
	}
	return rows
}
