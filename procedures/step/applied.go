package step

import "math"

// appliedInput is what drives the line, on the same samples as the trace: a
// measured applied pressure, less its level before the step and divided by its
// own height so that the fitted height is the height of the answer; or the
// shape that a stated readout gives the edge. Between samples it is straight,
// but for some intervals that are divided into finer ones.
type appliedInput struct {
	u    []float64
	from int       // first divided interval
	fine []float64 // at from, from + 1/divisions, ...; one more than its divisions

	// shaped: the input is made anew for every width of the edge.
	shape  *readout
	anchor float64   // time of the middle of the edge in u, s from the origin
	du     []float64 // derivatives of u and fine by the square of the width
	dfine  []float64
	lower  []float64 // room
}

// divisions of a refined interval.
const divisions = 16

func (a *appliedInput) at(i int) float64 { return clamped(a.u, i) }

func clamped(u []float64, i int) float64 { return u[max(0, min(i, len(u)-1))] }

// inside returns the fine values of the interval that begins at node, nil
// where it is not divided.
func (a *appliedInput) inside(fine []float64, node int) []float64 {
	k := (node - a.from) * divisions
	if k < 0 || k+divisions >= len(fine) {
		return nil
	}
	return fine[k : k+divisions+1]
}

// hold is the exact step over delta = w dt radians of the state (p, q = p'/w)
// of d2p/dt2 + 2 zeta w dp/dt + w^2 p = w^2 u with u straight between its samples
// (first-order hold): (p, q) becomes phi (p, q) + b0 u0 + b1 u1.
type hold struct {
	phi    [2][2]float64
	b0, b1 [2]float64
}

// newHold follows from superposition: C + zeta s is the return from p = 1,
// g the answer to a unit step and G the answer to a unit ramp.
func newHold(delta, zeta float64) hold {
	if delta == 0 {
		return hold{phi: [2][2]float64{{1, 0}, {0, 1}}}
	}
	c, s := kernel(delta, zeta)
	g := 1 - c - zeta*s
	ramp, rampSlope := (delta-s-2*zeta*g)/delta, g/delta
	return hold{
		phi: [2][2]float64{{c + zeta*s, s}, {-s, c - zeta*s}},
		b0:  [2]float64{g - ramp, s - rampSlope},
		b1:  [2]float64{ramp, rampSlope},
	}
}

// difference is (a - b)/h, entry by entry.
func difference(a, b hold, h float64) hold {
	var d hold
	for i := range 2 {
		for j := range 2 {
			d.phi[i][j] = (a.phi[i][j] - b.phi[i][j]) / h
		}
		d.b0[i] = (a.b0[i] - b.b0[i]) / h
		d.b1[i] = (a.b1[i] - b.b1[i]) / h
	}
	return d
}

// triple is a hold with its derivatives with respect to ln w and ln zeta,
// taken by central differences: ten numbers a pass, not one a sample.
type triple struct {
	value, omega, zeta hold
}

func newTriple(delta, zeta float64) triple {
	const h = 1e-4
	up, down := math.Exp(h), math.Exp(-h)
	t := triple{value: newHold(delta, zeta)}
	if delta > 0 {
		t.omega = difference(newHold(delta*up, zeta), newHold(delta*down, zeta), 2*h)
		t.zeta = difference(newHold(delta, zeta*up), newHold(delta, zeta*down), 2*h)
	}
	return t
}

// recursor carries the state and its sensitivities along the input. Column g
// at sample i is p at t_i - t0: the state at the sample before that instant,
// advanced by the part of a sample that is left.
type recursor struct {
	whole, part triple
	fine, rest  triple // the same over one division, and over what is left of one
	omega       float64
	fraction    float64 // of a sample that is left
	divided     int     // whole divisions in it
	left        float64 // of a division
	lag         int     // sample i needs the state at node i - lag
	state       [3][2]float64
	width       [2]float64 // sensitivity to the square of the width
}

func (r *recursor) start(a *appliedInput, theta *[most]float64, dt float64) {
	w, zeta := math.Exp(theta[lnOmega]), math.Exp(theta[lnZeta])
	behind := theta[delay] - a.anchor
	lag := math.Ceil(behind / dt)
	r.lag = int(lag)
	r.omega = w
	r.whole = newTriple(w*dt, zeta)
	r.fraction = lag - behind/dt
	r.part = newTriple(w*dt*r.fraction, zeta)
	if a.fine != nil {
		r.divided = min(int(r.fraction*divisions), divisions-1)
		r.left = r.fraction*divisions - float64(r.divided)
		r.fine = newTriple(w*dt/divisions, zeta)
		r.rest = newTriple(w*dt/divisions*r.left, zeta)
	}
	r.state, r.width = [3][2]float64{}, [2]float64{}
	// With a negative delay the first sample needs a later node.
	for node := 0; node < -r.lag; node++ {
		r.over(a, node)
	}
}

// over takes the state from a node to the next and returns it as it was the
// fraction on the way.
func (r *recursor) over(a *appliedInput, node int) (out [3][2]float64, width [2]float64) {
	if fine := a.inside(a.fine, node); fine != nil {
		dfine := a.inside(a.dfine, node)
		for k := range divisions {
			if k == r.divided {
				out = r.rest.advance(&r.state, fine[k], fine[k]+r.left*(fine[k+1]-fine[k]))
				if dfine != nil {
					width = r.rest.value.advance(r.width, dfine[k], dfine[k]+r.left*(dfine[k+1]-dfine[k]))
				}
			}
			r.state = r.fine.advance(&r.state, fine[k], fine[k+1])
			if dfine != nil {
				r.width = r.fine.value.advance(r.width, dfine[k], dfine[k+1])
			}
		}
		return out, width
	}
	u0, u1 := a.at(node), a.at(node+1)
	out = r.part.advance(&r.state, u0, u0+r.fraction*(u1-u0))
	r.state = r.whole.advance(&r.state, u0, u1)
	if a.du != nil {
		u0, u1 = clamped(a.du, node), clamped(a.du, node+1)
		width = r.part.value.advance(r.width, u0, u0+r.fraction*(u1-u0))
		r.width = r.whole.value.advance(r.width, u0, u1)
	}
	return out, width
}

func (r *recursor) fill(a *appliedInput, start, k int, g *[blockSize]float64, d *[4][blockSize]float64) {
	for i := range k {
		out, width := r.state, r.width
		if node := start + i - r.lag; node >= 0 {
			out, width = r.over(a, node)
		}
		g[i] = out[0][0]
		d[lnOmega][i] = out[1][0]
		d[lnZeta][i] = out[2][0]
		d[delay][i] = -r.omega * out[0][1]
		d[squared][i] = width[0]
	}
}

// advance takes one state over one hold.
func (h *hold) advance(x [2]float64, u0, u1 float64) [2]float64 {
	return [2]float64{
		h.phi[0][0]*x[0] + h.phi[0][1]*x[1] + h.b0[0]*u0 + h.b1[0]*u1,
		h.phi[1][0]*x[0] + h.phi[1][1]*x[1] + h.b0[1]*u0 + h.b1[1]*u1,
	}
}

// advance takes the state (value, d/dln w, d/dln zeta) over one hold.
func (t *triple) advance(x *[3][2]float64, u0, u1 float64) [3][2]float64 {
	p, q := x[0][0], x[0][1]
	var y [3][2]float64
	v, o, z := &t.value, &t.omega, &t.zeta
	for i := range 2 {
		y[0][i] = v.phi[i][0]*p + v.phi[i][1]*q + v.b0[i]*u0 + v.b1[i]*u1
		y[1][i] = v.phi[i][0]*x[1][0] + v.phi[i][1]*x[1][1] +
			o.phi[i][0]*p + o.phi[i][1]*q + o.b0[i]*u0 + o.b1[i]*u1
		y[2][i] = v.phi[i][0]*x[2][0] + v.phi[i][1]*x[2][1] +
			z.phi[i][0]*p + z.phi[i][1]*q + z.b0[i]*u0 + z.b1[i]*u1
	}
	return y
}

// halfway is the time of sample i and part at which an applied pressure, from
// the sample from on, is half way; 0 when it never is.
func (p *problem) halfway(from int) float64 {
	u := p.applied.u
	for i := max(1, from); i < len(u); i++ {
		if u[i] >= 0.5 {
			part := (0.5 - u[i-1]) / (u[i] - u[i-1])
			if !(part >= 0 && part <= 1) {
				part = 1
			}
			return p.first + (float64(i-1)+part)*p.dt
		}
	}
	return 0
}

// passed is noise of the applied pressure as it arrives in the fit, in the
// scaled unit: J'(H H')J with H the line, times its variance, and the
// variance it gives each sample.
type passed struct {
	meat     [most][most]float64
	variance float64
}

// passThrough follows white noise of the applied pressure, estimated before
// the step, through the line. H'J is the recursion run over each column
// backwards.
func (f *fitted) passThrough(j [][]float64, applied []float64) passed {
	var out passed
	u := applied[f.from:f.to]
	_, height := appliedLevels(u, f.window)
	sigma := lineScatter(u[:(f.pre-f.from)*3/4]) / height * f.beta[response]
	n := len(u)
	back := make([][]float64, len(j))
	for k := range j {
		reversed := make([]float64, n)
		for i := range n {
			reversed[i] = j[k][n-1-i]
		}
		back[k] = f.problem.run(reversed, &f.theta)
	}
	for k := range j {
		for m := range j {
			out.meat[k][m] = sigma * sigma * dot(back[k], back[m])
		}
	}
	impulse := make([]float64, n)
	impulse[1] = 1
	answer := f.problem.run(impulse, &f.theta)
	out.variance = sigma * sigma * dot(answer, answer)
	return out
}

// run passes any input through the line at theta.
func (p *problem) run(u []float64, theta *[most]float64) []float64 {
	in := appliedInput{u: u}
	var r recursor
	r.start(&in, theta, p.dt)
	out := make([]float64, len(u))
	var g [blockSize]float64
	var d [4][blockSize]float64
	for start := 0; start < len(u); start += blockSize {
		k := min(blockSize, len(u)-start)
		r.fill(&in, start, k, &g, &d)
		copy(out[start:], g[:k])
	}
	return out
}

// form makes the input of a shaped edge for one width: the step response of
// the readout, with a ramp before it, centred on the anchor. Values are taken
// a twelfth of their second difference down, so that the straight lines
// between them have the means of what they stand for; not at the first, where
// the corner of the edge lies.
func (a *appliedInput) form(width float64, first, dt float64, derivative bool) {
	n := len(a.u)
	long := float64(len(a.shape.value)) * a.shape.h
	start := a.anchor - width/2
	a.from = max(0, int(math.Floor((start-first)/dt))-1)
	to := min(n-1, int(math.Ceil((start+width+long-first)/dt))+2)
	cells := max(0, to-a.from) * divisions
	if cap(a.fine) < cells+1 {
		a.fine = make([]float64, 0, cells+1+64*divisions)
	}
	if derivative && cap(a.dfine) < cells+1 {
		a.dfine, a.lower = make([]float64, 0, cap(a.fine)), make([]float64, 0, cap(a.fine))
	}
	a.fine = a.fine[:cells+1]
	h := dt / divisions
	at := func(k int, width float64) float64 {
		return a.shape.edge(first+float64(a.from)*dt+float64(k)*h-a.anchor, width)
	}
	values := func(out []float64, width float64) {
		before, here := at(-1, width), at(0, width)
		for k := range out {
			next := at(k+1, width)
			out[k] = here
			if before > 0 {
				out[k] -= (next - 2*here + before) / 12
			}
			before, here = here, next
		}
	}
	values(a.fine, width)
	for i := range a.u {
		switch {
		case i <= a.from:
			a.u[i] = 0
		case i >= to:
			a.u[i] = 1
		default:
			a.u[i] = a.fine[(i-a.from)*divisions]
		}
	}
	if !derivative {
		return
	}
	// By difference, from a width that is not lost in the divisions.
	a.dfine = a.dfine[:cells+1]
	low := math.Max(width, h)
	high := math.Sqrt(low*low + h*h)
	values(a.dfine, high)
	a.lower = a.lower[:cells+1]
	values(a.lower, low)
	for k := range a.dfine {
		a.dfine[k] = (a.dfine[k] - a.lower[k]) / (high*high - low*low)
	}
	if a.du == nil {
		a.du = make([]float64, n) // 0 outside the divided intervals
	}
}
