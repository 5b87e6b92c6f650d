package run

import (
	"context"
	"errors"
	"fmt"
	"math"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/ready"
	"kymobench/procedures/record"
)

// readEvery is the time between two readings of the reference.
const readEvery = 100 * time.Millisecond

// silentAfter is how long the UUT may send nothing.
const silentAfter = time.Second

// asked is one reading of the reference, and what the UUTs sent up to it; the
// slices have a place for each UUT.
type asked struct {
	lines  []int64 // of the record; 0 for a UUT that takes no part
	sent   line.Instant
	at     line.Instant
	middle float64 // s
	p      quantity.Pressure
	uuts   []heard
}

// heard is what a UUT sent since the reading before: n values (none: 0) with
// their mean and scatter in Pa, on average behind (s) earlier than the reading.
type heard struct {
	n                     int
	mean, scatter, behind float64
}

// read asks the reference, records the answer and holds it against the
// pressures never to be exceeded. A reading that jumps and that no UUT confirms
// is asked for again: it stands in the record, and the second one counts.
func (s *session) read(ctx context.Context) (asked, error) {
	r, err := s.readOnce(ctx)
	if err != nil {
		return asked{}, err
	}
	p := quantity.Pressure(r.Value.SI)
	if jump := math.Abs(float64(p - s.last)); jump > alonePa && !s.confirmed(p) {
		if err := s.append(record.KindReading, record.Reading{Role: "reference", Sent: r.Sent, Text: r.Received()}); err != nil {
			return asked{}, err
		}
		if r, err = s.readOnce(ctx); err != nil {
			return asked{}, err
		}
		p = quantity.Pressure(r.Value.SI)
	}
	if err := s.checkFollows(r.Received(), p); err != nil {
		return asked{}, err
	}
	if err := s.checkDisk(); err != nil {
		return asked{}, err
	}
	if s.approach != nil {
		s.approach.Add(p.MmHg())
	}
	n := len(s.units)
	a := asked{sent: r.Sent, at: r.At, middle: r.Middle().Seconds(), p: p, uuts: make([]heard, n), lines: make([]int64, n)}
	for _, u := range s.live() {
		if f := s.silent(u); f != nil {
			if err := s.leaveOut(u, f); err != nil {
				return asked{}, err
			}
			continue
		}
		a.uuts[u.index] = u.stream.since.heard(a.middle, spanOf(u.UUT.Delay))
		a.lines[u.index], err = s.put(u, record.KindReading, record.Reading{Role: "reference", Sent: r.Sent, Text: r.Received(), Watch: u.stream.since.watch()})
		if err != nil {
			return asked{}, err
		}
	}
	s.last = p
	return a, nil
}

// readOnce asks the reference for one reading and watches it.
func (s *session) readOnce(ctx context.Context) (bench.Reading, error) {
	r, err := s.Rig.Reference.Read(ctx)
	if err != nil {
		return r, s.stopOr(ctx, &Fault{Code: "reference_lost", Text: "the reference gives no reading", Err: err}, err)
	}
	p := quantity.Pressure(r.Value.SI)
	return r, s.watchPressure("reference", p, r.Received(), !s.confirmed(p))
}

// checkDisk holds the disk against the longest it may lag behind.
func (s *session) checkDisk() error {
	for _, u := range s.live() {
		if u.writer == nil {
			continue
		}
		if late := u.writer.Behind(s.now()); late > record.LongestUnsynced {
			return &Fault{Code: "disk_slow", Text: fmt.Sprintf("the disk has not taken what was written %v ago", late.Round(100*time.Millisecond))}
		}
	}
	return nil
}

// next waits until it is time for the reading after this one.
func (s *session) next(ctx context.Context, a asked) error {
	return s.pause(ctx, a.sent.Add(readEvery))
}

// reach asks the source for a pressure and reads the reference until it is
// within the window of it. The reference decides, not the source's word: a
// source that has not brought the pressure in a third of the time is told once
// more, and once more after another.
func (s *session) reach(ctx context.Context, p, window quantity.Pressure, longest time.Duration) (asked, error) {
	if err := s.command(ctx, func() error { return s.Rig.Source.Set(ctx, p) }); err != nil {
		return asked{}, s.sourceFault(ctx, err)
	}
	until, tell := s.now().Add(longest), s.now().Add(longest/3)
	for {
		a, err := s.read(ctx)
		if err != nil {
			return a, err
		}
		if math.Abs(float64(a.p-p)) <= float64(window) {
			return a, nil
		}
		switch now := s.now(); {
		case now > until:
			return a, &Fault{Code: "not_reached", Text: fmt.Sprintf("%.0f mmHg were asked for and the reference reads %.1f mmHg after %v: the source says done and is not, or the volume is open",
				p.MmHg(), a.p.MmHg(), longest)}
		case now > tell:
			tell = now.Add(longest / 3)
			if err := s.closeValve(ctx); err != nil {
				return a, err
			}
			if err := s.command(ctx, func() error { return s.Rig.Source.Set(ctx, p) }); err != nil {
				return a, s.sourceFault(ctx, err)
			}
		}
		if err := s.next(ctx, a); err != nil {
			return a, err
		}
	}
}

// commandTries is how often a command is given that the instrument refuses: it
// may have been damaged on its way.
const commandTries = 3

// command gives a command, again when the instrument had something against it.
func (s *session) command(ctx context.Context, give func() error) error {
	var err error
	for range commandTries {
		err = give()
		var r bench.Refusal
		if err == nil || ctx.Err() != nil || !errors.As(err, &r) {
			return err
		}
	}
	return err
}

func (s *session) sourceFault(ctx context.Context, err error) error {
	return s.stopOr(ctx, &Fault{Code: "source", Text: "the pressure source did not do as asked", Err: err}, err)
}

// settled is the window of one UUT's point.
type settled struct {
	unit     *unit
	readings []asked
	state    ready.State
	outside  bool // the pressure is outside the set pressure's window
}

// done says that waiting would not make the point better: it is ready, or all
// that is left is a resolution, which the uncertainty budget has.
func (p *settled) done() bool {
	return !p.outside && (p.state.Ready || p.state.Status.Kind == ready.Coarse)
}

// waiting says in words what the point waits for.
func (p *settled) waiting(set, window quantity.Pressure) string {
	if p.outside {
		return fmt.Sprintf("pressure within %.1f mmHg of %.0f mmHg", window.MmHg(), set.MmHg())
	}
	return p.state.Status.Text("mmHg")
}

// settle reads until the difference of UUT and reference is ready to be taken
// for every UUT at once, and returns the readings of each one's window.
// Readings outside the set pressure's window begin the wait anew; a window of 0
// is no window. Of several UUTs, those that are not ready in time are left out.
// What is waited for is told when it changes, once the wait is longer than most.
func (s *session) settle(ctx context.Context, set, window quantity.Pressure, rule ready.Settings, longest time.Duration) ([]settled, error) {
	began := s.now()
	until := began.Add(longest)
	begin := began.Add(tellAfter + time.Duration(rule.LeastSeconds*float64(time.Second)))
	watches := make([]*ready.Watch, len(s.units))
	points := make([]settled, len(s.units))
	told := make([]ready.Kind, len(s.units))
	for _, u := range s.units {
		watches[u.index], points[u.index].unit = ready.NewWatch(u.ruleOf(rule)), u
	}
	for {
		a, err := s.read(ctx)
		if err != nil {
			return nil, err
		}
		outside := window != 0 && math.Abs(float64(a.p-set)) > float64(window)
		all := true
		for _, u := range s.live() {
			p, h := &points[u.index], a.uuts[u.index]
			p.outside = outside
			switch {
			case outside:
				watches[u.index].Reset()
				p.readings, p.state = nil, ready.State{}
			case h.n > 0:
				p.readings = append(p.readings, a)
				p.state = watches[u.index].Add(ready.Sample{
					Time: a.middle, Reference: a.p.MmHg(), UUT: quantity.Pressure(h.mean).MmHg(),
					Behind: h.behind, Scatter: quantity.Pressure(h.scatter).MmHg(),
				})
			}
			all = all && p.done()
			if kind := p.state.Status.Kind; !p.done() && kind != told[u.index] && s.now() > begin {
				told[u.index] = kind
				s.Operator.Tell(fmt.Sprintf("  %s: waiting, %s", u.name(), p.waiting(set, window)))
			}
		}
		late := s.now() > until
		if all || late {
			done, err := s.take(points, set, window, longest)
			if all || err != nil || len(done) > 0 {
				return done, err
			}
		}
		if err := s.next(ctx, a); err != nil {
			return nil, err
		}
	}
}

// tellAfter is how long a point may take, beside the time it is to last, before
// the operator is told what it waits for; most points take less, and a line for each would bury the rest.
const tellAfter = 3 * time.Second

// take returns the windows that are ready and leaves the other UUTs out.
func (s *session) take(points []settled, set, window quantity.Pressure, longest time.Duration) ([]settled, error) {
	var done []settled
	for _, u := range s.live() {
		p := points[u.index]
		if p.done() {
			p.readings = p.readings[p.state.First:]
			done = append(done, p)
			continue
		}
		f := &Fault{Code: "not_settling", Text: fmt.Sprintf("the point at %.0f mmHg was not ready within %v, waiting for: %s", set.MmHg(), longest, p.waiting(set, window))}
		if err := s.leaveOut(u, f); err != nil {
			return nil, err
		}
	}
	return done, nil
}

// rule is the difference rule as the procedure and the bench file set it, for
// any UUT. A reference whose lag nobody stated follows somewhere from at once to
// its response time with its tolerance, and is not corrected; results count the
// same.
func (s *session) rule(share float64, standard quantity.Pressure, readings int) ready.Settings {
	response := spanOf(s.Facts.Reference.ResponseTime)
	lag, uncertain := 0.0, (response+spanOf(s.Facts.Reference.ResponseTimeTolerance))/math.Sqrt(3)
	if s.Facts.Reference.Lag != "" {
		lag, uncertain = spanOf(s.Facts.Reference.Lag), spanOf(s.Facts.Reference.LagUncertainty)
	}
	return ready.Settings{
		Standard:            standard.MmHg(),
		SlopeShare:          share * s.smallestLimit(),
		Delay:               lag,
		DelayUncertainty:    uncertain,
		Settling:            response,
		LeastReadings:       readings,
		LeastSeconds:        response,
		ReferenceResolution: quantity.Pressure(resolution(s.Facts.Reference.Resolution)).MmHg(),
	}
}

// ruleOf is the rule with what the bench file states about one UUT.
func (u *unit) ruleOf(rule ready.Settings) ready.Settings {
	rule.DelayUncertainty = math.Hypot(rule.DelayUncertainty, spanOf(u.UUT.DelayUncertainty))
	rule.Resolution = quantity.Pressure(u.resolution()).MmHg()
	return rule
}

// spanOf reads a stated span of time; 0 when none is.
func spanOf(text string) float64 {
	v, err := quantity.ParseAs(text, quantity.DimSpan)
	if err != nil {
		return 0
	}
	return v.SI
}

// smallestLimit is the half-width of the accuracy limit where it is smallest,
// in mmHg; 1 mmHg for a procedure that does not limit the accuracy.
func (s *session) smallestLimit() float64 {
	l, ok := s.Definition.Limit(procedures.Accuracy)
	if !ok {
		return 1
	}
	low, high := l.At(0)
	least := math.Inf(1)
	for _, side := range []*float64{low, high} {
		if side != nil {
			least = math.Min(least, math.Abs(*side))
		}
	}
	if math.IsInf(least, 1) || least == 0 {
		return 1
	}
	return least
}
