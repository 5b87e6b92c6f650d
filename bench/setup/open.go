package setup

import (
	"errors"
	"fmt"

	"kymobench/bench"
	"kymobench/bench/instruments/lines"
	"kymobench/bench/instruments/scpi"
	"kymobench/bench/line"
)

// Opener gives ports: those of this machine, or of the simulated bench.
type Opener interface {
	// Inbox is where the events of all its ports wait.
	Inbox() line.Inbox
	// Connect opens the port of that name under an id.
	Connect(id line.PortID, name string, baud int) error
	// Close ends every port.
	Close() error
}

// Open opens every instrument of the file. Nobody has been asked anything yet.
// On an error every port is closed again.
func (f *File) Open(o Opener) (*bench.Rig, error) {
	rig, err := f.open(o)
	if err != nil {
		return nil, errors.Join(err, o.Close())
	}
	return rig, nil
}

func (f *File) open(o Opener) (*bench.Rig, error) {
	engine := line.NewEngine(o.Inbox())
	next := line.PortID(1)
	connect := func(role, port string, baud int) (*line.Line, error) {
		id := next
		next++
		if err := o.Connect(id, port, baud); err != nil {
			return nil, fmt.Errorf("open the %s on %s: %w", role, port, err)
		}
		return engine.Open(id, line.Settings{Name: role + " on " + port}), nil
	}
	asked := func(role string, d Dialogue) (*line.Line, scpi.Settings, error) {
		l, err := connect(role, d.Port, d.Baud)
		return l, scpi.Settings{Identify: d.Identify, Identity: d.Identity, Uptime: d.Uptime, Clear: d.Clear, Errors: d.Errors, Within: d.Within}, err
	}
	rig := &bench.Rig{Engine: engine, Inbox: o.Inbox(), Close: o.Close}
	l, s, err := asked("reference", f.Reference.Dialogue)
	if err != nil {
		return nil, err
	}
	s.Read, s.Field, s.Zero = f.Reference.Read, f.Reference.Field, f.Reference.Zero
	rig.Reference = scpi.New(l, s)
	if l, err = connect("UUT", f.UUT.Port, f.UUT.Baud); err != nil {
		return nil, err
	}
	if rig.UUT, err = lines.New(l, lines.Settings{Field: f.UUT.Field}); err != nil {
		return nil, err
	}
	if f.Readout != nil && f.Readout.Port != "" {
		if l, s, err = asked("readout", f.Readout.Dialogue); err != nil {
			return nil, err
		}
		rig.Readout = scpi.New(l, s)
	}
	if l, s, err = asked("pressure source", f.Pressure.Dialogue); err != nil {
		return nil, err
	}
	source, err := scpi.NewSource(l, scpi.SourceSettings{
		Settings: s, Set: f.Pressure.Set, Hold: f.Pressure.Hold, Vent: f.Pressure.Vent, Lowest: f.Lowest, Highest: f.Highest,
	})
	if err != nil {
		return nil, err
	}
	if l, s, err = asked("valve", f.Valve.Dialogue); err != nil {
		return nil, err
	}
	valve, err := scpi.NewValve(l, scpi.ValveSettings{Settings: s, Release: f.Valve.Release, Shut: f.Valve.Shut})
	if err != nil {
		return nil, err
	}
	rig.Source, rig.Valve = source, valve
	rig.EmergencyVent = func() {
		source.VentNow()
		valve.ReleaseNow()
	}
	return rig, nil
}
