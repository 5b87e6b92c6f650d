package simulated

import "math"

// diaphragm turns pressure into the UUT's output in mmHg-equivalent (output
// divided by the nominal sensitivity), with a memory.
//
// Hysteresis is a Prandtl-Ishlinskii sum of play operators: play i follows the
// pressure p within +-radius, s = max(p - r, min(p + r, s)), and adds weight x
// s. Such a sum has return-point memory (a minor loop closes on the turning
// point it began from, and wipes itself out) and congruent minor loops; a
// single difference between "going up" and "going down" has neither. Source:
// textbook model of rate-independent hysteresis, from memory.
//
// A fresh diaphragm is in the state of one that was taken to 300 mmHg and
// back, as an exercised one is; what a first exercise shifts is not modelled.
type diaphragm struct {
	offset float64 // mmHg
	slope  float64
	bow    float64 // mmHg at half range, 0 at both ends
	plays  []play
	rest   float64 // what the plays add at zero pressure after exercise
}

type play struct {
	radius, weight, state float64 // mmHg, 1, mmHg
}

// fullScale is where the bow is zero again, and what exercise goes to, mmHg.
const fullScale = 300.0

// cycle is the cycle that sensitivity and hysteresis are defined over, mmHg.
func cycle() []float64 { return []float64{0, 50, 100, 200, 300, 200, 100, 50, 0} }

// newDiaphragm scales the plays to the hysteresis drawn, and the slope so that
// the least-squares line over the cycle has the sensitivity drawn.
func newDiaphragm(d drawn) *diaphragm {
	m := &diaphragm{offset: d.offset, bow: d.bow}
	for _, r := range []float64{5, 10, 20, 40, 75} {
		m.plays = append(m.plays, play{radius: r, weight: 1})
	}
	m.exercise()
	share := d.hysteresis / widest(m.through(cycle()))
	for i := range m.plays {
		m.plays[i].weight *= share
	}
	m.exercise()
	m.slope = d.sensitivity/nominal - slopeOf(cycle(), m.through(cycle()))
	return m
}

// exercise puts the plays into the state after a visit to full scale.
func (m *diaphragm) exercise() {
	m.rest = 0
	for i := range m.plays {
		q := &m.plays[i]
		q.state = q.radius
		m.rest += q.weight * q.radius
	}
}

// output is what the diaphragm gives at the next pressure of its life.
func (m *diaphragm) output(p float64) float64 {
	y := m.offset + m.slope*p + m.bow*4*p*(fullScale-p)/(fullScale*fullScale) - m.rest
	for i := range m.plays {
		q := &m.plays[i]
		q.state = max(p-q.radius, min(p+q.radius, q.state))
		y += q.weight * q.state
	}
	return y
}

// through returns the outputs of an exercised twin taken through pressures.
func (m *diaphragm) through(pressures []float64) []float64 {
	twin := *m
	twin.plays = append([]play(nil), m.plays...)
	twin.exercise()
	y := make([]float64, len(pressures))
	for i, p := range pressures {
		y[i] = twin.output(p)
	}
	return y
}

// widest is the largest |down - up| of outputs over the cycle.
func widest(y []float64) float64 {
	w := 0.0
	for i, j := 0, len(y)-1; i < j; i, j = i+1, j-1 {
		w = max(w, math.Abs(y[j]-y[i]))
	}
	return w
}

// slopeOf is the least-squares slope of y over x.
func slopeOf(x, y []float64) float64 {
	var mx, my, sxx, sxy float64
	for i := range x {
		mx += x[i] / float64(len(x))
		my += y[i] / float64(len(y))
	}
	for i := range x {
		sxx += (x[i] - mx) * (x[i] - mx)
		sxy += (x[i] - mx) * (y[i] - my)
	}
	return sxy / sxx
}

// trueOf takes the truth from the model, not from the draws.
func trueOf(d drawn, m *diaphragm) Truth {
	y := m.through(cycle())
	return Truth{
		NaturalFrequency: d.fn,
		DampingRatio:     d.zeta,
		ZeroOffset:       y[0],
		Sensitivity:      nominal * slopeOf(cycle(), y),
		Hysteresis:       widest(y),
	}
}
