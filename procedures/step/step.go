// Package step estimates natural frequency and damping ratio of a pressure
// line from its answer to steps of pressure, with uncertainties, or says why
// it cannot.
//
// It is numerics only: plain slices in, figures out. It reads no files, knows
// no units of pressure (the threshold comes in the trace's own unit) and
// compares nothing with a limit.
//
// Order of use: Analyse finds the steps of one trace, fits each and combines
// the determined ones; Combine does the last part for steps of several
// traces. Response, Ramp, Amplitude and the figures of figures.go are the
// model itself, for charts and checks.
//
// Method: the exact second-order answer to an ideal step, to a ramp or to a
// measured applied pressure, in one parametrisation for every damping; least
// squares by variable projection with baseline, drift and height as linear
// columns; covariance that allows for noise correlated from sample to sample.
package step

import (
	"errors"
	"fmt"
	"math"
)

// Trace is a train of samples at a constant rate.
type Trace struct {
	Rate     float64   // samples per second
	Start    float64   // time of the first sample, s
	Pressure []float64 // what the unit under test read, any unit
	Applied  []float64 // pressure measured where the step enters, on the same clock, any unit; nil if none
}

// Settings say what is known of the steps. The zero value is safe: the edge
// is not known and the onset threshold follows the noise.
type Settings struct {
	EdgeStated bool    // EdgeTime is known; without it, and without Trace.Applied, the width is fitted
	EdgeTime   float64 // 10 to 90 % time of the edge, s; 0 an ideal step. Held as a ramp of full width EdgeTime/0.8
	// EdgeTolerance is how far EdgeTime may be wrong, a share of it: the edge is
	// a ramp, and the caller carries Step.Edge. 0: EdgeTime is a bound, the edge
	// any usual one up to it, and what it can do widens the intervals.
	EdgeTolerance float64
	// Readout is what lies between the line and the samples, in any order. It
	// is in the model, so that the figures are the line's own.
	Readout []Filter
	// ReadoutStated: Readout is known to be all, also when it is empty. Without
	// it and without Readout, a lag that the noise could hide and that would
	// move fn by over 20 % is a reservation.
	ReadoutStated bool
	// AppliedUnfiltered: Readout does not act on Trace.Applied. Without it the
	// two pass the same readout, which then takes no part in the fit.
	AppliedUnfiltered bool
	// MinimumStep is the least departure taken for a step, in the unit of
	// the trace (common practice here: 8 mmHg). 0: a twentieth of the range
	// of the trace. Six times the noise is required in any case.
	MinimumStep float64
}

// Estimate is a value with its standard uncertainty and 95 % interval.
type Estimate struct {
	Value, StandardUncertainty, Low, High float64
}

// Codes of reasons why a step is undetermined.
const (
	NoStep              = "no_step"
	Clipped             = "clipped"
	SamplingTooSlow     = "sampling_too_slow"
	EdgeTooSlow         = "edge_too_slow"
	UncertaintyTooLarge = "uncertainty_too_large"
	Bounced             = "bounced"     // the pressure turned back for a while
	Overlapping         = "overlapping" // another step follows before this one is over
	Truncated           = "truncated"   // too little of the trace before or after the step
	Lag                 = "lag"         // a lag that nobody stated
)

// Codes of reservations, besides Bounced, Overlapping and Lag where they move
// the figures little.
const (
	Misfit        = "misfit"
	ColouredNoise = "coloured_noise"
	Quantised     = "quantised"
	Drift         = "drift"
	EdgeNotStated = "edge_not_stated"
	SamplingSlow  = "sampling_slow"
	SecondMode    = "second_mode"
	// ReadoutNotStated: a filter nobody stated could move fn by over 20 %
	// without a trace.
	ReadoutNotStated = "readout_not_stated"
	ResidualWave     = "residual_wave" // a pulse still there after the step
)

// Reservation weakens a figure without stopping it.
type Reservation struct {
	Code, Text string
}

// Step is one step of a trace. Frequency and Damping are zero and must not be
// read unless Determined. Height, Noise and At stand whenever a step was seen.
type Step struct {
	At         float64 // middle of the edge, s on the trace's time axis
	Determined bool
	Reasons    []string // codes, why it is undetermined
	Height     float64  // signed, unit of the trace
	Noise      float64  // standard deviation before the step, unit of the trace
	Frequency  Estimate // natural frequency, Hz
	Damping    Estimate // damping ratio
	// Correlation of what is uncertain in ln Frequency and in Damping.
	Correlation float64

	From, To         int       // samples fitted: From <= i < To
	Fitted           []float64 // the model on those samples; nil if nothing could be fitted
	Residuals        []float64 // trace less model
	Baseline         float64   // level at At without the step, unit of the trace
	Drift            float64   // unit of the trace per second
	EdgeWidth        float64   // full width of the edge used or fitted, s
	Delay            float64   // behind the applied pressure, s; 0 without one
	DegreesOfFreedom float64   // of the standard uncertainties
	Autocorrelation  float64   // of the residuals from sample to sample
	Edge             Tolerance // what the stated edge may do: in the intervals if EdgeTime is a bound, else not
	Reservations     []Reservation

	trial trial
	bound bool // Edge is in the intervals
}

// ErrTrace is wrapped by every refusal of Analyse.
var ErrTrace = errors.New("trace not usable")

// Analyse finds the steps of a trace and fits each. Steps come in order of
// time; a trace without one gives none, and Combined then carries no_step.
// The reservations are those of all steps, one for each code.
//
// Errors (all wrap ErrTrace): rate not positive, values that are not finite,
// channels of unequal length, a negative edge time. Short traces are no
// error: they hold no step.
func Analyse(t Trace, s Settings) ([]Step, Combined, []Reservation, error) {
	if err := refuse(t, s); err != nil {
		return nil, Combined{}, nil, err
	}
	a := analysis{trace: t, settings: s, dt: 1 / t.Rate}
	a.quantum = quantum(t.Pressure)
	a.readout = newReadout(s.Readout, a.dt)
	steps := a.steps()
	combined := Combine(steps)
	return steps, combined, gather(steps), nil
}

func refuse(t Trace, s Settings) error {
	switch {
	case !(t.Rate > 0) || math.IsInf(t.Rate, 0):
		return fmt.Errorf("%w: sample rate %g Hz", ErrTrace, t.Rate)
	case math.IsNaN(t.Start) || math.IsInf(t.Start, 0):
		return fmt.Errorf("%w: start time %g s", ErrTrace, t.Start)
	case t.Applied != nil && len(t.Applied) != len(t.Pressure):
		return fmt.Errorf("%w: %d samples of applied pressure for %d of pressure", ErrTrace, len(t.Applied), len(t.Pressure))
	case !(s.EdgeTime >= 0) || math.IsInf(s.EdgeTime, 0):
		return fmt.Errorf("%w: edge time %g s", ErrTrace, s.EdgeTime)
	case !(s.EdgeTolerance >= 0 && s.EdgeTolerance < 1):
		return fmt.Errorf("%w: tolerance of the edge time %g", ErrTrace, s.EdgeTolerance)
	case !(s.MinimumStep >= 0) || math.IsInf(s.MinimumStep, 0):
		return fmt.Errorf("%w: minimum step %g", ErrTrace, s.MinimumStep)
	}
	for _, f := range s.Readout {
		if err := f.refuse(); err != nil {
			return err
		}
	}
	for _, channel := range [][]float64{t.Pressure, t.Applied} {
		for i, v := range channel {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return fmt.Errorf("%w: sample %d is not finite", ErrTrace, i+1)
			}
		}
	}
	return nil
}

// gather keeps the first reservation of each code and counts the others.
func gather(steps []Step) []Reservation {
	var all []Reservation
	var counts []int
	for _, s := range steps {
	next:
		for _, r := range s.Reservations {
			for i := range all {
				if all[i].Code == r.Code {
					counts[i]++
					continue next
				}
			}
			all = append(all, Reservation{r.Code, fmt.Sprintf("step at %.6g s: %s", s.At, r.Text)})
			counts = append(counts, 1)
		}
	}
	for i, n := range counts {
		if n > 1 {
			all[i].Text += fmt.Sprintf("; so in %d steps of %d", n, len(steps))
		}
	}
	return all
}
