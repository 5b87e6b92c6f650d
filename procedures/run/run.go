// Package run carries out a procedure on a rig and appends everything that is
// read, decided and typed to a record.
//
// It computes no result (results does) and compares no limit (verdict does);
// it knows no driver. It vents first and writes afterwards, on every path out.
//
// Order of use: fill Settings, call Carry once, look at the Outcome.
package run

import (
	"context"
	"errors"
	"fmt"

	"kymobench/bench"
	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

// Operator is the person at the bench, or a script in their place. Answers to
// prompts come through the rig's inbox as events, never from here.
type Operator interface {
	// Tell shows a line of progress.
	Tell(text string)
	// Prompt shows a question that one line of input answers.
	Prompt(text string)
}

// Facts are what the bench file states about the instruments, as the record
// keeps it. Identities are filled in by the run.
type Facts struct {
	Reference       record.Reference
	UUT             record.UUT
	Readout         *record.Readout // nil when the UUT puts out pressure itself
	Source          record.Instrument
	Valve           record.Valve
	Highest, Lowest quantity.Pressure // never to be exceeded
}

// Settings of one run.
type Settings struct {
	Definition *procedures.Definition
	BenchFile  record.File
	Facts      Facts
	Rig        *bench.Rig
	Opened     record.Opened
	Operator   Operator
	Layout     int // page layout number the report will be made with
	// Open creates the record; it is called when the instruments have said who
	// they are.
	Open func() (*record.Writer, error)
}

// Outcome is how a run ended.
type Outcome struct {
	Closed  bool // the record is closed and Results hold
	Stopped bool // the operator or the system stopped it; the record stays open
	Results results.Results
	Head    record.Head
	Why     string // of a stop
}

// Fault is what stops a run for a reason of the bench; it leaves the run
// inconclusive, and is never the UUT's.
type Fault struct {
	Code string
	Text string
	Err  error
}

func (f *Fault) Error() string {
	if f.Err != nil {
		return f.Text + ": " + f.Err.Error()
	}
	return f.Text
}

func (f *Fault) Unwrap() error { return f.Err }

// Reasons for which a run is stopped from outside.
var (
	// ErrStopped: the operator or the system asked to stop.
	ErrStopped = errors.New("stopped")
	// ErrInputEnded: a prompt could not be answered, the input has ended.
	ErrInputEnded = errors.New("the input ended at a prompt")
	// ErrUnanswered: nobody answered a prompt in time.
	ErrUnanswered = errors.New("nobody answered the prompt")
)

// Carry carries the procedure out. It returns an error only when there is no
// record to speak for the run or the record itself is broken; everything that
// goes wrong on the bench stands in the record and in the Outcome.
func Carry(ctx context.Context, settings Settings) (Outcome, error) {
	s := newSession(settings)
	defer s.vent("end of the program's work")
	if err := s.identify(ctx); err != nil {
		return Outcome{}, fmt.Errorf("the bench is not as its file says: %w", err)
	}
	writer, err := settings.Open()
	if err != nil {
		return Outcome{}, err
	}
	s.writer = writer
	if err = s.work(ctx); errors.Is(err, context.Canceled) {
		err = fmt.Errorf("%w by ^C or by the system", ErrStopped)
	}
	s.vent(ventReason(err))
	return s.end(ctx, err)
}

// work is everything from the opening line to the last stage.
func (s *session) work(ctx context.Context) error {
	if err := s.open(ctx); err != nil {
		return err
	}
	if err := s.warn(ctx); err != nil {
		return err
	}
	// An earlier run may have ended by opening the fast valve.
	if err := s.closeValve(ctx); err != nil {
		return err
	}
	for i, stage := range s.Definition.Stages {
		number := i + 1
		s.stage = number
		s.Operator.Tell(fmt.Sprintf("stage %d of %d: %s", number, len(s.Definition.Stages), inWords(stage)))
		if err := s.append(record.KindStage, record.Stage{Number: number, Kind: stage.Kind(), Phase: "begin"}); err != nil {
			return err
		}
		if err := s.carry(ctx, stage); err != nil {
			_ = s.append(record.KindStage, record.Stage{Number: number, Kind: stage.Kind(), Phase: "abandoned", Why: err.Error()})
			return err
		}
		if err := s.append(record.KindStage, record.Stage{Number: number, Kind: stage.Kind(), Phase: "end"}); err != nil {
			return err
		}
	}
	return nil
}

func (s *session) carry(ctx context.Context, stage procedures.Stage) error {
	switch stage := stage.(type) {
	case procedures.WarmUp:
		return s.warmUp(ctx, stage)
	case procedures.Zero:
		return s.zero(ctx, stage)
	case procedures.Exercise:
		return s.exercise(ctx, stage)
	case procedures.Leak:
		return s.leak(ctx, stage)
	case procedures.Static:
		return s.static(ctx, stage)
	case procedures.Step:
		return s.step(ctx, stage)
	}
	return &Fault{Code: "stage_unknown", Text: fmt.Sprintf("this program cannot carry out a stage %q", stage.Kind())}
}

func inWords(stage procedures.Stage) string {
	switch stage := stage.(type) {
	case procedures.WarmUp:
		return "warm up"
	case procedures.Zero:
		return "vent, zero the reference, read the UUT as it stands"
	case procedures.Exercise:
		return fmt.Sprintf("exercise, %d times to %.0f mmHg", stage.Cycles, stage.To.MmHg())
	case procedures.Leak:
		return fmt.Sprintf("leak, %.0f s shut off at %.0f mmHg", stage.For.Seconds(), stage.At.MmHg())
	case procedures.Static:
		return fmt.Sprintf("set pressures, %d points", len(stage.Points()))
	case procedures.Step:
		return fmt.Sprintf("step response, %d releases from %.0f mmHg", stage.Count, stage.Size.MmHg())
	}
	return stage.Kind()
}

// end closes the record, or leaves it open after a stop, and says how it went.
func (s *session) end(ctx context.Context, err error) (Outcome, error) {
	// What is left is bookkeeping on a vented bench; a cancelled context must
	// not keep it from being done.
	ctx = context.WithoutCancel(ctx)
	var fault *Fault
	switch {
	case s.broken != nil:
		return Outcome{}, errors.Join(fmt.Errorf("the record is broken, nothing more is judged: %w", s.broken), s.writer.Leave(ctx))
	case err == nil:
	case errors.As(err, &fault):
		if e := s.append(record.KindFault, record.Fault{Code: fault.Code, Text: fault.Error()}); e != nil {
			return Outcome{}, e
		}
	case errors.Is(err, ErrStopped), errors.Is(err, ErrInputEnded), errors.Is(err, ErrUnanswered):
		return Outcome{Stopped: true, Why: err.Error()}, s.writer.Leave(ctx)
	default:
		if e := s.append(record.KindFault, record.Fault{Code: "bench_fault", Text: err.Error()}); e != nil {
			return Outcome{}, e
		}
	}
	return s.close(ctx, err)
}

func (s *session) close(ctx context.Context, err error) (Outcome, error) {
	finished := record.Finished{Complete: err == nil}
	if err != nil {
		finished.Code, finished.Text = "bench_fault", err.Error()
		var fault *Fault
		if errors.As(err, &fault) {
			finished.Code = fault.Code
		}
	}
	if s.refused > 0 {
		text := fmt.Sprintf("%d lines of the UUT were refused as no number and not used", s.refused)
		if e := s.append(record.KindReservation, record.Reservation{Code: "lines_refused", Text: text}); e != nil {
			return Outcome{}, e
		}
	}
	if e := s.append(record.KindFinished, finished); e != nil {
		return Outcome{}, e
	}
	if e := s.durable(ctx); e != nil {
		return Outcome{}, e
	}
	res, e := results.Compute(s.events)
	if e != nil {
		return Outcome{}, fmt.Errorf("compute the results: %w", e)
	}
	stored, e := results.Store(res, s.Layout)
	if e != nil {
		return Outcome{}, e
	}
	if e := s.append(record.KindResults, stored); e != nil {
		return Outcome{}, e
	}
	if e := s.writer.Close(ctx, s.now(), s.wall()); e != nil {
		return Outcome{}, e
	}
	return Outcome{Closed: true, Results: res, Head: s.writer.Head()}, nil
}
