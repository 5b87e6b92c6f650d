package main

import (
	"context"
	"fmt"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/procedures"
	"kymobench/procedures/results"
	"kymobench/procedures/run"
)

type primeOptions struct {
	bench, procedure string
	json             bool
}

func newPrimeCommand(io streams) *cobra.Command {
	var o primeOptions
	cmd := &cobra.Command{
		Use:   "prime",
		Short: "Help to fill a line free of air, by trial releases",
		Long: `Makes one trial release after the other on the bench's first place, as the
procedure's step stage says, and after each shows natural frequency, damping and
their product with the uncertainty of that one release and what to do next: air lowers the frequency and
leaves the product alone, a narrowing raises the product. Vented between releases
and at the end; nothing is recorded. "stop", the end of the input and ^C end it.

Exit 4 when no release gave a natural frequency.`,
		Example: `  kymobench prime --bench bench.toml`,
		Args:    noArguments,
		RunE:    func(cmd *cobra.Command, _ []string) error { return runPrime(cmd.Context(), o, io) },
	}
	f := cmd.Flags()
	f.StringVar(&o.bench, "bench", "", "bench file")
	f.StringVar(&o.procedure, "procedure", "incoming", "whose step stage and limits count: shipped ("+strings.Join(procedures.ShippedNames(), ", ")+") or a file")
	f.BoolVar(&o.json, "json", false, "one JSON document on stdout at the end")
	return cmd
}

// primeDocument is the public JSON of a round of trial releases.
type primeDocument struct {
	Schema string                 `json:"schema"`
	Trials []results.PrimingTrial `json:"trials"`
	Ended  string                 `json:"ended"`
}

func runPrime(ctx context.Context, o primeOptions, io streams) error {
	if o.bench == "" {
		return usagef("--bench is needed")
	}
	d, err := definitionOf(o.procedure)
	if err != nil {
		return err
	}
	text, err := os.ReadFile(o.bench)
	if err != nil {
		return err
	}
	file, err := setup.Load(o.bench, text)
	if err != nil {
		return err
	}
	return prime(ctx, file, d, newSerialPorts(), func(i line.Inbox) run.Operator { return newConsole(io.in, io.err, i) }, o.json, io)
}

func prime(ctx context.Context, file *setup.File, d *procedures.Definition, ports setup.Opener, console func(line.Inbox) run.Operator, asJSON bool, io streams) error {
	for _, stage := range d.Stages {
		if s, ok := stage.(procedures.Step); ok && s.Size > file.Highest {
			return usagef("a release begins at %.0f mmHg, the bench file allows %.0f mmHg", s.Size.MmHg(), file.Highest.MmHg())
		}
	}
	first := *file
	first.Others = nil
	rig, err := first.Open(ports)
	if err != nil {
		return err
	}
	out, err := run.Prime(ctx, run.Settings{
		Definition: d, Facts: factsOf(&first), Rig: rig, Operator: console(rig.Inbox),
		Subjects: []run.Subject{subjectOf(first.Places()[0], d, marks{})},
	})
	if closing := rig.Close(); err == nil {
		err = closing
	}
	if err != nil {
		return err
	}
	if asJSON {
		doc := primeDocument{Schema: "kymobench/prime/1", Trials: out.Trials, Ended: out.Why}
		if doc.Trials == nil {
			doc.Trials = []results.PrimingTrial{}
		}
		if err := encode(io.out, doc); err != nil {
			return err
		}
	} else {
		printPriming(io, out)
	}
	for _, t := range out.Trials {
		if t.Frequency != nil {
			return nil
		}
	}
	return ended{exitInconclusive}
}

// printPriming shows all trials once more, a line each.
func printPriming(io streams, out run.Priming) {
	fmt.Fprintf(io.err, "vented; %s\n", out.Why)
	for _, t := range out.Trials {
		if t.Frequency == nil {
			fmt.Fprintf(io.out, "release %d: undetermined %v\n", t.Number, t.Reasons)
			continue
		}
		fmt.Fprintf(io.out, "release %d: natural frequency %.4g Hz, damping ratio %.3g, fn x zeta %.4g Hz: %s\n", t.Number, t.Frequency.Value, t.Damping.Value, *t.Product.Value, t.Advice.Code)
	}
}
