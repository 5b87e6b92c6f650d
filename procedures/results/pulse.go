package results

import (
	"fmt"
	"math"
	"slices"

	"kymobench/bench/quantity"
	"kymobench/procedures/pulse"
	"kymobench/procedures/record"
	"kymobench/procedures/step"
)

// PulseErrors is what a line of these figures does to pulse waves. Pressures
// are in mmHg, rates in beats a minute.
type PulseErrors struct {
	Tolerance      float64      `json:"tolerance_mmHg"`
	ToleranceShare float64      `json:"tolerance_share"` // of the pressure; the larger of the two counts
	SlowestRate    float64      `json:"slowest_rate_per_min"`
	FastestRate    float64      `json:"fastest_rate_per_min"`
	Shapes         []PulseShape `json:"shapes"`
	Plane          PulsePlane   `json:"plane"`
	Rules          []PulseRule  `json:"rules"`
}

// PulseShape is one pulse and its errors.
type PulseShape struct {
	Name      string        `json:"name"`
	From      string        `json:"from"` // published, stated by the program, or the user's own
	Systolic  float64       `json:"systolic_mmHg"`
	Diastolic float64       `json:"diastolic_mmHg"`
	Mean      float64       `json:"mean_mmHg"`
	Fastest   DerivedFigure `json:"fastest_rate_within_tolerance_per_min"`
	Errors    []RateErrors  `json:"errors"`
}

// RateErrors are what the UUT would show less what there is, at one rate. The
// mean passes unchanged at any rate: the gain at rest is 1.
type RateErrors struct {
	Rate      float64       `json:"rate_per_min"`
	Systolic  DerivedFigure `json:"systolic_error_mmHg"`
	Diastolic DerivedFigure `json:"diastolic_error_mmHg"`
	Mean      float64       `json:"mean_error_mmHg"`
}

// PulsePlane is where in the plane of natural frequency and damping ratio a
// line follows a shape at a rate: from these frequencies on.
type PulsePlane struct {
	Rate     float64        `json:"rate_per_min"`
	Contours []PulseContour `json:"contours"`
}

// PulseContour holds one shape's curve, point by point.
type PulseContour struct {
	Shape     string    `json:"shape"`
	Damping   []float64 `json:"damping_ratio"`
	Frequency []float64 `json:"natural_frequency_hz"`
}

// PulseRule is a rule of the trade and what it says here.
type PulseRule struct {
	Name  string        `json:"name"`
	Text  string        `json:"text"`
	Known string        `json:"known"`
	Rate  DerivedFigure `json:"rate_per_min"`
}

const (
	usualTolerance = 2.0   // mmHg
	usualShare     = 0.02  // of the pressure
	usualRate      = 120.0 // beats/min, of the plane

	// Intervals of errors come from the first of the draws, which are spread as
	// evenly as all of them.
	errorDraws = 192

	harmonicsOfRule = 8
	optimumDamping  = 0.64
)

// From is where the shapes come from.
const (
	fromPublished = "published"
	fromProgram   = "stated by this program"
	fromUser      = "handed in"
)

// asked reads what was asked for in place of the usual.
func (g *gathered) askedPulse() (shapes []PulseShape, waves []pulse.Wave, plane []int, allowed pulse.Tolerance, rate float64, err error) {
	p := record.Pulse{}
	if g.pulse != nil {
		p = *g.pulse
	}
	allowed, rate = pulse.Tolerance{Absolute: usualTolerance, Share: usualShare}, usualRate
	r := reader{}
	if p.Tolerance != "" {
		allowed.Absolute = quantity.Pressure(r.si(p.Tolerance, quantity.DimPressure)).MmHg()
		allowed.Share = 0 // a tolerance of one's own stands alone
	}
	if p.ToleranceShare != "" {
		allowed.Share = r.si(p.ToleranceShare, quantity.DimNone)
	}
	if p.Rate != "" {
		rate = 60 * r.si(p.Rate, quantity.DimFrequency)
	}
	if r.err != nil {
		return nil, nil, nil, allowed, 0, fmt.Errorf("pulse: %w", r.err)
	}
	if !(rate > 0) || !(allowed.Absolute >= 0) || !(allowed.Share >= 0) || allowed.Absolute+allowed.Share == 0 {
		return nil, nil, nil, allowed, 0, fmt.Errorf("pulse: a rate of %g/min and a tolerance of %g mmHg or %g of the pressure", rate, allowed.Absolute, allowed.Share)
	}
	waves = pulse.Shapes()
	from := make([]string, len(waves))
	for i, w := range waves {
		if from[i] = fromProgram; w.Name == pulse.ThreeHarmonics {
			from[i] = fromPublished
		}
		if p.Shape == w.Name || p.Shape == "" && w.Name != pulse.ThreeHarmonics {
			plane = append(plane, i)
		}
	}
	if len(p.Samples) > 0 {
		unit, ok := quantity.UnitNamed(p.Unit)
		if !ok || unit.Dimension != quantity.DimPressure {
			return nil, nil, nil, allowed, 0, fmt.Errorf("pulse: %q is no unit of pressure", p.Unit)
		}
		samples := make([]float64, len(p.Samples))
		for i, x := range p.Samples {
			samples[i] = quantity.Pressure(unit.ToSI(x)).MmHg()
		}
		w, err := pulse.Samples(p.Shape, samples)
		if err != nil {
			return nil, nil, nil, allowed, 0, err
		}
		waves, from, plane = append(waves, w), append(from, fromUser), []int{len(waves)}
	}
	if len(plane) == 0 {
		var names []string
		for _, w := range waves {
			names = append(names, w.Name)
		}
		return nil, nil, nil, allowed, 0, fmt.Errorf("pulse: no shape %q; there are %q", p.Shape, names)
	}
	for i, w := range waves {
		shapes = append(shapes, PulseShape{Name: w.Name, From: from[i], Systolic: w.Systolic, Diastolic: w.Diastolic, Mean: w.Mean, Errors: []RateErrors{}})
	}
	return shapes, waves, plane, allowed, rate, nil
}

// pulseErrors works out what the line does to every shape, with intervals.
func (g *gathered) pulseErrors(joint step.Joint, drawn step.Draws) (*PulseErrors, error) {
	shapes, waves, plane, allowed, rate, err := g.askedPulse()
	if err != nil {
		return nil, err
	}
	out := &PulseErrors{
		Tolerance: allowed.Absolute, ToleranceShare: allowed.Share, SlowestRate: pulse.SlowestRate, FastestRate: pulse.FastestRate,
		Shapes: shapes, Plane: PulsePlane{Rate: rate, Contours: []PulseContour{}},
	}
	few := step.Draws{Frequency: drawn.Frequency[:errorDraws], Damping: drawn.Damping[:errorDraws]}
	for i := range shapes {
		reach, err := pulse.NewReach(waves[i], allowed)
		if err != nil {
			return nil, err
		}
		shape := &out.Shapes[i]
		shape.Fastest = fastest(joint, reach.Rate(joint.Frequency, joint.Damping), reach.Rates(drawn.Frequency, drawn.Damping))
		for at := float64(pulse.SlowestRate); at <= pulse.FastestRate; at += 20 {
			systolic, diastolic := make([]float64, errorDraws), make([]float64, errorDraws)
			for k, fn := range few.Frequency {
				e := reach.Errors(fn, few.Damping[k], at)
				systolic[k], diastolic[k] = e.Systolic, e.Diastolic
			}
			best := reach.Errors(joint.Frequency, joint.Damping, at)
			shape.Errors = append(shape.Errors, RateErrors{
				Rate: at, Mean: best.Mean,
				Systolic:  derivedFigure(joint.Figure(best.Systolic, systolic), 1),
				Diastolic: derivedFigure(joint.Figure(best.Diastolic, diastolic), 1),
			})
		}
		if slices.Contains(plane, i) {
			damping := contourDamping()
			out.Plane.Contours = append(out.Plane.Contours, PulseContour{shape.Name, damping, reach.Contour(rate, damping)})
		}
	}
	rule := make([]float64, len(drawn.Frequency))
	for i, fn := range drawn.Frequency {
		rule[i] = 60 * fn / harmonicsOfRule
	}
	out.Rules = []PulseRule{
		{
			Name: "eight harmonics", Known: "common practice, no source",
			Text: fmt.Sprintf("a natural frequency of %d times the heart rate follows the pulse (24 Hz at 180/min)", harmonicsOfRule),
			Rate: derivedFigure(joint.Figure(60*joint.Frequency/harmonicsOfRule, rule), 1),
		},
		{
			Name: "optimum damping", Known: "common practice, no source", Rate: DerivedFigure{Reason: "it says nothing of a rate"},
			Text: fmt.Sprintf("a damping ratio of %.2f is best; here it is %.3g", optimumDamping, joint.Damping),
		},
	}
	return out, nil
}

// contourDamping are the damping ratios of a contour, closer where curves turn.
func contourDamping() []float64 {
	var z []float64
	for i := range 48 {
		x := 0.04 * math.Pow(50, float64(i)/47) // 0.04 to 2
		z = append(z, math.Round(x*1e4)/1e4)
	}
	return z
}

// fastest puts a rate into a figure: beyond the range of rates looked at it is
// the range's end, and the note says so.
func fastest(joint step.Joint, best float64, all []float64) DerivedFigure {
	below, above := 0, 0
	for i, r := range all {
		switch {
		case r == 0:
			all[i] = pulse.SlowestRate
			below++
		case math.IsInf(r, 1):
			all[i] = pulse.FastestRate
			above++
		}
	}
	reason := ""
	switch {
	case best == 0:
		best, reason = pulse.SlowestRate, fmt.Sprintf("the errors are beyond the tolerance at %d/min already, the slowest looked at", pulse.SlowestRate)
	case math.IsInf(best, 1):
		best, reason = pulse.FastestRate, fmt.Sprintf("the errors are within the tolerance up to %d/min, the fastest looked at", pulse.FastestRate)
	}
	out := derivedFigure(joint.Figure(best, all), 1)
	tell := func(n int, side string) {
		if share := 100 * float64(n) / float64(len(all)); share >= 0.5 && share < 99.5 {
			if out.Note != "" {
				out.Note += "; "
			}
			out.Note += fmt.Sprintf("%s in %.0f %% of the draws", side, share)
		}
	}
	tell(below, fmt.Sprintf("below %d/min", pulse.SlowestRate))
	tell(above, fmt.Sprintf("%d/min or more", pulse.FastestRate))
	if out.Reason = reason; reason != "" {
		out.Value, out.Standard = nil, nil
	}
	return out
}
