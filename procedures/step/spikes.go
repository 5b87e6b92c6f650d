package step

import (
	"math"
	"slices"
)

// leaveOutSpikes puts the model's value in place of single samples, or two
// in a row, that stand out by more than eight robust standard deviations,
// and searches again, until none is left. A crowd of them is no spikes but a
// wrong model, and stays.
func (f *fitted) leaveOutSpikes() {
	p := f.problem
	original := slices.Clone(p.y)
	for range 6 {
		r := f.residuals(f.jacobian()[:linear])
		for i := range r {
			r[i] += original[i] - p.y[i]
		}
		spikes := standingOut(r)
		if len(spikes) == len(f.spikes) && (len(spikes) == 0 || slices.Equal(spikes, f.spikes)) && f.replaced(spikes, r, original) {
			return
		}
		f.spikes = spikes
		copy(p.y, original)
		for _, i := range spikes {
			p.y[i] = original[i] - r[i]
		}
		p.prepare()
		again := polish(p, f.theta)
		if math.IsInf(again.at.cost, 1) {
			return
		}
		f.found = again
	}
}

// replaced tells whether the values standing in for spikes already agree
// with the model, to a hundredth of the noise.
func (f *fitted) replaced(spikes []int, r, original []float64) bool {
	noise := math.Sqrt(f.at.cost / float64(len(r)))
	for _, i := range spikes {
		if math.Abs(original[i]-r[i]-f.problem.y[i]) > 0.01*noise {
			return false
		}
	}
	return true
}

// standingOut lists the spikes among residuals in the scaled unit: what
// differs from the median of itself and its four neighbours, so that the
// broad residuals of a fit that spikes have pulled aside do not hide them.
func standingOut(r []float64) []int {
	sharp := make([]float64, len(r))
	sizes := make([]float64, len(r))
	for i, v := range r {
		var near [5]float64
		k := copy(near[:], r[max(0, i-2):min(len(r), i+3)])
		slices.Sort(near[:k])
		sharp[i] = math.Abs(v - middle(near[:k]))
		sizes[i] = sharp[i]
	}
	// The median of these differences is 0.49 standard deviations for white
	// noise (simulated), so that the limit is eight.
	limit := math.Max(8/0.49*median(sizes), 1e-3)
	var spikes []int
	for i := 0; i < len(r); i++ {
		run := 0
		for i+run < len(r) && sharp[i+run] > limit {
			run++
		}
		for k := range run {
			if run <= 2 {
				spikes = append(spikes, i+k)
			}
		}
		i += run
	}
	if len(spikes) > max(2, len(r)/100) {
		return nil
	}
	return spikes
}
