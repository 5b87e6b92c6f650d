package instrumenttest

import (
	"strings"
	"time"

	"kymobench/bench/line"
)

// farEnd is the instrument at the far end of the wire, with everything that can
// be wrong with it. A family that sends by itself sends every 50 ms.
type farEnd struct {
	f      Family
	me     []byte
	x      float64
	zeroed int

	silent  bool
	echoes  bool
	pieces  int             // answers come in pieces of as many bytes, 0 whole
	lates   []time.Duration // how late the next answers to Read are
	always  []byte          // in place of every reading
	instead [][]byte        // in place of the next ones

	heard string
	out   []line.Event
	next  line.Instant
}

const (
	answerAfter = 20 * time.Millisecond
	sendEvery   = 50 * time.Millisecond
	pieceAfter  = time.Millisecond
)

func newFarEnd(f Family) *farEnd { return &farEnd{f: f, me: f.Me} }

// Receive takes questions: those of the family, whole, are found in what came.
func (e *farEnd) Receive(at line.Instant, data []byte) {
	e.heard += string(data)
	for {
		first, question := -1, ""
		for _, q := range []string{e.f.Read, e.f.Who, e.f.Zero} {
			if i := strings.Index(e.heard, q); q != "" && i >= 0 && (first < 0 || i < first) {
				first, question = i, q
			}
		}
		if first < 0 {
			return
		}
		e.heard = e.heard[first+len(question):]
		if e.echoes {
			e.put(at, []byte(question))
		}
		e.answer(at.Add(answerAfter), question)
	}
}

func (e *farEnd) answer(at line.Instant, question string) {
	if question == e.f.Zero {
		e.zeroed++
	}
	switch {
	case e.silent:
	case question == e.f.Who:
		e.put(at, e.me)
	case question == e.f.Zero:
		if e.f.Zeroed != nil {
			e.put(at, e.f.Zeroed)
		}
	case question == e.f.Read:
		if len(e.lates) > 0 {
			at, e.lates = at.Add(e.lates[0]), e.lates[1:]
		}
		e.put(at, e.reading())
	}
}

// reading is what is sent for one.
func (e *farEnd) reading() []byte {
	switch {
	case e.always != nil:
		return e.always
	case len(e.instead) > 0:
		data := e.instead[0]
		e.instead = e.instead[1:]
		return data
	}
	return e.f.Reading(e.x)
}

// put queues bytes, in pieces.
func (e *farEnd) put(at line.Instant, data []byte) {
	if e.pieces <= 0 {
		e.out = append(e.out, line.Event{At: at, Data: append([]byte(nil), data...)})
		return
	}
	for i := 0; i < len(data); i += e.pieces {
		e.out = append(e.out, line.Event{At: at, Data: append([]byte(nil), data[i:min(i+e.pieces, len(data))]...)})
		at = at.Add(pieceAfter)
	}
}

// Due names the next output.
func (e *farEnd) Due() (line.Instant, bool) {
	due, ok := line.Instant(0), len(e.out) > 0
	if ok {
		due = e.out[0].At
	}
	if e.f.Read == "" && (!ok || e.next < due) {
		return e.next, true
	}
	return due, ok
}

// Emit returns it.
func (e *farEnd) Emit(at line.Instant) []byte {
	if len(e.out) > 0 && e.out[0].At <= at {
		data := e.out[0].Data
		e.out = e.out[1:]
		return data
	}
	if e.f.Read == "" && e.next <= at {
		e.next = e.next.Add(sendEvery)
		if !e.silent {
			e.put(at, e.reading())
		}
	}
	return nil
}
