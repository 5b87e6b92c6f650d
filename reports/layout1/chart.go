package layout1

import (
	"image/color"
	"math"
	"strconv"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

func (c colour) rgb() color.Color { return color.RGBA{c.r, c.g, c.b, 0xff} }

func style(c colour, w float64, dashes ...vg.Length) draw.LineStyle {
	return draw.LineStyle{Color: c.rgb(), Width: vg.Length(w), Dashes: dashes}
}

// newPlot is an empty chart in the layout's manner: hairline axes without a
// frame, small ticks outwards, sans figures.
func newPlot(size float64) *plot.Plot {
	p := plot.New()
	p.BackgroundColor = nil
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		a.LineStyle = style(quiet(), 0.5)
		a.Tick.LineStyle = style(quiet(), 0.5)
		a.Tick.Length = 3
		a.Padding = 0
		a.Tick.Label.Font = font.Font{Typeface: "Liberation", Variant: "Sans", Size: vg.Length(size)}
		a.Tick.Label.Color = ink().rgb()
		a.Label.TextStyle.Font = a.Tick.Label.Font
		a.Label.TextStyle.Color = quiet().rgb()
		a.Label.Padding = 2
		a.Tick.Marker = ticks{5}
	}
	return p
}

// scaled sets an axis.
func scaled(a *plot.Axis, lo, hi float64, about int) {
	a.Min, a.Max, a.Tick.Marker = lo, hi, ticks{about}
}

// ticks are at multiples of 1, 2 or 5 times a power of ten, about so many.
type ticks struct{ about int }

func (t ticks) Ticks(lo, hi float64) []plot.Tick {
	if !(hi > lo) || math.IsInf(hi-lo, 0) {
		return nil
	}
	step := math.Pow(10, math.Floor(math.Log10((hi-lo)/float64(t.about))))
	for _, m := range []float64{1, 2, 5, 10} {
		if (hi-lo)/(m*step) <= float64(t.about)+1 {
			step *= m
			break
		}
	}
	decimals := max(0, int(math.Ceil(-math.Log10(step)-1e-9)))
	var out []plot.Tick
	slack := (hi - lo) * 1e-9
	for i := math.Ceil((lo - slack) / step); i*step <= hi+slack; i++ {
		label := strconv.FormatFloat(i*step, 'f', decimals, 64)
		if math.Abs(i*step) >= 1e7 || decimals > 6 {
			label = strconv.FormatFloat(i*step, 'g', 3, 64)
		}
		if rest, negative := strings.CutPrefix(label, "-"); negative {
			label = "\u2212" + rest
			if i == 0 {
				label = rest
			}
		}
		out = append(out, plot.Tick{Value: i * step, Label: label})
	}
	return out
}

// plotted is a chart and the height it takes, in millimetres.
type plotted struct {
	plot  *plot.Plot
	label string // of the upright axis, written above it
	h     float64
}

// charts draws charts one under the other from p.y down, with their upright
// axes in line, and moves y below them.
func (p *paper) charts(x, w float64, list ...plotted) {
	y := p.y
	var indent, outdent vg.Length
	for _, c := range list {
		area := draw.NewCanvas(newCanvas(p, x, y, c.h), vg.Length(w/perPoint), vg.Length(c.h/perPoint))
		data := c.plot.DataCanvas(area)
		indent = max(indent, data.Min.X)
		outdent = max(outdent, area.Max.X-data.Max.X)
	}
	for _, c := range list {
		if c.label != "" {
			p.font(sans, 7.5)
			p.colour(quiet())
			p.text(x, y+3, c.label)
			p.colour(ink())
			y += 5
		}
		area := draw.NewCanvas(newCanvas(p, x, y, c.h), vg.Length(w/perPoint), vg.Length(c.h/perPoint))
		data := c.plot.DataCanvas(area)
		area = draw.Crop(area, indent-data.Min.X, (area.Max.X-data.Max.X)-outdent-4, 0, 0) // room for half a figure at the right end
		c.plot.Draw(area)
		p.family = "" // what the chart set last is no matter of the text after it
		y += c.h
	}
	p.y = y
	p.colour(ink())
}

// plotter is a function that draws on the area of the data.
type plotter func(c draw.Canvas, x, y func(float64) vg.Length)

func (f plotter) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	f(c, x, y)
}

// poly draws a line through points, clipped to the data area.
func poly(c draw.Canvas, s draw.LineStyle, pts []vg.Point) {
	c.StrokeLines(s, c.ClipLinesXY(pts)...)
}

// area fills a polygon, clipped to the data area.
func area(c draw.Canvas, clr colour, pts []vg.Point) {
	if clipped := c.ClipPolygonXY(pts); len(clipped) > 2 {
		c.FillPolygon(clr.rgb(), clipped)
	}
}

// grid draws hairlines at the ticks of the upright axis, and a stronger one
// at zero.
func grid(pl *plot.Plot) plotter {
	return func(c draw.Canvas, x, y func(float64) vg.Length) {
		for _, t := range pl.Y.Tick.Marker.Ticks(pl.Y.Min, pl.Y.Max) {
			s := style(pale(), 0.5)
			if t.Value == 0 {
				s = style(hair(), 0.6)
			}
			c.StrokeLine2(s, c.Min.X, y(t.Value), c.Max.X, y(t.Value))
		}
	}
}

// dots draws small squares, all in one path.
func dots(c draw.Canvas, clr colour, half vg.Length, pts []vg.Point) {
	var path vg.Path
	for _, p := range pts {
		if !c.Contains(p) {
			continue
		}
		path.Move(vg.Point{X: p.X - half, Y: p.Y - half})
		path.Line(vg.Point{X: p.X + half, Y: p.Y - half})
		path.Line(vg.Point{X: p.X + half, Y: p.Y + half})
		path.Line(vg.Point{X: p.X - half, Y: p.Y + half})
		path.Close()
	}
	c.SetColor(clr.rgb())
	c.Fill(path)
}
