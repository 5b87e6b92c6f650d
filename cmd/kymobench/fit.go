package main

import (
	"encoding/json"
	"fmt"
	"io"
	"os"
	"time"

	"github.com/spf13/cobra"

	"kymobench/bench/setup"
	"kymobench/procedures"
	"kymobench/procedures/recorded"
	"kymobench/procedures/results"
)

func newFitCommand(io streams) *cobra.Command {
	cmd := &cobra.Command{Use: "fit", Short: "Fit recorded readings in a CSV file", Args: cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			return usagef("fit what? fit static FILE.csv, fit step FILE.csv or fit flush")
		}}
	cmd.AddCommand(newFitStaticCommand(io), newFitStepCommand(io), newFitFlushCommand(io))
	return cmd
}

// fitStatic and fitStep are the public JSON of the figures.
type fitStatic struct {
	Schema string `json:"schema"`
	*results.Static
	Budgets   []results.Budget `json:"budgets,omitempty"`
	NotStated []results.Reason `json:"not_stated,omitempty"`
}

type fitStep struct {
	Schema string `json:"schema"`
	*results.Step
}

type fitStaticOptions struct {
	recorded.StaticOptions
	bench, date  string
	budget, json bool
}

func newFitStaticCommand(io streams) *cobra.Command {
	var o fitStaticOptions
	cmd := &cobra.Command{
		Use:   "static FILE.csv",
		Short: "Offset, sensitivity, linearity, hysteresis, repeatability",
		Long: `Reads columns cycle, leg (up or down), set_UNIT (optional), reference_UNIT and
uut_UNIT, or uut_mV (uut_uV) with excitation_V, in any order; also mounting, from
1, where the UUT was mounted again. Figures are in the reference column's unit; a
figure the data cannot carry is "undetermined", with the reason.

--budget prints what makes each figure uncertain, at every set pressure. What the
file cannot know is in a bench file (--bench) or stated here; what nobody states
is told, not guessed.`,
		Example: `  kymobench fit static readings.csv --nominal-sensitivity "5 uV/V/mmHg"
  kymobench fit static readings.csv --budget --bench bench.toml --date 2026-06-01`,
		Args: oneFile,
		RunE: func(cmd *cobra.Command, args []string) error {
			if cmd.Flags().Changed("nominal-sensitivity") && o.NominalSensitivity == "" {
				return usagef("--nominal-sensitivity is empty")
			}
			return runFitStatic(args[0], o, io)
		},
	}
	cmd.Flags().StringVar(&o.NominalSensitivity, "nominal-sensitivity", "", `of an electrical output, as "5 uV/V/mmHg"`)
	cmd.Flags().StringVar(&o.Corrections, "reference-corrections", "", `reading:correction pairs in the reference's unit, as "0:0.02,100:0.04"`)
	cmd.Flags().BoolVar(&o.budget, "budget", false, "the uncertainty of every figure, contribution by contribution")
	cmd.Flags().StringVar(&o.bench, "bench", "", "bench file that states certificate, readout, heights and resolutions")
	cmd.Flags().StringVar(&o.date, "date", "", "day of the readings, as 2026-06-01: the reference drifts since its certificate")
	cmd.Flags().BoolVar(&o.ReferenceZeroed, "reference-zeroed", false, "the reference was zeroed, vented, before the first reading")
	cmd.Flags().StringVar(&o.Repeatability, "repeatability", "", `standard deviation of a single reading, as "0.1 mmHg", when it is known`)
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
	if err := o.state(); err != nil {
		return err
	}
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
		d := fitStatic{Schema: "kymobench/fit-static/1", Static: r.Static}
		if o.budget {
			d.Budgets, d.NotStated = r.Budgets, r.NotStated
		}
		return encode(io.out, d)
	}
	if o.budget {
		return printBudgets(io.out, r)
	}
	return printStatic(io.out, r.Static)
}

// state takes what a bench file and the options state of the readings.
func (o *fitStaticOptions) state() error {
	if o.date != "" {
		day, err := time.Parse(time.DateOnly, o.date)
		if err != nil {
			return usagef("--date %q is no date like 2026-06-01", o.date)
		}
		o.Date = day.Add(12 * time.Hour) // within the day, wherever it was
	}
	if o.bench == "" {
		return nil
	}
	text, err := os.ReadFile(o.bench)
	if err != nil {
		return err
	}
	file, err := setup.Load(o.bench, text)
	if err != nil {
		return err
	}
	facts, subject := factsOf(file), subjectOf(file.Places()[0], &procedures.Definition{}, marks{})
	o.Reference, o.UUT, o.Readout = &facts.Reference, &subject.UUT, subject.Readout
	return nil
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
