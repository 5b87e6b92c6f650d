package layout1

import (
	"math"
	"sort"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"kymobench/reports"
)

// pressure is the page of the static calibration.
func (p *paper) pressure() {
	s := p.d.Static
	if s != nil {
		p.heading("Error against pressure", 110)
		if len(s.Points) > 0 {
			p.errorCharts(s)
			p.y += 3
			p.points(s)
		} else {
			p.paragraph(left, width, "No set pressure was judged.", sans, 8.5, ink())
		}
	}
	if s != nil && len(s.Figures) > 0 {
		var rows [][]string
		for _, f := range s.Figures {
			rows = append(rows, []string{f.Name, f.Value, f.Uncertainty})
		}
		t := table{size: 7.5, gap: 0.15, columns: []column{
			{title: "Figure", w: 60}, {title: "Value", w: 42}, {title: "Uncertainty, or why there is none", w: width - 102},
		}}
		p.heading("Static figures", t.together(p, rows))
		t.write(p, rows)
	}
	if len(p.d.Leak) > 0 {
		p.heading("Leak", 18)
		p.y = p.pairs(left, width, 40, rowPairs(p.d.Leak), 7.5)
	}
}

// errorCharts draws the errors among their limits, and once more enlarged
// when they would be too small to be read there.
func (p *paper) errorCharts(s *reports.Static) {
	p.errorLegend(s)
	full, lo, hi := errorChart(s, true)
	list := []plotted{{full, "Error after zeroing in " + s.Unit, 60}}
	if near, l, h := errorChart(s, false); (h - l) < 0.45*(hi-lo) {
		list[0].h = 44
		list = append(list, plotted{near, "The same, enlarged", 42})
	}
	list[len(list)-1].plot.X.Label.Text = "Pressure in " + s.Unit
	p.charts(left, width, list...)
	p.y += 1
	p.paragraph(left, width, "Bars are the expanded uncertainty of each point. The legs stand side by side, a little off their pressure, so that both can be read.", sans, 7.2, quiet())
}

// errorLegend names the signs, on the line of the first chart's label.
func (p *paper) errorLegend(s *reports.Static) {
	var up, down, limit, guard bool
	for _, e := range s.Points {
		up, down = up || !e.Down, down || e.Down
		limit = limit || e.Low != nil || e.High != nil
		guard = guard || e.Guard > 0
	}
	y := p.y + 2
	x := right
	p.font(sans, 7.5)
	item := func(show bool, name string, draw func(x float64)) {
		if !show {
			return
		}
		x -= p.width(name)
		p.text(x, y+1, name)
		x -= 10
		draw(x)
		x -= 4
	}
	item(guard, "guard band", func(x float64) { p.rect(x, y-1.2, 8, 2.4, shade()) })
	item(limit, "limit", func(x float64) { p.line(x, y, x+8, y, 0.5, ink()) })
	item(down, "down", func(x float64) {
		for i := range 3 {
			p.line(x+3*float64(i), y, x+3*float64(i)+2, y, 0.25, ink())
		}
		p.polygon(colour{255, 255, 255}, true, 0, x+2.8, y-1, x+5.2, y-1, x+4, y+1.1)
		p.polygon(ink(), false, 0.25, x+2.8, y-1, x+5.2, y-1, x+4, y+1.1)
	})
	item(up, "up", func(x float64) {
		p.line(x, y, x+8, y, 0.25, accent())
		p.polygon(accent(), true, 0, x+2.7, y+1, x+5.3, y+1, x+4, y-1.2)
	})
}

// errorChart is the chart of errors, with the limits in view or not; it
// returns the range of the upright axis too.
func errorChart(s *reports.Static, limits bool) (*plot.Plot, float64, float64) {
	pl := newPlot(7.5)
	lo, hi := math.Inf(1), math.Inf(-1)
	x0, x1 := math.Inf(1), math.Inf(-1)
	see := func(v float64) { lo, hi = math.Min(lo, v), math.Max(hi, v) }
	for _, e := range s.Points {
		x0, x1 = math.Min(x0, e.Pressure), math.Max(x1, e.Pressure)
		see(e.Error - e.U)
		see(e.Error + e.U)
		if limits && e.Low != nil {
			see(*e.Low)
		}
		if limits && e.High != nil {
			see(*e.High)
		}
	}
	see(0)
	if !(hi > lo) {
		lo, hi = lo-1, hi+1
	}
	room := (hi - lo) * 0.06
	lo, hi = lo-room, hi+room
	if !(x1 > x0) {
		x0, x1 = x0-1, x1+1
	}
	beside := (x1 - x0) * 0.03
	scaled(&pl.X, x0-beside, x1+beside, 7)
	scaled(&pl.Y, lo, hi, 6)
	pl.Add(grid(pl))
	band := bandOf(s.Points)
	pl.Add(plotter(func(c draw.Canvas, x, y func(float64) vg.Length) { band.draw(c, x, y) }))
	pl.Add(plotter(func(c draw.Canvas, x, y func(float64) vg.Length) { legs(c, x, y, s.Points) }))
	return pl, lo, hi
}

// band is the limit over pressure, at the pressures where it is known.
type band []reports.ErrorPoint

// bandOf sorts the points by set pressure and takes each once; where the
// guard band differs between legs, the wider one.
func bandOf(points []reports.ErrorPoint) band {
	b := append(band(nil), points...)
	sort.SliceStable(b, func(i, j int) bool { return b[i].Set < b[j].Set })
	var out band
	for _, e := range b {
		if n := len(out); n > 0 && out[n-1].Set == e.Set {
			out[n-1].Guard = math.Max(out[n-1].Guard, e.Guard)
			continue
		}
		out = append(out, e)
	}
	return out
}

func (b band) draw(c draw.Canvas, x, y func(float64) vg.Length) {
	side := func(of func(reports.ErrorPoint) *float64, inwards float64) {
		var edge, inner []vg.Point
		flush := func() {
			if len(edge) > 0 {
				outline := append([]vg.Point(nil), edge...)
				for i := len(inner) - 1; i >= 0; i-- {
					outline = append(outline, inner[i])
				}
				area(c, shade(), outline)
				poly(c, style(ink(), 1.4), edge)
			}
			edge, inner = nil, nil
		}
		for _, e := range b {
			v := of(e)
			if v == nil {
				flush()
				continue
			}
			edge = append(edge, vg.Point{X: x(e.Set), Y: y(*v)})
			inner = append(inner, vg.Point{X: x(e.Set), Y: y(*v + inwards*e.Guard)})
		}
		flush()
	}
	side(func(e reports.ErrorPoint) *float64 { return e.Low }, +1)
	side(func(e reports.ErrorPoint) *float64 { return e.High }, -1)
}

// legs draws the points, up and down apart by sign, dash and a little space.
func legs(c draw.Canvas, x, y func(float64) vg.Length, points []reports.ErrorPoint) {
	const apart = 1.6
	type leg struct {
		cycle int
		down  bool
	}
	place := func(e reports.ErrorPoint) vg.Point {
		p := vg.Point{X: x(e.Pressure) - apart, Y: y(e.Error)}
		if e.Down {
			p.X += 2 * apart
		}
		return p
	}
	var order []leg
	lines := map[leg][]vg.Point{}
	for i, e := range points {
		k := leg{e.Cycle, e.Down}
		if lines[k] == nil {
			order = append(order, k)
			// The way down begins at the top of the way up.
			if i > 0 && e.Down && !points[i-1].Down && points[i-1].Cycle == e.Cycle {
				lines[k] = append(lines[k], place(points[i-1]))
			}
		}
		lines[k] = append(lines[k], place(e))
	}
	for _, k := range order {
		s := style(accent(), 0.7)
		if k.down {
			s = style(ink(), 0.7, 3.5, 2)
		}
		poly(c, s, lines[k])
	}
	for _, e := range points {
		p := place(e)
		clr := accent()
		if e.Down {
			clr = ink()
		}
		if e.U > 0 {
			poly(c, style(clr, 0.7), []vg.Point{{X: p.X, Y: y(e.Error - e.U)}, {X: p.X, Y: y(e.Error + e.U)}})
			for _, end := range []float64{-1, 1} {
				at := y(e.Error + end*e.U)
				poly(c, style(clr, 0.7), []vg.Point{{X: p.X - 1.5, Y: at}, {X: p.X + 1.5, Y: at}})
			}
		}
		if !c.Contains(p) {
			continue
		}
		if e.Down {
			tri := []vg.Point{{X: p.X - 3, Y: p.Y + 2.4}, {X: p.X + 3, Y: p.Y + 2.4}, {X: p.X, Y: p.Y - 3}}
			c.FillPolygon(colour{255, 255, 255}.rgb(), tri)
			c.StrokeLines(style(clr, 0.8), append(tri, tri[0], tri[1]))
		} else {
			c.FillPolygon(clr.rgb(), []vg.Point{{X: p.X - 3.1, Y: p.Y - 2.5}, {X: p.X + 3.1, Y: p.Y - 2.5}, {X: p.X, Y: p.Y + 3.2}})
		}
	}
}

// points is the table of errors.
func (p *paper) points(s *reports.Static) {
	var rows [][]string
	for _, r := range s.Table {
		rows = append(rows, []string{r.Cycle, r.Leg, r.Set, r.Pressure, r.Error, "± " + r.Expanded, r.Limit})
		if r.Expanded == "" {
			rows[len(rows)-1][5] = "not stated"
		}
	}
	table{size: 7.5, gap: 0.1, columns: []column{
		{title: "Cycle", w: 16}, {title: "Leg", w: 20},
		{title: "Set, " + s.Unit, w: 24, right: true}, {title: "Reference, " + s.Unit, w: 32, right: true},
		{title: "Error, " + s.Unit, w: 27, right: true}, {title: "U (95 %)", w: 22},
		{title: "Limit", w: 25},
	}}.write(p, rows)
	p.y += 0.5
	p.paragraph(left, width, "The reference is corrected by its certificate and for the head; its uncertainty is part of that of the error.", sans, 7.2, quiet())
}
