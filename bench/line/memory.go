package line

import (
	"container/heap"
	"context"
	"slices"
	"time"
)

// Memory is the Inbox of a run in virtual time: an event heap ordered by
// (instant, sequence), without goroutines, driving simulated machines. The
// same calls give the same events. It belongs to one goroutine.
type Memory struct {
	now      Instant
	start    time.Time
	queue    eventHeap
	sequence int64
	writes   int64
	wires    []*wire // in the order of Connect, which breaks ties
}

// MemoryOptions of one port; the zero value is a wire without delay.
type MemoryOptions struct {
	// Transit is the time from Send until the machine has the bytes.
	Transit time.Duration
}

type wire struct {
	port    PortID
	machine Machine
	transit time.Duration
}

// NewMemory makes an inbox whose instant 0 is start on the wall clock.
func NewMemory(start time.Time) *Memory { return &Memory{start: start} }

// Connect puts a machine at the far end of a port, in place of an earlier one.
func (m *Memory) Connect(port PortID, machine Machine, o MemoryOptions) {
	w := m.wire(port)
	if w == nil {
		w = &wire{port: port}
		m.wires = append(m.wires, w)
	}
	w.machine, w.transit = machine, max(o.Transit, 0)
}

func (m *Memory) wire(port PortID) *wire {
	for _, w := range m.wires {
		if w.port == port {
			return w
		}
	}
	return nil
}

// Now is the present virtual instant.
func (m *Memory) Now() Instant { return m.now }

// Wall is the virtual wall clock.
func (m *Memory) Wall() time.Time { return m.start.Add(time.Duration(m.now)) }

// Next lets virtual time pass to the next event, or to until. Of an event and
// a machine's output at one instant the event comes first.
func (m *Memory) Next(ctx context.Context, until Instant) (Event, error) {
	for {
		if err := ctx.Err(); err != nil {
			return Event{}, err
		}
		at, w := m.due()
		if len(m.queue) > 0 && (w == nil || m.queue[0].event.At <= at) {
			if m.queue[0].event.At > until {
				break
			}
			q := heap.Pop(&m.queue).(queued)
			m.now = max(m.now, q.event.At)
			if q.arrives != nil {
				q.arrives.Receive(m.now, q.event.Data)
				continue
			}
			return q.event, nil
		}
		if w == nil || at > until {
			break
		}
		m.now = max(m.now, at)
		data := w.machine.Emit(at)
		if l, ok := w.machine.(Leaving); ok && l.Left() {
			m.unplug(w)
		}
		if len(data) > 0 {
			return Event{At: m.now, Kind: KindBytes, Port: w.port, Data: data}, nil
		}
	}
	m.now = max(m.now, until)
	return Event{}, ErrDeadline
}

// Leaving is a machine that can be unplugged: after an Emit, Left says so, and
// the port is gone until it is connected again.
type Leaving interface {
	Machine
	Left() bool
}

// unplug takes a wire away and tells that its port is gone.
func (m *Memory) unplug(w *wire) {
	m.wires = slices.DeleteFunc(m.wires, func(x *wire) bool { return x == w })
	m.Post(0, Event{Kind: KindGone, Port: w.port, Err: ErrGone})
}

// due finds the wire whose machine puts out next.
func (m *Memory) due() (at Instant, first *wire) {
	for _, w := range m.wires {
		if t, ok := w.machine.Due(); ok && (first == nil || t < at) {
			at, first = t, w
		}
	}
	return at, first
}

// Send gives the bytes to the machine, after the wire's transit time; the
// write ends then.
func (m *Memory) Send(port PortID, data []byte) int64 {
	m.writes++
	written := Event{Kind: KindWritten, Port: port, Number: m.writes}
	w := m.wire(port)
	if w == nil {
		written.Err = ErrNoPort
		m.Post(0, written)
		return m.writes
	}
	data = append([]byte(nil), data...)
	takes := w.transit
	if b, ok := w.machine.(Blocking); ok {
		takes += b.Blocks(m.now)
	}
	if takes == 0 {
		w.machine.Receive(m.now, data)
	} else {
		m.push(takes, Event{Data: data}, w.machine)
	}
	m.Post(takes, written)
	return m.writes
}

// Blocking is a machine whose port may take nothing for a while.
type Blocking interface {
	Machine
	Blocks(at Instant) time.Duration
}

// Signal tells the machine of a modem line at once, if it has any.
func (m *Memory) Signal(port PortID, which ModemLine, on bool) int64 {
	m.writes++
	written := Event{Kind: KindWritten, Port: port, Number: m.writes, Err: ErrNoModemLines}
	w := m.wire(port)
	if w == nil {
		written.Err = ErrNoPort
	} else if s, ok := w.machine.(SignalMachine); ok {
		s.Signal(m.now, which, on)
		written.Err = nil
	}
	m.Post(0, written)
	return m.writes
}

// Post puts an event into the inbox after a delay of virtual time.
func (m *Memory) Post(delay time.Duration, e Event) { m.push(max(delay, 0), e, nil) }

func (m *Memory) push(delay time.Duration, e Event, arrives Machine) {
	e.At = m.now.Add(delay)
	m.sequence++
	heap.Push(&m.queue, queued{e, m.sequence, arrives})
}

type queued struct {
	event    Event
	sequence int64
	arrives  Machine // the event is bytes for it, and nobody else's
}

type eventHeap []queued

func (h eventHeap) Len() int { return len(h) }
func (h eventHeap) Less(i, j int) bool {
	if h[i].event.At != h[j].event.At {
		return h[i].event.At < h[j].event.At
	}
	return h[i].sequence < h[j].sequence
}
func (h eventHeap) Swap(i, j int) { h[i], h[j] = h[j], h[i] }
func (h *eventHeap) Push(x any)   { *h = append(*h, x.(queued)) }
func (h *eventHeap) Pop() any {
	old := *h
	last := old[len(old)-1]
	old[len(old)-1] = queued{}
	*h = old[:len(old)-1]
	return last
}
