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
	"kymobench/procedures/record"
)

// session is one run while it goes on. Only the engine's goroutine touches it.
type session struct {
	Settings
	writer *record.Writer
	events []record.Event
	known  int64 // highest line known to be durable
	broken error // the record's first error; nothing is written after it
	stage  int

	answers []record.Answer
	stream  stream
	refused int

	nominal    float64 // V/V/Pa, 0 for a pressure output
	excitation float64 // V
	zeroed     bool
	releasing  bool    // a good line rings below zero after a release; only the reference is watched
	zeroUUT    float64 // Pa: the UUT's reading at the one zeroing
	last       quantity.Pressure
}

// within is how long the bookkeeping on a vented bench may take.
const within = 10 * time.Second

func newSession(settings Settings) *session {
	s := &session{Settings: settings}
	u := settings.Facts.UUT
	if v, err := quantity.ParseAs(u.NominalSensitivity, quantity.DimSensitivity); err == nil {
		s.nominal = v.SI
	}
	if v, err := quantity.ParseAs(u.Excitation, quantity.DimVoltage); err == nil {
		s.excitation = v.SI
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
	e.Handle(line.KindGone, func(ev line.Event) error {
		return &Fault{Code: "port_gone", Text: "a port went away", Err: ev.Err}
	})
	settings.Rig.UUT.Watch(s.tookSample)
	return s
}

func (s *session) now() line.Instant { return s.Rig.Inbox.Now() }

func (s *session) wall() time.Time { return s.Rig.Inbox.Wall() }

// append puts an event into the record. After the record's first error it only
// returns that error.
func (s *session) append(kind string, payload any) error {
	_, err := s.appendLine(kind, payload)
	return err
}

func (s *session) appendLine(kind string, payload any) (int64, error) {
	if s.broken != nil {
		return 0, s.broken
	}
	e, err := s.writer.AppendEvent(s.now(), s.wall(), kind, payload)
	if err != nil {
		s.broken = err
		return 0, err
	}
	s.events = append(s.events, e)
	return e.Line, nil
}

// durable waits until every line so far is durable.
func (s *session) durable(ctx context.Context) error {
	want := s.events[len(s.events)-1].Line
	err := s.Rig.Engine.Wait(ctx, s.now().Add(within), func() bool { return s.known >= want })
	if errors.Is(err, line.ErrDeadline) {
		s.broken = fmt.Errorf("the disk did not take line %d within %v", want, within)
		return s.broken
	}
	return err
}

func (s *session) tookDurable(e line.Event) error {
	if e.Err != nil {
		s.broken = e.Err
		return e.Err
	}
	s.known = max(s.known, e.Number)
	s.writer.Taken(e.Number)
	return nil
}

// pause lets the time pass, taking what comes meanwhile.
func (s *session) pause(ctx context.Context, until line.Instant) error {
	err := s.Rig.Engine.Wait(ctx, until, func() bool { return false })
	if errors.Is(err, line.ErrDeadline) {
		return nil
	}
	return err
}

// vent opens the volume to atmosphere: at once on every port, then with the
// instruments' answers, on a deadline of its own.
func (s *session) vent(why string) {
	s.Rig.EmergencyVent()
	if s.writer != nil && s.broken == nil && why != "" {
		_ = s.append(record.KindVent, record.Vent{Why: why})
	}
}

func ventReason(err error) string {
	if err == nil {
		return "all stages done"
	}
	return err.Error()
}

// pressureOf turns one of the UUT's values into pressure as the nominal
// sensitivity has it, before any zeroing.
func (s *session) pressureOf(v quantity.Value) (float64, error) {
	switch v.Unit.Dimension {
	case quantity.DimPressure:
		return v.SI, nil
	case quantity.DimRatio:
		if s.nominal > 0 {
			return v.SI / s.nominal, nil
		}
	case quantity.DimVoltage:
		if s.nominal > 0 && s.excitation > 0 {
			return v.SI / s.excitation / s.nominal, nil
		}
	}
	return 0, fmt.Errorf("the UUT's unit %s cannot be turned into pressure with what the bench file states", v.Unit.Name)
}

// tookSample takes one of the UUT's lines as it comes, wherever the run waits,
// and holds it against the pressures never to be exceeded.
func (s *session) tookSample(r bench.Reading, err error) error {
	if err != nil {
		s.refused++
		s.stream.gap()
		return nil
	}
	p, err := s.pressureOf(r.Value)
	if err != nil {
		return &Fault{Code: "unit", Text: err.Error()}
	}
	s.stream.add(r.At, r.Text, p)
	if s.zeroed && !s.releasing {
		return s.watchPressure("UUT", quantity.Pressure(p-s.zeroUUT), r.Text)
	}
	return nil
}

// watchPressure vents at the first reading outside the pressures never to be
// exceeded, before anything is written.
func (s *session) watchPressure(role string, p quantity.Pressure, text string) error {
	if p <= s.Facts.Highest && p >= s.Facts.Lowest && !math.IsNaN(float64(p)) {
		return nil
	}
	s.Rig.EmergencyVent()
	code := "overpressure"
	if p < s.Facts.Lowest {
		code = "underpressure"
	}
	return &Fault{Code: code, Text: fmt.Sprintf("the %s read %.1f mmHg (%q), outside %.0f to %.0f mmHg never to be left: vented",
		role, p.MmHg(), text, s.Facts.Lowest.MmHg(), s.Facts.Highest.MmHg())}
}
