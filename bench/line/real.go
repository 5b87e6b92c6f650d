package line

import (
	"context"
	"errors"
	"fmt"
	"sync"
	"time"
)

// Bounds of a Real inbox. A stream at 921600 baud comes to some hundred events
// and 92 kB a second, so that an engine may be held up for several seconds
// before anything is lost.
const (
	mostEvents = 1 << 14
	mostBytes  = 1 << 22
)

// Errors of a Real inbox, told in the KindWritten event or by Attach.
var (
	// ErrClosed: the inbox has been closed.
	ErrClosed = errors.New("the inbox is closed")
	// ErrCrowded: so many writes wait for the port that it must be blocked.
	ErrCrowded = errors.New("the port is blocked, too many writes are waiting")
	// ErrAttached: the port already has a live connection.
	ErrAttached = errors.New("the port is already attached")
	// ErrBlocked: a goroutine could not be brought back when the inbox closed.
	ErrBlocked = errors.New("still blocked, left behind")
)

// Real is the Inbox of ports of this machine, on the monotonic clock. Next
// belongs to the engine's goroutine; Post and Send may come from any.
type Real struct {
	start time.Time
	wake  chan struct{} // holds one token when something was posted
	timer *time.Timer   // Next's

	mu          sync.Mutex
	queue       []Event // from head on
	head        int
	bytes       int  // in the queue
	lost        bool // a KindOverflow lies in the queue
	writes      int64
	ports       map[PortID]*connection
	connections []*connection // all there ever were
	closed      bool
}

// NewReal makes an inbox whose instant 0 is now.
func NewReal() *Real {
	timer := time.NewTimer(time.Hour)
	timer.Stop()
	return &Real{start: time.Now(), wake: make(chan struct{}, 1), timer: timer, ports: map[PortID]*connection{}}
}

// Now is the time since the inbox was made, on the monotonic clock.
func (r *Real) Now() Instant { return Instant(time.Since(r.start)) }

// Wall is the system's wall clock.
func (r *Real) Wall() time.Time { return time.Now().Round(0) }

// Next waits for the next event. An event posted in time is returned even if
// until has passed meanwhile.
func (r *Real) Next(ctx context.Context, until Instant) (Event, error) {
	for {
		if err := ctx.Err(); err != nil {
			return Event{}, err
		}
		e, wait := r.look(until)
		if e.Kind != KindNone {
			return e, nil
		}
		if wait <= 0 {
			return Event{}, ErrDeadline
		}
		r.timer.Reset(wait)
		select {
		case <-r.wake:
		case <-r.timer.C:
		case <-ctx.Done():
		}
		r.timer.Stop()
	}
}

// look takes the first event posted at or before until, or tells how long to
// wait for one.
func (r *Real) look(until Instant) (Event, time.Duration) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.head == len(r.queue) {
		// Posting stamps under the lock: what comes after this is not earlier.
		return Event{}, until.Sub(r.Now())
	}
	e := r.queue[r.head]
	if e.At > until {
		return Event{}, 0
	}
	r.queue[r.head] = Event{}
	r.head++
	switch {
	case r.head == len(r.queue):
		r.queue, r.head = r.queue[:0], 0
	case r.head >= mostEvents:
		r.queue, r.head = r.queue[:copy(r.queue, r.queue[r.head:])], 0
	}
	r.bytes -= weight(e)
	if e.Kind == KindOverflow {
		r.lost = false
	}
	return e, 0
}

// Post puts an event into the inbox, stamped now; a delay is not kept. When
// the inbox is full, bytes and answers are lost and one KindOverflow stands in
// their place; other events are few by nature and always taken.
func (r *Real) Post(_ time.Duration, e Event) {
	r.mu.Lock()
	r.put(e)
	r.mu.Unlock()
}

// put is Post with the lock held.
func (r *Real) put(e Event) {
	if e.Kind == KindNone {
		return
	}
	full := len(r.queue)-r.head >= mostEvents || r.bytes+weight(e) > mostBytes
	if full && (e.Kind == KindBytes || e.Kind == KindAnswer) {
		if r.lost {
			return
		}
		r.lost = true
		e = Event{Kind: KindOverflow, Port: e.Port, Err: fmt.Errorf("%d events waited to be taken", len(r.queue)-r.head)}
	}
	e.At = r.Now()
	r.bytes += weight(e)
	r.queue = append(r.queue, e)
	select {
	case r.wake <- struct{}{}:
	default:
	}
}

func weight(e Event) int { return len(e.Data) + len(e.Text) }

// Send hands the bytes to the port's writer, which reports the end of the
// write; it never blocks.
func (r *Real) Send(port PortID, data []byte) int64 {
	return r.send(port, outgoing{data: append([]byte(nil), data...)})
}

// Signal puts a modem line on or off, in its turn among the writes.
func (r *Real) Signal(port PortID, which ModemLine, on bool) int64 {
	return r.send(port, outgoing{modem: which, on: on})
}

func (r *Real) send(port PortID, w outgoing) int64 {
	r.mu.Lock()
	defer r.mu.Unlock()
	r.writes++
	w.number = r.writes
	c, err := r.ports[port], error(nil)
	switch {
	case r.closed:
		err = ErrClosed
	case c == nil:
		err = ErrNoPort
	case c.ended:
		err = ErrGone
	default:
		select {
		case c.writes <- w:
		default:
			err = ErrCrowded
		}
	}
	if err != nil {
		r.put(Event{Kind: KindWritten, Port: port, Number: r.writes, Err: err})
	}
	return r.writes
}

// Attach connects a port, with one reader and one writer goroutine of its own,
// and owns it from then on, until it is gone or the inbox is closed. A port
// that is gone may be attached anew. On an error the caller still owns p.
func (r *Real) Attach(port PortID, p Port) error {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.closed {
		return ErrClosed
	}
	if c := r.ports[port]; c != nil && !c.ended {
		return ErrAttached
	}
	c := newConnection(r, port, p)
	r.ports[port] = c
	r.connections = append(r.connections, c)
	go c.read()
	go c.write()
	return nil
}

// How long Close waits: for writes under way, a vent command above all, to get
// out; and then for ports and goroutines to end.
const (
	writesWithin = 500 * time.Millisecond
	endsWithin   = 2 * time.Second
)

// Close lets writes that wait get out, closes every port and waits for the
// goroutines. A port whose Write or Close hangs is left behind after a while
// and told with ErrBlocked. Events already posted can still be taken.
func (r *Real) Close() error {
	r.mu.Lock()
	if r.closed {
		r.mu.Unlock()
		return nil
	}
	r.closed = true
	connections := r.connections
	r.mu.Unlock()
	for _, c := range connections {
		c.stop()
	}
	patience := time.NewTimer(writesWithin)
	defer patience.Stop()
	for _, c := range connections {
		if !within(patience, c.writeEnded) {
			break
		}
	}
	for _, c := range connections {
		go c.shut()
	}
	patience.Reset(endsWithin)
	var errs []error
	for _, c := range connections {
		ended := true
		for _, done := range []chan struct{}{c.shutEnded, c.readEnded, c.writeEnded} {
			ended = ended && within(patience, done)
		}
		switch {
		case !ended:
			errs = append(errs, fmt.Errorf("close port %d: %w", c.id, ErrBlocked))
			patience.Reset(0) // enough was waited; only look at the others
		case c.shutErr != nil:
			errs = append(errs, fmt.Errorf("close port %d: %w", c.id, c.shutErr))
		}
	}
	return errors.Join(errs...)
}

// within waits for done until the timer fires; done counts if both came.
func within(t *time.Timer, done chan struct{}) bool {
	select {
	case <-done:
		return true
	default:
	}
	select {
	case <-done:
		return true
	case <-t.C:
		t.Reset(0)
		return false
	}
}
