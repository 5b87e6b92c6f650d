package main

import (
	"context"
	"fmt"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"kymobench/bench/simulated"
)

type simulateOptions struct {
	dir  string
	uuts []string
	seed uint64
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
	cmd.Flags().StringSliceVar(&o.uuts, "uut", []string{simulated.Good}, conditionsHelp())
	cmd.Flags().Uint64Var(&o.seed, "seed", 1, "what the simulated bench is drawn from")
	return cmd
}

func runSimulate(ctx context.Context, o simulateOptions, io streams) error {
	if o.dir == "" {
		return usagef("--dir is needed")
	}
	b, err := simulatedBench(o.seed, o.uuts, time.Now())
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
	fmt.Fprintf(io.err, "the simulated bench is there until ^C; in another terminal:\n  kymobench run --bench %s --procedure incoming", path)
	for _, u := range b.UUTs() {
		fmt.Fprintf(io.err, " --serial-number %s", u.SerialNumber)
	}
	fmt.Fprintln(io.err)
	<-ctx.Done()
	fmt.Fprintln(io.err, "the simulated bench is gone")
	return published.Close()
}
