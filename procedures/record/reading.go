package record

import (
	"bytes"
	"fmt"
	"io"
	"io/fs"
	"os"
)

// Limit bounds what a reader takes; the zero Limit stands for 1 MiB a line and
// 256 MiB in all. The writer keeps to the same lengths.
type Limit struct {
	Line  int64 // bytes of one line with its end
	Total int64 // bytes of a record
}

const (
	longestLine   = 1 << 20
	longestRecord = 256 << 20
)

func (l Limit) orUsual() Limit {
	if l.Line <= 0 {
		l.Line = longestLine
	}
	if l.Total <= 0 {
		l.Total = longestRecord
	}
	return l
}

// Run is what a record holds. It is clean if Torn is empty, and complete only
// if it is closed.
type Run struct {
	Events []Event
	Head   Head // over the good lines
	Closed bool
	// Torn is what follows the last good line of an open record, whole, and
	// TornWhy what is wrong with its first line. No line of it was known to be
	// durable to any line that is there, so it is what a crash leaves behind.
	// Whoever changes the last line of a closed record makes it look the same:
	// a signed head tells the two apart, and a record that has one must not be
	// recovered.
	Torn    []byte
	TornWhy string
}

// Read reads a record to its end and checks every line: form, number, chain.
//
// A good record gives a Run, closed or open. If a line is not good, the record
// is torn if nothing after it was made by a program that knew it to be durable
// (no later d reaches it), and Run.Torn holds the rest; otherwise it is
// damaged, and a *ChainError says where. Anything after a closing line and a
// line that is chained but is not a line of ours are damage too. Without a
// whole first line the error is ErrNoOpening. With an error no Run is given.
//
// Memory is about the size of the record; one longer than limit.Total is
// refused, and a line longer than limit.Line is not good.
func Read(r io.Reader, limit Limit) (Run, error) {
	limit = limit.orUsual()
	data, err := io.ReadAll(io.LimitReader(r, limit.Total+1))
	if err != nil {
		return Run{}, fmt.Errorf("read record: %w", err)
	}
	return parse(data, limit)
}

// ReadFile reads the record in a regular file, within the usual Limit.
func ReadFile(path string) (Run, error) {
	info, err := os.Stat(path) // before opening: a pipe would wait for a writer
	if err != nil {
		return Run{}, err
	}
	if !info.Mode().IsRegular() {
		return Run{}, &fs.PathError{Op: "read record", Path: path, Err: fs.ErrInvalid}
	}
	f, err := os.Open(path)
	if err != nil {
		return Run{}, err
	}
	defer f.Close()
	run, err := Read(f, Limit{})
	if err != nil {
		return Run{}, fmt.Errorf("%s: %w", path, err)
	}
	return run, nil
}

// ReadClosed is ReadFile for those who need a complete record: ErrTorn or
// ErrNotClosed is its error for one that is not.
func ReadClosed(path string) (Run, error) {
	run, err := ReadFile(path)
	switch {
	case err != nil:
		return Run{}, err
	case len(run.Torn) > 0:
		return Run{}, fmt.Errorf("%s: %w of %d bytes after line %d (%s) and is not closed: %w", path, ErrTorn, len(run.Torn), run.Head.Lines, run.TornWhy, ErrNotClosed)
	case !run.Closed:
		return Run{}, fmt.Errorf("%s: %w: its last line is %d", path, ErrNotClosed, run.Head.Lines)
	}
	return run, nil
}

func parse(data []byte, limit Limit) (Run, error) {
	var run Run
	var at int64
	for at < int64(len(data)) {
		number := run.Head.Lines + 1
		rest := data[at:]
		if run.Closed {
			return Run{}, &ChainError{number, at, "something follows the closing line"}
		}
		end := int64(bytes.IndexByte(rest, '\n')) + 1
		if at+end > limit.Total || end == 0 && int64(len(data)) > limit.Total {
			return Run{}, &ChainError{number, at, fmt.Sprintf("record is longer than %d bytes", limit.Total)}
		}
		why := ""
		switch {
		case end == 0:
			why = "line does not end"
		case end > limit.Line:
			why = fmt.Sprintf("line is longer than %d bytes", limit.Line)
		default:
			var err error
			if why, err = run.line(rest[:end-1], number); err != nil {
				return Run{}, &ChainError{number, at, err.Error()}
			}
		}
		if why == "" {
			at += end
			run.Head.Bytes = at
			continue
		}
		if later := laterThatKnew(rest, number); later > 0 {
			return Run{}, &ChainError{number, at, fmt.Sprintf("%s, though line %d knew it to be durable", why, later)}
		}
		if run.Head.Lines == 0 {
			return Run{}, fmt.Errorf("%w: %s", ErrNoOpening, why)
		}
		run.Torn, run.TornWhy = rest, why
		return run, nil
	}
	if run.Head.Lines == 0 {
		return Run{}, fmt.Errorf("%w: it is empty", ErrNoOpening)
	}
	return run, nil
}

// line takes one line, without its end, into the run. It tells why the line
// is not good if the chain does not bear it; its error is for a line that the
// chain bears and that no writer makes, which no crash can explain.
func (run *Run) line(text []byte, number int64) (why string, err error) {
	tab := len(text) - hashSize - 1
	if tab < 0 || text[tab] != '\t' {
		return "line has no hash", nil
	}
	body, hash := text[:tab], string(text[tab+1:])
	before, id := run.Head.Hash, run.Head.Run
	if number == 1 {
		if id, err = openedRun(body); err != nil {
			return err.Error(), nil
		}
		before = chainStart(id)
	}
	if chainNext(before, body) != hash {
		return "hash does not match", nil
	}
	e, err := parseBody(body)
	if err != nil {
		return "", err
	}
	var known int64
	if number > 1 {
		known = run.Events[number-2].Durable
	}
	switch {
	case e.Line != number:
		return "", fmt.Errorf("line says that it is line %d", e.Line)
	case e.Durable >= number || e.Durable < known:
		return "", fmt.Errorf("line says that line %d was durable, the line before %d", e.Durable, known)
	case (number == 1) != (e.Kind == KindOpened):
		return "", fmt.Errorf("kind is %s", e.Kind)
	}
	if e.Kind == KindClosed {
		c, err := Decode[Closed](e)
		if err != nil {
			return "", err
		}
		if c.Lines != number {
			return "", fmt.Errorf("closing line says that it is line %d", c.Lines)
		}
		run.Closed = true
	}
	run.Events = append(run.Events, e)
	run.Head.Run, run.Head.Lines, run.Head.Hash = id, number, hash
	return "", nil
}

// laterThatKnew looks in what follows from a bad line on for the beginning of
// a later line whose maker knew the bad line to be durable, and returns its
// number, or 0. It looks at every byte, not at line ends only, for an end may
// be what was damaged; inside a payload the text cannot stand, because its
// quotation marks would be escaped. It does not ask that the later line's own
// hash is good: refusing what might have been a torn tail costs a look by a
// person, cutting off what was durable costs a reading.
func laterThatKnew(rest []byte, bad int64) int64 {
	for {
		n := bytes.Index(rest, []byte(`{"n":`))
		if n < 0 {
			return 0
		}
		rest = rest[n:]
		p := parts{rest: rest}
		p.text(`{"n":`)
		number := p.count()
		p.text(`,"d":`)
		durable := p.count()
		p.text(`,"t":`)
		if !p.bad && number > bad && durable >= bad {
			return number
		}
		rest = rest[1:]
	}
}
