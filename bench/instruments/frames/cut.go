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
	seen    int // whole frames at the beginning of the part
	inStep  bool
	part    []byte // not decided yet
	marks   []mark // when its bytes came
	damaged int64
}

// mark says when the bytes of the part up to end came.
type mark struct {
	end int
	at  line.Instant
}

func newCutter(r *quantity.FrameReader) cutter {
	c := cutter{r: r, length: r.Length()}
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

// take takes what came at an instant. Whole frames go to whole, with the
// instant at which their last byte came; when the step is lost, damage is called
// with the bytes that should have been a frame, and with frames that waited for
// it. Both may use what they are given until they return.
func (c *cutter) take(data []byte, at line.Instant, whole func(frame []byte, at line.Instant), damage func(bytes []byte, at line.Instant)) {
	if len(c.part) > 0 {
		c.part = append(c.part, data...)
		c.marks = append(c.marks, mark{len(c.part), at})
		data = c.part
	}
	used := 0
	for {
		if !c.inStep {
			n, found := c.hunt(data[used:])
			used += n
			if !found {
				break
			}
			c.inStep = true
		}
		n, lost := c.follow(data[used:], used, at, whole)
		used += n
		if !lost {
			break
		}
		c.damaged++
		for range c.seen + 1 {
			damage(data[used:used+c.length], c.came(used+c.length, at))
			used += c.length
		}
		used -= c.length - 1 // of the last one, all bytes but the first may be good
		c.inStep, c.seen = false, 0
	}
	c.keep(data, used, at)
}

// follow hands over frames as long as they are whole and proved. It returns how
// many bytes they had, and whether it ended because a frame, that after the
// seen ones, is not whole. data begins at offset from in the part.
func (c *cutter) follow(data []byte, from int, at line.Instant, whole func([]byte, line.Instant)) (used int, lost bool) {
	for {
		for c.seen <= c.ahead {
			next := used + c.seen*c.length
			if len(data) < next+c.length+c.after {
				return used, false
			}
			if !c.r.Whole(data[next:next+c.length]) || c.after > 0 && !c.begins(data[next+c.length:]) {
				return used, true
			}
			c.seen++
		}
		when := at
		if len(c.marks) > 0 {
			when = c.came(from+used+c.length, at)
		}
		whole(data[used:used+c.length], when)
		used += c.length
		c.seen--
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
	if len(c.part) == 0 {
		c.part = append(c.part, data[used:]...)
		c.marks = append(c.marks[:0], mark{len(c.part), at})
		if len(c.part) == 0 {
			c.marks = c.marks[:0]
		}
		return
	}
	c.part = c.part[:copy(c.part, data[used:])]
	n := 0
	for _, m := range c.marks {
		if m.end > used {
			c.marks[n] = mark{m.end - used, m.at}
			n++
		}
	}
	c.marks = c.marks[:n]
}
