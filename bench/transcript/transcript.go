// Package transcript keeps what went over every port of a run, byte for byte
// with its time, its errors and its partial reads, and plays it back through
// the same drivers.
//
// It is no log for people, though people can read it, and it knows no
// instrument. What is kept is everything that an Inbox gave and was given, so
// that a run played back makes the same decisions at the same moments.
//
// Order of use: wrap a run's inbox with Keep, Close the Keeper at its end; later
// Read the file and give the Player to a run in place of an inbox.
package transcript

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"strconv"
	"time"

	"kymobench/bench/line"
)

// Schema is the first line of every transcript.
const Schema = "kymobench-transcript/1"

// The lines after it, each a letter and what belongs to it; instants are in
// nanoseconds since the start, bytes and texts are quoted as Go quotes them:
//
//	> PORT NUMBER BYTES      sent; the write has this number
//	l PORT NUMBER TEXT       a modem line was put "RTS on" or the like; a write too
//	w PORT NUMBER AT ERROR   that write ended
//	< PORT AT BYTES          arrived
//	! PORT AT ERROR          the port is gone
//	d PORT NUMBER AT ERROR   a record is durable up to a line
//	a AT TEXT, e AT          the operator's answer; the input ended
//	s AT, o PORT AT          asked to stop; events were lost
//	t AT                     nothing came until then
//	x TEXT                   the wait was called off
//	n AT, c WALL             the time was looked at; the wall clock was
//	p PORT ERROR             the port was opened, or not
//	m PORT NAME              where its adapter is now, as the system tells
const (
	letterSent    = '>'
	letterSignal  = 'l'
	letterWritten = 'w'
	letterBytes   = '<'
	letterGone    = '!'
	letterDurable = 'd'
	letterAnswer  = 'a'
	letterEnd     = 'e'
	letterStop    = 's'
	letterLost    = 'o'
	letterQuiet   = 't'
	letterCalled  = 'x'
	letterNow     = 'n'
	letterWall    = 'c'
	letterOpened  = 'p'
	letterMoved   = 'm'
)

// Keeper is an Inbox that keeps what passes through it. It belongs to the
// engine's goroutine but for Post, which only passes on.
type Keeper struct {
	inbox   line.Inbox
	w       *bufio.Writer
	text    []byte
	flushed line.Instant
	err     error
}

// Keep wraps an inbox; what passes is written to w.
func Keep(inbox line.Inbox, w io.Writer) *Keeper {
	k := &Keeper{inbox: inbox, w: bufio.NewWriterSize(w, 1<<16)}
	k.put([]byte(Schema + "\n"))
	return k
}

// Close writes what is left and returns the first error of writing: a
// transcript that could not be kept whole is not to be trusted.
func (k *Keeper) Close() error {
	if err := k.w.Flush(); k.err == nil {
		k.err = err
	}
	return k.err
}

func (k *Keeper) put(text []byte) {
	if _, err := k.w.Write(text); err != nil && k.err == nil {
		k.err = fmt.Errorf("write the transcript: %w", err)
	}
}

// begin starts a line; the functions after it add to it.
func (k *Keeper) begin(letter byte) *Keeper {
	k.text = append(k.text[:0], letter)
	return k
}

func (k *Keeper) number(n int64) *Keeper {
	k.text = strconv.AppendInt(append(k.text, ' '), n, 10)
	return k
}

func (k *Keeper) quoted(s string) *Keeper {
	k.text = strconv.AppendQuoteToASCII(append(k.text, ' '), s)
	return k
}

func (k *Keeper) fault(err error) *Keeper {
	if err == nil {
		return k
	}
	return k.quoted(err.Error())
}

func (k *Keeper) end() { k.put(append(k.text, '\n')) }

// Now is the inbox's.
func (k *Keeper) Now() line.Instant {
	now := k.inbox.Now()
	k.begin(letterNow).number(int64(now)).end()
	return now
}

// Wall is the inbox's.
func (k *Keeper) Wall() time.Time {
	wall := k.inbox.Wall()
	k.begin(letterWall).quoted(wall.Format(time.RFC3339Nano)).end()
	return wall
}

// Post is the inbox's; the event is kept when it is taken.
func (k *Keeper) Post(delay time.Duration, e line.Event) { k.inbox.Post(delay, e) }

// Send is the inbox's.
func (k *Keeper) Send(port line.PortID, data []byte) int64 {
	n := k.inbox.Send(port, data)
	k.begin(letterSent).number(int64(port)).number(n).quoted(string(data)).end()
	return n
}

// Signal is the inbox's.
func (k *Keeper) Signal(port line.PortID, which line.ModemLine, on bool) int64 {
	n := k.inbox.Signal(port, which, on)
	k.begin(letterSignal).number(int64(port)).number(n).quoted(stroke(which, on)).end()
	return n
}

// stroke words a change of a modem line.
func stroke(which line.ModemLine, on bool) string {
	if on {
		return which.String() + " on"
	}
	return which.String() + " off"
}

// Opened keeps that a port was opened, or why not.
func (k *Keeper) Opened(port line.PortID, err error) {
	k.begin(letterOpened).number(int64(port)).fault(err).end()
}

// Moved keeps where an adapter is now; "" when nobody knows.
func (k *Keeper) Moved(port line.PortID, name string) {
	k.begin(letterMoved).number(int64(port)).quoted(name).end()
}

// Next is the inbox's.
func (k *Keeper) Next(ctx context.Context, until line.Instant) (line.Event, error) {
	e, err := k.inbox.Next(ctx, until)
	switch {
	case errors.Is(err, line.ErrDeadline):
		k.begin(letterQuiet).number(int64(until)).end()
	case err != nil:
		k.begin(letterCalled).quoted(err.Error()).end()
	default:
		k.event(e)
	}
	if e.At-k.flushed > line.Instant(time.Second) {
		k.flushed = e.At
		if err := k.w.Flush(); err != nil && k.err == nil {
			k.err = fmt.Errorf("write the transcript: %w", err)
		}
	}
	return e, err
}

func (k *Keeper) event(e line.Event) {
	at, port := int64(e.At), int64(e.Port)
	switch e.Kind {
	case line.KindBytes:
		k.begin(letterBytes).number(port).number(at).quoted(string(e.Data)).end()
	case line.KindGone:
		k.begin(letterGone).number(port).number(at).fault(e.Err).end()
	case line.KindWritten:
		k.begin(letterWritten).number(port).number(e.Number).number(at).fault(e.Err).end()
	case line.KindDurable:
		k.begin(letterDurable).number(port).number(e.Number).number(at).fault(e.Err).end()
	case line.KindAnswer:
		k.begin(letterAnswer).number(at).quoted(e.Text).end()
	case line.KindAnswerEnd:
		k.begin(letterEnd).number(at).end()
	case line.KindStop:
		k.begin(letterStop).number(at).end()
	case line.KindOverflow:
		k.begin(letterLost).number(port).number(at).fault(e.Err).end()
	}
}
