package line

import (
	"bytes"
	"context"
	"errors"
	"io"
	"strings"
	"sync"
	"testing"
	"testing/synctest"
	"time"
)

// cable is a Port whose far end is the test.
type cable struct {
	in     chan []byte   // to the program
	block  chan struct{} // a Write waits until it is closed; nil: none waits
	closed chan struct{}
	once   sync.Once

	mu     sync.Mutex
	out    bytes.Buffer // from the program
	closes int
}

func newCable() *cable { return &cable{in: make(chan []byte, 16), closed: make(chan struct{})} }

func (c *cable) Read(p []byte) (int, error) {
	select {
	case data, ok := <-c.in:
		if !ok {
			return 0, io.ErrUnexpectedEOF
		}
		return copy(p, data), nil
	case <-c.closed:
		return 0, io.ErrClosedPipe
	case <-time.After(20 * time.Millisecond):
		return 0, nil
	}
}

func (c *cable) Write(p []byte) (int, error) {
	if c.block != nil {
		<-c.block
	}
	n := min(len(p), 5) // a port may take less than it is given
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.out.Write(p[:n])
}

func (c *cable) Close() error {
	c.mu.Lock()
	c.closes++
	c.mu.Unlock()
	c.once.Do(func() { close(c.closed) })
	return nil
}

func (c *cable) written() string {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.out.String()
}

func next(t *testing.T, r *Real, within time.Duration) Event {
	t.Helper()
	e, err := r.Next(context.Background(), r.Now().Add(within))
	if err != nil {
		t.Fatalf("no event: %v", err)
	}
	return e
}

func closed(t *testing.T, r *Real) {
	t.Helper()
	if err := errors.Join(r.Close(), r.Close()); err != nil {
		t.Error(err)
	}
	for {
		e, err := r.Next(context.Background(), r.Now())
		if err != nil {
			return
		}
		if e.Kind == KindGone {
			t.Errorf("a port that was closed is told to be gone: %+v", e)
		}
	}
}

func TestRealAsk(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r, c := NewReal(), newCable()
		defer closed(t, r)
		if err := r.Attach(3, c); err != nil {
			t.Fatal(err)
		}
		l := NewEngine(r).Open(3, Settings{Name: "gauge"})
		go func() {
			time.Sleep(300 * time.Millisecond)
			c.in <- []byte("+1.5")
			time.Sleep(100 * time.Millisecond)
			c.in <- []byte("0\r\n")
		}()
		a, err := l.Ask(context.Background(), "MEAS:PRES?", time.Second)
		if want := (Answer{Text: "+1.50", Sent: 0, At: Instant(400 * ms)}); err != nil || a != want {
			t.Errorf("%+v, %v, want %+v", a, err, want)
		}
		if got := c.written(); got != "MEAS:PRES?\n" {
			t.Errorf("written %q", got)
		}
		begun := r.Now()
		if _, err := l.Ask(context.Background(), "MEAS:PRES?", time.Second); !errors.Is(err, ErrDeadline) || r.Now().Sub(begun) != time.Second {
			t.Errorf("%v after %v", err, r.Now().Sub(begun))
		}
	})
}

func TestRealNext(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r := NewReal()
		defer closed(t, r)
		ctx, cancel := context.WithCancel(context.Background())
		r.Post(0, Event{Kind: KindAnswer, Text: "in time"})
		time.Sleep(time.Second)
		r.Post(0, Event{Kind: KindAnswer, Text: "too late"})
		time.Sleep(time.Second)
		if e, err := r.Next(ctx, Instant(500*ms)); err != nil || e.Text != "in time" || e.At != 0 {
			t.Errorf("%+v, %v", e, err)
		}
		if e, err := r.Next(ctx, Instant(500*ms)); !errors.Is(err, ErrDeadline) || e.Kind != KindNone {
			t.Errorf("an event after the deadline was taken: %+v, %v", e, err)
		}
		if e := next(t, r, 0); e.Text != "too late" || e.At != Instant(time.Second) {
			t.Errorf("%+v", e)
		}
		go func() { time.Sleep(70 * ms); cancel() }()
		if _, err := r.Next(ctx, Instant(time.Hour)); !errors.Is(err, context.Canceled) || r.Now() != Instant(2070*ms) {
			t.Errorf("%v at %v", err, r.Now())
		}
		r.Post(0, Event{Kind: KindStop})
		if _, err := r.Next(ctx, Instant(time.Hour)); !errors.Is(err, context.Canceled) {
			t.Errorf("cancelled, and an event: %v", err)
		}
	})
}

// Everything posted by many goroutines is taken once, in the order of its
// stamps, each poster's events in its own order.
func TestRealPosters(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r := NewReal()
		defer closed(t, r)
		const posters, each = 8, 1500
		for p := range posters {
			go func() {
				for n := range each {
					r.Post(0, Event{Kind: KindDurable, Port: PortID(p), Number: int64(n)})
					if n%100 == p {
						time.Sleep(time.Duration(p) * ms)
					}
				}
			}()
		}
		var last Instant
		var numbers [posters]int64
		for range posters * each {
			e := next(t, r, time.Second)
			if e.At < last || e.Number != numbers[e.Port] {
				t.Fatalf("%+v after %v, number %d expected", e, last, numbers[e.Port])
			}
			last, numbers[e.Port] = e.At, e.Number+1
		}
		if e, err := r.Next(context.Background(), r.Now().Add(time.Second)); !errors.Is(err, ErrDeadline) {
			t.Errorf("one more: %+v, %v", e, err)
		}
	})
}

func TestRealOverflow(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r := NewReal()
		defer closed(t, r)
		for round := range 2 {
			for range mostEvents + 10 {
				r.Post(0, Event{Kind: KindBytes, Data: []byte("x")})
			}
			r.Post(0, Event{Kind: KindStop})
			for range mostEvents {
				if e := next(t, r, 0); e.Kind != KindBytes {
					t.Fatalf("round %d: %+v", round, e)
				}
			}
			if e := next(t, r, 0); e.Kind != KindOverflow || e.Err == nil {
				t.Fatalf("round %d: %+v", round, e)
			}
			if e := next(t, r, 0); e.Kind != KindStop {
				t.Fatalf("round %d: the stop was lost: %+v", round, e)
			}
			if e, err := r.Next(context.Background(), r.Now()); !errors.Is(err, ErrDeadline) {
				t.Fatalf("round %d: %+v", round, e)
			}
		}
		r.Post(0, Event{Kind: KindBytes, Data: make([]byte, mostBytes)})
		r.Post(0, Event{Kind: KindBytes, Data: []byte("x")})
		if a, b := next(t, r, 0), next(t, r, 0); a.Kind != KindBytes || b.Kind != KindOverflow {
			t.Errorf("%v, %v", a.Kind, b.Kind)
		}
	})
}

func TestRealGone(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r, c := NewReal(), newCable()
		defer closed(t, r)
		if err := r.Attach(1, c); err != nil {
			t.Fatal(err)
		}
		if err := r.Attach(1, newCable()); !errors.Is(err, ErrAttached) {
			t.Errorf("attached twice: %v", err)
		}
		c.in <- []byte("last words\n")
		close(c.in)
		if e := next(t, r, time.Second); string(e.Data) != "last words\n" {
			t.Errorf("%+v", e)
		}
		if e := next(t, r, time.Second); e.Kind != KindGone || e.Port != 1 || !errors.Is(e.Err, ErrGone) || !errors.Is(e.Err, io.ErrUnexpectedEOF) {
			t.Errorf("%+v", e)
		}
		number := r.Send(1, []byte("hello"))
		if e := next(t, r, time.Second); e.Kind != KindWritten || e.Number != number || !errors.Is(e.Err, ErrGone) {
			t.Errorf("%+v", e)
		}
		synctest.Wait()
		if c.closes != 1 {
			t.Errorf("the lost port was closed %d times", c.closes)
		}
		again := newCable()
		if err := r.Attach(1, again); err != nil {
			t.Fatal(err)
		}
		number = r.Send(1, []byte("hello"))
		if e := next(t, r, time.Second); e.Kind != KindWritten || e.Number != number || e.Err != nil || again.written() != "hello" {
			t.Errorf("%+v, %q", e, again.written())
		}
		if e, err := r.Next(context.Background(), r.Now().Add(time.Second)); !errors.Is(err, ErrDeadline) {
			t.Errorf("told more than once: %+v", e)
		}
	})
}

// What waits to be written to a port that goes away is reported as not written.
func TestRealGoneWithWrites(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r, c := NewReal(), newCable()
		c.block = make(chan struct{})
		if err := r.Attach(1, c); err != nil {
			t.Fatal(err)
		}
		for range 20 {
			r.Send(1, []byte("x"))
		}
		close(c.in)
		if e := next(t, r, time.Second); e.Kind != KindGone {
			t.Errorf("%+v", e)
		}
		close(c.block)
		for n := range 20 {
			e := next(t, r, time.Second)
			if e.Kind != KindWritten || e.Number != int64(n+1) || n > 0 && !errors.Is(e.Err, ErrGone) {
				t.Errorf("%+v", e)
			}
		}
		closed(t, r)
	})
}

// Bytes wait in the inbox unchanged, and a caller may use its own again.
func TestRealCopies(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r, c := NewReal(), newCable()
		defer closed(t, r)
		if err := r.Attach(1, c); err != nil {
			t.Fatal(err)
		}
		c.in <- []byte("one")
		c.in <- []byte("two")
		synctest.Wait()
		if a, b := next(t, r, 0), next(t, r, 0); string(a.Data) != "one" || string(b.Data) != "two" {
			t.Errorf("%q, %q", a.Data, b.Data)
		}
		mine := []byte("three")
		r.Send(1, mine)
		copy(mine, "spoil")
		synctest.Wait()
		if c.written() != "three" {
			t.Errorf("%q", c.written())
		}
	})
}

// spinner is a port whose reads come back at once, as an unplugged one's may.
type spinner struct {
	*cable
	reads int
}

func (s *spinner) Read([]byte) (int, error) { s.reads++; return 0, nil }

func TestRealSpinning(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r, s := NewReal(), &spinner{cable: newCable()}
		defer closed(t, r)
		if err := r.Attach(1, s); err != nil {
			t.Fatal(err)
		}
		if e := next(t, r, time.Second); e.Kind != KindGone || !errors.Is(e.Err, ErrSpinning) {
			t.Errorf("%+v", e)
		}
		if s.reads != fastReads {
			t.Errorf("%d reads", s.reads)
		}
	})
}

// A port that does not take what is written holds up nobody: not Send, not
// another port, not Close; and what waits for the other port gets out.
func TestRealBlockedWrite(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r, stuck, valve := NewReal(), newCable(), newCable()
		stuck.block = make(chan struct{})
		for id, c := range []*cable{stuck, valve} {
			if err := r.Attach(PortID(id), c); err != nil {
				t.Fatal(err)
			}
		}
		e := NewEngine(r)
		source, other := e.Open(0, Settings{Name: "source"}), e.Open(1, Settings{Name: "valve"})
		ctx := context.Background()
		if err := source.Send(ctx, "SET 1", time.Second); !errors.Is(err, ErrDeadline) {
			t.Errorf("%v", err)
		}
		if err := other.Send(ctx, "OPEN", time.Second); err != nil {
			t.Errorf("%v", err)
		}
		for range waitingWrites {
			source.Fire("VENT")
		}
		if err := source.Send(ctx, "VENT", time.Second); !errors.Is(err, ErrCrowded) {
			t.Errorf("%v", err)
		}
		for range 20 {
			other.Fire("AGAIN")
		}
		begun := r.Now()
		if err := r.Close(); !errors.Is(err, ErrBlocked) {
			t.Errorf("%v", err)
		}
		if took := r.Now().Sub(begun); took != writesWithin+endsWithin {
			t.Errorf("closing took %v", took)
		}
		if got := valve.written(); got != "OPEN\n"+strings.Repeat("AGAIN\n", 20) {
			t.Errorf("the valve heard %q", got)
		}
		if stuck.closes != 1 || valve.closes != 1 {
			t.Errorf("closed %d and %d times", stuck.closes, valve.closes)
		}
		number := r.Send(1, []byte("x"))
		for {
			e := next(t, r, 0)
			if e.Kind == KindWritten && e.Number == number {
				if !errors.Is(e.Err, ErrClosed) {
					t.Errorf("%+v", e)
				}
				break
			}
		}
		if err := r.Attach(5, newCable()); !errors.Is(err, ErrClosed) {
			t.Errorf("attached to a closed inbox: %v", err)
		}
		close(stuck.block) // lets the goroutine left behind end
	})
}

// relay is a cable with modem lines.
type relay struct {
	*cable
	on map[ModemLine]bool
}

func (r relay) SetModemLine(which ModemLine, on bool) error {
	r.on[which] = on
	return nil
}

// A modem line is put on in its turn among the writes; a port without one says
// so.
func TestRealSignal(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		r := NewReal()
		defer closed(t, r)
		with := relay{newCable(), map[ModemLine]bool{}}
		if err := errors.Join(r.Attach(1, with), r.Attach(2, newCable())); err != nil {
			t.Fatal(err)
		}
		e := NewEngine(r)
		one, two := e.Open(1, Settings{Name: "valve"}), e.Open(2, Settings{Name: "valve on a pty"})
		ctx := context.Background()
		if err := one.Signal(ctx, RTS, true, time.Second); err != nil || !with.on[RTS] {
			t.Errorf("%v, %v", err, with.on)
		}
		err := two.Signal(ctx, DTR, true, time.Second)
		if !errors.Is(err, ErrNoModemLines) || !strings.HasPrefix(err.Error(), "write valve on a pty: it has no modem lines") {
			t.Error(err)
		}
		one.FireSignal(RTS, false)
		if err := one.Send(ctx, "x", time.Second); err != nil || with.on[RTS] || with.written() != "x\n" {
			t.Errorf("%v, %v, %q", err, with.on, with.written())
		}
	})
}
