// Package bench says what a hospital test bench is: the set of instruments
// with which a unit under test is measured. (Go benchmarks are elsewhere, in
// the _test.go file of their topic.)
//
// It is not a driver and not a simulation; instruments and simulated are. It
// judges nothing and keeps nothing; procedures does.
//
// Order of use: setup.Open makes a Rig from a bench file; run takes readings
// from it; Close ends it.
package bench

import (
	"context"
	"errors"
	"time"

	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// Reading is one number as an instrument sent it, with its text as received.
type Reading struct {
	Sent  line.Instant // when the question left; At for a free-running instrument
	At    line.Instant // when the last byte of the answer was taken
	Text  string       // the line as received, without its terminator
	Frame string       // the bytes as received, of a frame that is no text
	Value quantity.Value
	// Sequence counts the readings as the instrument does, on over the wraps of
	// its own number, so that what is missing between two readings is known. It
	// may begin anywhere. HasSequence says that the instrument counts.
	Sequence    uint64
	HasSequence bool
}

// Middle is the instant half way between question and answer, the best single
// stamp of an asked reading.
func (r Reading) Middle() line.Instant { return r.Sent + (r.At-r.Sent)/2 }

// Received is what was received as a record keeps it: the text, or the bytes of
// a frame in hexadecimal digits.
func (r Reading) Received() string {
	if r.Frame == "" {
		return r.Text
	}
	return string(quantity.AppendText(nil, []byte(r.Frame)))
}

// ErrNotStated: the bench file states no question or command for what was
// asked of an instrument.
var ErrNotStated = errors.New("the bench file states no way to ask for it")

// Refusal is the error of an instrument that understood that it was told
// something, and did not do it; Refused gives what it had against it.
type Refusal interface {
	error
	Refused() []string
}

// Identified is an instrument that can say who it is.
type Identified interface {
	// Identify asks for the identity and refuses one that is not expected.
	Identify(ctx context.Context) (string, error)
	// Uptime asks how long the instrument has been switched on; ErrNotStated
	// when it cannot be asked.
	Uptime(ctx context.Context) (time.Duration, error)
}

// Manometer is an instrument that answers with one reading when asked.
type Manometer interface {
	Identified
	Read(ctx context.Context) (Reading, error)
	// Zero makes the instrument take the present pressure for zero.
	Zero(ctx context.Context) error
}

// Streaming is an instrument that sends readings by itself.
type Streaming interface {
	// Watch hands every reading to take, in the order of arrival, from now on;
	// an error of take ends the engine's present wait. A frame that is not a
	// number is handed over with its text and err set. The reading is take's
	// until it returns; what is kept is copied.
	Watch(take func(r *Reading, err error) error)
}

// PressureSource makes pressure.
type PressureSource interface {
	Identified
	// Set asks for a pressure; the reference tells when it is there.
	Set(ctx context.Context, p quantity.Pressure) error
	// Hold shuts the source off from the volume, which keeps its pressure.
	Hold(ctx context.Context) error
	// Vent opens the volume to atmosphere.
	Vent(ctx context.Context) error
}

// Valve makes the step.
type Valve interface {
	Identified
	// Release opens the fast valve: the pressure at the UUT falls to atmosphere.
	Release(ctx context.Context) error
	// Shut closes it again.
	Shut(ctx context.Context) error
}

// UUT is how one unit under test of a rig is read.
type UUT struct {
	Name    string     // of its place on the manifold, "" when it is the only one
	Stream  Streaming  // nil when it does not send by itself
	Asked   Manometer  // nil when it is not asked
	Applied Streaming  // the applied pressure on the same converter clock; nil when it is not measured
	Readout Identified // who turns the bridge into numbers; nil when it cannot be asked
}

// Rig is the set of instruments of one run.
type Rig struct {
	Engine    *line.Engine
	Inbox     line.Inbox
	Reference Manometer
	UUTs      []UUT
	Source    PressureSource
	Valve     Valve
	// Role names the instrument on a port as the operator knows it, and says
	// which UUT's it is: an index of UUTs, or -1 for an instrument of all.
	Role func(line.PortID) (role string, uut int)
	// Reconnect opens a port that is gone once more, under its name or, when
	// one is given, under another. Who answers there must be asked again.
	Reconnect func(id line.PortID, name string) error
	// Moved names the port where an instrument that is gone is now, as far as
	// the system tells; false when it does not.
	Moved func(line.PortID) (name string, ok bool)
	// EmergencyVent writes the vent commands of source and valve at once, on
	// every port, without waiting for answers or for the record.
	EmergencyVent func()
	// Close ends the ports.
	Close func() error
}
