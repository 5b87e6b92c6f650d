package step

import (
	"fmt"
	"math"
)

// FilterKind is what one part of a readout does.
type FilterKind string

// The kinds of filter that can be stated.
const (
	LowPass FilterKind = "low_pass" // of first order: Corner
	Average FilterKind = "average"  // Order means over Length one after another: 1 a moving mean, 3 a sinc3 converter
	Delay   FilterKind = "delay"    // Length alone
)

// Filter is one part of what lies between the line and the samples.
type Filter struct {
	Kind   FilterKind
	Corner float64 // Hz, gain 1/sqrt 2
	Length float64 // s
	Order  int     // 0 means 1
}

// most of a filter.
const highestOrder = 8

func (f Filter) refuse() error {
	switch {
	case f.Kind != LowPass && f.Kind != Average && f.Kind != Delay:
		return fmt.Errorf("%w: a readout has no filter %q", ErrTrace, f.Kind)
	case f.Kind == LowPass && !(f.Corner > 0 && f.Corner < math.Inf(1)):
		return fmt.Errorf("%w: corner of a low-pass %g Hz", ErrTrace, f.Corner)
	case f.Kind != LowPass && !(f.Length >= 0 && f.Length < math.Inf(1)):
		return fmt.Errorf("%w: length of a filter %g s", ErrTrace, f.Length)
	case f.Order < 0 || f.Order > highestOrder:
		return fmt.Errorf("%w: order of an average %d, from 1 to %d", ErrTrace, f.Order, highestOrder)
	}
	return nil
}

// readout is the step response of all filters but pure delay, as a table, and
// its integral. Line and filters commute: the answer of a line behind them is
// the answer of the line to a step of this shape.
type readout struct {
	h        float64   // spacing, s
	value    []float64 // at 0, h, 2 h ..., from 0 to 1, straight between
	integral []float64
	centre   float64 // mean delay of the filters in the table: integral of 1 - value, s
	variance float64 // of the delay, s^2
	delay    float64 // pure, s
}

// newReadout makes the table. dt is the sample spacing. It is nil when
// nothing is stated that has a shape or a delay.
//
// Means over a length are exact for the table's straight lines; a low-pass is
// the exact recursion for them (first-order hold). Source: by hand.
func newReadout(filters []Filter, dt float64) *readout {
	r := &readout{}
	total, finest := 0.0, dt
	for _, f := range filters {
		order := math.Max(1, float64(f.Order))
		switch {
		case f.Kind == Delay:
			r.delay += f.Length
		case f.Kind == LowPass:
			tau := 1 / (2 * math.Pi * f.Corner)
			r.centre += tau
			r.variance += tau * tau
			total += 23 * tau // e^-23 is 1e-10
			finest = math.Min(finest, tau)
		case f.Length > 0:
			r.centre += order * f.Length / 2
			r.variance += order * f.Length * f.Length / 12
			total += order * f.Length
			finest = math.Min(finest, f.Length)
		}
	}
	if total == 0 {
		if r.delay == 0 {
			return nil
		}
		return r
	}
	const mostPoints = 1 << 16
	r.h = math.Max(math.Min(dt/32, finest/16), total/mostPoints)
	n := int(total/r.h) + 2
	r.value = make([]float64, n)
	for i := range r.value {
		r.value[i] = 1
	}
	first := true
	for _, f := range filters {
		switch {
		case f.Kind == LowPass:
			r.lowPass(1/(2*math.Pi*f.Corner), first)
			first = false
		case f.Kind == Average && f.Length > 0:
			for range max(1, f.Order) {
				r.average(f.Length, first)
				first = false
			}
		}
	}
	r.integrate()
	return r
}

// shaped tells whether there is more than a pure delay.
func (r *readout) shaped() bool { return r != nil && r.value != nil }

// lag is the mean delay of what has a shape; 0 without a readout.
func (r *readout) lag() float64 {
	if r == nil {
		return 0
	}
	return r.centre
}

// lowPass passes the table through a lag; the first filter meets the ideal step.
func (r *readout) lowPass(tau float64, ideal bool) {
	if ideal {
		for i := range r.value {
			r.value[i] = -math.Expm1(-float64(i) * r.h / tau)
		}
		return
	}
	decay := math.Exp(-r.h / tau)
	// For an input a + b t over one spacing: the lag's exact answer.
	out, last := 0.0, r.value[0]
	slope := 1 - tau/r.h*(1-decay)
	for i := 1; i < len(r.value); i++ {
		u := r.value[i]
		out = decay*out + (1-decay)*last + (u-last)*slope
		last = u
		r.value[i] = out
	}
	r.value[0] = 0
}

// average is the mean of the table over the length before each point.
func (r *readout) average(length float64, ideal bool) {
	if ideal {
		for i := range r.value {
			r.value[i] = math.Min(1, float64(i)*r.h/length)
		}
		return
	}
	r.integrate()
	out := make([]float64, len(r.value))
	for i := range out {
		t := float64(i) * r.h
		out[i] = (r.sum(t) - r.sum(t-length)) / length
	}
	r.value = out
}

func (r *readout) integrate() {
	r.integral = make([]float64, len(r.value))
	for i := 1; i < len(r.value); i++ {
		r.integral[i] = r.integral[i-1] + (r.value[i-1]+r.value[i])/2*r.h
	}
}

// sum is the integral of the step response up to t.
func (r *readout) sum(t float64) float64 {
	if !(t > 0) {
		return 0
	}
	k := int(t / r.h)
	if n := len(r.value) - 1; k >= n {
		return r.integral[n] + t - float64(n)*r.h
	}
	d := t - float64(k)*r.h
	return r.integral[k] + d*(r.value[k]+(r.value[k+1]-r.value[k])*d/(2*r.h))
}

// edge is the step response for a ramp of a width centred on 0.
func (r *readout) edge(t, width float64) float64 {
	if width > r.h {
		return (r.sum(t+width/2) - r.sum(t-width/2)) / width
	}
	if !(t > 0) {
		return 0
	}
	k := int(t / r.h)
	if k >= len(r.value)-1 {
		return 1
	}
	return r.value[k] + (r.value[k+1]-r.value[k])*(t/r.h-float64(k))
}

// through passes samples through the table, straight between samples: each
// change over one spacing is a ramp. What was before the first sample is taken
// to have stood there for ever.
func (r *readout) through(u []float64, dt float64) []float64 {
	reach := min(len(u), int(float64(len(r.value))*r.h/dt)+3)
	ramp := make([]float64, reach)
	for j := range ramp {
		ramp[j] = r.edge((float64(j)-0.5)*dt, dt)
	}
	out := make([]float64, len(u))
	for i := range out {
		from := max(0, i-reach+1)
		out[i] = u[from]
		for k := from; k < i; k++ {
			out[i] += (u[k+1] - u[k]) * ramp[i-k]
		}
	}
	return out
}
