package step

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Whatever edge there is below its bound, the interval holds the line's own
// figures; and where the bound is too wide to tell, no figure is given.
func TestEdgeWithinBound(t *testing.T) {
	r := rand.New(rand.NewPCG(51, 1))
	determined, inside, all := 0, 0, trials(200, 4000)
	for range all {
		fn, zeta, rate := 8+40*r.Float64(), 0.1+0.9*r.Float64(), 2000.0
		stated := 0.3 * r.Float64() / fn
		part := r.Float64()
		e := input{height: 100, width: part * stated / 0.8}
		if r.IntN(2) == 0 {
			e = input{height: 100, tau: part * stated / math.Log(9)}
		}
		if part < 0.1 {
			e = input{height: 100}
		}
		at := 0.4 + r.Float64()/rate
		trace := Trace{Rate: rate, Pressure: make([]float64, int((at+0.2+20*slowest(fn, zeta))*rate))}
		for i := range trace.Pressure {
			trace.Pressure[i] = e.answer(float64(i)/rate-at, fn, zeta)
		}
		noisy(trace.Pressure, 0.1, r)
		s := one(t, trace, Settings{EdgeStated: true, EdgeTime: stated, ReadoutStated: true, MinimumStep: 8})
		if !s.Determined {
			continue
		}
		determined++
		slack := 0.1 * math.Abs(s.Edge.Log) // the bias is taken to first order
		if s.Frequency.Low*math.Exp(-slack) <= fn && fn <= s.Frequency.High*math.Exp(slack) {
			inside++
		} else {
			t.Logf("fn %.4g zeta %.3g stated %.3f/fn, true part %.2f exponential %v: %.5g to %.5g, edge %.3g", fn, zeta, stated*fn, part, e.tau > 0, s.Frequency.Low, s.Frequency.High, s.Edge.Log)
		}
	}
	t.Logf("%d determined of %d, inside %d", determined, all, inside)
	if determined < all/3 || float64(inside) < 0.97*float64(determined) {
		t.Errorf("%d determined of %d, the interval holds %d", determined, all, inside)
	}
}

// A tolerance does not widen the interval; what it may do stands beside.
func TestEdgeTolerance(t *testing.T) {
	p := plan{fn: 20, zeta: 0.5, rate: 1000, before: 0.5, spacing: 1, heights: []float64{100}, sigma: 0.1, width: 0.01}
	trace := p.make(rand.New(rand.NewPCG(52, 1)))
	s := Settings{EdgeStated: true, EdgeTime: 0.008, EdgeTolerance: 0.05, ReadoutStated: true, MinimumStep: 8}
	known := one(t, trace, s)
	s.EdgeTolerance = 0
	bound := one(t, trace, s)
	s.EdgeTime, s.EdgeTolerance = 0.008*1.05, 0.05
	moved := one(t, trace, s)
	want := math.Log(moved.Frequency.Value / known.Frequency.Value)
	if !near(known.Edge.Log, want, 0.05) || !near(known.Edge.Damping, moved.Damping.Value-known.Damping.Value, 0.05) {
		t.Errorf("edge %+v, want %g and %g", known.Edge, want, moved.Damping.Value-known.Damping.Value)
	}
	if known.Frequency.Value != bound.Frequency.Value || !(bound.Frequency.StandardUncertainty > 2*known.Frequency.StandardUncertainty) || math.Abs(bound.Edge.Log) < 5*math.Abs(known.Edge.Log) {
		t.Errorf("known %+v %+v, bound %+v %+v", known.Frequency, known.Edge, bound.Frequency, bound.Edge)
	}
}
