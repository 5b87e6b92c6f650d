package pulse

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"testing"
)

// The published three-harmonic pulse: extremes and what four lines make of it
// at 2 Hz (120/min). Values computed elsewhere in double precision and printed
// to four or five decimals.
func TestThreeHarmonics(t *testing.T) {
	w := Shapes()[0]
	if math.Abs(w.Systolic-119.98101) > 5e-6 || math.Abs(w.Diastolic-80.01899) > 5e-6 || w.Mean != 100 {
		t.Errorf("%.6f %.6f %g", w.Systolic, w.Diastolic, w.Mean)
	}
	for _, c := range []struct{ fn, zeta, systolic, diastolic float64 }{
		{5, 0.2, 134.9061, 77.7271}, {12, 0.3, 121.7187, 78.7672}, {24, 0.15, 120.4020, 79.6247}, {24, 1.1, 119.3858, 80.5156},
	} {
		e := w.Through(c.fn, c.zeta, 120)
		if math.Abs(w.Systolic+e.Systolic-c.systolic) > 6e-5 || math.Abs(w.Diastolic+e.Diastolic-c.diastolic) > 6e-5 || e.Mean != 0 {
			t.Errorf("%g Hz, %g: %.5f and %.5f, want %.4f and %.4f", c.fn, c.zeta, w.Systolic+e.Systolic, w.Diastolic+e.Diastolic, c.systolic, c.diastolic)
		}
	}
}

// python runs a script with numpy; without it the test is skipped, unless
// outside programs are required.
func python(t *testing.T, script string) string {
	t.Helper()
	for _, name := range []string{"python3", "/usr/bin/python3"} {
		if exec.Command(name, "-c", "import numpy").Run() != nil {
			continue
		}
		out, err := exec.Command(name, "-c", script).Output()
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		return string(out)
	}
	if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
		t.Fatal("no python3 with numpy")
	}
	t.Skip("no python3 with numpy")
	return ""
}

// The shapes of our own, drawn in numpy from their formula in time and sent
// through the line by FFT. Tolerance: the grid of 32,768 places, 1e-5 mmHg.
func TestShapesAgainstNumpy(t *testing.T) {
	out := python(t, `
import json, numpy as np
n = 32768; x = np.arange(n)/n; k = np.fft.fftfreq(n, 1/n)
def bump(h, at, w): return sum(h*np.exp(-((x-at-m)/w)**2/2) for m in range(-6, 7))
rows = []
for p in (bump(1, .20, .09)+bump(.6, .42, .15), bump(1, .13, .045)+bump(.75, .27, .09)+bump(.25, .5, .05)):
    p = 60+80*(p-p.min())/(p.max()-p.min()); f = np.fft.fft(p)
    for rate, fn, z in ((60, 12, .2), (90, 8, .7), (120, 24, .64), (180, 24, .2), (200, 40, 1.4), (220, 15, .05)):
        u = k*rate/60/fn; y = np.fft.ifft(f/(1-u*u+2j*z*u)).real
        rows.append([rate, fn, z, y.max()-p.max(), y.min()-p.min(), y.mean()-p.mean()])
print(json.dumps(rows))`)
	var rows [][]float64
	if err := json.Unmarshal([]byte(out), &rows); err != nil || len(rows) != 12 {
		t.Fatal(len(rows), err)
	}
	for i, r := range rows {
		e := Shapes()[1+i/6].Through(r[1], r[2], r[0])
		if math.Abs(e.Systolic-r[3]) > 1e-5 || math.Abs(e.Diastolic-r[4]) > 1e-5 || math.Abs(e.Mean-r[5]) > 1e-9 {
			t.Errorf("%v: %+v", r, e)
		}
	}
}

// random draws a wave of any shape: harmonics of random size and phase.
func random(r *rand.Rand) (mean float64, cos, sin []float64) {
	k := 1 + r.IntN(24)
	cos, sin = make([]float64, k), make([]float64, k)
	fall := 0.5 + r.Float64()/2
	size := 10.0
	for i := range cos {
		cos[i], sin[i] = size*r.NormFloat64(), size*r.NormFloat64()
		size *= fall
	}
	return 100 * r.NormFloat64(), cos, sin
}

// Extremes against looking everywhere: 20,000 places, between which a sum of K
// harmonics of a range R changes by at most R K^2 (pi/20000)^2/2 at an extreme.
func TestExtremesAgainstAGrid(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for range 300 {
		mean, cos, sin := random(r)
		k := len(cos)
		low, high := newExtremes(k).of(mean, cos, sin)
		lowest, highest := math.Inf(1), math.Inf(-1)
		for i := range 20000 {
			v, _, _ := at(cos, sin, 2*math.Pi*float64(i)/20000)
			lowest, highest = math.Min(lowest, mean+v), math.Max(highest, mean+v)
		}
		slack := (highest-lowest)*float64(k*k)*math.Pow(math.Pi/20000, 2)/2 + 1e-9
		if high < highest-1e-9 || high > highest+slack || low > lowest+1e-9 || low < lowest-slack {
			t.Fatalf("%d harmonics: %.9g to %.9g, looked everywhere %.9g to %.9g", k, low, high, lowest, highest)
		}
	}
}

// Laws: a line of twice the frequency does at twice the rate the same; a pulse
// of twice the size has twice the errors; what passes a very fast line is
// unchanged; turned upside down systolic and diastolic change places; where the
// beat begins does not matter.
func TestLaws(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 2))
	for range 100 {
		mean, cos, sin := random(r)
		w, err := Harmonics("", mean, cos, sin)
		if err != nil {
			t.Fatal(err)
		}
		fn, zeta, rate := 5+40*r.Float64(), 0.05+1.5*r.Float64(), 40+180*r.Float64()
		e := w.Through(fn, zeta, rate)
		same := func(name string, a, b Errors) {
			t.Helper()
			size := 1e-9 * (w.Systolic - w.Diastolic)
			if math.Abs(a.Systolic-b.Systolic) > size || math.Abs(a.Diastolic-b.Diastolic) > size {
				t.Errorf("%s: %+v and %+v", name, a, b)
			}
		}
		same("scale of time", e, w.Through(2*fn, zeta, 2*rate))
		same("fast line", Errors{}, w.Through(1e7*fn, zeta, rate))
		double, opposite, later := make([][]float64, 2), make([][]float64, 2), make([][]float64, 2)
		shift := r.Float64()
		for i := range cos {
			s, c := math.Sincos(2 * math.Pi * shift * float64(i+1))
			double[0], double[1] = append(double[0], 2*cos[i]), append(double[1], 2*sin[i])
			opposite[0], opposite[1] = append(opposite[0], -cos[i]), append(opposite[1], -sin[i])
			later[0], later[1] = append(later[0], cos[i]*c-sin[i]*s), append(later[1], sin[i]*c+cos[i]*s)
		}
		d, _ := Harmonics("", mean, double[0], double[1])
		d2 := d.Through(fn, zeta, rate)
		same("twice the size", Errors{Systolic: 2 * e.Systolic, Diastolic: 2 * e.Diastolic}, d2)
		o, _ := Harmonics("", -mean, opposite[0], opposite[1])
		o2 := o.Through(fn, zeta, rate)
		same("upside down", Errors{Systolic: -e.Diastolic, Diastolic: -e.Systolic}, o2)
		l, _ := Harmonics("", mean, later[0], later[1])
		same("begun later", e, l.Through(fn, zeta, rate))
	}
}

// A sampled beat gives the harmonics it was made of, and what is no beat is
// refused.
func TestSamples(t *testing.T) {
	for _, w := range Shapes() {
		p := make([]float64, 250)
		for i := range p {
			v, _, _ := at(w.Cos, w.Sin, 2*math.Pi*float64(i)/250)
			p[i] = w.Mean + v
		}
		s, err := Samples("own", p)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(s.Systolic-w.Systolic) > 1e-4 || math.Abs(s.Diastolic-w.Diastolic) > 1e-4 || math.Abs(s.Mean-w.Mean) > 1e-9 {
			t.Errorf("%s: %g %g %g", w.Name, s.Systolic, s.Diastolic, s.Mean)
		}
		a, b := w.Through(12, 0.3, 100), s.Through(12, 0.3, 100)
		if math.Abs(a.Systolic-b.Systolic) > 1e-3 || math.Abs(a.Diastolic-b.Diastolic) > 1e-3 {
			t.Errorf("%s: %+v, sampled %+v", w.Name, a, b)
		}
	}
	// A recording has noise; what a hundred harmonics leave of it is no matter.
	r := rand.New(rand.NewPCG(9, 9))
	w := Shapes()[2]
	p := make([]float64, 2000)
	wild := make([]float64, 2000)
	for i := range p {
		v, _, _ := at(w.Cos, w.Sin, 2*math.Pi*float64(i)/2000)
		p[i], wild[i] = w.Mean+v+0.2*r.NormFloat64(), 100*r.Float64()
	}
	if s, err := Samples("recorded", p); err != nil || math.Abs(s.Through(12, 0.3, 100).Systolic-w.Through(12, 0.3, 100).Systolic) > 0.2 {
		t.Errorf("recorded: %v", err)
	}
	if s, err := Samples("noise", wild); err == nil {
		t.Errorf("noise alone was taken: %d harmonics", len(s.Cos))
	}
	ramp := make([]float64, 100)
	flat := make([]float64, 100)
	broken := make([]float64, 100)
	for i := range ramp {
		ramp[i], broken[i] = float64(i), math.Sin(float64(i))
	}
	broken[7] = math.NaN()
	for i, bad := range [][]float64{nil, ramp, flat, broken, {1, 2, 3}} {
		if w, err := Samples("", bad); err == nil || w.Cos != nil {
			t.Errorf("%d: taken", i)
		}
	}
}

// The reach against the errors themselves: within the tolerance below, at the
// limit it is used up, and never exceeded at any rate below it looked at
// densely. Lines of any damping, every shape.
func TestReachIsTheFirstLimit(t *testing.T) {
	for _, w := range Shapes() {
		r, err := NewReach(w, Tolerance{Absolute: 2, Share: 0.02})
		if err != nil {
			t.Fatal(err)
		}
		for zeta := 0.05; zeta < 2; zeta *= 1.15 {
			u := r.Limit(zeta)
			if got := r.Used(u, zeta); math.Abs(got-1) > 1e-6 {
				t.Errorf("%s, zeta %.3f: at the limit %.9f of the tolerance is used", w.Name, zeta, got)
			}
			for i := range 600 {
				if v := u * float64(i) / 600; v > 0 && r.Used(v, zeta) > 1+1e-9 {
					t.Fatalf("%s, zeta %.3f: limit %.6f, but at %.6f %.6f of the tolerance is used", w.Name, zeta, u, v, r.Used(v, zeta))
				}
			}
			e := w.Through(20, zeta, 60*20*u)
			if s, d := math.Abs(e.Systolic)/max(2, 0.02*w.Systolic), math.Abs(e.Diastolic)/max(2, 0.02*w.Diastolic); math.Abs(max(s, d)-1) > 1e-6 {
				t.Errorf("%s, zeta %.3f: %+v", w.Name, zeta, e)
			}
		}
	}
}

// Where the stated shapes can be followed within 2 mmHg at 120/min: damping
// ratios for some natural frequencies, from an independent program (numpy FFT,
// steps of 0.01).
func TestAdequateDamping(t *testing.T) {
	inside := func(w Wave, fn, zeta float64) bool {
		e := w.Through(fn, zeta, 120)
		return math.Abs(e.Systolic) <= 2 && math.Abs(e.Diastolic) <= 2
	}
	shapes := Shapes()
	for _, c := range []struct {
		w             Wave
		fn, low, high float64
	}{
		{shapes[1], 10, 0.58, 0.77}, {shapes[1], 15, 0.48, 0.90}, {shapes[1], 24, 0.10, 1.15},
		{shapes[2], 10, 0.53, 0.60}, {shapes[2], 15, 0.58, 0.70}, {shapes[2], 24, 0.55, 0.82}, {shapes[2], 40, 0.10, 1.04},
	} {
		low, high := math.Inf(1), 0.0
		for i := 10; i < 160; i++ {
			if z := float64(i) / 100; inside(c.w, c.fn, z) {
				low, high = min(low, z), max(high, z)
			}
		}
		if math.Abs(low-c.low) > 0.0051 || math.Abs(high-c.high) > 0.0051 {
			t.Errorf("%s, %g Hz: damping %.2f to %.2f, want %.2f to %.2f", c.w.Name, c.fn, low, high, c.low, c.high)
		}
	}
}

// Many lines at once are those one by one, to a hundredth; about a jump a few
// may be off, or on its other side.
func TestRates(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	for _, w := range Shapes() {
		reach, err := NewReach(w, Tolerance{Absolute: 2, Share: 0.02})
		if err != nil {
			t.Fatal(err)
		}
		var fn, zeta []float64
		for range 400 {
			fn, zeta = append(fn, 12+0.3*r.NormFloat64()), append(zeta, 0.5+0.03*r.NormFloat64())
		}
		off := 0
		for i, got := range reach.Rates(fn, zeta) {
			if want := reach.Rate(fn[i], zeta[i]); math.Abs(got-want) > 1e-2*want {
				off++
			}
		}
		if off > 16 {
			t.Errorf("%s: %d of 400 differ", w.Name, off)
		}
		if reach.Rate(0.1, 0.6) != 0 || !math.IsInf(reach.Rate(500, 0.6), 1) {
			t.Errorf("%s: ends of the range of rates: %g, %g", w.Name, reach.Rate(0.1, 0.6), reach.Rate(500, 0.6))
		}
		contour := reach.Contour(120, []float64{0.3, 0.64, 1})
		for i, z := range []float64{0.3, 0.64, 1} {
			if rate := 60 * contour[i] * reach.Limit(z); math.Abs(rate-120) > 1e-6 {
				t.Errorf("%s: on the contour the fastest rate is %g", w.Name, rate)
			}
		}
	}
	if _, err := NewReach(Shapes()[0], Tolerance{}); err == nil {
		t.Error("a tolerance of nothing was taken")
	}
}

// A checker broken on purpose: the test of the first limit must find a reach
// that looks in steps too wide for a sharp resonance.
func TestSharpResonanceIsSeen(t *testing.T) {
	// A pulse with one tiny high harmonic: it rings first, alone.
	cos, sin := make([]float64, 12), make([]float64, 12)
	sin[0], sin[11] = 20, 0.3
	w, err := Harmonics("", 100, cos, sin)
	if err != nil {
		t.Fatal(err)
	}
	r, err := NewReach(w, Tolerance{Absolute: 2})
	if err != nil {
		t.Fatal(err)
	}
	// Within 5 % of damping the twelfth harmonic reaches 3 mmHg at u = 1/12.
	if u := r.Limit(0.05); u > 1.0/12 || u < 0.07 {
		t.Errorf("limit %g, the resonance of the twelfth harmonic is at %g", u, 1.0/12)
	}
}

func BenchmarkReach(b *testing.B) {
	for _, w := range Shapes() {
		b.Run(fmt.Sprint(w.Name), func(b *testing.B) {
			r, err := NewReach(w, Tolerance{Absolute: 2, Share: 0.02})
			if err != nil {
				b.Fatal(err)
			}
			for b.Loop() {
				r.Limit(0.5)
			}
		})
	}
}
