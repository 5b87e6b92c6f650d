// Package asked asks instruments: one question at a time, again when the answer
// is not understood, and on a line made sure when an answer did not come.
//
// It is no driver: what is asked and what an answer means is the matter of the
// families that are asked (scpi, modbus), which use it.
//
// Order of use: make an Asker on a line.Line, Identify, then Ask.
package asked

import (
	"context"
	"errors"
	"fmt"
	"strconv"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// Settings of an Asker.
type Settings struct {
	Identify string                   // question, as it is sent; "" when there is none
	Identity string                   // who is expected, as errors name it
	Known    func(answer string) bool // the answer names who is expected
	Within   time.Duration            // an answer comes within this; 0 is 2 s
	Shown    func(bytes string) string
}

// within is how long an answer may take when nothing is stated.
const within = 2 * time.Second

// Asker asks on one line that is its own. Its waits are engine waits: other
// ports go on.
type Asker struct {
	Line *line.Line
	s    Settings
}

// New makes an Asker.
func New(l *line.Line, s Settings) *Asker {
	if s.Within <= 0 {
		s.Within = within
	}
	if s.Shown == nil {
		s.Shown = strconv.Quote
	}
	return &Asker{l, s}
}

// Within is how long an answer may take.
func (a *Asker) Within() time.Duration { return a.s.Within }

// IdentityError is an instrument that is not the one expected.
type IdentityError struct{ Name, Want, Got string }

func (e *IdentityError) Error() string {
	return fmt.Sprintf("%s says it is %s, the bench file expects %q", e.Name, e.Got, e.Want)
}

// OverRangeError is an instrument's statement that it cannot measure what is
// there.
type OverRangeError struct{ Name, Text string }

func (e *OverRangeError) Error() string {
	return fmt.Sprintf("read %s: out of its range, it answered %s", e.Name, e.Text)
}

// Unwrap returns quantity.ErrOverRange.
func (e *OverRangeError) Unwrap() error { return quantity.ErrOverRange }

// GarbledError is an answer that could not be understood however often it was
// asked for; Texts are the answers as received, as they are shown.
type GarbledError struct {
	Name, Question string
	Texts          []string
	Err            error // what was wrong with the last
}

func (e *GarbledError) Error() string {
	return fmt.Sprintf("read %s: %s was answered %s: %v", e.Name, e.Question, e.Texts, e.Err)
}

// Unwrap returns what was wrong with the last answer.
func (e *GarbledError) Unwrap() error { return e.Err }

// RefusedError is an instrument's own refusal of what it was asked or told;
// asking again does not help.
type RefusedError struct{ Name, Question, Why string }

func (e *RefusedError) Error() string {
	return fmt.Sprintf("%s refused %s: %s", e.Name, e.Question, e.Why)
}

// Identify asks who is there and returns the answer. One that does not name
// who is expected is believed only when it is given again on a line made sure:
// it could be a late answer to somebody else's question.
func (a *Asker) Identify(ctx context.Context) (string, error) {
	if a.s.Identify == "" {
		return "", fmt.Errorf("identify %s: %w", a.Line.Name(), bench.ErrNotStated)
	}
	answer, err := a.Line.Ask(ctx, a.s.Identify, a.s.Within)
	if err == nil && a.s.Known(answer.Text) {
		return answer.Text, nil
	}
	if err != nil && !mayHelp(err) {
		return "", err
	}
	var known string
	err = a.resync(ctx, &known)
	return known, err
}

// mayHelp says that making the line sure may help against err.
func mayHelp(err error) bool {
	return errors.Is(err, line.ErrDeadline) || errors.Is(err, line.ErrDoubtful) || errors.Is(err, line.ErrLong)
}

// resync makes the line sure by the identity, or where nobody can be asked for
// it by quiet alone.
func (a *Asker) resync(ctx context.Context, answer *string) error {
	if a.s.Identify == "" {
		return a.Line.Quiet(ctx)
	}
	err := a.Line.Resync(ctx, a.s.Identify, func(text string) bool {
		*answer = text
		return a.s.Known(text)
	})
	var other *line.UnrecognisedError
	if err != nil {
		*answer = ""
	}
	if errors.As(err, &other) {
		return &IdentityError{Name: a.Line.Name(), Want: a.s.Identity, Got: a.s.Shown(other.Text)}
	}
	return err
}

// Attempts at one question: a garbled answer is asked for again twice, the
// second time on a line made sure; after a time-out the line is made sure and
// the question asked once more.
const (
	garbledTries = 3
	lateTries    = 2
)

// Ask asks until parse takes the answer. An answer for which parse returns
// quantity.ErrOverRange or a *RefusedError is understood too, and ends the
// asking with that error.
func (a *Asker) Ask(ctx context.Context, question string, parse func(text string) error) (line.Answer, error) {
	var texts []string
	late := 0
	for {
		answer, err := a.Line.Ask(ctx, question, a.s.Within)
		if err == nil {
			if err = parse(answer.Text); err == nil {
				return answer, nil
			}
			var refused *RefusedError
			switch {
			case errors.Is(err, quantity.ErrOverRange):
				return line.Answer{}, &OverRangeError{a.Line.Name(), a.s.Shown(answer.Text)}
			case errors.As(err, &refused):
				return line.Answer{}, err
			}
			texts = append(texts, a.s.Shown(answer.Text))
			if len(texts) == garbledTries {
				return line.Answer{}, &GarbledError{a.Line.Name(), a.s.Shown(question), texts, err}
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
		var known string
		if e := a.resync(ctx, &known); e != nil {
			return line.Answer{}, errors.Join(err, e)
		}
	}
}
