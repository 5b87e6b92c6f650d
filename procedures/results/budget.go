package results

import (
	"math"

	"kymobench/procedures/uncertainty"
)

// budget collects the contributions to one figure's uncertainty.
type budget struct {
	entries []entry
	why     string // why there is no uncertainty though there are contributions
}

// entry is one contribution with the number that its standard uncertainty was
// made from.
type entry struct {
	uncertainty.Input
	unit            string
	stated, divisor float64
}

// stated is a number that says how uncertain something is: standard is its
// value over its divisor.
type stated struct {
	value, divisor, standard float64
	distribution             string
}

// certified is an expanded uncertainty with its coverage factor; nothing
// without one.
func certified(expanded, k float64) stated {
	if !(k > 0) {
		return stated{}
	}
	return stated{expanded, k, uncertainty.FromExpanded(expanded, k), uncertainty.Normal}
}

// halfWidth is what lies anywhere within plus and minus a.
func halfWidth(a float64) stated {
	return stated{a, 1 / uncertainty.FromHalfWidth(1), uncertainty.FromHalfWidth(a), uncertainty.Rectangular}
}

// fullWidth is what lies anywhere within a width w from end to end.
func fullWidth(w float64) stated {
	return stated{w, 1 / uncertainty.FromFullWidth(1), uncertainty.FromFullWidth(w), uncertainty.Rectangular}
}

// scatter is a standard deviation found in the run, with degrees of freedom of
// its own.
func scatter(s float64) stated { return stated{s, 1, s, uncertainty.StudentT} }

// put takes one input: what is stated of it in its own unit, the sensitivity
// coefficient to the figure's unit, and degrees of freedom (0: infinite). An
// input without uncertainty is left out: nobody stated one.
func (b *budget) put(name, source, unit string, s stated, sensitivity, dof float64) {
	if s.standard == 0 || sensitivity == 0 {
		return
	}
	b.entries = append(b.entries, entry{uncertainty.Input{
		Name: name, Source: source, Distribution: s.distribution, Standard: s.standard, Sensitivity: sensitivity, DegreesOfFreedom: dof,
	}, unit, s.value, s.divisor})
}

// add is put for an input of which the standard uncertainty is all there is.
func (b *budget) add(name, source, distribution, unit string, standard, sensitivity, dof float64) {
	b.put(name, source, unit, stated{standard, 1, standard, distribution}, sensitivity, dof)
}

const (
	normal      = uncertainty.Normal
	rectangular = uncertainty.Rectangular
	studentT    = uncertainty.StudentT

	fromCertificate = "certificate"
	fromBench       = "bench file"
	fromRun         = "this run"
	fromStatement   = "stated"
)

func (b *budget) inputs() []uncertainty.Input {
	in := make([]uncertainty.Input, len(b.entries))
	for i, e := range b.entries {
		in[i] = e.Input
	}
	return in
}

// lines returns the budget for the Results.
func (b *budget) lines() []BudgetLine {
	lines := make([]BudgetLine, 0, len(b.entries))
	for i, e := range b.entries {
		l := BudgetLine{
			Name: e.Name, Source: e.Source, Distribution: e.Distribution, Standard: e.Standard, Unit: e.unit,
			Sensitivity: e.Sensitivity, Contribution: math.Abs(e.Standard * e.Sensitivity), Stated: e.stated, Divisor: e.divisor,
		}
		if e.DegreesOfFreedom > 0 && !math.IsInf(e.DegreesOfFreedom, 1) {
			l.DoF = &b.entries[i].DegreesOfFreedom
		}
		lines = append(lines, l)
	}
	return lines
}

// scaled returns the budget with every sensitivity multiplied, for a change of
// unit of the figure.
func (b *budget) scaled(by float64) *budget {
	out := &budget{why: b.why}
	for _, e := range b.entries {
		e.Sensitivity *= by
		out.entries = append(out.entries, e)
	}
	return out
}

// drawnTo is the share of the half-width that two standard errors of a Monte
// Carlo may be: two digits of it are printed.
const drawnTo = 0.01

// sum is what the budget adds up to: after the GUM, or by Monte Carlo where
// that is more than 5 % off.
func (b *budget) sum(seed uint64) (uncertainty.Evaluation, error) {
	return uncertainty.Evaluate(uncertainty.Budget{Inputs: b.inputs()}, uncertainty.Settings{Seed: seed, Tolerance: drawnTo})
}

// sampledOf says that an interval was sampled; nil when it was not.
func sampledOf(e uncertainty.Evaluation) *MonteCarlo {
	if e.Method != uncertainty.MonteCarlo {
		return nil
	}
	return &MonteCarlo{Draws: e.Draws, Seed: e.Seed, Expanded: e.Expanded, Error: e.Error, Shortcut: e.Shortcut}
}
