// Package lines drives instruments that send one number in a line of text, by
// themselves, for ever.
//
// It is not asked, it opens no port and does not judge what it reads; what the
// numbers are worth in time is the run's matter.
//
// Order of use: open a line.Line, make an Instrument on it, Watch it.
package lines

import (
	"errors"
	"fmt"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// Settings of an instrument.
type Settings struct {
	// Field is where the number stands in the line. State its width where the
	// instrument keeps one: a lost or doubled character is then refused, which
	// a number of any width cannot show.
	Field quantity.Field
}

// ErrLong: a line was longer than the line's cap and was dropped.
var ErrLong = errors.New("a line is too long")

// Port is a line that one or more instruments share, each with its own column.
type Port struct {
	line    *line.Line
	cut     cutter
	open    bool // the line hands its bytes over
	watched []*Instrument
	err     error // the first of this piece
}

// Instrument is a bench.Streaming.
type Instrument struct {
	port    *Port
	field   *quantity.Parser
	unit    quantity.Unit
	reading bench.Reading
	take    func(r *bench.Reading, err error) error // nil until it is watched
}

// NewPort makes a Port of a line that is its own.
func NewPort(l *line.Line) *Port { return &Port{line: l} }

// New makes an Instrument on a line that is its own. It refuses a unit that it
// does not know.
func New(l *line.Line, s Settings) (*Instrument, error) { return NewPort(l).Instrument(s) }

// Instrument makes one of the port's instruments. It refuses a unit or a
// checksum that it does not know.
func (p *Port) Instrument(s Settings) (*Instrument, error) {
	unit, ok := quantity.UnitNamed(s.Field.Unit)
	if !ok {
		return nil, fmt.Errorf("%s: %q is no unit known here", p.line.Name(), s.Field.Unit)
	}
	field, err := s.Field.Parser()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", p.line.Name(), err)
	}
	return &Instrument{port: p, field: field, unit: unit, reading: bench.Reading{Value: quantity.Value{Unit: unit}}}, nil
}

// Watch hands every line to take from now on, in the order of arrival: a
// reading, or a line that is not one, with its text and err set. An error of
// take ends the engine's present wait.
func (i *Instrument) Watch(take func(r *bench.Reading, err error) error) {
	if i.take == nil {
		i.port.watched = append(i.port.watched, i)
	}
	i.take = take
	if !i.port.open {
		i.port.open = true
		i.port.line.OnBytes(i.port.bytes)
	}
}

// bytes takes what came at once.
func (p *Port) bytes(b line.Bytes) error {
	p.err = nil
	if b.Hole {
		p.cut.lose()
	}
	for _, i := range p.watched {
		i.reading.Sent, i.reading.At = b.At, b.At
	}
	rest := asText(b.Data)
	if p.cut.part != "" || p.cut.over || p.cut.skip {
		text, after, long, ok := p.cut.first(rest)
		if !ok {
			return nil
		}
		rest = after
		p.hand(text, long)
	}
	for {
		if len(p.watched) == 1 {
			rest = p.watched[0].run(rest)
		}
		n := end(rest)
		if n < 0 {
			break
		}
		if n > 0 {
			p.hand(rest[:n], false)
		}
		rest = rest[n+1:]
	}
	p.cut.begin(rest)
	return p.err
}

// hand gives a line to everyone who watches; the first error is kept when all
// have had it.
func (p *Port) hand(text string, long bool) {
	if long = long || len(text) > line.LongestLine; long {
		text = ""
	} else if text == "" {
		return
	}
	for _, i := range p.watched {
		if err := i.line(text, long); err != nil && p.err == nil {
			p.err = err
		}
	}
}

// run takes lines that are nothing but a number, as long as they come, and
// returns what is left.
func (i *Instrument) run(rest string) string {
	r, field, factor, offset, take := &i.reading, i.field, i.unit.Factor, i.unit.Offset, i.take
	for {
		x, n := field.Line(rest)
		if n == 0 {
			return rest
		}
		r.Text = rest[:n]
		r.Value.SI, r.Value.Stated = x*factor+offset, x // as Unit.ToSI does
		if err := take(r, nil); err != nil && i.port.err == nil {
			i.port.err = err
		}
		if rest[n] == '\r' && n+1 < len(rest) && rest[n+1] == '\n' {
			n++
		}
		rest = rest[n+1:]
	}
}

func (i *Instrument) line(text string, long bool) error {
	r := &i.reading
	r.Text = text
	x, err := i.field.Number(text)
	if err != nil || long {
		return i.refuse(err, long)
	}
	r.Value.SI, r.Value.Stated = i.unit.ToSI(x), x
	return i.take(r, nil)
}

// refuse hands over a line that is no reading.
func (i *Instrument) refuse(err error, long bool) error {
	if long {
		err = ErrLong
	}
	r := i.reading
	r.Value = quantity.Value{}
	return i.take(&r, fmt.Errorf("read %s: %w", i.port.line.Name(), err))
}

var _ bench.Streaming = (*Instrument)(nil)
