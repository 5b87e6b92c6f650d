package results

import (
	"math"
	"math/rand/v2"
	"testing"
)

// One damaged value among many is left out, wherever it is; of clean values
// hardly one is: beyond 8 standard deviations a normal distribution has 1.2e-15.
func TestOutliers(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for n := 8; n < 400; n += 7 {
		x := make([]float64, n)
		for i := range x {
			x[i] = 100 + 0.2*r.NormFloat64()
		}
		if _, dropped := dropOutliers(x, 0.01); dropped > 0 && n >= 20 {
			t.Errorf("%d of %d clean values left out", dropped, n)
		}
		at := r.IntN(n)
		x[at] = 190
		out, dropped := dropOutliers(x, 0.01)
		if dropped != 1 || len(out) != n-1 || math.Abs(mean(out)-100) > 0.3 {
			t.Errorf("of %d with one damaged: %d left out, mean %v", n, dropped, mean(out))
		}
	}
	// More than a few, a constant with whole steps, and too few: all count.
	two := []float64{1, 1, 1, 1, 1, 1, 1, 50, 50}
	if _, n := dropOutliers(two, 0.01); n != 0 {
		t.Errorf("%d of two in nine", n)
	}
	steps := []float64{1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 2}
	if _, n := dropOutliers(steps, 1); n != 0 {
		t.Errorf("%d of a last digit that turns", n)
	}
	if _, n := dropOutliers([]float64{0, 0, 0, 0, 0, 0, 900}, 0.01); n != 0 {
		t.Errorf("%d of seven", n)
	}
}

// A slow loss is no outlier, a damaged reading in it is.
func TestOutliersOfTrend(t *testing.T) {
	var at, x []float64
	for i := range 300 {
		at = append(at, float64(i)/10)
		x = append(x, 300-0.05*float64(i)/10+0.02*math.Sin(float64(i)))
	}
	if _, n := withoutOutliersOfTrend(at, x, 0.01); n != 0 {
		t.Errorf("%d of a clean loss", n)
	}
	x[170] = 30
	if keep, n := withoutOutliersOfTrend(at, x, 0.01); n != 1 || keep[170] {
		t.Errorf("%d left out", n)
	}
}

// The ratios stand in tables of units: 1 kPa = 7.500616 mmHg, 1 psi = 51.71493
// mmHg, 1 hPa = 0.7500616 mmHg (NIST SP 811, App. B.8, from memory).
func TestMistakenUnit(t *testing.T) {
	for _, ratio := range []float64{7.500616, 0.1333224, 51.71493, 0.01933678, 0.7500616, 1.333224, 6.894757} {
		for _, off := range []float64{1, 1.009, 0.992} {
			if mistakenUnit(ratio*off) == "" {
				t.Errorf("%v times %v is no mistaken unit", ratio, off)
			}
		}
	}
	for _, slope := range []float64{1, 0.95, 1.05, 1.02, 0.98, 2, 0.5, 0.7, 1.3, 11, 0, -1} {
		if s := mistakenUnit(slope); s != "" {
			t.Errorf("a slope of %v is %s", slope, s)
		}
	}
}
