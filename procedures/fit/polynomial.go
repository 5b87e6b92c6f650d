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

// highest is the highest order that describe knows.
const highest = 3

// describe is FitPolynomial without stated noise, up to the third order, in
// float64 and a twentieth of the time: polynomials of t that are orthogonal
// over the readings come one from the other, P' = (t - a) P - b P”, and each
// coefficient is found from what the ones before it have left. Readings carry
// far fewer digits than either has. Source: Forsythe, J. SIAM 5 (1957) 74, from
// memory.
func describe(x, y []float64, order int) (Model, error) {
	n := len(x)
	if order < 0 || order > highest || len(y) != n || n < order+2 {
		return Model{}, fmt.Errorf("%w: order %d for %d readings", ErrModel, order, n)
	}
	low, high := slices.Min(x), slices.Max(x)
	middle, half := low+(high-low)/2, (high-low)/2
	work := make([]float64, 4*n)
	t, left, p, before := work[:n], work[n:2*n], work[2*n:3*n], work[3*n:]
	for i := range x {
		t[i], p[i] = (x[i]-middle)/half, 1
	}
	copy(left, y)
	var powers, last [highest + 1]float64 // of x, in P and the one before it
	powers[0] = 1
	var b [highest + 1]float64
	var v [highest + 1][highest + 1]float64
	norm := 0.0
	for k := 0; ; k++ {
		var square, turn, share float64
		for i := range p {
			square += p[i] * p[i]
			turn += t[i] * p[i] * p[i]
			share += left[i] * p[i]
		}
		if !(square > float64(n)*negligible*negligible) {
			return Model{}, fmt.Errorf("%w: fewer distinct x than coefficients", ErrModel)
		}
		c := share / square
		for i := range left {
			left[i] -= c * p[i]
		}
		for i := range k + 1 {
			b[i] += c * powers[i]
			for j := range k + 1 {
				v[i][j] += powers[i] * powers[j] / square
			}
		}
		if k == order {
			break
		}
		a, ratio := turn/square, 0.0
		if k > 0 {
			ratio = square / norm
		}
		norm = square
		for i := range p {
			p[i], before[i] = (t[i]-a)*p[i]-ratio*before[i], p[i]
		}
		next := powers
		for j := range next {
			next[j] = (-middle/half-a)*powers[j] - ratio*last[j]
			if j > 0 {
				next[j] += powers[j-1] / half
			}
		}
		powers, last = next, powers
	}
	m := Model{Coefficients: slices.Clone(b[:order+1]), DoF: n - order - 1, Estimated: true}
	var ss float64
	for _, r := range left {
		ss += r * r
	}
	m.Residual = math.Sqrt(ss / float64(m.DoF))
	ok := usable(m.Residual) && usable(m.Coefficients...)
	all := make([]float64, (order+1)*(order+1))
	m.Covariance = make([][]float64, order+1)
	for i := range m.Covariance {
		row := all[i*(order+1) : (i+1)*(order+1)]
		for j := range row {
			row[j] = v[i][j] * m.Residual * m.Residual
		}
		m.Covariance[i] = row
		ok = ok && usable(row...)
	}
	if !ok {
		return Model{}, fmt.Errorf("%w: its figures are too large for the numbers of a computer", ErrModel)
	}
	return m, nil
}
