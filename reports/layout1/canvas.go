package layout1

import (
	"errors"
	"image"
	"image/color"
	"math"

	stdfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
)

// errNoImages: a chart asked for a picture, which this canvas does not draw.
var errNoImages = errors.New("charts are drawn as vectors, not as images")

// canvas is a vg.Canvas on a part of the page, so that plots are drawn as
// vectors with the layout's own fonts.
//
// It keeps the transformation itself and writes transformed points; every
// path carries its own graphics state between q and Q. So nothing has to be
// put right after a Pop: gofpdf never notices that the state was changed.
// Colours are made opaque on white, for transparency groups have no place in
// a file that is to be the same everywhere.
type canvas struct {
	p     *paper
	state canvasState
	stack []canvasState
}

type canvasState struct {
	a, b, c, d, e, f float64 // x' = a x + c y + e, y' = b x + d y + f, in points from the page's lower left
	width            float64
	dash             []vg.Length
	offset           vg.Length
	colour           colour
}

// newCanvas has its origin at the lower left of the rectangle x, y, w, h
// (millimetres from the top left of the page).
func newCanvas(p *paper, x, y, h float64) *canvas {
	return &canvas{p: p, state: canvasState{a: 1, d: 1, e: x / perPoint, f: (pageHeight - y - h) / perPoint, width: 1}}
}

func (c *canvas) SetLineWidth(w vg.Length) { c.state.width = w.Points() }

func (c *canvas) SetLineDash(pattern []vg.Length, offset vg.Length) {
	c.state.dash, c.state.offset = pattern, offset
}

func (c *canvas) SetColor(clr color.Color) { c.state.colour = opaque(clr) }

// opaque blends a colour with white paper.
func opaque(clr color.Color) colour {
	if clr == nil {
		return colour{}
	}
	r, g, b, a := clr.RGBA()
	over := func(v uint32) uint8 { return uint8((v + 0xffff - a) >> 8) }
	return colour{over(r), over(g), over(b)}
}

func (c *canvas) Rotate(rad float64) {
	sin, cos := math.Sincos(rad)
	s := &c.state
	s.a, s.b, s.c, s.d = s.a*cos+s.c*sin, s.b*cos+s.d*sin, s.c*cos-s.a*sin, s.d*cos-s.b*sin
}

func (c *canvas) Translate(pt vg.Point) {
	c.state.e, c.state.f = c.place(pt.X.Points(), pt.Y.Points())
}

func (c *canvas) Scale(x, y float64) {
	s := &c.state
	s.a, s.b, s.c, s.d = s.a*x, s.b*x, s.c*y, s.d*y
}

func (c *canvas) Push() { c.stack = append(c.stack, c.state) }

func (c *canvas) Pop() {
	if n := len(c.stack); n > 0 {
		c.state, c.stack = c.stack[n-1], c.stack[:n-1]
	}
}

func (c *canvas) place(x, y float64) (float64, float64) {
	s := &c.state
	return s.a*x + s.c*y + s.e, s.b*x + s.d*y + s.f
}

func (c *canvas) Stroke(path vg.Path) {
	if c.state.width <= 0 || len(path) == 0 {
		return
	}
	c.begin(" RG ")
	p := c.p
	p.raw = appendNumber(p.raw, c.state.width*c.scale())
	p.raw = append(p.raw, " w "...)
	if len(c.state.dash) > 0 {
		p.raw = append(p.raw, '[')
		for i, d := range c.state.dash {
			if i > 0 {
				p.raw = append(p.raw, ' ')
			}
			p.raw = appendNumber(p.raw, d.Points()*c.scale())
		}
		p.raw = append(p.raw, "] "...)
		p.raw = appendNumber(p.raw, c.state.offset.Points()*c.scale())
		p.raw = append(p.raw, " d "...)
	}
	c.path(path)
	p.raw = append(p.raw, "S Q"...)
	p.emit()
}

func (c *canvas) Fill(path vg.Path) {
	if len(path) == 0 {
		return
	}
	c.begin(" rg ")
	c.path(path)
	c.p.raw = append(c.p.raw, "f Q"...)
	c.p.emit()
}

// scale is how much lengths grow.
func (c *canvas) scale() float64 {
	return math.Sqrt(math.Abs(c.state.a*c.state.d - c.state.b*c.state.c))
}

func (c *canvas) begin(op string) {
	p := c.p
	p.raw = append(p.raw[:0], "q "...)
	for i, v := range []uint8{c.state.colour.r, c.state.colour.g, c.state.colour.b} {
		if i > 0 {
			p.raw = append(p.raw, ' ')
		}
		p.raw = appendNumber(p.raw, float64(v)/255)
	}
	p.raw = append(p.raw, op...)
}

func (c *canvas) path(path vg.Path) {
	var here vg.Point
	for _, comp := range path {
		switch comp.Type {
		case vg.MoveComp:
			here = comp.Pos
			c.point(here, " m ")
		case vg.LineComp:
			here = comp.Pos
			c.point(here, " l ")
		case vg.ArcComp:
			here = c.arc(comp, here)
		case vg.CurveComp:
			switch len(comp.Control) {
			case 1: // quadratic, raised to cubic
				q := comp.Control[0]
				third := func(p vg.Point) vg.Point { return vg.Point{X: (p.X + 2*q.X) / 3, Y: (p.Y + 2*q.Y) / 3} }
				c.point(third(here), " ")
				c.point(third(comp.Pos), " ")
			case 2:
				c.point(comp.Control[0], " ")
				c.point(comp.Control[1], " ")
			default:
				c.point(here, " ")
				c.point(comp.Pos, " ")
			}
			here = comp.Pos
			c.point(here, " c ")
		case vg.CloseComp:
			c.p.raw = append(c.p.raw, "h "...)
		}
	}
}

// arc draws a circular arc as cubic curves of at most a quarter turn each:
// control points at 4/3 tan(step/4) radii along the tangents. A line leads to
// its start unless the path is there already.
func (c *canvas) arc(comp vg.PathComp, here vg.Point) vg.Point {
	n := int(math.Ceil(math.Abs(comp.Angle) / (math.Pi / 2)))
	if n == 0 {
		return here
	}
	step := comp.Angle / float64(n)
	k := 4.0 / 3 * math.Tan(step/4) * comp.Radius.Points()
	at := func(angle, along float64) vg.Point {
		sin, cos := math.Sincos(angle)
		r := comp.Radius.Points()
		return vg.Point{X: comp.Pos.X + vg.Length(r*cos-along*sin), Y: comp.Pos.Y + vg.Length(r*sin+along*cos)}
	}
	angle := comp.Start
	if start := at(angle, 0); math.Hypot(float64(start.X-here.X), float64(start.Y-here.Y)) > 1e-6 {
		c.point(start, " l ")
	}
	for range n {
		c.point(at(angle, k), " ")
		c.point(at(angle+step, -k), " ")
		angle += step
		here = at(angle, 0)
		c.point(here, " c ")
	}
	return here
}

func (c *canvas) point(pt vg.Point, op string) {
	x, y := c.place(pt.X.Points(), pt.Y.Points())
	p := c.p
	p.raw = appendNumber(p.raw, x)
	p.raw = append(p.raw, ' ')
	p.raw = appendNumber(p.raw, y)
	p.raw = append(p.raw, op...)
}

// FillString writes text with the layout's own face of that weight.
func (c *canvas) FillString(f font.Face, pt vg.Point, text string) {
	family := sans
	if f.Font.Weight >= stdfont.WeightBold {
		family = bold
	}
	p := c.p
	p.font(family, f.Font.Size.Points()*c.scale())
	p.colour(c.state.colour)
	x, y := c.place(pt.X.Points(), pt.Y.Points())
	if c.state.b == 0 && c.state.c == 0 {
		p.text(x*perPoint, pageHeight-y*perPoint, text)
		return
	}
	grown := c.scale()
	p.turned(x*perPoint, pageHeight-y*perPoint, c.state.b/grown, c.state.a/grown, text)
}

// DrawImage draws nothing: no chart of this layout has a picture, and one
// that came to have one would be an error, not a gap.
func (c *canvas) DrawImage(vg.Rectangle, image.Image) {
	if c.p.err == nil {
		c.p.err = errNoImages
	}
}
