package results

import (
	"fmt"

	"kymobench/procedures"
	"kymobench/procedures/record"
)

// Under computes the Results of a record as though its procedure had held the
// readings against these limits by this decision rule. What was done, and what
// a stage demanded of itself, stays as the record has it. The limits must be
// meant for the kind of unit that was tested.
func Under(events []record.Event, rules *procedures.Rules) (Results, error) {
	g, err := gather(events)
	if err != nil {
		return Results{}, err
	}
	if err := g.under(rules); err != nil {
		return Results{}, err
	}
	return g.compute()
}

// under puts other rules in the place of the procedure's.
func (g *gathered) under(rules *procedures.Rules) error {
	if g.definition == nil {
		return fmt.Errorf("the record names no procedure, so nothing was judged in it")
	}
	if rules.UUTKind != g.definition.UUTKind {
		return fmt.Errorf("the limits of %s are those of a %s, and the record is of a %s", rules.Name, rules.UUTKind, g.definition.UUTKind)
	}
	other := *g.definition
	other.Limits, other.Decision = rules.Limits, rules.Decision
	g.definition = &other
	return nil
}
