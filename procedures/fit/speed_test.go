package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// simulated is a UUT with bow, hysteresis and noise: 7 set pressures, 2 legs.
func simulated(r *rand.Rand, cycles int) Data {
	n := 14 * cycles
	d := Data{
		Reference: make([]float64, 0, n), UUT: make([]float64, 0, n), Set: make([]float64, 0, n),
		Cycle: make([]int, 0, n), Down: make([]bool, 0, n),
	}
	for cycle := 1; cycle <= cycles; cycle++ {
		for k := range 14 {
			down := k > 6
			set := 50 * float64(min(k, 13-k))
			p := set + 0.2*r.NormFloat64()
			y := 0.4 + 1.003*p + 1e-5*p*(300-p) + 0.05*r.NormFloat64()
			if down {
				y += 0.3 * (1 - math.Pow(set/150-1, 2))
			}
			d.Reference, d.UUT, d.Set = append(d.Reference, p), append(d.UUT, y), append(d.Set, set)
			d.Cycle, d.Down = append(d.Cycle, cycle), append(d.Down, down)
		}
	}
	return d
}

// The table of cost against readings: ns/reading stays the same.
func BenchmarkStatic(b *testing.B) {
	for _, cycles := range []int{3, 30, 300, 3000, 30_000, 71_429} {
		d := simulated(rand.New(rand.NewPCG(1, 2)), cycles)
		b.Run(fmt.Sprint(len(d.UUT)), func(b *testing.B) {
			for b.Loop() {
				if _, err := Static(d); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(d.UUT)), "ns/reading")
		})
	}
}
