package run

import (
	"context"
	"fmt"
	"strings"

	"kymobench/bench/line"
	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

// captureTries is how often one step is taken again when a line of a UUT was
// refused during it.
const captureTries = 3

// step releases the pressure to atmosphere and keeps the UUTs' answers.
func (s *session) step(ctx context.Context, stage procedures.Step) error {
	for number := 1; number <= stage.Count; number++ {
		done := make([]bool, len(s.units))
		for range captureTries {
			if s.captured(done) {
				break
			}
			if err := s.release(ctx, stage, number, done); err != nil {
				return err
			}
		}
		for _, u := range s.live() {
			if done[u.index] {
				continue
			}
			f := &Fault{Code: "capture", Text: fmt.Sprintf("step %d could not be captured whole in %d tries: lines of %s were refused", number, captureTries, u.name())}
			if err := s.leaveOut(u, f); err != nil {
				return err
			}
		}
		if stage.Least == 0 {
			s.Operator.Tell(fmt.Sprintf("  step %d of %d captured", number, stage.Count))
			continue
		}
		s.Operator.Tell(fmt.Sprintf("  step %d captured, %d at most", number, stage.Count))
		if number < stage.Least || number == stage.Count {
			continue
		}
		decided, err := s.stepsDecide()
		if err != nil {
			return err
		}
		if decided {
			break
		}
	}
	if err := s.command(ctx, func() error { return s.Rig.Source.Vent(ctx) }); err != nil {
		return s.sourceFault(ctx, err)
	}
	return s.durable(ctx)
}

// stepsDecide says whether the steps so far decide every dynamic limit of every
// UUT, and tells what is open. It looks at the record alone, so that the same
// record stops at the same step.
func (s *session) stepsDecide() (bool, error) {
	all := true
	for _, u := range s.live() {
		res, err := results.Compute(u.events)
		if err != nil {
			return false, fmt.Errorf("judge the steps so far: %w", err)
		}
		if res.Step == nil || res.Step.Stopping == nil {
			continue
		}
		for _, open := range res.Step.Stopping.Open {
			all = false
			text := fmt.Sprintf("  %s of %s is not decided yet", strings.ReplaceAll(open.Limit, "_", " "), u.name())
			if open.More != nil {
				text += fmt.Sprintf("; about %d more would do, as it looks now", *open.More)
			} else {
				text += "; as it looks now, no number of steps allowed would do"
			}
			s.Operator.Tell(text)
		}
	}
	return all, nil
}

// captured says that every UUT that takes part has its capture.
func (s *session) captured(done []bool) bool {
	for _, u := range s.live() {
		if !done[u.index] {
			return false
		}
	}
	return true
}

// release makes one step and notes whose capture is whole.
func (s *session) release(ctx context.Context, stage procedures.Step, number int, done []bool) error {
	if _, err := s.reach(ctx, stage.Size, quantity.MmHg(reachWindow), stage.LongestWait); err != nil {
		return err
	}
	if err := s.readFor(ctx, stage.Settle, nil); err != nil {
		return err
	}
	if err := s.command(ctx, func() error { return s.Rig.Source.Hold(ctx) }); err != nil {
		return s.sourceFault(ctx, err)
	}
	if err := s.pause(ctx, s.now().Add(stage.Before)); err != nil {
		return err
	}
	commanded := s.now()
	s.releasing = true
	defer func() { s.releasing = false }()
	if err := s.command(ctx, func() error { return s.Rig.Valve.Release(ctx) }); err != nil {
		return s.valveFault(ctx, err)
	}
	until := commanded.Add(stage.After)
	if err := s.pause(ctx, until); err != nil {
		return err
	}
	for _, u := range s.live() {
		if done[u.index] {
			continue
		}
		whole, err := s.capture(u, stage, number, commanded, until)
		if err != nil {
			return err
		}
		done[u.index] = whole
	}
	if err := s.closeValve(ctx); err != nil {
		return err
	}
	return s.durable(ctx)
}

// capture keeps one UUT's answer to a step; false when it has a gap.
func (s *session) capture(u *unit, stage procedures.Step, number int, commanded, until line.Instant) (bool, error) {
	from, end := u.stream.from(commanded.Add(-stage.Before)), u.stream.from(until)
	samples, ok := u.stream.between(from, end)
	if !ok || len(samples) == 0 {
		return false, s.leaveOut(u, &Fault{Code: "uut_silent", Text: fmt.Sprintf("%s sent nothing during the step", u.name())})
	}
	if !u.stream.whole(from, end) || frozen(samples) {
		return false, nil
	}
	lines, err := s.blocks(u, samples)
	if err != nil {
		return false, err
	}
	_, err = s.put(u, record.KindCapture, record.Capture{
		Stage: s.stage, Number: number, Direction: string(stage.Direction), Size: inMmHg(stage.Size), Commanded: commanded, Blocks: lines,
	})
	return true, err
}

func (s *session) closeValve(ctx context.Context) error {
	if err := s.command(ctx, func() error { return s.Rig.Valve.Shut(ctx) }); err != nil {
		return s.valveFault(ctx, err)
	}
	return nil
}

func (s *session) valveFault(ctx context.Context, err error) error {
	return s.stopOr(ctx, &Fault{Code: "valve", Text: "the valve did not do as asked", Err: err}, err)
}
