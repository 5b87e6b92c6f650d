package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"kymobench/procedures/record"
)

type reportOptions struct{ out, keys string }

func newReportCommand(io streams) *cobra.Command {
	var o reportOptions
	cmd := &cobra.Command{
		Use:   "report RECORD",
		Short: "Make the signed report of a closed record again",
		Long: `Makes the report of a closed record again, with the performed-by statement that
stands beside it. The keys are those in the trust folder beside runs, or --keys.
An open record is refused (exit 2), a damaged one too (exit 5).`,
		Example: `  kymobench report runs/20260601T133700Z-0001.record --out again.pdf`,
		Args:    oneFile,
		RunE:    func(_ *cobra.Command, args []string) error { return runReport(args[0], o, io) },
	}
	cmd.Flags().StringVar(&o.out, "out", "", "file to write, default reports/RUN.pdf beside runs")
	cmd.Flags().StringVar(&o.keys, "keys", "", "folder of the keys, default trust beside runs")
	return cmd
}

func runReport(path string, o reportOptions, io streams) error {
	if _, err := record.ReadClosed(path); err != nil {
		return err
	}
	absolute, err := filepath.Abs(path)
	if err != nil {
		return err
	}
	home := filepath.Dir(filepath.Dir(absolute))
	if o.keys == "" {
		o.keys = folder{home}.trust()
	}
	keys, err := demonstrationKeys(o.keys)
	if err != nil {
		return err
	}
	if o.out == "" {
		o.out = filepath.Join(folder{home}.reports(), strings.TrimSuffix(filepath.Base(path), ".record")+".pdf")
		if err := os.MkdirAll(filepath.Dir(o.out), 0o755); err != nil {
			return err
		}
	}
	if err := sealReport(absolute, o.out, keys); err != nil {
		return err
	}
	_, err = fmt.Fprintln(io.out, o.out)
	return err
}
