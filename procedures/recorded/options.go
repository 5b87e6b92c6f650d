package recorded

import (
	"fmt"
	"io"
	"slices"

	"kymobench/bench/quantity"
	"kymobench/procedures/record"
)

// StepOptions say what is known of a step trace beside its samples. The zero
// value states nothing.
type StepOptions struct {
	Edge string // the step's own 10-90 % time ("2 ms", or "0" for an ideal step); "" when not stated
	Line record.Line
	// Filters of the readout ("low_pass 200 Hz"); FiltersStated: they are all,
	// also when there are none.
	Filters       []string
	FiltersStated bool
	// AppliedUnfiltered: they do not act on the applied pressure.
	AppliedUnfiltered bool
	Pulse             record.Pulse // what errors on pulse waves are worked out for, where not the program's own choice
}

// check refuses values that cannot be read, by the option's name.
func (o StepOptions) check() error {
	for _, v := range []struct {
		name, text string
		dimension  quantity.Dimension
	}{
		{"line length", o.Line.Length, quantity.DimLength}, {"bore", o.Line.Bore, quantity.DimLength},
		{"density", o.Line.FluidDensity, quantity.DimDensity}, {"viscosity", o.Line.FluidViscosity, quantity.DimViscosity},
		{"designed frequency", o.Line.DesignedFrequency, quantity.DimFrequency}, {"barometer", o.Line.Barometer, quantity.DimPressure},
		{"pulse rate", o.Pulse.Rate, quantity.DimFrequency}, {"tolerance", o.Pulse.Tolerance, quantity.DimPressure},
		{"tolerance share", o.Pulse.ToleranceShare, quantity.DimNone},
	} {
		if v.text == "" {
			continue
		}
		x, err := quantity.ParseAs(v.text, v.dimension)
		if err != nil {
			return fmt.Errorf("%s: %w", v.name, err)
		}
		if !(x.SI > 0) {
			return fmt.Errorf("%s %q is not above zero", v.name, v.text)
		}
	}
	for _, text := range o.Filters {
		if _, err := quantity.ParseFilter(text); err != nil {
			return fmt.Errorf("readout: %w", err)
		}
	}
	if len(o.Pulse.At) > mostFrequencies {
		return fmt.Errorf("%d frequencies, at most %d are taken", len(o.Pulse.At), mostFrequencies)
	}
	for _, text := range o.Pulse.At {
		if f, err := quantity.ParseFrequency(text); err != nil || !(f > 0) {
			return fmt.Errorf("frequency %q: one above zero is expected, as \"10 Hz\"", text)
		}
	}
	l := o.Line
	if l.DesignedDamping != "" {
		if x, err := quantity.ParseDecimal(l.DesignedDamping); err != nil || !(x > 0) {
			return fmt.Errorf("designed damping: %q is no number above zero", l.DesignedDamping)
		}
		if l.DesignedFrequency == "" {
			return fmt.Errorf("a designed damping needs a designed frequency beside it")
		}
	}
	if (l.FluidDensity == "") != (l.FluidViscosity == "") {
		return fmt.Errorf("density and viscosity of a fluid belong together: state both, or name the fluid")
	}
	if (l.Length == "") != (l.Bore == "") {
		return fmt.Errorf("length and bore of the line belong together: state both")
	}
	return nil
}

// Pulse reads one whole beat: pressure_UNIT, and time_s if there is such a
// column, which then has to be even. The first sample of the next beat is not
// repeated. How many beats a minute it was recorded at does not matter.
func Pulse(file string, r io.Reader) (record.Pulse, error) {
	t, err := open(file, r)
	if err != nil {
		return record.Pulse{}, err
	}
	clock := slices.Index(t.header, "time_s")
	pressure, unit, err := t.column("pressure", quantity.DimPressure)
	if err != nil {
		return record.Pulse{}, err
	}
	if pressure < 0 {
		return record.Pulse{}, &FileError{file, 1, 1, "the header needs the column pressure_UNIT, as pressure_mmHg, with the samples of one beat"}
	}
	out := record.Pulse{Shape: file, Unit: unit.Name}
	var times []float64
	for {
		more, err := t.next()
		if err != nil {
			return record.Pulse{}, err
		}
		if !more {
			break
		}
		text, err := t.number(pressure)
		if err != nil {
			return record.Pulse{}, err
		}
		x, _ := quantity.ParseDecimal(text)
		out.Samples = append(out.Samples, x)
		if clock >= 0 {
			if text, err = t.number(clock); err != nil {
				return record.Pulse{}, err
			}
			at, _ := quantity.ParseDecimal(text)
			times = append(times, at)
		}
	}
	if len(out.Samples) > longestBeat {
		return record.Pulse{}, &FileError{file, longestBeat + 2, 1, fmt.Sprintf("more than %d samples of one beat", longestBeat)}
	}
	if len(times) > 0 {
		if _, err := t.period(times, clock); err != nil {
			return record.Pulse{}, err
		}
	}
	return out, nil
}

// mostFrequencies bounds what is printed.
const mostFrequencies = 20

// longestBeat bounds the transform of a beat: 10 kHz at 40/min is 15,000.
const longestBeat = 20000
