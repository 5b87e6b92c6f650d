package ready

import (
	"math"
	"math/rand/v2"
)

// The bench of the campaigns, written apart from the rules and sharing nothing
// with them: a volume whose pressure relaxes and leaks, a UUT that sees it at
// once, a reference that follows with a first-order lag and is read with a
// skew, noise on both.
//
// The grid has 45 cells: thermal time constant 2, 5, 10, 20, 30 s; noise of the
// UUT's reading 0.02, 0.1, 0.3 mmHg; leak 0, 0.01, 0.05 mmHg/s. The ranges are
// those of the measurements that the rules were designed on; where only the
// range was handed down the steps within it are this test's. What relaxes is
// drawn anew for each point: log-normal about 1.75 mmHg with 0.65 for the
// logarithm's SD, which gives back the figures handed down for a fixed dwell
// of 30 s (42 % of points off by more than 0.1 mmHg at 10 s, 99 % at 20 s).
type cell struct{ tau, noise, leak float64 }

func grid() []cell {
	var cells []cell
	for _, tau := range []float64{2, 5, 10, 20, 30} {
		for _, noise := range []float64{0.02, 0.1, 0.3} {
			for _, leak := range []float64{0, 0.01, 0.05} {
				cells = append(cells, cell{tau, noise, leak})
			}
		}
	}
	return cells
}

// world is one point of one cell, and what may go wrong there.
type world struct {
	cell
	rand      *rand.Rand
	rate      float64 // readings a second
	amplitude float64 // mmHg
	lag       float64 // s, of the reference
	skew      float64 // s, the UUT's reading is so much earlier
	refNoise  float64
	phi       float64 // of first-order correlated UUT noise, one reading to the next
	step      float64 // mmHg, of the UUT alone
	stepAt    float64 // s
	swing     float64 // mmHg, of the UUT alone
	period    float64 // s of the swing
	phase     float64
	quantum   float64 // of the UUT
	lost      float64 // share of readings lost
	hum       float64 // mmHg: swing of the pressure itself, at 0.3 Hz
	creep     float64 // mmHg: of the UUT alone, dying away with creepTau
	creepTau  float64
	slow      float64 // share of the amplitude that relaxes more slowly, besides
	late      float64 // mmHg: how far the reference is behind at the start, besides

	red float64 // state of the noise
}

// offset is the UUT's error, the truth to be found.
const offset = 0.7317

func (c cell) point(r *rand.Rand) *world {
	w := &world{cell: c, rand: r, rate: 10, refNoise: 0.02}
	w.amplitude = 1.75 * math.Exp(0.65*r.NormFloat64())
	if r.IntN(2) == 0 {
		w.amplitude = -w.amplitude
	}
	w.lag = 0.4 + 0.2*r.Float64()
	w.skew = 0.05
	if r.IntN(2) == 0 {
		w.skew = -w.skew
	}
	w.red = r.NormFloat64()
	return w
}

// pressure is the truth; reference is what a first-order lag makes of it, in
// closed form, having followed for long.
func (w *world) pressure(t float64) float64 {
	return 200 + w.amplitude*math.Exp(-t/w.tau) - w.leak*t + w.hum*math.Sin(2*math.Pi*0.3*t+w.phase)
}

func (w *world) reference(t float64) float64 {
	x := 2 * math.Pi * 0.3 * w.lag
	gain, turn := 1/math.Sqrt(1+x*x), math.Atan(x)
	return 200 + w.amplitude/(1-w.lag/w.tau)*math.Exp(-t/w.tau) - w.leak*(t-w.lag) +
		w.hum*gain*math.Sin(2*math.Pi*0.3*t+w.phase-turn) + w.late*math.Exp(-t/w.lag)
}

// error is the UUT's error at a time; truth what a point taken from one time
// to another should find: the mean over them, swing left out.
func (w *world) error(t float64) float64 {
	e := offset
	if t >= w.stepAt {
		e += w.step
	}
	if w.creepTau > 0 {
		e += w.creep * math.Exp(-t/w.creepTau)
	}
	return e
}

// next is the reading at a time; false when it is lost.
func (w *world) next(t float64) (Sample, bool) {
	w.red = w.phi*w.red + math.Sqrt(1-w.phi*w.phi)*w.rand.NormFloat64()
	u := w.pressure(t-w.skew) + w.error(t) + w.noise*w.red
	if w.swing != 0 {
		u += w.swing * math.Sin(2*math.Pi*t/w.period+w.phase)
	}
	if w.quantum > 0 {
		u = math.Round(u/w.quantum) * w.quantum
	}
	s := Sample{Time: t, Reference: w.reference(t) + w.refNoise*w.rand.NormFloat64(), UUT: u}
	return s, w.lost == 0 || w.rand.Float64() >= w.lost
}

// outcome of a point.
type outcome struct {
	seconds float64
	err     float64
	ready   bool
	state   State
}

// take runs the difference rule on a point until it is ready or limit is over.
func (w *world) take(rule *Watch, limit float64) outcome {
	rule.Reset()
	var start float64
	for i := 0; ; i++ {
		t := float64(i) / w.rate
		if t > limit {
			return outcome{seconds: limit}
		}
		s, ok := w.next(t)
		if !ok {
			continue
		}
		if i == 0 {
			start = t
		}
		if state := rule.Add(s); state.Ready {
			return outcome{seconds: t - start, err: state.Mean - w.error(t), ready: true, state: state}
		}
	}
}

// left is what is still to come of what relaxes.
func (w *world) left(t float64) float64 {
	return w.amplitude*math.Exp(-t/w.tau) + w.slowPart(t)
}

// slowPart relaxes two and a half times slower.
func (w *world) slowPart(t float64) float64 {
	return w.slow * w.amplitude * math.Exp(-t/(2.5*w.tau))
}
