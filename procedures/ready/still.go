package ready

import (
	"errors"
	"math"
)

// StillSettings are those of the stricter rule. The zero value is refused.
type StillSettings struct {
	// Residual is the most that may still be to come (pressure).
	Residual float64
	// Risk is the probability left that more is to come: 0 < Risk < 1.
	Risk float64
	// Apart is the time between the two readings that are to be compared (s).
	// 0 asks for the whole of what still relaxes; otherwise for what the
	// pressure moves in that time, a leak's share included.
	Apart float64
	// Amplitude is how much may relax after the pressure was made, as a
	// standard deviation about zero, and Rate how fast it may leak (pressure,
	// pressure per second): what is held for possible before the first reading.
	Amplitude, Rate float64
	// ShortestTau and LongestTau bound the time constant of what relaxes (s).
	ShortestTau, LongestTau float64
	// TwoParts is the probability given beforehand to a second, slower part.
	// With 0, a slow fifth of what relaxes is overlooked in two points of five;
	// with 5 % in one of sixty, but points take half as long again.
	TwoParts float64
	// Least is the shortest wait (s).
	Least float64
	// Noise is the least standard deviation of a reading that is believed, as
	// its resolution leaves (pressure).
	Noise float64
}

// ErrStillSettings refuses settings that ask for nothing that could be met.
var ErrStillSettings = errors.New("the rule for a pressure that has stopped needs a residual, a risk between 0 and 1, what may relax and leak, and time constants from short to long")

// StillState is what a Still knows after a reading.
type StillState struct {
	Ready  bool
	Status Status

	Left, LeftSD float64 // of what still relaxes, or moves in the time apart
	Doubt        float64 // probability that it is beyond Residual
	Tau          float64 // likeliest, s
	Rate, RateSD float64 // of leak, pressure per second; positive is a loss
	Noise        float64 // SD of a reading, as if white
}

// Still follows a pressure that was made and shut off, or is held, until it
// has stopped moving.
type Still struct {
	settings  StillSettings
	bank      *bank
	state     StillState
	models    []model
	residuals []float64
	variance  float64
	amplitude float64
	last      float64 // time of the last reading
	look      float64 // when to look next
	first     float64
}

// lookEvery is how often the models are asked (s): not at each reading, for
// their answer changes slowly and costs most.
const lookEvery = 0.5

// NewStill starts following a pressure.
func NewStill(s StillSettings) (*Still, error) {
	ok := s.Residual > 0 && s.Risk > 0 && s.Risk < 1 && s.Amplitude > 0 && s.Rate > 0 && s.ShortestTau > 0 &&
		s.LongestTau >= s.ShortestTau && s.LongestTau <= 1e4*s.ShortestTau && s.TwoParts >= 0 && s.TwoParts < 1 && s.Apart >= 0
	if !ok {
		return nil, ErrStillSettings
	}
	slow := 0.0
	if s.TwoParts > 0 {
		slow = 2.5
	}
	return &Still{settings: s, bank: newBank(s.ShortestTau, s.LongestTau, slow)}, nil
}

// Add takes a reading of the pressure at a time (s), later than the one before,
// and says whether the pressure has stopped: whether the probability that more
// than Residual is still to come is at most Risk, by the average over models of
// every time constant between the shortest and the longest, weighted by their
// evidence. Noise is what the likeliest model leaves, with its correlation in
// time. A reading that is not finite or not later is not used.
//
// Source: Bayesian model averaging over linear models, textbook; the rule was
// worked out for this program and its error and time are measured in the tests.
func (s *Still) Add(t, p float64) StillState {
	if math.IsNaN(t+p) || math.IsInf(t+p, 0) || s.bank.n > 0 && !(t > s.last) {
		return s.state
	}
	if s.bank.n == 0 {
		s.first, s.look = t, t
	}
	s.last = t
	s.bank.add(t, t-s.first, p)
	if t < s.look || s.bank.n < 8 {
		if s.state.Status.Kind == Nothing && !s.state.Ready {
			s.state.Status = Status{Kind: Gathering, Have: s.bank.n, Need: 8, Seconds: math.Inf(1)}
		}
		return s.state
	}
	s.look = t + lookEvery
	s.state = s.judge(t - s.first)
	if waited := t - s.first; waited < s.settings.Least {
		s.state.Ready = false
		s.state.Status.Seconds = math.Max(s.state.Status.Seconds, s.settings.Least-waited)
	}
	return s.state
}

// judge asks the models at a time since the first reading.
func (s *Still) judge(t float64) StillState {
	set := s.settings
	known := beliefs{set.Amplitude, set.Rate, set.TwoParts}
	floor := set.Noise*set.Noise + 1e-6*set.Residual*set.Residual
	// The noise is what is left by the model that is closest if it is white: a
	// model that may be further away would explain itself by much noise.
	close := s.bank.closest(s.bank.roughness()+floor, s.amplitude, known)
	s.variance, s.residuals = s.bank.restless(&close, s.residuals, floor)
	if s.models = s.bank.models(s.models, s.variance, s.amplitude, known); len(s.models) == 0 {
		return StillState{Status: Status{Kind: Relaxing, Value: math.Inf(1), Limit: set.Residual, Seconds: math.Inf(1)}}
	}
	best := likeliest(s.models)
	s.amplitude = math.Abs(best.mean[relaxing])

	state := StillState{Tau: best.tau, Noise: math.Sqrt(s.variance)}
	var left, rate moment
	for i := range s.models {
		m := &s.models[i]
		x := row5(m.slow, m.tau, t, 0)
		x[level] = 0
		if set.Apart > 0 {
			after := row5(m.slow, m.tau, t+set.Apart, -set.Apart)
			for k := range x {
				x[k] = after[k] - x[k]
			}
			x[level] = 0
		}
		mean, v := m.of(&x)
		left.add(m.weight, mean, v)
		rate.add(m.weight, m.mean[leaking], m.cov[leaking][leaking])
		sd := math.Sqrt(v)
		state.Doubt += m.weight * (beyond((set.Residual-mean)/sd) + beyond((set.Residual+mean)/sd))
	}
	state.Left, state.LeftSD = left.sums()
	state.Rate, state.RateSD = rate.sums()
	if state.Doubt <= set.Risk {
		state.Ready = true
		return state
	}
	z := 2.0
	worst := math.Abs(state.Left) + z*state.LeftSD
	state.Status = Status{Kind: Relaxing, Value: worst, Limit: set.Residual,
		Seconds: math.Max(best.tau*math.Log(worst/set.Residual), lookEvery)}
	return state
}

// beyond is the probability that a standard normal is above z.
func beyond(z float64) float64 { return math.Erfc(z/math.Sqrt2) / 2 }

// moment gathers mean and variance of a mixture.
type moment struct{ w, m, s float64 }

func (a *moment) add(w, mean, variance float64) {
	a.w += w
	a.m += w * mean
	a.s += w * (variance + mean*mean)
}

func (a *moment) sums() (mean, sd float64) {
	mean = a.m / a.w
	return mean, math.Sqrt(math.Max(0, a.s/a.w-mean*mean))
}
