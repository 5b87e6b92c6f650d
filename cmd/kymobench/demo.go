package main

import (
	"context"
	"fmt"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/simulated"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
	"kymobench/procedures/run"
	"kymobench/reports/layout1"
)

type demoOptions struct {
	seed  uint64
	uut   string
	ports string
	out   string
	json  bool
}

func newDemoCommand(io streams) *cobra.Command {
	var o demoOptions
	cmd := &cobra.Command{
		Use:   "demo",
		Short: "The whole job on the simulated bench, with a signed report",
		Long: `Takes a simulated UUT through incoming inspection and leaves record, signed
report and trust root in a new folder. Everybody and everything in it is
invented; the keys are for demonstration and the report says so.

Exit codes: 0 accepted, 3 rejected, 4 inconclusive.`,
		Example: `  kymobench demo --uut air-bubble --seed 7 --out /tmp/bubble`,
		Args:    noArguments,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return runDemo(cmd.Context(), o, cmd.Flags().Changed("out"), io)
		},
	}
	cmd.Flags().Uint64Var(&o.seed, "seed", 1, "what the simulated bench is drawn from")
	cmd.Flags().StringVar(&o.uut, "uut", simulated.Good, "condition of the UUT: "+strings.Join(simulated.Conditions(), ", "))
	cmd.Flags().StringVar(&o.ports, "ports", "memory", "memory (virtual time) or pty (pseudo-terminals, real time)")
	cmd.Flags().StringVar(&o.out, "out", "", "folder to make, default kymobench-demo-SEED")
	cmd.Flags().BoolVar(&o.json, "json", false, "one JSON document on stdout")
	return cmd
}

func noArguments(_ *cobra.Command, args []string) error {
	if len(args) > 0 {
		return usagef("%q is not expected here", args[0])
	}
	return nil
}

func runDemo(ctx context.Context, o demoOptions, named bool, io streams) error {
	if !slices.Contains(simulated.Conditions(), o.uut) {
		return usagef("no UUT %q: there are %s", o.uut, strings.Join(simulated.Conditions(), ", "))
	}
	if o.ports != "memory" && o.ports != "pty" {
		return usagef("--ports is memory or pty, not %q", o.ports)
	}
	b, err := simulated.New(simulated.Settings{Seed: o.seed, Condition: o.uut})
	if err != nil {
		return usageError{err}
	}
	if o.out == "" {
		if named {
			return usagef("--out is empty")
		}
		o.out = fmt.Sprintf("kymobench-demo-%d", o.seed)
	}
	f, err := newFolder(o.out, named)
	if err != nil {
		return err
	}
	keys, err := newDemonstrationKeys(f.trust())
	if err != nil {
		return err
	}
	d, err := procedures.Shipped("incoming")
	if err != nil {
		return err
	}
	j := job{
		definition: d, folder: f, serial: b.SerialNumber(), marks: marks{b.Model(), b.Lot()},
		operator: demonstrator, seed: o.seed, layout: layout1.Number, covered: layout1.Covered,
	}
	names := map[string]string{}
	if o.ports == "pty" {
		published, err := b.Publish(filepath.Join(f.dir, "ports"))
		if err != nil {
			return err
		}
		defer published.Close()
		names = published.Ports()
		j.ports = newSerialPorts()
		j.committer = func(i line.Inbox) record.Committer { return record.NewDisk(i) }
		j.console = func(i line.Inbox) run.Operator { return script{inbox: i, err: io.err} }
	} else {
		j.ports = newMemoryPorts(b)
		j.committer = func(i line.Inbox) record.Committer { return record.NewSimulated(i, b.CommitLatency) }
		j.console = func(i line.Inbox) run.Operator { return script{inbox: i, err: io.err, after: 500 * time.Millisecond} }
	}
	text := b.BenchFile(names)
	if err := writeWhole(filepath.Join(f.dir, "bench.toml"), text); err != nil {
		return err
	}
	if j.file, err = setup.Load("bench.toml", text); err != nil {
		return err
	}
	t := b.Truth()
	return finish(ctx, j, keys, o.json, &truth{t.NaturalFrequency, t.DampingRatio, t.ZeroOffset, t.Sensitivity, t.Hysteresis}, io)
}

// finish carries the job, seals its report and shows how it went.
func finish(ctx context.Context, j job, keys signer, asJSON bool, simulatedTruth *truth, io streams) error {
	out, err := j.carry(ctx)
	if err != nil {
		return err
	}
	if out.Stopped {
		fmt.Fprintf(io.err, "stopped and vented: %s\nthe record stays open: %s\n", out.Why, out.record)
		if asJSON {
			d := runDocument{Schema: "kymobench/run/1", Verdict: "inconclusive", Record: out.record}
			d.Reasons, d.Limits = []results.Reason{{Code: "stopped", Text: out.Why}}, []results.Limit{}
			if err := encode(io.out, d); err != nil {
				return err
			}
		}
		return ended{exitInconclusive}
	}
	if keys.key == nil {
		fmt.Fprintln(io.err, "record closed; no key is named in the bench file, so no report was signed")
		return show(out, "", keys, asJSON, simulatedTruth, io)
	}
	fmt.Fprintln(io.err, "record closed, making the report")
	path := filepath.Join(j.folder.reports(), strings.TrimSuffix(filepath.Base(out.record), ".record")+".pdf")
	if err := sealReport(out.record, path, keys); err != nil {
		return err
	}
	return show(out, path, keys, asJSON, simulatedTruth, io)
}

// show prints what a run found and the files it left.
func show(out outcome, path string, keys signer, asJSON bool, simulatedTruth *truth, io streams) error {
	if asJSON {
		d := documentOf(out.Results, out.record)
		d.Truth = simulatedTruth
		if path != "" {
			d.Report = &path
		}
		if err := encode(io.out, d); err != nil {
			return err
		}
	} else {
		printRun(io.out, out.Results)
		fmt.Fprintf(io.out, "record: %s\n", out.record)
		if path != "" {
			fmt.Fprintf(io.out, "report: %s\ntrust:  %s\n", path, keys.root)
		}
	}
	if code := exitFor(out.Results); code != exitDone {
		return ended{code}
	}
	return nil
}
