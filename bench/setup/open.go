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
	// Connect opens the port of that name under an id, also once more when it
	// has gone.
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

// opened is a port that was opened, for whom and how.
type opened struct {
	line *line.Line
	role string
	uut  int // index of the UUT, or -1
	port string
	baud int
}

// opening is the work of opening a file's instruments.
type opening struct {
	o      Opener
	engine *line.Engine
	ports  []opened // that of PortID i+1 is ports[i]
	asked  []lateAsked
	shared map[string]*lines.Port
}

// lateAsked is an instrument that several UUTs share.
type lateAsked struct {
	port string
	who  bench.Identified
}

func (w *opening) connect(role string, uut int, port string, baud int) (*line.Line, error) {
	id := line.PortID(len(w.ports) + 1)
	if err := w.o.Connect(id, port, baud); err != nil {
		return nil, fmt.Errorf("open the %s on %s: %w", role, port, err)
	}
	l := w.engine.Open(id, line.Settings{Name: role + " on " + port})
	w.ports = append(w.ports, opened{l, role, uut, port, baud})
	return l, nil
}

// dialogue opens the line of an instrument that is asked.
func (w *opening) dialogue(role string, uut int, d Dialogue) (*line.Line, scpi.Settings, error) {
	l, err := w.connect(role, uut, d.Port, d.Baud)
	return l, scpi.Settings{Identify: d.Identify, Identity: d.Identity, Uptime: d.Uptime, Clear: d.Clear, Errors: d.Errors, Within: d.Within}, err
}

func (f *File) open(o Opener) (*bench.Rig, error) {
	w := &opening{o: o, engine: line.NewEngine(o.Inbox()), shared: map[string]*lines.Port{}}
	rig := &bench.Rig{Engine: w.engine, Inbox: o.Inbox(), Close: o.Close, Role: w.role, Reconnect: w.reconnect, Moved: w.moved}
	l, s, err := w.dialogue("reference", -1, f.Reference.Dialogue)
	if err != nil {
		return nil, err
	}
	s.Read, s.Field, s.Zero = f.Reference.Read, f.Reference.Field, f.Reference.Zero
	rig.Reference = scpi.New(l, s)
	for i, p := range f.Places() {
		u, err := w.uut(i, p)
		if err != nil {
			return nil, err
		}
		rig.UUTs = append(rig.UUTs, u)
	}
	if l, s, err = w.dialogue("pressure source", -1, f.Pressure.Dialogue); err != nil {
		return nil, err
	}
	source, err := scpi.NewSource(l, scpi.SourceSettings{
		Settings: s, Set: f.Pressure.Set, Hold: f.Pressure.Hold, Vent: f.Pressure.Vent, Lowest: f.Lowest, Highest: f.Highest,
	})
	if err != nil {
		return nil, err
	}
	if l, s, err = w.dialogue("valve", -1, f.Valve.Dialogue); err != nil {
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

// uut opens the stream and the readout of one place. UUTs may share a port,
// each in a column of its lines, and a readout.
func (w *opening) uut(i int, p Place) (bench.UUT, error) {
	u := bench.UUT{Name: p.Name}
	of := func(what string) string {
		if p.Name == "" {
			return what
		}
		return what + " " + p.Name
	}
	port := w.shared[p.UUT.Port]
	if u.SamePort = port != nil; !u.SamePort {
		l, err := w.connect(of("UUT"), i, p.UUT.Port, p.UUT.Baud)
		if err != nil {
			return u, err
		}
		port = lines.NewPort(l)
		w.shared[p.UUT.Port] = port
	}
	stream, err := port.Instrument(lines.Settings{Field: p.UUT.Field})
	if err != nil {
		return u, err
	}
	u.Stream = stream
	if p.Readout == nil || p.Readout.Port == "" {
		return u, nil
	}
	for _, a := range w.asked {
		if a.port == p.Readout.Port {
			u.Readout = a.who
			return u, nil
		}
	}
	l, s, err := w.dialogue(of("readout"), i, p.Readout.Dialogue)
	if err != nil {
		return u, err
	}
	u.Readout = scpi.New(l, s)
	w.asked = append(w.asked, lateAsked{p.Readout.Port, u.Readout})
	return u, nil
}

// role names a port, and says which UUT's it is; a port that several share is
// no single one's.
func (w *opening) role(id line.PortID) (string, int) {
	if id < 1 || int(id) > len(w.ports) {
		return "a port", -1
	}
	p := w.ports[id-1]
	return p.role + " on " + p.port, p.uut
}

// ErrNoSuchPort: a port that the bench file does not name.
var ErrNoSuchPort = errors.New("the bench has no such port")

// reconnect opens a port that has gone, under its name or another.
func (w *opening) reconnect(id line.PortID, name string) error {
	if id < 1 || int(id) > len(w.ports) {
		return ErrNoSuchPort
	}
	p := &w.ports[id-1]
	if name == "" {
		name = p.port
	}
	if err := w.o.Connect(id, name, p.baud); err != nil {
		return fmt.Errorf("open the %s on %s once more: %w", p.role, name, err)
	}
	p.port = name
	p.line.Again()
	return nil
}

// Mover is an Opener that can tell where an instrument is now whose port has
// gone, by what the system knows of the adapter.
type Mover interface {
	Moved(id line.PortID, name string) (now string, ok bool)
}

func (w *opening) moved(id line.PortID) (string, bool) {
	m, ok := w.o.(Mover)
	if !ok || id < 1 || int(id) > len(w.ports) {
		return "", false
	}
	return m.Moved(id, w.ports[id-1].port)
}
