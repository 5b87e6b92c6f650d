package step

import (
	"math"
	"slices"
)

// Times of the onset search, s (facts of the project: with them every one of
// 1,240 simulated steps was found, with drift, a residual wave and spikes).
const (
	memory  = 0.25  // the level before is the median over this long
	gap     = 0.010 // ended this long before the sample looked at
	confirm = 0.001 // a departure lasts at least this long, and 3 samples
	holdOff = 0.6   // after an onset none is looked for
)

// onsets returns the first sample of every departure from the level before.
// At least confirm long, all samples lie beyond half the threshold on one
// side and their mean beyond all of it; the threshold is the larger of least
// and six robust standard deviations of the level.
func onsets(y []float64, rate, least float64, from int) (at int, found bool) {
	m := max(3, int(math.Ceil(confirm*rate)))
	back, away := max(8, int(memory*rate)), max(2, int(math.Round(gap*rate)))
	renew := max(1, int(0.004*rate))
	var level, threshold float64
	var low, high float64
	scratch := make([]float64, 0, 64)
	for i := from + 4 + away; i+m <= len(y); i++ {
		// What stays within half of what a departure needs has no need of a level
		// that is newer; one that drifts leaves it and gets one.
		if k := i - from - 4 - away; k%renew == 0 && (k == 0 || !within(y[i:min(len(y), i+renew+m)], level, threshold/4)) {
			scratch = scratch[:0]
			start := max(from, i-away-back)
			stride := max(1, (i-away-start)/64)
			for j := start; j < i-away; j += stride {
				scratch = append(scratch, y[j])
			}
			slices.Sort(scratch)
			level = middle(scratch)
			// The range between the 5th and 95th percentile: what already
			// moves to and fro before i, ringing for instance, is no onset.
			low, high = scratch[len(scratch)/20], scratch[len(scratch)-1-len(scratch)/20]
			for j := range scratch {
				scratch[j] = math.Abs(scratch[j] - level)
			}
			slices.Sort(scratch)
			threshold = math.Max(least, 6*1.4826*middle(scratch))
		}
		if departs(y[i:i+m], level, threshold, low, high) {
			return i, true
		}
	}
	return 0, false
}

// within says that all values lie that near to the level.
func within(y []float64, level, near float64) bool {
	for _, v := range y {
		if !(math.Abs(v-level) <= near) {
			return false
		}
	}
	return true
}

func departs(y []float64, level, threshold, low, high float64) bool {
	sum := 0.0
	up := y[0] > level
	for _, v := range y {
		switch {
		case up && !(v > level+threshold/2 && v > high+threshold/4):
			return false
		case !up && !(v < level-threshold/2 && v < low-threshold/4):
			return false
		}
		sum += v - level
	}
	return math.Abs(sum)/float64(len(y)) >= threshold
}

// middle is the median of a sorted slice.
func middle(s []float64) float64 {
	n := len(s)
	if n == 0 {
		return 0
	}
	return (s[(n-1)/2] + s[n/2]) / 2
}

// sorted returns the values in order, of a long slice a few thousand evenly
// taken ones: enough for the robust figures they are for.
func sorted(y []float64) []float64 {
	stride := max(1, len(y)/4096)
	s := make([]float64, 0, len(y)/stride+1)
	for i := 0; i < len(y); i += stride {
		s = append(s, y[i])
	}
	slices.Sort(s)
	return s
}

// median of any slice, which is left as it is.
func median(y []float64) float64 { return middle(sorted(y)) }

// spread is the range of the trace without its outermost hundredths.
func spread(y []float64) float64 {
	if len(y) == 0 {
		return 0
	}
	s := sorted(y)
	return s[len(s)-1-len(s)/100] - s[len(s)/100]
}

// before returns the last sample that surely lies before the step seen at
// onset: as far ahead of it as the half-way crossing lies behind, for the
// answer starts as a parabola. Half way to what is found by looking twice as
// far each time, until the departure stops growing or is many times what it
// was at the onset: a further step may follow at once.
func before(y []float64, rate float64, from, onset, to int) int {
	back := max(from, onset-max(8, int(memory*rate)))
	base := median(y[back:max(back+1, onset-max(2, int(gap*rate)))])
	first, reached := math.Abs(y[onset]-base), 0.0
	for reach := max(4, int(gap*rate)); onset+reach/2 < to && reach < int(2*rate)+5; reach *= 2 {
		departure := math.Abs(median(y[onset+reach/2:min(to, onset+reach)]) - base)
		stalled := departure < 1.2*reached
		reached = math.Max(reached, departure)
		if stalled || reached > 8*first {
			break
		}
	}
	half := onset
	for half < to-1 && math.Abs(y[half]-base) < reached/2 {
		half++
	}
	return max(from, onset-(half-onset)-max(2, int(0.002*rate)))
}
