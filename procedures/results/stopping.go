package results

import (
	"math"

	"kymobench/procedures"
	"kymobench/procedures/step"
)

// stopping is the rule the run's steps stopped by: the zero rule when their
// number was fixed, or nobody has looked yet.
func (g *gathered) stopping() step.Stopping {
	if g.definition == nil {
		return step.Stopping{}
	}
	for _, stage := range g.definition.Stages {
		if s, ok := stage.(procedures.Step); ok && s.Least > 0 && len(g.captures) >= s.Least {
			return step.Stopping{Least: s.Least, Most: s.Count}
		}
	}
	return step.Stopping{}
}

// open lists the dynamic limits that the steps do not decide. Decided is a
// limit whose figure lies a whole guard band on one side of it, whatever the
// decision rule calls that.
func (j *judge) open(limits []Limit) *Stopping {
	out := &Stopping{Taken: j.dyn.combined.Steps, Wider: 1, Open: []OpenLimit{}}
	rule := j.g.stopping()
	out.Least, out.Most = rule.Least, rule.Most
	if j.dyn.combined.Determined {
		out.Wider = rule.Factor(j.dyn.combined.DegreesOfFreedom)
	}
	any := false
	for _, l := range limits {
		if l.Name != string(procedures.NaturalFrequency) && l.Name != string(procedures.DampingRatio) {
			continue
		}
		any = true
		low, high := math.Inf(-1), math.Inf(1)
		if l.Bounds.Low != nil {
			low = *l.Bounds.Low
		}
		if l.Bounds.High != nil {
			high = *l.Bounds.High
		}
		if l.Value == nil {
			out.Open = append(out.Open, OpenLimit{Limit: l.Name})
			continue
		}
		if math.Min(math.Abs(*l.Value-low), math.Abs(high-*l.Value)) >= l.GuardBand {
			continue
		}
		out.Open = append(out.Open, OpenLimit{Limit: l.Name, More: j.more(l, rule, low, high)})
	}
	if !any {
		return nil
	}
	return out
}

// more is how many further steps would decide a limit, as it looks now.
func (j *judge) more(l Limit, rule step.Stopping, low, high float64) *int {
	c := j.dyn.combined
	scatter, own := c.DampingScatter, c.Damping.StandardUncertainty
	if l.Name == string(procedures.NaturalFrequency) {
		scatter, own = c.LogScatter*c.Frequency.Value, c.Frequency.StandardUncertainty
	}
	if !(scatter > 0) || l.Expanded == nil || l.Standard == nil {
		return nil
	}
	// What is left of the budget when the steps' part is taken out does not
	// shrink with their number.
	common := *l.Expanded / *l.Standard * math.Sqrt(math.Max(0, *l.Standard**l.Standard-own*own))
	if n, can := rule.More(c.Steps, *l.Value, scatter, common, low, high, l.GuardBand / *l.Expanded); can {
		n = max(n, 1)
		return &n
	}
	return nil
}
