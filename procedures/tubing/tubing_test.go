package tubing

import (
	"encoding/json"
	"math"
	"os"
	"os/exec"
	"testing"
)

func near(a, b, relative float64) bool { return math.Abs(a-b) <= relative*math.Abs(b) }

// webster is the catheter of Webster (ed.), Medical Instrumentation, examples
// 7.1 and 7.2: 1 m of 0.46 mm radius, water, dP/dV 0.49e15 N/m5. The logarithms
// of the three frequencies, 1.95, 1.34 and 1.46, are printed there (two
// decimals, cut or rounded); viscosity and elasticity are from memory; the
// other digits were computed elsewhere.
func webster() Line {
	return Line{Length: 1, Bore: 2 * 0.46e-3, Density: 1000, Viscosity: 1e-3}
}

func TestWebster(t *testing.T) {
	l, c := webster(), 1/0.49e15
	fn, zeta := l.Frequency(c)
	if !near(fn, 90.8345, 1e-6) || !near(zeta, 0.033122, 2e-5) {
		t.Errorf("clean: %.5f Hz, %.6f", fn, zeta)
	}
	// An air plug 5 mm long fills the bore, at 101.325 kPa.
	volume := math.Pi * 0.46e-3 * 0.46e-3 * 5e-3
	bubble := volume / 101325
	low, high := l.Frequency(c + bubble)
	if !near(volume, 3.32e-9, 2e-3) || !near(low, 21.983, 3e-5) || !near(high, 0.13686, 3e-5) {
		t.Errorf("with air: %.4g m3, %.4f Hz, %.5f", volume, low, high)
	}
	for i, c := range []struct{ f, printed float64 }{{fn, 1.95}, {low, 1.34}, {29.17, 1.46}} {
		if d := math.Log10(c.f) - c.printed; d < -0.005 || d >= 0.01 {
			t.Errorf("%d: log10 %.4f, printed %.2f", i, math.Log10(c.f), c.printed)
		}
	}
	// The bore at which it is critically damped.
	narrow := l
	narrow.Bore = 2 * 0.14773e-3
	if f, z := narrow.Frequency(c); !near(f, 29.17, 2e-4) || !near(z, 1, 1e-4) {
		t.Errorf("narrow: %.4f Hz, %.5f", f, z)
	}
	// Air leaves fn x zeta alone, a narrowing does not: 3.0086 Hz both times.
	if p := fn * zeta; !near(p, 3.0086, 2e-5) || !near(low*high, p, 1e-12) || !near(l.Product(), p, 1e-12) {
		t.Errorf("product %.5f, with air %.5f, %.5f", p, low*high, l.Product())
	}
	// Back again: the air that explains the lower frequency.
	before, err := l.Compliance(fn)
	if err != nil {
		t.Fatal(err)
	}
	after, err := l.Compliance(low)
	if err != nil {
		t.Fatal(err)
	}
	isothermal, adiabat := Air(after-before, 101325)
	if !near(isothermal, volume, 1e-9) || !near(adiabat, 1.4*volume, 1e-9) {
		t.Errorf("air %.4g to %.4g m3, was %.4g", isothermal, adiabat, volume)
	}
	// Adiabatic, the same bubble gives a frequency higher by sqrt 1.4, when
	// it is nearly all of the compliance.
	f1, _ := l.Frequency(bubble)
	f2, _ := l.Frequency(bubble / 1.4)
	if !near(f2/f1, math.Sqrt(1.4), 1e-12) {
		t.Errorf("adiabatic %.4f times higher", f2/f1)
	}
}

// The formulas are those of resistance, inertance and compliance: fn =
// 1/(2 pi sqrt(I C)), zeta = R/2 sqrt(C/I). Compliance turns Frequency round.
func TestFormulasAreOne(t *testing.T) {
	for _, l := range []Line{webster(), {0.05, 3e-3, 998.2, 1.002e-3}, {1.5, 1.2e-3, 1005, 0.9e-3}} {
		for _, c := range []float64{1e-15, 3e-14, 2e-12} {
			fn, zeta := l.Frequency(c)
			i, r := l.Inertance(), l.Resistance()
			if !near(fn, 1/(2*math.Pi*math.Sqrt(i*c)), 1e-12) || !near(zeta, r/2*math.Sqrt(c/i), 1e-12) {
				t.Errorf("%+v: %g Hz, %g", l, fn, zeta)
			}
			if back, err := l.Compliance(fn); err != nil || !near(back, c, 1e-12) {
				t.Errorf("%+v: compliance %g of %g, %v", l, back, c, err)
			}
		}
	}
	for _, bad := range []Line{{}, {1, 1, 1, 0}, {1, math.NaN(), 1, 1}, {math.Inf(1), 1, 1, 1}} {
		if _, err := bad.Compliance(10); err == nil {
			t.Errorf("%+v was taken", bad)
		}
	}
	if _, err := webster().Compliance(0); err == nil {
		t.Error("a frequency of nothing was taken")
	}
}

// Oscillating flow against Bessel functions of scipy, and its two ends: three
// quarters of steady flow for slow swings, fn/(sqrt 2 a - 1) and so on for fast
// ones.
func TestOscillating(t *testing.T) {
	l := webster()
	if p := l.Oscillating(1e-4); !near(p, 0.75*l.Product(), 1e-6) {
		t.Errorf("slow: %.6f of steady", p/l.Product())
	}
	wide := Line{Length: 1, Bore: 0.02, Density: 1000, Viscosity: 1e-3}
	a := 0.01 * math.Sqrt(2*math.Pi*100*1e6)
	if p := wide.Oscillating(100); !near(p, 100/(math.Sqrt2*a), 0.01) {
		t.Errorf("fast: %g, want %g", p, 100/(math.Sqrt2*a))
	}
	var script = `
import json, numpy as np
from scipy.special import jv
out = []
for r, eta, f in ((.46e-3, 1e-3, 2), (.46e-3, 1e-3, 90), (.8e-3, 1.02e-3, 25), (1.5e-3, 1e-3, 40), (5e-3, .9e-3, 200)):
    w = 2*np.pi*f; k = np.exp(.75j*np.pi)*r*np.sqrt(w*1000/eta)
    z = 1j/(1-2*jv(1, k)/(k*jv(0, k)))
    out.append([r, eta, f, w*z.real/z.imag/2/(2*np.pi)])
print(json.dumps(out))`
	for _, name := range []string{"python3", "/usr/bin/python3"} {
		if exec.Command(name, "-c", "import scipy").Run() != nil {
			continue
		}
		out, err := exec.Command(name, "-c", script).Output()
		if err != nil {
			t.Fatal(err)
		}
		var rows [][]float64
		if err := json.Unmarshal(out, &rows); err != nil || len(rows) != 5 {
			t.Fatal(rows, err)
		}
		for _, r := range rows {
			if p := (Line{1, 2 * r[0], 1000, r[1]}).Oscillating(r[2]); !near(p, r[3], 1e-10) {
				t.Errorf("%v: %.12g", r, p)
			}
		}
		return
	}
	if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
		t.Fatal("no python3 with scipy")
	}
	t.Skip("no python3 with scipy")
}

func TestJudge(t *testing.T) {
	for _, c := range []struct {
		steady, oscillating Interval
		want                Finding
	}{
		{Interval{0.9, 1.1}, Interval{0.4, 0.5}, AsStated}, // steady flow fits
		{Interval{2.4, 2.8}, Interval{1, 1.2}, AsStated},   // oscillating flow fits
		{Interval{5, 6}, Interval{2.1, 2.6}, More},
		{Interval{4, 6}, Interval{1.8, 2.6}, Undetermined}, // cannot be told from twice
		{Interval{0.5, 0.7}, Interval{0.2, 0.3}, Less},
		{Interval{0.6, 0.9}, Interval{0.2, 0.4}, Undetermined},
		{Interval{0.1, 9}, Interval{0.1, 9}, Undetermined},
		{Interval{math.NaN(), math.NaN()}, Interval{1, 1}, Undetermined},
	} {
		if got := Judge(c.steady, c.oscillating); got != c.want {
			t.Errorf("%+v: %v", c, got)
		}
	}
	for _, c := range []struct {
		ratio Interval
		want  Finding
	}{{Interval{0.95, 1.05}, AsStated}, {Interval{1.01, 1.2}, More}, {Interval{0.3, 0.9}, Less}, {Interval{0.6, 1.4}, Undetermined}, {Interval{math.NaN(), 2}, Undetermined}} {
		if got := JudgeChange(c.ratio, 0.15); got != c.want {
			t.Errorf("%+v: %v", c, got)
		}
	}
	if f, ok := FluidNamed("Water, degassed"); !ok || f.Density != 998.2 {
		t.Errorf("%+v %v", f, ok)
	}
	if f, ok := FluidNamed("saline 0.9 %"); !ok || f.Name != "saline" {
		t.Errorf("%+v %v", f, ok)
	}
	if _, ok := FluidNamed("oil"); ok {
		t.Error("oil is known")
	}
}
