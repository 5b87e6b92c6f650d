// Package modbus drives instruments that hold their numbers in the registers of
// a Modbus RTU station: read with functions 03 and 04, written with 06 and 16.
// Which register holds what stands in the bench file; none is compiled in.
//
// It is not a simulation, it opens no port and does not judge what it reads. It
// never speaks to all stations at once.
//
// Order of use: open a line.Line with LineSettings, make an Instrument, a
// Source or a Valve on it, Identify it, then use it.
package modbus

import (
	"context"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"kymobench/bench"
	"kymobench/bench/instruments/asked"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// Settings of an instrument, as the bench file has them. Questions are those
// of ParseQuestion, commands those of ParseCommand; "" is none.
type Settings struct {
	Station  int
	Order    string // of the bytes of numbers, one of quantity.LayoutOrders
	Identify string // question: a text, or a whole number
	Identity string // what it is answered, without blanks and zero bytes at its end
	Uptime   string // question: seconds
	Within   time.Duration

	// Of a manometer alone.
	Read          string // question
	Unit          string
	Scale, Offset float64 // pressure = Scale x register + Offset; Scale 0 is 1
	OverRange     []int64 // registers' numbers that say "out of range"
	Zero          string  // command
}

// Field says where the number stands in the answer to Read: records keep the
// whole answer as their text.
func (s Settings) Field() (quantity.Field, error) {
	q, err := ParseQuestion(s.Read)
	if err == nil && q.Type == "" {
		err = fmt.Errorf("%q asks for a text, not for a number", s.Read)
	}
	if err != nil {
		return quantity.Field{}, err
	}
	n := 2 * q.registers()
	return quantity.Field{Unit: s.Unit, Frame: quantity.Frame{
		Length: 5 + n, Sync: fmt.Sprintf("%02X%02X%02X", s.Station, q.function(), n),
		Number: quantity.Layout{Type: q.Type, At: 3, Order: s.order(n)},
		Scale:  s.Scale, Offset: s.Offset, Over: s.OverRange,
		Check: "crc-16/modbus", CheckAt: 3 + n, CheckLittle: true,
	}}, nil
}

// order is the order of the bytes of a number of n bytes: halves that are
// exchanged are those of two registers.
func (s Settings) order(n int) string {
	if n == 2 {
		return strings.TrimSuffix(s.Order, "-swapped")
	}
	return s.Order
}

// Instrument is a bench.Manometer; without Read and Zero only the
// bench.Identified half of one. Its waits are engine waits: other ports go on.
type Instrument struct {
	*asked.Asker
	wire
	s        Settings
	identify Question
	uptime   *number
	read     *number
	unit     quantity.Unit
	zero     *Command
}

// number is a question answered with one number.
type number struct {
	question string
	frame    *quantity.FrameReader
}

// New makes an Instrument on a line, opened with LineSettings, that is its own.
// It refuses what it cannot read in its Settings.
func New(l *line.Line, s Settings) (*Instrument, error) {
	w, err := newWire(l.Name(), s.Station)
	if err != nil {
		return nil, err
	}
	i := &Instrument{wire: w, s: s}
	to := asked.Settings{Identity: s.Identity, Within: s.Within, Shown: func(b string) string { return fmt.Sprintf("% X", b) }}
	if s.Identify != "" {
		if i.identify, err = ParseQuestion(s.Identify); err != nil {
			return nil, fmt.Errorf("%s: %w", l.Name(), err)
		}
		to.Identify = w.question(i.identify)
		to.Known = func(answer string) bool {
			text, err := i.identityIn(answer)
			return err == nil && text == s.Identity
		}
	}
	i.Asker = asked.New(l, to)
	if s.Uptime != "" {
		seconds := s
		seconds.Read, seconds.Scale, seconds.Offset, seconds.OverRange = s.Uptime, 0, 0, nil
		if i.uptime, err = i.number(seconds); err != nil {
			return nil, err
		}
	}
	if s.Read != "" {
		if i.read, err = i.number(s); err != nil {
			return nil, err
		}
		var ok bool
		if i.unit, ok = quantity.UnitNamed(s.Unit); !ok {
			return nil, fmt.Errorf("%s: %q is no unit known here", l.Name(), s.Unit)
		}
	}
	if s.Zero != "" {
		c, err := ParseCommand(s.Zero)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", l.Name(), err)
		}
		i.zero = &c
	}
	return i, nil
}

func (i *Instrument) number(s Settings) (*number, error) {
	field, err := s.Field()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", i.name, err)
	}
	q, err := ParseQuestion(s.Read)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", i.name, err)
	}
	frame, err := field.Frame.Reader()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", i.name, err)
	}
	return &number{i.question(q), frame}, nil
}

// Identify asks who it is.
func (i *Instrument) Identify(ctx context.Context) (string, error) {
	answer, err := i.Asker.Identify(ctx)
	if err != nil {
		return "", err
	}
	return i.identityIn(answer)
}

func (i *Instrument) identityIn(answer string) (string, error) {
	data, err := i.registersOf(i.question(i.identify), answer, i.identify.registers())
	if err != nil {
		return "", err
	}
	if i.identify.Type == "" {
		return strings.TrimRight(data[:i.identify.Text], " \x00"), nil
	}
	f := quantity.Frame{Length: 1 + len(data), Sync: "00", Number: quantity.Layout{Type: i.identify.Type, At: 1, Order: i.s.order(len(data))}}
	r, err := f.Reader()
	if err != nil {
		return "", err
	}
	x, err := r.Number([]byte("\x00" + data))
	if err != nil {
		return "", err
	}
	return strconv.FormatFloat(x, 'f', -1, 64), nil
}

// ask asks for a number.
func (i *Instrument) ask(ctx context.Context, n *number) (line.Answer, float64, error) {
	var x float64
	a, err := i.Ask(ctx, n.question, func(answer string) (err error) {
		if _, err = i.registersOf(n.question, answer, n.frame.Length()/2-2); err == nil {
			x, err = n.frame.Number([]byte(answer))
		}
		return err
	})
	return a, x, err
}

// Read asks for one reading; its text is the answer in hexadecimal digits.
func (i *Instrument) Read(ctx context.Context) (bench.Reading, error) {
	if i.read == nil {
		return bench.Reading{}, fmt.Errorf("read %s: %w", i.name, bench.ErrNotStated)
	}
	a, x, err := i.ask(ctx, i.read)
	if err != nil {
		return bench.Reading{}, err
	}
	return bench.Reading{
		Sent: a.Sent, At: a.At, Text: string(quantity.AppendText(nil, []byte(a.Text))),
		Value: quantity.Value{SI: i.unit.ToSI(x), Stated: x, Unit: i.unit},
	}, nil
}

// longestUptime is a hundred years; more is no uptime.
const longestUptime = 100 * 365 * 24 * time.Hour

// Uptime asks how long the instrument has been on.
func (i *Instrument) Uptime(ctx context.Context) (time.Duration, error) {
	if i.uptime == nil {
		return 0, fmt.Errorf("uptime of %s: %w", i.name, bench.ErrNotStated)
	}
	_, x, err := i.ask(ctx, i.uptime)
	if err == nil && !(x >= 0 && x <= longestUptime.Seconds()) {
		err = fmt.Errorf("read %s: %v s is no time since power-on", i.name, x)
	}
	if err != nil {
		return 0, err
	}
	return quantity.Span(x).Duration(), nil
}

// Zero makes the instrument take the present pressure for zero.
func (i *Instrument) Zero(ctx context.Context) error {
	if i.zero == nil {
		return fmt.Errorf("zero %s: %w", i.name, bench.ErrNotStated)
	}
	return i.write(ctx, *i.zero, i.zero.Value)
}

// write writes a number and waits until the instrument has confirmed it.
func (i *Instrument) write(ctx context.Context, c Command, x float64) error {
	data, err := c.bytes(x, i.s.Order)
	if err != nil {
		return fmt.Errorf("write to %s: %w", i.name, err)
	}
	command := i.command(c, data)
	_, err = i.Ask(ctx, command, func(answer string) error { return i.written(command, answer) })
	return err
}

// pressure is what a command writes to ask for a pressure.
func (c Command) pressure(p quantity.Pressure) float64 { return c.Value * c.Unit.FromSI(float64(p)) }

// SourceSettings of a pressure source.
type SourceSettings struct {
	Settings
	Set  string // command with a place for the pressure
	Hold string
	Vent string
	// Lowest and Highest pressure that Set may ask for; both 0: no bound here.
	Lowest, Highest quantity.Pressure
}

// Source is a bench.PressureSource.
type Source struct {
	*Instrument
	s               SourceSettings
	set, hold, vent Command
	now             string // the message that vents
}

// NewSource makes a Source on a line that is its own. It refuses a Set without
// a place for the pressure, and a source that cannot be vented.
func NewSource(l *line.Line, s SourceSettings) (*Source, error) {
	i, err := New(l, s.Settings)
	if err != nil {
		return nil, err
	}
	o := &Source{Instrument: i, s: s}
	for _, c := range []struct {
		text string
		into *Command
	}{{s.Set, &o.set}, {s.Vent, &o.vent}, {s.Hold, &o.hold}} {
		if c.text == "" && c.into == &o.hold {
			continue
		}
		if *c.into, err = ParseCommand(c.text); err != nil {
			return nil, fmt.Errorf("%s: %w", l.Name(), err)
		}
		if isSet := c.into == &o.set; isSet != (c.into.Unit.Name != "") {
			return nil, fmt.Errorf("%s: the command that sets the pressure has one place for it, as in \"holding 10 float32 = {kPa}\", and no other has", l.Name())
		}
	}
	if o.now, err = i.fixed(o.vent); err != nil {
		return nil, err
	}
	return o, nil
}

// fixed is the message of a command that is always the same.
func (i *Instrument) fixed(c Command) (string, error) {
	data, err := c.bytes(c.Value, i.s.Order)
	if err != nil {
		return "", fmt.Errorf("%s: %w", i.name, err)
	}
	return i.command(c, data), nil
}

// Set asks for a pressure.
func (s *Source) Set(ctx context.Context, p quantity.Pressure) error {
	bounded := s.s.Lowest != 0 || s.s.Highest != 0
	if x := float64(p); math.IsNaN(x) || math.IsInf(x, 0) || bounded && (p < s.s.Lowest || p > s.s.Highest) {
		return fmt.Errorf("set %s: %v %s is not allowed", s.name, s.set.Unit.FromSI(x), s.set.Unit.Name)
	}
	return s.write(ctx, s.set, s.set.pressure(p))
}

// Hold shuts the source off from the volume.
func (s *Source) Hold(ctx context.Context) error {
	if s.s.Hold == "" {
		return fmt.Errorf("hold %s: %w", s.name, bench.ErrNotStated)
	}
	return s.write(ctx, s.hold, s.hold.Value)
}

// Vent opens the volume to atmosphere.
func (s *Source) Vent(ctx context.Context) error { return s.write(ctx, s.vent, s.vent.Value) }

// VentNow sends the vent command at once and waits for nothing; it may be
// called from inside a handler.
func (s *Source) VentNow() { s.Line.Fire(s.now) }

// ValveSettings of a fast valve.
type ValveSettings struct {
	Settings
	Release string
	Shut    string
}

// Valve is a bench.Valve.
type Valve struct {
	*Instrument
	release, shut Command
	now           string // the message that releases
}

// NewValve makes a Valve on a line that is its own.
func NewValve(l *line.Line, s ValveSettings) (*Valve, error) {
	i, err := New(l, s.Settings)
	if err != nil {
		return nil, err
	}
	v := &Valve{Instrument: i}
	if v.release, err = ParseCommand(s.Release); err == nil {
		v.shut, err = ParseCommand(s.Shut)
	}
	if err == nil && (v.release.Unit.Name != "" || v.shut.Unit.Name != "") {
		err = fmt.Errorf("a valve is told no pressure")
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", l.Name(), err)
	}
	if v.now, err = i.fixed(v.release); err != nil {
		return nil, err
	}
	return v, nil
}

// Release opens the fast valve.
func (v *Valve) Release(ctx context.Context) error { return v.write(ctx, v.release, v.release.Value) }

// Shut closes it.
func (v *Valve) Shut(ctx context.Context) error { return v.write(ctx, v.shut, v.shut.Value) }

// ReleaseNow sends the release command at once and waits for nothing; it may
// be called from inside a handler.
func (v *Valve) ReleaseNow() { v.Line.Fire(v.now) }

// What the rig wants.
var (
	_ bench.Manometer      = (*Instrument)(nil)
	_ bench.PressureSource = (*Source)(nil)
	_ bench.Valve          = (*Valve)(nil)
)
