package step

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"
)

// mean of a function over the length before t, by Gauss-Legendre quadrature of
// eight points (abscissae and weights from Abramowitz and Stegun 25.4.30).
func meanBefore(f func(float64) float64, t, length float64) float64 {
	x := [4]float64{0.183434642495650, 0.525532409916329, 0.796666477413627, 0.960289856497536}
	w := [4]float64{0.362683783378362, 0.313706645877887, 0.222381034453374, 0.101228536290376}
	sum := 0.0
	for i := range x {
		sum += w[i] / 2 * (f(t-length/2*(1-x[i])) + f(t-length/2*(1+x[i])))
	}
	return sum
}

// Traces that passed a filter give the line's own figures back when the
// filter is stated, and wrong ones when it is said that there is none. The
// generator's low-pass is a third pole, its means closed form or quadrature.
func TestReadout(t *testing.T) {
	r := rand.New(rand.NewPCG(41, 1))
	for _, fn := range []float64{10, 35} {
		for _, zeta := range []float64{0.15, 0.5, 1.1} {
			rate, slack := 14*fn, 2e-4
			if zeta > 1 {
				slack = 5e-4
			}
			for _, c := range []struct {
				name    string
				filters []Filter
				shape   func(t float64) float64
			}{
				{"low-pass", []Filter{{Kind: LowPass, Corner: 2 * fn}}, func(t float64) float64 {
					return exponentialEdge(t, 1/(2*math.Pi*2*fn), fn, zeta)
				}},
				{"slow low-pass", []Filter{{Kind: LowPass, Corner: 0.7 * fn}}, func(t float64) float64 {
					return exponentialEdge(t, 1/(2*math.Pi*0.7*fn), fn, zeta)
				}},
				{"mean", []Filter{{Kind: Average, Length: 0.3 / fn}}, func(t float64) float64 {
					return trueEdge(t-0.15/fn, 0.3/fn, fn, zeta)
				}},
				{"sinc3", []Filter{{Kind: Average, Length: 0.1 / fn, Order: 3}}, func(t float64) float64 {
					two := func(t float64) float64 {
						return meanBefore(func(t float64) float64 { return trueEdge(t-0.05/fn, 0.1/fn, fn, zeta) }, t, 0.1/fn)
					}
					return meanBefore(two, t, 0.1/fn)
				}},
				{"low-pass, mean, delay", []Filter{{Kind: Average, Length: 0.2 / fn}, {Kind: Delay, Length: 0.4 / fn}, {Kind: LowPass, Corner: 3 * fn}}, func(t float64) float64 {
					return meanBefore(func(t float64) float64 { return exponentialEdge(t-0.4/fn, 1/(2*math.Pi*3*fn), fn, zeta) }, t, 0.2/fn)
				}},
			} {
				name, before, after := c.name, 0.5, 0.3+20*slowest(fn, zeta)
				at := before + r.Float64()/rate
				trace := Trace{Rate: rate, Pressure: make([]float64, int((before+after)*rate))}
				for i := range trace.Pressure {
					trace.Pressure[i] = 5 + 100*c.shape(float64(i)/rate-at)
				}
				got := one(t, trace, Settings{EdgeStated: true, Readout: c.filters, MinimumStep: 8})
				if !got.Determined || len(got.Reservations) > 0 || !near(got.Frequency.Value, fn, slack) || !near(got.Damping.Value, zeta, slack) || math.Abs(got.At-at) > 1e-3/fn {
					t.Errorf("%s, fn %g zeta %g: %v %v fn %.8g zeta %.8g late %.3g/fn", name, fn, zeta, got.Reasons, got.Reservations, got.Frequency.Value, got.Damping.Value, (got.At-at)*fn)
				}
				other := one(t, trace, Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
				if other.Determined && near(other.Frequency.Value, fn, 5e-4) && near(other.Damping.Value, zeta, 5e-4) {
					t.Errorf("%s, fn %g zeta %g: the filter made no difference", name, fn, zeta)
				}
				// With the width of the edge free as well, and noise.
				noisy(trace.Pressure, 0.05, r)
				free := one(t, trace, Settings{Readout: c.filters, MinimumStep: 8})
				if !free.Determined || math.Abs(free.Frequency.Value-fn) > 5*free.Frequency.StandardUncertainty+1e-3*fn {
					t.Errorf("%s, width fitted, fn %g zeta %g: %v %v %+v", name, fn, zeta, free.Reasons, free.Reservations, free.Frequency)
				}
			}
		}
	}
}

// A filter that acts on the pressure alone, beside an applied pressure that
// was taken before it; and one that both have passed.
func TestReadoutBesideApplied(t *testing.T) {
	const fn, zeta, rate, tau, edge, before = 20.0, 0.4, 1000.0, 0.004, 0.01, 0.5
	for _, shared := range []bool{false, true} {
		trace := Trace{Rate: rate, Pressure: make([]float64, 1500), Applied: make([]float64, 1500)}
		// A ramp from sample to sample, so that straight lines are exact.
		lag := func(t float64) float64 {
			w := func(t float64) float64 { return max(0, t) - tau*-math.Expm1(-max(0, t)/tau) }
			return (w(t) - w(t-edge)) / edge
		}
		for i := range trace.Pressure {
			since := float64(i)/rate - before
			trace.Applied[i] = 100 * max(0, min(1, since/edge))
			line := func(t float64) float64 { return exponentialEdge(t, tau, fn, zeta) }
			trace.Pressure[i] = 80 * (meanBefore(line, since, edge/2) + meanBefore(line, since-edge/2, edge/2)) / 2
			if shared {
				trace.Applied[i] = 100 * lag(since)
			}
		}
		s := Settings{Readout: []Filter{{Kind: LowPass, Corner: 1 / (2 * math.Pi * tau)}}, AppliedUnfiltered: !shared, MinimumStep: 8}
		got := one(t, trace, s)
		if !got.Determined || !near(got.Frequency.Value, fn, 2e-3) || !near(got.Damping.Value, zeta, 2e-3) || math.Abs(got.Delay) > 2e-5 {
			t.Errorf("shared %v: %v fn %.7g zeta %.7g delay %.3g", shared, got.Reasons, got.Frequency.Value, got.Damping.Value, got.Delay)
		}
	}
}

func TestRefusedReadouts(t *testing.T) {
	for _, f := range []Filter{{}, {Kind: "low pass", Corner: 10}, {Kind: LowPass}, {Kind: LowPass, Corner: math.NaN()}, {Kind: Average, Length: -1}, {Kind: Delay, Length: math.Inf(1)}, {Kind: Average, Length: 1, Order: 9}} {
		if _, _, _, err := Analyse(Trace{Rate: 1, Pressure: []float64{1, 2}}, Settings{Readout: []Filter{f}}); !errors.Is(err, ErrTrace) {
			t.Errorf("%+v: %v", f, err)
		}
	}
}
