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
	"strings"

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

// Instrument is a bench.Streaming.
type Instrument struct {
	port  *Port
	place int // in the port's list
	line  *line.Line
	field *quantity.Parser
	unit  quantity.Unit
	texts strings.Builder
}

// ErrLong: a line was longer than the line's cap and was dropped.
var ErrLong = errors.New("a line is too long")

// Port is a line that one or more instruments share, each with its own column.
type Port struct {
	line    *line.Line
	watched []func(line.Frame) error // nil until its instrument is watched
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
	p.watched = append(p.watched, nil)
	return &Instrument{port: p, place: len(p.watched) - 1, line: p.line, field: field, unit: unit}, nil
}

// watch hands every line to everyone who watches; the first error is returned
// when all have had it.
func (p *Port) watch(place int, f func(line.Frame) error) {
	p.watched[place] = f
	if len(p.watched) == 1 {
		p.line.OnFrame(f)
		return
	}
	p.line.OnFrame(func(frame line.Frame) (first error) {
		for _, f := range p.watched {
			if f == nil {
				continue
			}
			if err := f(frame); err != nil && first == nil {
				first = err
			}
		}
		return first
	})
}

// Watch hands every line to take from now on, in the order of arrival: a
// reading, or a line that is not one, with its text and err set. An error of
// take ends the engine's present wait.
func (i *Instrument) Watch(take func(r bench.Reading, err error) error) {
	i.port.watch(i.place, func(f line.Frame) error {
		r := bench.Reading{Sent: f.At, At: f.At}
		if f.Long {
			return take(r, fmt.Errorf("read %s: %w", i.line.Name(), ErrLong))
		}
		r.Text = i.text(f.Data)
		x, err := i.field.Number(r.Text)
		if err != nil {
			return take(r, fmt.Errorf("read %s: %w", i.line.Name(), err))
		}
		r.Value = quantity.Value{SI: i.unit.ToSI(x), Stated: x, Unit: i.unit}
		return take(r, nil)
	})
}

// textBlock is how many bytes of text share one piece of memory.
const textBlock = 4096

// text copies a line into a string. Strings made of one piece of memory each
// would be the larger part of the work; here some hundred share one, which is
// freed when the last of them is. Readings are kept in runs, so little is held
// for nothing.
func (i *Instrument) text(data []byte) string {
	if i.texts.Cap()-i.texts.Len() < len(data) {
		i.texts = strings.Builder{}
		i.texts.Grow(max(textBlock, len(data)))
	}
	from := i.texts.Len()
	i.texts.Write(data)
	return i.texts.String()[from:]
}

var _ bench.Streaming = (*Instrument)(nil)
