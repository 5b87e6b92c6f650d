package step

import "math"

// The figures of a second-order system that follow from its damping ratio
// alone. Frequencies are multiples of fn, times are in radians of it (divide
// by 2 pi fn for seconds). zeta > 0 throughout. Source unless told otherwise:
// textbook formulas, checked in testdata/sources/second-order-table.

// Amplitude is the gain of the line at frequency f (Hz) for natural frequency
// fn (Hz) and damping ratio zeta:
//
//	1/sqrt((1 - u^2)^2 + (2 zeta u)^2),  u = f/fn
//
// 1 at f = 0; infinite for zeta = 0 at f = fn.
func Amplitude(fn, zeta, f float64) float64 {
	u := f / fn
	return 1 / math.Hypot(1-u*u, 2*zeta*u)
}

// Phase is the phase of the line at frequency f in radians, 0 to -pi:
// -atan2(2 zeta u, 1 - u^2), u = f/fn.
func Phase(fn, zeta, f float64) float64 {
	u := f / fn
	return -math.Atan2(2*zeta*u, 1-u*u)
}

// DampedFrequency is fd/fn = sqrt(1 - zeta^2), 0 for zeta >= 1.
func DampedFrequency(zeta float64) float64 {
	return math.Sqrt(math.Max(0, 1-zeta*zeta))
}

// Overshoot is the first overshoot as a part of the step, which is also the
// ratio of successive opposite extrema: exp(-pi zeta/sqrt(1 - zeta^2)); 0
// for zeta >= 1. Successive peaks on the same side have its square.
func Overshoot(zeta float64) float64 {
	if zeta >= 1 {
		return 0
	}
	return math.Exp(-math.Pi * zeta / DampedFrequency(zeta))
}

// DampingOfOpposite is the damping ratio that a ratio of successive opposite
// extrema stands for (height above the end, then depth below it; 0 to 1):
// L/sqrt(pi^2 + L^2), L = -ln ratio. It is the inverse of Overshoot. This is
// what a flush test on paper gives when neighbouring heights are taken.
// NaN outside 0 to 1.
func DampingOfOpposite(ratio float64) float64 { return dampingOf(-math.Log(ratio), math.Pi) }

// DampingOfSameSide is the same for successive peaks on one side, a full cycle
// apart: L/sqrt(4 pi^2 + L^2). Taken for opposite extrema it gives half the
// damping.
func DampingOfSameSide(ratio float64) float64 { return dampingOf(-math.Log(ratio), 2*math.Pi) }

func dampingOf(decrement, angle float64) float64 {
	if !(decrement >= 0) {
		return math.NaN()
	}
	if math.IsInf(decrement, 1) {
		return 1
	}
	return decrement / math.Hypot(angle, decrement)
}

// Resonance is where the gain is largest, as a multiple of fn, and how large:
// sqrt(1 - 2 zeta^2) and 1/(2 zeta sqrt(1 - zeta^2)). 0 and 1 where there is
// no peak, zeta >= 1/sqrt 2.
func Resonance(zeta float64) (frequency, gain float64) {
	if 2*zeta*zeta >= 1 {
		return 0, 1
	}
	return math.Sqrt(1 - 2*zeta*zeta), 1 / (2 * zeta * math.Sqrt(1-zeta*zeta))
}

// Bandwidth is f/fn at which the gain is 1/sqrt 2 (-3 dB):
// sqrt(a + sqrt(a^2 + 1)), a = 1 - 2 zeta^2.
func Bandwidth(zeta float64) float64 {
	a := 1 - 2*zeta*zeta
	return root(a, math.Hypot(a, 1), -1)
}

// FlatBand is the largest f/fn up to which the gain stays within 1 - part and
// 1 + part, 0 < part < 1. It jumps where the resonance peak is exactly
// 1 + part (for 5 % at zeta 0.58953), so an uncertainty of zeta must be
// carried through it by sampling. Source: solution of the gain for u^2.
func FlatBand(zeta, part float64) float64 {
	a := 1 - 2*zeta*zeta
	c := 1 - 1/((1+part)*(1+part))
	if peaksBeyond(zeta, part) {
		return math.Sqrt(c / (a + math.Sqrt(a*a-c)))
	}
	d := 1/((1-part)*(1-part)) - 1
	return root(a, math.Sqrt(a*a+d), -d)
}

// peaksBeyond says that the resonance peak reaches 1 + part: the flat band
// then ends on its way up.
func peaksBeyond(zeta, part float64) bool {
	a := 1 - 2*zeta*zeta
	return a > 0 && a*a >= 1-1/((1+part)*(1+part))
}

// root is sqrt(a + r) with r = sqrt(a^2 - product), without cancellation for
// negative a.
func root(a, r, product float64) float64 {
	if a < 0 {
		return math.Sqrt(product / (a - r))
	}
	return math.Sqrt(a + r)
}

// PeakTime is when the first overshoot peaks: pi/sqrt(1 - zeta^2); infinite
// for zeta >= 1.
func PeakTime(zeta float64) float64 {
	if zeta >= 1 {
		return math.Inf(1)
	}
	return math.Pi / DampedFrequency(zeta)
}

// RiseTime is the time from 10 to 90 % of the step on the first rise, by
// solving Response for both.
func RiseTime(zeta float64) float64 {
	end := riseEnd(zeta)
	return crossing(zeta, 0, end, 0.9) - crossing(zeta, 0, end, 0.1)
}

// riseEnd is a time by which the first rise is over.
func riseEnd(zeta float64) float64 {
	if zeta < 1 {
		return math.Min(PeakTime(zeta), 50)
	}
	return 50 * settling(1, zeta)
}

// SettlingTime is when the answer enters the band of 1 - part to 1 + part for
// good, counted from the (ideal) step, 0 < part < 1. It jumps where an
// extremum just touches the band. Found from the extrema, which lie
// exp(-zeta x) from the end at multiples of PeakTime, and solving Response
// between two of them.
func SettlingTime(zeta, part float64) float64 {
	if zeta >= 1 {
		return crossing(zeta, 0, riseEnd(zeta), 1-part)
	}
	half := PeakTime(zeta)
	n := float64(extremaOutside(zeta, part))
	if math.Mod(n, 2) == 0 {
		return crossing(zeta, n*half, (n+1)*half, 1-part)
	}
	return crossing(zeta, n*half, (n+1)*half, 1+part)
}

// extremaOutside counts the extrema of the answer that lie outside the band of
// 1 - part to 1 + part; 0 for zeta >= 1. The settling time jumps where it
// changes. Above a million nothing is told apart.
func extremaOutside(zeta, part float64) int {
	if zeta >= 1 {
		return 0
	}
	return int(math.Min(1e6, math.Max(0, math.Ceil(-math.Log(part)/(zeta*PeakTime(zeta)))-1)))
}

// crossing finds where Response has a level, between two times at which it
// lies on either side of it: Newton's steps (the slope of g is s), and halving
// where one would leave the bracket.
func crossing(zeta, low, high, level float64) float64 {
	rising := Response(low, zeta) < level
	x := (low + high) / 2
	for range 200 {
		c, s := kernel(x, zeta)
		g := 1 - c - zeta*s
		if (g < level) == rising {
			low = x
		} else {
			high = x
		}
		next := x - (g-level)/s
		if !(next > low && next < high) {
			next = (low + high) / 2
		}
		if math.Abs(next-x) <= 4e-16*x || next <= low || next >= high {
			return next
		}
		x = next
	}
	return x
}
