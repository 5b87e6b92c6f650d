package step

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The correlation that a fit claims is the one its estimates show over many
// noisy traces, for the fit alone and for several steps together. Tolerance:
// three standard deviations of a correlation of n pairs.
func TestCorrelation(t *testing.T) {
	for _, zeta := range []float64{0.2, 0.64, 1.2} {
		for _, heights := range [][]float64{{100}, {100, -100, 100, -100, 100, -100}} {
			p := plan{fn: 20, zeta: zeta, rate: 500, before: 0.4, spacing: 1.2, heights: heights, sigma: 0.3}
			r := rand.New(rand.NewPCG(11, 7))
			n := trials(12, 1500)
			var x, y []float64
			claimed := 0.0
			for range n {
				p.phase = r.Float64()
				_, c, _, err := Analyse(p.make(r), Settings{EdgeStated: true, MinimumStep: 8})
				if err != nil || !c.Determined {
					t.Fatalf("zeta %g: %v %v", zeta, c.Reasons, err)
				}
				x, y = append(x, math.Log(c.Frequency.Value)), append(y, c.Damping.Value)
				claimed += c.Correlation / float64(n)
			}
			var mx, my, xx, yy, xy float64
			for i := range x {
				mx += x[i] / float64(n)
				my += y[i] / float64(n)
			}
			for i := range x {
				xx += (x[i] - mx) * (x[i] - mx)
				yy += (y[i] - my) * (y[i] - my)
				xy += (x[i] - mx) * (y[i] - my)
			}
			seen := xy / math.Sqrt(xx*yy)
			slack := 3 * (1 - seen*seen) / math.Sqrt(float64(n))
			// The mean of a correlation of few pairs is nearer to zero than the
			// correlation: r (1 - (1 - r^2)/(2 (n - 1))), here of six steps.
			if k := float64(len(heights)); k > 1 {
				slack += math.Abs(seen) * (1 - seen*seen) / 2 / (k - 1)
			}
			t.Logf("zeta %.2f, %d steps: correlation %.3f, claimed %.3f", zeta, len(heights), seen, claimed)
			if math.Abs(seen-claimed) > slack {
				t.Errorf("zeta %g, %d steps: correlation %.3f, claimed %.3f", zeta, len(heights), seen, claimed)
			}
		}
	}
}
