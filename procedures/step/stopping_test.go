package step

import (
	"encoding/csv"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"
)

// The bounds are those of the simulation in testdata/stopping, rounded: within
// 0.002, its own uncertainty.
func TestStoppingBounds(t *testing.T) {
	file, err := os.Open("testdata/stopping/stopping.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil || len(rows) < 40 {
		t.Fatalf("%d rows, %v", len(rows), err)
	}
	for _, row := range rows[1:] {
		least, _ := strconv.Atoi(row[0])
		most, _ := strconv.Atoi(row[1])
		z, err := strconv.ParseFloat(row[3], 64)
		if got := (Stopping{least, most}).bound(); err != nil || math.Abs(got-z) > 0.002 {
			t.Errorf("%d to %d: %g, want %g (%v)", least, most, got, z, err)
		}
	}
	for _, s := range []Stopping{{2, 10}, {3, 31}} {
		if f := s.Factor(4); !math.IsInf(f, 1) {
			t.Errorf("%+v: factor %g", s, f)
		}
	}
	if f := (Stopping{}).Factor(4); f != 1 {
		t.Errorf("fixed: factor %g", f)
	}
	// What lies between two rows gets the more careful one.
	if got, want := (Stopping{7, 13}).bound(), (Stopping{6, 15}).bound(); got != want {
		t.Errorf("7 to 13: %g, want %g", got, want)
	}
}

// Runs that stop when a limit is decided: a line whose fn stands exactly at
// the limit is passed in 2.5 % of them, not in 10 %, and the interval at the
// end holds the truth in 95 %, wherever it lies.
func TestStoppingRisk(t *testing.T) {
	r := rand.New(rand.NewPCG(71, 1))
	for _, s := range []Stopping{{3, 20}, {5, 12}, {4, 30}} {
		for _, offset := range []float64{0, 0.5, 1, 3} { // of the truth above the limit, in SD of a step
			runs := trials(400, 40000)
			var passed, failed, naive, inside, steps int
			for range runs {
				var all []Step
				naively, done := false, false
				for n := 1; n <= s.Most && (!done || !naively); n++ {
					all = append(all, Step{
						Determined: true, DegreesOfFreedom: 200,
						Frequency: Estimate{Value: 24 * math.Exp(0.02*(offset+r.NormFloat64())), StandardUncertainty: 0.05},
						Damping:   Estimate{Value: 0.4, StandardUncertainty: 1e-4},
					})
					if n < s.Least {
						continue
					}
					naively = naively || Combine(all).Frequency.Low > 24
					if done {
						continue
					}
					c := CombineStopped(all, s)
					pass, fail := c.Frequency.Low > 24, c.Frequency.High < 24
					if done = pass || fail || n == s.Most; done {
						steps += n
						if truth := 24 * math.Exp(0.02*offset); c.Frequency.Low <= truth && truth <= c.Frequency.High {
							inside++
						}
					}
					if pass {
						passed++
					}
					if fail {
						failed++
					}
				}
				if naively {
					naive++
				}
			}
			n := float64(runs)
			t.Logf("%d to %d steps, truth %.1f SD above the limit: passed %.4f (with plain intervals %.4f), failed %.4f, interval holds it in %.4f, steps %.1f", s.Least, s.Most, offset, float64(passed)/n, float64(naive)/n, float64(failed)/n, float64(inside)/n, float64(steps)/n)
			slack := 3 * math.Sqrt(0.025*0.975/n)
			if offset == 0 && (float64(passed)/n > 0.025+slack || float64(failed)/n > 0.025+slack || float64(naive)/n < 0.05) {
				t.Errorf("at the limit: passed %d, failed %d, with plain intervals %d of %d", passed, failed, naive, runs)
			}
			if float64(inside)/n < 0.95-2*slack {
				t.Errorf("the interval holds the truth in %d of %d", inside, runs)
			}
		}
	}
}

// What is foretold is about what it takes.
func TestMore(t *testing.T) {
	inf := math.Inf(1)
	for _, c := range []struct {
		s                          Stopping
		n                          int
		mean, scatter, common, low float64
		more                       int
		can                        bool
	}{
		// t(0.975; 4) = 2.776: 2.776 x 1/sqrt 5 = 1.2415 (tables).
		{Stopping{}, 5, 1.25, 1, 0, 0, 0, true},
		{Stopping{}, 4, 1.25, 1, 0, 0, 1, true},
		// t(0.975; 9) = 2.262: 2.262/sqrt 10 = 0.7153; t(8) = 2.306: 0.7687.
		{Stopping{}, 5, 0.72, 1, 0, 0, 5, true},
		{Stopping{}, 5, 0.1, 1, 0, 0, 0, false},
		{Stopping{}, 5, 1.25, 0.1, 1.3, 0, 0, false},
		{Stopping{3, 10}, 5, 0.72, 1, 0, 0, 0, false}, // plain 10 steps would do, looking does not
		{Stopping{3, 20}, 5, -0.8, 1, 0, 0, 10, true},
	} {
		more, can := c.s.More(c.n, c.mean, c.scatter, c.common, c.low, inf, 1)
		if can != c.can || c.s.looks() && can && (more < 8 || more > 12) || !c.s.looks() && more != c.more {
			t.Errorf("%+v: %d %v", c, more, can)
		}
	}
}
