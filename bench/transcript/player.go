package transcript

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"
	"time"

	"kymobench/bench/line"
)

// Errors of a transcript that is played back.
var (
	// ErrForm: a line is not as it should be.
	ErrForm = errors.New("not a line of a transcript")
	// ErrDiverges: the program does something else than it did then.
	ErrDiverges = errors.New("the run does something else than the transcript")
	// ErrEnd: the run goes on where the transcript ends.
	ErrEnd = errors.New("the transcript ends here")
)

// longestLine of a transcript: 64 KiB of bytes, quoted.
const longestLine = 1 << 19

// Player is an Inbox that gives what a transcript holds. When the run does not
// do what it did then, every call from there on fails or stands still, and Err
// says where.
type Player struct {
	lines []entry
	next  int
	now   line.Instant
	wall  time.Time
	err   error
}

// entry is one line of a transcript.
type entry struct {
	number  int // of the line in its file
	letter  byte
	numbers []int64
	text    string
	has     bool // there is a text
}

// Read reads a transcript whole. Every line is understood or refused.
func Read(r io.Reader) (*Player, error) {
	s := bufio.NewScanner(r)
	s.Buffer(make([]byte, 0, 1<<16), longestLine)
	if !s.Scan() || s.Text() != Schema {
		return nil, fmt.Errorf("line 1: %w: it does not begin with %s", ErrForm, Schema)
	}
	p := &Player{}
	for number := 2; s.Scan(); number++ {
		e, err := parse(s.Text())
		if err != nil {
			return nil, fmt.Errorf("line %d: %w", number, err)
		}
		e.number = number
		p.lines = append(p.lines, e)
	}
	if err := s.Err(); err != nil {
		return nil, fmt.Errorf("read the transcript: %w", err)
	}
	return p, nil
}

// forms says how many numbers follow a letter, and whether a text must (1), may
// (0) or must not (-1).
func forms() map[byte][2]int {
	return map[byte][2]int{
		letterSent: {2, 1}, letterSignal: {2, 1}, letterWritten: {3, 0}, letterBytes: {2, 1}, letterGone: {2, 0}, letterDurable: {3, 0}, letterAnswer: {1, 1},
		letterEnd: {1, -1}, letterStop: {1, -1}, letterLost: {2, 0}, letterQuiet: {1, -1}, letterCalled: {0, 1}, letterNow: {1, -1}, letterWall: {0, 1},
		letterOpened: {1, 0}, letterMoved: {1, 1},
	}
}

func parse(text string) (entry, error) {
	if text == "" {
		return entry{}, fmt.Errorf("%w: it is empty", ErrForm)
	}
	e := entry{letter: text[0]}
	form, known := forms()[e.letter]
	if !known {
		return e, fmt.Errorf("%w: no line begins with %q", ErrForm, text[:1])
	}
	rest := text[1:]
	for range form[0] {
		word, ok := strings.CutPrefix(rest, " ")
		end := strings.IndexByte(word+" ", ' ')
		n, err := strconv.ParseInt(word[:end], 10, 64)
		if !ok || err != nil {
			return e, fmt.Errorf("%w: a number is missing", ErrForm)
		}
		e.numbers, rest = append(e.numbers, n), word[end:]
	}
	if rest != "" {
		quoted, ok := strings.CutPrefix(rest, " ")
		s, err := strconv.Unquote(quoted)
		if !ok || err != nil || form[1] < 0 {
			return e, fmt.Errorf("%w: its end is not understood", ErrForm)
		}
		e.text, e.has = s, true
	}
	if form[1] > 0 && !e.has {
		return e, fmt.Errorf("%w: a text is missing", ErrForm)
	}
	return e, nil
}

// Err says where the run left the transcript, nil while it has not.
func (p *Player) Err() error { return p.err }

// Rest says how many lines were not played.
func (p *Player) Rest() int { return len(p.lines) - p.next }

// take gives the next line if it begins with one of the letters.
func (p *Player) take(doing string, letters string) (entry, bool) {
	switch {
	case p.err != nil:
	case p.next == len(p.lines):
		p.err = fmt.Errorf("%w, and the run is %s", ErrEnd, doing)
	case !strings.ContainsRune(letters, rune(p.lines[p.next].letter)):
		e := p.lines[p.next]
		p.err = fmt.Errorf("line %d: %w: it is %s, and the line begins with %q", e.number, ErrDiverges, doing, string(e.letter))
	default:
		p.next++
		return p.lines[p.next-1], true
	}
	return entry{}, false
}

// Now gives the time that was looked at then.
func (p *Player) Now() line.Instant {
	if e, ok := p.take("looking at the time", string(letterNow)); ok {
		p.now = line.Instant(e.numbers[0])
	}
	return p.now
}

// Wall gives the wall-clock time that was looked at then.
func (p *Player) Wall() time.Time {
	if e, ok := p.take("looking at the wall clock", string(letterWall)); ok {
		wall, err := time.Parse(time.RFC3339Nano, e.text)
		if err != nil {
			p.err = fmt.Errorf("line %d: %w: %q is no time", e.number, ErrForm, e.text)
		}
		p.wall = wall
	}
	return p.wall
}

// Post drops the event: those of then come from the transcript.
func (p *Player) Post(time.Duration, line.Event) {}

// Send holds what is sent against what was sent then.
func (p *Player) Send(port line.PortID, data []byte) int64 {
	e, ok := p.take(fmt.Sprintf("sending %q to port %d", data, port), string(letterSent))
	if !ok {
		return -1
	}
	if e.numbers[0] != int64(port) || e.text != string(data) {
		p.err = fmt.Errorf("line %d: %w: it sends %q to port %d, then it was %q to port %d", e.number, ErrDiverges, data, port, e.text, e.numbers[0])
	}
	return e.numbers[1]
}

// Signal holds a change of a modem line against what was done then.
func (p *Player) Signal(port line.PortID, which line.ModemLine, on bool) int64 {
	what := stroke(which, on)
	e, ok := p.take(fmt.Sprintf("putting %s at port %d", what, port), string(letterSignal))
	if !ok {
		return -1
	}
	if e.numbers[0] != int64(port) || e.text != what {
		p.err = fmt.Errorf("line %d: %w: it puts %s at port %d, then it was %s at port %d", e.number, ErrDiverges, what, port, e.text, e.numbers[0])
	}
	return e.numbers[1]
}

// Opened says how opening a port ended then.
func (p *Player) Opened(port line.PortID) error {
	e, ok := p.take(fmt.Sprintf("opening port %d", port), string(letterOpened))
	switch {
	case !ok:
		return p.err
	case e.numbers[0] != int64(port):
		p.err = fmt.Errorf("line %d: %w: it opens port %d, then it was %d", e.number, ErrDiverges, port, e.numbers[0])
		return p.err
	case e.has:
		return replayed(e.text)
	}
	return nil
}

// Moved says where a port's adapter was then; "" when nobody knew.
func (p *Player) Moved(port line.PortID) string {
	e, ok := p.take(fmt.Sprintf("asking where port %d is", port), string(letterMoved))
	if !ok {
		return ""
	}
	return e.text
}

// Next gives the event that was taken then.
func (p *Player) Next(ctx context.Context, until line.Instant) (line.Event, error) {
	e, ok := p.take("waiting", "w<!daesotx")
	if !ok {
		return line.Event{}, p.err
	}
	failed := func() error {
		if !e.has {
			return nil
		}
		return replayed(e.text)
	}
	n := e.numbers
	switch e.letter {
	case letterQuiet:
		if line.Instant(n[0]) != until {
			p.err = fmt.Errorf("line %d: %w: it waits until %v, then it was until %v", e.number, ErrDiverges, until, line.Instant(n[0]))
			return line.Event{}, p.err
		}
		return line.Event{}, line.ErrDeadline
	case letterCalled:
		return line.Event{}, context.Canceled
	case letterBytes:
		return line.Event{Kind: line.KindBytes, Port: line.PortID(n[0]), At: line.Instant(n[1]), Data: []byte(e.text)}, nil
	case letterGone:
		return line.Event{Kind: line.KindGone, Port: line.PortID(n[0]), At: line.Instant(n[1]), Err: failed()}, nil
	case letterWritten:
		return line.Event{Kind: line.KindWritten, Port: line.PortID(n[0]), Number: n[1], At: line.Instant(n[2]), Err: failed()}, nil
	case letterDurable:
		return line.Event{Kind: line.KindDurable, Port: line.PortID(n[0]), Number: n[1], At: line.Instant(n[2]), Err: failed()}, nil
	case letterAnswer:
		return line.Event{Kind: line.KindAnswer, At: line.Instant(n[0]), Text: e.text}, nil
	case letterEnd:
		return line.Event{Kind: line.KindAnswerEnd, At: line.Instant(n[0])}, nil
	case letterStop:
		return line.Event{Kind: line.KindStop, At: line.Instant(n[0])}, nil
	}
	return line.Event{Kind: line.KindOverflow, Port: line.PortID(n[0]), At: line.Instant(n[1]), Err: failed()}, nil
}

// replayed is an error as it was told then; a port that was gone is gone.
type replayed string

func (e replayed) Error() string { return string(e) }

// Is says that the text begins as line.ErrGone's does.
func (e replayed) Is(target error) bool {
	return target == line.ErrGone && strings.HasPrefix(string(e), line.ErrGone.Error())
}

// What a run waits on.
var (
	_ line.Inbox = (*Keeper)(nil)
	_ line.Inbox = (*Player)(nil)
)
