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
	"strings"

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
	channels []*Channel
	open     bool // the line hands its bytes over
	err      error

	counted bool   // a sequence number was seen
	number  uint64 // the last one, as it stood
	total   uint64 // counted on over its wraps
	frames  int64
	texts   strings.Builder
}

// Settings of a channel.
type Settings struct {
	// Field says where the number stands in the frame.
	Field quantity.Field
}

// Channel is one number in the port's frames: a bench.Streaming.
type Channel struct {
	port   *Port
	reader *quantity.FrameReader
	unit   quantity.Unit
	take   func(r bench.Reading, err error) error // nil until it is watched
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
		p.frame, p.cut = s.Field.Frame, newCutter(reader)
	} else if !reflect.DeepEqual(shell(p.frame), shell(s.Field.Frame)) {
		return nil, fmt.Errorf("%s: two channels are said to stand in different frames", p.line.Name())
	}
	c := &Channel{port: p, reader: reader, unit: unit}
	p.channels = append(p.channels, c)
	return c, nil
}

// shell is a frame without its number.
func shell(f quantity.Frame) quantity.Frame {
	f.Number, f.Scale, f.Offset, f.Over = quantity.Layout{}, 0, 0, nil
	return f
}

// Watch hands the channel's reading of every frame to take from now on, in the
// order of arrival, or what came instead of one, with its bytes as text and err
// set. An error of take ends the engine's present wait.
func (c *Channel) Watch(take func(r bench.Reading, err error) error) {
	c.take = take
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
	p.cut.take(b.Data, b.At, p.whole, p.damage)
	return p.err
}

func (p *Port) damage(data []byte, at line.Instant) {
	err := fmt.Errorf("read %s: %w", p.line.Name(), ErrDamaged)
	p.hand(bench.Reading{Sent: at, At: at, Text: p.text(data)}, err)
}

func (p *Port) hand(r bench.Reading, err error) {
	for _, c := range p.channels {
		if c.take != nil {
			p.keep(c.take(r, err))
		}
	}
}

func (p *Port) keep(err error) {
	if err != nil && p.err == nil {
		p.err = err
	}
}

func (p *Port) whole(frame []byte, at line.Instant) {
	p.frames++
	r := bench.Reading{Sent: at, At: at, Text: p.text(frame)}
	if p.frame.Sequence != nil {
		if !p.count(frame) {
			p.hand(r, fmt.Errorf("read %s: %w", p.line.Name(), ErrRepeated))
			return
		}
		r.Sequence, r.HasSequence = p.total, true
	}
	for _, c := range p.channels {
		if c.take == nil {
			continue
		}
		x, err := c.reader.Number(frame)
		if err != nil {
			p.keep(c.take(r, fmt.Errorf("read %s: %w", p.line.Name(), err)))
			continue
		}
		r.Value = quantity.Value{SI: c.unit.ToSI(x), Stated: x, Unit: c.unit}
		p.keep(c.take(r, nil))
		r.Value = quantity.Value{}
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

// textBlock is how many bytes of text share one piece of memory.
const textBlock = 4096

// text turns bytes into their text; texts share pieces of memory, as readings
// are kept in runs.
func (p *Port) text(data []byte) string {
	if n := 2 * len(data); p.texts.Cap()-p.texts.Len() < n {
		p.texts = strings.Builder{}
		p.texts.Grow(max(textBlock, n))
	}
	from := p.texts.Len()
	const digits = "0123456789ABCDEF"
	for _, b := range data {
		p.texts.WriteByte(digits[b>>4])
		p.texts.WriteByte(digits[b&15])
	}
	return p.texts.String()[from:]
}

var _ bench.Streaming = (*Channel)(nil)
