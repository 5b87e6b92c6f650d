package setup

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
)

func (l *loader) uut(f *File) {
	in, u := l.file.UUT, &f.UUT
	u.Family = tomlfile.TakeWord(l.doc, &l.err, []string{"lines"}, "uut", "family")
	tomlfile.TakeWord(l.doc, &l.err, []string{"free-running"}, "uut", "mode")
	u.Port = tomlfile.TakeText(l.doc, &l.err, longestPort, "uut", "port")
	u.Baud = l.baud(in.Baud, "uut")
	unit := tomlfile.Take(l.doc, &l.err, output, "uut", "unit")
	u.Field = quantity.Field{
		Separator: in.Separator, Column: in.Column, Prefix: in.Prefix, Suffix: in.Suffix, Width: in.Width, UnitInText: in.UnitInText, Unit: in.Unit,
	}
	l.demand(in.Width >= 0 && in.Width <= 32, "a number has 1 to 32 characters", "leave width out if it varies", "uut", "width")
	l.demand(in.Column >= 0 && in.Column <= 64, "columns are counted from 0 to 64", "", "uut", "column")
	l.demand(in.Column == 0 || in.Separator != "", "a column without a separator", `separator = ","`, "uut", "column")
	u.Resolution = l.above(unit.Dimension, "uut", "resolution")
	u.SamplePeriod = l.above(quantity.DimSpan, "uut", "sample_period")
	u.SamplePeriodTolerance = l.widthIf(quantity.DimNone, "uut", "sample_period_tolerance")
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

// rate refuses a stream that the line cannot carry at 80 % duty: ten bits a
// byte, the number's width and a terminator of two bytes. Source: 8N1 has ten
// bits; the share is the program's own margin.
func (l *loader) rate(u *UUT) {
	period := l.optional(quantity.DimSpan, "uut", "sample_period")
	if l.err != nil || u.Field.Width == 0 {
		return
	}
	bytes := float64(u.Field.Width + len(u.Field.Prefix) + len(u.Field.Suffix) + 2)
	if u.Field.UnitInText {
		bytes += float64(len(u.Field.Unit))
	}
	most := 0.8 * float64(u.Baud) / 10 / bytes
	if 1/period > most {
		l.refuse(l.doc.Refuse(fmt.Sprintf("%.0f samples a second of %.0f bytes do not fit %d baud: %.0f at most, at 80 %% of the line",
			1/period, bytes, u.Baud, most), "a higher baud rate or a longer sample period", "uut", "sample_period"))
	}
}

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
	l.dialogue("readout", in.dialogue(), &r.Dialogue, path...)
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

// others takes the further UUTs of the manifold: each is as [uut] says but for
// what it states itself.
func (l *loader) others(f *File) {
	unit, _ := quantity.UnitNamed(f.UUT.Field.Unit)
	names := map[string]bool{"1": true}
	for i, in := range l.file.Others {
		at := func(name string) []any { return []any{"another_uut", i, name} }
		p := Place{UUT: f.UUT, Readout: f.Readout, Name: strconv.Itoa(i + 2)}
		if l.doc.Has(at("name")...) {
			p.Name = tomlfile.TakeText(l.doc, &l.err, tomlfile.LongestIdentity, at("name")...)
		}
		l.demand(!names[p.Name], "two places on the manifold have one name", "the place of [uut] is named 1", at("name")...)
		names[p.Name] = true
		p.UUT.Port = tomlfile.TakeText(l.doc, &l.err, longestPort, at("port")...)
		if l.doc.Has(at("column")...) {
			l.demand(in.Column >= 0 && in.Column <= 64, "columns are counted from 0 to 64", "", at("column")...)
			l.demand(in.Column == 0 || f.UUT.Field.Separator != "", "a column without a separator", `separator = "," in [uut]`, at("column")...)
			p.UUT.Field.Column = in.Column
		}
		if l.doc.Has(at("height")...) {
			p.UUT.Height = l.stated(quantity.DimLength, at("height")...)
			level := l.optional(quantity.DimLength, at("height")...) == l.optional(quantity.DimLength, "reference", "height")
			l.demand(level || f.UUT.Fluid != "", "the UUT is not level with the reference, and no fluid is named", `fluid = "water" in [uut]`, at("height")...)
		}
		if l.doc.Has(at("height_uncertainty")...) {
			p.UUT.HeightUncertainty = l.width(quantity.DimLength, at("height_uncertainty")...)
		}
		if in.Readout != nil {
			l.demand(f.Readout != nil, "a UUT that puts out pressure has no readout of the bench's", "leave it out", at("readout")...)
			p.Readout = l.readoutAt(in.Readout, unit, at("readout")...)
		}
		if l.err != nil {
			return
		}
		f.Others = append(f.Others, p)
	}
}

func (l *loader) source(f *File) {
	l.dialogue("source", l.file.Source, &f.Pressure.Dialogue, "source")
	f.Pressure.Set = tomlfile.Take(l.doc, &l.err, placeholder, "source", "set")
	f.Pressure.Hold = tomlfile.TakeText(l.doc, &l.err, longestCommand, "source", "hold")
	f.Pressure.Vent = tomlfile.TakeText(l.doc, &l.err, longestCommand, "source", "vent")
}

func (l *loader) valve(f *File) {
	l.dialogue("valve", l.file.Valve, &f.Valve.Dialogue, "valve")
	f.Valve.Release = tomlfile.TakeText(l.doc, &l.err, longestCommand, "valve", "release")
	f.Valve.Shut = tomlfile.TakeText(l.doc, &l.err, longestCommand, "valve", "shut")
	l.demand(f.Valve.Release != f.Valve.Shut, "the valve is shut by the command that opens it", "", "valve", "shut")
	f.Valve.EdgeTime = l.width(quantity.DimSpan, "valve", "edge_time")
	f.Valve.EdgeTimeTolerance = l.widthIf(quantity.DimNone, "valve", "edge_time_tolerance")
}

// together looks for contradictions between tables.
func (l *loader) together(f *File) {
	if l.err != nil {
		return
	}
	high, low := l.pressure("reference", "range_high"), l.pressure("reference", "range_low")
	l.demand(f.Highest <= high, "the highest pressure is above the reference's range: nobody would see it", "", "pressure", "highest")
	l.demand(f.Lowest >= low, "the lowest pressure is below the reference's range: nobody would see it", "", "pressure", "lowest")
	l.ports(f)
}

// ports refuses two instruments on one port; UUTs may share one when each has
// a column of its own, and a readout may serve several UUTs.
func (l *loader) ports(f *File) {
	type user struct {
		role   string
		column int
	}
	used := map[string][]user{}
	use := func(role, port string, column int, path ...any) {
		name := port
		if strings.HasPrefix(strings.ToUpper(name), "COM") {
			name = strings.ToUpper(name) // com3 is COM3
		}
		if name == "" {
			return
		}
		for _, other := range used[name] {
			if !(column >= 0 && other.column >= 0 && column != other.column) {
				l.refuse(l.doc.Refuse(fmt.Sprintf("the port of the %s is that of the %s", role, other.role), "one port, one instrument", path...))
			}
		}
		used[name] = append(used[name], user{role, column})
	}
	column := func(field quantity.Field) int {
		if field.Separator == "" {
			return -1
		}
		return field.Column
	}
	use("reference", f.Reference.Port, -1, "reference", "port")
	use("uut", f.UUT.Port, column(f.UUT.Field), "uut", "port")
	use("source", f.Pressure.Port, -1, "source", "port")
	use("valve", f.Valve.Port, -1, "valve", "port")
	if f.Readout != nil {
		use("readout", f.Readout.Port, -1, "readout", "port")
	}
	for i, p := range f.Others {
		use("UUT "+p.Name, p.UUT.Port, column(p.UUT.Field), "another_uut", i, "port")
		if p.Readout != f.Readout {
			use("readout of UUT "+p.Name, p.Readout.Port, -1, "another_uut", i, "readout", "port")
		}
	}
}

// text takes a text that names something.
func (l *loader) text(path ...any) string {
	return tomlfile.TakeText(l.doc, &l.err, tomlfile.LongestIdentity, path...)
}

// stated takes a value with a unit of the dimension, and keeps its text.
func (l *loader) stated(d quantity.Dimension, path ...any) string {
	return tomlfile.Take(l.doc, &l.err, func(s string) (string, error) {
		_, err := parsed(s, d)
		return s, err
	}, path...)
}

// above is stated for a value above zero, width for one of zero or more.
func (l *loader) above(d quantity.Dimension, path ...any) string {
	text := l.stated(d, path...)
	l.demand(l.optional(d, path...) > 0, fmt.Sprintf("%v is not above zero", path[len(path)-1]), "", path...)
	return text
}

func (l *loader) width(d quantity.Dimension, path ...any) string {
	text := l.stated(d, path...)
	l.demand(l.optional(d, path...) >= 0, fmt.Sprintf("%v is below zero", path[len(path)-1]), "", path...)
	return text
}

// widthIf is width for a value that may be absent.
func (l *loader) widthIf(d quantity.Dimension, path ...any) string {
	if !l.doc.Has(path...) {
		return ""
	}
	return l.width(d, path...)
}

// optional parses a value that may be absent, which gives 0.
func (l *loader) optional(d quantity.Dimension, path ...any) float64 {
	return tomlfile.TakeIf(l.doc, &l.err, func(s string) (float64, error) { return parsed(s, d) }, path...)
}

// parsed gives a value in SI, and refuses what is beyond every number there:
// "1e308 kPa", which would never be exceeded.
func parsed(s string, d quantity.Dimension) (float64, error) {
	v, err := quantity.ParseAs(s, d)
	if err != nil {
		return 0, err
	}
	if math.IsInf(v.SI, 0) {
		return 0, errors.New("a number that is too large")
	}
	return v.SI, nil
}

// pressure takes a pressure that is there.
func (l *loader) pressure(path ...any) quantity.Pressure {
	l.stated(quantity.DimPressure, path...)
	return quantity.Pressure(l.optional(quantity.DimPressure, path...))
}

// check refuses a text that is empty, framed by blanks or too long.
func (l *loader) check(most int, path ...any) {
	if l.err == nil {
		l.err = l.doc.CheckText(most, path...)
	}
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

// placeholder takes a command with one unit of pressure in braces, which stands
// for the set pressure in that unit.
func placeholder(command string) (string, error) {
	before, rest, open := strings.Cut(command, "{")
	name, after, closed := strings.Cut(rest, "}")
	u, known := quantity.UnitNamed(name)
	switch {
	case !open || !closed || strings.ContainsAny(before+name+after, "{}"):
		return "", fmt.Errorf("%q needs one place for the pressure, as in \"SOUR:PRES {mmHg}\"", command)
	case !known || u.Dimension != quantity.DimPressure:
		return "", fmt.Errorf("%q in %q is no unit of pressure", name, command)
	}
	return command, nil
}
