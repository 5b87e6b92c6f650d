package layout1

import (
	"math"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"kymobench/reports"
)

// plane draws the UUT among natural frequency and damping ratio: the limits
// as thick lines, what they leave as a white field on grey.
func (p *paper) plane(pl *reports.Plane) {
	const h = 50.0
	p.need(h + 9)
	p.y += 2
	c := pl.Combined
	chart := newPlot(7.5)
	xs := []float64{0, c.FrequencyInterval[1] * 1.15}
	ys := []float64{0, c.DampingInterval[1] * 1.15}
	for _, s := range pl.Singles {
		xs, ys = append(xs, s.FrequencyInterval[1]), append(ys, s.DampingInterval[1])
	}
	if pl.FrequencyLow != nil {
		xs = append(xs, *pl.FrequencyLow*1.4)
	}
	for _, b := range []*float64{pl.DampingLow, pl.DampingHigh} {
		if b != nil {
			ys = append(ys, *b*1.15)
		}
	}
	for _, curve := range pl.Contours {
		for i, f := range curve.Frequency {
			if z := curve.Damping[i]; z >= 0.1 && z <= 1 {
				xs, ys = append(xs, 1.05*f), append(ys, 1.15)
			}
		}
	}
	_, x1 := spread(xs)
	_, y1 := spread(ys)
	scaled(&chart.X, 0, x1, 7)
	scaled(&chart.Y, 0, y1, 6)
	chart.X.Label.Text = "Natural frequency in Hz"
	chart.Add(plotter(func(c draw.Canvas, x, y func(float64) vg.Length) { planeField(c, x, y, pl, x1, y1) }))
	p.charts(left, 96, plotted{chart, "Damping ratio", h})
	end := p.y
	x, w := left+104, width-104
	p.y -= h
	p.paragraph(x, w, "Where the UUT stands", bold, 8.5, ink())
	p.y += 1
	words := "The dot is what all determined steps say together, with its 95 % intervals; small open circles are single steps."
	if pl.FrequencyLow != nil || pl.DampingLow != nil || pl.DampingHigh != nil {
		words += " Thick lines are the limits of the procedure; what they refuse is grey."
	}
	p.paragraph(x, w, words, sans, 7.5, ink())
	p.y += 1
	for i, c := range pl.Contours {
		y := p.y + 2
		p.dashed(x, y, x+10, contourStyle(i))
		p.font(sans, 7.5)
		p.colour(ink())
		p.text(x+12, y+1, c.Name)
		p.y += 4.2
	}
	if pl.Caption != "" {
		p.paragraph(x, w, pl.Caption, sans, 7.5, ink())
	}
	p.y = math.Max(end, p.y)
}

// contourStyle tells curves apart by their dashes, for print in grey.
func contourStyle(i int) draw.LineStyle {
	dashes := [][]vg.Length{{4, 2}, nil, {1, 2}, {6, 2, 1, 2}}
	return style(accent(), 0.9, dashes[i%len(dashes)]...)
}

// dashed draws a piece of a curve's line beside its name.
func (p *paper) dashed(x1, y, x2 float64, s draw.LineStyle) {
	c := draw.NewCanvas(newCanvas(p, x1, y-1, 2), vg.Length((x2-x1)/perPoint), vg.Length(2/perPoint))
	c.StrokeLine2(s, 0, vg.Length(1/perPoint), vg.Length((x2-x1)/perPoint), vg.Length(1/perPoint))
}

func planeField(c draw.Canvas, x, y func(float64) vg.Length, pl *reports.Plane, x1, y1 float64) {
	x0, z0, z1 := 0.0, 0.0, y1
	if pl.FrequencyLow != nil {
		x0 = *pl.FrequencyLow
	}
	if pl.DampingLow != nil {
		z0 = *pl.DampingLow
	}
	if pl.DampingHigh != nil {
		z1 = *pl.DampingHigh
	}
	box := func(a, b, d, e float64) []vg.Point {
		return []vg.Point{{X: x(a), Y: y(b)}, {X: x(d), Y: y(b)}, {X: x(d), Y: y(e)}, {X: x(a), Y: y(e)}}
	}
	area(c, pale(), box(0, 0, x1, y1))
	area(c, colour{255, 255, 255}, box(x0, z0, x1, z1))
	thick := style(ink(), 1.4)
	if pl.FrequencyLow != nil {
		poly(c, thick, []vg.Point{{X: x(x0), Y: y(z0)}, {X: x(x0), Y: y(z1)}})
	}
	for _, b := range []*float64{pl.DampingLow, pl.DampingHigh} {
		if b != nil {
			poly(c, thick, []vg.Point{{X: x(x0), Y: y(*b)}, {X: x(x1), Y: y(*b)}})
		}
	}
	for i, curve := range pl.Contours {
		var pts []vg.Point
		for k, f := range curve.Frequency {
			if f > 0 && curve.Damping[k] <= 1.5*y1 {
				pts = append(pts, vg.Point{X: x(f), Y: y(curve.Damping[k])})
			}
		}
		poly(c, contourStyle(i), pts)
	}
	for _, s := range pl.Singles {
		c.SetColor(quiet().rgb())
		c.SetLineWidth(0.6)
		c.SetLineDash(nil, 0)
		var path vg.Path
		at := vg.Point{X: x(s.Frequency), Y: y(s.Damping)}
		path.Move(vg.Point{X: at.X + 2, Y: at.Y})
		path.Arc(at, 2, 0, 2*math.Pi)
		path.Close()
		c.Stroke(path)
	}
	m := pl.Combined
	s := style(accent(), 1)
	poly(c, s, []vg.Point{{X: x(m.FrequencyInterval[0]), Y: y(m.Damping)}, {X: x(m.FrequencyInterval[1]), Y: y(m.Damping)}})
	poly(c, s, []vg.Point{{X: x(m.Frequency), Y: y(m.DampingInterval[0])}, {X: x(m.Frequency), Y: y(m.DampingInterval[1])}})
	var path vg.Path
	at := vg.Point{X: x(m.Frequency), Y: y(m.Damping)}
	path.Move(vg.Point{X: at.X + 2.4, Y: at.Y})
	path.Arc(at, 2.4, 0, 2*math.Pi)
	path.Close()
	c.SetColor(accent().rgb())
	c.Fill(path)
}
