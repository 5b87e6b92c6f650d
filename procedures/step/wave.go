package step

import "math"

// A pulse that is still in the line after the step (somebody's, or a pump's)
// lies under the whole trace. It is looked for where the answer is not: before
// the step and in the settled tail.

const (
	slowestWave  = 0.5 // Hz
	fastestWave  = 5
	waveHarmonic = 3   // sines and cosines of so many multiples
	waveShare    = 0.6 // of what is there beyond two straight lines, to be called a wave
)

// wave returns the rate (Hz) and the height from trough to crest of a periodic
// wave in the residuals away from the answer. Least squares of three harmonics
// on means of 10 ms, the rate on a grid of 2 %; at least one whole period must
// be there. Source: by hand.
func (q *quality) wave(tau float64) (rate, height float64, is bool) {
	n := len(q.step.Residuals)
	r := q.withoutSpikes(q.step.Residuals)
	tail := min(n, q.post-q.from+int((12*tau+q.width())*q.rate))
	length := max(1, int(0.01*q.rate))
	var times, values, side []float64
	for k, part := range [2][2]int{{0, max(0, min(q.pre-q.from, n))}, {tail, n}} {
		for i := part[0]; i+length <= part[1]; i += length {
			sum := 0.0
			for _, v := range r[i : i+length] {
				sum += v
			}
			times = append(times, (float64(i)+float64(length-1)/2)/q.rate)
			values, side = append(values, sum/float64(length)), append(side, float64(k))
		}
	}
	if len(times) < 30 {
		return 0, 0, false
	}
	long := float64(len(times)*length) / q.rate
	lines := [][]float64{make([]float64, len(times)), make([]float64, len(times)), make([]float64, len(times)), make([]float64, len(times))}
	for i, s := range side {
		k := 2 * int(s)
		lines[k][i], lines[k+1][i] = 1, times[i]-times[len(times)/2]
	}
	whole, _ := leastSquares(lines, values)
	best := whole
	var wave []float64
	for f := slowestWave; f < fastestWave; f *= 1.02 {
		if f*long < 1 {
			continue
		}
		columns := lines
		for k := 1; k <= waveHarmonic; k++ {
			sines, cosines := make([]float64, len(times)), make([]float64, len(times))
			for i, t := range times {
				sines[i], cosines[i] = math.Sincos(2 * math.Pi * f * float64(k) * t)
			}
			columns = append(columns, sines, cosines)
		}
		if left, b := leastSquares(columns, values); left < best {
			best, rate = left, f
			wave = make([]float64, len(times))
			for c := len(lines); c < len(columns); c++ {
				for i, v := range columns[c] {
					wave[i] += b[c] * v
				}
			}
		}
	}
	if wave == nil || best > (1-waveShare)*whole {
		return 0, 0, false
	}
	low, high := math.Inf(1), math.Inf(-1)
	for _, v := range wave {
		low, high = math.Min(low, v), math.Max(high, v)
	}
	return rate, high - low, true
}

// leastSquares returns what a linear combination of columns leaves of y (sum
// of squares) and its coefficients.
func leastSquares(columns [][]float64, y []float64) (left float64, b []float64) {
	n := len(columns)
	a := make([][]float64, n)
	b = make([]float64, n)
	for i, c := range columns {
		a[i] = make([]float64, n)
		for k := range i + 1 {
			a[i][k] = dot(c, columns[k])
			a[k][i] = a[i][k]
		}
		a[i][i] *= 1 + 1e-9 // two lines of one side may be much alike
		b[i] = dot(c, y)
	}
	for i := range n { // elimination of a positive definite matrix
		for k := i + 1; k < n; k++ {
			f := a[k][i] / a[i][i]
			for j := i; j < n; j++ {
				a[k][j] -= f * a[i][j]
			}
			b[k] -= f * b[i]
		}
	}
	for i := n - 1; i >= 0; i-- {
		for j := i + 1; j < n; j++ {
			b[i] -= a[i][j] * b[j]
		}
		b[i] /= a[i][i]
	}
	for i, v := range y {
		for k, c := range columns {
			v -= b[k] * c[i]
		}
		left += v * v
	}
	return left, b
}
