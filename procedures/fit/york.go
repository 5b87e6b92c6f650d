package fit

import (
	"errors"
	"fmt"
	"math"
)

// ErrNoConvergence: the iteration for errors in both found no end.
var ErrNoConvergence = errors.New("the line with errors in both did not converge")

// Both is a straight line fitted with errors in x and y; its uncertainties
// come from those stated. ChiSquare is the weighted sum of squares S, to be
// held against DoF; Residual is sqrt(S/DoF).
type Both struct {
	Straight
	ChiSquare float64
}

// York is the straight line through readings that err in x by ux and in y by
// uy (standard uncertainties, independent between readings and of each other;
// all of one length, n >= 3; no reading may have both zero):
//
//	W_i    = 1/(uy_i^2 + b^2 ux_i^2)
//	beta_i = W_i (U_i uy_i^2 + b V_i ux_i^2), U = x - Sum Wx/Sum W, V likewise
//	b      = Sum W beta V / Sum W beta U, repeated until b stands still
//	u(b)^2 = 1/Sum W (beta - mean beta)^2 (weighted mean), u(a)^2 = 1/Sum W +
//	         (x adjusted, mean)^2 u(b)^2, covariance = -(that mean) u(b)^2
//
// The static figures don't use it: with a reference that scatters by 0.05 mmHg
// over a span of 300 the ordinary slope is off by 2.5e-7. It is there to check
// that on readings where it might matter.
//
// ErrData: unequal lengths, not finite, negative. ErrNoLine: fewer than three,
// or all x equal. ErrNoConvergence after 500 rounds.
// Source: York, Evensen, Lopez Martinez, De Basabe Delgado, Am. J. Phys. 72
// (2004) 367, eq. 13, without correlation of the errors; from memory, held to
// Pearson's data with York's weights.
func York(x, y, ux, uy []float64) (Both, error) {
	if len(ux) != len(x) || len(uy) != len(x) {
		return Both{}, fmt.Errorf("%w: every reading needs both uncertainties", ErrData)
	}
	for _, column := range [][]float64{x, y, ux, uy} {
		if err := finite(column); err != nil {
			return Both{}, err
		}
	}
	for i := range ux {
		if !(ux[i] >= 0 && uy[i] >= 0 && ux[i]+uy[i] > 0) {
			return Both{}, fmt.Errorf("%w: reading %d has no usable uncertainty", ErrData, i+1)
		}
	}
	start, err := Line(x, y)
	if err != nil {
		return Both{}, err
	}
	b := start.Slope
	for range 500 {
		next, done := york(x, y, ux, uy, b)
		switch {
		case !usable(next.Slope, next.Intercept, next.USlope, next.UIntercept, next.Covariance, next.ChiSquare):
			return Both{}, ErrNoConvergence
		case done:
			return next, nil
		}
		b = next.Slope
	}
	return Both{}, ErrNoConvergence
}

// york is one round from the slope b, and whether it left b where it was.
func york(x, y, ux, uy []float64, b float64) (Both, bool) {
	n := len(x)
	w := make([]float64, n)
	var sw, mx, my float64
	for i := range w {
		w[i] = 1 / (uy[i]*uy[i] + b*b*ux[i]*ux[i])
		sw += w[i]
	}
	for i := range w {
		mx += w[i] / sw * x[i]
		my += w[i] / sw * y[i]
	}
	beta := make([]float64, n)
	var up, down, middle float64
	for i := range w {
		u, v := x[i]-mx, y[i]-my
		beta[i] = w[i] * (u*uy[i]*uy[i] + b*v*ux[i]*ux[i])
		up += w[i] * beta[i] * v
		down += w[i] * beta[i] * u
		middle += w[i] / sw * beta[i]
	}
	slope := up / down
	out := Both{Straight: Straight{Slope: slope, Intercept: my - slope*mx, DoF: n - 2}}
	var squares float64
	for i := range w {
		squares += w[i] * (beta[i] - middle) * (beta[i] - middle)
		r := (y[i] - my) - slope*(x[i]-mx)
		out.ChiSquare += w[i] * r * r
	}
	at := mx + middle // mean of the adjusted x
	out.USlope = 1 / math.Sqrt(squares)
	out.UIntercept = math.Sqrt(1/sw + at*at/squares)
	out.Covariance = -at / squares
	out.Residual = math.Sqrt(out.ChiSquare / float64(n-2))
	return out, math.Abs(slope-b) <= 1e-15*math.Abs(slope) || slope == b
}
