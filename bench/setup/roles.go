package setup

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"

	"kymobench/bench/instruments/modbus"
	"kymobench/bench/instruments/relay"
	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
)

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
	in := l.file.Source
	l.dialogue("source", in.Name, &in.wireKeys, &f.Pressure.Dialogue, "source")
	f.Pressure.Set = l.told("source", "set")
	f.Pressure.Hold = l.told("source", "hold")
	f.Pressure.Vent = l.told("source", "vent")
	if f.Pressure.Family != familyModbus {
		tomlfile.Take(l.doc, &l.err, placeholder, "source", "set")
		return
	}
	for _, key := range []string{"set", "hold", "vent"} {
		l.sentence(func(s string) error {
			c, err := modbus.ParseCommand(s)
			if err == nil && (c.Unit.Name != "") != (key == "set") {
				err = fmt.Errorf("%q: set, and only set, has a place for the pressure, as in \"holding 10 float32 = {kPa}\"", s)
			}
			return err
		}, "source", key)
	}
}

func (l *loader) valve(f *File) {
	in := l.file.Valve
	l.dialogue("valve", in.Name, &in.wireKeys, &f.Valve.Dialogue, "valve")
	f.Valve.Release = l.told("valve", "release")
	f.Valve.Shut = l.told("valve", "shut")
	l.demand(f.Valve.Release != f.Valve.Shut, "the valve is shut by the command that opens it", "", "valve", "shut")
	for _, key := range []string{"release", "shut"} {
		switch f.Valve.Family {
		case familyModbus:
			l.sentence(command, "valve", key)
		case familyRelay:
			l.sentence(func(s string) error { _, err := relay.ParseStroke(s); return err }, "valve", key)
		}
	}
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
