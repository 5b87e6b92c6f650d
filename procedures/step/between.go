package step

import "math"

// An applied pressure is known at its samples only. Straight lines between
// them (first-order hold) are right for what was made that way and for slow
// edges; an edge with a corner between two samples they blur, and a fast line
// tells the difference. Several courses through the same samples are therefore
// tried, and the answer decides; what it cannot tell apart is uncertainty.

// course is one way of the applied pressure between its samples.
type course struct {
	input *appliedInput // nil: an edge of closed form
	width float64       // of that edge, s; held unless free
	free  bool
	bends bool // at an instant that is no sample's
}

// edgeSamples are the last sample of the level before the edge and the first
// of the level after it, when the edge leaves the one and reaches the other
// for good within what its noise allows.
func edgeSamples(u []float64, pre int, noise float64) (last, first int, ok bool) {
	near := math.Max(5*noise, 1e-4)
	half := max(pre, 1)
	for half < len(u) && u[half] < 0.5 {
		half++
	}
	if half == len(u) {
		return 0, 0, false
	}
	last, first = half-1, half
	for last > 0 && u[last] > near {
		last--
	}
	for first < len(u)-1 && u[first] < 1-near {
		first++
	}
	return last, first, last > 0 && u[last] > -near-1e-9 && first < len(u)-1
}

// courses lists the ways between samples that differ from straight lines.
func courses(a *appliedInput, pre int, noise, dt float64) []course {
	last, first, ok := edgeSamples(a.u, pre, noise)
	if !ok || noise > 0.02 {
		return nil
	}
	inner := first - last - 1
	if inner > 256 {
		return nil // slow: straight lines are right to 1e-4 of the edge's width squared
	}
	if inner <= 1 {
		// Less than two samples on the edge: a ramp of any width that fits
		// between the levels, or none at all.
		widest := dt
		if inner == 1 {
			v := math.Min(math.Max(a.u[last+1], 0.01), 0.99)
			widest = dt / math.Max(v, 1-v)
		}
		return []course{{width: 0}, {width: widest, free: true}}
	}
	straight, geometric, cubic := tellings(a.u, last, first)
	least := math.Min(straight, math.Min(geometric, cubic))
	likely := func(e float64) bool { return e <= 3*least+3*noise+1e-4 }
	var all []course
	if likely(straight) {
		way, corners := cornered(a.u, last, first)
		all = append(all, course{input: a.divided(last, first, way, corners), bends: corners[0].between()})
	}
	if likely(geometric) {
		way, corners := emptying(a.u, last, noise)
		all = append(all, course{input: a.divided(last, first, way, corners), bends: corners[0].between()})
	}
	if likely(cubic) {
		all = append(all, course{input: a.divided(last, first, smooth(a.u), nil)})
	}
	return all
}

// tellings is how far the samples on the edge lie from what their neighbours
// foretell (root mean square): from a straight line, from equal factors of
// what is left, from the cubic through four.
func tellings(u []float64, last, first int) (straight, geometric, cubic float64) {
	n := 0.0
	for i := last + 2; i < first-1; i++ {
		a, b, v := u[i-1], u[i+1], u[i]
		straight += math.Pow(v-(a+b)/2, 2)
		geometric += math.Pow(v-1+math.Sqrt(math.Max(0, (1-a)*(1-b))), 2)
		cubic += math.Pow(v-(4*(a+b)-clamped(u, i-2)-clamped(u, i+2))/6, 2)
		n++
	}
	if n == 0 {
		return 0, 0, 0
	}
	return math.Sqrt(straight / n), math.Sqrt(geometric / n), math.Sqrt(cubic / n)
}

// corner is a bend of a course at an instant: the level holds before it, or
// behind it when it is an end.
type corner struct {
	at  float64 // samples
	end bool
}

// between tells whether a bend lies between two samples.
func (c corner) between() bool {
	part := c.at - math.Floor(c.at)
	return part > 0.02 && part < 0.98
}

// divided is a with the values of way in its divisions from last to first;
// way takes an interval and the part of it, 0 to 1. The lines between the
// divisions get the means of the course: a bend inside one is made good at the
// neighbouring division, curvature by a twelfth of the second difference.
func (a *appliedInput) divided(last, first int, way func(i int, part float64) float64, corners []corner) *appliedInput {
	out := &appliedInput{u: a.u, from: last, fine: make([]float64, (first-last)*divisions+1)}
	raw := make([]float64, len(out.fine))
	for k := range raw {
		i := last + k/divisions
		raw[k] = a.u[min(i, len(a.u)-1)]
		if k < len(raw)-1 {
			raw[k] = way(i, float64(k%divisions)/divisions)
		}
	}
	copy(out.fine, raw)
	for k := 1; k+1 < len(raw); k++ {
		bent := false
		for _, c := range corners {
			bent = bent || math.Abs((c.at-float64(last))*divisions-float64(k)) < 1
		}
		if !bent {
			out.fine[k] -= (raw[k+1] - 2*raw[k] + raw[k-1]) / 12
		}
	}
	for _, c := range corners {
		at := (c.at - float64(last)) * divisions
		k := int(math.Floor(at))
		if k < 0 || k+1 >= len(raw) {
			continue
		}
		part, rise := at-float64(k), raw[k+1]-raw[k]
		if c.end {
			out.fine[k+1] += rise * (1 - part) / 2
		} else {
			out.fine[k] -= rise * part / 2
		}
	}
	return out
}

// cornered: straight, but for the first and the last interval, in which the
// level holds until the neighbouring line, carried on, meets it.
func cornered(u []float64, last, first int) (func(int, float64) float64, []corner) {
	rise, settle := u[last+2]-u[last+1], u[first-1]-u[first-2]
	// Parts of the two intervals at which the lines meet the levels.
	begin, end := 0.0, 1.0
	if rise > 0 {
		begin = math.Max(0, 1-(u[last+1]-u[last])/rise)
	}
	if settle > 0 {
		end = math.Min(1, (u[first]-u[first-1])/settle)
	}
	way := func(i int, part float64) float64 {
		switch {
		case i == last && begin < 1:
			return u[last] + (u[last+1]-u[last])*math.Max(0, part-begin)/(1-begin)
		case i == first-1 && end > 0:
			return u[first-1] + (u[first]-u[first-1])*math.Min(1, part/end)
		}
		return u[i] + part*(u[i+1]-u[i])
	}
	return way, []corner{{at: float64(last) + begin}, {at: float64(first-1) + end, end: true}}
}

// emptying: what is left of the way to the final level falls by the same
// factor in equal times, as in a vessel that empties; before the first sample
// on the edge the level holds until that curve, carried back, meets it.
func emptying(u []float64, last int, noise float64) (func(int, float64) float64, []corner) {
	b, c := 1-u[last+1], 1-u[last+2]
	begin, falls := 0.0, b > 0 && c > 0 && c < b
	if falls {
		begin = math.Max(0, 1-math.Log((1-u[last])/b)/math.Log(b/c))
	}
	way := func(i int, part float64) float64 {
		a, d := 1-u[i], 1-u[i+1]
		switch {
		case i == last && falls && begin > 0:
			if part <= begin {
				return u[last]
			}
			return 1 - b*math.Pow(b/c, 1-part)
		case d > 5*noise && d < a && d > 0:
			return 1 - a*math.Pow(d/a, part)
		}
		return u[i] + part*(u[i+1]-u[i])
	}
	return way, []corner{{at: float64(last) + begin}}
}

// smooth: the cubic through two samples on either side.
func smooth(u []float64) func(int, float64) float64 {
	return func(i int, t float64) float64 {
		a, b, c, d := clamped(u, i-1), u[i], u[i+1], clamped(u, i+2)
		// Catmull and Rom's spline (from memory).
		return b + t/2*(c-a+t*(2*a-5*b+4*c-d+t*(3*(b-c)+d-a)))
	}
}

// betweenSamples takes the course of the applied pressure that explains the
// answer best. Those that explain it nearly as well weigh in the figures and
// their uncertainty by exp(-difference of the sums of squares/(2 variance)); one parameter more
// must take four variances off the sum (Akaike's and Schwarz's rules give 2
// and ln n).
//
// Where the samples themselves show a bend between two of them, straight lines
// from sample to sample are what is left of an edge, not the edge: they must
// explain the answer better by fifty to one. An edge that begins on a sample
// may have been made of straight lines, and the odds are even.
func (f *fitted) betweenSamples() {
	const bendOdds = 8 // 2 ln 50
	p := f.problem
	noise := 0.0
	if quiet := p.applied.u[:max(0, (f.pre-f.from)*3/4)]; len(quiet) > 3 {
		noise = lineScatter(quiet)
	}
	all, free := []fitted{*f}, []float64{0}
	for _, c := range courses(p.applied, f.pre-f.from, noise, p.dt) {
		g := *f
		q := *p
		g.problem = &q
		theta := f.theta
		if c.input != nil {
			q.applied = c.input
		} else {
			q.applied, q.width, q.fitWidth = nil, c.width, c.free
			theta[delay] += f.appliedMiddle
			theta[squared] = c.width * c.width / 4
		}
		q.prepare()
		g.found = polish(&q, theta)
		if math.IsInf(g.at.cost, 1) || c.free && g.theta[squared] > c.width*c.width {
			continue
		}
		all = append(all, g)
		if free = append(free, 0); c.free {
			free[len(free)-1] = 4
		}
		if c.bends {
			free[0] = bendOdds
		}
	}
	lowest := f.at.cost
	for _, g := range all {
		lowest = math.Min(lowest, g.at.cost)
	}
	variance := math.Max(lowest/math.Max(1, float64(len(p.y)-linear-p.nonlinear)), 1e-24)
	best, score := 0, math.Inf(1)
	for i, g := range all {
		if s := g.at.cost/variance + free[i]; s < score {
			best, score = i, s
		}
	}
	// Mean and standard deviation over the courses, from the best.
	var weights, lnW, lnWW, lnZ, lnZZ float64
	for i, g := range all {
		weight := math.Exp((score - g.at.cost/variance - free[i]) / 2)
		dw, dz := g.theta[lnOmega]-all[best].theta[lnOmega], g.theta[lnZeta]-all[best].theta[lnZeta]
		weights += weight
		lnW, lnWW = lnW+weight*dw, lnWW+weight*dw*dw
		lnZ, lnZZ = lnZ+weight*dz, lnZZ+weight*dz*dz
	}
	*f = all[best]
	f.course = courseSpread{
		log: lnW / weights, zeta: lnZ / weights,
		uLog: math.Sqrt(math.Max(0, lnWW/weights-math.Pow(lnW/weights, 2))), uZeta: math.Sqrt(math.Max(0, lnZZ/weights-math.Pow(lnZ/weights, 2))),
	}
}

// courseSpread is what the courses between samples add to ln fn and ln zeta
// of the best, and how uncertain that leaves them.
type courseSpread struct{ log, zeta, uLog, uZeta float64 }

// behind is the delay behind the applied pressure, s.
func (f *fitted) behind() float64 {
	if f.problem.applied == nil {
		return f.theta[delay] - f.appliedMiddle
	}
	return f.theta[delay]
}
