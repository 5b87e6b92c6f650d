package main

import (
	"bufio"
	"context"
	"fmt"
	"io"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"kymobench/bench/simulated"
)

type simulateOptions struct {
	forms string
	dir   string
	uuts  []string
	seed  uint64
}

func newSimulateCommand(s streams) *cobra.Command {
	var o simulateOptions
	cmd := &cobra.Command{
		Use:   "simulate",
		Short: "Publish the simulated bench as pseudo-terminals",
		Long: `Publishes the simulated instruments as pseudo-terminals in DIR/ports until ^C and
writes DIR/bench.toml and demonstration keys, so that kymobench run in another
terminal, or any program, can talk to them. Linux and macOS. Every line "flush"
that is typed drives air out of the simulated line, for kymobench prime.`,
		Example: `  kymobench simulate --dir sim`,
		Args:    noArguments,
		RunE:    func(cmd *cobra.Command, _ []string) error { return runSimulate(cmd.Context(), o, s) },
	}
	cmd.Flags().StringVar(&o.dir, "dir", "", "folder for ports, bench.toml and trust")
	cmd.Flags().StringSliceVar(&o.uuts, "uut", []string{simulated.Good}, conditionsHelp())
	cmd.Flags().StringVar(&o.forms, "families", "", familiesHelp)
	cmd.Flags().Uint64Var(&o.seed, "seed", 1, "what the simulated bench is drawn from")
	return cmd
}

func runSimulate(ctx context.Context, o simulateOptions, s streams) error {
	if o.dir == "" {
		return usagef("--dir is needed")
	}
	b, err := simulatedBench(o.seed, o.uuts, o.forms, time.Now())
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
	fmt.Fprintf(s.err, "the simulated bench is there until ^C; in another terminal:\n  kymobench run --bench %s --procedure incoming", path)
	for _, u := range b.UUTs() {
		fmt.Fprintf(s.err, " --serial-number %s", u.SerialNumber)
	}
	fmt.Fprintln(s.err, "\na line \"flush\" here drives air out of the simulated line")
	go flushes(s.in, b)
	<-ctx.Done()
	fmt.Fprintln(s.err, "the simulated bench is gone")
	return published.Close()
}

// flushes hears what is typed. It blocks in reading, so it is left behind at
// the end of the process.
func flushes(in io.Reader, b *simulated.Bench) {
	for lines := bufio.NewScanner(in); lines.Scan(); {
		if strings.TrimSpace(lines.Text()) == "flush" {
			b.Flush()
		}
	}
}
