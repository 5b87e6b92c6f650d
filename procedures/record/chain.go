package record

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"strconv"
	"time"

	"kymobench/bench/line"
)

// wallLayout writes the wall clock with all nine decimals, so that every
// moment has one way of being written.
const wallLayout = "2006-01-02T15:04:05.000000000Z"

// hashSize is the length of a hash as it stands in the file.
const hashSize = 2 * sha256.Size

// opening is how the payload of the first line begins. The run id stands where
// the eye, and a line of sed, find it.
const opening = `{"schema":"` + Schema + `","run":"`

// checkRun holds a run id to what may be a file's name everywhere.
func checkRun(run string) error {
	if len(run) == 0 || len(run) > 64 {
		return errors.New("run id is empty or longer than 64 characters")
	}
	for i := range len(run) {
		ch := run[i]
		if !(ch >= 'a' && ch <= 'z' || ch >= 'A' && ch <= 'Z' || ch >= '0' && ch <= '9' || i > 0 && (ch == '-' || ch == '_' || ch == '.')) {
			return fmt.Errorf("run id %q: only letters, digits and, after the first, dot, hyphen and underscore", run)
		}
	}
	return nil
}

func checkKind(kind string) error {
	if len(kind) == 0 || len(kind) > 32 {
		return errors.New("kind is empty or longer than 32 characters")
	}
	for i := range len(kind) {
		if ch := kind[i]; !(ch >= 'a' && ch <= 'z' || ch == '_') {
			return fmt.Errorf("kind %q: only a to z and _", kind)
		}
	}
	return nil
}

// chainStart is what stands for the hash of the line before the first.
func chainStart(run string) string {
	sum := sha256.Sum256([]byte("kymobench-record/1\n" + run))
	return hex.EncodeToString(sum[:])
}

// chainNext is the hash of the line with this body.
func chainNext(before string, body []byte) string {
	h := sha256.New()
	h.Write([]byte(before))
	h.Write(body)
	return hex.EncodeToString(h.Sum(nil))
}

// appendBody writes an event's body; its payload is canonical already.
func appendBody(dst []byte, e Event) []byte {
	dst = append(dst, `{"n":`...)
	dst = strconv.AppendInt(dst, e.Line, 10)
	dst = append(dst, `,"d":`...)
	dst = strconv.AppendInt(dst, e.Durable, 10)
	dst = append(dst, `,"t":`...)
	dst = strconv.AppendInt(dst, int64(e.At), 10)
	dst = append(dst, `,"w":"`...)
	dst = e.Wall.UTC().AppendFormat(dst, wallLayout)
	dst = append(dst, `","k":"`...)
	dst = append(dst, e.Kind...)
	dst = append(dst, `","v":`...)
	dst = append(dst, e.Payload...)
	return append(dst, '}')
}

// appendLine writes a body, its hash and the line's end.
func appendLine(dst, body []byte, hash string) []byte {
	dst = append(dst, body...)
	dst = append(dst, '\t')
	dst = append(dst, hash...)
	return append(dst, '\n')
}

// parseBody reads a body. What it accepts, appendBody writes again byte for
// byte: every part is either a fixed text or has one way of being written.
func parseBody(body []byte) (Event, error) {
	var e Event
	p := parts{rest: body}
	p.text(`{"n":`)
	e.Line = p.count()
	p.text(`,"d":`)
	e.Durable = p.count()
	p.text(`,"t":`)
	e.At = line.Instant(p.count())
	p.text(`,"w":"`)
	wall := p.upTo('"')
	p.text(`","k":"`)
	e.Kind = string(p.upTo('"'))
	p.text(`","v":`)
	if p.bad || len(p.rest) == 0 || p.rest[len(p.rest)-1] != '}' {
		return Event{}, errors.New("body has not the form of a record's line")
	}
	t, err := time.Parse(wallLayout, string(wall))
	if err != nil || t.Format(wallLayout) != string(wall) {
		return Event{}, fmt.Errorf("wall clock %q is not RFC 3339 in UTC with nine decimals", wall)
	}
	e.Wall = t
	if err := checkKind(e.Kind); err != nil {
		return Event{}, err
	}
	e.Payload = p.rest[:len(p.rest)-1]
	again, err := canonicalObject(e.Payload)
	if err != nil {
		return Event{}, err
	}
	if !bytes.Equal(again, e.Payload) {
		return Event{}, errors.New("payload is not canonical JSON")
	}
	return e, nil
}

// parts takes a body to pieces from the left.
type parts struct {
	rest []byte
	bad  bool
}

func (p *parts) text(s string) {
	rest, ok := bytes.CutPrefix(p.rest, []byte(s))
	p.rest, p.bad = rest, p.bad || !ok
}

// count reads a whole number, zero or more, without leading zeros.
func (p *parts) count() int64 {
	n := 0
	for n < len(p.rest) && n < 20 && p.rest[n] >= '0' && p.rest[n] <= '9' {
		n++
	}
	v, err := strconv.ParseInt(string(p.rest[:n]), 10, 64)
	if err != nil || n > 1 && p.rest[0] == '0' {
		p.bad = true
	}
	p.rest = p.rest[n:]
	return v
}

func (p *parts) upTo(ch byte) []byte {
	n := bytes.IndexByte(p.rest, ch)
	if n < 0 {
		p.bad = true
		return nil
	}
	s := p.rest[:n]
	p.rest = p.rest[n:]
	return s
}

// openedRun finds the run id in the body of a first line.
func openedRun(body []byte) (string, error) {
	_, rest, ok := bytes.Cut(body, []byte(`,"k":"`+KindOpened+`","v":`+opening))
	if !ok {
		return "", errors.New("first line does not open a " + Schema)
	}
	run, _, ok := bytes.Cut(rest, []byte(`"`))
	if !ok {
		return "", errors.New("first line has no run id")
	}
	return string(run), checkRun(string(run))
}
