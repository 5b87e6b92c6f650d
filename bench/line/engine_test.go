package line

import (
	"context"
	"errors"
	"testing"
	"time"
)

func TestEngineWait(t *testing.T) {
	m := NewMemory(time.Time{})
	e := NewEngine(m)
	var got []string
	e.Handle(KindAnswer, func(ev Event) error { got = append(got, ev.Text); return nil })
	stopped := errors.New("stopped")
	e.Handle(KindStop, func(Event) error { return stopped })
	m.Post(time.Second, Event{Kind: KindAnswer, Text: "yes"})
	m.Post(2*time.Second, Event{Kind: KindStop})
	ctx := context.Background()
	if err := e.Wait(ctx, Instant(5*time.Second), func() bool { return len(got) == 1 }); err != nil || m.Now() != Instant(time.Second) {
		t.Errorf("answer: %v at %v, %q", err, m.Now(), got)
	}
	if err := e.Wait(ctx, Instant(1500*time.Millisecond), func() bool { return false }); !errors.Is(err, ErrDeadline) {
		t.Errorf("deadline: %v", err)
	}
	if err := e.Wait(ctx, Instant(5*time.Second), func() bool { return false }); !errors.Is(err, stopped) {
		t.Errorf("a handler's error: %v", err)
	}
}
