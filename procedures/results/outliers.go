package results

import (
	"math"
	"slices"
)

// A byte damaged on the line can turn a digit into another digit, and where
// there is no checksum nothing but the other readings can show it. So a reading
// that lies far outside what its neighbours scatter is left out and counted;
// more than a few are no damage of a line, and all of them count.
const (
	outlierSDs   = 8.0 // of the scatter, from the median absolute deviation
	outlierSteps = 3.0 // and so many resolutions
	outlierShare = 0.02
)

// dropOutliers returns x without the values that lie more than 8 standard
// deviations, and 3 resolutions, from the median, and how many those were. The
// standard deviation is 1.4826 times the median absolute deviation from the
// median (of a normal distribution). Of fewer than 8 values none is left out,
// nor when more than 2 % of them (at least one) would be. Source: Hampel's
// identifier, from memory; the numbers are our own.
func dropOutliers(x []float64, resolution float64) ([]float64, int) {
	keep, n := withoutOutliers(x, resolution)
	if n == 0 {
		return x, 0
	}
	return kept(x, keep), n
}

// kept returns the values that count.
func kept(x []float64, keep []bool) []float64 {
	out := make([]float64, 0, len(x))
	for i, k := range keep {
		if k {
			out = append(out, x[i])
		}
	}
	return out
}

// withoutOutliersOfTrend is withoutOutliers for values that drift: of their
// distances from the line through the medians of the first and the last third.
func withoutOutliersOfTrend(t, x []float64, resolution float64) (keep []bool, n int) {
	third := len(x) / 3
	if third < 3 {
		return nil, 0
	}
	middle := func(from, to int) (float64, float64) {
		return median(slices.Clone(t[from:to])), median(slices.Clone(x[from:to]))
	}
	t0, x0 := middle(0, third)
	t1, x1 := middle(len(x)-third, len(x))
	if t1 == t0 {
		return nil, 0
	}
	off := make([]float64, len(x))
	for i := range x {
		off[i] = x[i] - x0 - (x1-x0)*(t[i]-t0)/(t1-t0)
	}
	return withoutOutliers(off, resolution)
}

// withoutOutliers says of each value whether it counts, and how many do not.
func withoutOutliers(x []float64, resolution float64) (keep []bool, n int) {
	if len(x) < 8 {
		return nil, 0
	}
	m := median(slices.Clone(x))
	off := make([]float64, len(x))
	for i, v := range x {
		off[i] = math.Abs(v - m)
	}
	bound := outlierSDs*1.4826*median(slices.Clone(off)) + outlierSteps*resolution
	keep = make([]bool, len(x))
	for i, d := range off {
		if keep[i] = d <= bound; !keep[i] {
			n++
		}
	}
	if n > max(1, int(outlierShare*float64(len(x)))) {
		return nil, 0
	}
	return keep, n
}

// median sorts x.
func median(x []float64) float64 {
	slices.Sort(x)
	n := len(x)
	if n%2 == 1 {
		return x[n/2]
	}
	return (x[n/2-1] + x[n/2]) / 2
}
