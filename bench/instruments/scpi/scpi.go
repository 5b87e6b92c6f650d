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
	"errors"
	"fmt"
	"strings"
	"time"

	"kymobench/bench"
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
	Within   time.Duration

	// Of a manometer alone.
	Read  string         // question answered with one number
	Field quantity.Field // where the number stands in the answer
	Zero  string         // command
}

// defaultWithin is how long an answer may take when nothing is stated.
const defaultWithin = 2 * time.Second

// Instrument is a bench.Manometer; without Read and Zero only the
// bench.Identified half of one. Its waits are engine waits: other ports go on.
type Instrument struct {
	line *line.Line
	s    Settings
	unit quantity.Unit
}

// New makes an Instrument on a line that is its own.
func New(l *line.Line, s Settings) *Instrument {
	if s.Within <= 0 {
		s.Within = defaultWithin
	}
	unit, _ := quantity.UnitNamed(s.Field.Unit) // an unknown one is refused by Read
	return &Instrument{line: l, s: s, unit: unit}
}

// IdentityError is an instrument that is not the one expected.
type IdentityError struct{ Name, Want, Got string }

func (e *IdentityError) Error() string {
	return fmt.Sprintf("%s says it is %q, the bench file expects %q", e.Name, e.Got, e.Want)
}

// Identify clears the instrument and asks who it is. An answer that is not the
// identity expected is believed only when it is given again on a line made
// sure: it could be a late answer to somebody else's question.
func (i *Instrument) Identify(ctx context.Context) (string, error) {
	if i.s.Identify == "" {
		return "", fmt.Errorf("identify %s: %w", i.line.Name(), bench.ErrNotStated)
	}
	if i.s.Clear != "" {
		if err := i.line.Send(ctx, i.s.Clear, i.s.Within); err != nil {
			return "", err
		}
	}
	a, err := i.line.Ask(ctx, i.s.Identify, i.s.Within)
	if err == nil && i.known(a.Text) {
		return a.Text, nil
	}
	if err != nil && !mayHelp(err) {
		return "", err
	}
	if err := i.resync(ctx); err != nil {
		return "", err
	}
	return i.s.Identity, nil
}

// known says that a text is the identity.
func (i *Instrument) known(text string) bool { return text == i.s.Identity }

// mayHelp says that resynchronising may help against err.
func mayHelp(err error) bool {
	return errors.Is(err, line.ErrDeadline) || errors.Is(err, line.ErrDoubtful) || errors.Is(err, line.ErrLong)
}

// resync makes the line sure by the identity.
func (i *Instrument) resync(ctx context.Context) error {
	err := i.line.Resync(ctx, i.s.Identify, i.known)
	var other *line.UnrecognisedError
	if errors.As(err, &other) {
		return &IdentityError{Name: i.line.Name(), Want: i.s.Identity, Got: other.Text}
	}
	return err
}

// GarbledError is an answer that could not be understood however often it was
// asked for; Texts are the answers as received.
type GarbledError struct {
	Name, Question string
	Texts          []string
	Err            error // what was wrong with the last
}

func (e *GarbledError) Error() string {
	return fmt.Sprintf("read %s: %q was answered %q: %v", e.Name, e.Question, e.Texts, e.Err)
}

// Unwrap returns what was wrong with the last answer.
func (e *GarbledError) Unwrap() error { return e.Err }

// Attempts at one question: a garbled answer is asked for again twice, the
// second time on a line made sure; after a time-out the line is made sure and
// the question asked once more.
const (
	garbledTries = 3
	lateTries    = 2
)

// ask asks until parse takes the answer. An *OverRangeError of parse is an
// answer too, and ends the asking.
func (i *Instrument) ask(ctx context.Context, question string, parse func(text string) error) (line.Answer, error) {
	var texts []string
	late := 0
	for {
		a, err := i.line.Ask(ctx, question, i.s.Within)
		if err == nil {
			if err = parse(a.Text); err == nil {
				return a, nil
			}
			var over *OverRangeError
			if errors.As(err, &over) {
				return line.Answer{}, err
			}
			texts = append(texts, a.Text)
			if len(texts) == garbledTries {
				return line.Answer{}, &GarbledError{i.line.Name(), question, texts, err}
			}
			if len(texts) < garbledTries-1 {
				continue
			}
		} else {
			late++
			if !mayHelp(err) || late == lateTries {
				return line.Answer{}, err
			}
		}
		if e := i.resync(ctx); e != nil {
			return line.Answer{}, errors.Join(err, e)
		}
	}
}

// Uptime asks how long the instrument has been on.
func (i *Instrument) Uptime(ctx context.Context) (time.Duration, error) {
	if i.s.Uptime == "" {
		return 0, fmt.Errorf("uptime of %s: %w", i.line.Name(), bench.ErrNotStated)
	}
	var up time.Duration
	_, err := i.ask(ctx, i.s.Uptime, func(text string) error {
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
