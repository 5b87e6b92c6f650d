package step

import "math"

// A stated edge time is a bound: the edge may be an ideal step, a ramp or the
// exponential of a vessel that empties, of any time up to it. The fit holds
// the ramp; what the others would do to the figures widens the intervals. An
// edge that is known, a ramp within a tolerance, leaves them alone: the caller
// has the tolerance's part from Step.Edge.

// edgeBias asks what an ideal step and an exponential edge of the stated 10 to
// 90 % time would do to a fit that held a ramp of it, to first order: estimate
// less truth is (J'J)^-1 J'(answer to that edge - answer to the ramp). Each is
// shifted to the ramp's middle, which t0 takes up. The larger of the two is
// returned: the truth lies within it on either side. With a tolerance (a share
// of the time) it is what ramps so much slower or faster would do.
func (t *tribunal) edgeBias(w, edgeTime, tolerance float64) Tolerance {
	width := w * edgeTime / 0.8
	tau := w * edgeTime / math.Log(9)
	others := []func(x float64) float64{
		func(x float64) float64 { return Response(x, t.zeta) },
		func(x float64) float64 {
			if x += tau; !(x > 0) {
				return 0
			}
			c, s := kernel(x, t.zeta)
			return delayed(x, t.zeta, tau, c, s)
		},
	}
	if tolerance > 0 {
		others = []func(x float64) float64{func(x float64) float64 { return Ramp(x, width*(1+tolerance), t.zeta) }}
	}
	var most Tolerance
	for _, other := range others {
		for k, x := range t.x {
			t.shape[k] = (other(x) - Ramp(x, width, t.zeta)) * t.root[k]
		}
		taken := t.taken()
		if math.Abs(taken[linear+lnOmega]) > math.Abs(most.Log) {
			most = Tolerance{Log: -taken[linear+lnOmega], Damping: -taken[linear+lnZeta] * t.zeta}
		}
	}
	return most
}

// taken is how much of each of the model's columns is in the shape.
func (t *tribunal) taken() [most]float64 {
	var out [most]float64
	for i, column := range t.columns {
		out[i] = dot(column, t.shape) / t.unit[i]
	}
	substitute(&t.gram, &out, len(t.columns))
	for i := range t.columns {
		out[i] /= t.unit[i]
	}
	return out
}

// widen carries a half-width of what may be wrong in every step into an
// estimate, of a quantity or, for an estimate of a logarithm, of that.
func (e Estimate) widen(logarithm bool, half float64) Estimate {
	half = math.Abs(half)
	u := half / math.Sqrt(3) // rectangular
	if logarithm {
		u = math.Hypot(e.StandardUncertainty/e.Value, u)
		return Estimate{e.Value, e.Value * u, e.Low * math.Exp(-half), e.High * math.Exp(half)}
	}
	return Estimate{e.Value, math.Hypot(e.StandardUncertainty, u), math.Max(0, e.Low-half), e.High + half}
}

// narrow takes it out of a standard uncertainty again.
func narrow(u, half float64) float64 { return math.Sqrt(math.Max(0, u*u-half*half/3)) }
