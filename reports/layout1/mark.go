package layout1

import (
	"math"

	"golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
)

// mark draws the document's mark across the page, under everything else. It is
// drawn as outlines and not as text, so that who copies or searches the text
// of a page finds no stray letters between the figures; the foot of every page
// has the mark as text.
func (p *paper) mark() {
	if p.marked == nil {
		p.marked = p.outlines(p.d.Mark)
	}
	if p.err == nil {
		p.pdf.RawWriteStr(string(p.marked))
	}
}

// outlines returns the operators that fill the outlines of a text in bold
// letters, from the lower left of the page to its upper right.
func (p *paper) outlines(text string) []byte {
	const size = 35.0 // points
	p.check(text)
	f, err := sfnt.Parse(faces()[1].ttf)
	if err != nil {
		p.err = err
		return nil
	}
	var b sfnt.Buffer
	em := fixed.I(int(f.UnitsPerEm()))
	type glyph struct {
		segments sfnt.Segments
		at       float64
	}
	var glyphs []glyph
	length := 0.0
	unit := size / float64(f.UnitsPerEm()) / 64
	for _, r := range text {
		i, err := f.GlyphIndex(&b, r)
		if err != nil {
			p.err = err
			return nil
		}
		segments, err := f.LoadGlyph(&b, i, em, nil)
		if err != nil {
			p.err = err
			return nil
		}
		advance, err := f.GlyphAdvance(&b, i, em, font.HintingNone)
		if err != nil {
			p.err = err
			return nil
		}
		glyphs = append(glyphs, glyph{append(sfnt.Segments(nil), segments...), length})
		length += float64(advance) * unit
	}
	sin, cos := math.Sincos(math.Atan2(pageHeight, pageWidth))
	x0 := pageWidth/perPoint/2 - cos*length/2 + sin*size*0.35
	y0 := pageHeight/perPoint/2 - sin*length/2 - cos*size*0.35
	c := &canvas{p: p, state: canvasState{a: cos, b: sin, c: -sin, d: cos, e: x0, f: y0, colour: colour{0xf0, 0xf0, 0xf0}}}
	c.begin(" rg ")
	for _, g := range glyphs {
		c.glyph(g.segments, g.at, unit)
	}
	return append(append([]byte(nil), p.raw...), "f Q"...)
}

// glyph writes the outlines of a glyph that begins at x points along the
// baseline; the font's y runs downwards here, its curves are quadratic or cubic.
func (c *canvas) glyph(segments sfnt.Segments, x, unit float64) {
	at := func(q fixed.Point26_6) (float64, float64) { return x + float64(q.X)*unit, -float64(q.Y) * unit }
	put := func(px, py float64, op string) {
		px, py = c.place(px, py)
		px, py = math.Round(px*10)/10, math.Round(py*10)/10 // it stands on every page: few digits
		c.p.raw = append(appendNumber(append(appendNumber(c.p.raw, px), ' '), py), op...)
	}
	var hx, hy float64
	for _, s := range segments {
		ex, ey := at(s.Args[0])
		switch s.Op {
		case sfnt.SegmentOpMoveTo:
			put(ex, ey, " m ")
		case sfnt.SegmentOpLineTo:
			put(ex, ey, " l ")
		case sfnt.SegmentOpQuadTo:
			qx, qy := ex, ey
			ex, ey = at(s.Args[1])
			put((hx+2*qx)/3, (hy+2*qy)/3, " ")
			put((ex+2*qx)/3, (ey+2*qy)/3, " ")
			put(ex, ey, " c ")
		case sfnt.SegmentOpCubeTo:
			ax, ay := ex, ey
			bx, by := at(s.Args[1])
			ex, ey = at(s.Args[2])
			put(ax, ay, " ")
			put(bx, by, " ")
			put(ex, ey, " c ")
		}
		hx, hy = ex, ey
	}
}
