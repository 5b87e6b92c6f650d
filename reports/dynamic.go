package reports

import (
	"fmt"
	"math"
	"strings"

	"kymobench/procedures/results"
)

// follow puts into words and curves what follows from natural frequency and
// damping ratio.
func (out *Step) follow(s *results.Step) {
	if d := s.Derived; d != nil {
		out.Derived = derivedRows(d)
		if s.Response != nil {
			out.Amplitude = amplitude(d, s.Response)
		}
	}
	if s.Pulse != nil {
		out.Pulse = pulseRows(s.Pulse)
		if out.Plane != nil {
			out.Plane.add(s.Pulse)
		}
	}
	if s.Opinions != nil {
		for _, t := range s.Opinions.Texts {
			out.Opinions = append(out.Opinions, capital(inUnits(oneLine(t.Text)))+".")
		}
	}
}

// inUnits writes units in a sentence as they are printed.
func inUnits(text string) string {
	return strings.NewReplacer("degC", "°C", "kg/m3", "kg/m³", " x ", " × ").Replace(text)
}

// derivedRows are the figures with their 95 % intervals.
func derivedRows(d *results.Derived) []FigureRow {
	var rows []FigureRow
	add := func(name string, f results.DerivedFigure, scale float64, unit string) {
		row := FigureRow{Name: name}
		switch {
		case f.Value == nil:
			row.Value, row.Uncertainty = "none", f.Reason
			switch name {
			case "Resonance at", "Its gain":
				row.Uncertainty = "no peak"
			case "Damped frequency", "Overshoot":
				row.Uncertainty = "nothing swings"
			}
		case f.Interval != nil:
			half := (f.Interval[1] - f.Interval[0]) / 2 * scale
			// Where the interval leans to one side, both of its ends are told.
			lean := math.Abs(f.Interval[1]+f.Interval[0]-2**f.Value) / math.Max(f.Interval[1]-f.Interval[0], 1e-300)
			v, u := figure(*f.Value*scale, &half, 0)
			row.Value, row.Uncertainty = withUnit(v, unit), ""
			if u != "" {
				row.Uncertainty = "± " + u
				if lean > 0.2 {
					p := place(half)
					row.Uncertainty = decimal(f.Interval[0]*scale, p) + " to " + decimal(f.Interval[1]*scale, p)
				}
			}
		}
		if f.Note != "" {
			row.Uncertainty = strings.TrimSpace(row.Uncertainty + "; " + f.Note)
		}
		rows = append(rows, row)
	}
	add("Damped frequency", d.DampedFrequency, 1, "Hz")
	add("Overshoot", d.Overshoot, 1, "%")
	add("Rise, 10 to 90 %", d.RiseTime, 1000, "ms")
	add("Settling to 5 %", d.Settling5, 1000, "ms")
	add("Settling to 2 %", d.Settling2, 1000, "ms")
	add("Resonance at", d.ResonanceFrequency, 1, "Hz")
	add("Its gain", d.ResonanceGain, 1, "")
	add("Gain ±5 % up to", d.Flat5, 1, "Hz")
	add("\u22123 dB at", d.Bandwidth3dB, 1, "Hz")
	for _, a := range d.At {
		if a.Frequency >= 5 || len(d.At) < 4 {
			add("Phase at "+withUnit(stated(a.Frequency), "Hz"), a.Phase, 1, "°")
		}
	}
	add("fn × damping ratio", d.Product, 1, "Hz")
	return rows
}

func amplitude(d *results.Derived, r *results.Response) *Amplitude {
	out := &Amplitude{Caption: "Line: the fitted response with its 95 % band. Open circles: worked out from the samples without a model, bars ± 2 standard uncertainties. Grey: gain within 5 %. " + capital(oneLine(r.Text)) + "."}
	for _, c := range d.Curve {
		out.Frequency, out.Gain = append(out.Frequency, c.Frequency), append(out.Gain, c.Gain)
		out.Low, out.High = append(out.Low, c.Interval[0]), append(out.High, c.Interval[1])
	}
	for _, p := range r.Points {
		out.Points = append(out.Points, AmplitudePoint{p.Frequency, p.Gain, 2 * p.GainStandard})
	}
	return out
}

// pulseRates are the rates whose errors are printed, of those in the results.
func pulseRates() [3]float64 { return [3]float64{60, 120, 180} }

func pulseRows(p *results.PulseErrors) *Pulse {
	out := &Pulse{}
	for i, r := range pulseRates() {
		out.Head[i] = fmt.Sprintf("at %.0f/min", r)
	}
	for _, s := range p.Shapes {
		row := PulseRow{
			Name: s.Name + ", " + s.From, Pressure: fmt.Sprintf("%.0f/%.0f", s.Systolic, s.Diastolic),
			Fastest: fastestText(s.Fastest, p),
		}
		for _, e := range s.Errors {
			for i, r := range pulseRates() {
				if e.Rate == r {
					row.Errors[i] = errorText(e.Systolic) + "; " + errorText(e.Diastolic)
				}
			}
		}
		if s.Fastest.Note != "" {
			out.Notes = append(out.Notes, capital(s.Name)+": "+s.Fastest.Note+".")
		}
		out.Rows = append(out.Rows, row)
	}
	out.Notes = append(out.Notes,
		"Errors of systolic; diastolic pressure in mmHg that this line alone would put on the shape, with the half-width of the 95 % interval; the mean passes unchanged. Fastest rate: up to which, from "+
			fmt.Sprintf("%.0f/min on, both stay within %s. Shapes keep their proportions at every rate.", p.SlowestRate, toleranceText(p)))
	for _, r := range p.Rules {
		text := capital(r.Text) + " (" + r.Known + ")"
		if r.Rate.Value != nil {
			text += fmt.Sprintf(": by that rule up to %.0f/min", *r.Rate.Value)
		}
		out.Notes = append(out.Notes, text+".")
	}
	return out
}

func toleranceText(p *results.PulseErrors) string {
	absolute, share := withUnit(stated(p.Tolerance), "mmHg"), withUnit(stated(100*p.ToleranceShare), "%")+" of the pressure"
	switch {
	case p.ToleranceShare == 0:
		return absolute
	case p.Tolerance == 0:
		return share
	}
	return "the larger of " + absolute + " and " + share
}

func fastestText(f results.DerivedFigure, p *results.PulseErrors) string {
	switch {
	case f.Value != nil:
		return fmt.Sprintf("%.0f/min (%.0f to %.0f)", *f.Value, f.Interval[0], f.Interval[1])
	case f.Interval != nil && f.Interval[1] >= p.FastestRate:
		return fmt.Sprintf("%.0f/min or more", p.FastestRate)
	}
	return fmt.Sprintf("below %.0f/min", p.SlowestRate)
}

// errorText is a signed error with its half-width, no finer than a hundredth
// of a mmHg.
func errorText(f results.DerivedFigure) string {
	if f.Value == nil || f.Interval == nil {
		return "\u2013"
	}
	half := (f.Interval[1] - f.Interval[0]) / 2
	p := -2
	if half > 0 {
		p = max(p, place(half))
	}
	v := decimal(*f.Value, p)
	if *f.Value > 0 && strings.Trim(v, "0.") != "" {
		v = "+" + v
	}
	u := decimal(half, p)
	if strings.Trim(u, "0.") == "" {
		u = "<\u00a0" + decimal(math.Pow10(p), p)
	}
	return v + "\u00a0±\u00a0" + u
}

// add draws the contours of the pulse into the plane.
func (p *Plane) add(e *results.PulseErrors) {
	for _, c := range e.Plane.Contours {
		p.Contours = append(p.Contours, Contour{c.Shape, c.Frequency, c.Damping})
	}
	p.Caption = fmt.Sprintf("A line to the right of a curve follows that pulse at %.0f/min within %s.", e.Plane.Rate, toleranceText(e))
}

// StepOf is the dynamic part of a document alone, for a chart of data that
// come from no run. Nil when no step was looked at.
func StepOf(res results.Results) *Step {
	var d Document
	d.step(res)
	return d.Step
}
