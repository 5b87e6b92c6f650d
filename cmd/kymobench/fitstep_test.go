package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"kymobench/procedures/results"
)

// ringing writes releases of 100 mmHg through a line of fn and zeta below 1, from
// the textbook answer, as a CSV file.
func ringing(t *testing.T, fn, zeta, noise float64) string {
	t.Helper()
	r := rand.New(rand.NewPCG(1, 1))
	var b strings.Builder
	b.WriteString("time_s,pressure_mmHg\n")
	w, root := 2*math.Pi*fn, math.Sqrt(1-zeta*zeta)
	const rate, spacing = 1000, 1.5
	for i := range 5 * rate {
		at := float64(i) / rate
		p := 100.0
		for k, sign := range []float64{-1, 1, -1} {
			if x := w * (at - spacing*float64(k) - 0.7003); x > 0 {
				p += sign * 100 * (1 - math.Exp(-zeta*x)*(math.Cos(root*x)+zeta/root*math.Sin(root*x)))
			}
		}
		fmt.Fprintf(&b, "%.3f,%.3f\n", at, p+noise*r.NormFloat64())
	}
	path := filepath.Join(t.TempDir(), "trace.csv")
	if err := os.WriteFile(path, []byte(b.String()), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

func fittedStep(t *testing.T, args ...string) (results.Step, error) {
	t.Helper()
	var out bytes.Buffer
	root := newRootCommand(streams{out: &out, err: io.Discard})
	root.SetArgs(append([]string{"fit", "step", "--json"}, args...))
	err := root.ExecuteContext(t.Context())
	var s results.Step
	if err == nil {
		if e := json.Unmarshal(out.Bytes(), &s); e != nil {
			t.Fatal(e)
		}
	}
	return s, err
}

// The catheter with the 5 mm plug of air (Webster, Medical Instrumentation,
// example 7.1: 3.32 ul at 101.325 kPa; 21.983 Hz, 0.13686), measured as a step
// response, with the clean line (90.8345 Hz) as designed: the air is found
// again, and the product is as designed.
func TestAirIsFoundAgain(t *testing.T) {
	path := ringing(t, 21.983, 0.13686, 0.2)
	s, err := fittedStep(t, path, "--edge-time", "0", "--line-length", "1.000 m", "--bore", "0.920 mm", "--density", "1000 kg/m3", "--viscosity", "1.0 mPa s",
		"--designed-frequency", "90.8345 Hz", "--designed-damping", "0.033122", "--barometer", "101.325 kPa")
	if err != nil {
		t.Fatal(err)
	}
	// One trace's noise may lie anywhere: within twice the 95 % interval.
	holds := func(name string, f results.DerivedFigure, want, within float64) {
		t.Helper()
		if f.Interval == nil || math.Abs(*f.Value-want) > f.Interval[1]-f.Interval[0] || math.Abs(*f.Value/want-1) > within {
			t.Errorf("%s: %.8g in %v, want %.8g", name, *f.Value, *f.Interval, want)
		}
	}
	// The steps ring about 0 mmHg, 100 mmHg and 0: on average at 33.3 mmHg, where
	// the same compliance is more air at atmospheric pressure, (p/p0)^2.
	up := math.Pow((101.325+100*0.133322/3)/101.325, 2)
	holds("air", s.Opinions.Air.Isothermal, 3.3239*up, 0.02)
	holds("air, adiabatic", s.Opinions.Air.Adiabatic, 1.4*3.3239*up, 0.02)
	holds("compliance", *s.Opinions.Compliance, (1/0.49e15+3.3239e-9/101325)*1e9*13332.2, 0.02)
	holds("product", *s.Opinions.Designed, 1, 0.02)
	holds("over steady flow", *s.Opinions.Steady, 1, 0.02)
	if s.Opinions.Finding != "as_stated" {
		t.Errorf("%s: %v", s.Opinions.Finding, s.Opinions.Texts)
	}
	// Textbook values at zeta 0.13686.
	root := math.Sqrt(1 - 0.13686*0.13686)
	holds("overshoot", s.Derived.Overshoot, 100*math.Exp(-math.Pi*0.13686/root), 0.01)
	holds("damped frequency", s.Derived.DampedFrequency, 21.983*root, 0.01)
	holds("peak", s.Derived.ResonanceGain, 1/(2*0.13686*root), 0.01)
	holds("phase at 20 Hz", s.Derived.At[3].Phase, -180/math.Pi*math.Atan2(2*0.13686*20/21.983, 1-math.Pow(20/21.983, 2)), 0.01)
	if !s.Response.Agrees || s.Response.Steps != 3 || len(s.Response.Points) != 12 {
		t.Errorf("%+v", s.Response)
	}
}

// Errors on the published pulse: 24 Hz and 0.15 at 120/min show 120.4020 over
// 79.6247 mmHg, 0.42099 and -0.39429 from what there is.
func TestPulseErrorsOfAFit(t *testing.T) {
	path := ringing(t, 24, 0.15, 0.2)
	s, err := fittedStep(t, path, "--edge-time", "0", "--pulse", "three harmonics", "--pulse-rate", "100 1/min", "--tolerance", "1 mmHg", "--at", "24 Hz,3 Hz")
	if err != nil {
		t.Fatal(err)
	}
	p := s.Pulse
	if p.Tolerance != 1 || p.ToleranceShare != 0 || p.Plane.Rate < 99.999 || p.Plane.Rate > 100.001 || len(p.Plane.Contours) != 1 || p.Plane.Contours[0].Shape != "three harmonics" {
		t.Errorf("%+v", p)
	}
	// At its natural frequency every line lags by a quarter and gains 1/(2 zeta).
	if a := s.Derived.At; len(a) != 2 || a[1].Frequency != 3 || math.Abs(*a[0].Phase.Value+90) > 0.3 || math.Abs(*a[0].Gain.Value*2*0.15-1) > 0.01 {
		t.Errorf("%+v", a)
	}
	e := p.Shapes[0].Errors[4]
	for _, c := range []struct {
		f    results.DerivedFigure
		want float64
	}{{e.Systolic, 120.4020 - 119.98101}, {e.Diastolic, 79.6247 - 80.01899}} {
		if e.Rate != 120 || math.Abs(*c.f.Value-c.want) > 0.02 || c.f.Interval[0] > c.want || c.f.Interval[1] < c.want {
			t.Errorf("at %g: %+v, want %g", e.Rate, c.f, c.want)
		}
	}
	// A beat of one's own: the same shape, sampled.
	var b strings.Builder
	b.WriteString("pressure_kPa\n")
	for i := range 200 {
		x := 2 * math.Pi * float64(i) / 200
		fmt.Fprintf(&b, "%.6f\n", 0.133322387415*(100+14.4*(math.Sin(x)+math.Sin(2*x)/2+math.Sin(3*x)/4)))
	}
	beat := filepath.Join(t.TempDir(), "beat.csv")
	if err := os.WriteFile(beat, []byte(b.String()), 0o600); err != nil {
		t.Fatal(err)
	}
	own, err := fittedStep(t, path, "--edge-time", "0", "--pulse", beat, "--tolerance", "1 mmHg")
	if err != nil {
		t.Fatal(err)
	}
	last := own.Pulse.Shapes[len(own.Pulse.Shapes)-1]
	if last.From != "handed in" || last.Name != "beat.csv" || math.Abs(*last.Errors[4].Systolic.Value-*e.Systolic.Value) > 1e-4 || len(own.Pulse.Plane.Contours) != 1 || own.Pulse.Plane.Contours[0].Shape != "beat.csv" {
		t.Errorf("%+v", last)
	}
}

func TestFitStepRefusals(t *testing.T) {
	path := ringing(t, 24, 0.15, 0.2)
	open := filepath.Join(t.TempDir(), "open.csv")
	if err := os.WriteFile(open, []byte("pressure_mmHg\n1\n2\n3\n4\n5\n6\n7\n8\n9\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		args string
		want string
	}{
		{"--line-length|1.2", "line length"}, {"--line-length|1.2 m", "belong together"}, {"--bore|1.6 Hz|--line-length|1 m", "bore"}, {"--bore|", "--bore is empty"},
		{"--density|998 kg/m3", "belong together"}, {"--designed-damping|0.3", "designed frequency"}, {"--designed-frequency|-3 Hz", "not above zero"},
		{"--pulse|square", "no pulse"}, {"--pulse|" + open, "does not close"}, {"--pulse|" + path, "does not close"}, {"--tolerance|0 mmHg", "not above zero"}, {"--tolerance|2 Hz", "tolerance"},
		{"--at|5 Hz,ten", "frequency"}, {"--at|-1 Hz", "frequency"},
		{"--barometer|760 kPa", "barometer"}, {"--pulse-rate|120", "pulse rate"},
	} {
		_, err := fittedStep(t, append([]string{path, "--edge-time", "0"}, strings.Split(c.args, "|")...)...)
		var usage usageError
		if err == nil || !errors.As(err, &usage) || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v", c.args, err)
		}
	}
}

// A chart appears whole; the result is printed as without it.
func TestFitStepChart(t *testing.T) {
	path := ringing(t, 15, 0.4, 0.2)
	for name, begins := range map[string]string{"c.svg": "<svg ", "c.pdf": "%PDF-"} {
		chart := filepath.Join(t.TempDir(), name)
		if _, err := fittedStep(t, path, "--edge-time", "0", "--chart", chart); err != nil {
			t.Fatal(err)
		}
		if data, err := os.ReadFile(chart); err != nil || !strings.HasPrefix(string(data), begins) {
			t.Errorf("%s: %v, %.20q", name, err, data)
		}
	}
	if _, err := fittedStep(t, path, "--chart", filepath.Join(t.TempDir(), "c.png")); err == nil || !strings.Contains(err.Error(), "neither") {
		t.Errorf("png: %v", err)
	}
}

// A readout that smooths is stated and taken out: a line of 30 Hz behind a mean
// over 10 ms, made here by adding up 320 values of the textbook answer. Unstated
// it would read 26 Hz or less.
func TestFitStepBehindAReadout(t *testing.T) {
	const fn, zeta, mean, parts = 30.0, 0.4, 0.010, 320
	r := rand.New(rand.NewPCG(5, 1))
	w, root := 2*math.Pi*fn, math.Sqrt(1-zeta*zeta)
	var b strings.Builder
	b.WriteString("time_s,pressure_mmHg\n")
	for i := range 2000 {
		p := 100.0
		for k := range parts {
			if x := w * (float64(i)/1000 - mean*(float64(k)+0.5)/parts - 0.7003); x > 0 {
				p -= 100.0 / parts * (1 - math.Exp(-zeta*x)*(math.Cos(root*x)+zeta/root*math.Sin(root*x)))
			}
		}
		fmt.Fprintf(&b, "%.3f,%.3f\n", float64(i)/1000, p+0.1*r.NormFloat64())
	}
	path := filepath.Join(t.TempDir(), "smoothed.csv")
	if err := os.WriteFile(path, []byte(b.String()), 0o600); err != nil {
		t.Fatal(err)
	}
	s, err := fittedStep(t, path, "--edge-time", "0", "--readout", "average 10 ms")
	if err != nil {
		t.Fatal(err)
	}
	if f, z := s.Combined.Frequency.Value, s.Combined.Damping.Value; math.Abs(f-fn) > 0.1 || math.Abs(z-zeta) > 0.005 || !s.Response.Agrees || s.Line.Filters != "average 10 ms" {
		t.Errorf("%.3f Hz, %.4f, %+v, %s", f, z, s.Line, s.Response.Text)
	}
	for _, p := range s.Response.Points {
		u := p.Frequency / fn
		if want := 1 / math.Hypot(1-u*u, 2*zeta*u); math.Abs(p.Gain-want) > 0.02*want+0.005 {
			t.Errorf("%.2f Hz: gain %.4f without the model, want %.4f", p.Frequency, p.Gain, want)
		}
	}
	if u, err := fittedStep(t, path, "--edge-time", "0"); err == nil && math.Abs(u.Combined.Frequency.Value-fn) < 1 {
		t.Errorf("unstated it reads %.2f Hz", u.Combined.Frequency.Value)
	}
	if _, err := fittedStep(t, path, "--readout", "notch 50 Hz"); err == nil || !strings.Contains(err.Error(), "no filter") {
		t.Errorf("a notch was taken: %v", err)
	}
}
