package step

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"strings"
	"testing"
)

// python runs a script with scipy; without it the test is skipped, unless
// outside programs are required.
func python(t *testing.T, script string) string {
	t.Helper()
	for _, name := range []string{"python3", "/usr/bin/python3"} {
		if exec.Command(name, "-c", "import scipy").Run() != nil {
			continue
		}
		out, err := exec.Command(name, "-c", script).Output()
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		return string(out)
	}
	if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
		t.Fatal("no python3 with scipy")
	}
	t.Skip("no python3 with scipy")
	return ""
}

// Every figure against scipy: the answer from the poles in complex numbers on
// a fine grid with brentq, the gain from signal.TransferFunction's freqresp.
// Tolerance: 1e-9 relative, brentq's xtol 1e-14 aside.
func TestFiguresAgainstScipy(t *testing.T) {
	out := python(t, `
import json, numpy as np
from scipy import signal
from scipy.optimize import brentq, minimize_scalar
def g(x, z):
    if z == 1: return 1-(1+x)*np.exp(-x)
    r = np.sqrt(complex(z*z-1)); a, b = -z+r, -z-r
    return (1+(b*np.exp(a*x)-a*np.exp(b*x))/(a-b)).real
rows = []
for z in [0.03,0.05,0.1,0.109,0.15,0.2,0.25,0.3,0.33,0.4,0.5,0.57,0.61,0.64,0.66,0.7,0.72,0.8,0.95,1,1.1,1.5,2,3.7]:
    x = np.linspace(0, 12/z+60*max(z,1), 100001); y = g(x, z)
    def first(level):
        i = np.argmax(y >= level); return brentq(lambda t: g(t, z)-level, x[i-1], x[i], xtol=1e-14)
    def settle(p):
        i = np.nonzero(np.abs(y-1) > p)[0][-1]
        return brentq(lambda t: abs(g(t, z)-1)-p, x[i], x[i+1], xtol=1e-14)
    tf = signal.TransferFunction([1], [1, 2*z, 1])
    gain = lambda u: abs(tf.freqresp([u])[1][0])
    us = np.linspace(1e-6, 4, 100001); gs = abs(tf.freqresp(us)[1])
    i = np.argmax(gs)
    edge = lambda bad, f: (lambda k: brentq(f, us[k-1], us[k], xtol=1e-15))(np.argmax(bad))
    b3 = edge(gs < 0.5**0.5, lambda u: gain(u)-0.5**0.5)
    flat = edge(np.abs(gs-1) > 0.05, lambda u: abs(gain(u)-1)-0.05)
    h = tf.freqresp([0.3, 1.7])[1]
    rows.append([z, max(0, y.max()-1), first(0.9)-first(0.1), settle(0.02), settle(0.05), gs[i], b3, flat,
                 abs(h[0]), np.angle(h[0]), abs(h[1]), np.angle(h[1])])
print(json.dumps(rows))`)
	var rows [][]float64
	if err := json.Unmarshal([]byte(out), &rows); err != nil || len(rows) != 24 {
		t.Fatal(len(rows), err)
	}
	for _, r := range rows {
		z := r[0]
		_, gain := Resonance(z)
		for i, c := range []struct {
			name      string
			got       float64
			tolerance float64 // absolute; of extrema that of a grid
		}{
			{"overshoot", Overshoot(z), 2e-5}, {"rise", RiseTime(z), 1e-9}, {"settling 2 %", SettlingTime(z, 0.02), 1e-8}, {"settling 5 %", SettlingTime(z, 0.05), 1e-8},
			{"peak gain", gain, 1e-5 * gain}, {"-3 dB", Bandwidth(z), 1e-9}, {"flat", FlatBand(z, 0.05), 1e-9},
			{"gain", Amplitude(1, z, 0.3), 1e-12}, {"phase", Phase(1, z, 0.3), 1e-12}, {"gain", Amplitude(10, z, 17), 1e-12}, {"phase", Phase(10, z, 17), 1e-12},
		} {
			if want := r[i+1]; math.Abs(c.got-want) > c.tolerance {
				t.Errorf("zeta %g %s: %.12g, scipy %.12g", z, c.name, c.got, want)
			}
		}
	}
}

// The draws against independent ones of another kind: normals over a root of a
// sum of squared normals. Tolerance 3 % of the width: three standard deviations
// of the ends from 4,096 draws, and 0.5 % for the 50,000 independent ones.
func TestDrawsAgainstIndependentOnes(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	for _, nu := range []int{0, 4} {
		j := Joint{
			Frequency: 20, Damping: 0.5, LogStandard: 0.02, DampingStandard: 0.03, Correlation: 0.6, DegreesOfFreedom: float64(nu),
			Tolerances: []Tolerance{{0.05, -0.04}},
		}
		d, err := j.Draw(4096, 1)
		if err != nil {
			t.Fatal(err)
		}
		var other Draws
		for range 50_000 {
			scale := 1.0
			if nu > 0 {
				sum := 0.0
				for range nu {
					x := r.NormFloat64()
					sum += x * x
				}
				scale = math.Sqrt(float64(nu) / sum)
			}
			a, b, part := r.NormFloat64(), r.NormFloat64(), 2*r.Float64()-1
			z := 0.5 + scale*0.03*(0.6*a+0.8*b) - 0.04*part
			if z > 0 {
				other.Frequency = append(other.Frequency, 20*math.Exp(scale*0.02*a+0.05*part))
				other.Damping = append(other.Damping, z)
			}
		}
		ours, theirs := j.Derive(d, nil), j.Derive(other, nil)
		for _, c := range []struct {
			name string
			a, b Figure
		}{{"product", ours.Product, theirs.Product}, {"overshoot", ours.Overshoot, theirs.Overshoot}, {"-3 dB", ours.Bandwidth3dB, theirs.Bandwidth3dB}} {
			width := c.b.High - c.b.Low
			if math.Abs(c.a.Low-c.b.Low) > 0.03*width || math.Abs(c.a.High-c.b.High) > 0.03*width {
				t.Errorf("nu %d, %s: %.5g to %.5g, independent draws %.5g to %.5g", nu, c.name, c.a.Low, c.a.High, c.b.Low, c.b.High)
			}
		}
	}
}

// Laws of the sampling: the same seed gives the same draws; without an
// uncertainty every interval is a point; fn ten times as high makes every
// frequency ten times as high and every time a tenth.
func TestDeriveLaws(t *testing.T) {
	j := Joint{Frequency: 12, Damping: 0.3, LogStandard: 0.01, DampingStandard: 0.01, DegreesOfFreedom: 4, Correlation: -0.2}
	a, err := j.Draw(500, 9)
	if err != nil {
		t.Fatal(err)
	}
	b, _ := j.Draw(500, 9)
	c, _ := j.Draw(500, 10)
	if fmt.Sprint(a) != fmt.Sprint(b) || fmt.Sprint(a) == fmt.Sprint(c) {
		t.Error("draws do not follow their seed")
	}
	fast := j
	fast.Frequency = 120
	f, _ := fast.Draw(500, 9)
	one, ten := j.Derive(a, []float64{10}), fast.Derive(f, []float64{100})
	for _, p := range []struct{ a, b Figure }{
		{one.DampedFrequency, ten.DampedFrequency}, {one.ResonanceFrequency, ten.ResonanceFrequency}, {one.Bandwidth3dB, ten.Bandwidth3dB}, {one.Flat5, ten.Flat5}, {one.Product, ten.Product},
		{ten.RiseTime, one.RiseTime}, {ten.Settling2, one.Settling2}, {ten.Settling5, one.Settling5},
	} {
		if !near(10*p.a.Value, p.b.Value, 1e-12) || !near(10*p.a.Low, p.b.Low, 1e-12) || !near(10*p.a.High, p.b.High, 1e-12) {
			t.Errorf("%+v and %+v are not ten to one", p.a, p.b)
		}
	}
	if one.At[0].Gain.Low != ten.At[0].Gain.Low || one.At[0].Phase.High != ten.At[0].Phase.High || one.Overshoot.Low != ten.Overshoot.Low {
		t.Error("gain, phase or overshoot changed with the scale of frequency")
	}
	j.LogStandard, j.DampingStandard = 0, 0
	d, _ := j.Draw(100, 1)
	if sure := j.Derive(d, nil); sure.RiseTime.Low != sure.RiseTime.High || sure.RiseTime.Low != sure.RiseTime.Value {
		t.Errorf("without an uncertainty: %+v", sure.RiseTime)
	}
	for _, bad := range []Joint{{}, {Frequency: 1}, {Frequency: math.NaN(), Damping: 1}, {Frequency: 1, Damping: 1, LogStandard: -1}, {Frequency: 1, Damping: 1, Correlation: 2},
		{Frequency: 1, Damping: 1, DegreesOfFreedom: -1}, {Frequency: 1, Damping: math.Inf(1)}} {
		if d, err := bad.Draw(100, 1); err == nil || d.Frequency != nil {
			t.Errorf("%+v: %v", bad, err)
		}
	}
}

// What exists in part of the draws only is told, and both branches of what
// jumps.
func TestBranches(t *testing.T) {
	j := Joint{Frequency: 20, Damping: 0.58953, LogStandard: 0.002, DampingStandard: 0.01}
	d, err := j.Draw(2048, 1)
	if err != nil {
		t.Fatal(err)
	}
	f := j.Derive(d, nil)
	// Either side of the jump at zeta 0.58953: 0.55 and 0.8679 of fn.
	if !strings.Contains(f.Flat5.Note, "jumps") || f.Flat5.Low > 0.55*20 || f.Flat5.High < 0.8679*20*0.99 {
		t.Errorf("%+v", f.Flat5)
	}
	if f.ResonanceGain.Note != "" || f.Overshoot.Note != "" {
		t.Errorf("%+v", f)
	}
	j.Damping, j.DampingStandard = 0.7, 0.02
	d, _ = j.Draw(2048, 1)
	if f = j.Derive(d, nil); !f.ResonanceGain.Exists || !strings.Contains(f.ResonanceGain.Note, "none") || f.ResonanceGain.Low != 1 {
		t.Errorf("%+v", f.ResonanceGain)
	}
	j.Damping = 1.01
	d, _ = j.Draw(2048, 1)
	if f = j.Derive(d, nil); f.DampedFrequency.Exists || f.DampedFrequency.Reason == "" || !strings.Contains(f.DampedFrequency.Note, "may be one") || f.Flat5.Note != "" {
		t.Errorf("%+v", f.DampedFrequency)
	}
}

// The intervals of the derived figures cover the truth in 93 to 97 % of
// simulated traces, for one step and for five.
func TestDerivedCoverage(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 4))
	for _, zeta := range []float64{0.2, 0.5, 0.64, 1.2} {
		for _, heights := range [][]float64{{100}, {100, -100, 100, -100, 100}} {
			p := plan{fn: 20, zeta: zeta, rate: 400, before: 0.4, spacing: 1.1, heights: heights, sigma: 0.3}
			truth := Joint{Frequency: p.fn, Damping: zeta}
			sure, err := truth.Draw(100, 1)
			if err != nil {
				t.Fatal(err)
			}
			want := truth.Derive(sure, []float64{10})
			inside := map[string]int{}
			n := trials(8, 2000)
			for range n {
				p.phase = r.Float64()
				_, c, _, err := Analyse(p.make(r), Settings{EdgeStated: true, MinimumStep: 8})
				if err != nil || !c.Determined {
					t.Fatal(c.Reasons, err)
				}
				d, err := c.Joint().Draw(1024, 1)
				if err != nil {
					t.Fatal(err)
				}
				got := c.Joint().Derive(d, []float64{10})
				for _, f := range []struct {
					name       string
					got, truth Figure
				}{
					{"damped", got.DampedFrequency, want.DampedFrequency}, {"overshoot", got.Overshoot, want.Overshoot}, {"rise", got.RiseTime, want.RiseTime},
					{"settling", got.Settling2, want.Settling2}, {"peak", got.ResonanceGain, want.ResonanceGain}, {"-3 dB", got.Bandwidth3dB, want.Bandwidth3dB},
					{"flat", got.Flat5, want.Flat5}, {"gain", got.At[0].Gain, want.At[0].Gain}, {"phase", got.At[0].Phase, want.At[0].Phase}, {"product", got.Product, want.Product},
				} {
					if f.got.Low <= f.truth.Value && f.truth.Value <= f.got.High || !f.truth.Exists {
						inside[f.name]++
					}
				}
			}
			for name, k := range inside {
				share, slack := float64(k)/float64(n), 3*math.Sqrt(0.95*0.05/float64(n))
				t.Logf("zeta %.2f, %d steps, %s: %.3f", zeta, len(heights), name, share)
				if exists := zeta < 0.7 || name == "rise" || name == "product"; exists && (share < 0.93-slack || share > 0.97+slack) {
					t.Errorf("zeta %g, %d steps, %s: the 95 %% intervals cover %.3f of %d", zeta, len(heights), name, share, n)
				}
			}
		}
	}
}

func BenchmarkDerive(b *testing.B) {
	j := Joint{Frequency: 20, Damping: 0.5, LogStandard: 0.01, DampingStandard: 0.02, Correlation: 0.3, DegreesOfFreedom: 4}
	for b.Loop() {
		d, err := j.Draw(2048, 1)
		if err != nil {
			b.Fatal(err)
		}
		j.Derive(d, []float64{5, 10, 20})
	}
}
