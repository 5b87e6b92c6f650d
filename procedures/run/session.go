package run

import (
	"context"
	"errors"
	"fmt"
	"math"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
	"kymobench/procedures/ready"
	"kymobench/procedures/record"
)

// session is one run while it goes on. Only the engine's goroutine touches it.
type session struct {
	Settings
	units  []*unit
	broken error // the records' first error; nothing is written after it
	stage  int

	taken         bool // the stage was, whole
	interruptions int
	gone          []line.PortID // ports to be opened again
	booted        booted
	nameless      []string // roles that cannot be asked who they are

	answers   []record.Answer
	releasing bool              // a good line rings below zero after a release; only the reference is watched
	last      quantity.Pressure // of the reference; not a number before its first reading
	still     still             // of the reference
	approach  *ready.Approach   // to the point that is being taken, or nil
}

// within is how long the bookkeeping on a vented bench may take.
const within = 10 * time.Second

func newSession(settings Settings) *session {
	s := &session{Settings: settings, booted: booted{}, last: quantity.Pressure(math.NaN())}
	for i, subject := range settings.Subjects {
		s.units = append(s.units, newUnit(i, subject, settings.Rig.UUTs[i]))
	}
	e := settings.Rig.Engine
	e.Handle(line.KindDurable, s.tookDurable)
	e.Handle(line.KindAnswer, func(ev line.Event) error {
		s.answers = append(s.answers, record.Answer{Text: ev.Text})
		return nil
	})
	e.Handle(line.KindAnswerEnd, func(line.Event) error {
		s.answers = append(s.answers, record.Answer{End: true})
		return nil
	})
	e.Handle(line.KindStop, func(line.Event) error { return ErrStopped })
	e.Handle(line.KindOverflow, func(line.Event) error {
		return &Fault{Code: "overflow", Text: "the program could not keep up and events were lost"}
	})
	e.Handle(line.KindGone, s.tookGone)
	for _, u := range s.units {
		if u.rig.Stream == nil {
			continue // refused by streams before anything is done
		}
		u.rig.Stream.Watch(func(r *bench.Reading, err error) error { return s.tookSample(u, *r, err) })
	}
	return s
}

func (s *session) now() line.Instant { return s.Rig.Inbox.Now() }

func (s *session) wall() time.Time { return s.Rig.Inbox.Wall() }

// append puts an event into the record of every UUT that takes part. After the
// first error of any of them it only returns that error.
func (s *session) append(kind string, payload any) error {
	for _, u := range s.live() {
		if _, err := s.put(u, kind, payload); err != nil {
			return err
		}
	}
	return s.broken
}

// put puts an event into the record of one UUT and returns its line.
func (s *session) put(u *unit, kind string, payload any) (int64, error) {
	if s.broken != nil {
		return 0, s.broken
	}
	if u.writer == nil { // trial releases keep no record
		e, err := record.NewEvent(int64(len(u.events))+1, s.now(), kind, payload)
		u.events, u.known = append(u.events, e), e.Line
		return e.Line, err
	}
	e, err := u.writer.AppendEvent(s.now(), s.wall(), kind, payload)
	if err != nil {
		s.broken = err
		return 0, err
	}
	u.events = append(u.events, e)
	return e.Line, nil
}

// durable waits until every line so far is durable.
func (s *session) durable(ctx context.Context) error {
	done := func() bool {
		for _, u := range s.units {
			if n := len(u.events); n > 0 && !u.closed && u.known < u.events[n-1].Line {
				return false
			}
		}
		return true
	}
	err := s.Rig.Engine.Wait(ctx, s.now().Add(within), done)
	if errors.Is(err, line.ErrDeadline) {
		s.broken = fmt.Errorf("the disk did not take the last lines within %v", within)
		return s.broken
	}
	return err
}

func (s *session) tookDurable(e line.Event) error {
	if int(e.Port) < 0 || int(e.Port) >= len(s.units) {
		return nil
	}
	if e.Err != nil {
		s.broken = e.Err
		return e.Err
	}
	u := s.units[e.Port]
	u.known = max(u.known, e.Number)
	u.writer.Taken(e.Number)
	return nil
}

// tookGone hears that a port went away.
func (s *session) tookGone(e line.Event) error {
	role, _ := s.Rig.Role(e.Port)
	s.gone = append(s.gone, e.Port)
	return &Fault{Code: "port_gone", Text: "the port of the " + role + " went away", Err: e.Err, again: fromZero}
}

// pause lets the time pass, taking what comes meanwhile.
func (s *session) pause(ctx context.Context, until line.Instant) error {
	err := s.Rig.Engine.Wait(ctx, until, func() bool { return false })
	if errors.Is(err, line.ErrDeadline) {
		return nil
	}
	return err
}

// vent opens the volume to atmosphere: at once on every port, and writes it
// down afterwards.
func (s *session) vent(why string) {
	s.Rig.EmergencyVent()
	for _, u := range s.units {
		if u.writer != nil && !u.closed && s.broken == nil && why != "" {
			_, _ = s.put(u, record.KindVent, record.Vent{Why: why})
		}
	}
}

func ventReason(err error) string {
	if err == nil {
		return "all stages done"
	}
	return err.Error()
}

// streams refuses a UUT that is only asked: points and steps are taken from a
// stream so far.
func (s *session) streams() error {
	for _, u := range s.units {
		if u.rig.Stream == nil {
			return fmt.Errorf("%s is asked for its readings and does not send them by itself: a run cannot read such a UUT yet", u.name())
		}
	}
	return nil
}
