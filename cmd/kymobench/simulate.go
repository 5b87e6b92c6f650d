package main

import (
	"context"
	"fmt"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"kymobench/bench/simulated"
)

type simulateOptions struct {
	dir, uut string
	seed     uint64
}

func newSimulateCommand(io streams) *cobra.Command {
	var o simulateOptions
	cmd := &cobra.Command{
		Use:   "simulate",
		Short: "Publish the simulated bench as pseudo-terminals",
		Long: `Publishes the simulated instruments as pseudo-terminals in DIR/ports until ^C and
writes DIR/bench.toml and demonstration keys, so that kymobench run in another
terminal, or any program, can talk to them. Linux and macOS.`,
		Example: `  kymobench simulate --dir sim`,
		Args:    noArguments,
		RunE:    func(cmd *cobra.Command, _ []string) error { return runSimulate(cmd.Context(), o, io) },
	}
	cmd.Flags().StringVar(&o.dir, "dir", "", "folder for ports, bench.toml and trust")
	cmd.Flags().StringVar(&o.uut, "uut", simulated.Good, "condition of the UUT: "+strings.Join(simulated.Conditions(), ", "))
	cmd.Flags().Uint64Var(&o.seed, "seed", 1, "what the simulated bench is drawn from")
	return cmd
}

func runSimulate(ctx context.Context, o simulateOptions, io streams) error {
	if o.dir == "" {
		return usagef("--dir is needed")
	}
	if !slices.Contains(simulated.Conditions(), o.uut) {
		return usagef("no UUT %q: there are %s", o.uut, strings.Join(simulated.Conditions(), ", "))
	}
	b, err := simulated.New(simulated.Settings{Seed: o.seed, Condition: o.uut})
	if err != nil {
		return err
	}
	dir, err := filepath.Abs(o.dir)
	if err != nil {
		return err
	}
	f := folder{dir}
	if err := f.make(); err != nil {
		return err
	}
	if _, err := newDemonstrationKeys(f.trust()); err != nil {
		return err
	}
	published, err := b.Publish(filepath.Join(dir, "ports"))
	if err != nil {
		return err
	}
	path := filepath.Join(dir, "bench.toml")
	if err := writeWhole(path, b.BenchFile(published.Ports())); err != nil {
		return err
	}
	fmt.Fprintf(io.err, "the simulated bench is there until ^C; in another terminal:\n  kymobench run --bench %s --procedure incoming --serial-number %s\n", path, b.SerialNumber())
	<-ctx.Done()
	fmt.Fprintln(io.err, "the simulated bench is gone")
	return published.Close()
}
