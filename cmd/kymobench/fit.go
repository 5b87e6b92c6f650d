package main

import (
	"encoding/json"
	"fmt"
	"io"
	"os"

	"github.com/spf13/cobra"

	"kymobench/procedures/recorded"
	"kymobench/procedures/results"
)

func newFitCommand(io streams) *cobra.Command {
	cmd := &cobra.Command{Use: "fit", Short: "Fit recorded readings in a CSV file", Args: cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			return usagef("fit what? fit static FILE.csv or fit step FILE.csv")
		}}
	cmd.AddCommand(newFitStaticCommand(io), newFitStepCommand(io))
	return cmd
}

// fitStatic and fitStep are the public JSON of the figures.
type fitStatic struct {
	Schema string `json:"schema"`
	*results.Static
}

type fitStep struct {
	Schema string `json:"schema"`
	*results.Step
}

type fitStaticOptions struct {
	recorded.StaticOptions
	json bool
}

func newFitStaticCommand(io streams) *cobra.Command {
	var o fitStaticOptions
	cmd := &cobra.Command{
		Use:   "static FILE.csv",
		Short: "Offset, sensitivity, linearity, hysteresis, repeatability",
		Long: `Reads columns cycle, leg (up or down), set_UNIT (optional), reference_UNIT and
uut_UNIT, or uut_mV (uut_uV) with excitation_V, in any order; also mounting, from
1, where the UUT was mounted again. Figures are in the reference column's unit; a
figure the data cannot carry is "undetermined", with the reason.`,
		Example: `  kymobench fit static readings.csv --nominal-sensitivity "5 uV/V/mmHg"`,
		Args:    oneFile,
		RunE: func(cmd *cobra.Command, args []string) error {
			if cmd.Flags().Changed("nominal-sensitivity") && o.NominalSensitivity == "" {
				return usagef("--nominal-sensitivity is empty")
			}
			return runFitStatic(args[0], o, io)
		},
	}
	cmd.Flags().StringVar(&o.NominalSensitivity, "nominal-sensitivity", "", `of an electrical output, as "5 uV/V/mmHg"`)
	cmd.Flags().StringVar(&o.Corrections, "reference-corrections", "", `reading:correction pairs in the reference's unit, as "0:0.02,100:0.04"`)
	cmd.Flags().BoolVar(&o.json, "json", false, "one JSON document on stdout")
	return cmd
}

func oneFile(_ *cobra.Command, args []string) error {
	if len(args) != 1 {
		return usagef("one file is expected, %d were given", len(args))
	}
	return nil
}

func runFitStatic(path string, o fitStaticOptions, io streams) error {
	file, err := os.Open(path)
	if err != nil {
		return err
	}
	defer file.Close()
	events, err := recorded.Static(path, file, o.StaticOptions)
	if err != nil {
		return usageError{err}
	}
	r, err := results.Compute(events)
	if err != nil {
		return usageError{fmt.Errorf("%s: %w", path, err)}
	}
	r.Static.Reservations = append(r.Static.Reservations, r.Reservations...)
	if o.json {
		return encode(io.out, fitStatic{"kymobench/fit-static/1", r.Static})
	}
	return printStatic(io.out, r.Static)
}

// encode writes one JSON document.
func encode(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	return e.Encode(v)
}

func reservations(w io.Writer, all []results.Reason) {
	for _, r := range all {
		fmt.Fprintf(w, "reservation: %s (%s)\n", r.Text, r.Code)
	}
}
