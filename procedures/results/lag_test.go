package results

import (
	"fmt"
	"math"
	"testing"

	"kymobench/bench/line"
	"kymobench/procedures/record"
)

// A reference that follows 0.5 s behind a pressure rising 0.2 mmHg/s reads 0.1
// mmHg too little; a UUT 0.1 s behind reads 0.02 too little itself. Stated, the
// error comes out right; not stated, it is the reference's lag that shows.
func TestLagIsMadeGood(t *testing.T) {
	for _, stated := range []bool{false, true} {
		m := &made{t: t}
		ref := record.Reference{ResponseTime: "0.5 s"}
		ref.Field.Unit = "mmHg"
		uut := record.UUT{Delay: "0.1 s"}
		uut.Field.Unit = "mmHg"
		if stated {
			ref.Lag, ref.LagUncertainty = "0.5 s", "0.05 s"
		}
		m.add(record.KindReference, ref)
		m.add(record.KindUUT, uut)
		for i, set := range []float64{0, 100, 200} {
			pt := record.Point{Purpose: "static", Cycle: 1, Leg: "up", Set: fmt.Sprintf("%g mmHg", set)}
			slope := 0.2 * float64(i)
			for k := -5; k <= 5; k++ {
				n := int64(len(m.events) + 1)
				p := set + slope*(0.1*float64(k)-0.5)
				pt.Readings = append(pt.Readings, m.add(record.KindReading, record.Reading{Role: "reference", Sent: line.Instant(n) * 1e8, Text: fmt.Sprintf("%.6f", p)}))
			}
			b := record.Block{Role: "uut", Period: "1 ms", Samples: []string{fmt.Sprintf("%.6f", set+0.3-slope*0.1)}}
			pt.Blocks = append(pt.Blocks, m.add(record.KindBlock, b))
			m.add(record.KindPoint, pt)
		}
		r := m.compute()
		// The error after zeroing at 200 mmHg: 0 by what was put in, and 0.5 s less
		// 0.1 s times 0.4 mmHg/s of it where nobody stated the lag.
		want := 0.16
		if stated {
			want = 0
		}
		if got := r.Static.ErrorAfterZero; got == nil || math.Abs(got.Value-want) > 1e-4 {
			t.Errorf("lag stated %v: error after zero %+v, want %g", stated, got, want)
		}
	}
}
