package run

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/procedures"
	"kymobench/procedures/record"
)

// again says how much of a run a fault spoils, so that it can be taken again.
type again uint8

const (
	never    again = iota // the run ends
	thisPart              // the cycle, or the stage where it has none
	fromZero              // everything since the UUT was zeroed: somebody may have been switched off
)

// mostInterruptions is how often one run is taken up again. A bench that needs
// more is not fit to judge anything.
const mostInterruptions = 3

// How long a port that went away, or a UUT that fell silent, is waited for.
const (
	backWithin = 30 * time.Second
	tryEvery   = time.Second
)

// mark remembers where a part of the run begins: the next line of each record.
func (s *session) mark() []int64 {
	marks := make([]int64, len(s.units))
	for _, u := range s.units {
		if n := len(u.events); n > 0 {
			marks[u.index] = u.events[n-1].Line + 1
		}
	}
	return marks
}

// spoilt is the fault that may be taken again, or nil.
func spoilt(err error) *Fault {
	var f *Fault
	if errors.As(err, &f) && f.again != never {
		return f
	}
	return nil
}

// interrupt vents, writes down that what was taken since the marks does not
// count, and brings the bench back: ports that are gone are opened again, every
// instrument is asked who it is, and the UUTs must send. It returns the fault
// when the bench does not come back.
func (s *session) interrupt(ctx context.Context, f *Fault, marks []int64) error {
	s.Rig.EmergencyVent()
	s.releasing = true // the fast valve is among what was opened
	defer func() { s.releasing = false }()
	if s.interruptions++; s.interruptions > mostInterruptions {
		return f
	}
	s.Operator.Tell("! " + f.Error() + ": vented; it is tried again")
	for _, u := range s.live() {
		for _, l := range []struct {
			kind    string
			payload any
		}{
			{record.KindVent, record.Vent{Why: f.Error()}},
			{record.KindReservation, record.Reservation{Code: "interrupted", Text: f.Error() + "; vented, and taken again"}},
			{record.KindVoid, record.Void{Since: marks[u.index], Why: f.Error()}},
		} {
			if _, err := s.put(u, l.kind, l.payload); err != nil {
				return err
			}
		}
	}
	if err := s.reconnect(ctx, f); err != nil {
		return err
	}
	if err := s.identify(ctx); err != nil {
		return &Fault{Code: "identity", Text: "after an interruption the bench is not as its file says", Err: err}
	}
	if err := s.waitForUUTs(ctx); err != nil {
		return err
	}
	if err := s.command(ctx, func() error { return s.Rig.Source.Vent(ctx) }); err != nil {
		return s.sourceFault(ctx, err)
	}
	if err := s.closeValve(ctx); err != nil {
		return err
	}
	if err := s.pause(ctx, s.now().Add(ringsOut)); err != nil {
		return err
	}
	return s.durable(ctx)
}

// ringsOut is how long a line may ring after a release before its readings are
// held against the pressures never to be exceeded again.
const ringsOut = 2 * time.Second

// reconnect opens the ports that are gone. A port that is there under another
// name is never followed by itself: the operator is asked, and the identity
// decides afterwards.
func (s *session) reconnect(ctx context.Context, f *Fault) error {
	until := s.now().Add(backWithin)
	for len(s.gone) > 0 {
		id := s.gone[0]
		err := s.Rig.Reconnect(id, "")
		if err == nil {
			s.gone = s.gone[1:]
			continue
		}
		if s.now() >= until {
			role, uut := s.Rig.Role(id)
			if name, ok := s.Rig.Moved(id); ok {
				if err := s.follow(ctx, id, role, name); err != nil {
					return err
				}
				s.gone = s.gone[1:]
				continue
			}
			lost := &Fault{Code: f.Code, Text: fmt.Sprintf("the %s did not come back within %v", role, backWithin), Err: err}
			if uut < 0 || len(s.live()) == 1 {
				return lost
			}
			if err := s.leaveOut(s.units[uut], lost); err != nil {
				return err
			}
			s.gone = s.gone[1:]
			continue
		}
		if err := s.pause(ctx, s.now().Add(tryEvery)); err != nil && spoilt(err) == nil {
			return err
		}
	}
	return nil
}

// follow asks whether a port is to be followed to another name.
func (s *session) follow(ctx context.Context, id line.PortID, role, name string) error {
	answer, err := s.ask(ctx, fmt.Sprintf("The %s is gone, and a port with the same USB serial number is there as %s. \"yes\" follows it, \"stop\" ends", role, name))
	if err != nil {
		return err
	}
	if !strings.EqualFold(strings.TrimSpace(answer), "yes") {
		return &Fault{Code: "port_gone", Text: fmt.Sprintf("the %s is gone, and the operator did not confirm that it is now %s", role, name)}
	}
	if err := s.Rig.Reconnect(id, name); err != nil {
		return &Fault{Code: "port_gone", Text: fmt.Sprintf("the %s could not be opened as %s", role, name), Err: err}
	}
	return s.append(record.KindReservation, record.Reservation{Code: "port_renamed", Text: fmt.Sprintf("the %s came back as %s, confirmed by the operator", role, name)})
}

// waitForUUTs waits until every UUT has sent something anew.
func (s *session) waitForUUTs(ctx context.Context) error {
	begun := s.now()
	for _, u := range s.live() {
		err := s.Rig.Engine.Wait(ctx, begun.Add(backWithin), func() bool {
			n := len(u.stream.samples)
			return n > 0 && u.stream.samples[n-1].at > begun
		})
		switch {
		case errors.Is(err, line.ErrDeadline):
			if err := s.leaveOut(u, &Fault{Code: "uut_silent", Text: fmt.Sprintf("the readings of %s have not come back within %v: check cable, port and rate", u.name(), backWithin)}); err != nil {
				return err
			}
		case err != nil && spoilt(err) == nil:
			return err
		}
	}
	return nil
}

// whereFrom gives the stage that a fault sends the run back to, and the marks
// of its beginning.
func (s *session) whereFrom(f *Fault, stage int) int {
	if f.again != fromZero {
		return stage
	}
	for i, kind := range s.Definition.Stages[:stage+1] {
		if _, ok := kind.(procedures.Zero); ok {
			return i
		}
	}
	return stage
}

// booted remembers when each instrument that tells its uptime was switched on.
type booted map[bench.Identified]line.Instant

// restartedBy is how much later than before an instrument may say it was
// switched on: an uptime comes in whole seconds, and late by its answer.
const restartedBy = 3 * time.Second

// checkRestarts asks the instruments whose zero counts how long they have been
// on: one that was switched off and on again has lost its zero and its settings,
// whatever its identity is.
func (s *session) checkRestarts(ctx context.Context) error {
	for _, who := range s.withUptime() {
		up, err := who.Uptime(ctx)
		if errors.Is(err, bench.ErrNotStated) {
			continue
		}
		if err != nil {
			return s.stopOr(ctx, &Fault{Code: "uptime", Text: "an instrument does not say how long it has been on", Err: err}, err)
		}
		on := s.now().Add(-up)
		before, known := s.booted[who]
		s.booted[who] = on
		if known && on.Sub(before) > restartedBy {
			return &Fault{Code: "restarted", Text: "an instrument was switched off and on again, and has lost its zero", again: fromZero}
		}
	}
	return nil
}

// stopOr gives the error back when it is a stop, else the fault.
func (s *session) stopOr(ctx context.Context, f *Fault, err error) error {
	var own *Fault
	if ctx.Err() != nil || isStop(err) || errors.As(err, &own) {
		return err
	}
	return f
}

// withUptime lists the instruments whose zero or gain counts, each once.
func (s *session) withUptime() []bench.Identified {
	all := []bench.Identified{s.Rig.Reference}
	seen := map[bench.Identified]bool{}
	for _, u := range s.live() {
		if who := u.rig.Readout; who != nil && !seen[who] {
			seen[who] = true
			all = append(all, who)
		}
	}
	return all
}
