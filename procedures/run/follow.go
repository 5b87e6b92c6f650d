package run

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
)

// A value that stands still while the other instrument moves is stuck, and
// nothing may be judged by it. At a steady pressure identical texts are right.
const (
	stuckSamples  = 10   // of the UUT, identical
	stuckReadings = 5    // of the reference, identical
	movedLeast    = 66.7 // Pa (0.5 mmHg): noise of the other must not look like moving
	movedSteps    = 4    // of the stuck one's resolution
)

// still follows how long an instrument has said the same thing, and what the
// other one said when that began.
type still struct {
	text  string
	n     int
	other float64 // Pa; not a number while unknown
}

// says takes the next text and the other's present pressure.
func (s *still) says(text string, other float64) {
	if text != s.text || s.n == 0 {
		*s = still{text: text, other: other}
	}
	s.n++
	if math.IsNaN(s.other) {
		s.other = other
	}
}

// moved says how far the other has gone since.
func (s *still) moved(other float64) float64 { return math.Abs(other - s.other) }

// checkFollows looks for an instrument that is stuck while the other moves. A
// line that is moving fast is left alone; the pressure will stand in a moment.
func (s *session) checkFollows(text string, p quantity.Pressure) error {
	reference := math.Max(movedLeast, movedSteps*resolution(s.Facts.Reference.Resolution))
	for _, u := range s.live() {
		uut := math.Max(movedLeast, movedSteps*u.resolution())
		if u.stream.still.n >= stuckSamples && u.stream.still.moved(float64(p)) > uut {
			f := &Fault{Code: "does_not_follow", again: thisPart, Text: fmt.Sprintf(
				"%s says %q for %d readings while the reference moved by %.1f mmHg: it does not follow; is the way to it open, is its readout well?",
				u.name(), u.stream.still.text, u.stream.still.n, quantity.Pressure(u.stream.still.moved(float64(p))).MmHg())}
			if err := s.leaveOut(u, f); err != nil {
				return err
			}
		}
	}
	mean := s.meanOfUUTs()
	s.still.says(text, mean)
	if s.still.n >= stuckReadings && s.still.moved(mean) > math.Max(2*movedLeast, reference) {
		return &Fault{Code: "reference_does_not_follow", again: thisPart, Text: fmt.Sprintf(
			"the reference says %q for %d readings while the UUT moved by %.1f mmHg", text, s.still.n, quantity.Pressure(s.still.moved(mean)).MmHg())}
	}
	return nil
}

// meanOfUUTs is what the UUTs that are zeroed have said since the last
// reading, in Pa; not a number when there are none.
func (s *session) meanOfUUTs() float64 {
	var sum float64
	n := 0
	for _, u := range s.live() {
		if u.zeroed && u.stream.since.n > 0 {
			sum += u.stream.since.mean - u.zero
			n++
		}
	}
	if n == 0 {
		return math.NaN()
	}
	return sum / float64(n)
}

// resolution reads a stated resolution of pressure, in Pa; 0 when none is.
func resolution(text string) float64 {
	v, err := quantity.ParseAs(text, quantity.DimPressure)
	if err != nil {
		return 0
	}
	return v.SI
}

// resolution is that of the UUT's readings as pressure, in Pa.
func (u *unit) resolution() float64 {
	unit, ok := quantity.UnitNamed(u.UUT.Field.Unit)
	if !ok {
		return 0
	}
	v, err := quantity.ParseAs(u.UUT.Resolution, unit.Dimension)
	if err != nil {
		return 0
	}
	p, err := u.pressureOf(v)
	if err != nil {
		return 0
	}
	return p
}

// frozen says that samples stand still for a stretch and then jump, as they do
// when a readout hangs: the capture cannot be trusted.
func frozen(samples []sample) bool {
	run := 1
	for i := 1; i < len(samples); i++ {
		if samples[i].text == samples[i-1].text {
			run++
			continue
		}
		if run >= 2*stuckSamples && math.Abs(samples[i].p-samples[i-1].p) > frozenJump {
			return true
		}
		run = 1
	}
	return false
}

// frozenJump is 3 mmHg in Pa.
const frozenJump = 3 * 133.322387415
