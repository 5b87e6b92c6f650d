package scpi

import (
	"context"
	"fmt"
	"math"
	"strconv"
	"strings"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// SourceSettings of a pressure source.
type SourceSettings struct {
	Settings
	Set  string // "SOUR:PRES {mmHg}": the unit in braces makes room for the number
	Hold string
	Vent string
	// Lowest and Highest pressure that Set may ask for; both 0: no bound here.
	Lowest, Highest quantity.Pressure
}

// Source is a bench.PressureSource.
type Source struct {
	*Instrument
	s             SourceSettings
	before, after string // around the number
	unit          quantity.Unit
}

// NewSource makes a Source on a line that is its own. It refuses a Set without
// exactly one pressure unit in braces, and a source that cannot be vented.
func NewSource(l *line.Line, s SourceSettings) (*Source, error) {
	before, rest, ok := strings.Cut(s.Set, "{")
	name, after, closed := strings.Cut(rest, "}")
	unit, known := quantity.UnitNamed(name)
	switch {
	case !ok || !closed || strings.ContainsAny(before+after, "{}"):
		return nil, fmt.Errorf("%s: the command %q needs one place for the pressure, as in \"SOUR:PRES {mmHg}\"", l.Name(), s.Set)
	case !known || unit.Dimension != quantity.DimPressure:
		return nil, fmt.Errorf("%s: %q in the command %q is no unit of pressure", l.Name(), name, s.Set)
	case s.Vent == "":
		return nil, fmt.Errorf("%s: no command vents it", l.Name())
	}
	return &Source{Instrument: New(l, s.Settings), s: s, before: before, after: after, unit: unit}, nil
}

// Set asks for a pressure, to the tenth of a pascal.
func (s *Source) Set(ctx context.Context, p quantity.Pressure) error {
	bounded := s.s.Lowest != 0 || s.s.Highest != 0
	if x := float64(p); math.IsNaN(x) || math.IsInf(x, 0) || bounded && (p < s.s.Lowest || p > s.s.Highest) {
		return fmt.Errorf("set %s: %s %s is not allowed", s.Line.Name(), written(p, s.unit), s.unit.Name)
	}
	return s.set(ctx, s.before+written(p, s.unit)+s.after)
}

// written gives a pressure in a unit as a plain decimal with as many decimals
// as a tenth of a pascal needs, trailing zeros cut.
func written(p quantity.Pressure, u quantity.Unit) string {
	decimals := max(0, int(math.Ceil(math.Log10(u.Factor/0.1)-1e-9)))
	text := strconv.FormatFloat(u.FromSI(float64(p)), 'f', decimals, 64)
	if strings.Contains(text, ".") {
		text = strings.TrimRight(strings.TrimRight(text, "0"), ".")
	}
	if text == "-0" {
		return "0"
	}
	return text
}

// Hold shuts the source off from the volume.
func (s *Source) Hold(ctx context.Context) error {
	if s.s.Hold == "" {
		return fmt.Errorf("hold %s: %w", s.Line.Name(), bench.ErrNotStated)
	}
	return s.set(ctx, s.s.Hold)
}

// Vent opens the volume to atmosphere.
func (s *Source) Vent(ctx context.Context) error { return s.set(ctx, s.s.Vent) }

// VentNow sends the vent command at once and waits for nothing; it may be
// called from inside a handler.
func (s *Source) VentNow() { s.Line.Fire(s.s.Vent) }

// ValveSettings of a fast valve.
type ValveSettings struct {
	Settings
	Release string
	Shut    string
}

// Valve is a bench.Valve.
type Valve struct {
	*Instrument
	s ValveSettings
}

// NewValve makes a Valve on a line that is its own.
func NewValve(l *line.Line, s ValveSettings) (*Valve, error) {
	if s.Release == "" || s.Shut == "" {
		return nil, fmt.Errorf("%s: a command to release and one to shut are needed", l.Name())
	}
	return &Valve{Instrument: New(l, s.Settings), s: s}, nil
}

// Release opens the fast valve.
func (v *Valve) Release(ctx context.Context) error { return v.set(ctx, v.s.Release) }

// Shut closes it.
func (v *Valve) Shut(ctx context.Context) error { return v.set(ctx, v.s.Shut) }

// ReleaseNow sends the release command at once and waits for nothing; it may
// be called from inside a handler.
func (v *Valve) ReleaseNow() { v.Line.Fire(v.s.Release) }
