package fit

import "math"

// Lines returns the largest |deviation| of points (x rising, no x twice) from
// four lines: least squares (at least three points, else nil), terminal-based
// (through the end points), zero-based (through the first point, its slope
// such that the largest deviation is least) and independent (both free). One
// point gives nil for all, two give zero.
//
// Independent: W(b) = max(y - bx) - min(y - bx) is convex and piecewise linear
// with its breaks at the slopes of the edges of the convex hull, so the best
// slope is one of them; the deviation is W/2. Zero-based: over pairs i < j of
// points above the first, E = max |ri dj - rj di| / (di + dj), d = x - x0,
// r = y - y0. The end chord is taken off first, against cancellation.
// Source: definitions of IEC 61298-2 from memory; the geometry is textbook.
func Lines(x, y []float64) Linearities {
	n := len(x)
	if n < 2 || len(y) != n {
		return Linearities{}
	}
	chord := (y[n-1] - y[0]) / (x[n-1] - x[0])
	r := make([]float64, n)
	var terminal float64
	for i := range r {
		r[i] = (y[i] - y[0]) - chord*(x[i]-x[0])
		if i > 0 && i < n-1 { // the ends lie on the chord
			terminal = math.Max(terminal, math.Abs(r[i]))
		}
	}
	r[n-1] = 0
	out := Linearities{Terminal: &terminal}
	zero := zeroBased(x, r)
	free := independent(x, r)
	out.ZeroBased, out.Independent = &zero, &free
	if n == 2 {
		least := 0.0
		out.LeastSquares = &least
	} else if l, err := Line(x, r); err == nil {
		var least float64
		for i := range r {
			least = math.Max(least, math.Abs(r[i]-l.Intercept-l.Slope*x[i]))
		}
		out.LeastSquares = &least
	}
	return out
}

func zeroBased(x, r []float64) float64 {
	var e float64
	for j := 2; j < len(x); j++ {
		for i := 1; i < j; i++ {
			di, dj := x[i]-x[0], x[j]-x[0]
			e = math.Max(e, math.Abs((r[i]-r[0])*dj-(r[j]-r[0])*di)/(di+dj))
		}
	}
	return e
}

func independent(x, r []float64) float64 {
	best := math.Inf(1)
	for _, upper := range []float64{1, -1} {
		h := hull(x, r, upper)
		for k := 1; k < len(h); k++ {
			i, j := h[k-1], h[k]
			b := (r[j] - r[i]) / (x[j] - x[i])
			lo, hi := math.Inf(1), math.Inf(-1)
			for m := range x {
				d := r[m] - b*(x[m]-x[0])
				lo, hi = math.Min(lo, d), math.Max(hi, d)
			}
			best = math.Min(best, (hi-lo)/2)
		}
	}
	return best
}

// hull returns the indices of the upper (sign 1) or lower (-1) convex hull.
func hull(x, y []float64, sign float64) []int {
	var h []int
	for i := range x {
		for len(h) > 1 {
			a, b := h[len(h)-2], h[len(h)-1]
			if sign*((x[b]-x[a])*(y[i]-y[a])-(y[b]-y[a])*(x[i]-x[a])) < 0 {
				break
			}
			h = h[:len(h)-1]
		}
		h = append(h, i)
	}
	return h
}
