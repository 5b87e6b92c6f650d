package step

import (
	"math"
	"testing"
)

// The answer behind a lag against the generator's response to exp(-t/tau).
func TestDelayed(t *testing.T) {
	for _, zeta := range []float64{0.1, 0.64, 1.0003, 1.5} {
		for _, kappa := range []float64{0.15, 0.5, 1.2} {
			for x := 0.1; x < 20; x *= 1.3 {
				c, s := kernel(x, zeta)
				want := exponentialEdge(x/(2*math.Pi), kappa/(2*math.Pi), 1, zeta)
				if got := delayed(x, zeta, kappa, c, s); math.Abs(got-want) > 1e-9 {
					t.Errorf("x %g zeta %g kappa %g: %.12g want %.12g", x, zeta, kappa, got, want)
				}
			}
		}
	}
}
