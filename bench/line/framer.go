package line

// LongestLine is how many bytes a line of text may have unless Settings say
// otherwise.
const LongestLine = 256

// framer cuts bytes into lines ended by CR, LF or CRLF, or, with whole, into
// frames whose beginning says how long they are. A line longer than its cap is
// dropped up to its end, which is told; empty lines are no lines.
type framer struct {
	cap   int
	whole func([]byte) int
	part  []byte
	over  bool // the present line is too long already
	skip  bool // the present line lost its beginning; it is passed over untold
}

// take hands every whole line to line, which may use it until it returns; a
// line that was too long comes as (nil, true).
func (f *framer) take(data []byte, line func(text []byte, long bool)) {
	if f.whole != nil {
		f.frames(data, line)
		return
	}
	from := 0
	for i, c := range data {
		if c != '\r' && c != '\n' {
			continue
		}
		text := data[from:i]
		from = i + 1
		if f.partial() {
			f.keep(text)
			text = f.part
		}
		over, skip := f.over || len(text) > f.cap, f.skip
		f.part, f.over, f.skip = f.part[:0], false, false
		switch {
		case skip:
		case over:
			line(nil, true)
		case len(text) > 0:
			line(text, false)
		}
	}
	f.keep(data[from:])
}

// frames is take for frames that have no terminator. What is longer than the
// cap is dropped with everything that came with it: only quiet, and reset, can
// tell where the next frame begins.
func (f *framer) frames(data []byte, frame func(data []byte, long bool)) {
	if f.skip || f.over {
		return
	}
	f.part = append(f.part, data...)
	rest := f.part
	for len(rest) > 0 {
		n := f.whole(rest)
		if n > f.cap || n <= 0 && len(rest) > f.cap {
			f.part, f.over = f.part[:0], true
			frame(nil, true)
			return
		}
		if n <= 0 || n > len(rest) {
			break
		}
		frame(rest[:n], false)
		rest = rest[n:]
	}
	f.part = f.part[:copy(f.part, rest)]
}

// partial says that a line has begun and not ended.
func (f *framer) partial() bool { return len(f.part) > 0 || f.over || f.skip }

// lose drops what has begun, up to the next terminator.
func (f *framer) lose() { f.part, f.over, f.skip = f.part[:0], false, true }

// reset forgets what has begun; the next byte begins a line.
func (f *framer) reset() { f.part, f.over, f.skip = f.part[:0], false, false }

func (f *framer) keep(data []byte) {
	switch {
	case f.skip || f.over:
	case len(f.part)+len(data) > f.cap:
		f.over, f.part = true, f.part[:0]
	default:
		f.part = append(f.part, data...)
	}
}
