package main

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"kymobench/procedures/pulse"
	"kymobench/procedures/record"
	"kymobench/procedures/recorded"
	"kymobench/procedures/results"
	"kymobench/reports"
	"kymobench/reports/layout1"
)

type fitStepOptions struct {
	edge  string
	line  record.Line
	pulse record.Pulse
	chart string

	filters    []string
	unfiltered bool
	json       bool
}

func newFitStepCommand(io streams) *cobra.Command {
	var o fitStepOptions
	cmd := &cobra.Command{
		Use:   "step FILE.csv",
		Short: "Natural frequency and damping ratio from step responses",
		Long: `Reads columns time_s, pressure_UNIT and an optional applied_UNIT; one or more
steps in a file. Without --edge-time and without an applied column the width of
the edge is fitted. Then what follows: rise, settling, bandwidth, the errors on
pulse waves and the fastest rate within a tolerance (the larger of 2 mmHg and 2 %
of the pressure), and, as opinions, what it means for line and air.
Exit 4 when natural frequency and damping are undetermined.`,
		Example: `  kymobench fit step release.csv --edge-time "2 ms" --line-length "1.2 m" --bore "1.6 mm" --fluid saline`,
		Args:    oneFile,
		RunE: func(cmd *cobra.Command, args []string) error {
			for _, name := range stepFlags() {
				if f := cmd.Flags().Lookup(name); f.Changed && strings.TrimSpace(f.Value.String()) == "" {
					return usagef("--%s is empty", name)
				}
			}
			return runFitStep(args[0], o, io)
		},
	}
	f := cmd.Flags()
	f.StringVar(&o.edge, "edge-time", "", `10-90 % time of the step itself, as "2 ms"; 0 for an ideal step`)
	f.StringSliceVar(&o.filters, "readout", nil, `filters in the signal path, as "low_pass 200 Hz,average 4 ms x3,delay 2 ms", or none`)
	f.BoolVar(&o.unfiltered, "applied-unfiltered", false, "the readout's filters do not act on the applied column")
	f.StringVar(&o.line.Length, "line-length", "", `of the line, as "1.2 m"`)
	f.StringVar(&o.line.Bore, "bore", "", `inner diameter of the line, as "1.6 mm"; taken within half of its last digit`)
	f.StringVar(&o.line.Fluid, "fluid", "water", "in the line: water or saline, or anything with --density and --viscosity")
	f.StringVar(&o.line.FluidDensity, "density", "", `of the fluid, as "998 kg/m3"`)
	f.StringVar(&o.line.FluidViscosity, "viscosity", "", `of the fluid, as "1.0 mPa s"`)
	f.StringVar(&o.line.DesignedFrequency, "designed-frequency", "", `of the same line clean and free of air, as "40 Hz"`)
	f.StringVar(&o.line.DesignedDamping, "designed-damping", "", "damping ratio of the same")
	f.StringVar(&o.line.Barometer, "barometer", "", `absolute, as "101.3 kPa"; the standard atmosphere is taken without`)
	f.StringVar(&o.pulse.Shape, "pulse", "", `"three harmonics", smooth, brisk, or a file with one beat (column pressure_UNIT)`)
	f.StringVar(&o.pulse.Rate, "pulse-rate", "", `that the plane of the chart is drawn for, as "120 1/min"`)
	f.StringVar(&o.pulse.Tolerance, "tolerance", "", `of systolic and diastolic errors, as "2 mmHg"`)
	f.StringVar(&o.pulse.ToleranceShare, "tolerance-share", "", `of the pressure, as "2 %"; with --tolerance the larger counts`)
	f.StringSliceVar(&o.pulse.At, "at", nil, `frequencies that gain and phase are wanted at, as "5 Hz,10 Hz"`)
	f.StringVar(&o.chart, "chart", "", "draw response, fit and residuals into a file, .svg or .pdf")
	f.BoolVar(&o.json, "json", false, "one JSON document on stdout")
	return cmd
}

func stepFlags() []string {
	return []string{
		"edge-time", "line-length", "bore", "fluid", "density", "viscosity", "designed-frequency", "designed-damping", "barometer",
		"pulse", "pulse-rate", "tolerance", "tolerance-share", "chart",
	}
}

func runFitStep(path string, o fitStepOptions, io streams) error {
	if err := o.readPulse(); err != nil {
		return err
	}
	as := strings.TrimPrefix(filepath.Ext(o.chart), ".")
	if o.chart != "" && as != "svg" && as != "pdf" {
		return usagef("--chart %q is neither .svg nor .pdf", o.chart)
	}
	if o.line.Length == "" && o.line.Bore == "" && o.line.FluidDensity == "" {
		o.line.Fluid = "" // the usual fluid of a line that nobody stated
	}
	stated := len(o.filters) > 0
	if len(o.filters) == 1 && o.filters[0] == "none" {
		o.filters = nil
	}
	file, err := os.Open(path)
	if err != nil {
		return err
	}
	defer file.Close()
	events, err := recorded.Step(path, file, recorded.StepOptions{
		Edge: o.edge, Line: o.line, Pulse: o.pulse, Filters: o.filters, FiltersStated: stated, AppliedUnfiltered: o.unfiltered,
	})
	if err != nil {
		return usageError{err}
	}
	r, err := results.Compute(events)
	if err != nil {
		return usageError{fmt.Errorf("%s: %w", path, err)}
	}
	if o.chart != "" {
		drawn, err := layout1.StepChart(reports.StepOf(r), filepath.Base(path), as)
		if err != nil {
			return fmt.Errorf("chart: %w", err)
		}
		if err := writeWhole(o.chart, drawn); err != nil {
			return err
		}
	}
	r.Step.Reservations = append(r.Step.Reservations, r.Reservations...)
	if o.json {
		err = encode(io.out, fitStep{"kymobench/fit-step/1", r.Step})
	} else {
		err = printStep(io.out, r.Step)
	}
	if err == nil && !r.Step.Combined.Determined {
		return ended{exitInconclusive}
	}
	return err
}

// readPulse takes the name of a shape as it is, and reads a file otherwise.
func (o *fitStepOptions) readPulse() error {
	var names []string
	for _, w := range pulse.Shapes() {
		names = append(names, w.Name)
		if o.pulse.Shape == w.Name {
			return nil
		}
	}
	if o.pulse.Shape == "" {
		return nil
	}
	file, err := os.Open(o.pulse.Shape)
	if errors.Is(err, os.ErrNotExist) {
		return usagef("no pulse %q: there are %s, and there is no such file", o.pulse.Shape, strings.Join(names, ", "))
	}
	if err != nil {
		return err
	}
	defer file.Close()
	read, err := recorded.Pulse(o.pulse.Shape, file)
	if err != nil {
		return usageError{err}
	}
	read.Shape = filepath.Base(o.pulse.Shape)
	read.Rate, read.Tolerance, read.ToleranceShare, read.At = o.pulse.Rate, o.pulse.Tolerance, o.pulse.ToleranceShare, o.pulse.At
	o.pulse = read
	return nil
}
