package step

import "math"

// fitted is a window with the model found in it.
type fitted struct {
	found
	window
	second  found // another minimum, if rival
	rival   bool
	alias   found // a faster answer that leaves much the same samples, if aliased
	aliased bool
	problem *problem
	base    float64 // level and height that the samples were scaled with
	scale   float64
	origin  int   // sample at which time is 0
	post    int   // first sample after the edge's middle
	spikes  []int // samples left out, from f.from

	appliedMiddle float64      // of a measured applied pressure, s from the origin
	course        courseSpread // of it between its samples
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
	var any bool
	f.found, f.second, any, f.rival = searchAll(coarse, f.problem, half, a.readout.lag())
	if !any {
		return f, false
	}
	f.alias, f.aliased = aliases(f.problem, f.found)
	f.place(a)
	// Cut a window that is far longer than the answer, and fit again.
	tau := settling(math.Exp(f.theta[lnOmega]), math.Exp(f.theta[lnZeta]))
	reach := int(math.Max((longWindow*tau+f.width())*a.trace.Rate, 256))
	cut := w
	cut.to = min(w.to, f.post+reach)
	cut.from = max(w.from, min(f.post-reach, w.pre-int(memory*a.trace.Rate)))
	if cut.to-cut.from <= (w.to-w.from)*9/10 {
		if g, _, ok := a.set(cut); ok {
			g.found = polish(g.problem, f.theta)
			if g.aliased = f.aliased; g.aliased {
				g.alias = polish(g.problem, f.alias.theta)
			}
			if g.rival = f.rival; g.rival {
				g.second = polish(g.problem, f.second.theta)
			}
			if !math.IsInf(g.at.cost, 1) {
				f = g
			}
		}
	}
	if f.problem.measured {
		f.betweenSamples()
	}
	f.leaveOutSpikes()
	f.place(a)
	return f, true
}

// place finds the first sample after the middle of the edge.
func (f *fitted) place(a *analysis) {
	at := float64(f.origin)
	if !f.problem.measured {
		at += (f.theta[delay] + a.readout.lag()) * a.trace.Rate
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
	f.problem = a.problem(w, f.base, f.scale, f.origin, half)
	if a.trace.Applied != nil && f.problem.applied == nil {
		return f, 0, false
	}
	if f.problem.measured {
		f.appliedMiddle = f.problem.halfway(w.pre - w.from)
	}
	return f, half, true
}

// problem makes the least-squares problem of the samples of w.
func (a *analysis) problem(w window, base, scale float64, origin int, half float64) *problem {
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
		p.applied, p.measured = a.appliedIn(w), true
	case a.settings.EdgeStated:
		p.width = a.settings.EdgeTime / 0.8
	default:
		p.fitWidth = true
	}
	if !p.measured && a.readout.shaped() {
		// The first corner of the edge is put on a division.
		cell := a.dt / divisions
		corner := p.first + math.Round((half-a.readout.centre-p.width/2-p.first)/cell)*cell
		p.applied = &appliedInput{u: make([]float64, n), shape: a.readout, anchor: corner + p.width/2}
		p.applied.form(p.width, p.first, p.dt, false)
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
	if a.settings.AppliedUnfiltered && a.readout.shaped() {
		u = a.readout.through(u, a.dt)
	}
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
	if full.measured {
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
			applied:  &appliedInput{u: full.applied.u[offset : offset+n]},
			measured: true, low: full.low, high: full.high,
		}
		p.prepare()
		return p
	}
	p := &problem{width: full.width, fitWidth: full.fitWidth, low: full.low, high: full.high}
	if full.applied != nil {
		// A ramp as wide in its variance stands in for the readout.
		p.width, p.fitWidth = math.Sqrt(p.width*p.width+12*a.readout.variance), false
	}
	p.blocks(full, w.onset-w.from, a.dt, 50, 20)
	p.prepare()
	return p
}

// blocks fills p with means of the samples of full: alone near the centre,
// further off of 2, 4, 8 ... together, so that their length stays between a
// half and the whole of the distance over after (before, ahead of the centre).
// Blocks of one length follow each other evenly, which a recursion can use.
func (p *problem) blocks(full *problem, centre int, dt float64, after, before int) {
	size := func(i int) int {
		over := (i - centre) / after
		if i < centre {
			over = (centre - i) / before
		}
		length := 1
		for 2*length <= over {
			length *= 2
		}
		return length
	}
	for i := 0; i < len(full.y); {
		length := min(size(i), len(full.y)-i)
		if i < centre {
			length = min(size(i), centre-i) // from the far end down, so that a block does not reach into finer ones
			for length > 1 && length > size(i+length-1) {
				length /= 2
			}
		}
		var sum, tau float64
		for j := i; j < i+length; j++ {
			sum += full.y[j]
			tau += full.tau[j]
		}
		root := math.Sqrt(float64(length))
		p.one = append(p.one, root)
		p.tau = append(p.tau, tau/root)
		p.y = append(p.y, sum/root)
		p.times = append(p.times, full.first+(float64(i)+float64(length-1)/2)*dt)
		if n := len(p.runs); n == 0 || p.runs[n-1].length != length {
			p.runs = append(p.runs, run{from: len(p.times) - 1, length: length, spacing: float64(length) * dt})
		}
		p.runs[len(p.runs)-1].to = len(p.times)
		i += length
	}
}

// run is a stretch of blocks of one length.
type run struct {
	from, to int // blocks from <= i < to
	length   int // samples
	spacing  float64
}
