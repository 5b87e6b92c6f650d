package results

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"kymobench/bench/line"
	"kymobench/procedures/record"
)

// hold shuts 300 mmHg off and reads the reference ten times a second, with
// noise of 0.02 mmHg.
func (m *made) hold(h record.Hold, seconds float64, pressure func(t float64) float64) {
	r := rand.New(rand.NewPCG(1, 2))
	h.Set = "300 mmHg"
	for i := range int(seconds * 10) {
		n := int64(len(m.events) + 1)
		text := fmt.Sprintf("%.4f", 300+pressure(float64(i)/10)+0.02*r.NormFloat64())
		h.Readings = append(h.Readings, m.add(record.KindReading, record.Reading{Role: "reference", Sent: line.Instant(n) * 1e8, Text: text}))
	}
	m.add(record.KindHold, h)
}

// The rates are put in by hand; the shipped procedure allows 0.1 mmHg/s.
func TestLeak(t *testing.T) {
	cooling := func(a, tau, rate float64) func(float64) float64 {
		// A narrow leak goes with the pressure that drives it.
		return func(t float64) float64 { return a*math.Exp(-t/tau) + 300*math.Expm1(-rate/300*t) }
	}
	own := record.Hold{Volume: "60 mL", OwnRate: "0.02 mmHg/s", OwnRateUncertainty: "0.002 mmHg/s"}
	rows := []struct {
		name     string
		hold     record.Hold
		seconds  float64
		pressure func(float64) float64
		within   bool
		rate     float64 // not a number: none is told
		reason   string
	}{
		{"tight", record.Hold{}, 30, cooling(0.8, 3, 0), true, 0, ""},
		{"a little", record.Hold{}, 30, cooling(0.8, 3, 0.05), true, 0.05, ""},
		{"the bench's own taken off", own, 30, cooling(0.8, 3, 0.05), true, 0.03, ""},
		{"far too much", record.Hold{}, 30, cooling(0.8, 3, 0.5), false, 0.5, "more than the 0.1 mmHg/s allowed"},
		{"as much as is allowed", record.Hold{}, 30, cooling(0.8, 3, 0.1), false, 0.1, "not separable"},
		{"slow warming and a short hold", record.Hold{}, 3, cooling(4, 25, 0), false, math.NaN(), "not separable from warming yet"},
		{"few readings", record.Hold{}, 0.5, cooling(0, 1, 0), false, math.NaN(), "too few readings"},
	}
	for _, row := range rows {
		m := opening(t)
		m.hold(row.hold, row.seconds, row.pressure)
		l := m.compute().Leak
		if l == nil || l.Within != row.within || !strings.Contains(l.Reason, row.reason) || row.within != (l.Reason == "") {
			t.Errorf("%s: %+v", row.name, l)
			continue
		}
		if math.IsNaN(row.rate) {
			if l.Rate != nil || l.Expanded != nil || l.Flow != nil {
				t.Errorf("%s: a rate of %g is told", row.name, *l.Rate)
			}
			continue
		}
		if l.Rate == nil || math.Abs(*l.Rate-row.rate) > *l.Expanded || *l.Expanded > 0.02 {
			t.Errorf("%s: %+v", row.name, l)
			continue
		}
		if row.hold.Volume == "" {
			continue
		}
		// Boyle's law at 300 mmHg above 760, first reading 300.8 +- 0.06.
		if want := *l.Rate * 60 * 60 / 1060.8; math.Abs(*l.Flow/want-1) > 2e-4 || *l.Own != 0.02 || *l.Volume != 60 || *l.Expanded < 0.004 {
			t.Errorf("%s: %+v, flow %g, want %g", row.name, l, *l.Flow, want)
		}
	}
}
