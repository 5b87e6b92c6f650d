package fit

import (
	"fmt"
	"math"
	"slices"
)

// Polynomial is y = Sum_k b_k x^k. Model holds b, from the constant up, and
// its covariance. For a value use At, which keeps its digits where the powers
// of x cancel.
type Polynomial struct {
	Model
	middle, half double // x = middle + half t
	b            []double
	covariance   [][]double // of the coefficients of t
}

// FitPolynomial is the least-squares polynomial of y on x (same length) to
// the order stated, 0 for a constant. The noise is as in Linear.
//
// The fit is made on t = (x - middle)/half, which runs from -1 to 1, and the
// coefficients of x worked out from it, both in some 32 digits: on x itself
// the powers are so alike that seven of fifteen digits are lost at order 10.
//
// Errors as Linear; ErrModel also for fewer distinct x than coefficients and
// for a negative order. Source: textbook; NIST StRD, set Filip, is why.
func FitPolynomial(x, y []float64, order int, noise Noise) (Polynomial, error) {
	if order < 0 || len(x) == 0 || len(y) != len(x) {
		return Polynomial{}, fmt.Errorf("%w: order %d, %d x for %d readings", ErrModel, order, len(x), len(y))
	}
	if err := finite(x); err != nil {
		return Polynomial{}, err
	}
	low, high := of(slices.Min(x)), of(slices.Max(x))
	f := Polynomial{middle: low.plus(high).times(of(0.5)), half: high.minus(low).times(of(0.5))}
	if !(f.half.hi > 0) {
		if order > 0 {
			return Polynomial{}, fmt.Errorf("%w: all x are equal", ErrModel)
		}
		f.half = of(1)
	}
	s, err := solve(order+1, func(i int, to []double) {
		f.powers(x[i], to)
	}, y, noise)
	if err != nil {
		return Polynomial{}, err
	}
	f.b, f.covariance = s.b, s.covariance
	f.Model, err = s.expanded(f.middle, f.half).model()
	return f, err
}

// powers are 1, t, t^2... of one x.
func (f Polynomial) powers(x float64, to []double) {
	t := of(x).minus(f.middle).over(f.half)
	to[0] = of(1)
	for k := 1; k < len(to); k++ {
		to[k] = to[k-1].times(t)
	}
}

// At is the polynomial at x and its standard uncertainty, of the curve and not
// of one more reading. The zero Polynomial is zero.
func (f Polynomial) At(x float64) (y, u float64) {
	if len(f.b) == 0 {
		return 0, 0
	}
	t := make([]double, len(f.b))
	f.powers(x, t)
	var v double
	for i := range t {
		v = v.plus(t[i].times(dot(f.covariance[i], t)))
	}
	return dot(f.b, t).value(), v.root().value()
}

// expanded turns coefficients of t = (x - middle)/half into those of x: with
// t = a + c x, t^k = Sum_j T_jk x^j, the coefficients are T b, their
// covariance T V T'.
func (s solution) expanded(middle, half double) solution {
	n := len(s.b)
	c := of(1).over(half)
	a := middle.negative().times(c)
	power := make([]double, n) // of t, as a polynomial of x
	power[0] = of(1)
	turn := make([][]double, n) // T, by rows
	for j := range turn {
		turn[j] = make([]double, n)
	}
	for k := range n {
		for j := range k + 1 {
			turn[j][k] = power[j]
		}
		for j := n - 1; j >= 0; j-- {
			power[j] = power[j].times(a)
			if j > 0 {
				power[j] = power[j].plus(power[j-1].times(c))
			}
		}
	}
	apply := func(x []double) []double {
		out := make([]double, n)
		for j := range out {
			out[j] = dot(turn[j], x)
		}
		return out
	}
	out := s
	out.b = apply(s.b)
	out.shared = nil
	for _, e := range s.shared {
		out.shared = append(out.shared, apply(e))
	}
	half1 := make([][]double, n) // rows of V T'
	for i := range half1 {
		half1[i] = apply(s.covariance[i])
	}
	out.covariance = make([][]double, n)
	for i := range out.covariance {
		out.covariance[i] = make([]double, n)
	}
	column := make([]double, n)
	for j := range n {
		for i := range n {
			column[i] = half1[i][j]
		}
		for i, v := range apply(column) {
			out.covariance[i][j] = v
		}
	}
	return out
}

// Straight is the polynomial of first order in the form of a Straight; false
// for any other order.
func (f Polynomial) Straight() (Straight, bool) {
	if len(f.Coefficients) != 2 {
		return Straight{}, false
	}
	v := f.Covariance
	return Straight{
		Intercept: f.Coefficients[0], Slope: f.Coefficients[1], UIntercept: math.Sqrt(v[0][0]), USlope: math.Sqrt(v[1][1]),
		Covariance: v[0][1], Residual: f.Residual, DoF: f.DoF,
	}, true
}
