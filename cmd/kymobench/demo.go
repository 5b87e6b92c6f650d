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
	"kymobench/procedures/run"
	"kymobench/reports/layout1"
)

type demoOptions struct {
	seed  uint64
	uuts  []string
	forms string
	ports string
	out   string
	kept  string // transcript
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
	cmd.Flags().StringSliceVar(&o.uuts, "uut", []string{simulated.Good}, conditionsHelp())
	cmd.Flags().StringVar(&o.forms, "families", "", familiesHelp)
	cmd.Flags().StringVar(&o.ports, "ports", "memory", "memory (virtual time) or pty (pseudo-terminals, real time)")
	cmd.Flags().StringVar(&o.out, "out", "", "folder to make, default kymobench-demo-SEED")
	cmd.Flags().StringVar(&o.kept, "transcript", "", "new file that keeps the bytes of every port")
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
	if o.ports != "memory" && o.ports != "pty" {
		return usagef("--ports is memory or pty, not %q", o.ports)
	}
	var today time.Time
	if o.ports == "pty" {
		today = time.Now() // it runs in real time, so its certificates have to hold today
	}
	b, err := simulatedBench(o.seed, o.uuts, o.forms, today)
	if err != nil {
		return err
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
		definition: d, folder: f, uuts: marksOf(b), operator: demonstrator, seed: o.seed, layout: layout1.Number, covered: layout1.Covered,
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
		j.committer = func(i record.Poster) record.Committer { return record.NewDisk(i) }
		j.console = func(i line.Inbox) run.Operator { return script{inbox: i, err: io.err} }
	} else {
		j.ports = newMemoryPorts(b)
		j.committer = func(i record.Poster) record.Committer { return record.NewSimulated(i, b.CommitLatency) }
		j.console = func(i line.Inbox) run.Operator { return script{inbox: i, err: io.err, after: 500 * time.Millisecond} }
	}
	if j.ports, err = kept(j.ports, o.kept); err != nil {
		return err
	}
	text := b.BenchFile(names)
	if err := writeWhole(filepath.Join(f.dir, "bench.toml"), text); err != nil {
		return err
	}
	if j.file, err = setup.Load("bench.toml", text); err != nil {
		return err
	}
	var truths []truth
	for _, u := range b.UUTs() {
		t := u.Truth
		truths = append(truths, truth{t.NaturalFrequency, t.DampingRatio, t.ZeroOffset, t.Sensitivity, t.Hysteresis})
	}
	return finish(ctx, j, keys, o.json, truths, io)
}

func conditionsHelp() string {
	return "condition of the UUT, or of several on one manifold with commas between: " + strings.Join(simulated.Conditions(), ", ")
}

// familiesHelp names the flag that says how simulated instruments speak.
const familiesHelp = "how the instruments speak, such as reference=modbus,uut=frames,source=lines,valve=modem-line"

// simulatedBench is a bench with a UUT in each of the conditions.
func simulatedBench(seed uint64, conditions []string, forms string, today time.Time) (*simulated.Bench, error) {
	if len(conditions) == 0 {
		return nil, usagef("no UUT: there are %s", strings.Join(simulated.Conditions(), ", "))
	}
	for _, c := range conditions {
		if !slices.Contains(simulated.Conditions(), c) {
			return nil, usagef("no UUT %q: there are %s", c, strings.Join(simulated.Conditions(), ", "))
		}
	}
	families, err := simulated.ParseFamilies(forms)
	if err != nil {
		return nil, usageError{err}
	}
	b, err := simulated.New(simulated.Settings{Seed: seed, Condition: conditions[0], Others: conditions[1:], Families: families, Today: today})
	if err != nil {
		return nil, usageError{err}
	}
	return b, nil
}

// marksOf is what stands on the UUTs of a simulated bench.
func marksOf(b *simulated.Bench) []marks {
	var all []marks
	for _, u := range b.UUTs() {
		all = append(all, marks{u.SerialNumber, u.Model, u.Lot})
	}
	return all
}
