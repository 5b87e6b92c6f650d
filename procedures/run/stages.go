package run

import (
	"context"
	"errors"
	"fmt"
	"math"
	"time"

	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/ready"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

// reachWindow is the window for pressures that are not judged.
const reachWindow = 3.0 // mmHg

func isStop(err error) bool {
	return errors.Is(err, ErrStopped) || errors.Is(err, ErrInputEnded) || errors.Is(err, ErrUnanswered) || errors.Is(err, context.Canceled)
}

// zero vents, zeroes the reference, reads the UUT as it stands and takes that
// reading for its zero, by arithmetic.
func (s *session) zero(ctx context.Context, stage procedures.Zero) error {
	if err := s.command(ctx, func() error { return s.Rig.Source.Vent(ctx) }); err != nil {
		return s.sourceFault(ctx, err)
	}
	rule := s.rule(stage.ShareOfLimit, stage.StandardUncertainty, stage.LeastReadings)
	still, err := s.settle(ctx, 0, 0, rule, stage.LongestWait)
	if err != nil {
		return err
	}
	readings := still[0].readings
	if p := readings[len(readings)-1].p; math.Abs(float64(p)) > float64(stage.VentedWithin) {
		return &Fault{Code: "not_vented", Text: fmt.Sprintf("the reference reads %.1f mmHg with the vent open: is the volume open to atmosphere?", p.MmHg())}
	}
	if err := s.command(ctx, func() error { return s.Rig.Reference.Zero(ctx) }); err != nil {
		return s.stopOr(ctx, &Fault{Code: "reference_zero", Text: "the reference could not be zeroed", Err: err}, err)
	}
	if err := s.append(record.KindZeroing, record.Zeroing{Role: "reference", How: "device"}); err != nil {
		return err
	}
	rule.LeastSeconds = math.Max(rule.LeastSeconds, stage.For.Seconds())
	if still, err = s.settle(ctx, 0, 0, rule, stage.LongestWait); err != nil {
		return err
	}
	for _, p := range still {
		if err := s.zeroOf(p); err != nil {
			return err
		}
	}
	return s.durable(ctx)
}

// zeroOf takes a UUT's reading for its zero.
func (s *session) zeroOf(p settled) error {
	u := p.unit
	samples, err := s.keep(u, p.readings, record.Point{Purpose: "zero", Set: "0 mmHg", Ready: inReady(p.state), Settled: inSettled(p.state)})
	if err != nil {
		return err
	}
	var sum summary
	for _, x := range samples {
		sum.add(x.p)
	}
	u.zero, u.zeroed = sum.mean, true
	s.Operator.Tell(fmt.Sprintf("  %s: zero offset as read %+.2f mmHg", u.name(), quantity.Pressure(sum.mean).MmHg()))
	_, err = s.put(u, record.KindZeroing, record.Zeroing{Role: "uut", How: "arithmetic"})
	return err
}

func inReady(state ready.State) string {
	return fmt.Sprintf("difference steady: slope %+.3f mmHg/s, mean of the difference known to %.3f mmHg", state.Slope, state.Standard)
}

// inSettled puts the window's figures into the record.
func inSettled(state ready.State) *record.Settled {
	return &record.Settled{
		Readings: state.Readings, Seconds: milliths(state.Seconds),
		Slope: micro(state.Slope), SlopeStandard: micro(state.SlopeSE), Trend: micro(state.Trend), TrendStandard: micro(state.TrendSE),
		Correlation: milliths(state.Correlation), Noise: micro(state.Noise), Delay: micro(state.Settling), Standard: micro(state.Standard),
	}
}

func milliths(x float64) float64 { return math.Round(x*1e3) / 1e3 }

func micro(x float64) float64 { return math.Round(x*1e6) / 1e6 }

// exercise takes the UUT up and down, unjudged.
func (s *session) exercise(ctx context.Context, stage procedures.Exercise) error {
	for cycle := 1; cycle <= stage.Cycles; cycle++ {
		for _, p := range []quantity.Pressure{stage.To, 0} {
			if _, err := s.reach(ctx, p, quantity.MmHg(reachWindow), stage.LongestWait); err != nil {
				return err
			}
			if err := s.readFor(ctx, stage.Dwell, nil); err != nil {
				return err
			}
		}
	}
	return nil
}

// readFor reads the reference for a time; every reading goes to take.
func (s *session) readFor(ctx context.Context, d time.Duration, take func(asked)) error {
	until := s.now().Add(d)
	for s.now() < until {
		a, err := s.read(ctx)
		if err != nil {
			return err
		}
		if take != nil {
			take(a)
		}
		if err := s.next(ctx, a); err != nil {
			return err
		}
	}
	return nil
}

// leak shuts the source off at a pressure and watches the reference. A rate
// over the procedure's ends the run: rig and UUT cannot be told apart.
func (s *session) leak(ctx context.Context, stage procedures.Leak) error {
	if _, err := s.reach(ctx, stage.At, quantity.MmHg(reachWindow), stage.LongestWait); err != nil {
		return err
	}
	if err := s.command(ctx, func() error { return s.Rig.Source.Hold(ctx) }); err != nil {
		return s.sourceFault(ctx, err)
	}
	if err := s.readFor(ctx, stage.Settle, nil); err != nil {
		return err
	}
	holds := make([]record.Hold, len(s.units))
	for i := range holds {
		holds[i] = record.Hold{Volume: s.Facts.Volume, OwnRate: s.Facts.OwnLeak, OwnRateUncertainty: s.Facts.OwnLeakUncertainty}
	}
	if err := s.hold(ctx, stage, holds); err != nil {
		return err
	}
	live := s.live()
	for _, u := range live {
		hold := holds[u.index]
		hold.Stage, hold.Set = s.stage, inMmHg(stage.At)
		if _, err := s.put(u, record.KindHold, hold); err != nil {
			return err
		}
	}
	if err := s.durable(ctx); err != nil {
		return err
	}
	// All UUTs hang on one volume, so one record tells for all of them.
	res, err := results.Compute(live[0].events)
	if err != nil {
		return fmt.Errorf("judge the leak: %w", err)
	}
	if l := res.Leak; l == nil || !l.Within {
		return &Fault{Code: "leak", Text: leakText(res)}
	}
	s.Operator.Tell(fmt.Sprintf("  loss %.4f mmHg/s", *res.Leak.Rate))
	return nil
}

// holdOn is how much longer a hold is made at a time while the leak cannot be
// told from warming.
const holdOn = 5 * time.Second

// hold reads the reference for the stage's time, and on while the leak is not
// known well enough, as long as the stage allows.
func (s *session) hold(ctx context.Context, stage procedures.Leak, holds []record.Hold) error {
	var t, p []float64
	take := func(a asked) {
		t, p = append(t, a.middle), append(p, a.p.MmHg())
		for i, n := range a.lines {
			if n > 0 {
				holds[i].Readings = append(holds[i].Readings, n)
			}
		}
	}
	settings := ready.LeakSettings{
		Amplitude: stage.Relaxation.MmHg(), ShortestTau: 0.5, LongestTau: stage.LongestTau.Seconds(), Wanted: stage.HighestRate.MmHg() / 4,
		Noise: quantity.Pressure(resolution(s.Facts.Reference.Resolution)).MmHg() / (2 * math.Sqrt(3)),
	}
	begun, told := s.now(), false
	if err := s.readFor(ctx, stage.For, take); err != nil {
		return err
	}
	for {
		l, err := ready.LeakRate(t, p, settings)
		known := err == nil && (l.Standard <= settings.Wanted || l.Rate-3*l.Standard > stage.HighestRate.MmHg())
		left := stage.LongestFor - s.now().Sub(begun)
		if known || left < holdOn {
			return nil
		}
		if !told {
			told = true
			s.Operator.Tell(fmt.Sprintf("  the leak cannot be told from warming yet: held on, for %.0f s in all at most", stage.LongestFor.Seconds()))
		}
		if err := s.readFor(ctx, holdOn, take); err != nil {
			return err
		}
	}
}

func leakText(res results.Results) string {
	if res.Leak == nil {
		return "the leak test gave no result"
	}
	return res.Leak.Reason
}

// inMmHg writes a pressure as the record states it.
func inMmHg(p quantity.Pressure) string {
	return fmt.Sprintf("%v mmHg", math.Round(p.MmHg()*1e6)/1e6)
}

// static takes the points of every cycle, each as soon as it is ready. A fault
// that spoils a part spoils its cycle, which is taken again after the UUT has
// been exercised again: what it remembers of its last pressures is part of its
// hysteresis.
func (s *session) static(ctx context.Context, stage procedures.Static) error {
	points := stage.Points()
	each := len(stage.SetPressures)
	for i := 0; i < len(points); i += each {
		marks := s.mark()
		err := s.cycle(ctx, stage, points, i, i+each)
		for f := spoilt(err); f != nil && f.again == thisPart; f = spoilt(err) {
			if err = s.interrupt(ctx, f, marks); err == error(f) {
				return err
			}
			if err == nil {
				err = s.exerciseAgain(ctx)
			}
			if err == nil {
				marks = s.mark()
				err = s.cycle(ctx, stage, points, i, i+each)
			}
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// exerciseAgain does what the procedure's exercise stage does, if it has one.
func (s *session) exerciseAgain(ctx context.Context) error {
	for _, stage := range s.Definition.Stages {
		if e, ok := stage.(procedures.Exercise); ok {
			return s.exercise(ctx, e)
		}
	}
	return nil
}

// cycle takes the points from one index to another.
func (s *session) cycle(ctx context.Context, stage procedures.Static, all []procedures.Point, from, to int) error {
	rule := s.rule(stage.ShareOfLimit, stage.StandardUncertainty, stage.LeastReadings)
	for i := from; i < to; i++ {
		point := all[i]
		if err := s.goTo(ctx, stage, point, first(stage, i)); err != nil {
			return err
		}
		points, err := s.settle(ctx, point.Set, stage.Window, rule, stage.LongestWait)
		if err != nil {
			return err
		}
		wrong, err := s.wrongSide(point)
		if err != nil {
			return err
		}
		for _, p := range points {
			_, err = s.keep(p.unit, p.readings, record.Point{
				Purpose: "static", WrongSide: wrong, Cycle: point.Cycle, Leg: string(point.Leg), Set: inMmHg(point.Set), Ready: inReady(p.state), Settled: inSettled(p.state),
			})
			if err != nil {
				return err
			}
		}
		// Only what is durable may be judged.
		if err := s.durable(ctx); err != nil {
			return err
		}
		readings := points[0].readings
		s.Operator.Tell(fmt.Sprintf("  point %d of %d: %s at %.0f mmHg taken, reference %.2f mmHg",
			i+1, len(all), point.Leg, point.Set.MmHg(), readings[len(readings)-1].p.MmHg()))
	}
	return nil
}

// first says that a point begins its cycle: it is come to from wherever the
// pressure was, so no side is wrong.
func first(stage procedures.Static, i int) bool { return i%len(stage.SetPressures) == 0 }

// goTo goes to the set pressure and, from there until the point is taken,
// follows whether the pressure comes from the right side.
func (s *session) goTo(ctx context.Context, stage procedures.Static, point procedures.Point, begins bool) error {
	s.approach = nil
	if !begins && stage.Overshoot > 0 {
		s.approach = &ready.Approach{Set: point.Set.MmHg(), Up: point.Leg == procedures.Up, Threshold: stage.Overshoot.MmHg()}
	}
	_, err := s.reach(ctx, point.Set, stage.Window, stage.LongestWait)
	return err
}

// wrongSide tells of a pressure that was beyond the procedure's threshold on
// its way, and returns by how much, as the record states it.
func (s *session) wrongSide(point procedures.Point) (string, error) {
	if s.approach == nil {
		return "", nil
	}
	status := s.approach.Status()
	s.approach = nil
	if status.Kind != ready.WrongSide {
		return "", nil
	}
	text := fmt.Sprintf("cycle %d, %s at %.0f mmHg was approached from the wrong side by %.2f mmHg; its hysteresis is not the UUT's alone and does not count",
		point.Cycle, point.Leg, point.Set.MmHg(), status.Value)
	s.Operator.Tell("  " + status.Text("mmHg"))
	return inMmHg(quantity.MmHg(status.Value)), s.append(record.KindReservation, record.Reservation{Code: "wrong_side", Text: text})
}
