package line

import (
	"context"
	"errors"
)

// ErrInside is what a wait ends with that was begun inside a handler or a
// frame's callback: the engine is in the middle of an event there.
var ErrInside = errors.New("a wait was begun while an event is being handled")

// Engine takes the events of an inbox one at a time: bytes go to the Line of
// their port, other events to the handler of their kind. One goroutine uses
// it, and everything that hangs on it.
type Engine struct {
	inbox    Inbox
	handlers [KindOverflow + 1]func(Event) error
	lines    map[PortID]*Line
	inside   bool
}

// NewEngine makes an engine on an inbox.
func NewEngine(inbox Inbox) *Engine {
	return &Engine{inbox: inbox, lines: map[PortID]*Line{}}
}

// Now is the inbox's present instant.
func (e *Engine) Now() Instant { return e.inbox.Now() }

// Handle names the handler of a kind of event, in place of an earlier one.
// Events of a kind without a handler are passed over. Bytes of a port with an
// open Line never reach a handler. A handler must not wait.
func (e *Engine) Handle(k Kind, f func(Event) error) { e.handlers[k] = f }

// Wait takes events until done says so, and returns nil then; done is asked
// first, and after every event. Otherwise it returns ErrDeadline when until
// has come, ctx's error when ctx ended, or the first error that a handler or a
// frame's callback returned; that event has been handled to its end all the
// same, and waiting may go on with another Wait.
func (e *Engine) Wait(ctx context.Context, until Instant, done func() bool) error {
	if e.inside {
		return ErrInside
	}
	for !done() {
		event, err := e.inbox.Next(ctx, until)
		if err != nil {
			return err
		}
		e.inside = true
		err = e.handle(event)
		e.inside = false
		if err != nil {
			return err
		}
	}
	return nil
}

func (e *Engine) handle(event Event) error {
	l := e.lines[event.Port]
	switch event.Kind {
	case KindBytes:
		if l != nil {
			return l.take(event)
		}
	case KindWritten:
		if l != nil {
			l.wrote(event)
		}
	case KindGone:
		if l != nil {
			l.leave(event.Err)
		}
	case KindOverflow:
		// Any line may have a hole in it now.
		for _, l := range e.lines {
			l.lose()
		}
	}
	if f := e.handlers[event.Kind]; f != nil {
		return f(event)
	}
	return nil
}
