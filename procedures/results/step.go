package results

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
	"kymobench/procedures/record"
	"kymobench/procedures/step"
)

// minimumStep is the least departure taken for a step (facts of practice here,
// common practice, no source).
const minimumStep = 8 // mmHg

// captured is a capture turned into a trace, with what was found in it.
type captured struct {
	record.Capture
	trace    step.Trace
	settings step.Settings
	steps    []step.Step
}

// dynamics is what all captures gave, before it is put into words and budgets.
type dynamics struct {
	all      []captured
	combined step.Combined
	edge     step.Tolerance // what the tolerance of the valve's edge can do
	memory   step.Tolerance // what the UUT's hysteresis can do
	wider    float64        // factor of the rule the steps stopped by
}

// stepResults analyses every capture; the static figures say what the UUT's
// memory may do to them. The second value is nil when there is none.
func (g *gathered) stepResults(s *scale, st *staticFigures) (*dynamics, *Step, error) {
	if len(g.captures) == 0 {
		return &dynamics{}, nil, nil
	}
	out := &Step{Unit: s.unit.Name, Steps: []StepFigure{}, Reservations: []Reason{}}
	d := &dynamics{}
	var steps []step.Step
	for _, c := range g.captures {
		one, reservations, err := g.analyse(s, c)
		if err != nil {
			return nil, nil, fmt.Errorf("capture %d: %w", c.Number, err)
		}
		out.SampleRate = one.trace.Rate
		for _, st := range one.steps {
			out.Steps = append(out.Steps, figureOf(st))
		}
		for _, r := range reservations {
			out.Reservations = addReason(out.Reservations, Reason{r.Code, r.Text})
		}
		steps = append(steps, one.steps...)
		d.all = append(d.all, one)
	}
	d.combined = step.CombineStopped(steps, g.stopping())
	out.Combined = Combined{Determined: d.combined.Determined, Reasons: notNil(d.combined.Reasons)}
	out.Line = g.statedLine()
	if !d.combined.Determined {
		return d, out, nil
	}
	out.Combined.Frequency, out.Combined.Damping = estimateOf(d.combined.Frequency), estimateOf(d.combined.Damping)
	d.wider = g.stopping().Factor(d.combined.DegreesOfFreedom)
	d.memory = st.memoryShift(s, steps)
	if math.Abs(d.memory.Log) > 0.01 {
		out.Reservations = addReason(out.Reservations, Reason{"hysteresis", fmt.Sprintf("the UUT's hysteresis, %.2g %% of the step, may move natural frequency and damping by %.2g %%", 100*d.memory.Log/memoryShare, 100*d.memory.Log)})
	}
	d.edge = edgeShift(s, d.all, d.combined)
	return d, out, g.derive(s, d, out)
}

// analyse reads the samples of a capture and fits the steps in them.
func (g *gathered) analyse(s *scale, c record.Capture) (captured, []step.Reservation, error) {
	one := captured{Capture: c}
	if len(c.Blocks) == 0 {
		return one, nil, fmt.Errorf("it names no block of samples")
	}
	first := g.blocks[c.Blocks[0]]
	period, err := quantity.ParseSpan(first.Period)
	if err != nil {
		return one, nil, fmt.Errorf("sample period: %w", err)
	}
	if !(period > 0) {
		return one, nil, fmt.Errorf("the sample period %q is not above zero", first.Period)
	}
	one.trace = step.Trace{Rate: 1 / float64(period), Start: first.Start.Seconds()}
	if one.trace.Pressure, err = g.samples(s, c.Blocks); err != nil {
		return one, nil, err
	}
	if len(c.Applied) > 0 {
		if one.trace.Applied, err = g.samples(s, c.Applied); err != nil {
			return one, nil, err
		}
	}
	one.settings = step.Settings{MinimumStep: minimumStep * s.perMmHg(), AppliedUnfiltered: c.AppliedUnfiltered}
	if one.settings.Readout, one.settings.ReadoutStated, err = g.filters(); err != nil {
		return one, nil, err
	}
	edge := c.Edge
	if edge == "" {
		edge = s.edge
	}
	if edge != "" {
		span, err := quantity.ParseSpan(edge)
		if err != nil {
			return one, nil, fmt.Errorf("edge time: %w", err)
		}
		one.settings.EdgeStated, one.settings.EdgeTime = true, float64(span)
		if c.Edge == "" {
			one.settings.EdgeTolerance = s.edgeTolerance
		}
	}
	var reservations []step.Reservation
	one.steps, _, reservations, err = step.Analyse(one.trace, one.settings)
	return one, reservations, err
}

// filters are what the readout is stated to do between its input and its
// numbers; the second value says that they are known to be all.
func (g *gathered) filters() ([]step.Filter, bool, error) {
	if g.readout == nil {
		return nil, false, nil
	}
	var out []step.Filter
	for _, text := range g.readout.Filters {
		f, err := quantity.ParseFilter(text)
		if err != nil {
			return nil, false, fmt.Errorf("readout: %w", err)
		}
		kind := map[quantity.FilterKind]step.FilterKind{quantity.LowPass: step.LowPass, quantity.Average: step.Average, quantity.Lag: step.Delay}[f.Kind]
		out = append(out, step.Filter{Kind: kind, Corner: float64(f.Corner), Length: float64(f.Length), Order: f.Order})
	}
	return out, g.readout.FiltersStated, nil
}

func figureOf(st step.Step) StepFigure {
	f := StepFigure{At: st.At, Determined: st.Determined, Reasons: notNil(st.Reasons), Height: &st.Height, Noise: &st.Noise}
	if st.Determined {
		f.Frequency, f.Damping = estimateOf(st.Frequency), estimateOf(st.Damping)
	}
	return f
}

func estimateOf(e step.Estimate) *Estimate {
	return &Estimate{Value: e.Value, Standard: e.StandardUncertainty, Interval: [2]float64{e.Low, e.High}}
}

func notNil(s []string) []string {
	if s == nil {
		return []string{}
	}
	return s
}

// addReason keeps one reservation for each code.
func addReason(all []Reason, r Reason) []Reason {
	for _, have := range all {
		if have.Code == r.Code {
			return all
		}
	}
	return append(all, r)
}

// edgeShift is what the valve's edge may do to ln fn and zeta when it is as
// much slower or faster as its tolerance allows: half-widths, with their signs.
// An edge time without a tolerance is a bound and in the intervals already.
func edgeShift(s *scale, all []captured, combined step.Combined) step.Tolerance {
	if s.edgeTolerance == 0 || !combined.Determined {
		return step.Tolerance{}
	}
	for _, c := range all {
		if !c.settings.EdgeStated || c.Edge != "" {
			return step.Tolerance{}
		}
	}
	return combined.Edge
}

// memoryShare is how far a hysteresis moves ln fn, and zeta, in parts of itself
// over the step. A line that swings about its end meets a UUT that remembers:
// memory spread over the whole range (plays of 5 to 75 mmHg, exercised to 300)
// was found to move a release of 100 mmHg by 0.02 to 0.18 of it in ln fn and
// 0.06 to 0.19 in zeta, at zeta 0.1 to 0.9, either way. A single narrow play,
// which sticks, does up to five times as much and leaves a misfit. Simulation,
// no source.
const memoryShare = 0.2

// memoryShift is what the UUT's hysteresis can do to ln fn and to zeta:
// half-widths.
func (st *staticFigures) memoryShift(s *scale, steps []step.Step) step.Tolerance {
	m, ok := st.hysteresis(s)
	height, n := 0.0, 0.0
	for _, one := range steps {
		if one.Determined {
			height, n = height+math.Abs(one.Height), n+1
		}
	}
	if !ok || !(height > 0) {
		return step.Tolerance{}
	}
	share := memoryShare * math.Abs(m.value) / (height / n)
	return step.Tolerance{Log: share, Damping: share}
}

// budgets are the uncertainties of natural frequency (Hz) and damping ratio
// over all steps, once they are determined.
func (d *dynamics) budgets(s *scale) (frequency, damping *budget) {
	frequency, damping = &budget{}, &budget{}
	combined, fn := d.combined, d.combined.Frequency.Value
	share, zeta := math.Abs(math.Expm1(d.edge.Log)), math.Abs(d.edge.Damping)
	name := fmt.Sprintf("the fits and the spread of %d steps", combined.Steps)
	if d.wider > 1 {
		name += fmt.Sprintf(", %.2f times wider for looking after each", d.wider)
	}
	frequency.add(name, fromRun, studentT, "Hz", combined.Frequency.StandardUncertainty, 1, combined.DegreesOfFreedom)
	frequency.add("sample period, tolerance", fromBench, rectangular, "1", s.periodTolerance/math.Sqrt(3), fn, 0)
	frequency.add("valve edge, tolerance", fromBench, rectangular, "1", share/math.Sqrt(3), fn, 0)
	const memory = "hysteresis of the static characteristic"
	frequency.add(memory, fromRun, rectangular, "1", d.memory.Log/math.Sqrt(3), fn, 0)
	damping.add(memory, fromRun, rectangular, "1", d.memory.Damping/math.Sqrt(3), 1, 0)
	damping.add(name, fromRun, studentT, "1", combined.Damping.StandardUncertainty, 1, combined.DegreesOfFreedom)
	damping.add("valve edge, tolerance", fromBench, rectangular, "1", zeta/math.Sqrt(3), 1, 0)
	return frequency, damping
}

// traces cuts each capture down to what a chart shows: from a little before
// the edge until the answer has settled.
func traces(all []captured) []StepTrace {
	out := []StepTrace{}
	for _, c := range all {
		for _, st := range c.steps {
			rate := c.trace.Rate
			edge := int(math.Round((st.At - c.trace.Start) * rate))
			shown := 0.4
			if st.Determined {
				shown = math.Max(0.1, math.Min(1, 5/(st.Frequency.Value*math.Min(1, st.Damping.Value+0.15))))
			}
			from := max(0, edge-int(0.2*shown*rate))
			to := min(len(c.trace.Pressure), edge+int(shown*rate))
			if to-from > 2000 || to <= from {
				to = min(len(c.trace.Pressure), from+2000)
			}
			t := StepTrace{Number: c.Number, Start: rounded(float64(from)/rate + c.trace.Start - st.At), Period: 1 / rate, Measured: []float64{}, Fitted: []float64{}}
			for i := from; i < to; i++ {
				t.Measured = append(t.Measured, rounded(c.trace.Pressure[i]))
			}
			if st.Determined && st.From <= from && st.To >= to {
				for i := from; i < to; i++ {
					t.Fitted = append(t.Fitted, rounded(st.Fitted[i-st.From]))
				}
			}
			out = append(out, t)
		}
	}
	return out
}

// rounded keeps four decimals, which is more than a chart shows.
func rounded(x float64) float64 { return math.Round(x*1e4) / 1e4 }
