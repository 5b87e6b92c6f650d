// Package scpi drives instruments that are asked in lines of text with the
// manners of SCPI-99 and IEEE 488.2: a question ends in "?", an error queue
// can be asked, numbers come as NR1, NR2 or NR3. Every word sent stands in the
// bench file; none is compiled in.
//
// It is not a simulation, it opens no port and does not judge what it reads.
//
// Order of use: open a line.Line, make an Instrument, a Source or a Valve on
// it, Identify it, then use it.
package scpi

import (
	"context"
	"fmt"
	"strings"
	"time"

	"kymobench/bench"
	"kymobench/bench/instruments/asked"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// Settings of an instrument's dialogue, as the bench file has them.
type Settings struct {
	Identify string // question; its answer is Identity to the letter
	Identity string
	Uptime   string // question answered in seconds; "" cannot be asked
	Clear    string // command sent before the first question; "" for none
	Errors   string // question asked after a setting until 0 leads the answer; "" for none
	// Acknowledged is what a command is answered; "" when nothing is.
	Acknowledged string
	Within       time.Duration

	// Of a manometer alone.
	Read  string         // question answered with one number
	Field quantity.Field // where the number stands in the answer
	Zero  string         // command
}

// Instrument is a bench.Manometer; without Read and Zero only the
// bench.Identified half of one. Its waits are engine waits: other ports go on.
type Instrument struct {
	*asked.Asker
	s      Settings
	unit   quantity.Unit
	number *quantity.Parser
	wrong  error // why nothing can be read
}

// New makes an Instrument on a line that is its own.
func New(l *line.Line, s Settings) *Instrument {
	i := &Instrument{s: s, Asker: asked.New(l, asked.Settings{
		Identify: s.Identify, Identity: s.Identity, Within: s.Within, Known: func(text string) bool { return text == s.Identity },
	})}
	var known bool
	if i.unit, known = quantity.UnitNamed(s.Field.Unit); !known {
		i.wrong = fmt.Errorf("%q is no unit known here", s.Field.Unit)
	}
	if number, err := s.Field.Parser(); err != nil {
		i.wrong = err
	} else {
		i.number = number
	}
	return i
}

// Identify clears the instrument and asks who it is.
func (i *Instrument) Identify(ctx context.Context) (string, error) {
	if i.s.Identify != "" && i.s.Clear != "" {
		if err := i.Line.Send(ctx, i.s.Clear, i.Within()); err != nil {
			return "", err
		}
	}
	return i.Asker.Identify(ctx)
}

// Uptime asks how long the instrument has been on.
func (i *Instrument) Uptime(ctx context.Context) (time.Duration, error) {
	if i.s.Uptime == "" {
		return 0, fmt.Errorf("uptime of %s: %w", i.Line.Name(), bench.ErrNotStated)
	}
	var up time.Duration
	_, err := i.Ask(ctx, i.s.Uptime, func(text string) error {
		x, err := quantity.ParseDecimal(strings.TrimLeft(text, " "))
		if err == nil && (x < 0 || x > longestUptime.Seconds()) {
			err = fmt.Errorf("%q is no time since power-on", text)
		}
		up = quantity.Span(x).Duration()
		return err
	})
	if err != nil {
		return 0, err
	}
	return up, nil
}

// longestUptime is a hundred years; more is no uptime.
const longestUptime = 100 * 365 * 24 * time.Hour

// What the rig wants.
var (
	_ bench.Manometer      = (*Instrument)(nil)
	_ bench.PressureSource = (*Source)(nil)
	_ bench.Valve          = (*Valve)(nil)
)
