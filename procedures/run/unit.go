package run

import (
	"context"
	"fmt"
	"math"
	"time"

	"kymobench/bench"
	"kymobench/bench/clock"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

// unit is one unit under test of the run, with the record that is its own. The
// run reads the reference, makes pressure and asks the operator once for all
// of them; what that gives goes into the record of each.
type unit struct {
	Subject
	index  int
	rig    bench.UUT
	writer *record.Writer
	events []record.Event
	known  int64 // highest line known to be durable
	fault  *Fault
	closed bool // its record is, or could not be

	stream  stream
	clock   clock.Recovery
	refused int

	nominal    float64 // V/V/Pa, 0 for a pressure output
	excitation float64 // V
	zeroed     bool
	zero       float64 // Pa: its reading at the one zeroing
}

func newUnit(index int, subject Subject, rig bench.UUT) *unit {
	u := &unit{Subject: subject, index: index, rig: rig}
	if v, err := quantity.ParseAs(subject.UUT.NominalSensitivity, quantity.DimSensitivity); err == nil {
		u.nominal = v.SI
	}
	if v, err := quantity.ParseAs(subject.UUT.Excitation, quantity.DimVoltage); err == nil {
		u.excitation = v.SI
	}
	return u
}

// name tells which of several UUTs is meant.
func (u *unit) name() string {
	if u.rig.Name == "" {
		return "UUT"
	}
	return "UUT " + u.UUT.SerialNumber
}

// pressureOf turns one of the UUT's values into pressure as the nominal
// sensitivity has it, before any zeroing.
func (u *unit) pressureOf(v quantity.Value) (float64, error) {
	switch v.Unit.Dimension {
	case quantity.DimPressure:
		return v.SI, nil
	case quantity.DimRatio:
		if u.nominal > 0 {
			return v.SI / u.nominal, nil
		}
	case quantity.DimVoltage:
		if u.nominal > 0 && u.excitation > 0 {
			return v.SI / u.excitation / u.nominal, nil
		}
	}
	return 0, fmt.Errorf("the UUT's unit %s cannot be turned into pressure with what the bench file states", v.Unit.Name)
}

// live are the UUTs that still take part: a fault of one's own cable or port
// does not end the run of the others.
func (s *session) live() []*unit {
	var live []*unit
	for _, u := range s.units {
		if u.fault == nil {
			live = append(live, u)
		}
	}
	return live
}

// leaveOut takes a UUT with a fault of its own out of the run, which goes on
// for the others; the fault comes back when there are none.
func (s *session) leaveOut(u *unit, f *Fault) error {
	if len(s.live()) == 1 {
		return f
	}
	u.fault = f
	s.Operator.Tell(fmt.Sprintf("! %s takes no further part: %s", u.name(), f.Error()))
	_, err := s.put(u, record.KindFault, record.Fault{Code: f.Code, Text: f.Error()})
	return err
}

// silent is the fault of a UUT whose readings do not come; nil if they do.
func (s *session) silent(u *unit) *Fault {
	n := len(u.stream.samples)
	if n > 0 && s.now().Sub(u.stream.samples[n-1].at) <= silentAfter {
		return nil
	}
	return &Fault{Code: "uut_silent", again: thisPart, Text: fmt.Sprintf("the readings of %s have not come for %v: check cable, port and rate", u.name(), silentAfter)}
}

// tookSample takes one of a UUT's lines as it comes, wherever the run waits,
// and holds it against the pressures never to be exceeded.
func (s *session) tookSample(u *unit, r bench.Reading, err error) error {
	u.clock.Add(r.At.Seconds())
	if err != nil {
		u.refused++
		u.stream.gap()
		return nil
	}
	p, err := u.pressureOf(r.Value)
	if err != nil {
		return &Fault{Code: "unit", Text: err.Error()}
	}
	before, text := u.stream.latest(), r.Received()
	u.stream.add(r.At, text, p, float64(s.last))
	if u.zeroed && !s.releasing && u.fault == nil {
		alone := math.Abs(p-before) > alonePa && s.inside(quantity.Pressure(before-u.zero))
		return s.watchPressure(u.name(), quantity.Pressure(p-u.zero), text, alone)
	}
	return nil
}

// alonePa is how far a reading must lie from what confirms it to stand alone:
// 10 mmHg, more than a pressure moves between two samples, and more than
// reference and UUT differ on any UUT that is worth a run.
const alonePa = 10 * 133.322387415

// inside says that a pressure is one that may be.
func (s *session) inside(p quantity.Pressure) bool {
	return p <= s.Facts.Highest && p >= s.Facts.Lowest
}

// watchPressure vents at the first reading outside the pressures never to be
// exceeded, before anything is written. One that stands alone, with nothing
// else that says so, may have been damaged on its way: then the part is taken
// again, vented all the same.
func (s *session) watchPressure(role string, p quantity.Pressure, text string, alone bool) error {
	if s.inside(p) {
		return nil
	}
	s.Rig.EmergencyVent()
	s.releasing = true // what rings now is the vent's doing; the reference is watched on
	f := &Fault{Code: "overpressure"}
	if p < s.Facts.Lowest {
		f.Code = "underpressure"
	}
	if alone {
		f.again = thisPart
	}
	f.Text = fmt.Sprintf("the %s read %.1f mmHg (%q), outside %.0f to %.0f mmHg never to be left: vented",
		role, p.MmHg(), text, s.Facts.Lowest.MmHg(), s.Facts.Highest.MmHg())
	return f
}

// confirmed says whether a UUT that is zeroed reads about this pressure; true
// when there is none to ask.
func (s *session) confirmed(p quantity.Pressure) bool {
	asked := false
	for _, u := range s.live() {
		if !u.zeroed {
			continue
		}
		asked = true
		if math.Abs(u.stream.latest()-u.zero-float64(p)) <= alonePa {
			return true
		}
	}
	return !asked
}

// keep writes the UUT's samples that belong to the readings as blocks, then
// the point.
func (s *session) keep(u *unit, readings []asked, point record.Point) ([]sample, error) {
	from, end := u.stream.from(readings[0].sent), u.stream.end()
	samples, ok := u.stream.between(from, end)
	if !ok || len(samples) == 0 {
		return nil, &Fault{Code: "uut_silent", Text: fmt.Sprintf("%s sent nothing while the point was taken", u.name())}
	}
	blocks, err := s.blocks(u, samples)
	if err != nil {
		return nil, err
	}
	for _, a := range readings {
		point.Readings = append(point.Readings, a.lines[u.index])
	}
	point.Blocks, point.Stage = blocks, s.stage
	_, err = s.put(u, record.KindPoint, point)
	return samples, err
}

func (s *session) blocks(u *unit, samples []sample) ([]int64, error) {
	var lines []int64
	for i := 0; i < len(samples); i += record.BlockSize {
		part := samples[i:min(i+record.BlockSize, len(samples))]
		block := record.Block{Role: "uut", Start: part[0].at, Period: u.UUT.SamplePeriod}
		for _, p := range part {
			block.Samples = append(block.Samples, p.text)
		}
		n, err := s.put(u, record.KindBlock, block)
		if err != nil {
			return nil, err
		}
		lines = append(lines, n)
	}
	return lines, nil
}

// close completes the UUT's record with its results.
func (s *session) close(ctx context.Context, u *unit, finished record.Finished) (Outcome, error) {
	u.closed = true
	if u.fault != nil {
		finished = record.Finished{Code: u.fault.Code, Text: u.fault.Error()}
	}
	put := func(kind string, payload any) error {
		_, err := s.put(u, kind, payload)
		return err
	}
	if err := s.writeClock(u); err != nil {
		return Outcome{}, err
	}
	if u.refused > 0 {
		text := fmt.Sprintf("%d lines of the UUT were refused as no number and not used", u.refused)
		if err := put(record.KindReservation, record.Reservation{Code: "lines_refused", Text: text}); err != nil {
			return Outcome{}, err
		}
	}
	if err := put(record.KindFinished, finished); err != nil {
		return Outcome{}, err
	}
	if err := s.durable(ctx); err != nil {
		return Outcome{}, err
	}
	res, err := results.Compute(u.events)
	if err != nil {
		return Outcome{}, fmt.Errorf("compute the results: %w", err)
	}
	stored, err := results.Store(res, s.Layout)
	if err != nil {
		return Outcome{}, err
	}
	if err := put(record.KindResults, stored); err != nil {
		return Outcome{}, err
	}
	if err := u.writer.Close(ctx, s.now(), s.wall()); err != nil {
		return Outcome{}, err
	}
	return Outcome{Closed: true, Results: res, Head: u.writer.Head()}, nil
}

// labelled posts the durable events of one UUT's record with its number in
// place of a port's.
type labelled struct {
	inbox  record.Poster
	number line.PortID
}

// Post puts an event into the inbox.
func (l labelled) Post(delay time.Duration, e line.Event) {
	e.Port = l.number
	l.inbox.Post(delay, e)
}
