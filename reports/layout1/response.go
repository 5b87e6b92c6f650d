package layout1

import (
	"math"
	"strconv"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"kymobench/reports"
)

// response is the page of the step responses.
func (p *paper) response() {
	s := p.d.Step
	if s == nil {
		return
	}
	p.heading("Step response", 110)
	if len(s.Traces) > 0 {
		first := mainTrace(s.Traces)
		p.mainStep(s, s.Traces[first])
		p.otherSteps(s, first)
	}
	p.steps(s)
	p.y = p.pairs(left, width, 30, rowPairs(s.Facts), 7.5)
}

// mainTrace is the first step that was determined, else the first.
func mainTrace(traces []reports.Trace) int {
	for i, t := range traces {
		if len(t.Fitted) > 0 {
			return i
		}
	}
	return 0
}

// mostDots is how many samples a chart draws; a longer stretch is thinned to
// every second, third ... sample, and the caption says so.
const mostDots = 400

// drawn is the part of a trace that a chart shows.
type drawn struct {
	t        []float64 // ms
	measured []float64
	fitted   []float64 // as long as t, or nil
	every    int
}

func shown(t reports.Trace) drawn {
	from := math.Max(t.Start, -0.15*t.Until)
	first := max(0, int(math.Ceil((from-t.Start)/t.Period)))
	last := min(len(t.Measured)-1, int((t.Until-t.Start)/t.Period))
	out := drawn{every: 1}
	if !(t.Period > 0) || last < first {
		return out
	}
	out.every = (last-first)/mostDots + 1
	fitted := len(t.Fitted) == len(t.Measured)
	for i := first; i <= last; i += out.every {
		out.t = append(out.t, 1000*(t.Start+float64(i)*t.Period))
		out.measured = append(out.measured, t.Measured[i])
		if fitted {
			out.fitted = append(out.fitted, t.Fitted[i])
		}
	}
	return out
}

func spread(lists ...[]float64) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, l := range lists {
		for _, v := range l {
			lo, hi = math.Min(lo, v), math.Max(hi, v)
		}
	}
	if math.IsInf(lo, 0) {
		return 0, 1
	}
	if !(hi > lo) {
		return lo - 1, hi + 1
	}
	room := (hi - lo) * 0.06
	return lo - room, hi + room
}

// stepPlot is measured and fitted.
func stepPlot(d drawn, size, dot float64) *plot.Plot {
	pl := newPlot(size)
	lo, hi := spread(d.measured, d.fitted)
	timeAxis(pl, d)
	scaled(&pl.Y, lo, hi, 5)
	pl.Add(grid(pl), plotter(func(c draw.Canvas, x, y func(float64) vg.Length) {
		c.StrokeLine2(style(hair(), 0.5, 1, 2), x(0), c.Min.Y, x(0), c.Max.Y)
		poly(c, style(colour{0x5f, 0x8f, 0xa6}, 1.2), points(x, y, d.t, d.fitted))
		dots(c, ink(), vg.Length(dot), points(x, y, d.t, d.measured))
	}))
	return pl
}

func timeAxis(pl *plot.Plot, d drawn) {
	if n := len(d.t); n > 1 {
		scaled(&pl.X, d.t[0], d.t[n-1], 8)
	} else {
		scaled(&pl.X, 0, 1, 5)
	}
}

func points(x, y func(float64) vg.Length, xs, ys []float64) []vg.Point {
	out := make([]vg.Point, len(ys))
	for i := range ys {
		out[i] = vg.Point{X: x(xs[i]), Y: y(ys[i])}
	}
	return out
}

// mainStep draws one step large, with its residuals on a scale of their own.
func (p *paper) mainStep(s *reports.Step, t reports.Trace) {
	d := shown(t)
	y := p.y + 2
	p.font(sans, 7.5)
	if len(d.fitted) > 0 {
		p.text(right-p.width("fitted"), y+1, "fitted")
		p.line(right-p.width("fitted")-9, y, right-p.width("fitted")-2, y, 0.42, colour{0x5f, 0x8f, 0xa6})
		p.text(right-34, y+1, "measured")
		for i := range 4 {
			p.rect(right-42+2*float64(i), y-0.25, 0.5, 0.5, ink())
		}
	}
	label := "Step " + strconv.Itoa(t.Number) + ", pressure in " + s.Unit
	list := []plotted{{stepPlot(d, 7.5, 0.65), label, 50}}
	if len(d.fitted) > 0 {
		rest := make([]float64, len(d.t))
		for i := range rest {
			rest[i] = d.measured[i] - d.fitted[i]
		}
		pl := newPlot(7.5)
		timeAxis(pl, d)
		lo, hi := spread(rest, []float64{0})
		scaled(&pl.Y, lo, hi, 3)
		pl.Add(grid(pl), plotter(func(c draw.Canvas, x, y func(float64) vg.Length) {
			dots(c, ink(), 0.65, points(x, y, d.t, rest))
		}))
		list = append(list, plotted{pl, "Measured minus fitted in " + s.Unit, 21})
	}
	list[len(list)-1].plot.X.Label.Text = "Time from the edge in ms"
	p.charts(left, width, list...)
	p.y += 1
	if len(d.fitted) == 0 {
		why := t.Note
		if why == "" {
			why = "no reason recorded"
		}
		p.paragraph(left, width, "Nothing was fitted to this step: "+why+".", sans, 8, ink())
	}
	if d.every > 1 {
		p.paragraph(left, width, "Every "+ordinal(d.every)+" sample is drawn; all were used.", sans, 7.2, quiet())
	}
}

func ordinal(n int) string {
	switch {
	case n == 2:
		return "second"
	case n == 3:
		return "third"
	case n%10 == 1 && n%100 != 11:
		return strconv.Itoa(n) + "st"
	case n%10 == 2 && n%100 != 12:
		return strconv.Itoa(n) + "nd"
	case n%10 == 3 && n%100 != 13:
		return strconv.Itoa(n) + "rd"
	}
	return strconv.Itoa(n) + "th"
}

// otherSteps draws the remaining steps small, four in a row.
func (p *paper) otherSteps(s *reports.Step, first int) {
	const gap, h, across = 4.0, 22.0, 4
	w := (width - gap*(across-1)) / across
	n := 0
	for i, t := range s.Traces {
		if i == first {
			continue
		}
		if n%across == 0 {
			if n > 0 {
				p.y += h + 7
			}
			p.need(h + 9)
			p.y += 2
		}
		y := p.y
		label := "Step " + strconv.Itoa(t.Number)
		if len(t.Fitted) == 0 {
			label += ", not determined"
		}
		pl := stepPlot(shown(t), 6, 0.4)
		pl.X.Tick.Marker, pl.Y.Tick.Marker = ticks{3}, ticks{3}
		p.charts(left+float64(n%across)*(w+gap), w, plotted{pl, label, h})
		p.y = y
		n++
	}
	if n > 0 {
		p.y += h + 7
	}
}

// steps is the table of steps.
func (p *paper) steps(s *reports.Step) {
	p.y += 2
	var rows [][]string
	for _, r := range s.Table {
		rows = append(rows, []string{r.Name, r.Height, r.Noise, r.Frequency, r.Damping, r.Note})
	}
	table{size: 7.5, gap: 0.15, columns: []column{
		{title: "Step", w: 11, family: bold}, {title: "Height", w: 22}, {title: "Noise", w: 20},
		{title: "Natural frequency", w: 31}, {title: "Damping ratio", w: 27}, {title: "", w: 55},
	}}.write(p, rows)
	p.y += 1
}
