// Package record is the run record: the append-only, hash-chained file of one
// run, in which everything read, decided and typed stands in the order in
// which the engine took it.
//
// It is not a judge and not a log: it computes no result, and what is not in
// it did not happen. The chain shows that lines belong together and in which
// order they were written; it does not show who wrote them. Somebody who makes
// the whole chain anew, or cuts the record at the end of a line, is found out
// by the signed head (run id, lines, bytes, hash) and by nothing in this file.
//
// Order of use: Create a Writer with a Committer, Append the opening line and
// wait until it is durable, Append as the run goes and tell the Writer with
// Taken of every durable event the engine takes, Close. Afterwards Read the
// record and Decode its events. A record left open by a crash is taken up
// with Recover and Reopen.
//
// The format, one line an event:
//
//	body TAB hex64 LF
//	body  = {"n":1,"d":0,"t":0,"w":"2026-01-02T03:04:05.000000000Z","k":"opened","v":{...}}
//	hex64 = SHA-256(hex64 of the line before || body), in lower-case hexadecimal
//	start = SHA-256("kymobench-record/1\n" || run id)
//
// n is the line's number from 1, d the highest line that the engine knew to be
// durable when the line was made, t the run's own clock in nanoseconds, w the
// wall clock, k the kind and v the payload. The body is canonical JSON: keys
// in the order of the Go structs, no white space, nothing escaped that need
// not be, the shortest decimals that give the same floating-point number.
package record

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"kymobench/bench/line"
)

// Event is one line of a record.
type Event struct {
	Line    int64           // n: its number, from 1
	Durable int64           // d: the highest line known to be durable when it was made
	At      line.Instant    // t: on the run's own clock, which starts again when a run is resumed
	Wall    time.Time       // w: on the wall clock, in UTC
	Kind    string          // k: one of the Kind constants
	Payload json.RawMessage // v: the payload, canonical
}

// Head names one state of a record: what is signed when it is closed.
type Head struct {
	Run   string // the run id
	Lines int64
	Bytes int64
	Hash  string // of the last line, 64 hexadecimal digits
}

// Errors on which a caller decides.
var (
	// ErrNotClosed: the record ends without its closing line.
	ErrNotClosed = errors.New("record is not closed")
	// ErrClosed: the record is closed; it is never repaired nor written to.
	ErrClosed = errors.New("record is closed")
	// ErrTorn: bytes follow the last good line and no later line shows that
	// they were durable. Recover sets them aside.
	ErrTorn = errors.New("record has a torn tail")
	// ErrNoOpening: the first line is not whole, so nothing was acknowledged.
	ErrNoOpening = errors.New("record has no opening line")
	// ErrInUse: another process writes the record.
	ErrInUse = errors.New("record is being written by another process")
	// ErrEnded: the writer was closed or left before.
	ErrEnded = errors.New("record writer has ended")
	// ErrBehind: so much waits for the disk that nothing more is taken.
	ErrBehind = errors.New("disk is too far behind")
	// ErrPayload: a payload is not what its kind says.
	ErrPayload = errors.New("payload does not match its kind")
)

// ChainError says where a record is damaged: lines that were durable are not
// there as they were written, or a line is chained that no writer makes.
type ChainError struct {
	Line   int64 // the first line that is not good, from 1
	Offset int64 // of that line's first byte in the file, from 0
	Why    string
}

func (e *ChainError) Error() string {
	return fmt.Sprintf("record is damaged at line %d, byte %d: %s", e.Line, e.Offset, e.Why)
}

// Decode returns an event's payload as T. It is strict: an unknown key, a key
// in another case or order and a missing key are all refused, because T
// encoded again must give the payload's own bytes. A field that is added to a
// payload type later must therefore be one that is left out when it is zero,
// or records made before it could not be read any more.
func Decode[T any](e Event) (T, error) {
	var v, zero T
	d := json.NewDecoder(bytes.NewReader(e.Payload))
	d.DisallowUnknownFields()
	if err := d.Decode(&v); err != nil {
		return zero, fmt.Errorf("line %d, %s: %w: %v", e.Line, e.Kind, ErrPayload, err)
	}
	again, err := encodePayload(v)
	if err != nil {
		return zero, fmt.Errorf("line %d, %s: %w: %v", e.Line, e.Kind, ErrPayload, err)
	}
	if !bytes.Equal(again, e.Payload) {
		return zero, fmt.Errorf("line %d, %s: %w: encoded again it differs", e.Line, e.Kind, ErrPayload)
	}
	return v, nil
}

// NewEvent makes an event that stands in no record, for data that come from
// elsewhere; its payload is encoded as a record's would be.
func NewEvent(number int64, at line.Instant, kind string, payload any) (Event, error) {
	encoded, err := encodePayload(payload)
	if err != nil {
		return Event{}, fmt.Errorf("%s: %w", kind, err)
	}
	return Event{Line: number, At: at, Kind: kind, Payload: encoded}, nil
}
