package step

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// What only looks flat-topped is not clipped: settled plateaus without noise
// or with coarse digits, at any damping.
func TestNotClipped(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 1))
	flat, all := 0, trials(120, 4000)
	for range all {
		p := plan{
			fn: 5 * math.Pow(12, r.Float64()), zeta: 0.1 * math.Pow(20, r.Float64()), before: 0.5, phase: r.Float64(),
			heights: []float64{100}, level: math.Round(50 * r.Float64()),
		}
		p.rate = p.fn * (12 + 100*r.Float64())
		p.spacing = 0.5 + 20*slowest(p.fn, p.zeta)
		p.quantum = []float64{0, 0.02, 0.1, 0.25, 0.5, 1}[r.IntN(6)]
		p.sigma = []float64{0, 0, 0.05, 0.2, 0.5}[r.IntN(5)]
		if r.IntN(2) == 0 {
			p.heights[0] = -100
		}
		steps, _, _, err := Analyse(p.make(r), Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
		if err != nil {
			t.Fatal(err)
		}
		if len(steps) != 1 {
			t.Errorf("%d steps: %+v", len(steps), p)
			continue
		}
		s := steps[0]
		if slices.Contains(s.Reasons, Clipped) {
			flat++
			t.Logf("taken for clipped: %+v", p)
		}
		// Resolution coarser than the noise is told; finer is not.
		coarse := p.quantum > 0 && p.sigma < 0.2*p.quantum
		fine := p.quantum == 0 || p.sigma > 0.8*p.quantum
		if told := s.has(Quantised); coarse && !told || fine && told {
			t.Errorf("quantised told %v, noise %g quantum %g: %+v", told, s.Noise, p.quantum, p)
		}
		if s.Determined && !s.has(Quantised) && math.Abs(s.Frequency.Value/p.fn-1) > math.Max(0.1, 4.5*s.Frequency.StandardUncertainty/p.fn) {
			t.Errorf("fn %.4g zeta %.3g: %+v", s.Frequency.Value, s.Damping.Value, p)
		}
	}
	// One digit of 1 % and no noise can look flat-topped by chance.
	if flat > all/1000 {
		t.Errorf("%d of %d taken for clipped", flat, all)
	}
}

// Clipped at either rail, in the overshoot or below the final level, with and
// without noise: refused as clipped.
func TestClipped(t *testing.T) {
	r := rand.New(rand.NewPCG(22, 1))
	missed, all := 0, trials(60, 3000)
	for range all {
		p := plan{
			fn: 6 + 40*r.Float64(), zeta: 0.1 + 0.5*r.Float64(), before: 0.5, phase: r.Float64(),
			heights: []float64{100}, sigma: []float64{0, 0.1, 0.5}[r.IntN(3)], quantum: []float64{0, 0.1}[r.IntN(2)],
		}
		p.rate, p.spacing = p.fn*(20+150*r.Float64()), 0.5+20*slowest(p.fn, p.zeta)
		trace := p.make(r)
		top := 100 + 100*math.Exp(-math.Pi*p.zeta/math.Sqrt(1-p.zeta*p.zeta))
		rail := math.Round(70 + (0.3+0.6*r.Float64())*(top-70))
		for i, v := range trace.Pressure {
			trace.Pressure[i] = math.Min(v, rail)
		}
		if r.IntN(2) == 0 {
			for i := range trace.Pressure {
				trace.Pressure[i] = 300 - trace.Pressure[i]
			}
		}
		steps, c, _, err := Analyse(trace, Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
		if err != nil {
			t.Fatal(err)
		}
		if c.Determined || len(steps) == 0 || !slices.Contains(steps[0].Reasons, Clipped) {
			missed++
			if missed < 20 {
				t.Logf("not told: rail %g of %.1f, determined %v, %d steps: %+v", rail, top, c.Determined, len(steps), p)
			}
		}
	}
	t.Logf("%d of %d not refused as clipped", missed, all)
	if missed > all/50 {
		t.Errorf("%d of %d not refused as clipped", missed, all)
	}
}

// A window of under two periods, a step with hardly anything before it: the
// answer is refused or right within its uncertainty.
func TestTruncated(t *testing.T) {
	r := rand.New(rand.NewPCG(23, 1))
	wrong, all := 0, trials(120, 3000)
	for range all {
		h := hostile("truncated", r)
		_, c, _, err := Analyse(h.trace, h.settings)
		if err != nil {
			t.Fatal(err)
		}
		if c.Determined && math.Abs(math.Log(c.Frequency.Value/h.fn)) > math.Max(0.05, 5*c.Frequency.StandardUncertainty/c.Frequency.Value) {
			wrong++
			t.Logf("fn %.4g u %.2g: %s", c.Frequency.Value, c.Frequency.StandardUncertainty, h.note)
		}
	}
	if wrong > all/150 {
		t.Errorf("%d of %d truncated traces wrong", wrong, all)
	}
}

// Single spikes leave the figures as they are and are told.
func TestSpikesLeftOut(t *testing.T) {
	p := plan{fn: 20, zeta: 0.5, rate: 800, before: 0.5, spacing: 1, heights: []float64{100}, sigma: 0.3}
	trace := p.make(rand.New(rand.NewPCG(24, 1)))
	clean := one(t, trace, Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
	for _, i := range []int{100, 250, 407, 430, 900} {
		trace.Pressure[i] += 60
	}
	spiked := one(t, trace, Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
	if !spiked.Determined || !spiked.has(Misfit) || math.Abs(spiked.Frequency.Value-clean.Frequency.Value) > clean.Frequency.StandardUncertainty/2 ||
		!near(spiked.Frequency.StandardUncertainty, clean.Frequency.StandardUncertainty, 0.1) {
		t.Errorf("%v %v with spikes %+v, without %+v", spiked.Reasons, spiked.Reservations, spiked.Frequency, clean.Frequency)
	}
	if len(spiked.Fitted) != spiked.To-spiked.From || len(spiked.Residuals) != len(spiked.Fitted) || math.Abs(spiked.Residuals[250-spiked.From]-60) > 2 {
		t.Errorf("residual of a spike %g", spiked.Residuals[250-spiked.From])
	}
	for i := range spiked.Fitted {
		if math.Abs(spiked.Fitted[i]+spiked.Residuals[i]-trace.Pressure[spiked.From+i]) > 1e-9 {
			t.Fatal("fit and residual do not add up to the trace")
		}
	}
}

// A stated edge beyond 0.35/fn is refused, a shorter one is not.
func TestEdgeTooSlow(t *testing.T) {
	for _, part := range []float64{0.33, 0.37} {
		p := plan{fn: 20, zeta: 0.5, rate: 1000, before: 0.5, spacing: 1, heights: []float64{100}, sigma: 0.1, width: part / 20}
		s := one(t, p.make(rand.New(rand.NewPCG(25, 1))), Settings{EdgeStated: true, EdgeTime: 0.8 * p.width, EdgeTolerance: 0.01, ReadoutStated: true, MinimumStep: 8})
		if refused := slices.Contains(s.Reasons, EdgeTooSlow); refused != (part > 0.35) || s.Determined == refused {
			t.Errorf("width x fn %g: %v", part, s.Reasons)
		}
	}
}

// fs/fn below 4 is refused, 4 to 5 reserved; overdamped below 10 refused.
func TestSampling(t *testing.T) {
	for _, c := range []struct {
		ratio, zeta      float64
		refused, reserve bool
	}{
		{2.5, 0.3, true, false}, {3.8, 0.3, true, false}, {4.3, 0.3, false, true}, {4.8, 0.6, false, true},
		{5.5, 0.3, false, false}, {6, 1.4, true, false}, {9, 1.4, true, false}, {11, 1.4, false, false},
	} {
		p := plan{fn: 50, zeta: c.zeta, rate: 50 * c.ratio, before: 0.6, spacing: 1.5, heights: []float64{100}, sigma: 0.05, phase: 0.4}
		s := one(t, p.make(rand.New(rand.NewPCG(26, 1))), Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
		if slices.Contains(s.Reasons, SamplingTooSlow) != c.refused || s.has(SamplingSlow) != c.reserve || s.Determined == c.refused {
			t.Errorf("%g samples a period, zeta %g: %v %v", c.ratio, c.zeta, s.Reasons, s.Reservations)
		}
	}
}

// Several steps: plain Student t, and a floor under accidental agreement.
func TestCombine(t *testing.T) {
	step := func(fn, u, zeta, uZeta float64) Step {
		return Step{Determined: true, Frequency: Estimate{Value: fn, StandardUncertainty: u}, Damping: Estimate{Value: zeta, StandardUncertainty: uZeta}, DegreesOfFreedom: 100}
	}
	lost := Step{Reasons: []string{Clipped}}
	if c := Combine(nil); c.Determined || !slices.Equal(c.Reasons, []string{NoStep}) {
		t.Errorf("nothing: %+v", c)
	}
	if c := Combine([]Step{lost, lost}); c.Determined || !slices.Equal(c.Reasons, []string{Clipped}) {
		t.Errorf("two lost: %+v", c)
	}
	a := step(20, 0.1, 0.5, 0.01)
	a.Frequency.Low, a.Frequency.High = 19.8, 20.2
	if c := Combine([]Step{lost, a}); !c.Determined || c.Frequency != a.Frequency || c.Steps != 1 {
		t.Errorf("one: %+v", c)
	}
	// ln fn = 3 -+ 0.01, 3: mean 3, s = 0.01, t(2) = 4.302653 (tables), so
	// the half-width is 4.302653 x 0.01/sqrt 3 = 0.0248414.
	c := Combine([]Step{step(math.Exp(2.99), 0.01, 0.4, 0.001), step(math.Exp(3), 0.01, 0.5, 0.001), step(math.Exp(3.01), 0.01, 0.6, 0.001)})
	if !near(math.Log(c.Frequency.Value), 3, 1e-12) || !near(math.Log(c.Frequency.High)-3, 0.0248414, 1e-5) ||
		!near(c.Damping.Value-c.Damping.Low, 10*0.0248414, 1e-5) || c.DegreesOfFreedom != 2 {
		t.Errorf("three: %+v", c)
	}
	// Equal by accident: half-width = uncertainty of the mean the fits claim.
	c = Combine([]Step{step(20, 0.2, 0.5, 0.02), step(20, 0.2, 0.5, 0.02)})
	if !near(c.Damping.High-0.5, 0.02/math.Sqrt2, 1e-9) || !near(math.Log(c.Frequency.High/20), 0.01/math.Sqrt2, 1e-9) {
		t.Errorf("equal: %+v", c)
	}
	if c := Combine([]Step{step(10, 0.1, 0.5, 0.01), step(15, 0.1, 0.5, 0.01)}); c.Determined || !slices.Equal(c.Reasons, []string{UncertaintyTooLarge}) {
		t.Errorf("scattered: %+v", c)
	}
}

// Drift, a pulse wave of 2 mmHg left over and spikes neither hide a step nor
// make one.
func TestOnsets(t *testing.T) {
	r := rand.New(rand.NewPCG(27, 1))
	steps, wrong := 0, 0
	for range trials(30, 400) {
		p := plan{
			fn: 5 * math.Pow(40, r.Float64()), zeta: 0.1 * math.Pow(20, r.Float64()), before: 0.5, phase: r.Float64(),
			heights: []float64{100, -100, 60, -60}, sigma: 0.3, drift: 10 * (r.Float64() - 0.5), level: 20,
		}
		p.rate = math.Max(250, p.fn*(8+20*r.Float64()))
		p.spacing = 1 + 10*slowest(p.fn, p.zeta)
		trace := p.make(r)
		beat := 1 + r.Float64()
		for i := range trace.Pressure {
			c := math.Mod(float64(i)/p.rate*beat, 1)
			trace.Pressure[i] += 2 * math.Exp(-math.Pow((c-0.3)/0.1, 2))
		}
		for range 5 {
			trace.Pressure[r.IntN(len(trace.Pressure))] += 100 * (r.Float64() - 0.5)
		}
		found, c, reservations, err := Analyse(trace, Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
		if err != nil {
			t.Fatal(err)
		}
		steps += 4
		good := len(found) == 4
		for k := 0; good && k < 4; k++ {
			good = math.Abs(found[k].At-p.at(k)) < 0.3/p.fn
		}
		if !good {
			wrong++
			t.Logf("%d steps found of 4: %+v", len(found), p)
		}
		if c.Determined && len(reservations) == 0 && math.Abs(c.Frequency.Value/p.fn-1) > 0.2 {
			t.Errorf("silent fn %.4g: %+v", c.Frequency.Value, p)
		}
	}
	t.Logf("%d steps, %d traces with a step missed or made up", steps, wrong)
	if wrong > steps/200 {
		t.Errorf("%d traces of %d with a step missed or made up", wrong, steps/4)
	}
}

// A second mode is told as misfit, a plain answer in the same noise is not,
// nor is noise correlated from sample to sample.
func TestMisfitTold(t *testing.T) {
	r := rand.New(rand.NewPCG(28, 1))
	told, falsely, n := 0, 0, trials(40, 1000)
	for range n {
		p := plan{fn: 20, zeta: 0.3, rate: 1000, before: 0.5, spacing: 1.5, heights: []float64{100}, sigma: 0.5, phase: r.Float64(), phi: 0.5}
		trace := p.make(r)
		if s := one(t, trace, Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8}); s.has(Misfit) {
			falsely++
		}
		for i := range trace.Pressure {
			since := float64(i)/p.rate - p.at(0)
			trace.Pressure[i] += 8 * (trueEdge(since, 0, 50, 0.1) - trueEdge(since, 0, p.fn, p.zeta))
		}
		if s := one(t, trace, Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8}); s.has(Misfit) {
			told++
		}
	}
	t.Logf("told %d of %d, falsely %d", told, n, falsely)
	if told < n*95/100 || falsely > n/50 {
		t.Errorf("misfit told %d times of %d, falsely %d", told, n, falsely)
	}
}

// Where the bound of fn is over 5 % no figure is given, below 3 % one is.
func TestUncertaintyTooLarge(t *testing.T) {
	for _, c := range []struct {
		sigma   float64
		refused bool
	}{{1, true}, {0.2, false}} {
		p := plan{fn: 60, zeta: 1.5, rate: 1200, before: 0.5, spacing: 1, heights: []float64{100}, sigma: c.sigma, phase: 0.3}
		bound, _ := p.bound(false)
		if c.refused != (bound > 0.07) || !c.refused && bound > 0.03 {
			t.Fatalf("sigma %g: bound %g", c.sigma, bound)
		}
		s := one(t, p.make(rand.New(rand.NewPCG(29, 1))), Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8})
		if s.Determined == c.refused || slices.Contains(s.Reasons, UncertaintyTooLarge) != c.refused || c.refused && s.Frequency != (Estimate{}) {
			t.Errorf("sigma %g: %v %+v", c.sigma, s.Reasons, s.Frequency)
		}
	}
}
