package fit

import (
	"math"
	"sort"
)

// Lines returns the largest |deviation| of points (x rising, no x twice) from
// four lines: least squares (at least three points, else nil), terminal-based
// (through the end points), zero-based (through the first point, its slope
// such that the largest deviation is least) and independent (both free). One
// point gives nil for all, two give zero. O(n log n) but for the zero-based
// line, whose passes are few on any curve met in practice.
//
// Independent: W(b) = max(y - bx) - min(y - bx) is convex and piecewise linear
// with its breaks at the slopes of the edges of the convex hull, so the best
// slope is one of them; the deviation is W/2. All edges are tried: halving
// between them goes wrong where two are parallel, which whole numbers often
// are. Zero-based: over pairs of points above the first, the largest
// |ri dj - rj di| / (di + dj), d = x - x0, r = y - y0, found by exchange. The
// end chord is taken off first, against cancellation.
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

// zeroBased holds a pair of points, one above and one below the line through
// the first, equally far: no line does better for that pair. The point that
// lies farthest off takes the place of the one on its side, which makes the
// distance grow, until no point lies farther off than the pair.
func zeroBased(x, r []float64) float64 {
	off := func(i int, slope float64) float64 { return r[i] - slope*(x[i]-x[0]) } // r[0] is 0
	above, below := len(x)-1, len(x)-1
	var slope, best float64
	for {
		far := above
		for i := 1; i < len(x); i++ {
			if math.Abs(off(i, slope)) > math.Abs(off(far, slope)) {
				far = i
			}
		}
		if off(far, slope) > 0 {
			above = far
		} else {
			below = far
		}
		da, db := x[above]-x[0], x[below]-x[0]
		e := (r[above]*db - r[below]*da) / (da + db)
		if !(e > best) {
			return best
		}
		slope, best = (r[above]+r[below])/(da+db), e
	}
}

// independent tries every edge of the hull against the opposite side.
func independent(x, r []float64) float64 {
	upper, lower := hull(x, r, 1), hull(x, r, -1)
	slope := func(h []int, k int) float64 { return (r[h[k+1]] - r[h[k]]) / (x[h[k+1]] - x[h[k]]) }
	best := math.Inf(1)
	try := func(u, l int, b float64) { best = math.Min(best, ((r[u]-r[l])-b*(x[u]-x[l]))/2) }
	for k := range len(upper) - 1 {
		b := slope(upper, k)
		try(upper[k], lower[sort.Search(len(lower)-1, func(m int) bool { return slope(lower, m) >= b })], b)
	}
	for k := range len(lower) - 1 {
		b := slope(lower, k)
		try(upper[sort.Search(len(upper)-1, func(m int) bool { return slope(upper, m) <= b })], lower[k], b)
	}
	return math.Max(best, 0)
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
