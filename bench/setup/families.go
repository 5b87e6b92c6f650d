package setup

import (
	"fmt"

	"kymobench/bench"
	"kymobench/bench/instruments/frames"
	"kymobench/bench/instruments/lines"
	"kymobench/bench/instruments/modbus"
	"kymobench/bench/instruments/relay"
	"kymobench/bench/instruments/running"
	"kymobench/bench/instruments/scpi"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// connect opens the port of an instrument and the line on it.
func (w *opening) connect(role string, uut int, d Dialogue) (*line.Line, error) {
	id := line.PortID(len(w.ports) + 1)
	if err := w.o.Connect(id, d.Port, d.PortMode); err != nil {
		return nil, fmt.Errorf("open the %s on %s: %w", role, d.Port, err)
	}
	s := line.Settings{Name: role + " on " + d.Port}
	if d.Family == familyModbus {
		s = modbus.LineSettings(s.Name, d.Baud)
	}
	s.Terminator, s.Echo = d.Terminator, d.Echo
	l := w.engine.Open(id, s)
	w.ports = append(w.ports, opened{l, role, uut, d.Port, d.PortMode})
	return l, nil
}

// dialogue is how an instrument of text is asked.
func dialogue(d Dialogue) scpi.Settings {
	return scpi.Settings{Identify: d.Identify, Identity: d.Identity, Uptime: d.Uptime, Clear: d.Clear, Errors: d.Errors,
		Acknowledged: d.Acknowledged, Within: d.Within}
}

// registers is how one of Modbus is.
func registers(d Dialogue) modbus.Settings {
	return modbus.Settings{Station: d.Station, Order: d.Order, Identify: d.Identify, Identity: d.Identity, Uptime: d.Uptime, Within: d.Within}
}

// manometer opens an instrument that gives a reading on demand.
func (w *opening) manometer(role string, uut int, d Dialogue, read, zero string, f quantity.Field) (bench.Manometer, error) {
	l, err := w.connect(role, uut, d)
	if err != nil {
		return nil, err
	}
	switch {
	case d.Mode == modeRunning:
		var stream bench.Streaming
		if d.Family == familyFrames {
			stream, err = frames.NewPort(l).Channel(frames.Settings{Field: f})
		} else {
			stream, err = lines.New(l, lines.Settings{Field: f})
		}
		if err != nil {
			return nil, err
		}
		return running.New(l, stream, running.Settings{Zero: zero, Within: d.Within}), nil
	case d.Family == familyModbus:
		s := registers(d)
		s.Read, s.Zero, s.Unit = read, zero, f.Unit
		s.Scale, s.Offset, s.OverRange = f.Frame.Scale, f.Frame.Offset, f.Frame.Over
		return modbus.New(l, s)
	}
	s := dialogue(d)
	s.Read, s.Zero, s.Field = read, zero, f
	return scpi.New(l, s), nil
}

// identified opens an instrument that is only asked who it is.
func (w *opening) identified(role string, uut int, d Dialogue) (bench.Identified, error) {
	l, err := w.connect(role, uut, d)
	if err != nil {
		return nil, err
	}
	if d.Family == familyModbus {
		return modbus.New(l, registers(d))
	}
	return scpi.New(l, dialogue(d)), nil
}

// ventable is a pressure source that can be vented at once.
type ventable interface {
	bench.PressureSource
	VentNow()
}

func (w *opening) source(f *File) (ventable, error) {
	s := f.Pressure
	l, err := w.connect("pressure source", -1, s.Dialogue)
	if err != nil {
		return nil, err
	}
	if s.Family == familyModbus {
		return modbus.NewSource(l, modbus.SourceSettings{
			Settings: registers(s.Dialogue), Set: s.Set, Hold: s.Hold, Vent: s.Vent, Lowest: f.Lowest, Highest: f.Highest,
		})
	}
	return scpi.NewSource(l, scpi.SourceSettings{
		Settings: dialogue(s.Dialogue), Set: s.Set, Hold: s.Hold, Vent: s.Vent, Lowest: f.Lowest, Highest: f.Highest,
	})
}

// releasable is a valve that can be released at once.
type releasable interface {
	bench.Valve
	ReleaseNow()
}

func (w *opening) valve(f *File) (releasable, error) {
	v := f.Valve
	l, err := w.connect("valve", -1, v.Dialogue)
	if err != nil {
		return nil, err
	}
	switch v.Family {
	case familyModbus:
		return modbus.NewValve(l, modbus.ValveSettings{Settings: registers(v.Dialogue), Release: v.Release, Shut: v.Shut})
	case familyRelay:
		return relay.New(l, relay.Settings{Release: v.Release, Shut: v.Shut, Within: v.Within})
	}
	return scpi.NewValve(l, scpi.ValveSettings{Settings: dialogue(v.Dialogue), Release: v.Release, Shut: v.Shut})
}

// channels are the numbers that one port's stream carries.
type channels interface {
	channel(quantity.Field) (bench.Streaming, error)
}

type linePort struct{ *lines.Port }

func (p linePort) channel(f quantity.Field) (bench.Streaming, error) {
	return p.Instrument(lines.Settings{Field: f})
}

type framePort struct{ *frames.Port }

func (p framePort) channel(f quantity.Field) (bench.Streaming, error) {
	return p.Channel(frames.Settings{Field: f})
}

// stream opens a port that sends by itself, or gives that which another UUT has
// opened.
func (w *opening) stream(role string, uut int, d Dialogue) (channels, error) {
	if c, shared := w.shared[d.Port]; shared {
		return c, nil
	}
	l, err := w.connect(role, uut, d)
	if err != nil {
		return nil, err
	}
	var c channels = linePort{lines.NewPort(l)}
	if d.Family == familyFrames {
		c = framePort{frames.NewPort(l)}
	}
	w.shared[d.Port] = c
	return c, nil
}
