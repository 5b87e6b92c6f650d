package reports

import (
	"kymobench/procedures/results"
)

// budgets lays out the uncertainty of every judged result.
func (d *Document) budgets(limits []results.Limit) {
	for _, l := range limits {
		unit := unitText(l.Unit)
		b := Budget{Title: limitText(l.Name), Unit: unit}
		if l.At != nil {
			b.Title += " at " + withUnit(stated(*l.At), "mmHg")
		}
		var sum float64
		for _, c := range l.Budget {
			sum += c.Contribution * c.Contribution
		}
		for _, c := range l.Budget {
			line := BudgetLine{
				Name: capital(c.Name), Source: c.Source, Distribution: c.Distribution,
				Standard: withUnit(significant(c.Standard, 3), unitText(c.Unit)), Sensitivity: significant(c.Sensitivity, 3),
				Contribution: significant(c.Contribution, 3), DoF: dof(c.DoF),
			}
			if sum > 0 {
				line.Share = c.Contribution * c.Contribution / sum
			}
			b.Lines = append(b.Lines, line)
		}
		if l.Standard != nil && l.Coverage != nil && l.Expanded != nil {
			b.Sum = "combined " + significant(*l.Standard, 3) + ", ν " + dof(l.DoF) + ", k " + significant(*l.Coverage, 3) +
				", expanded ± " + withUnit(significant(*l.Expanded, 2), unit)
		}
		if len(b.Lines) == 0 {
			b.Missing = "No budget: " + orUnknown(oneLine(l.Reason))
			if l.Value != nil {
				b.Missing = "No contributions are stored for this result."
			}
		}
		d.Budgets = append(d.Budgets, b)
	}
}

// dof prints degrees of freedom; none stated are infinitely many, and from ten
// thousand on nobody can tell the difference.
func dof(n *float64) string {
	if n == nil {
		return "∞"
	}
	if *n >= 1e4 {
		return "> 9999"
	}
	return significant(*n, 3)
}
