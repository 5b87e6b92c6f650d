package step

import (
	"encoding/csv"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"
)

// lsimCase is one answer computed by scipy.signal.lsim.
type lsimCase struct {
	fn, zeta float64
	trace    Trace
}

func lsimCases(t *testing.T) []lsimCase {
	t.Helper()
	file, err := os.Open("testdata/lsim/lsim.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var cases []lsimCase
	for _, row := range rows[1:] {
		var v [7]float64
		for i := range v {
			if v[i], err = strconv.ParseFloat(row[i], 64); err != nil {
				t.Fatal(err)
			}
		}
		if int(v[0]) > len(cases) {
			cases = append(cases, lsimCase{fn: v[1], zeta: v[2], trace: Trace{Rate: v[3]}})
		}
		c := &cases[len(cases)-1].trace
		c.Applied = append(c.Applied, v[5])
		c.Pressure = append(c.Pressure, v[6])
	}
	if len(cases) != 5 {
		t.Fatalf("%d cases, want 5", len(cases))
	}
	return cases
}

// A measured applied pressure gives back what scipy put in, also behind a
// delay of whole samples.
func TestAgainstLsim(t *testing.T) {
	for i, c := range lsimCases(t) {
		for _, delay := range []int{0, 3} {
			trace := c.trace
			n := len(trace.Pressure)
			// The answer lags the applied pressure by as many samples.
			trace.Applied, trace.Pressure = trace.Applied[delay:], trace.Pressure[:n-delay]
			s := one(t, trace, Settings{MinimumStep: 8})
			fn, zeta := s.Frequency.Value, s.Damping.Value
			if !near(fn, c.fn, 1e-6) || !near(zeta, c.zeta, 1e-6) || !near(s.Height, 90, 1e-4) || math.Abs(s.Delay*trace.Rate-float64(delay)) > 1e-4 {
				t.Errorf("case %d delay %d: %v fn %.9g want %g, zeta %.9g want %g, height %.6g, delay %.6g samples", i+1, delay, s.Reasons, fn, c.fn, zeta, c.zeta, s.Height, s.Delay*trace.Rate)
			}
		}
	}
}

// The intervals hold with noise on the pressure alone.
func TestLsimCoverage(t *testing.T) {
	r := rand.New(rand.NewPCG(31, 1))
	for i, c := range lsimCases(t) {
		if c.zeta > 1 {
			continue // its uncertainty is over 5 % at this noise
		}
		coverFn, coverZeta, n := 0, 0, trials(25, 1000)
		for range n {
			trace := c.trace
			trace.Pressure = append([]float64{}, c.trace.Pressure...)
			noisy(trace.Pressure, 0.1, r)
			s := one(t, trace, Settings{MinimumStep: 8})
			if s.Frequency.Low <= c.fn && c.fn <= s.Frequency.High {
				coverFn++
			}
			if s.Damping.Low <= c.zeta && c.zeta <= s.Damping.High {
				coverZeta++
			}
		}
		t.Logf("case %d: cover %d and %d of %d", i+1, coverFn, coverZeta, n)
		if float64(coverFn) < 0.85*float64(n) || float64(coverZeta) < 0.85*float64(n) {
			t.Errorf("case %d: the 95 %% intervals cover %d and %d of %d", i+1, coverFn, coverZeta, n)
		}
	}
}
