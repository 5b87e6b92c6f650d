package step

import (
	"math"
	"math/rand/v2"
	"testing"
)

// goodPlan draws a trace a bench with a fast valve gives.
func goodPlan(r *rand.Rand) plan {
	for {
		p := plan{
			fn: 5 * math.Pow(12, r.Float64()), zeta: 0.1 * math.Pow(12, r.Float64()),
			rate: 250 * math.Pow(16, r.Float64()), before: 0.4 + 0.6*r.Float64(), phase: r.Float64(),
			level: 20 * r.NormFloat64(), start: 1000 * r.Float64(),
		}
		height := 50 + 250*r.Float64()
		if r.IntN(2) == 0 {
			p.level, height = p.level+height, -height
		}
		p.sigma = math.Abs(height) * 0.001 * math.Pow(10, r.Float64())
		p.spacing = 1 + r.Float64() + 20*slowest(p.fn, p.zeta)
		for range 1 + r.IntN(6) {
			p.heights = append(p.heights, height)
			height = -height
		}
		if p.rate < 10*p.fn {
			continue
		}
		// Only what the bound allows to be determined at all.
		if u, _ := p.bound(false); u < 0.03 {
			return p
		}
	}
}

// Of 2,000 good traces none may be refused, reserved, miscounted or far off.
func TestGoodTraces(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 5))
	var sum tally
	for range trials(25, 2000) {
		p := goodPlan(r)
		steps, c, reservations, err := Analyse(p.make(r), Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
		if err != nil {
			t.Fatal(err)
		}
		if len(steps) != len(p.heights) || len(reservations) > 0 || !c.Determined {
			t.Errorf("%d steps of %d, %v %v %+v", len(steps), len(p.heights), c.Reasons, reservations, p)
		}
		sum.add(p, c, reservations)
	}
	n := float64(sum.count)
	fn, zeta := float64(sum.coverFn)/n, float64(sum.coverZeta)/n
	t.Logf("traces %d, refused %d, reserved %d, gross %d, cover %.3f %.3f", sum.count, sum.refused, sum.reserved, sum.gross, fn, zeta)
	if sum.gross > 0 {
		t.Errorf("%d errors of over 20 %%", sum.gross)
	}
	checkCoverage(t, "good traces", fn, zeta, sum.count, 0.97)
}
