package ready

import (
	"errors"
	"math"
)

// ErrFewReadings: fewer readings than parameters with something to spare.
var ErrFewReadings = errors.New("too few readings for a leak rate")

// Leak is the loss of pressure of a volume that was shut off.
type Leak struct {
	Rate     float64 // pressure per second; positive is a loss
	Standard float64 // of Rate
	DoF      float64
	Tau      float64 // s: time constant of the warming taken into account, 0 if none
}

// LeakRate fits p(t) = a - Rate t + A exp(-t/tau) to readings p at times t
// (seconds, ascending, same length, at least 8), tau the best of a grid from
// 0.5 s to a third of the time held; the exponential is what warming or
// cooling gas does after the pressure was made, and it is fitted always, so
// that warming is not taken for a leak. Standard is from the residuals with
// n - 4 degrees of freedom, widened by the spread that the choice of tau
// leaves among all tau whose residuals are within an F-like factor 1 + 4/(n-4)
// of the best.
//
// Source: linear least squares, textbook; the model and its inflation of the
// uncertainty for short holds: from memory of thermal relaxation of a gas
// volume, checked in the tests on data of known truth.
func LeakRate(t, p []float64) (Leak, error) {
	n := len(t)
	if n < 8 || len(p) != n || !(t[n-1] > t[0]) {
		return Leak{}, ErrFewReadings
	}
	held := t[n-1] - t[0]
	type fitted struct{ rate, se, rss, tau float64 }
	var all []fitted
	best := fitted{rss: math.Inf(1)}
	for tau := 0.5; tau <= math.Max(held/3, 0.5); tau *= 1.25 {
		rate, se, rss, ok := leakAt(t, p, tau)
		if !ok {
			continue
		}
		f := fitted{rate, se, rss, tau}
		all = append(all, f)
		if rss < best.rss {
			best = f
		}
	}
	if len(all) == 0 {
		return Leak{}, ErrFewReadings
	}
	dof := float64(n - 4)
	spread := 0.0
	for _, f := range all {
		if f.rss <= best.rss*(1+4/dof) {
			spread = math.Max(spread, math.Abs(f.rate-best.rate))
		}
	}
	return Leak{Rate: best.rate, Standard: math.Hypot(best.se, spread/2), DoF: dof, Tau: best.tau}, nil
}

// leakAt solves the three linear parameters for one tau by normal equations on
// centred, scaled columns.
func leakAt(t, p []float64, tau float64) (rate, se, rss float64, ok bool) {
	n := float64(len(t))
	t0, held := t[0], t[len(t)-1]-t[0]
	var m1, m2, mp float64
	for i := range t {
		m1 += (t[i] - t0) / held / n
		m2 += math.Exp(-(t[i]-t0)/tau) / n
		mp += p[i] / n
	}
	var s11, s12, s22, s1p, s2p float64
	for i := range t {
		x1 := (t[i]-t0)/held - m1
		x2 := math.Exp(-(t[i]-t0)/tau) - m2
		y := p[i] - mp
		s11 += x1 * x1
		s12 += x1 * x2
		s22 += x2 * x2
		s1p += x1 * y
		s2p += x2 * y
	}
	det := s11*s22 - s12*s12
	if !(det > 1e-9*s11*s22) {
		return 0, 0, 0, false
	}
	b1 := (s22*s1p - s12*s2p) / det
	b2 := (s11*s2p - s12*s1p) / det
	for i := range t {
		r := p[i] - mp - b1*((t[i]-t0)/held-m1) - b2*(math.Exp(-(t[i]-t0)/tau)-m2)
		rss += r * r
	}
	se = math.Sqrt(rss/(n-4)*s22/det) / held
	return -b1 / held, se, rss, true
}
