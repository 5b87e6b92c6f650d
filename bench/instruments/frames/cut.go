package frames

import (
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// evidence is how many bits must be as stated before the place of frames in
// the stream is believed, and leastFrames how many frames in a row, where no
// check value proves each of them; doubt is how many bits at another place keep
// it from being believed; and proof is how many bits, of its own check value and
// of what follows it, a frame needs to be handed over (all the program's own
// choice).
const (
	evidence    = 48
	leastFrames = 3
	doubt       = 16
	proof       = 24
)

// cutter finds frames in a stream of bytes.
//
// In step, frames follow each other without a gap and each must be whole. The
// first that is not puts the cutter out of step: it then looks at all places
// where frames could begin, and is in step again where as many whole frames
// follow each other as make up the evidence, and no other place looks right
// meanwhile. So a place that looks right by chance, also one that does
// so again and again because the pressure stands still, gives no number. Frames
// seen on the way are handed over then, none is lost.
//
// A byte lost or put in shifts what follows: a weak check value may fit the
// shifted bytes, and where there is none nothing else would show it. So a frame
// that its own check value does not prove is handed over when the next one has
// begun, or one or more have come whole, where they should.
type cutter struct {
	r       *quantity.FrameReader
	length  int
	need    int // frames in a row to be in step again
	doubted int // the last so many of them being whole is enough to doubt
	ahead   int // whole frames that a frame waits for
	after   int // bytes of the next frame that a frame waits for
	seen    int // whole frames at the beginning of what is not used yet
	inStep  bool
	part    []byte // not decided yet
	marks   []mark // when its bytes came
	block   []byte // memory for bytes that are put together; given away once
	damaged int64

	// whole takes frames that follow each other, with the instant at which the
	// last byte of the last one came, and may keep them. damage is called when
	// the step is lost, with the bytes that should have been a frame, and with
	// frames that waited for it.
	whole  func(frames []byte, at line.Instant)
	damage func(bytes []byte, at line.Instant)
	// quickly, if it is set, takes what whole would, straight from data that
	// begins with a frame, as far as it can, and returns how many bytes it took.
	quickly func(data []byte, at line.Instant) int
}

// mark says when the bytes of the part up to end came.
type mark struct {
	end int
	at  line.Instant
}

func newCutter(r *quantity.FrameReader, whole, damage func([]byte, line.Instant)) cutter {
	c := cutter{r: r, length: r.Length(), whole: whole, damage: damage}
	bits := r.FixedBits() + r.CheckBits()
	c.need, c.doubted = (evidence+bits-1)/bits, (doubt+bits-1)/bits
	switch {
	case r.CheckBits() < 16:
		c.ahead = (proof - r.CheckBits() + bits - 1) / bits
	case r.CheckBits() < 32:
		c.after = len(r.Sync())
	}
	if r.CheckBits() == 0 {
		c.need = max(c.need, leastFrames)
	}
	return c
}

// lose is told when bytes were lost: nothing held is whole, and the next frame
// may begin anywhere.
func (c *cutter) lose() { c.part, c.marks, c.inStep, c.seen = c.part[:0], c.marks[:0], false, 0 }

// take takes what came at an instant; the bytes are its own from now on.
func (c *cutter) take(data []byte, at line.Instant) {
	if len(c.part) > 0 {
		if data = c.takePart(data, at); data == nil {
			return
		}
	}
	c.keep(data, c.work(data, at), at)
}

// takePart deals with what was kept and returns what is left of data; nil when
// all is dealt with. In step, only the frames that begin in the part are put
// together; the rest need not be copied.
func (c *cutter) takePart(data []byte, at line.Instant) []byte {
	begun := (len(c.part) + c.length - 1) / c.length * c.length
	more := begun + c.ahead*c.length + c.after - len(c.part)
	if c.inStep && more <= len(data) {
		joined := c.join(c.part, data[:more])
		used, lost := c.follow(joined)
		c.hand(joined[:used], 0, at)
		if !lost {
			data, c.seen = data[used-len(c.part):], 0
			c.part, c.marks = c.part[:0], c.marks[:0]
			return data
		}
		c.drop(used)
	}
	joined := c.join(c.part, data)
	c.marks = append(c.marks, mark{len(joined), at})
	used := c.work(joined, at)
	c.part = append(c.part[:0], joined...)
	c.drop(used)
	return nil
}

// join puts bytes together that the receiver of frames may keep.
func (c *cutter) join(a, b []byte) []byte {
	n := len(a) + len(b)
	if cap(c.block)-len(c.block) < n {
		c.block = make([]byte, 0, max(4096, n))
	}
	from := len(c.block)
	c.block = append(append(c.block, a...), b...)
	return c.block[from : from+n : from+n]
}

// work hands over what is whole in data and returns how many bytes are used.
// Where there are marks, data begins where they do.
func (c *cutter) work(data []byte, at line.Instant) (used int) {
	for {
		if !c.inStep {
			n, found := c.hunt(data[used:])
			used += n
			if !found {
				return used
			}
			c.inStep = true
		}
		if c.quickly != nil && c.seen == 0 && len(c.marks) == 0 {
			used += c.quickly(data[used:], at)
		}
		n, lost := c.follow(data[used:])
		c.hand(data[used:used+n], used, at)
		used += n
		if !lost {
			return used
		}
		c.damaged++
		for range c.seen + 1 {
			c.damage(data[used:used+c.length], c.came(used+c.length, at))
			used += c.length
		}
		used -= c.length - 1 // of the last one, all bytes but the first may be good
		c.inStep, c.seen = false, 0
	}
}

// follow goes along frames as long as they are whole and proved. It returns how
// many bytes they have, and whether it ended because a frame, that after the
// seen ones, is not whole.
func (c *cutter) follow(data []byte) (used int, lost bool) {
	n := c.seen + c.r.Run(data[c.seen*c.length:])
	rest := data[n*c.length:]
	// The last whole frame may still wait for the next one's beginning.
	lost = len(rest) >= c.length
	if c.after > 0 && n > 0 {
		switch {
		case len(rest) < c.after:
			n--
			lost = false
		case !c.begins(rest):
			n--
			lost = true
		}
	}
	if lost || n > c.ahead {
		used = max(0, n-c.ahead)
	}
	c.seen = n - used
	return used * c.length, lost
}

// hand hands over frames, which begin at an offset of the part, together as far
// as they came together.
func (c *cutter) hand(frames []byte, from int, at line.Instant) {
	for len(c.marks) > 0 && len(frames) > 0 && from+c.length <= c.marks[len(c.marks)-1].end {
		c.whole(frames[:c.length], c.came(from+c.length, at))
		frames, from = frames[c.length:], from+c.length
	}
	if len(frames) > 0 {
		c.whole(frames, at)
	}
}

// begins says that data begins as a frame does.
func (c *cutter) begins(data []byte) bool {
	for i, b := range c.r.Sync() {
		if data[i] != b {
			return false
		}
	}
	return true
}

// hunt looks for the place where frames begin. It returns how many bytes are
// to be passed over, and whether a frame begins after them.
func (c *cutter) hunt(data []byte) (pass int, found bool) {
	for len(data)-pass >= c.need*c.length+c.length-1 {
		window := data[pass:]
		place, places := 0, 0
		for i := range c.length {
			n := c.row(window[i:])
			if n >= c.doubted {
				places++
			}
			if n == c.need {
				place, found = i, true
			}
		}
		if found && places == 1 {
			if c.ahead > 0 {
				// The first may have the end of a damaged frame's check value.
				place += c.length
			}
			return pass + place, true
		}
		found = false
		pass += c.length
	}
	return pass, false
}

// row counts the whole frames that end the row of as many as are needed.
func (c *cutter) row(data []byte) (n int) {
	for n < c.need {
		end := (c.need - n) * c.length
		if !c.r.Whole(data[end-c.length : end]) {
			break
		}
		n++
	}
	return n
}

// came is when the byte before end came.
func (c *cutter) came(end int, now line.Instant) line.Instant {
	for _, m := range c.marks {
		if end <= m.end {
			return m.at
		}
	}
	return now
}

// keep keeps what is not used, and when it came.
func (c *cutter) keep(data []byte, used int, at line.Instant) {
	c.part, c.marks = append(c.part[:0], data[used:]...), c.marks[:0]
	if len(c.part) > 0 {
		c.marks = append(c.marks, mark{len(c.part), at})
	}
}

// drop takes what is used off the part.
func (c *cutter) drop(used int) {
	c.part = c.part[:copy(c.part, c.part[used:])]
	n := 0
	for _, m := range c.marks {
		if m.end > used {
			c.marks[n] = mark{m.end - used, m.at}
			n++
		}
	}
	c.marks = c.marks[:n]
}
