package reports

import (
	"math"
	"slices"
	"strconv"
	"strings"

	"kymobench/procedures/results"
)

// reasonText is a reason why a step is undetermined, in words.
func reasonText(code string) string {
	switch code {
	case "no_step":
		return "no step was found"
	case "clipped":
		return "the trace is clipped"
	case "sampling_too_slow":
		return "sampled too slowly for this frequency"
	case "edge_too_slow":
		return "the step's own edge is too slow for this frequency"
	case "uncertainty_too_large":
		return "the uncertainty is too large"
	case "bounced":
		return "the pressure turned back for a while, as behind a valve that bounces"
	case "overlapping":
		return "another step follows before this one is over"
	case "truncated":
		return "too little of the trace lies before or after it"
	case "lag":
		return "a slow edge or a filter that was not stated lies before the samples"
	case "second_mode":
		return "a second mode swings beside the line"
	}
	return strings.ReplaceAll(code, "_", " ")
}

func reasonTexts(codes []string) string {
	words := make([]string, len(codes))
	for i, c := range codes {
		words[i] = reasonText(c)
	}
	return strings.Join(words, ", ")
}

// estimateText prints an estimate and the half-width of its 95 % interval.
func estimateText(e *results.Estimate, unit string) string {
	if e == nil {
		return "\u2013"
	}
	half := math.Max(e.Interval[1]-e.Value, e.Value-e.Interval[0])
	v, u := figure(e.Value, &half, 0)
	return plusMinus(v, u, unit)
}

func (d *Document) step(res results.Results) {
	s := res.Step
	if s == nil {
		return
	}
	unit := unitText(s.Unit)
	out := &Step{Unit: unit}
	for i, f := range s.Steps {
		row := StepRow{Name: strconv.Itoa(i + 1), Height: "\u2013", Noise: "\u2013", Frequency: estimateText(f.Frequency, "Hz"), Damping: estimateText(f.Damping, "")}
		if f.Height != nil {
			row.Height = withUnit(decimal(*f.Height, -1), unit)
		}
		if f.Noise != nil {
			row.Noise = withUnit(significant(*f.Noise, 2), unit)
		}
		if !f.Determined {
			row.Frequency, row.Damping = "\u2013", "\u2013"
			row.Note = "not determined: " + orUnknown(reasonTexts(f.Reasons))
		}
		out.Table = append(out.Table, row)
	}
	c := StepRow{Name: "all", Frequency: estimateText(s.Combined.Frequency, "Hz"), Damping: estimateText(s.Combined.Damping, ""), Combined: true}
	if !s.Combined.Determined {
		c.Frequency, c.Damping = "\u2013", "\u2013"
		c.Note = "not determined: " + orUnknown(reasonTexts(s.Combined.Reasons))
	}
	out.Table = append(out.Table, c)
	for _, t := range res.Traces {
		out.Traces = append(out.Traces, trace(t, s))
	}
	var r rows
	r.add("Sample rate", withUnit(stated(s.SampleRate), "Hz")+", as the bench file states it")
	r.add("Model", "second-order line, one natural frequency and one damping ratio, fitted to every step on its own")
	r.add("± in the table", "half-width of the 95 % interval; of single steps from the fit alone. Height and noise (the scatter before the step) describe the trace and carry no budget")
	if l := s.Line; l != nil {
		r.add("Step enters", l.Place)
		r.add("Line", strings.Join(stringsOf(worded(quantityText(l.Length), " long"), worded(quantityText(l.Bore), " bore"), l.Fluid), ", "))
		r.add("Flush device", l.FlushDevice)
		filters := strings.ReplaceAll(l.Filters, "_", "-")
		switch {
		case filters == "":
			filters = "not stated; what it delays or smooths would be taken for the line's"
		case filters != "none":
			filters += ", in the model"
		}
		r.add("Readout's filters", filters)
	}
	out.Facts = r
	out.Plane = plane(s, res.Limits)
	out.follow(s)
	d.Step = out
}

// worded adds a word to a text that is there.
func worded(text, word string) string {
	if text == "" {
		return ""
	}
	return text + word
}

// stringsOf leaves out what is empty.
func stringsOf(all ...string) []string {
	return slices.DeleteFunc(all, func(s string) bool { return s == "" })
}

// trace chooses how much of a step is worth drawing: until the ringing has
// fallen to 0.5 % of the step, with at least four periods' worth of a well
// damped line; everything where nothing was determined.
func trace(t results.StepTrace, s *results.Step) Trace {
	out := Trace{Number: t.Number, Start: t.Start, Period: t.Period, Measured: t.Measured, Fitted: t.Fitted}
	end := t.Start + t.Period*float64(len(t.Measured)-1)
	out.Until = end
	if i := t.Number - 1; i >= 0 && i < len(s.Steps) {
		f := s.Steps[i]
		if !f.Determined {
			out.Note = reasonTexts(f.Reasons)
		}
		if f.Frequency != nil && f.Damping != nil && f.Frequency.Value > 0 && f.Damping.Value > 0 {
			decay := math.Min(f.Damping.Value, 1) * 2 * math.Pi * f.Frequency.Value
			out.Until = math.Min(end, math.Max(math.Log(200)/decay, 2/f.Frequency.Value))
		}
	}
	return out
}

// plane puts the determined steps among natural frequency and damping.
func plane(s *results.Step, limits []results.Limit) *Plane {
	if !s.Combined.Determined || s.Combined.Frequency == nil || s.Combined.Damping == nil {
		return nil
	}
	point := func(f, z *results.Estimate) PlanePoint {
		return PlanePoint{Frequency: f.Value, Damping: z.Value, FrequencyInterval: f.Interval, DampingInterval: z.Interval}
	}
	c := point(s.Combined.Frequency, s.Combined.Damping)
	p := &Plane{Combined: &c}
	for _, f := range s.Steps {
		if f.Determined && f.Frequency != nil && f.Damping != nil {
			p.Singles = append(p.Singles, point(f.Frequency, f.Damping))
		}
	}
	for _, l := range limits {
		switch l.Name {
		case "natural_frequency":
			p.FrequencyLow = l.Bounds.Low
		case "damping_ratio":
			p.DampingLow, p.DampingHigh = l.Bounds.Low, l.Bounds.High
		}
	}
	return p
}
