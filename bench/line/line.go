// Package line carries bytes between the program and its instruments, and is
// the only place in Kymobench where anything waits.
//
// It is not a driver: it knows frames (lines of text ended by a terminator),
// never what they mean. It opens no port; serialport and simulated do.
//
// Order of use: make an Inbox (Memory for a run in virtual time, Real for
// ports of this machine), connect each port to it, make one Engine on the
// inbox, open a Line per port on the engine, and let one goroutine, the
// engine's, ask, send and wait.
package line

import (
	"context"
	"errors"
	"strconv"
	"time"
)

// Instant is a moment on the run's own monotonic clock, in nanoseconds since
// the inbox was made. In memory it is virtual time.
type Instant int64

// Add returns the instant d later.
func (i Instant) Add(d time.Duration) Instant { return i + Instant(d) }

// Sub returns the time from j to i.
func (i Instant) Sub(j Instant) time.Duration { return time.Duration(i - j) }

// Seconds returns the instant as seconds since the start.
func (i Instant) Seconds() float64 { return float64(i) / 1e9 }

// String gives seconds with microseconds, as in "12.345678 s".
func (i Instant) String() string {
	return strconv.FormatFloat(i.Seconds(), 'f', 6, 64) + " s"
}

// PortID names one port of an inbox; the caller chooses it (0, 1, 2 ...).
type PortID int

// Kind says what an Event is.
type Kind uint8

const (
	// KindNone is the zero Kind: no event.
	KindNone Kind = iota
	// KindBytes: bytes arrived on Port.
	KindBytes
	// KindGone: Port is gone, Err says why. It comes once for each connection.
	KindGone
	// KindWritten: the write numbered Number on Port ended, Err if it went wrong.
	KindWritten
	// KindDurable: the record is durable up to and including line Number, or
	// Err says why it never will be.
	KindDurable
	// KindAnswer: the operator's line of Text.
	KindAnswer
	// KindAnswerEnd: the operator's input ended.
	KindAnswerEnd
	// KindStop: the process was asked to stop (^C, a closed console).
	KindStop
	// KindOverflow: an inbox that is full lost events; a fault that vents.
	KindOverflow
)

// Event is one thing that happened, with the instant it was posted.
type Event struct {
	At     Instant
	Kind   Kind
	Port   PortID
	Data   []byte
	Number int64
	Text   string
	Err    error
}

// ErrDeadline is what a wait ends with when its instant came first.
var ErrDeadline = errors.New("no answer in time")

// ErrNoPort is how a write to a port ends that was never connected.
var ErrNoPort = errors.New("no such port")

// Inbox is where every event waits until the engine takes it.
type Inbox interface {
	// Now is the present instant.
	Now() Instant
	// Wall is the wall-clock time that belongs to Now; virtual in memory.
	Wall() time.Time
	// Next returns the next event posted at or before until; ErrDeadline when
	// until has come without one; ctx's error when ctx ended first. It never
	// returns an event and an error, nor neither.
	Next(ctx context.Context, until Instant) (Event, error)
	// Send starts writing data on a connected port and returns the number of
	// the write; a KindWritten event with that number follows.
	Send(port PortID, data []byte) int64
	// Signal puts a modem line of a connected port on or off; it counts as a
	// write, which ends with ErrNoModemLines where there are none.
	Signal(port PortID, which ModemLine, on bool) int64
	// Post puts an event of another source (committer, operator, signal) into
	// the inbox after delay; it never blocks. A real inbox takes only delay 0.
	Post(delay time.Duration, e Event)
}

// SignalMachine is a Machine that also sees the port's modem lines.
type SignalMachine interface {
	Machine
	// Signal tells of a modem line that the program has put on or off.
	Signal(at Instant, which ModemLine, on bool)
}

// Machine is a simulated instrument at the far end of a port: a state machine
// without a goroutine, driven by the Memory inbox or by a pseudo-terminal's
// pump. Instants never go backwards.
type Machine interface {
	// Receive takes bytes sent by the program at an instant.
	Receive(at Instant, data []byte)
	// Due tells the instant of the machine's next output, and whether there is one.
	Due() (Instant, bool)
	// Emit returns the bytes put out at an instant that Due named; it may
	// return none. The bytes are the caller's.
	Emit(at Instant) []byte
}
