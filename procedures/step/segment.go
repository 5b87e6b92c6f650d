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
	quantum  float64  // step of the readout's digits, 0 if none is seen
	readout  *readout // nil when none is stated
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
			s, is = a.judge(f, true)
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
		if s, is := a.judge(g, false); !is || !s.Determined || s.doubted() || float64(to-g.post)*a.dt < reach {
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

// answer is g at sample i for a step whose edge is ideal or a ramp; a ramp as
// wide in its variance stands in for a readout.
func (f *fitted) answer(a *analysis, i int) float64 {
	if f.problem.measured {
		return 1
	}
	w, width := math.Exp(f.theta[lnOmega]), f.width()
	if a.readout.shaped() {
		width = math.Sqrt(width*width + 12*a.readout.variance)
	}
	return Ramp(w*(float64(i-f.origin)*a.dt-f.theta[delay]-a.readout.lag()), w*width, math.Exp(f.theta[lnZeta]))
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

// explains tells whether the model, carried on past its window, foretells
// what was taken for a further onset.
func (a *analysis) explains(f fitted, onset, next int) bool {
	if f.problem.measured {
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
