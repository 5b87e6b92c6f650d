package ready

import (
	"math"
	"math/rand/v2"
	"testing"
)

// stillSettings are those of the campaign: what the grid may do, held for
// possible and no more than that.
func stillSettings() StillSettings {
	return StillSettings{
		Residual: 0.1, Risk: 0.003, Amplitude: 5, Rate: 0.1, ShortestTau: 1, LongestTau: 90, Least: 8,
	}
}

// settles runs the stricter rule on a point until it is ready or limit is over.
// The error is what is still to come.
func (w *world) settles(t testing.TB, set StillSettings, limit float64) outcome {
	rule, err := NewStill(set)
	if err != nil {
		t.Fatal(err)
	}
	for i := 0; ; i++ {
		x := float64(i) / w.rate
		if x > limit {
			return outcome{seconds: limit, err: w.left(limit), ready: true}
		}
		w.red = w.phi*w.red + math.Sqrt(1-w.phi*w.phi)*w.rand.NormFloat64()
		p := w.pressure(x) + w.slowPart(x) + w.noise*w.red
		if state := rule.Add(x, p); state.Ready {
			return outcome{seconds: x, err: w.left(x), ready: true}
		}
	}
}

// known is when what is left comes under what is allowed, at least 8 s: the
// time of who knows everything.
func (w *world) known() float64 {
	t := 8.0
	for math.Abs(w.left(t)) > allowed {
		t += 0.1
	}
	return t
}

func TestStill(t *testing.T) {
	points := 2
	if full() {
		points = 1000
	}
	var all tally
	var known float64
	for i, c := range grid() {
		var one tally
		var k0 float64
		for k := range points {
			w := c.point(rand.New(rand.NewPCG(uint64(i)+500, uint64(k))))
			k0 += w.known()
			o := w.settles(t, stillSettings(), 240)
			one.add(o)
			all.add(o)
		}
		known += k0
		if full() {
			t.Logf("tau %2.0f s, noise %.2f, leak %.2f: mean %5.1f s, known %5.1f, wrong %d of %d", c.tau, c.noise, c.leak, one.mean(), k0/float64(points), one.wrong, one.points)
		}
	}
	known /= float64(all.points)
	t.Logf("mean %.1f s, with everything known %.1f s, ratio %.3f, wrong %.3f %% of %d", all.mean(), known, all.mean()/known, all.wrongShare()*100, all.points)
	most := mayBe(0.003, all.points)
	if full() {
		most = all.points * 3 / 1000
	}
	if all.wrong > most {
		t.Errorf("more than %g was still to come in %d of %d points", allowed, all.wrong, all.points)
	}
	if ratio := all.mean() / known; ratio > 1.5 {
		t.Errorf("%.3f times the time of who knows everything", ratio)
	}
}

// What the rule is told about slower parts decides what it sees of them.
func TestStillHostile(t *testing.T) {
	two := stillSettings()
	two.TwoParts = 0.05
	rows := []struct {
		name string
		set  StillSettings
		most float64
		with func(w *world)
	}{
		{"red 0.5", stillSettings(), 0.003, func(w *world) { w.phi = 0.5 }},
		{"red 0.9", stillSettings(), 0.003, func(w *world) { w.phi = 0.9 }},
		{"1 Hz", stillSettings(), 0.003, func(w *world) { w.rate = 1 }},
		{"amplitude 5", stillSettings(), 0.003, func(w *world) { w.amplitude = 5 }},
		{"two parts believed where there is one", two, 0.003, func(*world) {}},
		{"a fifth relaxes more slowly, one part believed", stillSettings(), 0.5, func(w *world) { w.amplitude *= 0.8; w.slow = 0.25 }},
		{"a fifth relaxes more slowly, two parts believed", two, 0.03, func(w *world) { w.amplitude *= 0.8; w.slow = 0.25 }},
	}
	points := 1
	if full() {
		points = 20
	}
	for _, row := range rows {
		var all tally
		for i, c := range grid() {
			if !full() && i%4 != 0 {
				continue
			}
			for k := range points {
				w := c.point(rand.New(rand.NewPCG(uint64(i)+700, uint64(k))))
				row.with(w)
				all.add(w.settles(t, row.set, 240))
			}
		}
		if full() {
			t.Logf("%-50s mean %5.1f s, wrong %6.3f %% of %d", row.name, all.mean(), all.wrongShare()*100, all.points)
		}
		if most := mayBe(row.most, all.points); all.wrong > most {
			t.Errorf("%s: more than %g was still to come in %d of %d points, at most %d may be", row.name, allowed, all.wrong, all.points, most)
		}
	}
}

// The campaign must be able to give the rule the lie: one that believes in
// quick relaxation only is wrong where it is slow.
func TestStillCampaignCatchesBadRules(t *testing.T) {
	set := stillSettings()
	set.LongestTau = 4
	wrong := 0
	for k := range 20 {
		w := cell{20, 0.1, 0.01}.point(rand.New(rand.NewPCG(900, uint64(k))))
		if o := w.settles(t, set, 240); math.Abs(o.err) > allowed {
			wrong++
		}
	}
	if wrong < 10 {
		t.Errorf("a rule that knows no slow relaxation is wrong in %d of 20 points only", wrong)
	}
}

func TestStillSettingsRefused(t *testing.T) {
	for name, spoil := range map[string]func(*StillSettings){
		"nothing asked": func(s *StillSettings) { *s = StillSettings{} }, "no residual": func(s *StillSettings) { s.Residual = 0 },
		"certainty": func(s *StillSettings) { s.Risk = 0 }, "no amplitude": func(s *StillSettings) { s.Amplitude = math.NaN() },
		"no leak": func(s *StillSettings) { s.Rate = 0 }, "taus the wrong way round": func(s *StillSettings) { s.LongestTau = 0.5 },
		"endless taus": func(s *StillSettings) { s.LongestTau = math.Inf(1) }, "two parts for certain": func(s *StillSettings) { s.TwoParts = 1 },
	} {
		set := stillSettings()
		spoil(&set)
		if _, err := NewStill(set); err == nil {
			t.Errorf("%s: taken", name)
		}
	}
}

// Laws: another unit, another zero of pressure or time change nothing but the
// unit of the figures; readings that are none are passed over. Readings that
// are to be taken close together may be taken sooner.
func TestStillLaws(t *testing.T) {
	make := func(scale, zero, start float64, apart float64) (StillState, float64) {
		set := stillSettings()
		set.Residual, set.Amplitude, set.Rate, set.Apart = scale*set.Residual, scale*set.Amplitude, scale*set.Rate, apart
		rule, err := NewStill(set)
		if err != nil {
			t.Fatal(err)
		}
		w := cell{10, 0.02, 0.01}.point(rand.New(rand.NewPCG(11, 3)))
		for i := range 2400 {
			x := float64(i) / 10
			if i%100 == 50 {
				rule.Add(start+x, math.NaN())
				rule.Add(start+x-20, 7)
			}
			if state := rule.Add(start+x, scale*(w.pressure(x)+0.02*w.rand.NormFloat64())+zero); state.Ready {
				return state, x
			}
		}
		t.Fatal("never ready")
		return StillState{}, 0
	}
	a, at := make(1, 0, 0, 0)
	b, bt := make(0.133322, 0, 0, 0)
	c, ct := make(1, 64, 4096, 0)
	if at != bt || at != ct || math.Abs(b.Left/0.133322-a.Left) > 1e-6 || math.Abs(c.Left-a.Left) > 1e-6 || math.Abs(c.Rate-a.Rate) > 1e-6 {
		t.Errorf("ready after %g s, %g s in kPa, %g s moved: %+v, %+v, %+v", at, bt, ct, a, b, c)
	}
	if _, sooner := make(1, 0, 0, 2); sooner >= at-5 {
		t.Errorf("2 s apart: ready after %g s, the whole of it after %g s", sooner, at)
	}
}

func TestStillSaysWhatItWaitsFor(t *testing.T) {
	rule, err := NewStill(stillSettings())
	if err != nil {
		t.Fatal(err)
	}
	for i := range 300 {
		x := float64(i) / 10
		state := rule.Add(x, 2*math.Exp(-x/10)+1e-3*math.Sin(float64(i)))
		if i == 3 && state.Status.Kind != Gathering {
			t.Errorf("after 4 readings: %+v", state.Status)
		}
		// 2 exp(-t/10) comes under 0.1 after 30 s.
		if i == 200 && (state.Status.Kind != Relaxing || math.Abs(state.Status.Seconds-10) > 2 || math.Abs(state.Tau-10) > 0.5) {
			t.Errorf("after 20 s: %+v, %q", state, state.Status.Text("mmHg"))
		}
	}
}

func BenchmarkStill(b *testing.B) {
	rule, err := NewStill(stillSettings())
	if err != nil {
		b.Fatal(err)
	}
	r := rand.New(rand.NewPCG(1, 1))
	t := 0.0
	for range 2 * keptReadings {
		t += 0.1
		rule.Add(t, 100+math.Exp(-t/20)+0.02*r.NormFloat64())
	}
	b.ReportAllocs()
	for b.Loop() {
		t += 0.1
		rule.Add(t, 100+math.Exp(-t/20)+0.02*r.NormFloat64())
	}
}
