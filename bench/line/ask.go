package line

import (
	"context"
	"errors"
	"fmt"
	"strconv"
	"time"
)

// Ways in which a line is not as it should be; each comes inside a *PortError.
var (
	// ErrGone: the port is gone, unplugged for instance.
	ErrGone = errors.New("the port is gone")
	// ErrDoubtful: an answer may still be under way; Resync first.
	ErrDoubtful = errors.New("an earlier answer may still come")
	// ErrLong: the answer was longer than the line's cap and was dropped.
	ErrLong = errors.New("the answer is too long")
	// ErrFreeRunning: the instrument sends by itself and cannot be asked.
	ErrFreeRunning = errors.New("it sends by itself and is not asked")
	// ErrNotQuiet: bytes kept coming while nothing was asked.
	ErrNotQuiet = errors.New("it does not stop sending")
)

// PortError is what went wrong on a port that Name names as the operator
// knows it.
type PortError struct {
	Name string // "reference on /dev/ttyUSB0"
	Op   string // "read" or "write"
	Err  error
}

func (e *PortError) Error() string { return e.Op + " " + e.Name + ": " + e.Err.Error() }

// Unwrap returns what went wrong.
func (e *PortError) Unwrap() error { return e.Err }

// LateError is what did not come in time; errors.Is(err, ErrDeadline) holds.
type LateError struct {
	What   string // "no answer to \"MEAS:PRES?\""
	Within time.Duration
}

func (e *LateError) Error() string {
	return e.What + " within " + strconv.FormatFloat(e.Within.Seconds(), 'g', -1, 64) + " s"
}

// Unwrap returns ErrDeadline.
func (e *LateError) Unwrap() error { return ErrDeadline }

// UnrecognisedError is an answer to Resync's question that was not accepted.
type UnrecognisedError struct {
	Question, Text string
	Hex            bool // they are no text
}

func (e *UnrecognisedError) Error() string {
	if e.Hex {
		return fmt.Sprintf("% X was answered % X, which is not the answer expected", e.Question, e.Text)
	}
	return fmt.Sprintf("%q was answered %q, which is not the answer expected", e.Question, e.Text)
}

// Answer is a line of text that came after a question.
type Answer struct {
	Text string
	Sent Instant // when the question was given to the port
	At   Instant // when the bytes that ended the answer were posted
}

// asked is the one question in flight.
type asked struct {
	number int64
	sent   Instant
	text   string
	at     Instant
	got    bool
	long   bool
	err    error // of the write
}

// Ask writes a question and waits for one line of text, at most within, while
// other ports go on. Frames whose first byte came before the question are
// stale and dropped. When it ends without an answer, whatever the reason, the
// line is doubtful, and Ask refuses until Resync has been done: a late answer
// has no name on it.
func (l *Line) Ask(ctx context.Context, question string, within time.Duration) (Answer, error) {
	if l.doubtful {
		return Answer{}, l.wrong("read", ErrDoubtful)
	}
	return l.ask(ctx, question, within)
}

func (l *Line) ask(ctx context.Context, question string, within time.Duration) (Answer, error) {
	switch {
	case l.gone != nil:
		return Answer{}, l.wrong("read", l.gone)
	case l.onFrame != nil || l.onBytes != nil:
		return Answer{}, l.wrong("read", ErrFreeRunning)
	case l.engine.inside || l.asked != nil:
		return Answer{}, l.wrong("read", ErrInside)
	}
	l.settings.Latency = max(l.settings.Latency, within)
	if err := l.silence(ctx, within); err != nil {
		return Answer{}, err
	}
	a := &asked{sent: l.engine.Now()}
	a.number = l.write(question)
	l.asked = a
	err := l.engine.Wait(ctx, a.sent.Add(within), func() bool {
		return a.got || a.long || a.err != nil || l.gone != nil
	})
	l.asked = nil
	if a.got && err == nil {
		return Answer{Text: a.text, Sent: a.sent, At: a.at}, nil
	}
	// Where a line of text that was too long ended could be seen.
	l.doubtful = !a.got && (!a.long || l.settings.Whole != nil)
	switch {
	case errors.Is(err, ErrDeadline):
		return Answer{}, l.wrong("read", &LateError{"no answer to " + l.quoted(question), within})
	case err != nil:
		return Answer{}, err // of the context, or of somebody else's handler
	case a.long:
		return Answer{}, l.wrong("read", fmt.Errorf("%w: %s was answered with over %d bytes", ErrLong, l.quoted(question), l.framer.cap))
	case a.err != nil:
		return Answer{}, l.wrong("write", a.err)
	}
	return Answer{}, l.wrong("read", l.gone)
}

// silence waits until nothing has been going on the line for Settings.Silence.
func (l *Line) silence(ctx context.Context, within time.Duration) error {
	if l.settings.Silence <= 0 {
		return nil
	}
	limit := l.engine.Now().Add(within)
	for l.received > 0 && l.engine.Now() < l.last.Add(l.settings.Silence) {
		until, seen := l.last.Add(l.settings.Silence), l.received
		if until > limit {
			return l.wrong("read", ErrNotQuiet)
		}
		err := l.engine.Wait(ctx, until, func() bool { return l.received != seen || l.gone != nil })
		switch {
		case l.gone != nil:
			return l.wrong("read", l.gone)
		case err != nil && !errors.Is(err, ErrDeadline):
			return err
		}
	}
	return nil
}

// quoted shows what is sent: text in quotation marks, other bytes hexadecimal.
func (l *Line) quoted(s string) string {
	if l.settings.Whole == nil {
		return strconv.Quote(s)
	}
	return fmt.Sprintf("% X", s)
}

// Await waits, at most within, until done says that what was waited for has
// come; what names it in the error when it has not.
func (l *Line) Await(ctx context.Context, what string, within time.Duration, done func() bool) error {
	if l.gone != nil {
		return l.wrong("read", l.gone)
	}
	came := false
	err := l.engine.Wait(ctx, l.engine.Now().Add(within), func() bool {
		came = done()
		return came || l.gone != nil
	})
	switch {
	case errors.Is(err, ErrDeadline):
		return l.wrong("read", &LateError{what, within})
	case err != nil || came:
		return err
	}
	return l.wrong("read", l.gone)
}

// resyncRounds is how often Resync asks before it gives up.
const resyncRounds = 3

// Resync makes a doubtful line sure again: it waits until the line has been
// quiet for longer than Settings.Latency, then asks a question whose answer
// accept recognises, an identity for instance.
func (l *Line) Resync(ctx context.Context, question string, accept func(string) bool) error {
	var refused error
	for range resyncRounds {
		if err := l.drain(ctx); err != nil {
			return err
		}
		answer, err := l.ask(ctx, question, l.settings.Latency)
		switch {
		case err == nil && accept(answer.Text):
			l.doubtful = false
			return nil
		case err == nil:
			l.doubtful = true
			refused = l.wrong("read", &UnrecognisedError{question, answer.Text, l.settings.Whole != nil})
		case errors.Is(err, ErrDeadline), errors.Is(err, ErrLong):
			l.doubtful = true
			refused = err
		default:
			return err
		}
	}
	return refused
}

// Quiet makes a doubtful line sure again, as Resync does, for an instrument
// that has no question with an answer to recognise: quiet must do.
func (l *Line) Quiet(ctx context.Context) error {
	err := l.drain(ctx)
	if err == nil {
		l.doubtful = false
	}
	return err
}

// drain waits until nothing has come for 1.25 times the worst latency, at most
// ten times as long, and drops what came.
func (l *Line) drain(ctx context.Context) error {
	quiet := l.settings.Latency + l.settings.Latency/4
	limit := l.engine.Now().Add(10 * quiet)
	for {
		if l.gone != nil {
			return l.wrong("read", l.gone)
		}
		seen, until := l.received, l.engine.Now().Add(quiet)
		if until > limit {
			return l.wrong("read", ErrNotQuiet)
		}
		err := l.engine.Wait(ctx, until, func() bool { return l.received != seen || l.gone != nil })
		if errors.Is(err, ErrDeadline) {
			if l.framer.partial() {
				l.stale++
			}
			l.framer.reset()
			l.echoes = l.echoes[:0]
			return nil
		}
		if err != nil {
			return err
		}
	}
}

// Send writes a command that has no answer and waits, at most within, until
// the port has taken it.
func (l *Line) Send(ctx context.Context, command string, within time.Duration) error {
	return l.writeOut(ctx, within, func() int64 { return l.write(command) }, func() string { return l.quoted(command) })
}

// Signal puts a modem line on or off and waits, at most within, until that is
// done.
func (l *Line) Signal(ctx context.Context, which ModemLine, on bool, within time.Duration) error {
	return l.writeOut(ctx, within, func() int64 { return l.engine.inbox.Signal(l.port, which, on) }, which.String)
}

func (l *Line) writeOut(ctx context.Context, within time.Duration, begin func() int64, what func() string) error {
	switch {
	case l.gone != nil:
		return l.wrong("write", l.gone)
	case l.engine.inside:
		return l.wrong("write", ErrInside)
	}
	l.written, l.writeErr = false, nil
	l.writing = begin()
	err := l.engine.Wait(ctx, l.engine.Now().Add(within), func() bool { return l.written || l.gone != nil })
	l.writing = 0
	switch {
	case errors.Is(err, ErrDeadline):
		return l.wrong("write", &LateError{"the port did not take " + what(), within})
	case err != nil:
		return err
	case l.writeErr != nil:
		return l.wrong("write", l.writeErr)
	case !l.written:
		return l.wrong("write", l.gone)
	}
	return nil
}

// FireSignal is Fire for a modem line.
func (l *Line) FireSignal(which ModemLine, on bool) { l.engine.inbox.Signal(l.port, which, on) }

// Fire writes a command at once and does not wait: for venting, also from
// inside a handler and on a line that is doubtful.
func (l *Line) Fire(command string) { l.write(command) }

func (l *Line) write(text string) int64 {
	if l.settings.Echo {
		l.echoes = append(l.echoes, text)
	}
	if l.settings.Whole != nil {
		return l.engine.inbox.Send(l.port, []byte(text))
	}
	return l.engine.inbox.Send(l.port, []byte(text+l.settings.Terminator))
}

func (l *Line) wrong(op string, err error) error {
	return &PortError{Name: l.settings.Name, Op: op, Err: err}
}
