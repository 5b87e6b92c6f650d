package main

import (
	"fmt"
	"os"
	"regexp"
	"strings"

	"github.com/spf13/cobra"

	"kymobench/bench/quantity"
	"kymobench/bench/setup"
	"kymobench/procedures"
)

func newCheckCommand(io streams) *cobra.Command {
	return &cobra.Command{
		Use:   "check FILE",
		Short: "Say what is wrong with a bench file or a procedure, or what it says",
		Long: `Reads a bench file or a procedure as a run would, and refuses it with row and
column; or says in words what it states. No port is opened.`,
		Example: `  kymobench check bench.toml`,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) != 1 {
				return usagef("one file is needed")
			}
			return nil
		},
		RunE: func(_ *cobra.Command, args []string) error { return runCheck(args[0], io) },
	}
}

func runCheck(path string, io streams) error {
	text, err := os.ReadFile(path)
	if err != nil {
		return err
	}
	// The schema says which of the two a file is; a file without one is read as
	// a bench file, whose reader asks for it.
	if regexp.MustCompile(`(?m)^\s*schema\s*=\s*"kymobench/procedure/`).Match(text) {
		d, err := procedures.Load(path, text)
		if err != nil {
			return err
		}
		checkedProcedure(d, io)
		return nil
	}
	f, err := setup.Load(path, text)
	if err != nil {
		return err
	}
	return checkedBench(f, io)
}

func checkedProcedure(d *procedures.Definition, io streams) {
	w := io.out
	fmt.Fprintf(w, "%s, revision %d: for a %s\n", d.Title, d.Revision, d.UUTKind)
	for i, s := range d.Stages {
		fmt.Fprintf(w, "  stage %d: %s\n", i+1, s.Kind())
	}
	fmt.Fprintf(w, "  goes to %.4g mmHg\n", d.HighestPressure().MmHg())
	for _, l := range d.Limits {
		fmt.Fprintf(w, "  limit %s: %s (%s)\n", l.Name, l.Origin, l.OriginStatus)
	}
	fmt.Fprintf(w, "nothing is wrong with %s\n", d.Name)
}

func checkedBench(f *setup.File, io streams) error {
	w := io.out
	fmt.Fprintf(w, "%s, %s\n", f.Department, f.Bench)
	fmt.Fprintf(w, "  never beyond %.4g to %.4g mmHg\n", f.Lowest.MmHg(), f.Highest.MmHg())
	fmt.Fprintf(w, "  reference %s on %s, %s; range %s to %s\n", f.Reference.Name, f.Reference.Port, f.Reference.Family, f.Reference.RangeLow, f.Reference.RangeHigh)
	if err := corrections(f, io); err != nil {
		return err
	}
	for _, p := range f.Places() {
		fmt.Fprintf(w, "  %s on %s, %s, in %s", strings.TrimSpace("UUT "+p.Name), p.UUT.Port, p.UUT.Family, p.UUT.Field.Unit)
		if p.Readout != nil {
			fmt.Fprintf(w, ", through the readout %s", p.Readout.Name)
		}
		fmt.Fprintln(w)
	}
	fmt.Fprintf(w, "  pressure source %s on %s; valve %s on %s\n", f.Pressure.Name, f.Pressure.Port, f.Valve.Name, f.Valve.Port)
	fmt.Fprintf(w, "nothing is wrong with %s\n", f.Name)
	return nil
}

// corrections echoes what the certificate makes of readings, the one thing in a
// bench file that is easily stated with the wrong sign.
func corrections(f *setup.File, io streams) error {
	c := f.Reference.Certificate
	fmt.Fprintf(io.out, "  certificate %s of %s, due %s\n", c.Number, c.Date, c.Due)
	for _, k := range c.Corrections {
		at, err := quantity.ParsePressure(k.At)
		if err != nil {
			return err
		}
		add, err := quantity.ParsePressure(k.Correction)
		if err != nil {
			return err
		}
		fmt.Fprintf(io.out, "    reads %.2f, taken as %.2f mmHg\n", at.MmHg(), (at + add).MmHg())
	}
	return nil
}
