package main

import (
	"fmt"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"kymobench/procedures/results"
)

// fitFlush is the public JSON of a flush test.
type fitFlush struct {
	Schema string `json:"schema"`
	results.Flush
}

func newFitFlushCommand(io streams) *cobra.Command {
	var in results.FlushReadings
	var heights []string
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "flush",
		Short: "Natural frequency and damping from a ruler on the strip of a flush test",
		Long: `Takes one period (a time, or a length with the paper's speed) and the heights of
two successive extrema from the level it settles at, on opposite sides unless
--same-side says otherwise. Readings count within half of their last digit. Where
samples are to be had, fit step knows the line far better.`,
		Example: `  kymobench fit flush --period "1.7 mm" --speed "25 mm/s" --heights "24 mm,17 mm"`,
		Args:    noArguments,
		RunE: func(*cobra.Command, []string) error {
			if len(heights) != 2 {
				return usagef("--heights takes two heights, as \"24 mm,17 mm\"; %d were given", len(heights))
			}
			in.Heights = [2]string{heights[0], heights[1]}
			return runFitFlush(in, asJSON, io)
		},
	}
	f := cmd.Flags()
	f.StringVar(&in.Period, "period", "", `of the ringing, as "68 ms", or "1.7 mm" with --speed`)
	f.StringVar(&in.Speed, "speed", "", `of the paper, as "25 mm/s"`)
	f.StringSliceVar(&heights, "heights", nil, `of two successive extrema, as "24 mm,17 mm"`)
	f.BoolVar(&in.SameSide, "same-side", false, "both extrema are on the same side, a full cycle apart")
	f.BoolVar(&asJSON, "json", false, "one JSON document on stdout")
	return cmd
}

func runFitFlush(in results.FlushReadings, asJSON bool, io streams) error {
	found, err := results.FlushTest(in)
	if err != nil {
		return usageError{err}
	}
	if asJSON {
		return encode(io.out, fitFlush{"kymobench/fit-flush/1", found})
	}
	t := tabwriter.NewWriter(io.out, 0, 0, 2, ' ', 0)
	for _, row := range []struct {
		name, unit string
		f          results.DerivedFigure
	}{{"ringing (damped) frequency", " Hz", found.Ringing}, {"amplitude ratio", "", found.Ratio}, {"damping ratio", "", found.Damping}, {"natural frequency", " Hz", found.Frequency}} {
		fmt.Fprintf(t, "%s\t%.3g%s\t95 %% interval %.3g to %.3g\n", row.name, *row.f.Value, row.unit, row.f.Interval[0], row.f.Interval[1])
	}
	if err := t.Flush(); err != nil {
		return err
	}
	reservations(io.out, found.Notes)
	return nil
}
