package run

import (
	"context"
	"fmt"
	"math"
	"time"

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

// asked is one reading of the reference.
type asked struct {
	line   int64
	sent   line.Instant
	at     line.Instant
	middle float64 // s
	p      quantity.Pressure
	uut    float64 // Pa, mean of the UUT since the reading before; NaN if it sent nothing
}

// read asks the reference once, records the answer and holds it against the
// pressures never to be exceeded.
func (s *session) read(ctx context.Context) (asked, error) {
	r, err := s.Rig.Reference.Read(ctx)
	if err != nil {
		if ctx.Err() != nil || isStop(err) {
			return asked{}, err
		}
		return asked{}, &Fault{Code: "reference_lost", Text: "the reference gives no reading", Err: err}
	}
	p := quantity.Pressure(r.Value.SI)
	if err := s.watchPressure("reference", p, r.Text); err != nil {
		return asked{}, err
	}
	a := asked{sent: r.Sent, at: r.At, middle: r.Middle().Seconds(), p: p, uut: math.NaN()}
	if s.stream.since.n > 0 {
		a.uut = s.stream.since.mean
	}
	n := len(s.stream.samples)
	if n == 0 || s.now().Sub(s.stream.samples[n-1].at) > silentAfter {
		return asked{}, &Fault{Code: "uut_silent", Text: fmt.Sprintf("the UUT's readings have not come for %v: check cable, port and rate", silentAfter)}
	}
	a.line, err = s.appendLine(record.KindReading, record.Reading{Role: "reference", Sent: r.Sent, Text: r.Text, Watch: s.stream.since.watch()})
	s.last = p
	return a, err
}

// next waits until it is time for the reading after this one.
func (s *session) next(ctx context.Context, a asked) error {
	return s.pause(ctx, a.sent.Add(readEvery))
}

// reach asks the source for a pressure and reads the reference until it is
// within the window of it.
func (s *session) reach(ctx context.Context, p, window quantity.Pressure, longest time.Duration) (asked, error) {
	if err := s.Rig.Source.Set(ctx, p); err != nil {
		return asked{}, s.sourceFault(ctx, err)
	}
	until := s.now().Add(longest)
	for {
		a, err := s.read(ctx)
		if err != nil {
			return a, err
		}
		if math.Abs(float64(a.p-p)) <= float64(window) {
			return a, nil
		}
		if s.now() > until {
			return a, &Fault{Code: "not_reached", Text: fmt.Sprintf("%.0f mmHg were asked for and the reference reads %.1f mmHg after %v: the source says done and is not, or the volume is open",
				p.MmHg(), a.p.MmHg(), longest)}
		}
		if err := s.next(ctx, a); err != nil {
			return a, err
		}
	}
}

func (s *session) sourceFault(ctx context.Context, err error) error {
	if ctx.Err() != nil || isStop(err) {
		return err
	}
	return &Fault{Code: "source", Text: "the pressure source did not do as asked", Err: err}
}

// settle reads until the difference of UUT and reference is ready to be taken,
// and returns the readings of the window. Readings outside the set pressure's
// window begin the wait anew; a window of 0 is no window.
func (s *session) settle(ctx context.Context, set, window quantity.Pressure, rule ready.Settings, longest time.Duration) ([]asked, ready.State, error) {
	until := s.now().Add(longest)
	watch := ready.NewWatch(rule)
	var readings []asked
	waiting := ""
	for {
		a, err := s.read(ctx)
		if err != nil {
			return nil, ready.State{}, err
		}
		inside := window == 0 || math.Abs(float64(a.p-set)) <= float64(window)
		if !inside {
			watch, readings = ready.NewWatch(rule), nil
			waiting = fmt.Sprintf("pressure within %.1f mmHg of %.0f mmHg", window.MmHg(), set.MmHg())
		} else if !math.IsNaN(a.uut) {
			readings = append(readings, a)
			state := watch.Add(ready.Sample{Time: a.middle, Reference: a.p.MmHg(), UUT: quantity.Pressure(a.uut).MmHg()})
			if state.Ready {
				return readings[state.First:], state, nil
			}
			waiting = state.Waiting
		}
		if s.now() > until {
			return nil, ready.State{}, &Fault{Code: "not_settling", Text: fmt.Sprintf("the point at %.0f mmHg was not ready within %v, waiting for: %s", set.MmHg(), longest, waiting)}
		}
		if err := s.next(ctx, a); err != nil {
			return nil, ready.State{}, err
		}
	}
}

// keep writes the UUT's samples that belong to the readings as blocks, then
// the point, and waits until it is durable: only then may it be judged.
func (s *session) keep(ctx context.Context, readings []asked, point record.Point) ([]sample, error) {
	from, end := s.stream.from(readings[0].sent), s.stream.end()
	samples, ok := s.stream.between(from, end)
	if !ok || len(samples) == 0 {
		return nil, &Fault{Code: "uut_silent", Text: "the UUT sent nothing while the point was taken"}
	}
	blocks, err := s.blocks(samples)
	if err != nil {
		return nil, err
	}
	for _, a := range readings {
		point.Readings = append(point.Readings, a.line)
	}
	point.Blocks, point.Stage = blocks, s.stage
	if err := s.append(record.KindPoint, point); err != nil {
		return nil, err
	}
	return samples, s.durable(ctx)
}

func (s *session) blocks(samples []sample) ([]int64, error) {
	var lines []int64
	for i := 0; i < len(samples); i += record.BlockSize {
		part := samples[i:min(i+record.BlockSize, len(samples))]
		block := record.Block{Role: "uut", Start: part[0].at, Period: s.Facts.UUT.SamplePeriod}
		for _, p := range part {
			block.Samples = append(block.Samples, p.text)
		}
		n, err := s.appendLine(record.KindBlock, block)
		if err != nil {
			return nil, err
		}
		lines = append(lines, n)
	}
	return lines, nil
}

// rule is the difference rule as the procedure and the bench file set it.
func (s *session) rule(stage procedures.Static) ready.Settings {
	settings := ready.Settings{
		Standard:      stage.StandardUncertainty.MmHg(),
		LeastReadings: stage.LeastReadings,
		SlopeShare:    stage.ShareOfLimit * s.smallestLimit(),
	}
	seconds := func(text string) float64 {
		v, err := quantity.ParseAs(text, quantity.DimSpan)
		if err != nil {
			return 0
		}
		return v.SI
	}
	f := s.Facts
	response := seconds(f.Reference.ResponseTime)
	settings.Delay = response + seconds(f.Reference.ResponseTimeTolerance) + seconds(f.UUT.Delay) + seconds(f.UUT.DelayUncertainty)
	settings.Settling = response
	return settings
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
