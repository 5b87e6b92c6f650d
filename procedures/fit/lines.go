package fit

import (
	"math"
	"slices"
	"sort"
)

// Linearities are the largest deviations from four lines, each under its own
// name; nil where there is none.
type Linearities struct{ Independent, Terminal, ZeroBased, LeastSquares *Deviation }

// Deviation is the largest |deviation| of points from a line.
type Deviation struct {
	Value            float64
	Intercept, Slope float64 // of the line
	Standard         float64 // what the noise of the points leaves in Value; NaN when it was not stated
}

// Lines holds points against four lines: least squares (from three points on;
// two lie on it), terminal-based (through the end points), zero-based (through
// the lowest point, its slope such that the largest deviation is least) and
// independent (both free). x in any order; the y at one x are averaged. One x
// gives nil for all, two give zero.
//
// u is the standard uncertainty of each y by its own noise, nil when not known.
// A deviation is a sum of a few y with weights that follow from the points the
// line touches; Standard is the root of the sum of squares of weight and u, the
// largest where several sets of points lie equally far off. It says nothing of
// the bias that the largest of several noisy deviations has.
//
// Independent: W(b) = max(y - bx) - min(y - bx) is convex and piecewise linear
// with its breaks at the slopes of the edges of the convex hull, so the best
// slope is one of them; the deviation is W/2. All edges are tried: halving
// between them goes wrong where two are parallel, which whole numbers often
// are. Zero-based: over pairs of points above the first, the largest
// |ri dj - rj di| / (di + dj), d = x - x0, r = y - y0, found by exchange. The
// end chord is taken off first, against cancellation.
//
// O(n log n) but for the zero-based line, whose passes are few on any curve met
// in practice. Nil for all where lengths differ or a number is not finite or
// beyond 1e150.
//
// Source: definitions of IEC 61298-2 from memory; the geometry is textbook.
func Lines(x, y, u []float64) Linearities {
	if len(x) != len(y) || u != nil && len(u) != len(x) || finite(x) != nil || finite(y) != nil || finite(u) != nil {
		return Linearities{}
	}
	if !rising(x) {
		x, y, u = merged(x, y, u)
	}
	if len(x) < 2 {
		return Linearities{}
	}
	p := newPoints(x, y, u)
	if len(x) == 2 { // all four are the line through both
		return Linearities{Terminal: p.terminal(), ZeroBased: p.terminal(), Independent: p.terminal(), LeastSquares: p.terminal()}
	}
	return Linearities{Terminal: p.terminal(), ZeroBased: p.zeroBased(), Independent: p.independent(), LeastSquares: p.leastSquares()}
}

func rising(x []float64) bool {
	for i := 1; i < len(x); i++ {
		if !(x[i] > x[i-1]) {
			return false
		}
	}
	return true
}

// merged sorts by x and averages what stands at one x.
func merged(x, y, u []float64) (mx, my, mu []float64) {
	order := make([]int, len(x))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return compareFloats(x[a], x[b]) })
	for len(order) > 0 {
		n := 1
		for n < len(order) && x[order[n]] == x[order[0]] {
			n++
		}
		var sum, squares float64
		for _, i := range order[:n] {
			sum += y[i]
			if u != nil {
				squares += u[i] * u[i]
			}
		}
		mx, my = append(mx, x[order[0]]), append(my, sum/float64(n))
		if u != nil {
			mu = append(mu, math.Sqrt(squares)/float64(n))
		}
		order = order[n:]
	}
	return mx, my, mu
}

// points are scaled to size 1 by powers of two, less the end chord.
type points struct {
	d, r, u   []float64 // x - x0; y less the chord; its standard uncertainty, may be nil
	x0, y0    float64
	chord     float64
	fx, fy    float64
	tolerance float64 // of r: what is nearer than this is the same
}

func newPoints(x, y, u []float64) *points {
	n := len(x)
	all := make([]float64, 3*n)
	p := &points{d: all[:n], r: all[n : 2*n], x0: x[0], y0: y[0], fx: scaleFor(x, x[0])}
	p.chord = (y[n-1] - y[0]) / (x[n-1] - x[0])
	for i := range x {
		p.d[i] = (x[i] - x[0]) * p.fx
		p.r[i] = (y[i] - y[0]) - p.chord*(x[i]-x[0])
	}
	p.r[n-1] = 0
	p.fy = scaleFor(p.r, 0)
	var size float64 // of what was subtracted, whose rounding is left
	for i := range p.r {
		p.r[i] *= p.fy
		size = max(size, max(math.Abs(y[i]), math.Abs(p.chord*(x[i]-x[0]))))
	}
	p.tolerance = 1e-9 + 1e-14*size*p.fy
	if u != nil {
		p.u = all[2*n:]
		for i := range u {
			p.u[i] = u[i] * p.fy
		}
	}
	return p
}

// deviation puts a line of r, intercept at x0 and slope over d, back into x
// and y. squares are of weights times u.
func (p *points) deviation(value, intercept, slope, squares float64) *Deviation {
	d := &Deviation{Value: value / p.fy, Slope: p.chord + slope/p.fy*p.fx, Standard: math.NaN()}
	d.Intercept = p.y0 + intercept/p.fy - d.Slope*p.x0
	if p.u != nil {
		d.Standard = math.Sqrt(squares) / p.fy
	}
	return d
}

// farthest is the largest |r - intercept - slope d|, and the first and last
// point that lie as far off.
func (p *points) farthest(intercept, slope float64) (most float64, first, last int) {
	off := func(i int) float64 { return math.Abs(p.r[i] - intercept - slope*p.d[i]) }
	for i := range p.r {
		most = max(most, off(i))
	}
	first = -1
	for i := range p.r {
		if off(i) >= most-p.tolerance {
			if first < 0 {
				first = i
			}
			last = i
		}
	}
	return most, first, last
}

// square is (weight u_i)^2.
func (p *points) square(i int, weight float64) float64 {
	if p.u == nil {
		return 0
	}
	return weight * p.u[i] * weight * p.u[i]
}

func (p *points) terminal() *Deviation {
	n := len(p.r)
	var most, squares float64
	for i := 1; i < n-1; i++ { // the ends lie on the chord
		most = max(most, math.Abs(p.r[i]))
	}
	for i := 1; i < n-1; i++ {
		if share := p.d[i] / p.d[n-1]; math.Abs(p.r[i]) >= most-p.tolerance {
			squares = max(squares, p.square(i, 1)+p.square(0, 1-share)+p.square(n-1, share))
		}
	}
	return p.deviation(most, 0, 0, squares)
}

// leastSquares: the residual of point j is Sum_k ([j = k] - h_jk) y_k with
// h_jk = 1/n + (d_j - m)(d_k - m)/Sxx.
func (p *points) leastSquares() *Deviation {
	n := float64(len(p.r))
	line, err := Line(p.d, p.r)
	if err != nil {
		return nil
	}
	most, first, last := p.farthest(line.Intercept, line.Slope)
	m := mean(p.d)
	var sxx, a, b, c float64
	for i, d := range p.d {
		sxx += (d - m) * (d - m)
		a += p.square(i, 1)
		b += p.square(i, 1) * (d - m)
		c += p.square(i, d-m)
	}
	var squares float64
	for _, j := range []int{first, last} {
		d := p.d[j] - m
		squares = max(squares, p.square(j, 1)*(1-2*(1/n+d*d/sxx))+a/n/n+2*d*b/n/sxx+d*d*c/sxx/sxx)
	}
	return p.deviation(most, line.Intercept, line.Slope, squares)
}

// zeroBased holds a pair of points, one above and one below the line through
// the first, equally far: no line does better for that pair. The point that
// lies farthest off takes the place of the one on its side, which makes the
// distance grow, until no point lies farther off than the pair.
func (p *points) zeroBased() *Deviation {
	n := len(p.r)
	off := func(i int, slope float64) float64 { return p.r[i] - slope*p.d[i] } // r[0] is 0
	above, below := n-1, n-1
	var slope, best float64
	for {
		far := above
		for i := 1; i < n; i++ {
			if math.Abs(off(i, slope)) > math.Abs(off(far, slope)) {
				far = i
			}
		}
		if off(far, slope) > 0 {
			above = far
		} else {
			below = far
		}
		da, db := p.d[above], p.d[below]
		e := (p.r[above]*db - p.r[below]*da) / (da + db)
		if !(e > best) {
			break
		}
		slope, best = (p.r[above]+p.r[below])/(da+db), e
	}
	// The pairs that carry the line: the first and last on either side.
	up, down := [2]int{-1, -1}, [2]int{-1, -1}
	for i := 1; i < n; i++ {
		for _, side := range []struct {
			pair *[2]int
			is   bool
		}{{&up, off(i, slope) >= best-p.tolerance}, {&down, off(i, slope) <= -best+p.tolerance}} {
			if side.is {
				if side.pair[0] < 0 {
					side.pair[0] = i
				}
				side.pair[1] = i
			}
		}
	}
	var squares float64
	for _, i := range up {
		for _, j := range down {
			if i < 0 || j < 0 || i == j {
				continue
			}
			a, b := p.d[i], p.d[j]
			squares = max(squares, p.square(i, b/(a+b))+p.square(j, a/(a+b))+p.square(0, (a-b)/(a+b)))
		}
	}
	return p.deviation(best, 0, slope, squares)
}

// independent tries every edge of the hull against the opposite side.
func (p *points) independent() *Deviation {
	upper, lower := p.hull(1), p.hull(-1)
	slope := func(h []int, k int) float64 { return (p.r[h[k+1]] - p.r[h[k]]) / (p.d[h[k+1]] - p.d[h[k]]) }
	best, middle, steepness := math.Inf(1), 0.0, 0.0
	try := func(on, opposite int, b float64) {
		if w := math.Abs((p.r[on] - p.r[opposite]) - b*(p.d[on]-p.d[opposite])); w < best {
			best, steepness = w, b
			middle = (p.r[on] + p.r[opposite] - b*(p.d[on]+p.d[opposite])) / 2
		}
	}
	for k := range len(upper) - 1 {
		b := slope(upper, k)
		try(upper[k], lower[sort.Search(len(lower)-1, func(m int) bool { return slope(lower, m) >= b })], b)
	}
	for k := range len(lower) - 1 {
		b := slope(lower, k)
		try(lower[k], upper[sort.Search(len(upper)-1, func(m int) bool { return slope(upper, m) <= b })], b)
	}
	return p.deviation(best/2, middle, steepness, p.carried(best/2, middle, steepness))
}

// carried is the largest sum of squares of weights and noise over the threes of
// points that carry the independent line: one on one side, and its nearest
// neighbours on the other side.
func (p *points) carried(e, intercept, slope float64) float64 {
	if p.u == nil {
		return 0
	}
	n := len(p.r)
	touches := func(i, side int) bool { // 0 above, 1 below
		off := p.r[i] - intercept - slope*p.d[i]
		return math.Abs(off-e*float64(1-2*side)) <= p.tolerance
	}
	right := make([][2]int, n) // the next point that touches, by side; n: none
	next := [2]int{n, n}
	for i := n - 1; i >= 0; i-- {
		right[i] = next
		for side := range next {
			if touches(i, side) {
				next[side] = i
			}
		}
	}
	var squares float64
	left := [2]int{-1, -1}
	for i := range n {
		for side := range left {
			from, to := left[1-side], right[i][1-side]
			if touches(i, side) && from >= 0 && to < n {
				share := (p.d[i] - p.d[from]) / (p.d[to] - p.d[from])
				squares = max(squares, p.square(i, 0.5)+p.square(from, (1-share)/2)+p.square(to, share/2))
			}
		}
		for side := range left {
			if touches(i, side) {
				left[side] = i
			}
		}
	}
	return squares
}

// hull returns the indices of the upper (sign 1) or lower (-1) convex hull.
func (p *points) hull(sign float64) []int {
	h := make([]int, 0, len(p.r))
	for i := range p.r {
		for len(h) > 1 {
			a, b := h[len(h)-2], h[len(h)-1]
			if sign*((p.d[b]-p.d[a])*(p.r[i]-p.r[a])-(p.r[b]-p.r[a])*(p.d[i]-p.d[a])) < 0 {
				break
			}
			h = h[:len(h)-1]
		}
		h = append(h, i)
	}
	return h
}

func compareFloats(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}
