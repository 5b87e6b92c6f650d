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
	// y is the pressure less what the steps already fitted still move, so
	// that a step need not wait for the one before to settle.
	y []float64
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
	rate := a.trace.Rate
	least := a.settings.MinimumStep
	if least == 0 {
		least = spread(a.trace.Pressure) / 20
	}
	if !(least > 0) {
		return nil
	}
	a.y = slices.Clone(a.trace.Pressure)
	var steps []Step
	hold := int(holdOff * rate)
	from, split := 0, false // split: the step before was cut short by a hidden onset
	onset, ok := onsets(a.y, rate, least, 0)
	for ok {
		next, more := onsets(a.y, rate, least, onset+hold)
		w := a.window(from, onset, next, more, least)
		f, fits := a.fit(w)
		for more && fits && a.explains(f, onset, next) {
			// What looked like a further step is this one still ringing.
			next, more = onsets(a.y, rate, least, next+hold)
			w = a.window(from, onset, next, more, least)
			f, fits = a.fit(w)
		}
		earlier, hidden := a.hidden(w, f, fits)
		if hidden {
			next, more = earlier, true
			w = a.window(from, onset, next, more, least)
			f, fits = a.fit(w)
		}
		from = onset + (w.to-onset)*7/10
		var s Step
		is := false
		if fits {
			s, is = a.judge(f)
		}
		if split && !s.Determined {
			steps[len(steps)-1].reserve(Misfit, "the trace leaves the fit soon after the step, and not by another step")
		}
		if is {
			steps = append(steps, s)
		}
		if s.Determined {
			from = a.settle(f, from)
		}
		split = hidden && s.Determined
		onset, ok = next, more
	}
	return steps
}

// window lays the window of a step between the end of the one before and the
// beginning of the next.
func (a *analysis) window(from, onset, next int, more bool, least float64) window {
	w := window{from: from, onset: onset, to: len(a.y), threshold: least}
	if more {
		w.to = before(a.y, a.trace.Rate, onset, next, len(a.y))
	}
	w.pre = before(a.y, a.trace.Rate, from, onset, w.to)
	return w
}

// hidden looks for a further step that came before the hold-off was over. It
// is tried only where the fit is far worse than the noise: the window is
// halved until a fit is good, and the onset is where the trace leaves what
// that fit foretells.
func (a *analysis) hidden(w window, f fitted, fits bool) (onset int, found bool) {
	noise := lineScatter(a.y[w.from:w.pre])
	good := func(f fitted) bool {
		miss := math.Abs(f.scale) * math.Sqrt(f.at.cost/float64(f.to-f.from))
		return miss < math.Max(2*noise, 0.003*math.Abs(f.scale))
	}
	if fits && good(f) {
		return 0, false
	}
	threshold := math.Max(w.threshold, 6*noise)
	m := max(3, int(math.Ceil(confirm*a.trace.Rate)))
	for to := w.onset + (w.to-w.onset)/2; to-w.onset >= 16; to = w.onset + (to-w.onset)*3/5 {
		part := w
		part.to = to
		g, ok := a.fit(part)
		if !ok || !good(g) || g.at.cost == 0 {
			continue
		}
		reach := 2 * settling(math.Exp(g.theta[lnOmega]), math.Exp(g.theta[lnZeta]))
		if s, is := a.judge(g); !is || !s.Determined || s.has(Misfit) || float64(to-g.post)*a.dt < reach {
			return 0, false
		}
		rest := make([]float64, w.to-to)
		for i := range rest {
			rest[i] = a.y[to+i] - g.foretell(a, to+i)
		}
		for i := 0; i+m <= len(rest); i++ {
			if departs(rest[i:i+m], 0, threshold, 0, 0) {
				// A second mode swings about the level, a step moves it.
				lasts := median(rest[i:min(len(rest), i+m+int(reach*a.trace.Rate))])
				return to + i, math.Abs(lasts) > math.Max(threshold, 0.1*math.Abs(g.scale))
			}
		}
		return 0, false
	}
	return 0, false
}

// foretell is the model at sample i, which may lie beyond its window.
func (f *fitted) foretell(a *analysis, i int) float64 {
	level := f.beta[0] + f.beta[1]*(2*float64(i-f.from)/float64(f.to-f.from-1)-1)
	return f.base + f.scale*(level+f.beta[response]*f.answer(a, i))
}

// answer is g at sample i for a step whose edge is ideal or a ramp.
func (f *fitted) answer(a *analysis, i int) float64 {
	if f.problem.applied != nil {
		return 1
	}
	w := math.Exp(f.theta[lnOmega])
	return Ramp(w*(float64(i-f.origin)*a.dt-f.theta[delay]), w*f.width(), math.Exp(f.theta[lnZeta]))
}

// settle takes what a determined step still moves out of the samples after
// it and returns where the baseline of the next step may begin.
func (a *analysis) settle(f fitted, latest int) int {
	tau := settling(math.Exp(f.theta[lnOmega]), math.Exp(f.theta[lnZeta]))
	begin := min(latest, f.post+int((settled*tau+f.width())*a.trace.Rate))
	end := min(len(a.y), f.post+int((3*settled*tau+f.width())*a.trace.Rate))
	height := f.scale * f.beta[response]
	for i := begin; i < end; i++ {
		a.y[i] -= height * (f.answer(a, i) - 1)
	}
	return begin
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
// in a row, that stand out by more than eight robust standard deviations,
// and searches again, until none is left. A crowd of them is no spikes but a
// wrong model, and stays.
func (f *fitted) leaveOutSpikes() {
	p := f.problem
	original := slices.Clone(p.y)
	for range 6 {
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

// standingOut lists the spikes among residuals in the scaled unit: what
// differs from the median of itself and its four neighbours, so that the
// broad residuals of a fit that spikes have pulled aside do not hide them.
func standingOut(r []float64) []int {
	sharp := make([]float64, len(r))
	sizes := make([]float64, len(r))
	for i, v := range r {
		var near [5]float64
		k := copy(near[:], r[max(0, i-2):min(len(r), i+3)])
		slices.Sort(near[:k])
		sharp[i] = math.Abs(v - middle(near[:k]))
		sizes[i] = sharp[i]
	}
	// The median of these differences is 0.49 standard deviations for white
	// noise (simulated), so that the limit is eight.
	limit := math.Max(8/0.49*median(sizes), 1e-3)
	var spikes []int
	for i := 0; i < len(r); i++ {
		run := 0
		for i+run < len(r) && sharp[i+run] > limit {
			run++
		}
		for k := range run {
			if run <= 2 {
				spikes = append(spikes, i+k)
			}
		}
		i += run
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
	y := a.y
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
		p.y[i] = (a.y[w.from+i] - base) / scale
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
	base, height := appliedLevels(u, w)
	if !(math.Abs(height) > 0) {
		return nil
	}
	in := &appliedInput{u: make([]float64, len(u))}
	for i, v := range u {
		in.u[i] = (v - base) / height
	}
	return in
}

// appliedLevels are the level and height of an applied pressure in w. It may
// begin to move before the answer is seen: the level is a median.
func appliedLevels(u []float64, w window) (base, height float64) {
	base = median(u[:w.pre-w.from])
	return base, median(u[len(u)-(w.to-w.onset)/4-1:]) - base
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
	if f.problem.applied != nil {
		return false
	}
	var miss, swing float64
	for i := next; i < min(len(a.y), next+max(8, (next-onset)/4)); i++ {
		foretold := f.foretell(a, i)
		settled := foretold + f.scale*f.beta[response]*(1-f.answer(a, i))
		miss += math.Pow(a.y[i]-foretold, 2)
		swing += math.Pow(a.y[i]-settled, 2)
	}
	return miss < 0.1*swing
}
