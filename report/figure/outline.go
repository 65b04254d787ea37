package figure

import (
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
)

// outlined draws text as filled outlines. The pdf canvas of gonum/plot writes
// text in an eight-bit encoding that has no Ω.
type outlined struct{ vg.Canvas }

var _ vg.Canvas = outlined{}

// FillString draws a text from the left end of its base line.
func (c outlined) FillString(face font.Face, at vg.Point, text string) {
	var buffer sfnt.Buffer
	perEm := face.Face.UnitsPerEm()
	scale := float64(face.Font.Size) / float64(perEm) / 64
	em := fixed.I(int(perEm))
	point := func(p fixed.Point26_6) vg.Point {
		return vg.Point{X: at.X + vg.Length(float64(p.X)*scale), Y: at.Y - vg.Length(float64(p.Y)*scale)}
	}
	var path vg.Path
	for _, r := range text {
		glyph, err := face.Face.GlyphIndex(&buffer, r)
		if err != nil {
			glyph = 0 // the font's sign for a character it does not have
		}
		segments, err := face.Face.LoadGlyph(&buffer, glyph, em, nil)
		if err == nil {
			for _, s := range segments {
				switch s.Op {
				case sfnt.SegmentOpMoveTo:
					path.Move(point(s.Args[0]))
				case sfnt.SegmentOpLineTo:
					path.Line(point(s.Args[0]))
				case sfnt.SegmentOpQuadTo:
					path.QuadTo(point(s.Args[0]), point(s.Args[1]))
				case sfnt.SegmentOpCubeTo:
					path.CubeTo(point(s.Args[0]), point(s.Args[1]), point(s.Args[2]))
				}
			}
		}
		if advance, err := face.Face.GlyphAdvance(&buffer, glyph, em, 0); err == nil {
			at.X += vg.Length(float64(advance) * scale)
		}
	}
	if len(path) > 0 {
		c.Fill(path)
	}
}
