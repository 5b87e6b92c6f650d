package run

import (
	"context"
	"errors"
	"fmt"

	"kymobench/procedures"
	"kymobench/procedures/results"
)

// Priming is how a round of trial releases ended.
type Priming struct {
	Trials []results.PrimingTrial
	Why    string // of the end
}

// Prime helps to fill a line: release after release, each followed by what it
// gave and what to do next, until the operator stops it. There is one UUT; its
// procedure's step stage says how a release is made and its limits what is to
// be reached. Nothing is recorded and nothing is judged. The session is that of
// a run, so the bench is vented between releases and on every way out, and the
// pressure is watched all the time.
//
// A fault of the bench is an error; that the operator or the system stopped it
// is none.
func Prime(ctx context.Context, settings Settings) (Priming, error) {
	stage, ok := stepOf(settings.Definition)
	if !ok {
		return Priming{}, fmt.Errorf("procedure %s has no step stage, so it cannot say how a release is made", settings.Definition.ID)
	}
	if len(settings.Subjects) != 1 || len(settings.Rig.UUTs) != 1 {
		return Priming{}, fmt.Errorf("one line is filled at a time, not %d", len(settings.Subjects))
	}
	s := newSession(settings)
	if err := s.streams(); err != nil {
		return Priming{}, err
	}
	defer s.vent("")
	if err := s.identify(ctx); err != nil {
		return Priming{}, fmt.Errorf("the bench is not as its file says: %w", err)
	}
	var out Priming
	err := s.trials(ctx, stage, &out)
	s.vent("")
	switch {
	case errors.Is(err, context.Canceled):
		out.Why = "stopped by ^C or by the system"
	case errors.Is(err, ErrStopped), errors.Is(err, ErrInputEnded), errors.Is(err, ErrUnanswered):
		out.Why = err.Error()
	default:
		return out, err
	}
	return out, nil
}

func stepOf(d *procedures.Definition) (procedures.Step, bool) {
	for _, stage := range d.Stages {
		if s, ok := stage.(procedures.Step); ok {
			return s, true
		}
	}
	return procedures.Step{}, false
}

// trials makes one release after the other; it returns by an error only.
func (s *session) trials(ctx context.Context, stage procedures.Step, out *Priming) error {
	if err := s.open(ctx); err != nil {
		return err
	}
	for _, w := range Warnings() {
		s.Operator.Tell("! " + w)
	}
	if _, err := s.ask(ctx, "Read the warnings above and connect the filled line. Enter makes the first release, \"stop\" ends"); err != nil {
		return err
	}
	// An earlier run may have ended by opening the fast valve.
	if err := s.closeValve(ctx); err != nil {
		return err
	}
	stage.Count, stage.Least = 1, 0
	u := s.units[0]
	known := len(u.events)
	for {
		if err := s.step(ctx, stage); err != nil {
			return err
		}
		s.Rig.EmergencyVent()
		res, err := results.Compute(u.events)
		if err != nil {
			return fmt.Errorf("work the release out: %w", err)
		}
		u.events = u.events[:known]
		trial := results.Prime(out.Trials, res.Step, s.Definition)
		out.Trials = append(out.Trials, trial)
		s.tell(trial)
		if _, err := s.ask(ctx, "Vented. Enter releases again, \"stop\" ends"); err != nil {
			return err
		}
		if err := s.closeValve(ctx); err != nil {
			return err
		}
	}
}

// tell shows what a trial gave and what to do next.
func (s *session) tell(t results.PrimingTrial) {
	if t.Frequency != nil {
		f, z, p := t.Frequency, t.Damping, t.Product
		s.Operator.Tell(fmt.Sprintf("  release %d: natural frequency %.3g Hz (95 %%: %.3g to %.3g), damping ratio %.3g (%.3g to %.3g), fn x zeta %.3g Hz (%.3g to %.3g)",
			t.Number, f.Value, f.Interval[0], f.Interval[1], z.Value, z.Interval[0], z.Interval[1], *p.Value, p.Interval[0], p.Interval[1]))
	} else {
		s.Operator.Tell(fmt.Sprintf("  release %d:", t.Number))
	}
	s.Operator.Tell("  " + t.Advice.Text)
}
