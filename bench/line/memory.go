package line

import (
	"container/heap"
	"context"
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
	ports    []PortID // in the order of Connect, which breaks ties
	machines map[PortID]Machine
}

// NewMemory makes an inbox whose instant 0 is start on the wall clock.
func NewMemory(start time.Time) *Memory {
	return &Memory{start: start, machines: map[PortID]Machine{}}
}

// Connect puts a machine at the far end of a port.
func (m *Memory) Connect(port PortID, machine Machine) {
	if _, there := m.machines[port]; !there {
		m.ports = append(m.ports, port)
	}
	m.machines[port] = machine
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
		at, port, machine := m.due()
		if len(m.queue) > 0 && (machine == nil || m.queue[0].event.At <= at) {
			if m.queue[0].event.At > until {
				break
			}
			e := heap.Pop(&m.queue).(queued).event
			m.now = max(m.now, e.At)
			return e, nil
		}
		if machine == nil || at > until {
			break
		}
		m.now = max(m.now, at)
		if data := machine.Emit(at); len(data) > 0 {
			return Event{At: m.now, Kind: KindBytes, Port: port, Data: data}, nil
		}
	}
	m.now = max(m.now, until)
	return Event{}, ErrDeadline
}

// due finds the machine whose output comes next.
func (m *Memory) due() (at Instant, port PortID, machine Machine) {
	for _, p := range m.ports {
		if t, ok := m.machines[p].Due(); ok && (machine == nil || t < at) {
			at, port, machine = t, p, m.machines[p]
		}
	}
	return at, port, machine
}

// Send gives the bytes to the machine at once.
func (m *Memory) Send(port PortID, data []byte) int64 {
	m.writes++
	e := Event{Kind: KindWritten, Port: port, Number: m.writes}
	if machine, ok := m.machines[port]; ok {
		machine.Receive(m.now, append([]byte(nil), data...))
	} else {
		e.Err = ErrNoPort
	}
	m.Post(0, e)
	return m.writes
}

// Post puts an event into the inbox after a delay of virtual time.
func (m *Memory) Post(delay time.Duration, e Event) {
	e.At = m.now.Add(max(delay, 0))
	m.sequence++
	heap.Push(&m.queue, queued{e, m.sequence})
}

type queued struct {
	event    Event
	sequence int64
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
