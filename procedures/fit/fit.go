// Package fit draws lines and curves through readings and works out what static
// readings say of a UUT. It knows no units and judges nothing.
//
// Order of use: NewCurve to correct the reference, then Static for all figures;
// it uses Line (ordinary, in float64), Lines (the four linearities) and, where
// the noise grows, a weighted line. Linear and FitPolynomial are least squares
// with stated noise and shared errors in some 32 digits, York the line with
// errors in both.
package fit

import (
	"errors"
	"math"
	"slices"
)

// ErrNoLine: fewer than three readings, unequal lengths, all x equal, or
// numbers so large or small that the line is none that a double can hold.
var ErrNoLine = errors.New("no straight line can be fitted to these readings")

// Straight is y = Intercept + Slope x with standard uncertainties from the
// residuals.
type Straight struct {
	Intercept, Slope     float64
	UIntercept, USlope   float64
	Covariance, Residual float64 // of intercept and slope; standard deviation of the residuals
	DoF                  int     // of Residual
}

// Line is the ordinary least-squares line of y on x (same length, n >= 3):
//
//	slope     = Sum (x-mx)(y-my) / Sum (x-mx)^2
//	intercept = my - slope mx
//	residual  = sqrt(Sum r^2 / (n-2)), r = y - intercept - slope x
//	u(slope) = residual / sqrt(Sxx), u(intercept) = residual sqrt(1/n + mx^2/Sxx)
//	covariance = -residual^2 mx / Sxx, Sxx = Sum (x-mx)^2
//
// by two-pass centred sums and one refinement on the residuals; the sums are
// taken of x and y scaled by powers of two, which changes no digit and lets no
// square overflow. ErrNoLine where there is none. Source: textbook; GUM H.3.
func Line(x, y []float64) (Straight, error) {
	n := float64(len(x))
	if len(x) < 3 || len(y) != len(x) || slices.Min(x) == slices.Max(x) {
		return Straight{}, ErrNoLine
	}
	mx, my := mean(x), mean(y)
	fx, fy := scaleFor(x, mx), scaleFor(y, my)
	dx := func(i int) float64 { return (x[i] - mx) * fx }
	dy := func(i int) float64 { return (y[i] - my) * fy }
	var sxx, sxy float64
	for i := range x {
		sxx += dx(i) * dx(i)
		sxy += dx(i) * dy(i)
	}
	b := sxy / sxx
	var rest float64
	for i := range x {
		rest += dx(i) * (dy(i) - b*dx(i))
	}
	b += rest / sxx
	var ss float64
	for i := range x {
		r := dy(i) - b*dx(i)
		ss += r * r
	}
	s := math.Sqrt(ss / (n - 2)) // scaled by fy, as b is by fy/fx
	scaled := mx * fx
	slope := b / fy * fx
	l := Straight{
		Intercept: my - slope*mx, Slope: slope, Residual: s / fy, DoF: len(x) - 2,
		USlope: s / math.Sqrt(sxx) / fy * fx, UIntercept: s * math.Sqrt(1/n+scaled*scaled/sxx) / fy,
		Covariance: -s * s * scaled / sxx / fy * fx / fy,
	}
	for _, v := range []float64{l.Intercept, l.Slope, l.Residual, l.USlope, l.UIntercept, l.Covariance} {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return Straight{}, ErrNoLine
		}
	}
	return l, nil
}

// scaleFor is a power of two that brings the largest distance of x from m to
// about 1; 1 when there is none.
func scaleFor(x []float64, m float64) float64 {
	var most float64
	for _, v := range x {
		most = max(most, math.Abs(v-m))
	}
	_, e := math.Frexp(most)
	return math.Ldexp(1, -min(max(e, -1000), 1000))
}

// mean in two passes; not empty. Equal values give exactly that value.
func mean(x []float64) float64 {
	var sum, rest float64
	for _, v := range x {
		sum += v
	}
	m := sum / float64(len(x))
	for _, v := range x {
		rest += v - m
	}
	return m + rest/float64(len(x))
}

// At is the line at x and its standard uncertainty, of the line and not of one
// more reading: u^2 = u(intercept)^2 + x^2 u(slope)^2 + 2 x covariance.
// Source: GUM H.3.4.
func (l Straight) At(x float64) (y, u float64) {
	v := l.UIntercept*l.UIntercept + x*x*l.USlope*l.USlope + 2*x*l.Covariance
	return l.Intercept + l.Slope*x, math.Sqrt(max(v, 0))
}

// Where is the x at which the mean of times further readings of y lies on the
// line, and its standard uncertainty by the line's and their scatter:
//
//	x = (y - intercept)/slope
//	u(x)^2 = (residual^2/times + u(intercept)^2 + x^2 u(slope)^2 + 2 x covariance)/slope^2
//
// ErrNoLine for a slope of zero or fewer than one reading.
// Source: EURACHEM/CITAC guide, example A5, eq. of the calibration line.
func (l Straight) Where(y float64, times int) (x, u float64, err error) {
	if l.Slope == 0 || times < 1 {
		return 0, 0, ErrNoLine
	}
	x = (y - l.Intercept) / l.Slope
	_, on := l.At(x)
	return x, math.Sqrt(l.Residual*l.Residual/float64(times)+on*on) / math.Abs(l.Slope), nil
}
