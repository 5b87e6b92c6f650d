package pulse

import (
	"fmt"
	"math"
	"slices"
)

// Rates that heart rates are looked at between, beats/min. Shapes do not keep
// their proportions beyond, if they do within.
const (
	SlowestRate = 40
	FastestRate = 220
)

// Reach says how far a wave can be followed within a tolerance. All depends on
// damping ratio and on u = rate/(60 fn) alone, so that one number for each
// damping ratio, the largest u, answers for every line and every rate.
type Reach struct {
	wave     Wave
	allowed  Tolerance
	e        *extremes
	cos, sin []float64
	harmless float64 // a sum of harmonics' sizes that cannot use up the tolerance
}

// NewReach prepares. The tolerance must be above 0 at both extremes.
func NewReach(w Wave, t Tolerance) (*Reach, error) {
	least := math.Inf(1)
	for _, p := range []float64{w.Systolic, w.Diastolic} {
		least = math.Min(least, math.Max(t.Absolute, t.Share*math.Abs(p)))
	}
	if !(least > 0) || math.IsInf(least, 0) {
		return nil, fmt.Errorf("%w: a tolerance of %g mmHg or %g of the pressure", ErrWave, t.Absolute, t.Share)
	}
	return &Reach{
		wave: w, allowed: t, e: newExtremes(len(w.Cos)),
		cos: make([]float64, len(w.Cos)), sin: make([]float64, len(w.Cos)), harmless: least,
	}, nil
}

// Used is the part of the tolerance that the larger error uses up at u =
// rate/(60 fn); 1 is the limit. Errors as in Wave.Through.
func (r *Reach) Used(u, zeta float64) float64 {
	return r.wave.used(r.wave.shown(r.e, r.cos, r.sin, u, zeta), r.allowed)
}

// Errors is Wave.Through without allocations.
func (r *Reach) Errors(fn, zeta, rate float64) Errors {
	return r.wave.shown(r.e, r.cos, r.sin, rate/60/fn, zeta)
}

// mostRatio is where Limit stops looking: the gain of the first harmonic is an
// eighth there.
const mostRatio = 3

// Limit is the u = rate/(60 fn) up to which, from 0 on, the errors stay within
// the tolerance for damping ratio zeta > 0; +Inf when they do up to u = 3.
//
// It starts where the harmonics' own sizes prove that nothing can happen (an
// extreme of a sum moves by no more than the sum of what each part moves),
// goes on in steps that what is left of the tolerance cannot be used up in,
// and solves for the first u that is beyond, to 1e-9. No step is shorter than a
// fiftieth of the relative width of a resonance (zeta; 1 % of u at most), so an
// excess over so short a stretch, which then is a small part of the tolerance,
// can be passed over.
func (r *Reach) Limit(zeta float64) float64 {
	// Up to the resonance of the highest harmonic that bound only grows.
	low, high := 0.0, 1/float64(len(r.cos))
	for range 12 {
		if u := (low + high) / 2; r.moved(u, zeta) < r.harmless {
			low = u
		} else {
			high = u
		}
	}
	least := math.Min(0.01, math.Max(zeta/50, 5e-4))
	for u, used := low, 0.0; ; {
		step := (1 - used) * r.harmless / r.steepest(u, 1.1*u, zeta)
		next := u + math.Min(0.1*u, math.Max(step, least*u))
		if used = r.Used(next, zeta); used > 1 {
			return r.solve(u, next, zeta)
		}
		if u = next; u > mostRatio {
			return math.Inf(1)
		}
	}
}

// steepest bounds how fast an extreme moves with u between two of its values:
//
//	|dH/du| = 2 k |v - i zeta| |H|^2,  v = k u
//
// where |H| is largest at the v nearest to its peak, sqrt(1 - 2 zeta^2).
func (r *Reach) steepest(low, high, zeta float64) float64 {
	peak := math.Sqrt(math.Max(0, 1-2*zeta*zeta))
	sum := 0.0
	for i := range r.cos {
		k := float64(i + 1)
		v := math.Min(math.Max(peak, k*low), k*high)
		re, im := 1-v*v, 2*zeta*v
		sum += math.Hypot(r.wave.Cos[i], r.wave.Sin[i]) * 2 * k * math.Hypot(k*high, zeta) / (re*re + im*im)
	}
	return sum
}

// moved bounds how far an extreme can move.
func (r *Reach) moved(u, zeta float64) float64 {
	sum := 0.0
	for i := range r.cos {
		v := u * float64(i+1)
		re, im := 1-v*v, 2*zeta*v
		// |H - 1| = |v^2 - 2 i zeta v|/|1 - v^2 + 2 i zeta v|
		sum += math.Hypot(r.wave.Cos[i], r.wave.Sin[i]) * math.Hypot(v*v, im) / math.Hypot(re, im)
	}
	return sum
}

// solve finds where Used passes 1 between low, where it does not, and high,
// where it does: false position with the stale end's weight halved (Illinois;
// Dowell and Jarratt 1971, from memory), and halving when that is slow.
func (r *Reach) solve(low, high, zeta float64) float64 {
	a, b := r.Used(low, zeta)-1, r.Used(high, zeta)-1
	for i := 0; i < 100 && high-low > 1e-9*high; i++ {
		u := (low*b - high*a) / (b - a)
		if i > 12 || !(u > low && u < high) {
			u = (low + high) / 2
		}
		switch f := r.Used(u, zeta) - 1; {
		case f == 0:
			return u
		case f > 0:
			high, b = u, f
			a /= 2
		default:
			low, a = u, f
			b /= 2
		}
	}
	return low
}

// Rate is the fastest rate, beats/min, up to which (from SlowestRate on) the
// errors stay within the tolerance, for a line of fn (Hz) and zeta. It is 0
// when they do not even there, and +Inf when they do at FastestRate.
func (r *Reach) Rate(fn, zeta float64) float64 { return clipped(60 * fn * r.Limit(zeta)) }

func clipped(rate float64) float64 {
	switch {
	case rate < SlowestRate:
		return 0
	case rate >= FastestRate:
		return math.Inf(1)
	}
	return rate
}

// nodes is at how many damping ratios Rates solves.
const nodes = 24

// Rates is Rate for many lines at once (draws of one line: fn and zeta, of
// equal length). The limits are solved at 24 damping ratios, evenly among those
// given, and taken straight between them; where they jump, nothing is taken
// between and the nearer one stands.
func (r *Reach) Rates(fn, zeta []float64) []float64 {
	sorted := slices.Clone(zeta)
	slices.Sort(sorted)
	var at, limits []float64
	for i := range nodes {
		z := sorted[i*(len(sorted)-1)/(nodes-1)]
		if n := len(at); n == 0 || z > at[n-1] {
			at, limits = append(at, z), append(limits, r.Limit(z))
		}
	}
	out := make([]float64, len(fn))
	for i, z := range zeta {
		out[i] = clipped(60 * fn[i] * between(at, limits, z))
	}
	return out
}

// between reads a curve; a jump is a change by over a fifth between two nodes.
func between(at, values []float64, x float64) float64 {
	k, found := slices.BinarySearch(at, x)
	if found || k == 0 {
		return values[min(k, len(values)-1)]
	}
	if k == len(at) {
		return values[k-1]
	}
	a, b := values[k-1], values[k]
	part := (x - at[k-1]) / (at[k] - at[k-1])
	if !(math.Abs(b-a) <= 0.2*math.Min(a, b)) {
		if part < 0.5 {
			return a
		}
		return b
	}
	return a + part*(b-a)
}

// Contour is, for each damping ratio, the natural frequency (Hz) from which on
// the errors stay within the tolerance at a rate (beats/min): that line and
// every faster one of the same damping follow the pulse. 0 where every line
// does.
func (r *Reach) Contour(rate float64, zeta []float64) []float64 {
	out := make([]float64, len(zeta))
	for i, z := range zeta {
		out[i] = rate / 60 / r.Limit(z)
	}
	return out
}
