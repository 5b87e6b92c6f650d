package step

import "math"

// The nonlinear parameters, in the order of theta, and the linear columns.
// ln w and ln zeta keep w and zeta positive and make steps relative.
const (
	lnOmega  = 0 // ln(2 pi fn), fn in Hz
	lnZeta   = 1
	delay    = 2 // t0: middle of the edge, or delay behind the applied pressure, s
	squared  = 3 // square of the edge width, s^2, when it is fitted
	linear   = 3 // columns of 1, drift and g
	response = 2 // index of g among the columns
)

// problem is one step to be fitted by variable projection: for given
// nonlinear parameters the baseline, drift and height follow by linear least
// squares, so only the nonlinear ones are searched (Golub and Pereyra 1973,
// with Kaufman's simplification of the derivative; from memory).
//
// The samples are equally spaced, or block means at times of their own, each
// already multiplied by the square root of its weight.
type problem struct {
	one, tau, y []float64 // the column of ones, of drift (-1..1), the pressure
	times       []float64 // of block means, s; nil for equally spaced samples
	runs        []run     // of block means
	first, dt   float64   // time of sample 0 and spacing, s
	width       float64   // edge held at this full width, s
	fitWidth    bool
	applied     *appliedInput // what drives the line; nil: an ideal edge or a ramp, in closed form
	measured    bool          // applied was measured, not made from the readout

	nonlinear int // 3, or 4 with a fitted width
	low, high [2]float64
	fixed     [3][3]float64 // inner products of one, tau and y

	beta     [linear]float64 // baseline, drift, height at the last point
	g        [blockSize]float64
	d        [4][blockSize]float64
	a, b     waves
	recursor recursor
}

// prepare forms what does not change from point to point.
func (p *problem) prepare() {
	p.nonlinear = 3
	if p.fitWidth {
		p.nonlinear = 4
	}
	base := [3][]float64{p.one, p.tau, p.y}
	for i := range base {
		for j := range i + 1 {
			p.fixed[i][j] = dot(base[i], base[j])
		}
	}
}

// hold keeps a fitted width at zero for a while, or frees it again.
func (p *problem) hold(held bool) {
	p.fitWidth = !held
	if held {
		p.applied.form(0, p.first, p.dt, false)
		p.applied.du, p.applied.dfine = nil, nil
	}
	p.prepare()
}

// normalAt fills the normal equations of the nonlinear parameters: one pass
// over the samples for the Gram matrix of [1, drift, g, dg/dtheta, y], then
// elimination of the linear columns.
func (p *problem) normalAt(theta *[most]float64, n *normal) {
	n.size = p.nonlinear
	n.cost = math.Inf(1)
	for i := range p.low {
		if !(theta[i] >= p.low[i] && theta[i] <= p.high[i]) {
			return
		}
	}
	var m [most][most]float64
	last := linear + p.nonlinear // the column of y
	for i := range 2 {
		for j := range i + 1 {
			m[i][j] = p.fixed[i][j]
		}
		m[last][i] = p.fixed[2][i]
	}
	m[last][last] = p.fixed[2][2]
	p.begin(theta)
	for start := 0; start < len(p.y); start += blockSize {
		k := min(blockSize, len(p.y)-start)
		if !p.fill(theta, start, k) {
			continue
		}
		p.accumulate(&m, start, k, last)
	}
	p.eliminate(&m, last, n)
}

// accumulate adds one block of samples to the Gram matrix.
func (p *problem) accumulate(m *[most][most]float64, start, k, last int) {
	one, tau, y := p.one[start:start+k], p.tau[start:start+k], p.y[start:start+k]
	for i := response; i < last; i++ {
		col := p.column(i)[:k]
		m[i][0] += dot(col, one)
		m[i][1] += dot(col, tau)
		m[last][i] += dot(col, y)
		for j := response; j <= i; j++ {
			m[i][j] += dot(col, p.column(j)[:k])
		}
	}
}

// column returns the block of column i >= response: g, then its derivatives.
func (p *problem) column(i int) *[blockSize]float64 {
	if i == response {
		return &p.g
	}
	return &p.d[i-linear]
}

// eliminate takes the linear columns out of the Gram matrix by three steps
// of Cholesky's scheme. What is left is J'J/A^2, J'r/A and the cost.
func (p *problem) eliminate(m *[most][most]float64, last int, n *normal) {
	for k := range linear {
		whole := p.wholeOf(k, m)
		if !(m[k][k] > 1e-13*whole) {
			return
		}
		for i := k + 1; i <= last; i++ {
			f := m[i][k] / m[k][k]
			for j := k + 1; j <= i; j++ {
				m[i][j] -= f * m[j][k]
			}
		}
	}
	for k := linear - 1; k >= 0; k-- {
		sum := m[last][k]
		for j := k + 1; j < linear; j++ {
			sum -= m[j][k] * p.beta[j]
		}
		p.beta[k] = sum / m[k][k]
	}
	height := p.beta[response]
	n.cost = math.Max(m[last][last], 0)
	n.rounding = 1e-13 * p.fixed[2][2]
	for i := range p.nonlinear {
		n.gradient[i] = height * m[last][linear+i]
		for j := range i + 1 {
			n.hessian[i][j] = height * height * m[linear+i][linear+j]
			n.hessian[j][i] = n.hessian[i][j]
		}
	}
}

// wholeOf is the size of column k before anything was taken out of it, for
// telling rounding from substance.
func (p *problem) wholeOf(k int, m *[most][most]float64) float64 {
	if k < 2 {
		return p.fixed[k][k]
	}
	return p.fixed[0][0] // g is of the order of one
}

// begin sets what one pass needs at its first sample.
func (p *problem) begin(theta *[most]float64) {
	if p.applied != nil {
		if p.applied.shape != nil && p.fitWidth {
			p.applied.form(math.Sqrt(math.Max(0, theta[squared])), p.first, p.dt, true)
		}
		p.recursor.start(p.applied, theta, p.dt)
	}
}

// fill sets g and its derivatives for k samples from start. It reports false
// when all of them lie before the step and are zero.
func (p *problem) fill(theta *[most]float64, start, k int) bool {
	if p.applied != nil {
		p.recursor.fill(p.applied, start, k, &p.g, &p.d)
		return true
	}
	w, zeta := math.Exp(theta[lnOmega]), math.Exp(theta[lnZeta])
	width := p.width
	if p.fitWidth {
		width = math.Sqrt(theta[squared])
	}
	if p.times != nil {
		p.fillTimes(theta, w, zeta, w*width, start, k)
		return true
	}
	x0, d := w*(p.first+float64(start)*p.dt-theta[delay]), w*p.dt
	if x0+float64(k-1)*d+w*width/2 <= 0 {
		return false
	}
	cd, sd := kernel(d, zeta)
	if w*width < smallWidth {
		p.a.fill(x0, d, zeta, cd, sd, k)
		p.narrow(w, zeta, w*width, k)
		return true
	}
	p.a.fill(x0+w*width/2, d, zeta, cd, sd, k)
	p.b.fill(x0-w*width/2, d, zeta, cd, sd, k)
	p.wide(w, zeta, w*width, k)
	return true
}

// fillTimes does the same for block means, each run of them by recursion and
// scaled by the root of its weight.
func (p *problem) fillTimes(theta *[most]float64, w, zeta, width float64, start, k int) {
	narrow := width < smallWidth
	for _, r := range p.runs {
		from, to := max(r.from, start), min(r.to, start+k)
		if from >= to {
			continue
		}
		x, d := w*(p.times[from]-theta[delay]), w*r.spacing
		cd, sd := kernel(d, zeta)
		if narrow {
			p.a.fillFrom(from-start, x, d, zeta, cd, sd, to-from)
			continue
		}
		p.a.fillFrom(from-start, x+width/2, d, zeta, cd, sd, to-from)
		p.b.fillFrom(from-start, x-width/2, d, zeta, cd, sd, to-from)
	}
	if narrow {
		p.narrow(w, zeta, width, k)
	} else {
		p.wide(w, zeta, width, k)
	}
	for i := range k {
		weight := p.one[start+i]
		p.g[i] *= weight
		for j := range p.nonlinear {
			p.d[j][i] *= weight
		}
	}
}

// narrow forms the columns from the waves at the centre of the edge, for an
// ideal edge or one too narrow for differences (Taylor series in the width).
// Derivatives: dg/dln w = x s, dg/dln zeta = -zeta K, dg/dt0 = -w s and, with
// e = C - zeta s = g", dy/dT^2 = w^2 e/24.
func (p *problem) narrow(w, zeta, width float64, k int) {
	q2, ww := zeta*zeta-1, width*width
	for i := range k {
		x, c, s := p.a.x[i], p.a.c[i], p.a.s[i]
		if x == 0 {
			p.g[i], p.d[0][i], p.d[1][i], p.d[2][i], p.d[3][i] = 0, 0, 0, 0, 0
			continue
		}
		kk := third(x, c, s, q2)
		e := c - zeta*s
		g3 := -s - 2*zeta*e
		g4 := -e - 2*zeta*g3
		p.g[i] = 1 - c - zeta*s + ww*(e/24+ww*g4/1920)
		p.d[lnOmega][i] = x*(s+ww*g3/24) + ww*(e/12+ww*g4/480)
		p.d[lnZeta][i] = -zeta*kk + ww/24*zeta*(2*zeta*x*s-x*c-s-zeta*zeta*kk)
		p.d[delay][i] = -w * (s + ww*g3/24)
		p.d[squared][i] = w * w * (e/24 + ww*g4/960)
	}
}

// wide forms the columns from the waves at both ends of the edge. With G the
// integral of g and H = dG/dln zeta = zeta (x s + zeta K - 2 g):
// y = [G]/X, dy/dln w = [x g]/X - y, dy/dln zeta = [H]/X, dy/dt0 = -w [g]/X,
// dy/dT^2 = w^2 (mean of the two g - y)/(2 X^2); [.] is the difference
// between the ends x + X/2 and x - X/2, X = w T.
func (p *problem) wide(w, zeta, width float64, k int) {
	q2 := zeta*zeta - 1
	for i := range k {
		xa, ca, sa := p.a.x[i], p.a.c[i], p.a.s[i]
		xb, cb, sb := p.b.x[i], p.b.c[i], p.b.s[i]
		ga, gb := 1-ca-zeta*sa, 1-cb-zeta*sb
		ka, kb := third(xa, ca, sa, q2), third(xb, cb, sb, q2)
		y := ((xa - sa - 2*zeta*ga) - (xb - sb - 2*zeta*gb)) / width
		p.g[i] = y
		p.d[lnOmega][i] = (ga*xa-gb*xb)/width - y
		p.d[lnZeta][i] = zeta * ((xa*sa + zeta*ka - 2*ga) - (xb*sb + zeta*kb - 2*gb)) / width
		p.d[delay][i] = -w * (ga - gb) / width
		p.d[squared][i] = w * w / (2 * width * width) * ((ga+gb)/2 - y)
	}
}

// dot is the inner product of two slices of equal length, in four sums so
// that additions need not wait for each other.
func dot(a, b []float64) float64 {
	b = b[:len(a)]
	var s0, s1, s2, s3 float64
	i := 0
	for ; i+4 <= len(a); i += 4 {
		s0 += a[i] * b[i]
		s1 += a[i+1] * b[i+1]
		s2 += a[i+2] * b[i+2]
		s3 += a[i+3] * b[i+3]
	}
	for ; i < len(a); i++ {
		s0 += a[i] * b[i]
	}
	return (s0 + s1) + (s2 + s3)
}
