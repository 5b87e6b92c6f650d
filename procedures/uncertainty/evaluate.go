package uncertainty

import (
	"fmt"
	"math"
	"slices"
)

// The methods an interval can be by.
const (
	GUM        = "gum"         // the law of propagation, Welch and Satterthwaite, Student's t
	MonteCarlo = "monte_carlo" // JCGM 101
)

// off is how far the GUM's half-width may be from the Monte Carlo's before the
// latter counts.
const off = 0.05

// Settings of an evaluation; the zero Settings work.
type Settings struct {
	Seed uint64
	// Tolerance is the share of the interval's half-width that two standard
	// errors of its Monte Carlo may be; 0 is 0.01, about what two significant
	// digits hold. JCGM 101:2008, 7.9.2 ties it to the second digit itself;
	// then a change of unit would change the draws, and with them the digits.
	Tolerance float64
	MostDraws int  // 0: 1,000,000
	Always    bool // draw even where the GUM cannot be 5 % off
	Shortest  bool // of a model: the shortest interval, not the one with equal tails
}

func (s *Settings) tolerance() float64 {
	if s.Tolerance > 0 {
		return s.Tolerance
	}
	return 0.01
}

// Evaluation is a figure's uncertainty. Low and High are the ends of the 95 %
// interval as distances from the estimate, Low negative; where the inputs add
// up they are -Expanded and Expanded, else Expanded is half their distance.
//
// Standard is by the law of propagation, what the contributions add up to in
// quadrature, whatever the method, and Coverage is Expanded/Standard (0 where
// Standard is 0). By Monte Carlo, DegreesOfFreedom remain those of the GUM.
type Evaluation struct {
	Combined
	Low, High float64
	Method    string // GUM or MonteCarlo
	Why       string // why this method, in words

	Shortcut float64  // the GUM's half-width, also where it does not count
	Draws    int      // 0: none were drawn
	Seed     uint64   // of the draws
	Error    float64  // standard error of the drawn half-width
	Drawn    float64  // the drawn half-width, also where it does not count
	SD       *float64 // of the draws; nil without draws, and where 2 or fewer degrees of freedom leave none
	Mean     float64  // of the draws, from the estimate: not 0 where a model bends

	sample drawn
}

// Evaluate gives the 95 % interval of a budget. The GUM's counts unless a Monte
// Carlo says that it is more than 5 % too wide or too narrow. The Monte Carlo
// is not made where it cannot say so: see harmless. It is drawn until its
// half-width has the tolerance set, or a quarter of it where the 5 % is on the
// brink, or the most draws are made; Error says what was reached. The same seed gives the same digits on one build.
//
// In a Monte Carlo an input with finite degrees of freedom is Student's t,
// normal or t by name, as JCGM 101:2008, 6.4.9; degrees of freedom of a
// distribution with ends (how well its ends are known, GUM G.4.2) count in the
// GUM's alone. Many inputs with few degrees of freedom give it an interval
// wider than the GUM's: neither is wrong, the second aims at how often
// intervals hold the truth, the first at what is known of this one.
//
// ErrBudget for standard uncertainties, degrees of freedom or distributions
// that are none, one key with two uncertainties, correlations that contradict
// each other or whose degrees of freedom differ, and a model that gives no
// number. Source: GUM (JCGM 100:2008) 5, G.4.1, G.6.4; JCGM 101:2008, 7.
func Evaluate(b Budget, s Settings) (Evaluation, error) {
	if err := b.check(); err != nil {
		return Evaluation{}, err
	}
	linear := b
	if b.Model != nil {
		var err error
		if linear.Inputs, err = Linearise(b.Model, b.Inputs); err != nil {
			return Evaluation{}, err
		}
	}
	var room [24]part
	parts, err := linear.parts(room[:0])
	if err != nil {
		return Evaluation{}, err
	}
	e := Evaluation{Combined: total(parts), Method: GUM, Seed: s.Seed}
	e.Low, e.High, e.Shortcut = -e.Expanded, e.Expanded, e.Expanded
	if b.Model == nil && !s.Always {
		if why := harmless(parts, e.Standard); why != "" {
			e.Why, e.Seed = why, 0
			return e, nil
		}
	}
	sampler, err := newSampler(b, parts, s)
	if err != nil {
		return Evaluation{}, err
	}
	return e.drawn(sampler, s)
}

// drawn holds the GUM's interval against a Monte Carlo.
func (e Evaluation) drawn(sampler *sampler, s Settings) (Evaluation, error) {
	low, high, stderr, err := sampler.run(s)
	if size := (high - low) / 2; err == nil && math.Abs(math.Abs(e.Shortcut/size-1)-off) < 3*stderr/size {
		// On the brink: four times as fine, so that chance has little to decide.
		s.Tolerance = s.tolerance() / 4
		low, high, stderr, err = sampler.run(s)
	}
	if err != nil {
		return Evaluation{}, err
	}
	e.Draws, e.Error, e.Drawn = len(sampler.values), stderr, (high-low)/2
	e.Mean, e.SD = sampler.moments()
	e.sample = sampler.drawn
	apart := e.Shortcut/e.Drawn - 1 // -1 where the GUM says 0; not a number where both do
	bent := math.Abs(low+high) > off*(high-low)
	if !(math.Abs(apart) > off) && !bent {
		e.Why = fmt.Sprintf("a Monte Carlo of %d draws has a half-width of %.4g for the %.4g of the GUM, within 5 %%", e.Draws, e.Drawn, e.Shortcut)
		e.sample = drawn{}
		return e, nil
	}
	e.Method = MonteCarlo
	e.Why = fmt.Sprintf("the GUM's half-width of %.4g is %.3g %% too %s", e.Shortcut, 100*math.Abs(apart), wideOr(apart > 0))
	if !(math.Abs(apart) > off) {
		e.Why = "the interval is not symmetrical about the estimate"
	}
	if sampler.model != nil && e.SD != nil {
		e.Standard = *e.SD
	}
	e.Low, e.High, e.Expanded, e.Coverage = low, high, e.Drawn, 0
	if e.Standard > 0 {
		e.Coverage = e.Expanded / e.Standard
	}
	return e, nil
}

func wideOr(wide bool) string {
	if wide {
		return "wide"
	}
	return "narrow"
}

// harmless says why the GUM's interval of a sum cannot be 5 % off, or "" where
// it may be. With s_i the shares of the variance, it may be where
//
//	Sum s_i (1 - s_i)/(nu_i - 2.2) > 0.045, of inputs with degrees of freedom nu_i
//	(to first order in 1/nu the GUM is too narrow by Sum s_i (1 - s_i)/nu_i), or
//	Sum -gamma_i s_i^2 > 0.5, gamma the excess kurtosis: -1.2 of a rectangle,
//	-0.6 of a triangle, -1.5 u-shaped
//
// The bounds are our own, from the expansion by cumulants for their form and
// from exact intervals (characteristic functions turned round) for their
// numbers.
func harmless(parts []part, u float64) string {
	if !(u > 0) {
		return "nothing is uncertain in it"
	}
	var few, flat float64
	for _, p := range parts {
		s := p.size / u
		s *= s
		switch p.kind {
		case Rectangular:
			flat += 1.2 * s * s
		case Triangular:
			flat += 0.6 * s * s
		case UShaped:
			flat += 1.5 * s * s
		default:
			if p.dof > 0 && s < 1 {
				few += s * (1 - s) / math.Max(p.dof-2.2, 0.02)
			}
		}
	}
	if few > 0.045 || flat > 0.5 {
		return ""
	}
	return "no input is so large with few degrees of freedom, or so large and flat, that the GUM could be 5 % off"
}

// Below is the probability that what was measured lies less than d above its
// estimate (d may be negative), flat prior: Student's t by the GUM, by Monte
// Carlo the draws. Where an input is normal the draws of all others are taken,
// each with the normal distribution about it, so that small probabilities keep
// their digits; else the draws are counted. Without uncertainty it is 0 up to
// the estimate and 1 from there.
func (e *Evaluation) Below(d float64) float64 {
	switch {
	case e.Method == MonteCarlo:
		return e.sample.below(d)
	case e.Standard > 0:
		return StudentBelow(d/e.Standard, e.DegreesOfFreedom)
	case d < 0:
		return 0
	}
	return 1
}

// Above is the probability that it lies more than d above: 1 - Below, with the
// digits of a small one.
func (e *Evaluation) Above(d float64) float64 {
	switch {
	case e.Method == MonteCarlo:
		return e.sample.above(d)
	case e.Standard > 0:
		return StudentBelow(-d/e.Standard, e.DegreesOfFreedom)
	}
	return 1 - e.Below(d)
}

// Linearise returns the inputs with the sensitivities that a model has at their
// estimates: [f(x+u) - f(x-u)]/2u with u each one's standard uncertainty (GUM
// 5.1.3, note 2), 0 where u is 0. ErrBudget where the model gives no number.
func Linearise(model func([]float64) float64, inputs []Input) ([]Input, error) {
	out := slices.Clone(inputs)
	x := make([]float64, len(inputs))
	for i := range inputs {
		x[i] = inputs[i].Estimate
	}
	for i := range inputs {
		u := inputs[i].Standard
		out[i].Sensitivity = 0
		if u == 0 {
			continue
		}
		x[i] = inputs[i].Estimate + u
		up := model(x)
		x[i] = inputs[i].Estimate - u
		c := (up - model(x)) / (2 * u)
		x[i] = inputs[i].Estimate
		if math.IsNaN(c) || math.IsInf(c, 0) {
			return nil, fmt.Errorf("%w: the model gives no number beside the estimate of %s", ErrBudget, inputs[i].Name)
		}
		out[i].Sensitivity = c
	}
	return out, nil
}
