package main

import (
	"fmt"
	"io"
	"slices"
	"text/tabwriter"

	"kymobench/procedures/results"
)

func printStep(w io.Writer, s *results.Step) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintf(t, "sample rate\t%.6g Hz\n", s.SampleRate)
	for i, st := range s.Steps {
		estimates(t, fmt.Sprintf("step %d at %.4f s, height %.4g %s", i+1, st.At, *st.Height, s.Unit), st.Determined, st.Reasons, st.Frequency, st.Damping)
	}
	estimates(t, "all steps", s.Combined.Determined, s.Combined.Reasons, s.Combined.Frequency, s.Combined.Damping)
	if s.Derived != nil {
		derived(t, s.Derived)
	}
	if s.Response != nil {
		fmt.Fprintf(t, "cross-check\t%s\n", s.Response.Text)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	if s.Pulse != nil || s.Opinions != nil {
		fmt.Fprintln(w, "opinions (no results, and held against no limit):")
	}
	if s.Pulse != nil {
		if err := pulses(w, s.Pulse); err != nil {
			return err
		}
	}
	if s.Opinions != nil {
		for _, o := range s.Opinions.Texts {
			fmt.Fprintln(w, o.Text)
		}
	}
	reservations(w, s.Reservations)
	return nil
}

func estimates(w io.Writer, name string, determined bool, reasons []string, f, d *results.Estimate) {
	if !determined {
		fmt.Fprintf(w, "%s\tundetermined: %v\n", name, reasons)
		return
	}
	fmt.Fprintf(w, "%s\tnatural frequency %.4g Hz\t95 %% interval %.4g to %.4g\n", name, f.Value, f.Interval[0], f.Interval[1])
	fmt.Fprintf(w, "\tdamping ratio %.4g\t95 %% interval %.4g to %.4g\n", d.Value, d.Interval[0], d.Interval[1])
}

// derived prints what follows from natural frequency and damping ratio.
func derived(w io.Writer, d *results.Derived) {
	row := func(name, unit string, f results.DerivedFigure) {
		note := ""
		if f.Note != "" {
			note = "; " + f.Note
		}
		if f.Value == nil {
			fmt.Fprintf(w, "%s\t%s%s\n", name, f.Reason, note)
			return
		}
		fmt.Fprintf(w, "%s\t%.4g%s\t95 %% interval %.4g to %.4g%s\n", name, *f.Value, unit, f.Interval[0], f.Interval[1], note)
	}
	row("damped frequency", " Hz", d.DampedFrequency)
	row("overshoot", " %", d.Overshoot)
	row("rise, 10 to 90 %", " s", d.RiseTime)
	row("settling to 5 %", " s", d.Settling5)
	row("settling to 2 %", " s", d.Settling2)
	row("resonance at", " Hz", d.ResonanceFrequency)
	row("resonance gain", "", d.ResonanceGain)
	row("gain within 5 % up to", " Hz", d.Flat5)
	row("-3 dB at", " Hz", d.Bandwidth3dB)
	for _, a := range d.At {
		row(fmt.Sprintf("gain at %g Hz", a.Frequency), "", a.Gain)
		row(fmt.Sprintf("phase at %g Hz", a.Frequency), " degrees", a.Phase)
	}
	row("fn x zeta", " Hz", d.Product)
}

// pulses prints the fastest rates, and the errors at some.
func pulses(w io.Writer, p *results.PulseErrors) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintf(t, "pulse waves: errors within %s\n", toleranceText(p))
	shown := []float64{60, 120, 180}
	fmt.Fprint(t, "shape\tpressure in mmHg\tfastest rate per min\t")
	for _, r := range shown {
		fmt.Fprintf(t, "systolic, diastolic error at %.0f/min\t", r)
	}
	fmt.Fprintln(t)
	var notes []string
	for _, s := range p.Shapes {
		var rate string
		switch f := s.Fastest; {
		case f.Value != nil:
			rate = fmt.Sprintf("%.0f (95 %%: %.0f to %.0f)", *f.Value, f.Interval[0], f.Interval[1])
		case f.Interval[1] >= p.FastestRate:
			rate = fmt.Sprintf("%.0f or more", p.FastestRate)
		default:
			rate = fmt.Sprintf("below %.0f", p.SlowestRate)
		}
		if s.Fastest.Note != "" {
			notes = append(notes, s.Name+": "+s.Fastest.Note)
		}
		fmt.Fprintf(t, "%s (%s)\t%.4g/%.4g\t%s\t", s.Name, s.From, s.Systolic, s.Diastolic, rate)
		for _, e := range s.Errors {
			if slices.Contains(shown, e.Rate) {
				fmt.Fprintf(t, "%s, %s mmHg\t", signed(e.Systolic), signed(e.Diastolic))
			}
		}
		fmt.Fprintln(t)
	}
	for _, n := range notes {
		fmt.Fprintln(t, n)
	}
	fmt.Fprintln(t, "the mean passes unchanged")
	for _, r := range p.Rules {
		fmt.Fprintf(t, "%s (%s)", r.Text, r.Known)
		if v := r.Rate.Value; v != nil {
			fmt.Fprintf(t, ": by it up to %.0f/min", *v)
		}
		fmt.Fprintln(t)
	}
	return t.Flush()
}

// signed prints an error with half its 95 % interval.
func signed(f results.DerivedFigure) string {
	return fmt.Sprintf("%+.2f +- %.2f", *f.Value, (f.Interval[1]-f.Interval[0])/2)
}

func toleranceText(p *results.PulseErrors) string {
	switch {
	case p.ToleranceShare == 0:
		return fmt.Sprintf("%g mmHg", p.Tolerance)
	case p.Tolerance == 0:
		return fmt.Sprintf("%g %% of the pressure", 100*p.ToleranceShare)
	}
	return fmt.Sprintf("%g mmHg or %g %% of the pressure, whichever is larger", p.Tolerance, 100*p.ToleranceShare)
}
