package line

import "time"

// Settings of a Line.
type Settings struct {
	// Name stands in errors: "reference on /dev/ttyUSB0".
	Name string
	// Terminator is sent after every question and command; "" is "\n". What
	// comes in may end with CR, LF or CRLF whatever this is.
	Terminator string
	// Cap is the longest line taken, in bytes; 0 is LongestLine.
	Cap int
	// Echo: the far end sends back what it is sent, and only then is a line
	// equal to the bytes sent passed over.
	Echo bool
	// Latency is the longest that an answer can be under way; 0 is 2 s, and it
	// is never less than the longest time that Ask has waited. Resync waits for
	// longer than that.
	Latency time.Duration
	// Whole makes the line one of frames that are no text: it tells how long
	// the frame is that data begins with, or 0 when more of it must be seen to
	// know. Nothing is added to what is sent then, and errors show hexadecimal.
	Whole func(data []byte) int
	// Silence is how long nothing may have been going either way before a
	// question is sent, where that is what parts one frame from the next.
	Silence time.Duration
}

// Frame is one line of text as received, without its terminator, or one frame
// as Settings.Whole cuts them.
type Frame struct {
	Data []byte  // valid during the callback only; copy to keep
	At   Instant // when the bytes that ended it were posted
	Long bool    // it was longer than the cap; Data is nil
}

// Bytes is what came at once, on a line that is not cut here.
type Bytes struct {
	Data []byte  // the receiver's to keep
	At   Instant // when it was posted
	Hole bool    // bytes were lost before it
}

// Line is a port with lines of text going to and fro. It is asked (Ask), or it
// is free-running (OnFrame, OnBytes).
type Line struct {
	engine   *Engine
	port     PortID
	settings Settings
	framer   framer
	gone     error

	onFrame func(Frame) error
	onBytes func(Bytes) error
	hole    bool               // in what onBytes is given
	each    func([]byte, bool) // l.line, made once
	at      Instant            // of the event being taken
	begun   Instant            // when the first byte of the present line came
	err     error              // the callback's first

	received int64   // bytes
	last     Instant // when something was received or sent last
	stale    int64
	long     int64

	asked    *asked
	doubtful bool
	echoes   []string // expected

	writing  int64 // the number Send waits for
	written  bool
	writeErr error
}

// Open makes the Line of a port, in place of an earlier one.
func (e *Engine) Open(port PortID, s Settings) *Line {
	if s.Terminator == "" {
		s.Terminator = "\n"
	}
	if s.Cap <= 0 {
		s.Cap = LongestLine
	}
	if s.Latency <= 0 {
		s.Latency = 2 * time.Second
	}
	l := &Line{engine: e, port: port, settings: s, framer: framer{cap: s.Cap}}
	l.each = l.line
	if s.Whole != nil {
		l.framer.whole = l.whole
	}
	e.lines[port] = l
	return l
}

// OnFrame makes the line free-running: f is called with every line of text
// from now on, during the engine's waits, and must not wait itself. Its first
// error ends the present wait; the other frames of the same bytes have been
// handed over by then. The first line may have lost its beginning before the
// port was opened, so it is passed over.
func (l *Line) OnFrame(f func(Frame) error) {
	if l.onFrame == nil {
		l.framer.lose()
	}
	l.onFrame = f
}

// Again tells that the port of a line that was gone is there once more: what
// comes first may have lost its beginning, and whoever is asked is doubtful
// until Resync.
func (l *Line) Again() {
	l.gone, l.echoes = nil, l.echoes[:0]
	l.lose()
}

// OnBytes makes the line free-running without cutting it: f is called with all
// bytes as they come, for instruments whose frames need more than their bytes
// to be told apart. Otherwise it is as OnFrame.
func (l *Line) OnBytes(f func(Bytes) error) {
	if l.onBytes == nil {
		l.hole = true
	}
	l.onBytes = f
}

// Stale counts the lines that came unasked on an asked line and were dropped.
func (l *Line) Stale() int64 { return l.stale }

// Long counts the lines that were longer than the cap and were dropped.
func (l *Line) Long() int64 { return l.long }

// Doubtful says that an answer may still be under way, so that Ask refuses.
func (l *Line) Doubtful() bool { return l.doubtful }

// Gone returns why the port is gone, nil while it is there.
func (l *Line) Gone() error { return l.gone }

// Name is the line's name as errors give it.
func (l *Line) Name() string { return l.settings.Name }

func (l *Line) take(e Event) error {
	l.received += int64(len(e.Data))
	l.last = e.At
	if l.onBytes != nil {
		hole := l.hole
		l.hole = false
		return l.onBytes(Bytes{e.Data, e.At, hole})
	}
	l.at, l.err = e.At, nil
	if !l.framer.partial() {
		l.begun = e.At
	}
	l.framer.take(e.Data, l.each)
	return l.err
}

// whole cuts off an echo that is expected before Settings.Whole is asked.
func (l *Line) whole(data []byte) int {
	if len(l.echoes) > 0 {
		n := min(len(data), len(l.echoes[0]))
		if string(data[:n]) == l.echoes[0][:n] {
			return len(l.echoes[0])
		}
	}
	return l.settings.Whole(data)
}

// line takes one line of text.
func (l *Line) line(text []byte, long bool) {
	begun := l.begun
	l.begun = l.at
	if long {
		l.long++
	}
	if len(l.echoes) > 0 && !long && string(text) == l.echoes[0] {
		l.echoes = l.echoes[1:]
		return
	}
	if l.onFrame != nil {
		if err := l.onFrame(Frame{Data: text, At: l.at, Long: long}); err != nil && l.err == nil {
			l.err = err
		}
		return
	}
	a := l.asked
	switch {
	case a == nil || a.got || a.long || begun < a.sent:
		l.stale++
	case long:
		a.long = true
	default:
		a.got, a.text, a.at = true, string(text), l.at
		l.echoes = l.echoes[:0]
	}
}

func (l *Line) wrote(e Event) {
	l.last = max(l.last, e.At)
	if a := l.asked; a != nil && a.number == e.Number {
		a.err = e.Err
	}
	if e.Number == l.writing {
		l.written, l.writeErr = true, e.Err
	}
}

func (l *Line) leave(err error) {
	if err == nil {
		err = ErrGone
	}
	l.gone = err
}

// lose is told when bytes were lost: what has begun is not whole, and what was
// asked may have been answered.
func (l *Line) lose() {
	l.framer.lose()
	l.hole = true
	if l.onFrame == nil && l.onBytes == nil {
		l.doubtful = true
	}
}
