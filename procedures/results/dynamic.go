package results

import (
	"fmt"
	"math"
	"strings"

	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/step"
)

// Derived is what natural frequency and damping ratio mean for the answer to a
// step and to a sine. Each figure has its 95 % interval from draws of both
// together; the seed gives the same draws again.
type Derived struct {
	Draws              int           `json:"draws"`
	Seed               uint64        `json:"seed"`
	DampedFrequency    DerivedFigure `json:"damped_frequency_hz"`
	Overshoot          DerivedFigure `json:"overshoot_percent"`
	RiseTime           DerivedFigure `json:"rise_time_10_90_s"`
	Settling2          DerivedFigure `json:"settling_time_2_percent_s"`
	Settling5          DerivedFigure `json:"settling_time_5_percent_s"`
	ResonanceFrequency DerivedFigure `json:"resonance_frequency_hz"`
	ResonanceGain      DerivedFigure `json:"resonance_gain"`
	Bandwidth3dB       DerivedFigure `json:"bandwidth_3db_hz"`
	Flat5              DerivedFigure `json:"flat_band_5_percent_hz"`
	Product            DerivedFigure `json:"frequency_damping_product_hz"`
	At                 []AtFrequency `json:"at"`
	Curve              []CurvePoint  `json:"amplitude_curve"`
}

// CurvePoint is the gain of the line at one frequency, for the chart.
type CurvePoint struct {
	Frequency float64    `json:"frequency_hz"`
	Gain      float64    `json:"gain"`
	Interval  [2]float64 `json:"interval95"`
}

// DerivedFigure is one figure; the value is nil, with the reason, where there
// is none at the best values. The note says what the interval cannot: that it
// has two branches, or that there may be no such figure.
type DerivedFigure struct {
	Value    *float64    `json:"value"`
	Standard *float64    `json:"standard_uncertainty"`
	Interval *[2]float64 `json:"interval95"`
	Reason   string      `json:"reason"`
	Note     string      `json:"note"`
}

// AtFrequency is gain and phase of the line at one frequency.
type AtFrequency struct {
	Frequency float64       `json:"frequency_hz"`
	Gain      DerivedFigure `json:"gain"`
	Phase     DerivedFigure `json:"phase_deg"`
}

// Response is the amplitude and phase response worked out from the samples
// without a model, up to 1.5 times the natural frequency, and beside it what
// the fitted answers give through the same sums.
type Response struct {
	Steps  int             `json:"steps"`
	Agrees bool            `json:"agrees"`
	Text   string          `json:"text"`
	Points []ResponsePoint `json:"points"`
}

// ResponsePoint is one frequency of a Response.
type ResponsePoint struct {
	Frequency     float64 `json:"frequency_hz"`
	Gain          float64 `json:"gain"`
	GainStandard  float64 `json:"gain_standard_uncertainty"`
	Phase         float64 `json:"phase_deg"`
	PhaseStandard float64 `json:"phase_standard_uncertainty_deg"`
	FittedGain    float64 `json:"fitted_gain"`
	FittedPhase   float64 `json:"fitted_phase_deg"`
}

// StatedLine is what somebody stated of the pressure line, as stated.
type StatedLine struct {
	Place       string `json:"place"`
	Length      string `json:"length"`
	Bore        string `json:"bore"`
	Fluid       string `json:"fluid"`
	FlushDevice string `json:"flush_device"`
	Filters     string `json:"readout_filters"` // in the model; "none" when stated so, "" when not stated
}

// Draws of natural frequency and damping. The seed is fixed: who computes the
// results again must find the same.
const (
	draws    = 4096
	drawSeed = 1
)

// statedAt are the frequencies that gain and phase are given for: those asked
// for, else a pulse of 60/min and its fifth, tenth and twentieth harmonic.
func (g *gathered) statedAt() ([]float64, error) {
	if g.pulse == nil || len(g.pulse.At) == 0 {
		return []float64{1, 5, 10, 20}, nil
	}
	var out []float64
	for _, text := range g.pulse.At {
		f, err := parsed(text, quantity.DimFrequency)
		if err != nil || !(f > 0) {
			return nil, fmt.Errorf("%q is no frequency above zero", text)
		}
		out = append(out, f)
	}
	return out, nil
}

// derive fills in everything that follows from the determined figures.
func (g *gathered) derive(s *scale, d *dynamics, out *Step) error {
	joint := d.combined.Joint()
	joint.Tolerances = []step.Tolerance{{Log: s.periodTolerance}, d.edge, d.memory}
	drawn, err := joint.Draw(draws, drawSeed)
	if err != nil {
		return err
	}
	at, err := g.statedAt()
	if err != nil {
		return err
	}
	out.Derived = derivedOf(joint.Derive(drawn, at))
	out.Derived.Curve = amplitudeCurve(joint, drawn)
	out.Response = d.crossCheck()
	if !out.Response.Agrees {
		out.Reservations = addReason(out.Reservations, Reason{"response_disagrees", out.Response.Text})
	}
	if out.Pulse, err = g.pulseErrors(joint, drawn); err != nil {
		return err
	}
	out.Opinions, err = g.opinions(s, d, joint, drawn)
	return err
}

func derivedOf(f step.Derived) *Derived {
	out := &Derived{
		Draws: draws, Seed: drawSeed,
		DampedFrequency: derivedFigure(f.DampedFrequency, 1), Overshoot: derivedFigure(f.Overshoot, 100), RiseTime: derivedFigure(f.RiseTime, 1),
		Settling2: derivedFigure(f.Settling2, 1), Settling5: derivedFigure(f.Settling5, 1),
		ResonanceFrequency: derivedFigure(f.ResonanceFrequency, 1), ResonanceGain: derivedFigure(f.ResonanceGain, 1),
		Bandwidth3dB: derivedFigure(f.Bandwidth3dB, 1), Flat5: derivedFigure(f.Flat5, 1), Product: derivedFigure(f.Product, 1),
		At: []AtFrequency{},
	}
	for _, a := range f.At {
		out.At = append(out.At, AtFrequency{a.Frequency, derivedFigure(a.Gain, 1), derivedFigure(a.Phase, 1)})
	}
	return out
}

func derivedFigure(f step.Figure, scale float64) DerivedFigure {
	out := DerivedFigure{Reason: f.Reason, Note: f.Note}
	if f.Exists {
		v, u := f.Value*scale, f.StandardUncertainty*scale
		out.Value, out.Standard, out.Interval = &v, &u, &[2]float64{f.Low * scale, f.High * scale}
	}
	return out
}

// amplitudeCurve goes from a twentieth of fn to twice fn in equal ratios.
func amplitudeCurve(joint step.Joint, drawn step.Draws) []CurvePoint {
	var out []CurvePoint
	const points = 81
	gains := make([]float64, errorDraws)
	for i := range points {
		f := joint.Frequency / 20 * math.Pow(40, float64(i)/(points-1))
		for k := range gains {
			gains[k] = step.Amplitude(drawn.Frequency[k], drawn.Damping[k], f)
		}
		g := joint.Figure(step.Amplitude(joint.Frequency, joint.Damping, f), gains)
		out = append(out, CurvePoint{f, g.Value, [2]float64{g.Low, g.High}})
	}
	return out
}

// crossCheck is the response without a model, at eighths of fn up to 1.5 fn
// and no higher than 0.4 of the sample rate.
func (d *dynamics) crossCheck() *Response {
	fn := d.combined.Frequency.Value
	var frequencies []float64
	for k := 1; k <= 12; k++ {
		if f := fn * float64(k) / 8; f <= 0.4*d.all[0].trace.Rate {
			frequencies = append(frequencies, f)
		}
	}
	var spectra [][]step.Transfer
	for _, c := range d.all {
		for _, s := range c.steps {
			if x := step.Spectrum(c.trace, s, c.settings, frequencies); x != nil {
				spectra = append(spectra, x)
			}
		}
	}
	check := step.Check(spectra)
	out := &Response{Steps: check.Steps, Agrees: check.Agrees, Points: []ResponsePoint{}}
	largest := 0.0
	for _, p := range check.Points {
		out.Points = append(out.Points, ResponsePoint{p.Frequency, p.Gain, p.GainScatter, p.Phase, p.PhaseError, p.ModelGain, p.ModelPhase})
		largest = math.Max(largest, p.Difference)
	}
	w := check.Worst
	switch {
	case check.Steps == 0 || len(check.Points) == 0:
		out.Agrees = false
		out.Text = "no step could be looked at without the model"
	case check.Agrees:
		out.Text = fmt.Sprintf("without the model the response is the same: up to %.3g Hz it differs by at most %.1f %% of what goes in, which noise explains or which is under 1 %%",
			check.Points[len(check.Points)-1].Frequency, 100*largest)
	default:
		out.Text = fmt.Sprintf("without the model the response is another: at %.3g Hz a gain of %.3f (phase %.0f degrees), the fitted line gives %.3f (%.0f degrees); it differs by %.1f %% of what goes in, %.1f times what noise explains. Natural frequency and damping are not all of this line",
			w.Frequency, w.Gain, w.Phase, w.ModelGain, w.ModelPhase, 100*w.Difference, w.Significance)
	}
	return out
}

// stated is what the procedure's step stage says of the line, or whoever
// handed in data without a procedure.
func (g *gathered) stated() record.Line {
	if g.definition != nil {
		for _, stage := range g.definition.Stages {
			if s, ok := stage.(procedures.Step); ok {
				return record.Line{
					Place: s.Place, Length: s.LineLength, Bore: s.Bore, Fluid: s.Fluid, FlushDevice: s.FlushDevice,
					FluidDensity: s.FluidDensity, FluidViscosity: s.FluidViscosity,
					DesignedFrequency: s.DesignedFrequency, DesignedDamping: s.DesignedDamping,
				}
			}
		}
	}
	if g.line != nil {
		return *g.line
	}
	return record.Line{}
}

func (g *gathered) statedLine() *StatedLine {
	l := g.stated()
	out := StatedLine{Place: l.Place, Length: l.Length, Bore: l.Bore, Fluid: l.Fluid, FlushDevice: l.FlushDevice}
	if r := g.readout; r != nil {
		if out.Filters = strings.Join(r.Filters, ", "); out.Filters == "" && r.FiltersStated {
			out.Filters = "none"
		}
	}
	if out == (StatedLine{}) {
		return nil
	}
	return &out
}
