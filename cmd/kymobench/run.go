package main

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/run"
	"kymobench/reports/layout1"
)

type runOptions struct {
	bench, procedure, out, operator, model, lot, overdue, transcript string

	serials []string
	json    bool
}

func newRunCommand(io streams) *cobra.Command {
	var o runOptions
	cmd := &cobra.Command{
		Use:   "run",
		Short: "Carry out a procedure on a bench",
		Long: `Opens the instruments of a bench file, leads through the procedure and leaves
record and report in --out. A prompt takes one line; "stop" or the end of the
input vents and leaves the record open (exit 4), and so does ^C.

Exit codes: 0 accepted, 3 rejected, 4 inconclusive or stopped.`,
		Example: `  kymobench run --bench bench.toml --procedure incoming --serial-number P-1234`,
		Args:    noArguments,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if cmd.Flags().Changed("allow-overdue") && (strings.TrimSpace(o.overdue) == "" || len([]rune(o.overdue)) > 200) {
				return usagef("--allow-overdue takes a reason of 1 to 200 characters")
			}
			return runRun(cmd.Context(), o, io)
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.bench, "bench", "", "bench file")
	f.StringVar(&o.procedure, "procedure", "", "a shipped procedure ("+strings.Join(procedures.ShippedNames(), ", ")+") or a file")
	f.StringArrayVar(&o.serials, "serial-number", nil, "of the UUT; once for each UUT on a manifold, in the bench file's order")
	f.StringVar(&o.model, "model", "", "of the UUT, as marked")
	f.StringVar(&o.lot, "lot", "", "of the UUT, as marked")
	f.StringVar(&o.operator, "operator", "", "who carries it out")
	f.StringVar(&o.out, "out", ".", "folder for runs and reports")
	f.StringVar(&o.overdue, "allow-overdue", "", "why a certificate past its due date is used; the verdict is then inconclusive at best")
	f.StringVar(&o.transcript, "transcript", "", "new file that keeps the bytes of every port")
	f.BoolVar(&o.json, "json", false, "one JSON document on stdout")
	return cmd
}

func runRun(ctx context.Context, o runOptions, io streams) error {
	for _, need := range []struct{ flag, value string }{{"bench", o.bench}, {"procedure", o.procedure}, {"serial-number", strings.Join(o.serials, "")}} {
		if need.value == "" {
			return usagef("--%s is needed", need.flag)
		}
	}
	var uuts []marks
	for _, serial := range o.serials {
		if serial == "" || strings.TrimSpace(serial) != serial || len([]rune(serial)) > 64 {
			return usagef("the serial number %q is empty, has blanks around it or more than 64 characters", serial)
		}
		uuts = append(uuts, marks{serial, o.model, o.lot})
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
	var keys signer
	if file.Keys != "" {
		if !file.Simulated {
			return usagef("%s names keys, which only a simulated bench does so far", o.bench)
		}
		if keys, err = demonstrationKeys(filepath.Join(filepath.Dir(o.bench), file.Keys)); err != nil {
			return err
		}
	}
	operator := o.operator
	if operator == "" {
		operator = "not named"
		if keys.key != nil {
			operator = keys.key.Certificate.Subject.CommonName
		}
	}
	absolute, err := filepath.Abs(o.out)
	if err != nil {
		return err
	}
	f := folder{absolute}
	if err := f.make(); err != nil {
		return err
	}
	ports, err := kept(newSerialPorts(), o.transcript)
	if err != nil {
		return err
	}
	return finish(ctx, job{
		file: file, ports: ports, definition: d, folder: f, uuts: uuts, operator: operator,
		layout: layout1.Number, covered: layout1.Covered, overdue: strings.TrimSpace(o.overdue),
		committer: func(i record.Poster) record.Committer { return record.NewDisk(i) },
		console:   func(i line.Inbox) run.Operator { return newConsole(io.in, io.err, i) },
	}, keys, o.json, nil, io)
}

// definitionOf takes a shipped name or a file.
func definitionOf(name string) (*procedures.Definition, error) {
	if slices.Contains(procedures.ShippedNames(), name) {
		return procedures.Shipped(name)
	}
	data, err := os.ReadFile(name)
	if errors.Is(err, os.ErrNotExist) {
		return nil, usagef("no procedure %q: shipped are %s, and there is no such file", name, strings.Join(procedures.ShippedNames(), ", "))
	}
	if err != nil {
		return nil, err
	}
	return procedures.Load(name, data)
}
