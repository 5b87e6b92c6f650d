// Package pulse says what a pressure line with a natural frequency and a
// damping ratio does to a pulse wave: the errors of systolic, diastolic and
// mean pressure, the fastest rate at which they stay within a tolerance, and
// where in the plane of the two figures a line has to lie for a stated rate.
//
// It is numerics only: pressures are in mmHg (any one unit does), rates in
// beats a minute, frequencies in hertz. It knows no record and judges no unit:
// what it says is about a line that is of second order and a pulse of exactly
// the stated shape, whose harmonics keep their proportions at every rate.
//
// Order of use: a Wave from Harmonics, Formula or Samples; Wave.Through for the
// errors at one rate; NewReach for the fastest rate and the contour.
package pulse

import (
	"errors"
	"fmt"
	"math"
)

// Wave is one period of a pulse as a sum of harmonics:
//
//	p(theta) = Mean + Sum_k Cos[k-1] cos(k theta) + Sin[k-1] sin(k theta)
//
// theta goes from 0 to 2 pi in a beat; k from 1. At most mostHarmonics. The
// extremes are found once, when it is made.
type Wave struct {
	Name                string
	Mean                float64
	Cos, Sin            []float64
	Systolic, Diastolic float64
}

// mostHarmonics bounds the work. The hundredth harmonic of 220/min is 367 Hz.
const mostHarmonics = 100

// ErrWave is wrapped by every refusal of a wave.
var ErrWave = errors.New("pulse not usable")

// Harmonics makes a wave of its coefficients.
//
// ErrWave: none or too many, unequal numbers, not finite, or no pulse at all.
func Harmonics(name string, mean float64, cos, sin []float64) (Wave, error) {
	w := Wave{Name: name, Mean: mean, Cos: cos, Sin: sin}
	if len(cos) != len(sin) || len(cos) == 0 || len(cos) > mostHarmonics {
		return Wave{}, fmt.Errorf("%w: %d and %d coefficients, 1 to %d of each are taken", ErrWave, len(cos), len(sin), mostHarmonics)
	}
	size := 0.0
	for i := range cos {
		size += math.Abs(cos[i]) + math.Abs(sin[i])
	}
	if math.IsNaN(size+mean) || math.IsInf(size+mean, 0) {
		return Wave{}, fmt.Errorf("%w: a coefficient is not finite", ErrWave)
	}
	if size == 0 {
		return Wave{}, fmt.Errorf("%w: it does not change", ErrWave)
	}
	e := newExtremes(len(cos))
	w.Diastolic, w.Systolic = e.of(mean, cos, sin)
	return w, nil
}

// Samples makes a wave of one whole beat of n evenly spaced pressures, the
// first sample of the next beat not repeated: its harmonics are the discrete
// Fourier transform, those up to (n-1)/2 and to mostHarmonics. Trailing ones
// that together change the pulse by less than a millionth of its range are
// dropped.
//
// ErrWave: fewer than 8 samples, a beat that does not close (from the last
// sample to the first it goes further than half the range in one step, or than
// three times the largest other step), or one of which mostHarmonics leave over
// 1 % of the range (root mean square): what is left out of a recording is noise.
// Source: discrete Fourier transform, textbook.
func Samples(name string, p []float64) (Wave, error) {
	n := len(p)
	if n < 8 {
		return Wave{}, fmt.Errorf("%w: %d samples of a beat, at least 8 are needed", ErrWave, n)
	}
	low, high, step := p[0], p[0], 0.0
	for i, v := range p {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return Wave{}, fmt.Errorf("%w: sample %d is not finite", ErrWave, i+1)
		}
		low, high = math.Min(low, v), math.Max(high, v)
		if i > 0 {
			step = math.Max(step, math.Abs(v-p[i-1]))
		}
	}
	if high == low {
		return Wave{}, fmt.Errorf("%w: it does not change", ErrWave)
	}
	if gap := math.Abs(p[0] - p[n-1]); gap > 3*step || gap > (high-low)/2 {
		return Wave{}, fmt.Errorf("%w: the beat does not close: from its last sample to its first it goes %.3g, within it %.3g at most", ErrWave, gap, step)
	}
	mean := 0.0
	for _, v := range p {
		mean += v / float64(n)
	}
	cos, sin := make([]float64, (n-1)/2), make([]float64, (n-1)/2)
	table := make([][2]float64, n)
	total := 0.0
	for i, v := range p {
		table[i][1], table[i][0] = math.Sincos(2 * math.Pi * float64(i) / float64(n))
		total += (v - mean) * (v - mean) / float64(n)
	}
	cos, sin = cos[:min(len(cos), mostHarmonics)], sin[:min(len(sin), mostHarmonics)]
	for k := range cos {
		for i, v := range p {
			// The angle is reduced in whole numbers, so that it stays exact.
			at := &table[i*(k+1)%n]
			cos[k] += 2 * (v - mean) * at[0] / float64(n)
			sin[k] += 2 * (v - mean) * at[1] / float64(n)
		}
		total -= (cos[k]*cos[k] + sin[k]*sin[k]) / 2
	}
	if left := math.Sqrt(math.Max(0, total)); len(cos) == mostHarmonics && left > 0.01*(high-low) {
		return Wave{}, fmt.Errorf("%w: %d harmonics leave %.2g of its range of %.3g: smooth it", ErrWave, mostHarmonics, left, high-low)
	}
	keep := len(cos)
	for rest := 0.0; keep > 1; keep-- {
		if rest += math.Hypot(cos[keep-1], sin[keep-1]); rest > 1e-6*(high-low) {
			break
		}
	}
	return Harmonics(name, mean, cos[:keep], sin[:keep])
}

// Errors is what a line does to a pulse at one rate: what it shows less what
// there is.
type Errors struct{ Systolic, Diastolic, Mean float64 }

// Through sends the wave at a rate (beats/min, above 0) through a line of
// natural frequency fn (Hz, above 0) and damping ratio zeta (0 or more, but not
// 0 where a harmonic meets fn).
//
// Each harmonic is multiplied by 1/(1 - u^2 + 2 i zeta u), u = k rate/(60 fn).
// The mean passes unchanged: the gain at rest is 1. Source: textbook transfer
// function.
func (w Wave) Through(fn, zeta, rate float64) Errors {
	e := newExtremes(len(w.Cos))
	return w.shown(e, make([]float64, len(w.Cos)), make([]float64, len(w.Cos)), rate/60/fn, zeta)
}

// shown is Through with u = rate/(60 fn) of the first harmonic, and room to
// work in.
func (w Wave) shown(e *extremes, cos, sin []float64, u, zeta float64) Errors {
	for i := range cos {
		v := u * float64(i+1)
		// a + i b = 1/(1 - v^2 + 2 i zeta v); a harmonic c cos + s sin is the
		// real part of (c - i s) e^(i k theta).
		re, im := 1-v*v, 2*zeta*v
		d := re*re + im*im
		a, b := re/d, -im/d
		c, s := w.Cos[i], w.Sin[i]
		cos[i], sin[i] = a*c+b*s, a*s-b*c
	}
	low, high := e.of(w.Mean, cos, sin)
	return Errors{Systolic: high - w.Systolic, Diastolic: low - w.Diastolic}
}

// Tolerance is what an error may be: Absolute, or Share of the pressure it is
// an error of, whichever is larger.
type Tolerance struct {
	Absolute float64 // mmHg
	Share    float64 // of systolic or diastolic pressure
}

// used is the larger share of its tolerance that an error of systolic or
// diastolic pressure takes; 1 is the limit.
func (w Wave) used(e Errors, t Tolerance) float64 {
	of := func(err, p float64) float64 {
		return math.Abs(err) / math.Max(t.Absolute, t.Share*math.Abs(p))
	}
	return math.Max(of(e.Systolic, w.Systolic), of(e.Diastolic, w.Diastolic))
}
