// Package fit draws straight lines through static readings. It knows no units
// and judges nothing. Order of use: Line.
package fit

import (
	"errors"
	"math"
)

// ErrNoLine: fewer than three readings, unequal lengths, or all x equal.
var ErrNoLine = errors.New("no straight line can be fitted to these readings")

// Straight is y = Intercept + Slope x with standard uncertainties from the
// residuals, n - 2 degrees of freedom.
type Straight struct {
	Intercept, Slope     float64
	UIntercept, USlope   float64
	Covariance, Residual float64 // of intercept and slope; standard deviation of the residuals
}

// Line is the ordinary least-squares line of y on x (same length, n >= 3):
// slope = Sum (x-mx)(y-my) / Sum (x-mx)^2, by two-pass centred sums and one
// refinement on the residuals. Source: textbook; GUM H.3.
func Line(x, y []float64) (Straight, error) {
	n := float64(len(x))
	if len(x) < 3 || len(y) != len(x) {
		return Straight{}, ErrNoLine
	}
	mx, my := mean(x), mean(y)
	var sxx, sxy float64
	for i := range x {
		sxx += (x[i] - mx) * (x[i] - mx)
		sxy += (x[i] - mx) * (y[i] - my)
	}
	if !(sxx > 0) {
		return Straight{}, ErrNoLine
	}
	slope := sxy / sxx
	var rest float64
	for i := range x {
		rest += (x[i] - mx) * ((y[i] - my) - slope*(x[i]-mx))
	}
	slope += rest / sxx
	var ss float64
	for i := range x {
		r := (y[i] - my) - slope*(x[i]-mx)
		ss += r * r
	}
	s := math.Sqrt(ss / (n - 2))
	return Straight{
		Intercept: my - slope*mx, Slope: slope, Residual: s,
		USlope: s / math.Sqrt(sxx), UIntercept: s * math.Sqrt(1/n+mx*mx/sxx), Covariance: -s * s * mx / sxx,
	}, nil
}

func mean(x []float64) float64 {
	var m, rest float64
	for _, v := range x {
		m += v / float64(len(x))
	}
	for _, v := range x {
		rest += (v - m) / float64(len(x))
	}
	return m + rest
}
