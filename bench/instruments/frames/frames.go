// Package frames drives instruments that send numbers in binary frames of one
// length, by themselves, for ever: converters above all. One port may carry
// several channels, whose readings of one frame have the same instant and the
// same sequence number.
//
// It is not asked, it opens no port and does not judge what it reads; what the
// numbers are worth in time is the run's matter.
//
// Order of use: open a line.Line, make a Port on it, a Channel for each number
// in the frame, Watch each.
package frames

import (
	"errors"
	"fmt"
	"reflect"
	"unsafe"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// What stands in a stream beside readings; each comes to Watch with the port's
// name and the bytes in question.
var (
	// ErrDamaged: bytes that should have been a frame are none.
	ErrDamaged = errors.New("no whole frame")
	// ErrRepeated: a frame has the sequence number of the one before.
	ErrRepeated = errors.New("the frame before came again")
)

// Port is a line that one or more channels share.
type Port struct {
	line     *line.Line
	frame    quantity.Frame // of the first channel
	cut      cutter
	channels []*Channel // those that are made
	watched  []*Channel
	open     bool // the line hands its bytes over
	err      error

	counted bool   // a sequence number was seen
	number  uint64 // the last one, as it stood
	total   uint64 // counted on over its wraps
	frames  int64
}

// Settings of a channel.
type Settings struct {
	// Field says where the number stands in the frame.
	Field quantity.Field
}

// Channel is one number in the port's frames: a bench.Streaming.
type Channel struct {
	port    *Port
	reader  *quantity.FrameReader
	unit    quantity.Unit
	reading bench.Reading
	take    func(r *bench.Reading, err error) error // nil until it is watched
}

// NewPort makes a Port of a line that is its own.
func NewPort(l *line.Line) *Port { return &Port{line: l} }

// Channel makes one of the port's channels. It refuses a unit that it does not
// know, a frame that contradicts itself, and one that differs from the other
// channels' in more than its number.
func (p *Port) Channel(s Settings) (*Channel, error) {
	unit, ok := quantity.UnitNamed(s.Field.Unit)
	if !ok {
		return nil, fmt.Errorf("%s: %q is no unit known here", p.line.Name(), s.Field.Unit)
	}
	reader, err := s.Field.Frame.Reader()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", p.line.Name(), err)
	}
	if len(p.channels) == 0 {
		p.frame, p.cut = s.Field.Frame, newCutter(reader, p.whole, p.damage)
	} else if !reflect.DeepEqual(shell(p.frame), shell(s.Field.Frame)) {
		return nil, fmt.Errorf("%s: two channels are said to stand in different frames", p.line.Name())
	}
	c := &Channel{port: p, reader: reader, unit: unit, reading: bench.Reading{Value: quantity.Value{Unit: unit}}}
	p.channels = append(p.channels, c)
	return c, nil
}

// shell is a frame without its number.
func shell(f quantity.Frame) quantity.Frame {
	f.Number, f.Scale, f.Offset, f.Over = quantity.Layout{}, 0, 0, nil
	return f
}

// Watch hands the channel's reading of every frame to take from now on, in the
// order of arrival, or what came instead of one, with its bytes and err set. An
// error of take ends the engine's present wait.
func (c *Channel) Watch(take func(r *bench.Reading, err error) error) {
	if c.take == nil {
		c.port.watched = append(c.port.watched, c)
	}
	c.take = take
	c.port.cut.quickly = nil
	if len(c.port.watched) == 1 && c.port.frame.Sequence == nil && c.reader.CanTake() && c.port.cut.ahead == 0 {
		c.port.cut.quickly = c.port.quickly
	}
	if !c.port.open {
		c.port.open = true
		c.port.line.OnBytes(c.port.bytes)
	}
}

// Damaged counts how often the port's frames were lost from sight.
func (p *Port) Damaged() int64 { return p.cut.damaged }

// Frames counts the whole frames.
func (p *Port) Frames() int64 { return p.frames }

// bytes takes what came at once.
func (p *Port) bytes(b line.Bytes) error {
	if b.Hole {
		p.cut.lose()
		p.counted = false // how many frames the hole had is not known
	}
	p.err = nil
	p.cut.take(b.Data, b.At)
	return p.err
}

// damage hands over bytes that should have been a frame.
func (p *Port) damage(data []byte, at line.Instant) {
	r := bench.Reading{Sent: at, At: at, Frame: string(data)}
	p.refuse(r, ErrDamaged)
}

// refuse hands over to everyone what is no reading.
func (p *Port) refuse(r bench.Reading, why error) {
	for _, c := range p.watched {
		p.keep(c.take(&r, fmt.Errorf("read %s: %w", p.line.Name(), why)))
	}
}

func (p *Port) keep(err error) {
	if err != nil && p.err == nil {
		p.err = err
	}
}

// batch is how many numbers are read at once.
const batch = 64

// whole takes frames that follow each other. Readings keep their bytes without
// a copy: nobody changes them any more.
func (p *Port) whole(frames []byte, at line.Instant) {
	p.frames += int64(len(frames) / p.cut.length)
	for _, c := range p.watched {
		c.reading.Sent, c.reading.At = at, at
	}
	text := unsafe.String(unsafe.SliceData(frames), len(frames))
	for n := p.cut.length; len(frames) >= n; frames, text = frames[n:], text[n:] {
		frame := frames[:n:n]
		if p.frame.Sequence != nil && !p.count(frame) {
			p.refuse(bench.Reading{Sent: at, At: at, Frame: text[:n]}, ErrRepeated)
			continue
		}
		for _, c := range p.watched {
			c.frame(frame, text[:n])
		}
	}
}

// quickly takes frames that are not counted and hold one number, and returns
// how many bytes it took. The last whole frame is left to the cutter, which
// knows what it waits for.
func (p *Port) quickly(data []byte, at line.Instant) (used int) {
	c := p.watched[0]
	r, n := &c.reading, p.cut.length
	r.Sent, r.At, r.Sequence, r.HasSequence = at, at, 0, false
	text := unsafe.String(unsafe.SliceData(data), len(data))
	factor, offset, take := c.unit.Factor, c.unit.Offset, c.take
	var numbers [batch]float64
	for {
		k := c.reader.Take(data[used:], numbers[:]) - 1
		if k <= 0 {
			return used
		}
		p.frames += int64(k)
		for _, x := range numbers[:k] {
			r.Frame = text[used : used+n]
			used += n
			r.Value.SI, r.Value.Stated = x*factor+offset, x // as Unit.ToSI does
			if err := take(r, nil); err != nil {
				p.keep(err)
			}
		}
	}
}

// frame hands over the channel's number in a whole frame.
func (c *Channel) frame(frame []byte, text string) {
	r, p := &c.reading, c.port
	x, err := c.reader.Number(frame)
	if err != nil {
		p.keep(c.take(&bench.Reading{Sent: r.Sent, At: r.At, Frame: text, Sequence: p.total, HasSequence: p.counted},
			fmt.Errorf("read %s: %w", p.line.Name(), err)))
		return
	}
	r.Frame, r.Sequence, r.HasSequence = text, p.total, p.counted
	r.Value.SI, r.Value.Stated = c.unit.ToSI(x), x
	if err := c.take(r, nil); err != nil {
		p.keep(err)
	}
}

// count takes a frame's sequence number; false when it is the last one's. A
// gap as long as the numbers reach, or longer, looks shorter by that.
func (p *Port) count(frame []byte) bool {
	number, modulus := p.cut.r.Sequence(frame)
	step := (number - p.number) & (modulus - 1)
	first := !p.counted
	p.counted, p.number = true, number
	if first {
		p.total = max(p.total+1, number)
		return true
	}
	p.total += step
	return step != 0
}

var _ bench.Streaming = (*Channel)(nil)
