// Package relay drives a fast valve by a relay on a modem line, RTS or DTR, of a
// serial port.
//
// Nobody answers there: what the valve did shows in the pressure alone. Opening
// a port puts both lines on for a moment on many systems, whatever this
// program does; the bench's plumbing has to bear that.
//
// Order of use: open a line.Line, make a Valve on it.
package relay

import (
	"context"
	"fmt"
	"strings"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
)

// Settings of a valve: what is done to release and to shut, "rts on", "rts
// off", "dtr on" or "dtr off".
type Settings struct {
	Release, Shut string
	Within        time.Duration // the port takes it within this; 0 is 2 s
}

// within is how long a port may take when nothing is stated.
const within = 2 * time.Second

// Stroke is one change of a modem line.
type Stroke struct {
	Line line.ModemLine
	On   bool
}

// ParseStroke reads "rts on" and the like.
func ParseStroke(s string) (Stroke, error) {
	name, state, _ := strings.Cut(strings.ToLower(s), " ")
	var stroke Stroke
	switch name {
	case "rts":
		stroke.Line = line.RTS
	case "dtr":
		stroke.Line = line.DTR
	}
	stroke.On = state == "on"
	if stroke.Line == 0 || state != "on" && state != "off" {
		return Stroke{}, fmt.Errorf("%q is none of: rts on, rts off, dtr on, dtr off", s)
	}
	return stroke, nil
}

// Valve is a bench.Valve.
type Valve struct {
	line          *line.Line
	release, shut Stroke
	within        time.Duration
}

// New makes a Valve on a line that is its own. It refuses a valve that is shut
// by what opens it.
func New(l *line.Line, s Settings) (*Valve, error) {
	v := &Valve{line: l, within: s.Within}
	if v.within <= 0 {
		v.within = within
	}
	var err error
	if v.release, err = ParseStroke(s.Release); err == nil {
		v.shut, err = ParseStroke(s.Shut)
	}
	if err == nil && (v.release.Line != v.shut.Line || v.release.On == v.shut.On) {
		err = fmt.Errorf("%q and %q are not the two states of one line", s.Release, s.Shut)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", l.Name(), err)
	}
	return v, nil
}

// Identify: a relay has no identity.
func (v *Valve) Identify(context.Context) (string, error) {
	return "", fmt.Errorf("identify %s: %w", v.line.Name(), bench.ErrNotStated)
}

// Uptime: nor does it say how long it has been on.
func (v *Valve) Uptime(context.Context) (time.Duration, error) {
	return 0, fmt.Errorf("uptime of %s: %w", v.line.Name(), bench.ErrNotStated)
}

// Release opens the fast valve.
func (v *Valve) Release(ctx context.Context) error { return v.strike(ctx, v.release) }

// Shut closes it.
func (v *Valve) Shut(ctx context.Context) error { return v.strike(ctx, v.shut) }

func (v *Valve) strike(ctx context.Context, s Stroke) error {
	return v.line.Signal(ctx, s.Line, s.On, v.within)
}

// ReleaseNow opens it at once and waits for nothing; it may be called from
// inside a handler.
func (v *Valve) ReleaseNow() { v.line.FireSignal(v.release.Line, v.release.On) }

var _ bench.Valve = (*Valve)(nil)
