package line

import (
	"context"
	"errors"
	"testing"
	"time"
)

// echo answers every message a fixed time later.
type echo struct {
	after time.Duration
	out   []Event
}

func (m *echo) Receive(at Instant, data []byte) {
	m.out = append(m.out, Event{At: at.Add(m.after), Data: data})
}

func (m *echo) Due() (Instant, bool) {
	if len(m.out) == 0 {
		return 0, false
	}
	return m.out[0].At, true
}

func (m *echo) Emit(Instant) []byte {
	data := m.out[0].Data
	m.out = m.out[1:]
	return data
}

func TestMemoryOrderAndDeadline(t *testing.T) {
	m := NewMemory(time.Date(2026, 1, 1, 0, 0, 0, 0, time.UTC))
	m.Connect(1, &echo{after: 30 * time.Millisecond}, MemoryOptions{})
	ctx := context.Background()
	m.Post(20*time.Millisecond, Event{Kind: KindAnswer, Text: "second"})
	m.Post(20*time.Millisecond, Event{Kind: KindAnswer, Text: "third"})
	number := m.Send(1, []byte("hello\n"))
	want := []struct {
		kind Kind
		at   time.Duration
		text string
	}{
		{KindWritten, 0, ""}, {KindAnswer, 20 * time.Millisecond, "second"},
		{KindAnswer, 20 * time.Millisecond, "third"}, {KindBytes, 30 * time.Millisecond, "hello\n"},
	}
	for i, w := range want {
		e, err := m.Next(ctx, Instant(time.Second))
		if err != nil || e.Kind != w.kind || e.At != Instant(w.at) || e.Text+string(e.Data) != w.text {
			t.Fatalf("event %d: %+v, %v", i, e, err)
		}
		if w.kind == KindWritten && (e.Number != number || e.Err != nil) {
			t.Errorf("write %d reported as %d, %v", number, e.Number, e.Err)
		}
	}
	if e, err := m.Next(ctx, Instant(time.Second)); !errors.Is(err, ErrDeadline) || m.Now() != Instant(time.Second) {
		t.Errorf("nothing was to come: %+v, %v at %v", e, err, m.Now())
	}
	if got := m.Wall(); !got.Equal(time.Date(2026, 1, 1, 0, 0, 1, 0, time.UTC)) {
		t.Errorf("wall clock %v", got)
	}
}

func TestMemoryRefusals(t *testing.T) {
	m := NewMemory(time.Time{})
	m.Send(9, []byte("x"))
	if e, err := m.Next(context.Background(), 0); err != nil || !errors.Is(e.Err, ErrNoPort) {
		t.Errorf("write to no port: %+v, %v", e, err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	m.Post(0, Event{Kind: KindAnswer})
	if e, err := m.Next(ctx, 0); !errors.Is(err, context.Canceled) || e.Kind != KindNone {
		t.Errorf("cancelled: %+v, %v", e, err)
	}
}

// At one instant a posted event comes before a machine's output, which may
// then know of it; and a caller may use its bytes again after Send.
func TestMemoryOneInstant(t *testing.T) {
	m := NewMemory(time.Time{})
	m.Connect(1, &echo{after: ms}, MemoryOptions{Transit: ms})
	mine := []byte("hello")
	m.Send(1, mine)
	copy(mine, "spoil")
	m.Post(2*ms, Event{Kind: KindAnswer})
	for i, want := range []Kind{KindWritten, KindAnswer, KindBytes} {
		e, err := m.Next(context.Background(), Instant(time.Second))
		if err != nil || e.Kind != want || e.Kind == KindBytes && string(e.Data) != "hello" {
			t.Errorf("event %d: %+v, %v", i, e, err)
		}
	}
}
