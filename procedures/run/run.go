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
	"kymobench/bench/line"
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

// Facts are what the bench file states about the instruments that serve every
// UUT, as the record keeps it. Identities are filled in by the run.
type Facts struct {
	Reference       record.Reference
	Source          record.Instrument
	Valve           record.Valve
	Highest, Lowest quantity.Pressure // never to be exceeded

	Volume, OwnLeak, OwnLeakUncertainty string // of the bench, "" when not stated
}

// Subject is one unit under test with what the bench file states about it.
type Subject struct {
	UUT     record.UUT
	Readout *record.Readout // nil when the UUT puts out pressure itself
	Opened  record.Opened
	// Overrides are the rules set aside for this run.
	Overrides []record.Override
	// Open creates its record; it is called when the instruments have said who
	// they are. Durable events are posted to the Poster.
	Open func(record.Poster) (*record.Writer, error)
}

// Settings of one run.
type Settings struct {
	Definition *procedures.Definition
	BenchFile  record.File
	Facts      Facts
	Rig        *bench.Rig
	Subjects   []Subject // one for each of Rig.UUTs, in that order
	Operator   Operator
	Layout     int // page layout number the report will be made with
}

// Outcome is how a run ended for one UUT.
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

	again again
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

// Carry carries the procedure out and returns an Outcome for each Subject. It
// returns an error only when there is no record to speak for the run or a
// record itself is broken; everything that goes wrong on the bench stands in
// the records and in the Outcomes.
func Carry(ctx context.Context, settings Settings) ([]Outcome, error) {
	if len(settings.Subjects) == 0 || len(settings.Subjects) != len(settings.Rig.UUTs) {
		return nil, fmt.Errorf("%d units under test for %d places of the bench", len(settings.Subjects), len(settings.Rig.UUTs))
	}
	s := newSession(settings)
	if err := s.streams(); err != nil {
		return nil, err
	}
	defer s.vent("end of the program's work")
	if err := s.meet(ctx); err != nil {
		return nil, fmt.Errorf("the bench is not as its file says: %w", err)
	}
	for _, u := range s.units {
		var err error
		if u.writer, err = u.Open(labelled{s.Rig.Inbox, line.PortID(u.index)}); err != nil {
			return nil, errors.Join(err, s.leave(context.WithoutCancel(ctx)))
		}
	}
	err := s.work(ctx)
	if errors.Is(err, context.Canceled) {
		err = fmt.Errorf("%w by ^C or by the system", ErrStopped)
	}
	s.vent(ventReason(err))
	return s.end(ctx, err)
}

// meet asks every instrument who it is, again where a port went away and came
// back meanwhile. There is no record yet, and nothing is under pressure.
func (s *session) meet(ctx context.Context) error {
	err := s.identify(ctx)
	for f := spoilt(err); f != nil && s.interruptions < mostInterruptions; f = spoilt(err) {
		s.interruptions++
		s.Operator.Tell("! " + f.Error() + "; it is waited for")
		if err = s.reconnect(ctx, f); err == nil {
			err = s.identify(ctx)
		}
	}
	return err
}

// work is everything from the opening line to the last stage.
func (s *session) work(ctx context.Context) error {
	if err := s.open(ctx); err != nil {
		return err
	}
	err := s.prepare(ctx)
	for f := spoilt(err); f != nil; f = spoilt(err) {
		if err = s.interrupt(ctx, f, s.mark()); err == error(f) {
			return err
		}
		if err == nil {
			err = s.prepare(ctx)
		}
	}
	if err != nil {
		return err
	}
	return s.stages(ctx)
}

// prepare is what comes before the first stage: the warnings, the UUTs being
// connected, the fast valve shut, for an earlier run may have ended by opening
// it.
func (s *session) prepare(ctx context.Context) error {
	if err := s.warn(ctx); err != nil {
		return err
	}
	return s.closeValve(ctx)
}

// stages carries the stages out in order. A fault that may be taken again sends
// the run back to the stage it spoils; what was taken from there on is void.
func (s *session) stages(ctx context.Context) error {
	begun := make([][]int64, len(s.Definition.Stages))
	for i := 0; i < len(s.Definition.Stages); {
		begun[i] = s.mark()
		err := s.whole(ctx, i)
		for f := spoilt(err); f != nil; f = spoilt(err) {
			i = s.whereFrom(f, i)
			err = s.interrupt(ctx, f, begun[i])
			if err == nil {
				break
			}
			if err == error(f) { // it may not be taken again once more
				return err
			}
		}
		if err != nil {
			return err
		}
		if s.taken {
			i++
		}
	}
	return nil
}

// whole carries one stage out, from its first line to its last. taken says
// afterwards whether it was; after an interruption it was not.
func (s *session) whole(ctx context.Context, i int) error {
	stage := s.Definition.Stages[i]
	s.stage, s.taken = i+1, false
	s.Operator.Tell(fmt.Sprintf("stage %d of %d: %s", s.stage, len(s.Definition.Stages), inWords(stage)))
	if err := s.append(record.KindStage, record.Stage{Number: s.stage, Kind: stage.Kind(), Phase: "begin"}); err != nil {
		return err
	}
	err := s.carry(ctx, stage)
	if err == nil {
		err = s.checkRestarts(ctx)
	}
	if err == nil {
		err = s.checkRates()
	}
	if err != nil {
		s.Rig.EmergencyVent()
		_ = s.append(record.KindStage, record.Stage{Number: s.stage, Kind: stage.Kind(), Phase: "abandoned", Why: err.Error()})
		return err
	}
	s.taken = true
	return s.append(record.KindStage, record.Stage{Number: s.stage, Kind: stage.Kind(), Phase: "end"})
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
		if stage.Least > 0 {
			return fmt.Sprintf("step response, %d to %d releases from %.0f mmHg, until the limits are decided", stage.Least, stage.Count, stage.Size.MmHg())
		}
		return fmt.Sprintf("step response, %d releases from %.0f mmHg", stage.Count, stage.Size.MmHg())
	}
	return stage.Kind()
}

// end closes the records, or leaves them open after a stop, and says how it
// went.
func (s *session) end(ctx context.Context, err error) ([]Outcome, error) {
	// What is left is bookkeeping on a vented bench; a cancelled context must
	// not keep it from being done.
	ctx = context.WithoutCancel(ctx)
	finished := record.Finished{Complete: err == nil}
	var fault *Fault
	switch {
	case s.broken != nil:
		return nil, errors.Join(fmt.Errorf("the record is broken, nothing more is judged: %w", s.broken), s.leave(ctx))
	case err == nil:
	case errors.As(err, &fault):
		finished.Code, finished.Text = fault.Code, fault.Error()
	case errors.Is(err, ErrStopped), errors.Is(err, ErrInputEnded), errors.Is(err, ErrUnanswered):
		outcomes := make([]Outcome, len(s.units))
		for i := range outcomes {
			outcomes[i] = Outcome{Stopped: true, Why: err.Error()}
		}
		return outcomes, s.leave(ctx)
	default:
		finished.Code, finished.Text = "bench_fault", err.Error()
	}
	if err != nil {
		if e := s.append(record.KindFault, record.Fault{Code: finished.Code, Text: finished.Text}); e != nil {
			return nil, errors.Join(e, s.leave(ctx))
		}
	}
	var outcomes []Outcome
	for _, u := range s.units {
		o, e := s.close(ctx, u, finished)
		if e != nil {
			return nil, errors.Join(e, s.leave(ctx))
		}
		outcomes = append(outcomes, o)
	}
	return outcomes, nil
}

// leave ends the records that are open and leaves them so.
func (s *session) leave(ctx context.Context) error {
	var errs []error
	for _, u := range s.units {
		if u.writer != nil && !u.closed {
			errs = append(errs, u.writer.Leave(ctx))
		}
	}
	return errors.Join(errs...)
}
