package run

import (
	"fmt"
	"math"
	"strconv"

	"kymobench/bench/quantity"
	"kymobench/procedures/record"
)

// hostClock is how far the clock of an ordinary PC may be off, as a share
// (common practice, no source: crystals are sold to 50 parts in a million).
const hostClock = 100e-6

// statedNothing is what a sample period without a stated tolerance may be off.
const statedNothing = 0.01

// checkRates holds the recovered sample clocks against the bench file: a wrong
// sample period there would put every natural frequency out by as much.
func (s *session) checkRates() error {
	for _, u := range s.live() {
		stated, err := quantity.ParseAs(u.UUT.SamplePeriod, quantity.DimSpan)
		l, ok := u.clock.Line()
		if err != nil || !ok || l.Uncertainty > 1e-3*l.Period || stated.SI <= 0 {
			continue
		}
		may := statedNothing
		if t, err := quantity.ParseAs(u.UUT.SamplePeriodTolerance, quantity.DimNone); err == nil {
			may = t.SI
		}
		off := l.Period/stated.SI - 1
		if math.Abs(off) <= may+hostClock+4*l.Uncertainty/l.Period {
			continue
		}
		f := &Fault{Code: "sample_rate", Text: fmt.Sprintf("%s sends a reading every %.6g ms, and the bench file says %s, %s: look at sample_period there and at the instrument's own setting",
			u.name(), l.Period*1e3, u.UUT.SamplePeriod, withTolerance(u.UUT.SamplePeriodTolerance))}
		if err := s.leaveOut(u, f); err != nil {
			return err
		}
	}
	return nil
}

func withTolerance(text string) string {
	if text == "" {
		return "without a tolerance"
	}
	return "within " + text
}

// writeClock puts the recovered clock into the UUT's record, and a reservation
// where readings seem to be missing: they are never filled in.
func (s *session) writeClock(u *unit) error {
	l, ok := u.clock.Line()
	if !ok {
		return nil
	}
	c := record.Clock{Role: "uut", Period: seconds(l.Period), Uncertainty: seconds(l.Uncertainty), Readings: u.clock.Readings()}
	for _, x := range u.clock.Suspects() {
		c.Suspects = append(c.Suspects, record.Suspect{After: x.After, Readings: x.Readings})
	}
	if _, err := s.put(u, record.KindClock, c); err != nil {
		return err
	}
	if n := len(c.Suspects); n > 0 {
		text := fmt.Sprintf("at %d places readings of the UUT seem lost or doubled, by when they arrived; nothing was filled in", n)
		_, err := s.put(u, record.KindReservation, record.Reservation{Code: "suspected_loss", Text: text})
		return err
	}
	return nil
}

// seconds writes a time with ten digits.
func seconds(x float64) string { return strconv.FormatFloat(x, 'g', 10, 64) + " s" }
