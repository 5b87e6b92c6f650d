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

// sampled is how many draws a Monte Carlo takes; they leave some 0.4 % in its
// half-width.
const sampled = 50_000

// doubtful is by how much the shortcut of GUM (effective degrees of freedom, t
// factor) and the Monte Carlo may differ before the latter is used.
const doubtful = 0.05

// summed is what a budget adds up to.
type summed struct {
	uncertainty.Combined
	sampled *MonteCarlo // set when it gave Expanded
}

// sum combines the budget. The shortcut is checked by a Monte Carlo where it
// can be off: one rectangle outweighs the rest, or few degrees of freedom carry
// a good part. Where it is off by more than 5 % the Monte Carlo counts.
func (b *budget) sum(seed uint64) (summed, error) {
	in := b.inputs()
	out := summed{Combined: uncertainty.Combine(in)}
	if b.why != "" || !suspect(in) {
		return out, nil
	}
	s, err := uncertainty.Sample(together(in, out.Standard), sampled, seed)
	if err != nil {
		return out, err
	}
	if math.Abs(s.Expanded/out.Expanded-1) > doubtful {
		out.sampled = &MonteCarlo{Draws: s.Draws, Seed: seed, Expanded: s.Expanded, Error: s.Error, Shortcut: out.Expanded}
		out.Expanded = s.Expanded
	}
	return out, nil
}

// together puts what is normal with many degrees of freedom, and what is under
// a hundredth of the whole, into one contribution: their sum is normal, and one
// is drawn faster than ten.
func together(in []uncertainty.Input, whole float64) []uncertainty.Input {
	rest := uncertainty.Input{Name: "together", Distribution: uncertainty.Normal, Sensitivity: 1}
	var out []uncertainty.Input
	for _, i := range in {
		c := i.Standard * i.Sensitivity
		many := i.DegreesOfFreedom == 0 || i.DegreesOfFreedom > 200
		if i.Distribution != uncertainty.Rectangular && many || math.Abs(c) < whole/100 {
			rest.Standard = math.Hypot(rest.Standard, c)
			continue
		}
		out = append(out, i)
	}
	return append(out, rest)
}

// suspect says whether a Monte Carlo could come out more than 5 % away from
// the shortcut. Computed with scipy 1.10: one rectangle beside a normal rest is
// 4.5 % off at 65 % of the variance and 5.5 % at 70 %; a t with 8 degrees of
// freedom beside a normal rest at worst 4.7 %, with 2 already 14 % at a tenth
// of the variance.
func suspect(in []uncertainty.Input) bool {
	var v, wide, few float64
	for _, i := range in {
		c := i.Standard * i.Sensitivity
		v += c * c
		switch {
		case i.Distribution == uncertainty.Rectangular:
			wide = math.Max(wide, c*c)
		case i.DegreesOfFreedom > 0 && i.DegreesOfFreedom < fewDegrees:
			few += c * c
		}
	}
	return wide > 0.65*v || few > 0.05*v && few < 0.999*v
}

// fewDegrees is below how many the effective degrees of freedom are doubted.
const fewDegrees = 8
