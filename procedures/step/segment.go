package step

import (
	"math"
	"slices"
)

// analysis is one call of Analyse.
type analysis struct {
	trace    Trace
	settings Settings
	dt       float64
	quantum  float64 // step of the readout's digits, 0 if none is seen
}

// window is the part of a trace in which one step is fitted.
type window struct {
	from, pre int // from <= i < pre lies surely before the step
	onset, to int // to: before the next step, or the end
	threshold float64
}

// Windows are cut this many settling time constants from the step: what lies
// beyond says next to nothing of fn and zeta, and drift need not be straight
// over it.
const (
	longWindow = 200
	settled    = 12 // time constants after which a step no longer disturbs the next
)

// steps walks along the trace from onset to onset.
func (a *analysis) steps() []Step {
	y, rate := a.trace.Pressure, a.trace.Rate
	least := a.settings.MinimumStep
	if least == 0 {
		least = spread(y) / 20
	}
	if !(least > 0) {
		return nil
	}
	var steps []Step
	from := 0
	onset, ok := onsets(y, rate, least, 0)
	for ok {
		look := onset + int(holdOff*rate)
		next, more := onsets(y, rate, least, look)
		w := window{from: from, onset: onset, to: len(y), threshold: least}
		if more {
			w.to = before(y, rate, onset, next, len(y))
		}
		w.pre = before(y, rate, from, onset, w.to)
		f, fitted := a.fit(w)
		for more && fitted && a.explains(f, onset, next) {
			// What looked like a further step is this one still ringing.
			next, more = onsets(y, rate, least, next+int(holdOff*rate))
			w.to = len(y)
			if more {
				w.to = before(y, rate, onset, next, len(y))
			}
			f, fitted = a.fit(w)
		}
		if fitted {
			if s, is := a.judge(f); is {
				steps = append(steps, s)
			}
		}
		from = a.settledAt(f, fitted, onset, w.to)
		onset, ok = next, more
	}
	return steps
}

// settledAt is where the baseline of the next step may begin.
func (a *analysis) settledAt(f fitted, ok bool, onset, to int) int {
	latest := onset + (to-onset)*7/10
	if !ok {
		return latest
	}
	tau := settling(math.Exp(f.theta[lnOmega]), math.Exp(f.theta[lnZeta]))
	end := float64(onset) + (settled*tau+f.width())*a.trace.Rate
	return int(math.Min(end, float64(latest)))
}

// fitted is a window with the model found in it.
type fitted struct {
	found
	window
	second  found // another minimum, if rival
	rival   bool
	problem *problem
	base    float64 // level and height that the samples were scaled with
	scale   float64
	origin  int   // sample at which time is 0
	post    int   // first sample after the edge's middle
	spikes  []int // samples left out, from f.from
}

func (f *fitted) width() float64 {
	if f.problem.fitWidth {
		return math.Sqrt(f.theta[squared])
	}
	return f.problem.width
}

// fit searches the model in w. It fails when the window holds no lasting
// change of level.
func (a *analysis) fit(w window) (fitted, bool) {
	f, half, ok := a.set(w)
	if !ok {
		return f, false
	}
	coarse := a.coarse(f.problem, w, f.origin)
	var found1 bool
	f.found, f.second, found1, f.rival = searchAll(coarse, f.problem, half)
	if !found1 {
		return f, false
	}
	f.place(a)
	// Cut a window that is far longer than the answer, and fit again.
	tau := settling(math.Exp(f.theta[lnOmega]), math.Exp(f.theta[lnZeta]))
	reach := int(math.Max((longWindow*tau+f.width())*a.trace.Rate, 256))
	cut := w
	cut.to = min(w.to, f.post+reach)
	cut.from = max(w.from, min(f.post-reach, w.pre-int(memory*a.trace.Rate)))
	if cut.to-cut.from <= (w.to-w.from)*9/10 {
		if g, _, ok := a.set(cut); ok {
			g.second, g.rival = f.second, false
			g.found = polish(g.problem, f.theta)
			if !math.IsInf(g.at.cost, 1) {
				f = g
			}
		}
	}
	f.leaveOutSpikes()
	f.place(a)
	return f, true
}

// leaveOutSpikes puts the model's value in place of single samples, or two
// in a row, that stand out by more than seven robust standard deviations,
// and searches again, until none is left. A crowd of them is no spikes but a
// wrong model, and stays.
func (f *fitted) leaveOutSpikes() {
	p := f.problem
	original := slices.Clone(p.y)
	for range 4 {
		r := f.residuals(f.jacobian()[:linear])
		for i := range r {
			r[i] += original[i] - p.y[i]
		}
		spikes := standingOut(r)
		if len(spikes) == len(f.spikes) && (len(spikes) == 0 || slices.Equal(spikes, f.spikes)) && f.replaced(spikes, r, original) {
			return
		}
		f.spikes = spikes
		copy(p.y, original)
		for _, i := range spikes {
			p.y[i] = original[i] - r[i]
		}
		p.prepare()
		again := polish(p, f.theta)
		if math.IsInf(again.at.cost, 1) {
			return
		}
		f.found = again
	}
}

// replaced tells whether the values standing in for spikes already agree
// with the model, to a hundredth of the noise.
func (f *fitted) replaced(spikes []int, r, original []float64) bool {
	noise := math.Sqrt(f.at.cost / float64(len(r)))
	for _, i := range spikes {
		if math.Abs(original[i]-r[i]-f.problem.y[i]) > 0.01*noise {
			return false
		}
	}
	return true
}

// standingOut lists the spikes among residuals in the scaled unit.
func standingOut(r []float64) []int {
	sizes := make([]float64, len(r))
	for i, v := range r {
		sizes[i] = math.Abs(v)
	}
	slices.Sort(sizes)
	limit := math.Max(7*1.4826*middle(sizes), 1e-3)
	var spikes []int
	run := 0
	for i, v := range r {
		if math.Abs(v) <= limit {
			run = 0
			continue
		}
		if run++; run > 2 {
			return nil
		}
		spikes = append(spikes, i)
	}
	if len(spikes) > max(2, len(r)/100) {
		return nil
	}
	return spikes
}

// place finds the first sample after the middle of the edge.
func (f *fitted) place(a *analysis) {
	at := float64(f.origin)
	if f.problem.applied == nil {
		at += f.theta[delay] * a.trace.Rate
	}
	f.post = max(f.from, min(int(math.Ceil(at)), f.to))
}

// set scales the samples of w, finds the half-way crossing (its time is
// half, from the origin at the onset) and prepares the problem.
func (a *analysis) set(w window) (f fitted, half float64, ok bool) {
	f.window = w
	y := a.trace.Pressure
	if w.to-w.onset < 4 || w.pre-w.from < 2 {
		return f, 0, false
	}
	f.base = median(y[w.from:w.pre])
	f.scale = median(y[w.onset+(w.to-w.onset)*3/4:w.to]) - f.base
	if !(math.Abs(f.scale) > w.threshold/4) {
		return f, 0, false
	}
	f.origin = w.onset
	crossing := w.pre
	for crossing < w.to && (y[crossing]-f.base)/f.scale < 0.5 {
		crossing++
	}
	if crossing == w.to || crossing == 0 {
		return f, 0, false
	}
	here, there := (y[crossing-1]-f.base)/f.scale, (y[crossing]-f.base)/f.scale
	part := 1.0
	if there > here {
		part = math.Min((0.5-here)/(there-here), 1)
	}
	half = (float64(crossing-1-f.origin) + part) * a.dt
	f.problem = a.problem(w, f.base, f.scale, f.origin)
	if a.trace.Applied != nil && f.problem.applied == nil {
		return f, 0, false
	}
	return f, half, true
}

// problem makes the least-squares problem of the samples of w.
func (a *analysis) problem(w window, base, scale float64, origin int) *problem {
	n := w.to - w.from
	p := &problem{
		one: make([]float64, n), tau: make([]float64, n), y: make([]float64, n),
		first: float64(w.from-origin) * a.dt, dt: a.dt,
	}
	for i := range n {
		p.one[i] = 1
		p.tau[i] = 2*float64(i)/float64(n-1) - 1
		p.y[i] = (a.trace.Pressure[w.from+i] - base) / scale
	}
	switch {
	case a.trace.Applied != nil:
		p.applied = a.appliedIn(w)
	case a.settings.EdgeStated:
		p.width = a.settings.EdgeTime / 0.8
	default:
		p.fitWidth = true
	}
	after := float64(w.to-w.onset) * a.dt
	p.low = [2]float64{math.Log(2 * math.Pi * 0.15 / after), math.Log(0.005)}
	p.high = [2]float64{math.Log(2 * math.Pi * 2 * a.trace.Rate), math.Log(20)}
	p.prepare()
	return p
}

// appliedIn scales the applied pressure of w, nil when it does not move.
func (a *analysis) appliedIn(w window) *appliedInput {
	u := a.trace.Applied[w.from:w.to]
	pre := u[:w.pre-w.from]
	base := 0.0
	for _, v := range pre {
		base += v / float64(len(pre))
	}
	height := median(u[len(u)-(w.to-w.onset)/4-1:]) - base
	if !(math.Abs(height) > 0) {
		return nil
	}
	in := &appliedInput{u: make([]float64, len(u))}
	for i, v := range u {
		in.u[i] = (v - base) / height
	}
	return in
}

// mostCoarse bounds the samples of a scan with an applied pressure.
const mostCoarse = 4096

// coarse makes the problem the grid is scanned on: block means whose length
// grows with the distance from the onset (a fiftieth of it), so that a fast
// answer keeps its samples and a long trace costs little. With an applied
// pressure the recursion needs every sample, and the window is cut instead.
func (a *analysis) coarse(full *problem, w window, origin int) *problem {
	if full.applied != nil {
		cut := w
		cut.from = max(w.from, w.pre-mostCoarse/4)
		cut.to = min(w.to, cut.from+mostCoarse)
		if cut.to-cut.from == w.to-w.from {
			return full
		}
		offset, n := cut.from-w.from, cut.to-cut.from
		p := &problem{
			one: full.one[offset : offset+n], tau: full.tau[offset : offset+n], y: full.y[offset : offset+n],
			first: full.first + float64(offset)*a.dt, dt: a.dt,
			applied: &appliedInput{u: full.applied.u[offset : offset+n]},
			low:     full.low, high: full.high,
		}
		p.prepare()
		return p
	}
	p := &problem{width: full.width, fitWidth: full.fitWidth, low: full.low, high: full.high}
	centre := w.onset - w.from
	for i := 0; i < len(full.y); {
		distance := max(i-centre, centre-i)
		length := max(1, distance/50)
		if i < centre {
			length = max(1, distance/20)
		}
		length = min(length, len(full.y)-i)
		var sum, tau float64
		for j := i; j < i+length; j++ {
			sum += full.y[j]
			tau += full.tau[j]
		}
		root := math.Sqrt(float64(length))
		p.one = append(p.one, root)
		p.tau = append(p.tau, tau/root)
		p.y = append(p.y, sum/root)
		p.times = append(p.times, full.first+(float64(i)+float64(length-1)/2)*a.dt)
		i += length
	}
	p.prepare()
	return p
}

// explains tells whether the model, carried on past its window, foretells
// what was taken for a further onset.
func (a *analysis) explains(f fitted, onset, next int) bool {
	y := a.trace.Pressure
	end := min(len(y), next+max(8, (next-onset)/4))
	w, zeta := math.Exp(f.theta[lnOmega]), math.Exp(f.theta[lnZeta])
	if f.problem.applied != nil {
		return false
	}
	n := float64(f.to - f.from - 1)
	var miss, swing float64
	for i := next; i < end; i++ {
		x := w * (float64(i-f.origin)*a.dt - f.theta[delay])
		level := f.beta[0] + f.beta[1]*(2*float64(i-f.from)/n-1)
		v := (y[i] - f.base) / f.scale
		miss += math.Pow(v-level-f.beta[response]*Ramp(x, w*f.width(), zeta), 2)
		swing += math.Pow(v-level-f.beta[response], 2)
	}
	return miss < 0.1*swing
}
