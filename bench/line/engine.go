package line

import "context"

// Engine takes the events of an inbox one at a time and hands each to its
// handler. One goroutine uses it.
type Engine struct {
	inbox    Inbox
	handlers map[Kind]func(Event) error
}

// NewEngine makes an engine on an inbox.
func NewEngine(inbox Inbox) *Engine {
	return &Engine{inbox: inbox, handlers: map[Kind]func(Event) error{}}
}

// Handle names the handler of a kind of event, in place of an earlier one.
// Events of a kind without a handler are passed over.
func (e *Engine) Handle(k Kind, f func(Event) error) { e.handlers[k] = f }

// Wait takes events until done says so (it is asked first, and after every
// event), or until has come (ErrDeadline), or ctx ended, or a handler returned
// an error, which Wait returns.
func (e *Engine) Wait(ctx context.Context, until Instant, done func() bool) error {
	for !done() {
		event, err := e.inbox.Next(ctx, until)
		if err != nil {
			return err
		}
		if f := e.handlers[event.Kind]; f != nil {
			if err := f(event); err != nil {
				return err
			}
		}
	}
	return nil
}
