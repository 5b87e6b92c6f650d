package ready

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Truth here is that of the generator, written apart from the code under test.

func leakSettings() LeakSettings {
	return LeakSettings{Amplitude: 5, ShortestTau: 0.5, LongestTau: 90, Wanted: 0.01}
}

// hold makes readings of a shut volume: a leak in proportion to the pressure,
// solved exactly, and what relaxes on top.
type heldVolume struct {
	leak, noise, hz, seconds float64
	parts                    [][2]float64 // amplitude, tau
	start                    float64      // s after the pressure was made
	phi                      float64
}

func (h heldVolume) readings(r *rand.Rand) (ts, ps []float64) {
	red := r.NormFloat64()
	for i := 0; float64(i)/h.hz <= h.seconds; i++ {
		x := float64(i) / h.hz
		p := 300 * math.Exp(-h.leak/300*x)
		for _, part := range h.parts {
			p += part[0] * math.Exp(-(x+h.start)/part[1])
		}
		red = h.phi*red + math.Sqrt(1-h.phi*h.phi)*r.NormFloat64()
		ts, ps = append(ts, x+100), append(ps, p+h.noise*red)
	}
	return ts, ps
}

func TestLeakRateCoversTruth(t *testing.T) {
	trials := 20
	if full() {
		trials = 400
	}
	rows := []struct {
		name string
		make func(r *rand.Rand) heldVolume
	}{
		{"quick warming", func(r *rand.Rand) heldVolume {
			return heldVolume{leak: r.Float64() * 0.05, noise: 0.02, hz: 10, seconds: 30, start: 5, parts: [][2]float64{{2 * r.Float64(), 1 + 4*r.Float64()}}}
		}},
		{"slow warming", func(r *rand.Rand) heldVolume {
			return heldVolume{leak: r.Float64() * 0.05, noise: 0.02, hz: 10, seconds: 30, parts: [][2]float64{{4*r.Float64() - 2, 10 + 20*r.Float64()}}}
		}},
		{"two parts", func(r *rand.Rand) heldVolume {
			tau := 2 + 10*r.Float64()
			return heldVolume{leak: r.Float64() * 0.05, noise: 0.02, hz: 10, seconds: 30, parts: [][2]float64{{1.6, tau}, {0.4, tau * (2 + 2*r.Float64())}}}
		}},
		{"noise of 0.3", func(r *rand.Rand) heldVolume {
			return heldVolume{leak: r.Float64() * 0.05, noise: 0.3, hz: 10, seconds: 60, parts: [][2]float64{{2, 2 + 28*r.Float64()}}}
		}},
		{"a large leak bends", func(r *rand.Rand) heldVolume {
			return heldVolume{leak: 0.5 + r.Float64(), noise: 0.02, hz: 10, seconds: 30, parts: [][2]float64{{0.9, 1 + 4*r.Float64()}}}
		}},
		{"correlated noise", func(r *rand.Rand) heldVolume {
			return heldVolume{leak: r.Float64() * 0.05, noise: 0.02, hz: 10, seconds: 30, start: 5, phi: 0.7, parts: [][2]float64{{2 * r.Float64(), 1 + 4*r.Float64()}}}
		}},
		{"1 Hz", func(r *rand.Rand) heldVolume {
			return heldVolume{leak: r.Float64() * 0.05, noise: 0.02, hz: 1, seconds: 30, start: 5, parts: [][2]float64{{2 * r.Float64(), 1 + 4*r.Float64()}}}
		}},
	}
	for i, row := range rows {
		inside, width := 0, 0.0
		for k := range trials {
			r := rand.New(rand.NewPCG(uint64(i), uint64(k)))
			h := row.make(r)
			ts, ps := h.readings(r)
			l, err := LeakRate(ts, ps, leakSettings())
			if err != nil {
				t.Fatal(err)
			}
			// The rate at the first reading's pressure.
			if math.Abs(l.Rate-h.leak*ps[0]/300) <= 2*l.Standard {
				inside++
			}
			width += l.Standard / float64(trials)
		}
		t.Logf("%s: inside 2 standard uncertainties in %d of %d, mean %.5f", row.name, inside, trials, width)
		if least := 0.93*float64(trials) - 2*math.Sqrt(0.05*float64(trials)); float64(inside) < least {
			t.Errorf("%s: the true rate lies inside 2 standard uncertainties in %d of %d only", row.name, inside, trials)
		}
	}
}

// What a straight line makes of warming is no leak here: the volume is tight,
// and the interval holds 0, as the line's does not.
func TestWarmingIsNoLeak(t *testing.T) {
	for k := range 10 {
		r := rand.New(rand.NewPCG(77, uint64(k)))
		h := heldVolume{noise: 0.02, hz: 10, seconds: 30, start: 30, parts: [][2]float64{{2, 10 + 20*r.Float64()}}}
		ts, ps := h.readings(r)
		l, err := LeakRate(ts, ps, leakSettings())
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(l.Rate) > 2.5*l.Standard {
			t.Errorf("tau %.1f s: a leak of %.4f +- %.4f is told of a tight volume", h.parts[0][1], l.Rate, l.Standard)
		}
		if line := naive(ts, ps); line < 0.002 || l.Warming < 3 {
			t.Errorf("tau %.1f s: a straight line has %.4f, warming widens by %.1f: nothing is shown", h.parts[0][1], line, l.Warming)
		}
	}
}

// naive is the slope of a straight line, as a loss.
func naive(t, p []float64) float64 {
	var mt, mp, stt, stp float64
	for i := range t {
		mt += t[i] / float64(len(t))
		mp += p[i] / float64(len(t))
	}
	for i := range t {
		stt += (t[i] - mt) * (t[i] - mt)
		stp += (t[i] - mt) * (p[i] - mp)
	}
	return -stp / stt
}

// The longer hold that is asked for does help.
func TestLongerHold(t *testing.T) {
	set := leakSettings()
	set.Wanted = 0.002
	h := heldVolume{leak: 0.02, noise: 0.05, hz: 10, seconds: 20, parts: [][2]float64{{2, 12}}}
	short := func(seconds float64) Leak {
		h.seconds = seconds
		ts, ps := h.readings(rand.New(rand.NewPCG(4, 4)))
		l, err := LeakRate(ts, ps, set)
		if err != nil {
			t.Fatal(err)
		}
		return l
	}
	l := short(20)
	if !(l.LongerHold > 20) || math.IsInf(l.LongerHold, 1) {
		t.Fatalf("20 s give %.4f and ask for %g s", l.Standard, l.LongerHold)
	}
	if longer := short(l.LongerHold); longer.Standard > 2*set.Wanted {
		t.Errorf("%g s were to give %g, they give %.4f", l.LongerHold, set.Wanted, longer.Standard)
	}
	if enough := short(400); enough.LongerHold != 0 || enough.Standard > set.Wanted {
		t.Errorf("400 s give %.5f and ask for %g s more", enough.Standard, enough.LongerHold)
	}
}

func TestLeakLaws(t *testing.T) {
	h := heldVolume{leak: 0.03, noise: 0.02, hz: 10, seconds: 30, parts: [][2]float64{{1, 5}}}
	ts, ps := h.readings(rand.New(rand.NewPCG(8, 8)))
	a, err := LeakRate(ts, ps, leakSettings())
	if err != nil {
		t.Fatal(err)
	}
	set := leakSettings()
	set.Amplitude, set.Wanted = set.Amplitude*0.133322, set.Wanted*0.133322
	var us, ks []float64
	for i := range ts {
		us, ks = append(us, ts[i]+4096), append(ks, ps[i]*0.133322)
	}
	b, err := LeakRate(us, ks, set)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(b.Rate/0.133322-a.Rate) > 1e-7 || math.Abs(b.Standard/0.133322-a.Standard) > 1e-7 {
		t.Errorf("%g +- %g mmHg/s, and in kPa an hour later %g +- %g", a.Rate, a.Standard, b.Rate/0.133322, b.Standard/0.133322)
	}
	// Steady pressure without noise: no leak, and no trouble.
	flat := make([]float64, len(ts))
	for i := range flat {
		flat[i] = 300
	}
	if l, err := LeakRate(ts, flat, leakSettings()); err != nil || math.Abs(l.Rate) > 1e-9 || math.IsNaN(l.Standard) {
		t.Errorf("a steady pressure: %+v, %v", l, err)
	}
}

func TestLeakRefuses(t *testing.T) {
	ts, ps := heldVolume{hz: 10, seconds: 2}.readings(rand.New(rand.NewPCG(1, 1)))
	if _, err := LeakRate(ts[:3], ps[:3], leakSettings()); err == nil {
		t.Error("three readings gave a rate")
	}
	if _, err := LeakRate(ts, ps[1:], leakSettings()); err == nil {
		t.Error("times and pressures of different number gave a rate")
	}
	if _, err := LeakRate(ts, ps, LeakSettings{}); err == nil {
		t.Error("nothing stated gave a rate")
	}
}

func TestLeakLessOwn(t *testing.T) {
	l := Leak{Rate: 0.05, Standard: 0.003, DoF: 20}
	net := l.Less(Leak{Rate: 0.01, Standard: 0.004}, 0.5, 0.1)
	// By hand: 0.05 - 0.5 x 0.01; sqrt(0.003^2 + 0.002^2 + 0.001^2) = sqrt(14e-6); 20 x (14/9)^2.
	if math.Abs(net.Rate-0.045) > 1e-15 || math.Abs(net.Standard-math.Sqrt(14e-6)) > 1e-15 || math.Abs(net.DoF-20*196.0/81) > 1e-9 {
		t.Errorf("net of the bench's own: %+v", net)
	}
}

func TestVolumeRate(t *testing.T) {
	// Boyle's law by hand: 0.05 mL a minute at 250 mmHg above 760 from 50 mL
	// takes 0.05/60 x 1010/50 = 0.016833 mmHg/s; from 5 mL ten times that.
	for volume, rate := range map[float64]float64{50: 0.05 / 60 * 1010 / 50, 5: 0.05 / 60 * 1010 / 5} {
		q, u := Leak{Rate: rate, Standard: rate / 10}.VolumeRate(volume, volume/10, 1010)
		if math.Abs(q*60-0.05) > 1e-12 || math.Abs(u*60-0.05*math.Sqrt(0.02)) > 1e-12 {
			t.Errorf("%g mL: %g +- %g mL a minute", volume, q*60, u*60)
		}
	}
	if q, _ := (Leak{Rate: 1}).VolumeRate(0, 0, 760); !math.IsNaN(q) {
		t.Error("no volume gives a flow")
	}
}
