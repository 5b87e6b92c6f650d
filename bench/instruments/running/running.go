// Package running reads an instrument that sends by itself as if it were asked:
// a reference manometer that only streams, for instance.
//
// It knows no form of line or frame; the stream's own driver does.
//
// Order of use: open a line.Line, make a bench.Streaming on it (lines, frames),
// make a Manometer of both, Read.
package running

import (
	"context"
	"errors"
	"fmt"
	"time"

	"kymobench/bench"
	"kymobench/bench/instruments/asked"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// Settings of a Manometer.
type Settings struct {
	Zero   string        // command; "" for none
	Within time.Duration // a reading comes within this; 0 is 2 s
}

// within is how long a reading may take when nothing is stated.
const within = 2 * time.Second

// mostGarbled is how many readings in a row may be none before Read gives up.
const mostGarbled = 3

// Manometer is a bench.Manometer.
type Manometer struct {
	line *line.Line
	s    Settings

	begun   bool // a reading has ended since the call: the next one began later
	done    bool
	reading bench.Reading
	garbled []string
	err     error
}

// New makes a Manometer of a stream and the line it comes on. It watches the
// stream, which nobody else may.
func New(l *line.Line, stream bench.Streaming, s Settings) *Manometer {
	if s.Within <= 0 {
		s.Within = within
	}
	m := &Manometer{line: l, s: s, done: true}
	stream.Watch(m.take)
	return m
}

// take takes what comes; only what began after the call of Read counts, and a
// reading begins when the one before has ended.
func (m *Manometer) take(r *bench.Reading, err error) error {
	switch {
	case m.done:
	case !m.begun:
		m.begun = true
	case err == nil:
		m.done, m.reading = true, *r
	case errors.Is(err, quantity.ErrOverRange):
		m.done, m.err = true, &asked.OverRangeError{Name: m.line.Name(), Text: fmt.Sprintf("%q", r.Received())}
	default:
		m.garbled = append(m.garbled, fmt.Sprintf("%q", r.Received()))
		if len(m.garbled) == mostGarbled {
			m.done, m.err = true, &asked.GarbledError{Name: m.line.Name(), Question: "a reading that comes by itself", Texts: m.garbled, Err: err}
		}
	}
	return nil
}

// Read waits for the next reading that begins after the call.
func (m *Manometer) Read(ctx context.Context) (bench.Reading, error) {
	m.begun, m.done = false, false
	m.reading, m.garbled, m.err = bench.Reading{}, nil, nil
	err := m.line.Await(ctx, "no reading came by itself", m.s.Within, func() bool { return m.done })
	m.done = true
	if err == nil {
		err = m.err
	}
	if err != nil {
		return bench.Reading{}, err
	}
	return m.reading, nil
}

// Identify: who sends by itself cannot be asked.
func (m *Manometer) Identify(context.Context) (string, error) {
	return "", fmt.Errorf("identify %s: %w", m.line.Name(), bench.ErrNotStated)
}

// Uptime: nor for how long it has been on.
func (m *Manometer) Uptime(context.Context) (time.Duration, error) {
	return 0, fmt.Errorf("uptime of %s: %w", m.line.Name(), bench.ErrNotStated)
}

// Zero sends the command that makes the instrument take the present pressure
// for zero; it answers nothing.
func (m *Manometer) Zero(ctx context.Context) error {
	if m.s.Zero == "" {
		return fmt.Errorf("zero %s: %w", m.line.Name(), bench.ErrNotStated)
	}
	return m.line.Send(ctx, m.s.Zero, m.s.Within)
}

var _ bench.Manometer = (*Manometer)(nil)
