package record

import (
	"context"
	"errors"
	"fmt"
	"time"

	"kymobench/bench/line"
)

// LongestUnsynced is how far the disk may lag behind: a run whose
// Writer.Behind is longer vents and is inconclusive.
const LongestUnsynced = 5 * time.Second

// Writer appends the lines of one record. It belongs to the engine's
// goroutine; only its committer knows others. A line is acknowledged when its
// durable event has been taken, and only then may anything be judged by it.
//
// After the first error of a write or sync every call fails with it: a disk
// that failed once has no further say in what is true.
type Writer struct {
	path      string
	files     files
	committer Committer
	head      Head
	taken     int64
	stamps    []stamp // of the lines not taken yet
	body      []byte
	text      []byte
	failed    error
	ended     bool
}

// stamp says when a line was appended.
type stamp struct {
	number int64
	at     line.Instant
}

// Create makes the record of a new run in a file that must not exist (mode
// 0600) and makes its name durable. It writes no line: the caller appends the
// opening line and waits for its durable event before anything is measured,
// so that a disk that cannot write is found out first.
func Create(path, run string, c Committer) (*Writer, error) {
	return create(osFiles{}, path, run, c)
}

func create(disk files, path, run string, c Committer) (*Writer, error) {
	if err := checkRun(run); err != nil {
		return nil, fmt.Errorf("create record: %w", err)
	}
	f, err := disk.create(path)
	if err != nil {
		return nil, fmt.Errorf("create record: %w", err)
	}
	if err = disk.syncFolder(path); err == nil {
		err = c.begin(f)
	}
	if err != nil {
		// The file holds nothing yet; if it cannot be removed either, it is
		// found empty and refused as one without an opening line.
		return nil, errors.Join(fmt.Errorf("create record: %w", err), f.Close(), disk.remove(path))
	}
	return &Writer{path: path, files: disk, committer: c, head: Head{Run: run, Hash: chainStart(run)}}, nil
}

// Append adds a line and returns its number. It never waits for the disk; the
// line is durable when a KindDurable event of this or a later number comes.
// The first line is of kind opened with this run's id; closing lines are
// Close's, recovered lines Recover's. A payload that cannot be encoded (not
// an object, a number that is not finite, text that is not UTF-8, a line over
// 1 MiB) is refused and leaves the record as it was.
func (w *Writer) Append(at line.Instant, wall time.Time, kind string, payload any) (int64, error) {
	e, err := w.AppendEvent(at, wall, kind, payload)
	return e.Line, err
}

// AppendEvent is Append for a caller who goes on working with the event: it
// returns the line as a reader of the record would have it.
func (w *Writer) AppendEvent(at line.Instant, wall time.Time, kind string, payload any) (Event, error) {
	if kind == KindClosed || kind == KindRecovered {
		return Event{}, fmt.Errorf("append to record: a line of kind %s is not the caller's", kind)
	}
	return w.append(at, wall, kind, payload)
}

func (w *Writer) append(at line.Instant, wall time.Time, kind string, payload any) (Event, error) {
	if err := w.usable(); err != nil {
		return Event{}, err
	}
	e := Event{Line: w.head.Lines + 1, Durable: w.taken, At: at, Wall: wall.UTC(), Kind: kind}
	var err error
	w.body, err = encodeEvent(w.body[:0], &e, payload, w.head.Run)
	if err != nil {
		return Event{}, fmt.Errorf("append to record: %s: %w", kind, err)
	}
	hash := chainNext(w.head.Hash, w.body)
	w.text = appendLine(w.text[:0], w.body, hash)
	size := int64(len(w.text))
	if size > longestLine || w.head.Bytes+size > longestRecord {
		return Event{}, fmt.Errorf("append to record: %s: line of %d bytes is too long for a line or a record", kind, size)
	}
	if err := w.committer.put(e.Line, w.text); err != nil {
		w.failed = err
		return Event{}, err
	}
	w.head.Lines, w.head.Hash = e.Line, hash
	w.head.Bytes += size
	w.stamps = append(w.stamps, stamp{e.Line, at})
	return e, nil
}

// encodeEvent writes the body of an event with this payload, held to what the
// reader asks of it, so that no writer makes what no reader takes. It leaves
// the encoded payload in the event.
func encodeEvent(dst []byte, e *Event, payload any, run string) ([]byte, error) {
	if e.At < 0 {
		return nil, fmt.Errorf("instant %d is before the start", e.At)
	}
	if y := e.Wall.UTC().Year(); y < 0 || y > 9999 {
		return nil, fmt.Errorf("wall clock's year %d has not four digits", y)
	}
	if err := checkKind(e.Kind); err != nil {
		return nil, err
	}
	if (e.Line == 1) != (e.Kind == KindOpened) {
		return nil, fmt.Errorf("line %d: the first line, and no other, is of kind %s", e.Line, KindOpened)
	}
	var err error
	if e.Payload, err = encodePayload(payload); err != nil {
		return nil, err
	}
	dst = appendBody(dst, *e)
	if e.Line == 1 {
		id, err := openedRun(dst)
		if err != nil {
			return nil, err
		}
		if id != run {
			return nil, fmt.Errorf("run id %s in the record of run %s", id, run)
		}
	}
	return dst, nil
}

func (w *Writer) usable() error {
	if w.ended {
		return ErrEnded
	}
	return w.failed
}

// Taken tells that the engine has taken the durable event of a line: lines
// appended from now on say so.
func (w *Writer) Taken(number int64) {
	if number <= w.taken || number > w.head.Lines {
		return
	}
	w.taken = number
	n := 0
	for n < len(w.stamps) && w.stamps[n].number <= number {
		n++
	}
	w.stamps = append(w.stamps[:0], w.stamps[n:]...)
	w.committer.taken(number)
}

// Acknowledged is the highest line whose durable event was taken.
func (w *Writer) Acknowledged() int64 { return w.taken }

// Behind tells how long the oldest line that is not acknowledged has waited.
func (w *Writer) Behind(now line.Instant) time.Duration {
	if len(w.stamps) == 0 {
		return 0
	}
	return now.Sub(w.stamps[0].at)
}

// Head is the state of the record with all lines appended, durable or not.
func (w *Writer) Head() Head { return w.head }

// Path is the record's file.
func (w *Writer) Path() string { return w.path }

// Close completes the record: it waits until all lines are on the disk,
// appends the closing line, waits for that, and closes the file. Only so does
// the closing line know every line before it to be durable, and a closed
// record that is damaged anywhere before its last line cannot look torn. It
// is the one call that waits for the disk; nothing is under pressure by then.
// When it fails the record counts as open. The writer is of no use afterwards.
func (w *Writer) Close(ctx context.Context, at line.Instant, wall time.Time) error {
	if err := w.usable(); err != nil {
		return errors.Join(err, w.end(ctx))
	}
	if w.head.Lines == 0 {
		return errors.Join(ErrNoOpening, w.end(ctx))
	}
	err := w.committer.settle(ctx)
	if err == nil {
		w.taken = w.head.Lines
		if _, err = w.append(at, wall, KindClosed, Closed{Lines: w.head.Lines + 1}); err == nil {
			err = w.committer.settle(ctx)
		}
	}
	if err == nil {
		err = w.files.syncFolder(w.path)
	}
	if err != nil {
		w.failed = err
	}
	return errors.Join(err, w.end(ctx))
}

// Leave ends the writer and leaves the record open, to be resumed or to stay
// so, with all lines on the disk.
func (w *Writer) Leave(ctx context.Context) error {
	err := w.usable()
	if err == nil {
		err = w.committer.settle(ctx)
	}
	return errors.Join(err, w.end(ctx))
}

func (w *Writer) end(ctx context.Context) error {
	if w.ended {
		return nil
	}
	w.ended = true
	return w.committer.end(ctx)
}
