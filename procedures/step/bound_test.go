package step

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// bound is the Cramer-Rao bound of ln fn and zeta for one step of a plan
// under white noise, from the Fisher matrix of exactly the parameters freed:
// height, level, drift, time, fn, zeta and, if told, the square of the edge
// width. Derivatives by finite differences of the generator; the variances
// are averaged over eight positions of the step between two samples.
func (p plan) bound(freeWidth bool) (lnFn, zeta float64) {
	n := int((p.before + p.spacing) * p.rate)
	size := 6
	if freeWidth {
		size = 7
	}
	truth := []float64{p.heights[0], 0, 0, 0, math.Log(p.fn), p.zeta, p.width * p.width}
	steps := []float64{1e-3 * p.heights[0], 1, 1, 1e-6 / p.fn, 1e-5, 1e-5, 1e-6 / p.fn / p.fn}
	const phases = 8
	for phase := range phases {
		at := p.before + (float64(phase)+0.5)/phases/p.rate
		model := func(theta []float64) []float64 {
			y := make([]float64, n)
			for i := range y {
				t := float64(i) / p.rate
				y[i] = theta[1] + theta[2]*t +
					theta[0]*trueEdge(t-at-theta[3], math.Sqrt(theta[6]), math.Exp(theta[4]), theta[5])
			}
			return y
		}
		j := mat.NewDense(n, size, nil)
		for k := range size {
			up, down := append([]float64{}, truth...), append([]float64{}, truth...)
			up[k] += steps[k]
			if !(k == 6 && p.width == 0) {
				down[k] -= steps[k]
			}
			a, b := model(up), model(down)
			for i := range n {
				j.Set(i, k, (a[i]-b[i])/(up[k]-down[k]))
			}
		}
		// Columns are brought to unit length before the inversion.
		length := make([]float64, size)
		for k := range size {
			length[k] = mat.Norm(j.ColView(k), 2)
			for i := range n {
				j.Set(i, k, j.At(i, k)/length[k])
			}
		}
		var information, inverse mat.Dense
		information.Mul(j.T(), j)
		if err := inverse.Inverse(&information); err != nil {
			panic(err)
		}
		lnFn += p.sigma * p.sigma * inverse.At(4, 4) / length[4] / length[4] / phases
		zeta += p.sigma * p.sigma * inverse.At(5, 5) / length[5] / length[5] / phases
	}
	return math.Sqrt(lnFn), math.Sqrt(zeta)
}

// full tells whether the whole campaigns were asked for.
func full() bool { return os.Getenv("KYMOBENCH_FULL") == "1" }

// trials is the number for a whole campaign, or for a daily test.
func trials(daily, whole int) int {
	if full() {
		return whole
	}
	return daily
}

// tally collects the errors of many trials of one plan.
type tally struct {
	count, refused, reserved, gross int
	fn, zeta                        float64 // sums of squares of (error of fn)/fn and of zeta
	coverFn, coverZeta              int
}

func (t *tally) add(p plan, c Combined, reservations []Reservation) {
	t.count++
	if len(reservations) > 0 {
		t.reserved++
	}
	if !c.Determined {
		t.refused++
		return
	}
	e := c.Frequency.Value/p.fn - 1
	if math.Abs(e) > 0.2 {
		t.gross++
	}
	t.fn += e * e
	t.zeta += (c.Damping.Value - p.zeta) * (c.Damping.Value - p.zeta)
	if c.Frequency.Low <= p.fn && p.fn <= c.Frequency.High {
		t.coverFn++
	}
	if c.Damping.Low <= p.zeta && p.zeta <= c.Damping.High {
		t.coverZeta++
	}
}

func (t *tally) rmse() (fn, zeta float64) {
	n := float64(t.count - t.refused)
	return math.Sqrt(t.fn / n), math.Sqrt(t.zeta / n)
}

// simulate runs a plan.
func simulate(t *testing.T, p plan, s Settings, count int, seed uint64) tally {
	t.Helper()
	r := rand.New(rand.NewPCG(seed, 5))
	var sum tally
	for range count {
		p.phase = r.Float64()
		_, c, reservations, err := Analyse(p.make(r), s)
		if err != nil {
			t.Fatal(err)
		}
		sum.add(p, c, reservations)
	}
	return sum
}
