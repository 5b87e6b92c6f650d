package step

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// quality looks at one fit for what would make its figures untrue.
type quality struct {
	fitted
	step    *Step
	trace   []float64
	quantum float64
	rate    float64
}

// leastDamping: a swing that does not decay is no answer to a step.
const leastDamping = 0.01

// isStep tells a lasting change of level from whatever else set off the
// onset: the model must explain the movement and the change exceed the noise.
func (q *quality) isStep() bool {
	h := math.Abs(q.step.Height)
	if !(h > q.threshold/2) || !(h > 3*q.step.Noise) || q.theta[lnZeta] < math.Log(leastDamping) {
		return false
	}
	// A pulse comes back by itself: to the fit a step that drift takes away.
	w, zeta := math.Exp(q.theta[lnOmega]), math.Exp(q.theta[lnZeta])
	soon := math.Min(float64(q.to-q.post)/q.rate, 20*settling(w, zeta))
	if math.Abs(q.step.Height+q.step.Drift*soon) < h/2 {
		return false
	}
	var miss, all float64
	mean := 0.0
	y := q.problem.y
	clean := q.withoutSpikes(q.step.Residuals)
	for _, v := range y {
		mean += v / float64(len(y))
	}
	for i, v := range y {
		r := clean[i] / q.scale
		miss += r * r
		all += (v - mean) * (v - mean)
	}
	return miss < 0.25*all
}

// rivals tells whether a second minimum explains the trace as well as the
// best (cost within what noise can do) with another frequency.
func (q *quality) rivals(fn float64, c covariance) bool {
	other := math.Exp(q.second.theta[lnOmega]) / (2 * math.Pi)
	if math.Abs(math.Log(other/fn)) < 0.05 {
		return false
	}
	variance := c.sigma * c.sigma / (q.scale * q.scale)
	return q.second.at.cost-q.at.cost < 16*variance
}

// clipped looks for a flat top: a run of equal extreme values entered or left
// at a pace that a rounded top or a plateau approached by itself cannot have.
func (q *quality) clipped() bool {
	y := q.trace[q.from:q.to]
	start := max(0, q.post-q.from-1)
	for start < len(y) && (y[start]-q.base)/q.scale < 0.5 {
		start++ // the level before the step is no rail
	}
	response := y[start:]
	if len(response) < 4 {
		return false
	}
	low, high := slices.Min(response), slices.Max(response)
	return q.flat(response, low) || q.flat(response, high)
}

// flat looks for the run at one extreme. Noise: a sample falls on one given
// digit with a chance of at most 0.4 digits/noise, so that a run long enough
// (1 in 10,000, four at least) does not happen by chance. Shape: a rounded
// top that shows L equal samples, half = (L - 1)/2, falls by at most a digit
// over half, so by ((half + k)/half)^2 digits k samples beyond it; a plateau
// approached by ten samples a period by 1.9 and 3.5 digits. A digit is added
// for rounding, and six times the noise.
func (q *quality) flat(y []float64, extreme float64) bool {
	h, noise := math.Abs(q.step.Height), q.step.Noise
	long := math.MaxInt
	if noise > q.quantum/2 && noise > 1e-6*h {
		chance := math.Min(0.4*q.quantum/noise, 0.63)
		long = max(4, int(math.Ceil(4/-math.Log10(chance))))
	}
	for i := 0; i < len(y); i++ {
		end := i
		for end < len(y) && y[end] == extreme {
			end++
		}
		if end-i >= long {
			return true
		}
		if end-i >= 3 {
			half := float64(end-i-1) / 2
			for k, plateau := range []float64{1.9, 3.5} {
				limit := 1e-6*h + 6*noise + q.quantum*(1+math.Max(math.Pow((half+float64(k+1))/half, 2), plateau))
				for _, at := range []int{i - 1 - k, end + k} {
					if at >= 0 && at < len(y) && math.Abs(y[at]-extreme) > limit {
						return true
					}
				}
			}
		}
		i = max(i, end)
	}
	return false
}

// reserve adds the reservations that depend on residuals and noise.
func (q *quality) reserve(fn, zeta float64) {
	s := q.step
	n := float64(len(s.Residuals))
	if k := len(q.spikes); k > 0 {
		s.reserve(Misfit, fmt.Sprintf("%d single samples stand far out of the rest and were left out", k))
	}
	if phi := s.Autocorrelation; phi > 0.2 && phi*math.Sqrt(n) > 5 && s.Noise > 1e-6*math.Abs(s.Height) {
		if rate, height, is := q.wave(settling(2*math.Pi*fn, zeta)); is {
			s.reserve(ResidualWave, fmt.Sprintf("a wave of %.2g from trough to crest, %.0f a minute, lies under the step; the intervals allow for noise that is correlated, not for its shape", height, 60*rate))
		} else {
			s.reserve(ColouredNoise, fmt.Sprintf("the noise is correlated from sample to sample (%.2f); the intervals allow for it", phi))
		}
	}
	if text, is := q.misfit(fn, zeta); is {
		s.reserve(Misfit, text)
	}
	if q.quantum > 1e-4*math.Abs(s.Height) && s.Noise < 0.4*q.quantum {
		s.reserve(Quantised, fmt.Sprintf("the digits of the trace (%.3g) are coarser than 2.5 times its noise (%.3g); the intervals may be too narrow", q.quantum, s.Noise))
	}
	moved := math.Abs(s.Drift) * float64(s.To-s.From) / q.rate
	if moved > 0.05*math.Abs(s.Height) {
		s.reserve(Drift, fmt.Sprintf("the level drifts by %.3g a second, %.2g %% of the step within the part fitted", s.Drift, 100*moved/math.Abs(s.Height)))
	}
}

// misfit compares the energy of the smoothed residuals of the answer with
// that before the step: more than 2.5 times (or more than chance gives a
// short stretch, 1 in 10,000 by the F distribution), and a peak of over 0.5 %
// of the step. Averaging over an eighth of a period leaves what a wrong model
// leaves and takes the noise away.
func (q *quality) misfit(fn, zeta float64) (string, bool) {
	s := q.step
	residuals := q.withoutSpikes(s.Residuals)
	length := max(1, int(math.Round(q.rate/(8*fn))))
	tau := settling(2*math.Pi*fn, zeta)
	split := q.post - q.from - 1
	if !q.problem.measured {
		split -= int(q.width() / 2 * q.rate)
	}
	split = max(0, min(split, len(s.Residuals)))
	end := min(len(s.Residuals), split+int(math.Max(10*tau, 2/fn)*q.rate)+2)
	answer, peak, answerCells := smoothed(residuals[split:end], length)
	// The noise is taken from the trace about its own line, for a wrong model
	// is wrong before the step as well.
	before := detrended(q.quiet(min(q.pre-q.from, split)))
	rest, _, restCells := smoothed(before, length)
	loss := (1 - s.Autocorrelation) / (1 + s.Autocorrelation)
	answerCells, restCells = math.Max(1, answerCells*loss), restCells*loss
	floor := q.quantum * q.quantum / 12 / float64(length)
	ratio := answer / math.Max(rest, floor)
	limit := 2.5
	if restCells >= 1 {
		limit = math.Max(limit, distuv.F{D1: answerCells, D2: restCells}.Quantile(0.9999))
	} else {
		ratio = 0
	}
	share := peak / math.Abs(s.Height)
	if !(share > 0.005 && ratio > limit || share > 0.001 && ratio > 4*limit) {
		return "", false
	}
	return fmt.Sprintf("the fit leaves up to %.2g %% of the step unexplained, beyond the noise before it; the line may not be a second-order system, or the step not single", 100*share), true
}

// quiet is the trace before the step, n samples, without the spikes.
func (q *quality) quiet(n int) []float64 {
	y := slices.Clone(q.trace[q.from : q.from+max(0, n)])
	for _, i := range q.spikes {
		if i < len(y) {
			y[i] = q.step.Fitted[i]
		}
	}
	return y
}

// smoothed returns the mean square and the largest magnitude of r averaged
// over length samples, and how many independent averages it holds.
func smoothed(r []float64, length int) (energy, peak, cells float64) {
	if len(r) < length {
		return 0, 0, 0
	}
	sum := 0.0
	count := 0.0
	for i, v := range r {
		sum += v
		if i >= length {
			sum -= r[i-length]
		}
		if i >= length-1 {
			m := sum / float64(length)
			energy += m * m
			peak = math.Max(peak, math.Abs(m))
			count++
		}
	}
	return energy / count, peak, float64(len(r)) / float64(length)
}

// lineScatter is the standard deviation about a straight line.
func lineScatter(y []float64) float64 {
	if len(y) < 4 {
		return 0
	}
	r := detrended(y)
	return math.Sqrt(dot(r, r) / float64(len(r)-2))
}

// detrended is y less its least-squares line.
func detrended(y []float64) []float64 {
	n := float64(len(y))
	var mean, xy, xx float64
	for _, v := range y {
		mean += v / n
	}
	for i, v := range y {
		x := float64(i) - (n-1)/2
		xy += x * (v - mean)
		xx += x * x
	}
	r := make([]float64, len(y))
	for i, v := range y {
		r[i] = v - mean
		if xx > 0 {
			r[i] -= xy / xx * (float64(i) - (n-1)/2)
		}
	}
	return r
}

// quantum finds the step of the digits in a trace: the smallest difference
// between values, if all differences are whole multiples of it. 0 when the
// values follow no such grid or too few differ.
func quantum(y []float64) float64 {
	s := slices.Compact(sorted(y))
	if len(s) < 2 {
		return 0
	}
	least := math.Inf(1)
	size := math.Max(math.Abs(s[0]), math.Abs(s[len(s)-1]))
	for i := 1; i < len(s); i++ {
		if d := s[i] - s[i-1]; d > 1e-9*size {
			least = math.Min(least, d)
		}
	}
	if math.IsInf(least, 1) {
		return 0
	}
	for i := 1; i < len(s); i++ {
		k := (s[i] - s[0]) / least
		if math.Abs(k-math.Round(k)) > 0.05 && math.Abs(k) < 1e5 {
			return 0
		}
	}
	return least
}
