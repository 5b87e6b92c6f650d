package ready

import (
	"errors"
	"math"
)

// Errors of LeakRate.
var (
	ErrFewReadings  = errors.New("too few readings for a leak rate")
	ErrLeakSettings = errors.New("a leak rate needs a statement of how much may relax, and time constants from short to long")
)

// LeakSettings say what else may move the pressure of a volume that was shut
// off. The zero value is refused.
type LeakSettings struct {
	// Amplitude is how much may relax while the gas comes to the temperature of
	// its walls, as a standard deviation about zero (pressure).
	Amplitude float64
	// ShortestTau and LongestTau bound its time constant (s).
	ShortestTau, LongestTau float64
	// Noise is the least standard deviation of a reading that is believed
	// (pressure), as its resolution leaves.
	Noise float64
	// Wanted is the standard uncertainty that would do (pressure per second),
	// for LongerHold.
	Wanted float64
}

// Leak is the loss of pressure of a volume that was shut off.
type Leak struct {
	Rate     float64 // at the first reading's pressure, per second; positive is a loss
	Standard float64 // of Rate
	DoF      float64 // of the noise, infinite never
	Tau      float64 // s: likeliest time constant of what relaxes
	Left     float64 // pressure: still to come of it at the last reading, likeliest
	// Warming is by how much Standard is larger than a straight line would have
	// it: much, while the two cannot be told apart.
	Warming float64
	// LongerHold is how long the hold would have to be in all for Standard to
	// come down to Wanted (s): 0 if it has, +Inf if sixteen times as long would
	// not do.
	LongerHold float64
}

// LeakRate finds the leak in readings p at times t (s, ascending, same length,
// at least 8) of a volume that was shut off, by the model
//
//	p(t) = a - Rate c(t) + what relaxes,  c(t) = Integral p/p(0) dt
//
// (c is the time itself where the pressure is not above zero or falls by half):
// a leak's flow goes with the pressure that drives it. What relaxes is an
// exponential of any time constant between the two stated, with a second part
// two or five times slower as likely as not. Rate is the average over the
// models, weighted by their evidence; Standard holds what they disagree about
// besides the noise, which counts with its correlation in time. So a slope that
// is warming, or cannot be told from it, is no rate with a small uncertainty.
//
// Standard of a straight line alone is sigma sqrt(12 dt/D^3) for readings every
// dt over a time D; a free exponential makes it 93 times larger at D = tau, 11
// at 3 tau.
//
// Source: Bayesian model averaging over linear models, textbook; flow in
// proportion to the pressure is that of a narrow leak (Hagen and Poiseuille).
func LeakRate(t, p []float64, s LeakSettings) (Leak, error) {
	n := len(t)
	if n < 8 || len(p) != n || !(t[n-1] > t[0]) {
		return Leak{}, ErrFewReadings
	}
	if !(s.Amplitude > 0) || !(s.ShortestTau > 0) || !(s.LongestTau >= s.ShortestTau) || s.LongestTau > 1e4*s.ShortestTau {
		return Leak{}, ErrLeakSettings
	}
	held := t[n-1] - t[0]
	c := driven(t, p)
	low, high := p[0], p[0]
	banks := []*bank{newBank(s.ShortestTau, s.LongestTau, 2), newBank(s.ShortestTau, s.LongestTau, 5)}
	for i := range t {
		for _, b := range banks {
			b.add(t[i], c[i], p[i])
		}
		low, high = math.Min(low, p[i]), math.Max(high, p[i])
	}
	floor := s.Noise*s.Noise + 1e-12*(high-low)*(high-low) + math.SmallestNonzeroFloat32
	// The rate is as free as the level: far beyond anything the readings show.
	known := beliefs{s.Amplitude, 100 * ((high - low) + s.Amplitude) / held, 0.5}
	amplitude := s.Amplitude / 5
	var models []model
	var variance float64
	for range 2 { // the second time with the amplitude found
		near := banks[0].closest(banks[0].roughness()+floor, amplitude, known)
		if near.size == 0 {
			return Leak{}, ErrFewReadings
		}
		variance, _ = banks[0].restless(&near, nil, floor)
		models = models[:0]
		for _, b := range banks {
			models = append(models, b.models(nil, variance, amplitude, known)...)
		}
		if len(models) == 0 {
			return Leak{}, ErrFewReadings
		}
		weigh(models)
		amplitude = math.Abs(likeliest(models).mean[relaxing])
	}
	best := likeliest(models)
	var rate moment
	for i := range models {
		rate.add(models[i].weight, models[i].mean[leaking], models[i].cov[leaking][leaking])
	}
	l := Leak{DoF: float64(n - columns), Tau: best.tau}
	l.Rate, l.Standard = rate.sums()
	x := row5(best.slow, best.tau, held, 0)
	x[level] = 0
	l.Left, _ = best.of(&x)
	l.Warming = l.Standard / (math.Sqrt(variance) / lineLength(c))
	if s.Wanted > 0 {
		l.LongerHold = hold(best, held, n, variance, s.Wanted/l.Standard, known.precisions(amplitude))
	}
	return l, nil
}

// driven is what a leak of rate 1 at the first pressure has let out by each
// time.
func driven(t, p []float64) []float64 {
	c := make([]float64, len(t))
	low := p[0]
	for _, x := range p {
		low = math.Min(low, x)
	}
	for i := 1; i < len(t); i++ {
		share := 1.0
		if p[0] > 0 && low > p[0]/2 {
			share = (p[i] + p[i-1]) / (2 * p[0])
		}
		c[i] = c[i-1] + share*(t[i]-t[i-1])
	}
	return c
}

// lineLength is the length of a column about its mean: sigma over it is the
// standard error of a straight line's slope.
func lineLength(c []float64) float64 {
	var m, s float64
	for _, x := range c {
		m += x / float64(len(c))
	}
	for _, x := range c {
		s += (x - m) * (x - m)
	}
	return math.Sqrt(s)
}

// hold foretells the hold that brings the uncertainty down to a share of
// what it is: readings as close as before, over longer times, by the likeliest
// model.
func hold(m *model, held float64, n int, variance, share float64, prior [columns]float64) float64 {
	if share >= 1 {
		return 0
	}
	at := func(times float64) float64 {
		b := newBank(m.tau, m.tau, m.slow)
		count := int(float64(n-1)*times) + 1
		for i := range count {
			x := held * times * float64(i) / float64(count-1)
			b.add(x, x, 0)
		}
		one := model{size: m.size, tau: m.tau}
		b.solve(&one, variance, &prior)
		return math.Sqrt(one.cov[leaking][leaking])
	}
	now := at(1)
	for _, times := range []float64{1.25, 1.5, 2, 2.5, 3, 4, 6, 8, 12, 16} {
		if at(times) <= share*now {
			return held * times
		}
	}
	return math.Inf(1)
}

// Less takes the bench's own leak off, as it was found with the UUT's place
// closed. volumes is the volume that leaked then over the volume now, with its
// standard uncertainty: the same flow moves a larger volume more slowly.
//
//	Rate - volumes Own.Rate,  u^2 = u^2 + (volumes u_Own)^2 + (Own.Rate u_volumes)^2
//
// with effective degrees of freedom by Welch and Satterthwaite (GUM G.4.1; 0 is
// infinite).
func (l Leak) Less(own Leak, volumes, uVolumes float64) Leak {
	a, b, c := l.Standard*l.Standard, volumes*own.Standard, own.Rate*uVolumes
	b, c = b*b, c*c
	var d float64
	if l.DoF > 0 {
		d += a * a / l.DoF
	}
	if own.DoF > 0 {
		d += b * b / own.DoF
	}
	l.Rate -= volumes * own.Rate
	l.Standard = math.Sqrt(a + b + c)
	l.DoF = 0
	if d > 0 {
		l.DoF = (a + b + c) * (a + b + c) / d
	}
	return l
}

// VolumeRate is the leak as gas that leaves per second, at the pressure in the
// volume and constant temperature: V Rate/p, with V the gas volume and p the
// absolute pressure in it. 0.0168 mmHg/s from 50 mL at 250 mmHg above an
// atmosphere of 760 is 0.05 mL a minute. Both uncertainties are standard and
// independent; volume and absolute pressure are above zero, else not numbers
// come back. Source: Boyle's law.
func (l Leak) VolumeRate(volume, uVolume, absolute float64) (flow, standard float64) {
	if !(volume > 0) || !(absolute > 0) {
		return math.NaN(), math.NaN()
	}
	return volume * l.Rate / absolute, math.Hypot(volume*l.Standard, uVolume*l.Rate) / absolute
}
