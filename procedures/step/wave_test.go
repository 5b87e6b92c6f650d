package step

import (
	"math"
	"math/rand/v2"
	"testing"
)

// A pulse of 0.5 to 4 mmHg under a step of 100 mmHg is called by its name,
// noise that is only correlated is not, and the step is found either way.
func TestWaveTold(t *testing.T) {
	r := rand.New(rand.NewPCG(81, 1))
	told, falsely, all := 0, 0, trials(40, 1000)
	for range all {
		p := plan{fn: 8 + 40*r.Float64(), zeta: 0.15 + 0.7*r.Float64(), rate: 1000, before: 0.5, spacing: 1.5, heights: []float64{100}, sigma: 0.2, phase: r.Float64()}
		trace := p.make(r)
		rate, size, phase := 0.9+2*r.Float64(), 0.5+3.5*r.Float64(), r.Float64()
		for i := range trace.Pressure {
			c := math.Mod(float64(i)/p.rate*rate+phase, 1)
			trace.Pressure[i] += size * (math.Exp(-math.Pow((c-0.2)/0.08, 2)) + 0.3*math.Exp(-math.Pow((c-0.5)/0.1, 2)))
		}
		if s := one(t, trace, Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8}); s.has(ResidualWave) {
			told++
		}
		p.phi, p.sigma = 0.3+0.6*r.Float64(), 0.5
		if s := one(t, p.make(r), Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8}); s.has(ResidualWave) {
			falsely++
		}
	}
	t.Logf("told %d, falsely %d of %d", told, falsely, all)
	if told < all*95/100 || falsely > all/50 {
		t.Errorf("a wave told %d times, falsely %d times of %d", told, falsely, all)
	}
}
