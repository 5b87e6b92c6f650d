package main

import (
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"

	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

type explainOptions struct {
	limits string
	json   bool
}

func newExplainCommand(io streams) *cobra.Command {
	var o explainOptions
	cmd := &cobra.Command{
		Use:   "explain RECORD LIMIT",
		Short: "Lay out one limit as arithmetic that can be checked by hand",
		Long: `Lays out how one limit of a closed record came out, from the texts received through
unit, correction, head, zero and figure to budget, guard band and outcome. Each
line of arithmetic gives its result on a pocket calculator of ten digits. LIMIT is
a name as in the procedure: zero_offset, sensitivity, accuracy, hysteresis ...
With --limits the record is explained under other limits, as judge does.`,
		Example: `  kymobench explain runs/20260601T133700Z-0001.record accuracy`,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) != 2 {
				return usagef("a record and the name of a limit are expected, %d words were given", len(args))
			}
			return nil
		},
		RunE: func(_ *cobra.Command, args []string) error { return runExplain(args[0], args[1], o, io) },
	}
	cmd.Flags().StringVar(&o.limits, "limits", "", "explain under the limits of a procedure or a file")
	cmd.Flags().BoolVar(&o.json, "json", false, "one JSON document on stdout")
	return cmd
}

func runExplain(path, limit string, o explainOptions, io streams) error {
	var rules *procedures.Rules
	if o.limits != "" {
		var err error
		if rules, err = rulesOf(o.limits); err != nil {
			return err
		}
	}
	run, err := record.ReadClosed(path)
	if err != nil {
		return err
	}
	e, err := results.Explain(run.Events, rules, limit)
	if err != nil {
		return usageError{fmt.Errorf("%s: %w", path, err)}
	}
	if o.json {
		return encode(io.out, struct {
			Schema string `json:"schema"`
			results.Explanation
		}{"kymobench/explain/1", e})
	}
	if rules != nil {
		fmt.Fprintln(io.out, notItsOwn)
	}
	return printExplanation(io.out, e)
}

// printExplanation writes a step a line, "name: arithmetic = result unit"; a
// long one goes on in lines that begin with six blanks.
func printExplanation(w io.Writer, e results.Explanation) error {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %s\n", e.Limit, strings.ReplaceAll(e.Outcome, "_", " "))
	for _, s := range e.Sections {
		fmt.Fprintf(&b, "\n%s\n", s.Title)
		for _, step := range s.Steps {
			text := "  " + step.Name + ": " + step.Note
			if step.Arithmetic != "" {
				text = "  " + step.Name + ": " + step.Arithmetic + " = " + strings.TrimSpace(step.Result+" "+step.Unit)
			}
			b.WriteString(wrapped(text, budgetWidth, "      "))
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}
