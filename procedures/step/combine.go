package step

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// Combined is what the steps of one place and line say together.
type Combined struct {
	Determined         bool
	Reasons            []string // codes, why it is undetermined
	Frequency, Damping Estimate
	Steps              int // determined steps used
	DegreesOfFreedom   float64
	Correlation        float64 // of what is uncertain in ln Frequency and in Damping
	// Standard deviation from step to step, of ln fn and of zeta, at least
	// what the fits themselves claim of a mean; 0 for a single step.
	LogScatter, DampingScatter float64
	// Edge is what the stated edge may do to all steps alike: in the intervals
	// if the edge time was a bound, else the caller's to add.
	Edge Tolerance
}

// largestUncertainty is the relative standard uncertainty of fn beyond which
// a figure is undetermined (facts of the project, measured on simulations).
const largestUncertainty = 0.05

// Combine takes the determined steps. One alone: its own figures. Several:
// the mean of ln fn and of zeta with the plain Student t of their scatter,
// n - 1 degrees of freedom, because steps differ by more than their own
// uncertainty tells and weights by that uncertainty would then be far too
// sure of themselves.
//
// A few steps can agree by accident. The half-width of an interval is
// therefore at least the standard uncertainty of the mean that the fits
// themselves claim (root of the sum of squares over n). It is not the whole
// 95 % claim of the fits: with five steps that raises the coverage from 95 to
// 98 %, this from 95 to 95.5 %.
//
// What a stated edge may do is the same in all steps: it is kept out of the
// scatter and widens the result once, by its mean.
//
// Without a determined step the reasons are those of the steps, or no_step.
// A mean whose standard uncertainty of ln fn is over 5 % is undetermined.
func Combine(steps []Step) Combined { return CombineStopped(steps, Stopping{}) }

// CombineStopped is Combine for a run that stopped by itself: what comes from
// the steps, their standard uncertainty and intervals, is larger by the factor
// of the rule it stopped by.
func CombineStopped(steps []Step, stopping Stopping) Combined {
	var c Combined
	var frequency, damping, frequencyOwn, dampingOwn []float64
	var within float64 // mean correlation within the fits
	var only Step
	var edge, widened Tolerance
	for _, s := range steps {
		if !s.Determined {
			for _, r := range s.Reasons {
				if !slices.Contains(c.Reasons, r) {
					c.Reasons = append(c.Reasons, r)
				}
			}
			continue
		}
		only = s
		inside := s.Edge
		if !s.bound {
			inside = Tolerance{}
		}
		frequency = append(frequency, math.Log(s.Frequency.Value))
		frequencyOwn = append(frequencyOwn, narrow(s.Frequency.StandardUncertainty/s.Frequency.Value, inside.Log))
		damping = append(damping, s.Damping.Value)
		dampingOwn = append(dampingOwn, narrow(s.Damping.StandardUncertainty, inside.Damping))
		edge.Log, edge.Damping = edge.Log+s.Edge.Log, edge.Damping+s.Edge.Damping
		widened.Log, widened.Damping = widened.Log+inside.Log, widened.Damping+inside.Damping
		within += s.Correlation
	}
	c.Steps = len(frequency)
	switch {
	case len(steps) == 0:
		c.Reasons = []string{NoStep}
		return c
	case c.Steps == 0:
		return c
	case c.Steps == 1:
		return only.alone(stopping)
	}
	c.DegreesOfFreedom = float64(c.Steps - 1)
	t := studentT(c.DegreesOfFreedom)
	m, u := mean(frequency, frequencyOwn, t)
	c.LogScatter = u * math.Sqrt(float64(c.Steps))
	if !(u <= largestUncertainty) {
		c.Reasons = []string{UncertaintyTooLarge}
		return c
	}
	factor := stopping.Factor(c.DegreesOfFreedom)
	u *= factor
	uLog := u
	c.Determined, c.Reasons = true, nil
	n := float64(c.Steps)
	c.Edge = Tolerance{edge.Log / n, edge.Damping / n}
	c.Frequency = logEstimate(m, u, t).widen(true, widened.Log/n)
	m, u = mean(damping, dampingOwn, t)
	c.DampingScatter = u * math.Sqrt(float64(c.Steps))
	u *= factor
	c.Damping = Estimate{m, u, math.Max(0, m-t*u), m + t*u}.widen(false, widened.Damping/n)
	c.Correlation = together(frequency, damping, uLog/factor, u/factor, within/float64(c.Steps))
	return c
}

// alone is what a single step says.
func (s Step) alone(stopping Stopping) Combined {
	c := Combined{Determined: true, Frequency: s.Frequency, Damping: s.Damping, Steps: 1, DegreesOfFreedom: s.DegreesOfFreedom, Correlation: s.Correlation, Edge: s.Edge}
	if factor := stopping.Factor(s.DegreesOfFreedom); factor > 1 {
		inside := Tolerance{}
		if s.bound {
			inside = s.Edge
		}
		t := studentT(s.DegreesOfFreedom)
		f, z := s.Frequency, s.Damping
		u := factor * narrow(f.StandardUncertainty/f.Value, inside.Log)
		c.Frequency = logEstimate(math.Log(f.Value), u, t).widen(true, inside.Log)
		u = factor * narrow(z.StandardUncertainty, inside.Damping)
		c.Damping = Estimate{z.Value, u, math.Max(0, z.Value-t*u), z.Value + t*u}.widen(false, inside.Damping)
	}
	return c
}

// together is the correlation of the two means with standard uncertainties ux
// and uy: the covariance of their scatter, and of what ux and uy have beyond
// their scatter, that the fits have within. With the scatter alone every
// linear combination of the two is Student's t with the same degrees of
// freedom, even from two steps.
func together(x, y []float64, ux, uy, within float64) float64 {
	n := float64(len(x))
	var mx, my, xx, yy, xy float64
	for i := range x {
		mx += x[i] / n
		my += y[i] / n
	}
	for i := range x {
		xx += (x[i] - mx) * (x[i] - mx)
		yy += (y[i] - my) * (y[i] - my)
		xy += (x[i] - mx) * (y[i] - my)
	}
	scale := n * (n - 1)
	beyond := math.Sqrt(math.Max(0, ux*ux-xx/scale) * math.Max(0, uy*uy-yy/scale))
	if !(ux*uy > 0) {
		return 0
	}
	return math.Max(-1, math.Min(1, (xy/scale+within*beyond)/(ux*uy)))
}

// mean returns the mean and its standard uncertainty: from the scatter, but
// not less than 1/t of what the single uncertainties own justify.
func mean(values, own []float64, t float64) (m, u float64) {
	n := float64(len(values))
	for _, v := range values {
		m += v / n
	}
	var scatter, within float64
	for i, v := range values {
		scatter += (v - m) * (v - m)
		within += own[i] * own[i]
	}
	return m, math.Max(math.Sqrt(scatter/(n-1)/n), math.Sqrt(within)/n/t)
}

// logEstimate turns a logarithm with its uncertainty into an estimate of the
// quantity: the interval is symmetric in the logarithm.
func logEstimate(m, u, t float64) Estimate {
	v := math.Exp(m)
	return Estimate{v, v * u, v * math.Exp(-t*u), v * math.Exp(t*u)}
}

// studentT is the two-sided 95 % quantile of Student's t.
func studentT(degreesOfFreedom float64) float64 {
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: degreesOfFreedom}.Quantile(0.975)
}
