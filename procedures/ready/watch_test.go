package ready

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

func TestStandardFor(t *testing.T) {
	rows := []struct{ largest, risk, want float64 }{
		// Two-sided quantiles of the normal distribution, scipy 1.10.1
		// norm.ppf(1 - risk/2): 2.9677379253417833, 1.959963984540054.
		{0.1, 0.003, 0.1 / 2.9677379253417833},
		{1, 0.05, 1 / 1.959963984540054},
		{0, 0.05, 0}, {1, 0, 0}, {1, 1, 0}, {math.NaN(), 0.05, 0},
	}
	for _, row := range rows {
		if got := StandardFor(row.largest, row.risk); math.Abs(got-row.want) > 1e-12 {
			t.Errorf("StandardFor(%g, %g) = %.15g, want %.15g", row.largest, row.risk, got, row.want)
		}
	}
}

func TestQuantilesInShort(t *testing.T) {
	// scipy 1.10.1: t.ppf(1 - 0.0015, nu)/norm.ppf(1 - 0.0015) and chi2.ppf(0.95, nu)/nu.
	for dof, want := range map[float64]float64{5: 1.8114893, 13: 1.2261685, 30: 1.0882518, 100: 1.0250823} {
		if got := student(dof); math.Abs(got/want-1) > 0.02 {
			t.Errorf("student(%g) = %.4f, want %.4f within 2 %%", dof, got, want)
		}
	}
	for dof, want := range map[float64]float64{4: 2.371932, 10: 1.830704, 40: 1.393962} {
		if got := chiSquare95(dof); math.Abs(got/want-1) > 0.01 {
			t.Errorf("chiSquare95(%g) = %.4f, want %.4f within 1 %%", dof, got, want)
		}
	}
}

// line gives samples of a pressure with slope, noise by a fixed generator.
func line(n int, slope, noise float64) []Sample {
	r := rand.New(rand.NewPCG(7, 9))
	var samples []Sample
	for i := range n {
		t := float64(i) / 10
		p := 100 + slope*t
		samples = append(samples, Sample{Time: t, Reference: p + noise*r.NormFloat64(), UUT: p + 1 + noise*r.NormFloat64()})
	}
	return samples
}

// run adds samples until the first ready state; the last state otherwise.
func run(s Settings, samples []Sample) (State, int) {
	w := NewWatch(s)
	var state State
	for i, x := range samples {
		if state = w.Add(x); state.Ready {
			return state, i
		}
	}
	return state, len(samples)
}

func TestReadyAndNot(t *testing.T) {
	set := Settings{Standard: 0.03, DelayUncertainty: 0.1, LeastReadings: 15, Settling: 0.5}
	if state, at := run(set, line(100, 0, 0.02)); !state.Ready || at < 19 || at > 60 {
		t.Errorf("a steady pressure is ready %v after %d readings", state.Ready, at)
	} else if math.Abs(state.Mean-1) > 0.02 || state.Readings+state.First != at+1 {
		t.Errorf("difference %.3f, want 1; window %d + %d of %d", state.Mean, state.First, state.Readings, at+1)
	}
	state, _ := run(set, line(100, 1, 0.02))
	if state.Ready || state.Status.Kind != Moving || math.Abs(state.Status.Value-1) > 0.05 || !math.IsInf(state.Status.Seconds, 1) {
		t.Errorf("a pressure that moves 1 a second: %+v", state.Status)
	}
	if text := state.Status.Text("mmHg"); !strings.Contains(text, "no slowing seen") {
		t.Errorf("it says %q", text)
	}
	if state, _ := run(Settings{LeastReadings: 15}, line(100, 0, 0)); state.Ready {
		t.Error("ready though a standard uncertainty of zero is asked")
	}
	set.Standard = math.NaN()
	if state, _ := run(set, line(100, 0, 0)); state.Ready {
		t.Error("ready though no number is asked")
	}
}

// What is waited for is told in words, with the time to come; the figures are
// those that the samples were made with.
func TestStatus(t *testing.T) {
	set := Settings{Standard: 0.03, Delay: 0.5, DelayUncertainty: 0.1, LeastReadings: 15, Settling: 0.5}
	w := NewWatch(set)
	var dying []State
	for i := range 200 {
		x := float64(i) / 10
		p := 5 * math.Exp(-x/4)
		dying = append(dying, w.Add(Sample{Time: x, Reference: 100 + p/(1-0.5/4), UUT: 101 + p}))
	}
	if s := dying[3].Status; s.Kind != Gathering || s.Have != 0 || s.Need != 15 {
		t.Errorf("after 4 readings: %+v", s)
	}
	if s := dying[10].Status; s.Kind != Gathering || s.Have != 6 || math.Abs(s.Seconds-0.9) > 0.01 || s.Text("mmHg") != "readings: 6 of 15, about 1 s" {
		t.Errorf("after 11 readings: %+v, %q", s, s.Text("mmHg"))
	}
	at := 0
	for i, s := range dying {
		if s.Ready {
			at = i
			break
		}
	}
	for i := 30; i < at; i += 5 {
		s := dying[i].Status
		want := float64(at-i) / 10
		if s.Kind != Moving || s.Seconds < want/2-0.5 || s.Seconds > want*2+0.5 {
			t.Errorf("%.1f s before it is ready: %q", want, s.Text("mmHg"))
		}
	}
	noisy, _ := run(set, line(30, 0, 0.2))
	if s := noisy.Status; s.Kind != Noisy || !strings.Contains(s.Text("mmHg"), "more readings, about") || s.Need < 30 {
		t.Errorf("noise of 0.28 a reading and 25 of them: %+v, %q", s, s.Text("mmHg"))
	}
	coarse := set
	coarse.Resolution = 1
	samples := line(60, 0, 0.01)
	for i := range samples {
		samples[i].UUT = math.Round(samples[i].UUT)
	}
	state, _ := run(coarse, samples)
	if state.Status.Kind != Coarse || math.Abs(state.Status.Value-0.288675) > 1e-6 {
		t.Errorf("whole millimetres: %+v", state.Status)
	}
	drifting := line(100, 0, 0.01)
	for i := range drifting {
		drifting[i].UUT += 0.2 * drifting[i].Time
	}
	if state, _ := run(set, drifting); state.Status.Kind != Trending || math.Abs(state.Status.Value-0.2) > 0.02 {
		t.Errorf("a UUT that drifts 0.2 a second: %+v", state.Status)
	}
	if (Status{}).Text("mmHg") != "" || Nothing.String() != "" || Coarse.String() != "coarse" || Kind(99).String() != "unknown" {
		t.Error("words of kinds")
	}
}

// A delay that is known is corrected exactly, however the pressure bends, and
// so is a UUT read earlier than the reference.
func TestDelayIsCorrected(t *testing.T) {
	set := Settings{Standard: 0.02, SlopeShare: 1, Delay: 0.5, LeastReadings: 30}
	w := NewWatch(set)
	var state State
	for i := range 40 {
		x := float64(i) / 10
		p := func(t float64) float64 { return 2 * math.Exp(-t/3) }
		state = w.Add(Sample{Time: x, Reference: 100 + p(x)/(1-0.5/3), UUT: 101 + p(x-0.05), Behind: 0.05})
	}
	// The mean of r' over the window is found from means over a few readings at
	// its ends, which is what the tolerance is for.
	if math.Abs(state.Mean-1) > 0.01 {
		t.Errorf("difference %.5f, want 1", state.Mean)
	}
}

// Laws: another unit of pressure, another zero of time or pressure change
// nothing but the figures' unit.
func TestWatchLaws(t *testing.T) {
	set := campaignSettings()
	for k := range 30 {
		var samples, scaled, moved []Sample
		world := cell{5, 0.1, 0.01}.point(rand.New(rand.NewPCG(3, uint64(k))))
		for i := range 200 {
			s, _ := world.next(float64(i) / 10)
			samples = append(samples, s)
			c := s
			c.Reference, c.UUT = s.Reference*0.133322, s.UUT*0.133322
			scaled = append(scaled, c)
			c = s
			c.Time, c.Reference, c.UUT = s.Time+4096, s.Reference+64, s.UUT+64
			moved = append(moved, c)
		}
		a, na := run(set, samples)
		unit := set
		unit.Standard *= 0.133322
		b, nb := run(unit, scaled)
		c, nc := run(set, moved)
		if na != nb || na != nc || math.Abs(b.Mean/0.133322-a.Mean) > 1e-9 || math.Abs(c.Mean-a.Mean) > 1e-9 {
			t.Errorf("point %d: ready at %d, %d in kPa, %d moved; %.12f, %.12f, %.12f", k, na, nb, nc, a.Mean, b.Mean/0.133322, c.Mean)
		}
	}
}

// Readings that are none are passed over and leave the numbering alone.
func TestBadSamples(t *testing.T) {
	set := Settings{Standard: 0.03, DelayUncertainty: 0.1, LeastReadings: 15}
	good := line(100, 0, 0.02)
	var samples []Sample
	for i, s := range good {
		if i%3 == 1 {
			bad := s
			bad.UUT = math.NaN()
			samples = append(samples, bad, Sample{Time: math.Inf(1)}, Sample{Time: s.Time - 5, Reference: 900})
		}
		samples = append(samples, s)
	}
	a, _ := run(set, good)
	b, at := run(set, samples)
	if !b.Ready || a.Mean != b.Mean || a.Readings != b.Readings {
		t.Errorf("with bad samples between: %+v, without: %+v", b, a)
	}
	if samples[b.First].Time != good[a.First].Time || at <= b.First {
		t.Errorf("the window begins at sample %d, want the time %g", b.First, good[a.First].Time)
	}
}

// A wait of hours keeps its digits and its cost: the figures of the last
// readings are those of a watch that saw only them.
func TestLongWait(t *testing.T) {
	set := Settings{Standard: 1e-9, LeastReadings: 15}
	long, short := NewWatch(set), NewWatch(set)
	r := rand.New(rand.NewPCG(5, 6))
	var samples []Sample
	var a, b State
	for i := range 5*kept + 17 {
		s := Sample{Time: float64(i) / 10, Reference: 300 - 0.01*float64(i), UUT: 302 - 0.01*float64(i) + 0.1*r.NormFloat64()}
		samples = append(samples, s)
		a = long.Add(s)
	}
	for _, s := range samples[len(samples)-long.sums.last():] {
		b = short.Add(s)
	}
	if a.Readings < kept || a.Readings != b.Readings || math.Abs(a.Slope+0.1) > 1e-9 ||
		math.Abs(a.Mean-b.Mean) > 1e-9 || math.Abs(a.Noise-b.Noise) > 1e-9 || math.Abs(a.Slope-b.Slope) > 1e-9 {
		t.Errorf("after a long wait %+v, of its end alone %+v", a, b)
	}
	if short.Reset(); short.Count() != 0 {
		t.Error("reset keeps samples")
	}
}

func BenchmarkWatch(b *testing.B) {
	for _, rate := range []float64{10, 50} {
		name := map[float64]string{10: "10 Hz", 50: "50 Hz"}[rate]
		b.Run(name, func(b *testing.B) {
			w := NewWatch(Settings{Standard: 1e-9, Delay: 0.5, DelayUncertainty: 1e-9, LeastReadings: 15})
			r := rand.New(rand.NewPCG(1, 1))
			for i := range 2*kept + 1 {
				w.Add(Sample{Time: float64(i) / rate, Reference: 100 + 0.02*r.NormFloat64(), UUT: 101})
			}
			t := float64(2*kept+1) / rate
			b.ReportAllocs()
			for b.Loop() {
				t += 1 / rate
				w.Add(Sample{Time: t, Reference: 100 + 0.02*r.NormFloat64(), UUT: 101})
			}
		})
	}
}
