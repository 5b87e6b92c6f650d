package step

import "math"

// Amplitude is the gain of the line at frequency f (Hz) for natural frequency
// fn (Hz) and damping ratio zeta:
//
//	1/sqrt((1 - u^2)^2 + (2 zeta u)^2),  u = f/fn
//
// 1 at f = 0; infinite for zeta = 0 at f = fn. Source: textbook.
func Amplitude(fn, zeta, f float64) float64 {
	u := f / fn
	return 1 / math.Hypot(1-u*u, 2*zeta*u)
}
