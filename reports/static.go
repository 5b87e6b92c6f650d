package reports

import (
	"strconv"

	"kymobench/procedures/results"
)

// static fills in the static calibration.
func (d *Document) static(res results.Results) {
	s := res.Static
	if s == nil && len(res.Curve) == 0 {
		return
	}
	out := &Static{Unit: "mmHg"}
	for _, p := range res.Curve {
		out.Points = append(out.Points, ErrorPoint{
			Set: p.Set, Pressure: p.Pressure, Error: p.Error, U: p.Expanded,
			Low: p.Low, High: p.High, Guard: p.Guard, Cycle: p.Cycle, Down: p.Leg == "down",
		})
		e, u := figure(p.Error, &p.Expanded, 0.01)
		limit := boundsText(results.Bounds{Low: rounded(p.Low), High: rounded(p.High)})
		out.Table = append(out.Table, PointRow{
			Cycle: strconv.Itoa(p.Cycle), Leg: p.Leg, Set: stated(p.Set), Pressure: decimal(p.Pressure, -2),
			Error: e, Expanded: u, Limit: limit,
		})
	}
	if s != nil {
		out.Figures = staticFigures(s, res.Limits)
	}
	d.Static = out
}

// rounded takes a limit that was computed from a share of the reading to four
// decimals.
func rounded(x *float64) *float64 {
	if x == nil {
		return nil
	}
	v, err := strconv.ParseFloat(strconv.FormatFloat(*x, 'f', 4, 64), 64)
	if err != nil {
		return x
	}
	return &v
}

const (
	noBudget = "no budget is made for it"
	asLimit  = "see section 1"
)

// staticFigures are the figures of the calibration as a whole. Those with a
// limit have their uncertainty there.
func staticFigures(s *results.Static, limits []results.Limit) []FigureRow {
	unit := unitText(s.Unit)
	var rows []FigureRow
	judged := map[string]results.Limit{}
	for _, l := range limits {
		judged[l.Name] = l
	}
	add := func(name string, value *float64, uncertainty string) {
		if value == nil {
			return
		}
		rows = append(rows, FigureRow{name, withUnit(decimal(*value, -3), unit), uncertainty})
	}
	withU := func(name string, f *results.Figure, unit string) {
		if f == nil {
			return
		}
		u := 2 * f.Standard
		v, t := figure(f.Value, &u, 0)
		text := "none: all residuals are zero"
		if t != "" {
			text = "± " + withUnit(t, unit) + " (k = 2, scatter about the line only)"
		}
		rows = append(rows, FigureRow{name, withUnit(v, unit), text})
	}
	withU("Slope of the least-squares line", s.Slope, "")
	withU("Intercept of the least-squares line", s.Intercept, unit)
	add("Residual standard deviation", s.ResidualSD, "is itself a measure of scatter")
	add("Linearity, independent", s.Linearity.Independent, noBudget)
	add("Linearity, terminal-based", s.Linearity.Terminal, noBudget)
	add("Linearity, zero-based", s.Linearity.ZeroBased, noBudget)
	add("Linearity, about the least-squares line", s.Linearity.LeastSquares, noBudget)
	if h := s.Hysteresis; h != nil {
		note := noBudget
		if _, ok := judged["hysteresis"]; ok {
			note = asLimit
		}
		rows = append(rows, FigureRow{"Hysteresis, largest, down minus up", withUnit(decimal(h.Largest, -3), unit) + " at " + withUnit(stated(h.At), unit), note})
	}
	for i, z := range s.ZeroReturn {
		add("Return to zero, cycle "+strconv.Itoa(i+1), z, noBudget)
	}
	if r := s.Repeatability; r.LargestRange == nil && r.PooledSD == nil {
		rows = append(rows, FigureRow{"Repeatability", "not determined", "it needs two cycles; this run has " + strconv.Itoa(s.Cycles)})
	} else {
		add("Repeatability, largest range", r.LargestRange, "is itself a measure of scatter")
		dof := ""
		if r.DoF != nil {
			dof = ", " + plural(*r.DoF, "degree", "degrees") + " of freedom"
		}
		add("Repeatability, pooled standard deviation", r.PooledSD, "is itself a measure of scatter"+dof)
	}
	if e := s.LargestError; e != nil {
		where := ""
		if e.At != nil {
			where = " at " + withUnit(stated(*e.At), unit) + ", " + e.Leg
		}
		rows = append(rows, FigureRow{"Largest error as read, before zeroing", withUnit(decimal(e.Value, -3), unit) + where, "for information; the error after zeroing is judged"})
	}
	return rows
}

// leak fills in what the hold gave.
func (d *Document) leak(l *results.Leak) {
	if l == nil {
		return
	}
	var r rows
	r.add("Shut off at", withUnit(stated(l.Set), "mmHg")+" for "+withUnit(decimal(l.Seconds, -1), "s"))
	if l.Rate != nil {
		v, u := figure(*l.Rate, l.Expanded, 0.001)
		text := plusMinus(v, u, "mmHg/s")
		if u == "" {
			text += " (no uncertainty could be stated)"
		}
		r.add("Loss of pressure", text)
	} else {
		r.add("Loss of pressure", "not determined: "+l.Reason)
	}
	if l.Own != nil {
		r.add("Bench by itself", withUnit(stated(*l.Own), "mmHg/s")+", taken off")
	}
	if l.Flow != nil {
		v, u := figure(*l.Flow, l.FlowExpanded, 0.001)
		r.add("As gas", plusMinus(v, u, "mL/min")+" at that pressure, from "+withUnit(stated(*l.Volume), "mL")+" as the bench file states")
	}
	within := "within what the procedure allows"
	if !l.Within {
		within = "not shown to be within what the procedure allows"
	}
	r.add("Highest allowed", withUnit(stated(l.Highest), "mmHg/s")+", "+within)
	r.add("Note", "bench and UUT leak together; a leak makes the run inconclusive, it is no fault of the UUT")
	d.Leak = r
}
