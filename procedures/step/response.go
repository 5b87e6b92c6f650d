package step

import "math"

// Response is the unit step response of a second-order system starting from
// rest, for any damping:
//
//	g(x) = 1 - C - zeta s,  C = E cosh(sqrt z),  s = E x sinh(sqrt z)/sqrt z
//	E = exp(-zeta x),  z = (zeta^2 - 1) x^2
//
// x = 2 pi fn (t - t0) is time in radians of the undamped natural frequency
// and zeta > 0 the damping ratio (both without unit). It is 0 for x <= 0 and
// tends to 1. For z < 0 the hyperbolic functions are circular ones. Source:
// the textbook solution of d2p/dt2 + 2 zeta w dp/dt + w^2 p = w^2 u, with
// one set of symbols so that nothing is singular at zeta = 1.
func Response(x, zeta float64) float64 {
	if !(x > 0) {
		return 0
	}
	c, s := kernel(x, zeta)
	return 1 - c - zeta*s
}

// Ramp is the response to a step whose edge is a straight ramp of full width
// X = 2 pi fn T centred on x = 0, the mean of Response over that width:
//
//	y(x) = [G(x + X/2) - G(x - X/2)]/X,  G(x) = x - s - 2 zeta g
//
// G is the integral of g from 0. X = 0 gives Response. Arguments without
// unit, as in Response. Source: integration of Response, by hand.
func Ramp(x, width, zeta float64) float64 {
	if width < smallWidth && (x > width/2 || width < 1e-9) {
		if !(x > 0) {
			return 0
		}
		c, s := kernel(x, zeta)
		e := c - zeta*s
		g4 := -e - 2*zeta*(-s-2*zeta*e)
		ww := width * width
		return 1 - c - zeta*s + ww*(e/24+ww*g4/1920)
	}
	return (integral(x+width/2, zeta) - integral(x-width/2, zeta)) / width
}

// smallWidth is the edge width, in radians, below which the mean over the
// edge is taken from its Taylor series: the terms left out are under 2e-16,
// while the difference of two integrals would lose digits.
const smallWidth = 0.02

// integral is G of Ramp, 0 for x <= 0.
func integral(x, zeta float64) float64 {
	if !(x > 0) {
		return 0
	}
	c, s := kernel(x, zeta)
	return x - s - 2*zeta*(1-c-zeta*s)
}

// kernel returns C and s of Response for x >= 0. The two real decays are
// taken as exp(-x/(zeta+q)) and exp(-x(zeta+q)), q = sqrt(zeta^2-1), so that
// nothing overflows, and near zeta = 1 the series in z is used.
func kernel(x, zeta float64) (c, s float64) {
	q2 := zeta*zeta - 1
	z := q2 * x * x
	switch {
	case z < -0.01:
		sin, cos := math.Sincos(math.Sqrt(-z))
		e := math.Exp(-zeta * x)
		return e * cos, e * x * sin / math.Sqrt(-z)
	case z > 0.01:
		q := math.Sqrt(q2)
		slow, fast := math.Exp(-x/(zeta+q)), math.Exp(-x*(zeta+q))
		return (slow + fast) / 2, (slow - fast) / (2 * q)
	}
	e := math.Exp(-zeta * x)
	return e * coshSeries(z), e * x * (1 + z*(1./6+z*(1./120+z*(1./5040+z/362880))))
}

// coshSeries is cosh(sqrt z) for |z| <= 0.01, to rounding.
func coshSeries(z float64) float64 {
	return 1 + z*(1./2+z*(1./24+z*(1./720+z/40320)))
}

// third returns K = (x C - s)/(zeta^2 - 1), which carries the derivative with
// respect to damping (dg/dzeta = -K), from x and its kernel.
func third(x, c, s, q2 float64) float64 {
	z := q2 * x * x
	if z > -0.01 && z < 0.01 {
		e := c / coshSeries(z)
		return e * x * x * x * (1./3 + z*(1./30+z*(1./840+z*(1./45360+z/3991680))))
	}
	return (x*c - s) / q2
}

// blockSize is how many samples are carried by recursion before the kernel
// is taken exactly again; the error of the recursion over it is below 2e-15.
const blockSize = 64

// waves holds x, C and s for one block of equally spaced samples.
type waves struct {
	x, c, s [blockSize]float64
}

// fill sets the first n entries for x = x0, x0 + d, ... by the addition
// theorem C' = C Cd + q2 s sd, s' = s Cd + C sd. Entries with x <= 0, before
// the step, get x = 0, C = 1, s = 0, for which g and all derivatives vanish.
func (v *waves) fill(x0, d, zeta, cd, sd float64, n int) { v.fillFrom(0, x0, d, zeta, cd, sd, n) }

// fillFrom is fill for n entries from one on.
func (v *waves) fillFrom(from int, x0, d, zeta, cd, sd float64, n int) {
	q2 := zeta*zeta - 1
	xs, cs, ss := v.x[from:from+n], v.c[from:from+n], v.s[from:from+n]
	i := 0
	for ; i < n && x0+float64(i)*d <= 0; i++ {
		xs[i], cs[i], ss[i] = 0, 1, 0
	}
	if i == n {
		return
	}
	x := x0 + float64(i)*d
	c, s := kernel(x, zeta)
	qs := q2 * sd
	for ; i < n; i++ {
		xs[i], cs[i], ss[i] = x, c, s
		c, s = c*cd+s*qs, s*cd+c*sd
		x += d
	}
}

// settling returns the longest time constant of the response in seconds:
// 1/(zeta w) when it oscillates, (zeta + sqrt(zeta^2-1))/w when it does not.
func settling(w, zeta float64) float64 {
	if zeta < 1 {
		return 1 / (zeta * w)
	}
	return (zeta + math.Sqrt(zeta*zeta-1)) / w
}
