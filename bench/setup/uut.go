package setup

import (
	"fmt"
	"slices"

	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
)

func (l *loader) uut(f *File) {
	in, u := l.file.UUT, &f.UUT
	l.dialogue("uut", "", &in.wireKeys, &u.Dialogue, "uut")
	unit := tomlfile.Take(l.doc, &l.err, output, "uut", "unit")
	u.Read, u.Field = l.number(&in.numberKeys, &u.Dialogue, "uut")
	u.Resolution = l.above(unit.Dimension, "uut", "resolution")
	if u.Mode == modeAsked {
		for _, key := range []string{"sample_period", "sample_period_tolerance"} {
			l.demand(!l.doc.Has("uut", key), key+" of a UUT that is asked", "leave it out", "uut", key)
		}
	} else {
		u.SamplePeriod = l.above(quantity.DimSpan, "uut", "sample_period")
		u.SamplePeriodTolerance = l.widthIf(quantity.DimNone, "uut", "sample_period_tolerance")
	}
	u.Height = l.stated(quantity.DimLength, "uut", "height")
	u.HeightUncertainty = l.widthIf(quantity.DimLength, "uut", "height_uncertainty")
	u.Delay = l.widthIf(quantity.DimSpan, "uut", "delay")
	u.DelayUncertainty = l.widthIf(quantity.DimSpan, "uut", "delay_uncertainty")
	if unit.Dimension != quantity.DimPressure || l.doc.Has("uut", "nominal_sensitivity") {
		u.NominalSensitivity = l.above(quantity.DimSensitivity, "uut", "nominal_sensitivity")
	}
	if unit.Dimension == quantity.DimVoltage || l.doc.Has("uut", "excitation") {
		u.Excitation = l.above(quantity.DimVoltage, "uut", "excitation")
	}
	if l.doc.Has("uut", "fluid") {
		u.Fluid = tomlfile.TakeWord(l.doc, &l.err, []string{"water", "saline", "air"}, "uut", "fluid")
		u.FluidDensity = fluidDensity(u.Fluid)
	}
	level := l.optional(quantity.DimLength, "uut", "height") == l.optional(quantity.DimLength, "reference", "height")
	l.demand(level || u.Fluid != "", "the UUT is not level with the reference, and no fluid is named", `fluid = "water"`, "uut", "height")
	l.rate(u)
}

// output takes a unit that a UUT can put out.
func output(s string) (quantity.Unit, error) {
	u, ok := quantity.UnitNamed(s)
	if !ok || u.Dimension != quantity.DimPressure && u.Dimension != quantity.DimRatio && u.Dimension != quantity.DimVoltage {
		return quantity.Unit{}, fmt.Errorf("%q is no unit of pressure, voltage or bridge output, such as mmHg, kPa, mV or uV/V", s)
	}
	return u, nil
}

// rate refuses a stream that the line cannot carry at 80 % duty: the bits of
// each character, with start, parity and stop, and the length of a line or
// frame; a line's terminator is taken for two characters. The share is the
// program's own margin.
func (l *loader) rate(u *UUT) {
	if l.err != nil || u.SamplePeriod == "" {
		return
	}
	period := l.optional(quantity.DimSpan, "uut", "sample_period")
	f := u.Field
	bytes := f.Frame.Length
	if bytes == 0 && f.Length > 0 {
		bytes = f.Length + 2
	} else if bytes == 0 && f.Width > 0 {
		bytes = len(f.Begins) + f.Width + len(f.Prefix) + len(f.Suffix) + 2
		if f.UnitInText {
			bytes += len(f.Unit)
		}
	}
	if bytes == 0 {
		return
	}
	bits := 1 + u.DataBits + u.StopBits
	if u.Parity != "none" {
		bits++
	}
	most := 0.8 * float64(u.Baud) / float64(bits*bytes)
	if 1/period > most {
		l.refuse(l.doc.Refuse(fmt.Sprintf("%.0f samples a second of %d bytes do not fit %d baud: %.0f at most, at 80 %% of the line",
			1/period, bytes, u.Baud, most), "a higher baud rate or a longer sample period", "uut", "sample_period"))
	}
}

// applied takes the applied pressure, which rides in the UUT's frames or lines.
func (l *loader) applied(f *File) {
	in := l.file.Applied
	if in == nil || l.err != nil {
		return
	}
	u := &f.UUT
	l.demand(u.Mode == modeRunning, "the applied pressure rides in what the UUT's converter sends by itself", "leave out [applied]", "applied")
	a := &Applied{Field: u.Field}
	a.Field.Unit = l.unit(quantity.DimPressure, "applied", "unit")
	a.Resolution = l.above(quantity.DimPressure, "applied", "resolution")
	text := []string{"column"}
	frame := []string{"number", "scale", "offset", "over_range"}
	other := frame
	if u.Family == familyFrames {
		other = text
	}
	for _, key := range other {
		l.demand(!l.doc.Has("applied", key), fmt.Sprintf("%s of a number that stands in %s", key, u.Family), "", "applied", key)
	}
	if u.Family == familyFrames {
		a.Field.Frame.Number = tomlfile.Take(l.doc, &l.err, layout, "applied", "number")
		a.Field.Frame.Scale, a.Field.Frame.Offset = in.Scale, in.Offset
		a.Field.Frame.Over = l.wholes(in.OverRange, "applied", "over_range")
		l.demand(in.Scale != 0 || !l.doc.Has("applied", "scale"), "a scale of 0 makes every number the same", "leave scale out if it is 1", "applied", "scale")
		if l.err == nil {
			l.framed(a.Field.Frame, "applied")
			l.demand(apart(a.Field.Frame.Number, u.Field.Frame.Number), "the applied pressure stands where the UUT's number does", "", "applied", "number")
		}
	} else {
		l.needs([]any{"applied", "column"}, "column = 1")
		l.demand(u.Field.Separator != "", "a column without a separator", `separator = "," in [uut]`, "applied", "column")
		l.demand(in.Column >= 0 && in.Column <= 64 && in.Column != u.Field.Column, "the applied pressure has a column of its own, 0 to 64", "", "applied", "column")
		a.Field.Column = in.Column
	}
	if l.err == nil {
		f.Applied = a
	}
}

// apart says that two numbers of a frame do not overlap.
func apart(a, b quantity.Layout) bool { return a.At+a.Size() <= b.At || b.At+b.Size() <= a.At }

func (l *loader) readout(f *File) {
	in := l.file.Readout
	unit, _ := quantity.UnitNamed(f.UUT.Field.Unit)
	if in == nil {
		l.demand(unit.Dimension == quantity.DimPressure, "a UUT that puts out a voltage or a ratio needs a table [readout]: its error is not the UUT's", "", "uut", "unit")
		return
	}
	l.demand(unit.Dimension != quantity.DimPressure, "a UUT that puts out pressure has no readout of the bench's", "leave out [readout]", "readout")
	f.Readout = l.readoutAt(in, unit, "readout")
}

// mostFilters of one readout.
const mostFilters = 8

// readoutAt takes the readout that stands at a path.
func (l *loader) readoutAt(in *readoutTable, unit quantity.Unit, path ...any) *Readout {
	key := func(name string) []any { return append(slices.Clone(path), name) }
	r := &Readout{}
	l.dialogue("readout", in.Name, &in.wireKeys, &r.Dialogue, path...)
	r.GainUncertainty = l.width(quantity.DimNone, key("gain_uncertainty")...)
	r.ZeroUncertainty = l.width(unit.Dimension, key("zero_uncertainty")...)
	r.ExcitationUncertainty = l.widthIf(quantity.DimNone, key("excitation_uncertainty")...)
	r.CoverageFactor = l.coverage(in.CoverageFactor, key("coverage_factor")...)
	r.Certificate = l.text(key("certificate")...)
	r.Due = tomlfile.Take(l.doc, &l.err, day, key("due")...)
	r.FiltersStated = l.doc.Has(key("filters")...)
	l.demand(len(in.Filters) <= mostFilters, fmt.Sprintf("more than %d filters", mostFilters), "", key("filters")...)
	for i := range in.Filters {
		r.Filters = append(r.Filters, tomlfile.Take(l.doc, &l.err, func(s string) (string, error) {
			_, err := quantity.ParseFilter(s)
			return s, err
		}, append(key("filters"), i)...))
	}
	return r
}
