package ready

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Truth here is that of the generator, written apart from the code under test.

func TestLeakRateCoversTruth(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	const trials = 400
	inside := 0
	for range trials {
		leak, tau, a := r.Float64()*0.05, 1+4*r.Float64(), 2*r.Float64()
		var ts, ps []float64
		for i := range 300 {
			x := float64(i) * 0.1
			ts = append(ts, x)
			ps = append(ps, 300-leak*x+a*math.Exp(-x/tau)+0.02*r.NormFloat64())
		}
		l, err := LeakRate(ts, ps)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(l.Rate-leak) <= 2*l.Standard {
			inside++
		}
	}
	t.Logf("true rate inside 2 SE in %d of %d", inside, trials)
	if inside < trials*93/100 {
		t.Errorf("the true rate lies inside 2 SE in %d of %d only", inside, trials)
	}
}

func TestLeakRateRefusesFewReadings(t *testing.T) {
	if _, err := LeakRate([]float64{0, 1, 2}, []float64{3, 2, 1}); err == nil {
		t.Error("three readings gave a rate")
	}
}
