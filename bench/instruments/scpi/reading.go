package scpi

import (
	"context"
	"errors"
	"fmt"
	"strings"

	"kymobench/bench"
	"kymobench/bench/quantity"
)

// Read asks for one reading.
func (i *Instrument) Read(ctx context.Context) (bench.Reading, error) {
	if i.s.Read == "" {
		return bench.Reading{}, fmt.Errorf("read %s: %w", i.Line.Name(), bench.ErrNotStated)
	}
	if i.wrong != nil {
		return bench.Reading{}, fmt.Errorf("read %s: %w", i.Line.Name(), i.wrong)
	}
	var x float64
	a, err := i.Ask(ctx, i.s.Read, func(text string) (err error) {
		x, err = i.number.Number(text)
		return err
	})
	if err != nil {
		return bench.Reading{}, err
	}
	return bench.Reading{
		Sent: a.Sent, At: a.At, Text: a.Text,
		Value: quantity.Value{SI: i.unit.ToSI(x), Stated: x, Unit: i.unit},
	}, nil
}

// Zero makes the instrument take the present pressure for zero.
func (i *Instrument) Zero(ctx context.Context) error {
	if i.s.Zero == "" {
		return fmt.Errorf("zero %s: %w", i.Line.Name(), bench.ErrNotStated)
	}
	return i.set(ctx, i.s.Zero)
}

// RefusedError is a command that the instrument put errors in its queue for.
type RefusedError struct {
	Name, Command string
	Errors        []string // as received
}

func (e *RefusedError) Error() string {
	return fmt.Sprintf("%s refused %q: %s", e.Name, e.Command, strings.Join(e.Errors, "; "))
}

// Refused gives the errors as received.
func (e *RefusedError) Refused() []string { return e.Errors }

// ErrEndless: an error queue that had no end.
var ErrEndless = errors.New("the error queue has no end")

// longestQueue is how many errors are asked for before the queue is called
// endless.
const longestQueue = 64

// set sends a command and asks what the instrument has against it.
func (i *Instrument) set(ctx context.Context, command string) error {
	if i.s.Acknowledged != "" {
		_, err := i.Ask(ctx, command, func(text string) error {
			if text != i.s.Acknowledged {
				return fmt.Errorf("%q is not %q", text, i.s.Acknowledged)
			}
			return nil
		})
		return err
	}
	if err := i.Line.Send(ctx, command, i.Within()); err != nil {
		return err
	}
	if i.s.Errors == "" {
		return nil
	}
	refused := &RefusedError{Name: i.Line.Name(), Command: command}
	for range longestQueue {
		clean := false
		a, err := i.Ask(ctx, i.s.Errors, func(text string) (err error) {
			clean, err = isNoError(text)
			return err
		})
		switch {
		case err != nil:
			return err
		case !clean:
			refused.Errors = append(refused.Errors, a.Text)
		case len(refused.Errors) > 0:
			return refused
		default:
			return nil
		}
	}
	return fmt.Errorf("read %s: %w after %q: %w", i.Line.Name(), ErrEndless, command, refused)
}

// isNoError reads the whole number that leads an answer to the errors
// question, as in 0,"No error" and -113,"Undefined header".
func isNoError(text string) (bool, error) {
	number, _, _ := strings.Cut(text, ",")
	digits := strings.TrimLeft(number, " ")
	if digits != "" && (digits[0] == '+' || digits[0] == '-') {
		digits = digits[1:]
	}
	if digits == "" || strings.Trim(digits, "0123456789") != "" {
		return false, fmt.Errorf("%q does not begin with the number of an error", text)
	}
	return strings.Trim(digits, "0") == "", nil
}
