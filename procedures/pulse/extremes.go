package pulse

import "math"

// extremes finds the lowest and the highest value of sums of up to K
// harmonics. It looks at 8 K places of the period and goes on from the best
// of them with Newton's steps.
//
// Why that is enough: about its highest value M (above the middle of its
// range) such a sum does not fall faster than M cos(K theta) (M. Riesz, for
// sums of harmonics up to K, from memory), so at the nearest place, at most
// pi/(8 K) away, it is still above M cos(pi/8) = 0.924 M. Every place that
// high above the middle is a candidate.
type extremes struct {
	k, n     int
	cos, sin []float64 // of 2 pi i/n
	values   []float64
	even     []float64 // sums of the cosines, up to half the period
}

func newExtremes(k int) *extremes {
	e := &extremes{k: k, n: 8 * k}
	e.cos, e.sin = make([]float64, e.n), make([]float64, e.n)
	e.values, e.even = make([]float64, e.n), make([]float64, e.n/2+1)
	for i := range e.cos {
		e.sin[i], e.cos[i] = math.Sincos(2 * math.Pi * float64(i) / float64(e.n))
	}
	return e
}

// of returns the lowest and the highest value of mean + Sum cos[k-1] cos(k
// theta) + sin[k-1] sin(k theta).
func (e *extremes) of(mean float64, cos, sin []float64) (low, high float64) {
	v, half := e.values, len(e.even)
	even, odd := e.even, v[:half]
	clear(even)
	clear(odd)
	for k := range e.k {
		c, s := cos[k], sin[k]
		at, by := 0, k+1
		for i := range even {
			even[i] += c * e.cos[at]
			odd[i] += s * e.sin[at]
			if at += by; at >= e.n {
				at -= e.n
			}
		}
	}
	// The sum at -theta has the sines with the other sign.
	for i := half - 1; i >= 0; i-- {
		if i > 0 {
			v[e.n-i] = even[i] - odd[i]
		}
		if i < e.n-i {
			v[i] = even[i] + odd[i]
		}
	}
	top, bottom := v[0], v[0]
	for _, x := range v {
		if x > top {
			top = x
		}
		if x < bottom {
			bottom = x
		}
	}
	// The range is that of the places looked at, up to 8 % short of the true one.
	slack := 0.1 * (top - bottom) / 2
	low, high = bottom, top
	for i, x := range v {
		before, after := v[(i+e.n-1)%e.n], v[(i+1)%e.n]
		if x >= top-slack && x >= before && x >= after {
			high = math.Max(high, e.turn(cos, sin, i, 1))
		}
		if x <= bottom+slack && x <= before && x <= after {
			low = math.Min(low, -e.turn(cos, sin, i, -1))
		}
	}
	return mean + low, mean + high
}

// turn climbs from place i, where the sum times sign is not lower than at both
// its neighbours, to where it is highest between them.
func (e *extremes) turn(cos, sin []float64, i int, sign float64) float64 {
	step := 2 * math.Pi / float64(e.n)
	low, high := (float64(i)-1)*step, (float64(i)+1)*step
	x := float64(i) * step
	best := math.Inf(-1)
	for range 60 {
		value, slope, bend := at(cos, sin, x)
		value, slope, bend = sign*value, sign*slope, sign*bend
		best = math.Max(best, value)
		if slope > 0 {
			low = x
		} else {
			high = x
		}
		next := x - slope/bend
		if !(bend < 0) || !(next > low && next < high) {
			next = (low + high) / 2
		}
		// The value is flat here: an angle to 1e-8 gives it to rounding.
		if math.Abs(next-x) < 1e-9 {
			return best
		}
		x = next
	}
	return best
}

// at is the sum and its first two derivatives at one angle.
func at(cos, sin []float64, x float64) (value, slope, bend float64) {
	s1, c1 := math.Sincos(x)
	c, s := 1.0, 0.0
	for k := range cos {
		c, s = c*c1-s*s1, s*c1+c*s1
		n := float64(k + 1)
		even, odd := cos[k]*c+sin[k]*s, sin[k]*c-cos[k]*s
		value += even
		slope += n * odd
		bend -= n * n * even
	}
	return value, slope, bend
}
