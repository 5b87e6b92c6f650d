// Package ready says when a point may be taken, when a pressure has stopped
// moving, and how fast a shut-off volume loses pressure. It waits for nothing
// itself, compares with no limit, and knows no units but those of its caller:
// one pressure unit, seconds.
//
// What is judged at a point is a difference, UUT minus reference. Drift that
// both see cancels, but for slope times the difference of their delays; so the
// difference rule (Watch) waits for the pressure only as far as its slope can
// spoil the difference. Where the two are not read together (typed readings),
// and when a leak is looked for, the pressure itself must have stopped: that
// is the stricter rule (Still).
//
// Order of use: Settings with StandardFor, NewWatch for each point, Add for
// each reading of the reference with the UUT's mean around it, until
// State.Ready; State.Status says meanwhile what is waited for and for how
// long. Still is used alike, with one reading of pressure at a time; LeakRate
// takes the readings of a whole hold.
package ready

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Settings of the difference rule. The zero value is never ready, for it asks
// for a standard uncertainty of zero.
type Settings struct {
	// Standard is asked of the difference: noise of the mean, delay and
	// resolution together, as a standard uncertainty (pressure).
	Standard float64
	// SlopeShare is the most that |slope| x DelayUncertainty may be (pressure).
	// 0 stands for 0.8 of Standard.
	SlopeShare float64
	// Delay is how much later than the UUT the reference tells of a change (s):
	// its lag, less the UUT's. The mean difference is corrected for it.
	Delay float64
	// DelayUncertainty is the standard uncertainty of Delay, with that of the
	// skew between the two readings (s).
	DelayUncertainty float64
	// Settling is how long after the first reading the reference still answers
	// to what was before (s); such readings are not used.
	Settling float64
	// LeastReadings makes a window; never under 5. It lasts LeastSeconds at least.
	LeastReadings int
	LeastSeconds  float64
	// Resolution of the UUT's and of the reference's values (pressure), 0 if
	// they have none to speak of. It counts where noise is too small for a mean
	// to see between the steps.
	Resolution, ReferenceResolution float64
}

// StandardFor returns the standard uncertainty to ask for, so that the error
// of the difference is beyond +-largest with the probability risk: largest/z
// with z the two-sided quantile of the normal distribution, 2.968 for 0.3 %.
// largest > 0 in any unit, 0 < risk < 1; 0 (never ready) for anything else.
// Source: GUM 4.3.4 read the other way round.
func StandardFor(largest, risk float64) float64 {
	if !(largest > 0) || !(risk > 0) || !(risk < 1) {
		return 0
	}
	return largest / distuv.UnitNormal.Quantile(1-risk/2)
}

// Sample is one reading of the reference with what the UUT said around it.
type Sample struct {
	Time      float64 // s, not before the sample added last
	Reference float64
	UUT       float64 // mean of the UUT's values around Time, in the same unit
	Behind    float64 // s: how much earlier than Time those values were on average
	Scatter   float64 // SD of the single values behind UUT; 0 for one value
}

// State is what a Watch knows after a sample.
type State struct {
	Ready  bool
	Status Status
	First  int // number of the first sample of the window, counted from 0 over all that were added

	Readings  int     // in the window
	Seconds   float64 // from its first to its last
	Slope     float64 // of the reference over the window, pressure per second
	SlopeSE   float64
	Mean      float64 // of UUT minus reference over the window, corrected for Delay
	Corrected float64 // what that correction added: -Slope x (Delay less the mean of Behind)
	Trend     float64 // of the difference, pressure per second
	TrendSE   float64

	// The parts of Standard, in pressure: standard uncertainties, that of the
	// noise widened so that z of it err as seldom as z of a normal one.
	Noise      float64 // of the mean, with what its correlation in time adds
	Settling   float64 // |Slope| x DelayUncertainty, with the slope's own
	Resolution float64
	Standard   float64

	Correlation float64 // by how much the variance of the mean is larger than white noise would make it; 1 for white

	safe, variance float64
}

// Watch follows one point. Add costs a bounded amount of work, and allocates
// only while a window grows for the first time: Reset keeps what there is.
type Watch struct {
	settings Settings
	sums     sums
	count    int     // samples added, used or not
	first    float64 // time of the first sample used
	began    bool
}

// NewWatch starts following a point that has just come inside its window.
func NewWatch(s Settings) *Watch {
	s.LeastReadings = min(max(s.LeastReadings, 5), kept/2)
	if s.SlopeShare == 0 {
		s.SlopeShare = 0.8 * s.Standard
	}
	w := &Watch{settings: s}
	w.Reset()
	return w
}

// Reset starts anew, as NewWatch does.
func (w *Watch) Reset() {
	w.sums.reset()
	w.count, w.began = 0, false
}

// Count returns how many samples were added.
func (w *Watch) Count() int { return w.count }

// Add takes the next sample and says whether the point is ready.
//
// The window ends now. It begins at the earliest Settling after the first
// sample, and where noise and delay together spoil the difference least, as
// long as |slope| x DelayUncertainty <= SlopeShare; the slope is the
// reference's mean one over the window. The point is ready when the window
// has LeastReadings, of which correlation in time leaves so many independent,
// lasts LeastSeconds, and
//
//	Noise^2 + Settling^2 + Resolution^2 <= Standard^2,
//
// and the difference has no trend: none whose effect on the mean (half of what
// it makes over the window) is above 2 Standard, nor above half of Standard
// where it is beyond 3 of its standard errors.
//
// Noise is the scatter about the window's line over sqrt(n), wider by Student's
// t for few readings, times what correlation in time adds: the larger of
// (1 + r)/(1 - r), r the first autocorrelation by von Neumann's ratio, and of
// the variance of block means over that of white noise, where chi-square finds
// it too large.
//
// Where the window has a trend or is too short for its correlation, the last
// two thirds of the whole wait are tried alone, and taken if their scatter is
// much the smaller: something has happened, and has been over for long enough.
//
// A sample that is not finite, or not later than the one before, is not used.
//
// The error of Mean is then beyond +-z Standard about as seldom as the normal
// distribution has it, for noise that is white or correlated over less than
// a tenth of the window. What moves the UUT alone and more slowly than a few
// windows is not noise here: it is the UUT's error at that time.
//
// Source: the quantity judged is the difference, GUM 4.3 and 5.1.2 for the
// parts; von Neumann's ratio, Ann Math Stat 1941;12:367-395, and block means of
// correlated readings, Flyvbjerg and Petersen, J Chem Phys 1989;91:461-466, both
// from memory; the rule as a whole was worked out for this program, and its
// bounds are measured in the tests.
func (w *Watch) Add(s Sample) State {
	number := w.count
	w.count++
	if !w.began && s.finite() {
		w.began, w.first = true, s.Time
	}
	w.sums.add(s, number)
	from := w.sums.since(w.first + w.settings.Settling)
	least := w.settings.LeastReadings
	if have := w.sums.last() - from; have < least {
		return State{First: number, Status: Status{Kind: Gathering, Have: have, Need: least, Seconds: w.seconds(least - have)}}
	}
	a, ok := w.window(from)
	state, clean := w.decide(a)
	if !ok || clean {
		return state
	}
	end := w.sums.last()
	start, now := w.sums.rows[from+1].t, w.sums.rows[end].t
	late := w.sums.since(start + (now-start)/3 + w.sums.origin.Time)
	if late > a && end-late >= least {
		if later, _ := w.decide(late); later.Ready && later.variance < 0.75*state.variance {
			return later
		}
	}
	return state
}

// seconds is how long a number of further readings take.
func (w *Watch) seconds(readings int) float64 {
	return float64(max(readings, 0)) * w.sums.period()
}

// readings is how many readings a time brings, at least one.
func (w *Watch) readings(seconds float64) int {
	if period := w.sums.period(); period > 0 {
		return max(1, int(math.Ceil(seconds/period-1e-9)))
	}
	return 1
}

// window returns the start of the window to be judged: of the starts that keep
// the slope's share, the one that makes noise and delay together least, the
// noise of one difference being that over the longest of them; false, and the
// shortest window, when no start keeps the share. Starts tried lie a fifth of
// the length apart, so that a reading costs little; choosing by slope and
// length alone leaves the difference itself unbiased.
func (w *Watch) window(from int) (int, bool) {
	end, set := w.sums.last(), w.settings
	best, least, v := end-set.LeastReadings, math.Inf(1), -1.0
	for a := from; a <= end-set.LeastReadings; a += max(1, (end-a)/5) {
		slope, se := w.sums.slope(a, end)
		if math.Abs(slope)*set.DelayUncertainty > set.SlopeShare {
			continue
		}
		if v < 0 {
			v = w.sums.difference(a, end).variance()
		}
		delay := set.Delay - w.sums.behind(a, end)
		u := v/float64(end-a) + se*se*delay*delay + (slope*slope+se*se)*set.DelayUncertainty*set.DelayUncertainty
		if u < least {
			best, least = a, u
		}
	}
	return best, v >= 0
}

// judge works out the figures of the window from sample a+1 to the last.
func (w *Watch) judge(a int) State {
	end, set := w.sums.last(), w.settings
	n := float64(end - a)
	d := w.sums.difference(a, end)
	delay := set.Delay - w.sums.behind(a, end)
	state := State{First: w.sums.rows[a+1].number, Readings: end - a, Seconds: w.sums.rows[end].t - w.sums.rows[a+1].t}
	state.Slope, state.SlopeSE = w.sums.slope(a, end)
	state.Corrected = -delay * state.Slope
	state.Mean = d.mean + state.Corrected
	bend, bendSE := w.sums.bend(a, end)
	state.Trend = d.slope - delay*bend

	v, more, safe := w.sums.noise(a, end, d)
	state.Correlation, state.safe, state.variance = more, safe, v
	free := n/more - 2
	if free > 1 {
		few := student(free)
		state.Noise = math.Hypot(few*math.Sqrt(v*more/n), delay*state.SlopeSE*student(n-4))
		if d.stt > 0 {
			state.TrendSE = few * math.Sqrt(v*more/d.stt+delay*delay*bendSE*bendSE+set.DelayUncertainty*set.DelayUncertainty*bend*bend)
		}
	} else {
		state.Noise, state.TrendSE = math.Inf(1), math.Inf(1)
	}
	state.Settling = math.Hypot(state.Slope, state.SlopeSE) * set.DelayUncertainty
	state.Resolution = math.Hypot(
		steps(set.Resolution, math.Max(math.Sqrt(v), w.sums.scatter(a, end))),
		steps(set.ReferenceResolution, math.Sqrt(w.sums.reference(a, end).variance())))
	state.Standard = math.Sqrt(state.Noise*state.Noise + state.Settling*state.Settling + state.Resolution*state.Resolution)
	return state
}

// steps is the standard uncertainty that a resolution leaves in a mean: that
// of a rectangle as wide as one step where the scatter is under 0.6 steps, for
// then the mean sees little between them; nothing above, where the scatter
// averages it out (at 0.5 steps of normal noise less than 0.3 % of a step is
// left; 0.6 is that noise and the rounding together).
func steps(resolution, scatter float64) float64 {
	if scatter >= 0.6*resolution {
		return 0
	}
	return resolution / (2 * math.Sqrt(3))
}

// student is by how much the 99.85 % quantile of Student's t is above that of
// the normal distribution: an interval from few readings must be so much wider
// to err as seldom. Source: Abramowitz and Stegun 26.7.5, three terms, from
// memory; 1.3 % low at 5 degrees of freedom, nearer above.
func student(dof float64) float64 {
	const z2 = 2.9677379253418 * 2.9677379253418
	return 1 + (z2+1)/(4*dof) + (5*z2*z2+16*z2+3)/(96*dof*dof) + (3*z2*z2*z2+19*z2*z2+17*z2-15)/(384*dof*dof*dof)
}

// trendFactor is how many standard errors make a trend.
const trendFactor = 3

// decide says whether a window is ready, and if not, why; and whether it is
// clean: without a trend, and long enough for the correlation it shows.
func (w *Watch) decide(a int) (state State, clean bool) {
	set := w.settings
	state = w.judge(a)
	moved := math.Abs(state.Trend) * state.Seconds / 2
	trend := moved > set.Standard/2 && math.Abs(state.Trend) > trendFactor*state.TrendSE
	enough := float64(state.Readings) >= float64(set.LeastReadings)*state.safe
	switch {
	case math.Abs(state.Slope)*set.DelayUncertainty > set.SlopeShare:
		state.Status = w.moving(state)
	case trend:
		state.Status = Status{Kind: Trending, Value: state.Trend, Seconds: math.Inf(1)}
	case state.Seconds < set.LeastSeconds:
		left := set.LeastSeconds - state.Seconds
		state.Status = Status{Kind: Gathering, Have: state.Readings, Need: state.Readings + w.readings(left), Seconds: left}
	case set.Standard > 0 && enough && moved <= 2*set.Standard && state.Standard <= set.Standard:
		state.Ready = true
	case set.Standard > 0 && enough && moved <= 2*set.Standard && state.Resolution > set.Standard && math.Hypot(state.Noise, state.Settling) <= set.Standard:
		state.Status = Status{Kind: Coarse, Value: state.Resolution, Limit: set.Standard, Seconds: math.Inf(1)}
	case !enough && state.Standard <= set.Standard:
		more := int(math.Ceil(float64(set.LeastReadings)*state.safe)) - state.Readings
		state.Status = Status{Kind: Unsure, Value: state.Trend, Need: max(more, 1), Seconds: w.seconds(more)}
	case moved > 2*set.Standard && state.Standard <= set.Standard:
		more := int(float64(state.Readings) * (math.Sqrt(moved/(2*set.Standard)) - 1))
		state.Status = Status{Kind: Unsure, Value: state.Trend, Need: max(more, 1), Seconds: w.seconds(max(more, 1))}
	default:
		state.Status = w.noisy(state)
	}
	return state, !trend && enough
}
