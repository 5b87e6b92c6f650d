package step

import (
	"math/rand/v2"
	"slices"
	"testing"
)

// One sample a period leaves a slow and well-damped answer: it is not
// believed. The same slow answer, sampled well, is.
func TestAlias(t *testing.T) {
	silent, slow := 0, 0
	r := rand.New(rand.NewPCG(33, 1))
	for range trials(150, 3000) {
		p := plan{fn: 40 + 20*r.Float64(), zeta: 0.1 + 0.1*r.Float64(), before: 0.8, spacing: 1.5, heights: []float64{100}, sigma: 0.4, phase: r.Float64()}
		p.rate = p.fn * (1.05 + 0.2*r.Float64())
		_, c, reservations, err := Analyse(p.make(r), Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
		if err != nil {
			t.Fatal(err)
		}
		if c.Determined && len(reservations) == 0 {
			silent++
			t.Logf("silent fn %.4g zeta %.3g: %+v", c.Frequency.Value, c.Damping.Value, p)
		}
		if slices.Contains(c.Reasons, SamplingTooSlow) {
			slow++
		}
	}
	if silent > 0 || slow == 0 {
		t.Errorf("%d silent answers, %d told to be sampled too slowly", silent, slow)
	}
	p := plan{fn: 5, zeta: 0.7, rate: 60, before: 0.8, spacing: 1.5, heights: []float64{100}, sigma: 0.4}
	if s := one(t, p.make(r), Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8}); !s.Determined || s.has(SamplingSlow) || !near(s.Frequency.Value, 5, 0.1) {
		t.Errorf("twelve samples a period: %v %v %+v", s.Reasons, s.Reservations, s.Frequency)
	}
}
