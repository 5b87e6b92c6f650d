package step

import "math"

// most is the largest number of parameters of a least-squares problem here.
const most = 9

// normal holds the normal equations of a sum of squares at one point: the
// cost S, the gradient J'r of -S/2 and J'J. Fixed arrays, so that the inner
// loop allocates nothing.
type normal struct {
	size     int
	cost     float64
	rounding float64 // gains below this are lost in the rounding of cost
	gradient [most]float64
	hessian  [most][most]float64
}

// objective is a sum of squares that can fill its normal equations at a
// point. A cost of +Inf means that the point is not allowed.
type objective interface {
	normalAt(theta *[most]float64, n *normal)
}

// limits of one search.
type search struct {
	floor      int // index of a parameter held >= 0, or -1
	iterations int // at most this many evaluations
	tolerance  float64
}

// minimise is a Levenberg-Marquardt search from theta, which it moves to the
// lowest point found; at holds the normal equations there. The damping is
// scaled by the diagonal of J'J and follows the ratio of actual to predicted
// gain. It stops when a step changes the cost, as predicted by the linear
// model, by less than the tolerance (relative), or when steps no longer help.
// Sources: Marquardt 1963 (the diagonal scaling), Nielsen 1999 IMM-REP-1999-05
// (the update of the damping); both from memory.
func (l search) minimise(f objective, theta *[most]float64, at *normal) (evaluations int) {
	var trial normal
	var delta, next [most]float64
	f.normalAt(theta, at)
	damping, growth, last := 1e-3, 2.0, math.Inf(1)
	for evaluations = 1; evaluations < l.iterations && !math.IsInf(at.cost, 1); {
		if !l.solve(at, damping, theta, &delta) {
			damping *= growth
			growth *= 2
			if damping > 1e16 {
				return evaluations
			}
			continue
		}
		gain := 0.0
		for i := range at.size {
			next[i] = theta[i] + delta[i]
			gain += 2 * delta[i] * at.gradient[i]
			for j := range at.size {
				gain -= delta[i] * at.hessian[i][j] * delta[j]
			}
		}
		if !(gain > 0) {
			return evaluations
		}
		f.normalAt(&next, &trial)
		evaluations++
		actual := at.cost - trial.cost
		small := gain <= l.tolerance*at.cost
		// Near a perfect fit the cost is all rounding, the gradient not yet:
		// such steps are taken on trust as long as they keep shrinking.
		trusted := gain <= at.rounding && gain < last/4 && !math.IsInf(trial.cost, 1)
		last = gain
		if actual > 0 || trusted {
			*theta, *at = next, trial
			r := 2*actual/gain - 1
			if trusted {
				r = 1
			}
			damping *= math.Max(1./10, 1-r*r*r)
			growth = 2
		} else {
			damping *= growth
			growth *= 2
		}
		if small || damping > 1e16 {
			return evaluations
		}
	}
	return evaluations
}

// solve finds the damped step. The floored parameter is never taken below 0:
// where the step would do so it is set there and the others are solved again.
func (l search) solve(at *normal, damping float64, theta, delta *[most]float64) bool {
	if !damped(at, damping, -1, 0, delta) {
		return false
	}
	if k := l.floor; k >= 0 && theta[k]+delta[k] < 0 {
		ok := damped(at, damping, k, -theta[k], delta)
		delta[k] = -theta[k] // to the last bit: a square below zero has no root
		return ok
	}
	return true
}

// damped solves (H + damping diag H) delta = gradient, with delta[k] set to
// held when k >= 0.
func damped(at *normal, damping float64, k int, held float64, delta *[most]float64) bool {
	var a [most][most]float64
	var scale [most]float64
	for i := range at.size {
		if scale[i] = math.Sqrt(at.hessian[i][i]); !(scale[i] > 0) {
			scale[i] = 1
		}
		for j := range i + 1 {
			a[i][j] = at.hessian[i][j] / scale[i] / scale[j]
		}
		a[i][i] += damping
		delta[i] = at.gradient[i] / scale[i]
	}
	if k >= 0 {
		for i := range at.size {
			delta[i] -= at.hessian[i][k] * held / scale[i]
			a[i][k], a[k][i] = 0, 0
		}
		a[k][k], delta[k] = 1, held*scale[k]
	}
	if !cholesky(&a, at.size) {
		return false
	}
	substitute(&a, delta, at.size)
	for i := range at.size {
		delta[i] /= scale[i]
	}
	return true
}

// cholesky replaces the lower triangle of the n x n matrix a by its factor L,
// a = L L', and reports whether a is positive definite to rounding.
func cholesky(a *[most][most]float64, n int) bool {
	for j := range n {
		pivot, whole := a[j][j], a[j][j]
		for k := range j {
			pivot -= a[j][k] * a[j][k]
		}
		if !(pivot > 1e-15*whole) || math.IsInf(pivot, 1) {
			return false
		}
		a[j][j] = math.Sqrt(pivot)
		for i := j + 1; i < n; i++ {
			sum := a[i][j]
			for k := range j {
				sum -= a[i][k] * a[j][k]
			}
			a[i][j] = sum / a[j][j]
		}
	}
	return true
}

// substitute solves L L' x = b in place for a factor from cholesky.
func substitute(l *[most][most]float64, b *[most]float64, n int) {
	for i := range n {
		for k := range i {
			b[i] -= l[i][k] * b[k]
		}
		b[i] /= l[i][i]
	}
	for i := n - 1; i >= 0; i-- {
		for k := i + 1; k < n; k++ {
			b[i] -= l[k][i] * b[k]
		}
		b[i] /= l[i][i]
	}
}
