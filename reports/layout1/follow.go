package layout1

import (
	"math"
	"strconv"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"kymobench/reports"
)

// follow is the page of what follows from natural frequency and damping ratio,
// and the opinions, which stand apart.
func (p *paper) follow() {
	s := p.d.Step
	if s == nil {
		return
	}
	if s.Amplitude != nil || s.Plane != nil {
		p.heading("What the line does", 70)
		if s.Amplitude != nil {
			p.amplitude(s.Amplitude, s.Derived)
		}
		if s.Plane != nil {
			p.plane(s.Plane)
		}
	}
	if len(s.Opinions) > 0 || s.Pulse != nil {
		p.heading("Opinions", 40)
		p.paragraph(left, width, "Not results: no limit is held against what follows, and it holds for the line on this bench with stated or published pulses.", sans, 7.5, quiet())
		if s.Pulse != nil {
			p.pulse(s.Pulse)
		}
		p.y += 1
		p.bullets(s.Opinions, 7.8)
	}
}

// amplitude draws the gain against frequency, with the figures beside it.
func (p *paper) amplitude(a *reports.Amplitude, rows []reports.FigureRow) {
	const h = 52.0
	p.need(h + 12)
	start := p.y
	chart := newPlot(7.5)
	chart.X.Scale = plot.LogScale{}
	chart.X.Tick.Marker = decades{}
	chart.X.Min, chart.X.Max = a.Frequency[0], a.Frequency[len(a.Frequency)-1]
	top := 1.3
	for i := range a.Gain {
		top = math.Max(top, 1.08*a.High[i])
	}
	for _, q := range a.Points {
		top = math.Max(top, 1.05*(q.Gain+q.U))
	}
	scaled(&chart.Y, 0, top, 6)
	chart.X.Label.Text = "Frequency in Hz"
	chart.Add(plotter(func(c draw.Canvas, x, y func(float64) vg.Length) {
		amplitudeField(c, x, y, a, chart.X.Min, chart.X.Max)
	}))
	p.charts(left, 96, plotted{chart, "Gain of the line", h})
	p.y += 0.5
	p.paragraph(left, 96, a.Caption, sans, 7, quiet())
	end := p.y
	p.y = start
	p.figures(left+104, width-104, rows)
	p.y = math.Max(end, p.y)
}

func amplitudeField(c draw.Canvas, x, y func(float64) vg.Length, a *reports.Amplitude, x0, x1 float64) {
	box := func(low, high float64) []vg.Point {
		return []vg.Point{{X: x(x0), Y: y(low)}, {X: x(x1), Y: y(low)}, {X: x(x1), Y: y(high)}, {X: x(x0), Y: y(high)}}
	}
	area(c, pale(), box(0.95, 1.05))
	c.StrokeLine2(style(hair(), 0.6), x(x0), y(1), x(x1), y(1))
	band := points(x, y, a.Frequency, a.High)
	low := points(x, y, a.Frequency, a.Low)
	for i := len(low) - 1; i >= 0; i-- {
		band = append(band, low[i])
	}
	area(c, shade(), band)
	poly(c, style(accent(), 1), points(x, y, a.Frequency, a.Gain))
	for _, q := range a.Points {
		at := vg.Point{X: x(q.Frequency), Y: y(q.Gain)}
		if !c.Contains(at) {
			continue
		}
		poly(c, style(ink(), 0.6), []vg.Point{{X: at.X, Y: y(q.Gain - q.U)}, {X: at.X, Y: y(q.Gain + q.U)}})
		ring(c, at, 1.7, colour{255, 255, 255}, ink())
	}
}

// ring is a small circle, filled and outlined.
func ring(c draw.Canvas, at vg.Point, r vg.Length, fill, line colour) {
	var path vg.Path
	path.Move(vg.Point{X: at.X + r, Y: at.Y})
	path.Arc(at, r, 0, 2*math.Pi)
	path.Close()
	c.SetColor(fill.rgb())
	c.Fill(path)
	c.SetColor(line.rgb())
	c.SetLineWidth(0.6)
	c.SetLineDash(nil, 0)
	c.Stroke(path)
}

// decades are ticks at 1, 2 and 5 times powers of ten, for a logarithmic axis.
type decades struct{}

func (decades) Ticks(lo, hi float64) []plot.Tick {
	var out []plot.Tick
	if !(lo > 0) || !(hi > lo) {
		return nil
	}
	for e := math.Floor(math.Log10(lo)); e <= math.Ceil(math.Log10(hi)); e++ {
		for _, m := range []float64{1, 2, 5} {
			if v := m * math.Pow(10, e); v >= lo*(1-1e-9) && v <= hi*(1+1e-9) {
				out = append(out, plot.Tick{Value: v, Label: strconv.FormatFloat(v, 'g', 6, 64)})
			}
		}
	}
	return out
}

// figures is a narrow table of names, values and what is uncertain in them.
func (p *paper) figures(x, w float64, rows []reports.FigureRow) {
	const name, value, size = 25.0, 40.0, 7.4
	p.font(sans, 6.8)
	p.colour(quiet())
	p.y += 3
	p.text(x, p.y, "Figure")
	p.textRight(x+value, p.y, "Value")
	p.text(x+value+1.5, p.y, "95 % interval")
	p.colour(ink())
	p.y += 1
	p.line(x, p.y, x+w, p.y, 0.2, quiet())
	p.y += 0.6
	for _, r := range rows {
		p.font(sans, size)
		names, notes := p.wrap(r.Name, name-1), p.wrap(r.Uncertainty, w-value-1.5)
		n := max(len(names), len(notes))
		p.need(float64(n) * lead(size))
		p.font(sans, size)
		for i, t := range names {
			p.text(x, p.y+float64(i+1)*lead(size)-0.8, t)
		}
		p.textRight(x+value, p.y+lead(size)-0.8, r.Value)
		for i, t := range notes {
			p.text(x+value+1.5, p.y+float64(i+1)*lead(size)-0.8, t)
		}
		p.y += float64(n)*lead(size) + 0.25
	}
}

// pulse is the table of errors on pulse waves.
func (p *paper) pulse(s *reports.Pulse) {
	var rows [][]string
	for _, r := range s.Rows {
		rows = append(rows, []string{r.Name, r.Pressure, r.Fastest, r.Errors[0], r.Errors[1], r.Errors[2]})
	}
	p.y += 1
	table{size: 7.3, gap: 0.3, columns: []column{
		{title: "Pulse", w: 34}, {title: "mmHg", w: 15}, {title: "Fastest rate (95 %)", w: 30},
		{title: "Error " + s.Head[0], w: 29}, {title: s.Head[1], w: 29}, {title: s.Head[2], w: 29},
	}}.write(p, rows)
	p.y += 0.5
	for _, n := range s.Notes {
		p.paragraph(left, width, n, sans, 7, quiet())
	}
}
