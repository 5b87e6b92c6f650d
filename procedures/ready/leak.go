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
// (seconds, ascending, same length, at least 8), tau the best between
// 0.5 s and a third of the time held (grid, then golden section); the exponential is what warming or
// cooling gas does after the pressure was made, and it is fitted always, so
// that warming is not taken for a leak. Standard is from the residuals with
// n - 4 degrees of freedom, with tau counted among the parameters (the column
// d/dtau, proportional to t exp(-t/tau), stands in the normal matrix).
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
	low, high := best.tau/1.25, best.tau*1.25
	for range 50 {
		a, b := low+(high-low)*0.382, low+(high-low)*0.618
		_, _, ra, _ := leakAt(t, p, a)
		_, _, rb, _ := leakAt(t, p, b)
		if ra < rb {
			high = b
		} else {
			low = a
		}
	}
	tau := (low + high) / 2
	if rate, se, rss, ok := leakAt(t, p, tau); ok && rss <= best.rss {
		best = fitted{rate, se, rss, tau}
	}
	free := freeTau(t, best.tau) * math.Sqrt(best.rss/dof)
	return Leak{Rate: best.rate, Standard: math.Max(best.se, free), DoF: dof, Tau: best.tau}, nil
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

// freeTau returns the standard uncertainty of the slope for unit noise when
// the columns 1, t, exp(-t/tau) and t exp(-t/tau) are all fitted: the slope's
// column is swept of the others (Gram-Schmidt), what is left has that length.
func freeTau(t []float64, tau float64) float64 {
	n := len(t)
	columns := make([][]float64, 4)
	for k := range columns {
		columns[k] = make([]float64, n)
	}
	for i, x := range t {
		x -= t[0]
		e := math.Exp(-x / tau)
		columns[0][i], columns[1][i], columns[2][i], columns[3][i] = 1, e, x*e, x
	}
	dot := func(a, b []float64) (sum float64) {
		for i := range a {
			sum += a[i] * b[i]
		}
		return sum
	}
	for pass := 0; pass < 2; pass++ { // twice is enough against cancellation
		for k := range columns {
			for j := range k {
				f := dot(columns[k], columns[j]) / dot(columns[j], columns[j])
				for i := range columns[k] {
					columns[k][i] -= f * columns[j][i]
				}
			}
		}
	}
	return 1 / math.Sqrt(dot(columns[3], columns[3]))
}
