package setup

import (
	"errors"
	"fmt"

	"kymobench/bench"
	"kymobench/bench/line"
)

// Opener gives ports: those of this machine, or of the simulated bench.
type Opener interface {
	// Inbox is where the events of all its ports wait.
	Inbox() line.Inbox
	// Connect opens the port of that name under an id, also once more when it
	// has gone.
	Connect(id line.PortID, name string, mode PortMode) error
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
	mode PortMode
}

// opening is the work of opening a file's instruments.
type opening struct {
	o      Opener
	engine *line.Engine
	ports  []opened // that of PortID i+1 is ports[i]
	asked  []lateAsked
	shared map[string]channels
}

// lateAsked is an instrument that several UUTs share.
type lateAsked struct {
	port string
	who  bench.Identified
}

func (f *File) open(o Opener) (*bench.Rig, error) {
	w := &opening{o: o, engine: line.NewEngine(o.Inbox()), shared: map[string]channels{}}
	rig := &bench.Rig{Engine: w.engine, Inbox: o.Inbox(), Close: o.Close, Role: w.role, Reconnect: w.reconnect, Moved: w.moved}
	var err error
	r := f.Reference
	if rig.Reference, err = w.manometer("reference", -1, r.Dialogue, r.Read, r.Zero, r.Field); err != nil {
		return nil, err
	}
	for i, p := range f.Places() {
		u, err := w.uut(i, p, f.Applied)
		if err != nil {
			return nil, err
		}
		rig.UUTs = append(rig.UUTs, u)
	}
	source, err := w.source(f)
	if err != nil {
		return nil, err
	}
	valve, err := w.valve(f)
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
func (w *opening) uut(i int, p Place, applied *Applied) (bench.UUT, error) {
	u := bench.UUT{Name: p.Name}
	of := func(what string) string {
		if p.Name == "" {
			return what
		}
		return what + " " + p.Name
	}
	if p.UUT.Mode == modeAsked {
		var err error
		u.Asked, err = w.manometer(of("UUT"), i, p.UUT.Dialogue, p.UUT.Read, "", p.UUT.Field)
		if err != nil {
			return u, err
		}
	} else {
		port, err := w.stream(of("UUT"), i, p.UUT.Dialogue)
		if err != nil {
			return u, err
		}
		if u.Stream, err = port.channel(p.UUT.Field); err != nil {
			return u, err
		}
		if applied != nil && i == 0 {
			if u.Applied, err = port.channel(applied.Field); err != nil {
				return u, err
			}
		}
	}
	if p.Readout == nil || p.Readout.Port == "" {
		return u, nil
	}
	for _, a := range w.asked {
		if a.port == p.Readout.Port {
			u.Readout = a.who
			return u, nil
		}
	}
	var err error
	if u.Readout, err = w.identified(of("readout"), i, p.Readout.Dialogue); err != nil {
		return u, err
	}
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
	if err := w.o.Connect(id, name, p.mode); err != nil {
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
