package tubing

import (
	"math"
	"testing"
)

// trialOf is a trial of the line with a compliance, known to a share.
func trialOf(l Line, c, share float64) Trial {
	fn, zeta := l.Frequency(c)
	in := func(x float64) Interval { return Interval{x * (1 - share), x * (1 + share)} }
	return Trial{fn, zeta, fn * zeta, in(fn), in(zeta), in(fn * zeta)}
}

// A bubble that shrinks, one that comes back, a bore that narrows: the advice
// is that of the cause, by the physics of the laminar line (Webster's catheter).
func TestAdviseNamesTheCause(t *testing.T) {
	l, dry := webster(), 1/0.49e15
	narrow := l
	narrow.Bore *= 0.8
	bubble := func(ul float64) float64 { return dry + ul*1e-9/101325 }
	fn, zeta := l.Frequency(dry)
	limits := Target{FrequencyLow: 60, DampingLow: 0.02, DampingHigh: 1}
	cleaned := limits
	cleaned.CleanFrequency, cleaned.CleanProduct = fn, fn*zeta
	for _, c := range []struct {
		name   string
		trials []Trial
		target Target
		want   Advice
	}{
		{"nothing yet", nil, limits, Again},
		{"too slow", []Trial{trialOf(l, bubble(3), 0.01)}, limits, FlushAir},
		{"air leaving", []Trial{trialOf(l, bubble(3), 0.01), trialOf(l, bubble(1), 0.01)}, limits, FlushAir},
		{"air leaving, within", []Trial{trialOf(l, bubble(1), 0.01), trialOf(l, bubble(0.01), 0.01)}, limits, StillRising},
		{"done", []Trial{trialOf(l, bubble(0.01), 0.01), trialOf(l, bubble(0.01), 0.01)}, limits, Done},
		{"no more and too slow", []Trial{trialOf(l, bubble(3), 0.01), trialOf(l, bubble(3), 0.01)}, limits, Settled},
		{"air came in", []Trial{trialOf(l, bubble(0.1), 0.01), trialOf(l, bubble(2), 0.01)}, limits, AirEntered},
		{"narrowed", []Trial{trialOf(l, bubble(0.1), 0.01), trialOf(narrow, bubble(0.1), 0.01)}, limits, Narrowed},
		{"one, clean line known: air", []Trial{trialOf(l, bubble(1), 0.01)}, cleaned, FlushAir},
		{"one, clean line known: narrow", []Trial{trialOf(narrow, bubble(1), 0.01)}, cleaned, Narrowed},
		{"one, clean", []Trial{trialOf(l, dry, 0.01)}, cleaned, Again},
		{"cannot tell", []Trial{trialOf(l, bubble(1), 0.3), trialOf(l, bubble(0.7), 0.3)}, limits, Settled},
		{"no limits, rising", []Trial{trialOf(l, bubble(3), 0.01), trialOf(l, bubble(1), 0.01)}, Target{}, FlushAir},
		{"no limits, still", []Trial{trialOf(l, bubble(1), 0.01), trialOf(l, bubble(1), 0.01)}, Target{}, Settled},
	} {
		if got := Advise(c.trials, c.target); got != c.want {
			t.Errorf("%s: %v, want %v", c.name, got, c.want)
		}
	}
	if Advice(99).String() != "again" || Done.String() != "done" {
		t.Error("words")
	}
	// Air alone does not move the product, whatever its volume.
	for _, ul := range []float64{0.01, 1, 50} {
		if p := trialOf(l, bubble(ul), 0).Product; math.Abs(p/(fn*zeta)-1) > 1e-12 {
			t.Errorf("%g ul: product %g of %g", ul, p, fn*zeta)
		}
	}
}
