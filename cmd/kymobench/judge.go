package main

import (
	"fmt"
	"io"
	"os"
	"slices"

	"github.com/spf13/cobra"

	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

type judgeOptions struct {
	limits string
	json   bool
}

func newJudgeCommand(io streams) *cobra.Command {
	var o judgeOptions
	cmd := &cobra.Command{
		Use:   "judge RECORD --limits FILE",
		Short: "Judge a recorded run again under other limits",
		Long: `Judges what a closed record holds under other limits or another decision rule:
those of a procedure (a shipped one or a file) or of a file of limits alone. The
record is not touched, and what comes out is not its own verdict.

Exit codes: 0 accepted, 3 rejected, 4 inconclusive; 5 the record is damaged.`,
		Example: `  kymobench judge runs/20260601T133700Z-0001.record --limits stricter.toml`,
		Args:    oneFile,
		RunE:    func(_ *cobra.Command, args []string) error { return runJudge(args[0], o, io) },
	}
	cmd.Flags().StringVar(&o.limits, "limits", "", "a procedure, or a file with schema kymobench/limits/1")
	cmd.Flags().BoolVar(&o.json, "json", false, "one JSON document on stdout")
	return cmd
}

// judgeDocument is the public JSON of a run judged again.
type judgeDocument struct {
	Schema     string           `json:"schema"`
	Note       string           `json:"note"`
	OwnVerdict string           `json:"own_verdict"`
	Rules      rulesDocument    `json:"judged_by"`
	Verdict    string           `json:"verdict"`
	Reasons    []results.Reason `json:"reasons"`
	Limits     []results.Limit  `json:"limits"`
	Record     string           `json:"record"`
}

type rulesDocument struct {
	File        string  `json:"file"`
	Title       string  `json:"title"`
	SHA256      string  `json:"sha256"`
	Rule        string  `json:"rule"`
	GuardFactor float64 `json:"guard_factor"`
}

// notItsOwn stands on top of whatever a judgement under other limits says.
const notItsOwn = "judged again under other limits: this is NOT the record's own verdict"

func runJudge(path string, o judgeOptions, io streams) error {
	if o.limits == "" {
		return usagef("--limits is needed: a procedure, or a file of limits")
	}
	rules, err := rulesOf(o.limits)
	if err != nil {
		return err
	}
	run, err := record.ReadClosed(path)
	if err != nil {
		return err
	}
	own, _, err := results.Stored(run.Events)
	if err != nil {
		return usageError{fmt.Errorf("%s: %w", path, err)}
	}
	r, err := results.Under(run.Events, rules)
	if err != nil {
		return usageError{fmt.Errorf("%s: %w", path, err)}
	}
	if o.json {
		d := judgeDocument{
			Schema: "kymobench/judge/1", Note: notItsOwn, OwnVerdict: own.Verdict.String(),
			Rules:   rulesDocument{rules.Name, rules.Title, rules.SHA256, string(rules.Decision.Rule), rules.Decision.GuardFactor},
			Verdict: r.Verdict.String(), Reasons: r.Reasons, Limits: r.Limits, Record: path,
		}
		err = encode(io.out, d)
	} else {
		err = printJudgement(io.out, rules, own, r)
	}
	if code := exitFor(r); err == nil && code != exitDone {
		return ended{code}
	}
	return err
}

func printJudgement(w io.Writer, rules *procedures.Rules, own, r results.Results) error {
	fmt.Fprintln(w, notItsOwn)
	fmt.Fprintf(w, "judged by: %s, %s, sha256 %s\n", rules.Title, rules.Name, rules.SHA256)
	fmt.Fprintf(w, "the record's own verdict: %s\n", own.Verdict)
	printRun(w, r)
	return nil
}

// rulesOf takes the limits of a shipped procedure or of a file.
func rulesOf(name string) (*procedures.Rules, error) {
	if slices.Contains(procedures.ShippedNames(), name) {
		d, err := procedures.Shipped(name)
		if err != nil {
			return nil, err
		}
		r := d.Rules()
		return &r, nil
	}
	data, err := os.ReadFile(name)
	if err != nil {
		return nil, err
	}
	return procedures.LoadRules(name, data)
}
