package setup

import (
	"fmt"

	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
)

func (l *loader) uut(f *File) {
	in, u := l.file.UUT, &f.UUT
	tomlfile.TakeWord(l.doc, &l.err, []string{"free-running"}, "uut", "mode")
	*u = UUT{
		Family: tomlfile.TakeWord(l.doc, &l.err, []string{"lines"}, "uut", "family"),
		Port:   tomlfile.TakeText(l.doc, &l.err, 256, "uut", "port"), Baud: in.Baud,
		Excitation: in.Excitation, NominalSensitivity: in.NominalSensitivity,
		SamplePeriodTolerance: in.SamplePeriodTolerance, HeightUncertainty: in.HeightUncertainty,
		Fluid: in.Fluid, Delay: in.Delay, DelayUncertainty: in.DelayUncertainty,
	}
	u.Field = quantity.Field{
		Separator: in.Separator, Column: in.Column, Prefix: in.Prefix, Suffix: in.Suffix, Width: in.Width, UnitInText: in.UnitInText, Unit: in.Unit,
	}
	if l.err != nil {
		return
	}
	unit, ok := quantity.UnitNamed(in.Unit)
	l.demand(ok && (unit.Dimension == quantity.DimPressure || unit.Dimension == quantity.DimRatio || unit.Dimension == quantity.DimVoltage),
		fmt.Sprintf("%q is no unit of pressure, voltage or bridge output", in.Unit), "mmHg, kPa, mV, uV, uV/V", "uut", "unit")
	if u.Baud == 0 {
		u.Baud = 9600
	}
	u.Resolution = l.stated(unit.Dimension, "uut", "resolution")
	u.SamplePeriod = l.stated(quantity.DimSpan, "uut", "sample_period")
	u.Height = l.stated(quantity.DimLength, "uut", "height")
	l.optional(quantity.DimNone, "uut", "sample_period_tolerance")
	l.optional(quantity.DimLength, "uut", "height_uncertainty")
	l.optional(quantity.DimSpan, "uut", "delay")
	l.optional(quantity.DimSpan, "uut", "delay_uncertainty")
	if unit.Dimension != quantity.DimPressure {
		l.stated(quantity.DimSensitivity, "uut", "nominal_sensitivity")
	}
	if unit.Dimension == quantity.DimVoltage {
		l.stated(quantity.DimVoltage, "uut", "excitation")
	} else {
		l.optional(quantity.DimVoltage, "uut", "excitation")
	}
	if in.Fluid != "" {
		u.FluidDensity = fluidDensity(tomlfile.TakeWord(l.doc, &l.err, []string{"water", "saline", "air"}, "uut", "fluid"))
	}
	l.rate(u)
}

// rate refuses a stream that the line cannot carry at 80 % duty: ten bits a
// byte, the number's width and a terminator of two bytes.
func (l *loader) rate(u *UUT) {
	period := tomlfile.Take(l.doc, &l.err, quantity.ParseSpan, "uut", "sample_period")
	l.demand(period > 0, "the sample period is not above zero", "", "uut", "sample_period")
	if l.err != nil || u.Field.Width == 0 {
		return
	}
	bytes := float64(u.Field.Width + len(u.Field.Prefix) + len(u.Field.Suffix) + 2)
	most := 0.8 * float64(u.Baud) / 10 / bytes
	if 1/float64(period) > most {
		l.refuse(l.doc.Refuse(fmt.Sprintf("%.0f samples a second of %.0f bytes do not fit %d baud: %.0f at most, at 80 %% of the line",
			1/float64(period), bytes, u.Baud, most), "a higher baud rate or a longer sample period", "uut", "sample_period"))
	}
}

func (l *loader) readout(f *File) {
	in := l.file.Readout
	unit, _ := quantity.UnitNamed(f.UUT.Field.Unit)
	if in == nil {
		l.demand(unit.Dimension == quantity.DimPressure, "a UUT that puts out a voltage or a ratio needs a table [readout]: its error is not the UUT's", "", "uut", "unit")
		return
	}
	r := &Readout{CoverageFactor: in.CoverageFactor, Due: in.Due}
	l.dialogue("readout", in.dialogue(), &r.Dialogue)
	r.GainUncertainty = l.stated(quantity.DimNone, "readout", "gain_uncertainty")
	r.ZeroUncertainty = l.stated(unit.Dimension, "readout", "zero_uncertainty")
	l.demand(in.CoverageFactor >= 1 && in.CoverageFactor <= 4, "a coverage factor is 1 to 4, usually 2", "", "readout", "coverage_factor")
	r.Certificate = in.Certificate
	f.Readout = r
}

func (l *loader) source(f *File) {
	l.dialogue("source", l.file.Source, &f.Pressure.Dialogue)
	f.Pressure.Set = l.text("source", "set")
	f.Pressure.Hold = l.text("source", "hold")
	f.Pressure.Vent = l.text("source", "vent")
	if l.err == nil {
		if _, err := placeholder(f.Pressure.Set); err != nil {
			l.refuse(l.doc.Refuse(err.Error(), `set = "SOUR:PRES {mmHg}"`, "source", "set"))
		}
	}
}

func (l *loader) valve(f *File) {
	l.dialogue("valve", l.file.Valve, &f.Valve.Dialogue)
	f.Valve.Release = l.text("valve", "release")
	f.Valve.Shut = l.text("valve", "shut")
	f.Valve.EdgeTime = l.stated(quantity.DimSpan, "valve", "edge_time")
	f.Valve.EdgeTimeTolerance = l.file.Valve.EdgeTimeTolerance
	l.optional(quantity.DimNone, "valve", "edge_time_tolerance")
}

// together looks for contradictions between tables.
func (l *loader) together(f *File) {
	if l.err != nil {
		return
	}
	high := tomlfile.Take(l.doc, &l.err, quantity.ParsePressure, "reference", "range_high")
	low := tomlfile.Take(l.doc, &l.err, quantity.ParsePressure, "reference", "range_low")
	l.demand(f.Highest <= high, "the highest pressure is above the reference's range: nobody would see it", "", "pressure", "highest")
	l.demand(f.Lowest >= low, "the lowest pressure is below the reference's range: nobody would see it", "", "pressure", "lowest")
	ports := map[string]string{f.Reference.Port: "reference"}
	for _, p := range []struct{ role, port string }{{"uut", f.UUT.Port}, {"source", f.Pressure.Port}, {"valve", f.Valve.Port}} {
		other, used := ports[p.port]
		l.demand(!used, fmt.Sprintf("the port of the %s is that of the %s", p.role, other), "one port, one instrument", p.role, "port")
		ports[p.port] = p.role
	}
	if f.Readout != nil && f.Readout.Port != "" {
		other, used := ports[f.Readout.Port]
		l.demand(!used, fmt.Sprintf("the port of the readout is that of the %s", other), "one port, one instrument", "readout", "port")
	}
}

// text takes a text that names something.
func (l *loader) text(path ...any) string {
	return tomlfile.TakeText(l.doc, &l.err, tomlfile.LongestIdentity, path...)
}

// stated takes a value with a unit of the dimension, and keeps its text.
func (l *loader) stated(d quantity.Dimension, path ...any) string {
	return tomlfile.Take(l.doc, &l.err, func(s string) (string, error) {
		_, err := quantity.ParseAs(s, d)
		return s, err
	}, path...)
}

// optional parses a value that may be absent, which gives 0.
func (l *loader) optional(d quantity.Dimension, path ...any) float64 {
	return tomlfile.TakeIf(l.doc, &l.err, func(s string) (float64, error) {
		v, err := quantity.ParseAs(s, d)
		return v.SI, err
	}, path...)
}

func (l *loader) unit(d quantity.Dimension, path ...any) string {
	return tomlfile.Take(l.doc, &l.err, func(s string) (string, error) {
		if u, ok := quantity.UnitNamed(s); !ok || u.Dimension != d {
			return "", fmt.Errorf("%q is no unit of the quantity wanted here", s)
		}
		return s, nil
	}, path...)
}

func (l *loader) demand(ok bool, text, hint string, path ...any) {
	if !ok {
		l.refuse(l.doc.Refuse(text, hint, path...))
	}
}

func (l *loader) refuse(e *tomlfile.Error) {
	if l.err == nil {
		l.err = e
	}
}

// placeholder finds the unit in braces that stands for the set pressure.
func placeholder(command string) (quantity.Unit, error) {
	open, end := -1, -1
	for i, r := range command {
		switch {
		case r == '{' && open < 0:
			open = i
		case r == '}' && open >= 0 && end < 0:
			end = i
		}
	}
	if open < 0 || end < 0 {
		return quantity.Unit{}, fmt.Errorf("the command %q has no place for the pressure", command)
	}
	u, ok := quantity.UnitNamed(command[open+1 : end])
	if !ok || u.Dimension != quantity.DimPressure {
		return quantity.Unit{}, fmt.Errorf("%q is no unit of pressure", command[open+1:end])
	}
	return u, nil
}
