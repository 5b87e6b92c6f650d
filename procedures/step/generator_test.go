package step

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
)

// The generator of these tests is written from the poles of the system with
// complex numbers, independent of the package's kernel.

// trueStep is the unit step response, and its integral, t seconds after an
// ideal step.
func trueStep(t, fn, zeta float64) (g, integral float64) {
	if t <= 0 {
		return 0, 0
	}
	w := 2 * math.Pi * fn
	x := w * t
	if math.Abs(zeta-1) < 1e-6 {
		e := math.Exp(-x)
		return 1 - (1+x)*e, (x - 2 + (2+x)*e) / w
	}
	root := cmplx.Sqrt(complex(zeta*zeta-1, 0))
	p1 := complex(w, 0) * (complex(-zeta, 0) + root)
	p2 := complex(w, 0) * (complex(-zeta, 0) - root)
	e1, e2 := cmplx.Exp(p1*complex(t, 0)), cmplx.Exp(p2*complex(t, 0))
	d := p1 - p2
	g = 1 + real((p2*e1-p1*e2)/d)
	integral = t + real((p2/p1*(e1-1)-p1/p2*(e2-1))/d)
	return g, integral
}

// trueEdge is the response to a straight edge of full width T about t = 0.
func trueEdge(t, width, fn, zeta float64) float64 {
	if width == 0 {
		g, _ := trueStep(t, fn, zeta)
		return g
	}
	_, a := trueStep(t+width/2, fn, zeta)
	_, b := trueStep(t-width/2, fn, zeta)
	return (a - b) / width
}

// plan is a simulated trace: what is true of it.
type plan struct {
	fn, zeta, rate, width float64
	before, spacing       float64 // s of rest before the first step, s for each
	heights               []float64
	phase                 float64 // of the steps against the samples, 0..1
	sigma, phi            float64 // noise, mmHg, and its correlation
	level, drift          float64
	quantum               float64
	start                 float64
	spreadFn, spreadZeta  float64 // standard deviation of ln fn and zeta from step to step
}

// make draws the trace.
func (p plan) make(r *rand.Rand) Trace {
	n := int((p.before + p.spacing*float64(len(p.heights))) * p.rate)
	t := Trace{Rate: p.rate, Start: p.start, Pressure: make([]float64, n)}
	noise := r.NormFloat64()
	fn, zeta := make([]float64, len(p.heights)), make([]float64, len(p.heights))
	for k := range p.heights {
		fn[k], zeta[k] = p.fn, p.zeta
		if p.spreadFn > 0 {
			fn[k] *= math.Exp(p.spreadFn * r.NormFloat64())
			zeta[k] += p.spreadZeta * r.NormFloat64()
		}
	}
	for i := range n {
		at := float64(i) / p.rate
		v := p.level + p.drift*at
		for k, h := range p.heights {
			since := at - p.at(k)
			if since > -1 {
				v += h * trueEdge(since, p.width, fn[k], zeta[k])
			}
		}
		noise = p.phi*noise + math.Sqrt(1-p.phi*p.phi)*r.NormFloat64()
		v += p.sigma * noise
		if p.quantum > 0 {
			v = math.Round(v/p.quantum) * p.quantum
		}
		t.Pressure[i] = v
	}
	return t
}

// at is the time of step k after the first sample, s.
func (p plan) at(k int) float64 {
	return p.before + p.spacing*float64(k) + p.phase/p.rate
}

func slowest(fn, zeta float64) float64 {
	w := 2 * math.Pi * fn
	if zeta < 1 {
		return 1 / (zeta * w)
	}
	return (zeta + math.Sqrt(zeta*zeta-1)) / w
}
