package results

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"kymobench/bench/quantity"
	"kymobench/procedures/record"
)

// single is readings of a file: cycle, leg, set pressure, reference and UUT.
type single struct {
	cycle   int
	leg     string
	set     float64
	ref, ut float64
}

// twoCycles is worked by hand below: cycle 2 reads 0.1 and 0.3 mmHg more than
// cycle 1 at 100 mmHg, up and down.
func twoCycles() []single {
	return []single{
		{1, "up", 0, 0, 1}, {1, "up", 100, 100, 101.2}, {1, "up", 200, 200, 201}, {1, "down", 100, 100, 101.6}, {1, "down", 0, 0, 1.2},
		{2, "up", 0, 0, 1}, {2, "up", 100, 100, 101.3}, {2, "up", 200, 200, 201}, {2, "down", 100, 100, 101.9}, {2, "down", 0, 0, 1.2},
	}
}

// read makes the record of single readings, in a unit of pressure.
func read(t *testing.T, readings []single, unit string, zeroed bool) *made {
	t.Helper()
	m := &made{t: t}
	u, ok := quantity.UnitNamed(unit)
	if !ok {
		t.Fatal(unit)
	}
	in := func(mmHg float64) string { return fmt.Sprintf("%.12g", u.FromSI(float64(quantity.MmHg(mmHg)))) }
	m.add(record.KindReference, record.Reference{Field: quantity.Field{Unit: unit}, Resolution: "0.02 mmHg", Certificate: record.Certificate{
		CoverageFactor: 2, Uncertainty: "0.04 mmHg", UncertaintyOfReading: "0.06 %"}})
	m.add(record.KindUUT, record.UUT{Field: quantity.Field{Unit: unit}, Resolution: "0.1 mmHg", NominalSensitivity: "5 uV/V/mmHg", Excitation: "5 V"})
	m.add(record.KindReadout, record.Readout{CoverageFactor: 2, GainUncertainty: "0.05 %", ZeroUncertainty: "0.4 uV/V", ExcitationUncertainty: "0.08 %"})
	if zeroed {
		m.add(record.KindZeroing, record.Zeroing{Role: "reference", How: "device"})
	}
	for _, r := range readings {
		line := m.add(record.KindReading, record.Reading{Role: "reference", Text: in(r.ref)})
		m.add(record.KindPoint, record.Point{Purpose: "static", Cycle: r.cycle, Leg: r.leg, Set: in(r.set) + " " + unit, Readings: []int64{line}, UUT: in(r.ut)})
	}
	return m
}

func (r Results) budget(t *testing.T, figure string, set float64, leg string) Budget {
	t.Helper()
	for _, b := range r.Budgets {
		if b.Figure == figure && b.Leg == leg && (b.Set == nil || math.Abs(*b.Set-set) < 1e-9*math.Max(1, set)) {
			return b
		}
	}
	t.Fatalf("no budget of %s at %g %s", figure, set, leg)
	return Budget{}
}

// Every contribution of the down leg at 100 mmHg and of the legs' mean, worked
// by hand: U/k of the certificate (GUM 4.3.3), half and full widths over sqrt3
// and 2 sqrt3 (GUM 4.3.7), s/sqrt n of the mean of two cycles and s of the one
// zero, with the degrees of freedom of the pooled s.
func TestBudgetByHand(t *testing.T) {
	r := read(t, twoCycles(), "mmHg", true).compute()
	// Five cells of two readings each differ by 0, 0.1, 0, 0.3, 0: the sum of
	// squares about their means is (0.1^2 + 0.3^2)/2, with 5 degrees of freedom.
	s := math.Sqrt((0.01 + 0.09) / 2 / 5)
	// The return of zero is 0.2 in both cycles and the mean hysteresis 0.5 at 100
	// mmHg, less what the scatter alone makes of the larger of two and of a mean
	// of two: mean squares 1 + 2/pi and 1 times its variance.
	back := math.Sqrt(0.2*0.2 - 2*s*s*(1+2/math.Pi))
	wide := math.Sqrt(0.5*0.5 - s*s)
	want := map[string][2]float64{
		"reference, share of reading":    {0.0003, 100},
		"reference, at the set pressure": {0.02, 1}, // the reference was zeroed: nothing at 0
		"reference, resolution":          {0.02 / (2 * math.Sqrt(3)), math.Sqrt(1.5)},
		"readout, gain":                  {0.00025, 100.75},
		"readout, excitation":            {0.0004, 100.75},
		"UUT, resolution":                {0.1 / (2 * math.Sqrt(3)), math.Sqrt(1.5)},
		"noise of a reading, by cycles":  {s, math.Sqrt(1.5)},
		"return of zero":                 {back / (2 * math.Sqrt(3)), 1},
	}
	down := r.budget(t, FigureError, 100, "down")
	hold(t, down, 0.75, want)
	if *down.DoF < 5 || len(down.Lines) != len(want) || down.Readings != 2 {
		t.Errorf("%+v", down)
	}
	want["hysteresis"] = [2]float64{wide / (2 * math.Sqrt(3)), 1}
	for name, root := range map[string]float64{"reference, resolution": 1.25, "UUT, resolution": 1.25, "noise of a reading, by cycles": 1.25} {
		want[name] = [2]float64{want[name][0], math.Sqrt(root)} // four readings, and the zero
	}
	for _, name := range []string{"readout, gain", "readout, excitation"} {
		want[name] = [2]float64{want[name][0], 100.5}
	}
	hold(t, r.budget(t, FigureMeanError, 100, ""), 0.5, want)
	// Before zeroing nothing cancels; the first reading alone.
	zero := r.budget(t, FigureZeroOffset, 0, "")
	hold(t, zero, 1, map[string][2]float64{
		"reference, resolution": {0.02 / (2 * math.Sqrt(3)), 1}, "UUT, resolution": {0.1 / (2 * math.Sqrt(3)), 1}, "noise of a reading, by cycles": {s, 1},
		"readout, gain": {0.00025, 1}, "readout, excitation": {0.0004, 1}, "readout, zero": {0.2 / 5, 1},
	})
	// What is common to both legs cancels in the hysteresis.
	hysteresis := r.budget(t, FigureHysteresis, 100, "")
	for _, l := range hysteresis.Lines {
		if l.Contribution > 0.001 && l.Source == fromCertificate {
			t.Errorf("hysteresis has %s, %g", l.Name, l.Contribution)
		}
	}
	if math.Abs(*hysteresis.Standard-math.Sqrt(2*s*s+2*0.1*0.1/12+2*0.02*0.02/12)) > 1e-5 {
		t.Errorf("hysteresis %+v", hysteresis)
	}
	// A reference that was not zeroed has its error at zero too.
	other := read(t, twoCycles(), "mmHg", false).compute().budget(t, FigureError, 100, "down")
	for _, l := range other.Lines {
		if l.Name == "reference, at the set pressure" && math.Abs(l.Sensitivity-math.Sqrt2) > 1e-12 {
			t.Errorf("not zeroed: %+v", l)
		}
	}
}

func hold(t *testing.T, b Budget, value float64, want map[string][2]float64) {
	t.Helper()
	if math.Abs(*b.Value-value) > 0.002 { // the reduction to the set pressure changes nothing here
		t.Errorf("%s: %g, want %g", b.Figure, *b.Value, value)
	}
	var v float64
	for _, l := range b.Lines {
		w, ok := want[l.Name]
		if !ok {
			if l.Contribution > 1e-5 {
				t.Errorf("%s: unexpected %s, %g", b.Figure, l.Name, l.Contribution)
			}
			continue
		}
		if math.Abs(l.Standard-w[0]) > 2e-6 || math.Abs(math.Abs(l.Sensitivity)-w[1]) > 1e-9*math.Max(1, w[1]) ||
			math.Abs(l.Stated/l.Divisor-l.Standard) > 1e-12 {
			t.Errorf("%s, %s: %g x %g, want %g x %g", b.Figure, l.Name, l.Standard, l.Sensitivity, w[0], w[1])
		}
		v += w[0] * w[0] * w[1] * w[1]
	}
	if math.Abs(*b.Standard-math.Sqrt(v)) > 1e-5 {
		t.Errorf("%s: u %g, want %g", b.Figure, *b.Standard, math.Sqrt(v))
	}
	if u := *b.Expanded; math.Abs(b.Interval[1]-*b.Value-u) > 1e-12 || math.Abs(*b.Value-u-b.Interval[0]) > 1e-12 || u < 1.6**b.Standard {
		t.Errorf("%s: interval %v about %g, U %g", b.Figure, b.Interval, *b.Value, u)
	}
}

// The same readings in another unit give the same budgets in that unit; in
// another order of rows the same altogether; with a line added to the UUT's
// output hysteresis, linearity and return of zero keep their uncertainty, but
// for what the gain does to the line.
func TestBudgetLaws(t *testing.T) {
	readings := twoCycles()
	first := read(t, readings, "mmHg", true).compute()
	other := read(t, readings, "kPa", true).compute()
	k := 133.322387415e-3
	same := func(what string, a, b Results, factor, tolerance float64) {
		t.Helper()
		if len(a.Budgets) != len(b.Budgets) {
			t.Fatalf("%s: %d and %d budgets", what, len(a.Budgets), len(b.Budgets))
		}
		for i, x := range a.Budgets {
			y := b.Budgets[i]
			f := factor
			if x.Unit != "mmHg" {
				f = 1
			}
			if (x.Expanded == nil) != (y.Expanded == nil) || x.Expanded != nil && math.Abs(*x.Expanded*f-*y.Expanded) > tolerance*math.Max(*y.Expanded, 1e-3) {
				t.Errorf("%s: %s %v: %v, %v", what, x.Figure, x.Set, *x.Expanded*f, *y.Expanded)
			}
		}
	}
	same("in kPa", first, other, k, 1e-6)
	mixed := append([]single{}, readings...)
	for i := range mixed {
		j := (i * 7) % len(mixed)
		mixed[i], mixed[j] = mixed[j], mixed[i]
	}
	same("reordered", first, read(t, mixed, "mmHg", true).compute(), 1, 1e-9)
	lined := append([]single{}, readings...)
	for i := range lined {
		lined[i].ut += 5 + 0.01*lined[i].ref
	}
	third := read(t, lined, "mmHg", true).compute()
	for _, x := range first.Budgets {
		if !strings.HasPrefix(x.Figure, "linearity") && x.Figure != FigureHysteresis && x.Figure != FigureZeroReturn {
			continue
		}
		for _, y := range third.Budgets {
			if y.Figure == x.Figure && y.Cycle == x.Cycle && math.Abs(*x.Standard-*y.Standard) > 2e-3**x.Standard {
				t.Errorf("a line added: %s u %g, was %g", x.Figure, *y.Standard, *x.Standard)
			}
		}
	}
}

// One cycle of single readings shows the noise only about curves; three set
// pressures show none, and no interval is made up. A stated repeatability is
// taken. What nobody stated is told.
func TestNoiseThatNothingShows(t *testing.T) {
	short := []single{{1, "up", 0, 0, 1}, {1, "up", 100, 100, 101}, {1, "up", 200, 200, 201.1}}
	m := read(t, short, "mmHg", true)
	r := m.compute()
	b := r.budget(t, FigureError, 100, "up")
	if b.Expanded != nil || b.Interval != nil || !strings.Contains(b.Reason, "noise of a single reading") {
		t.Errorf("%+v", b)
	}
	m.events[1] = event(t, 2, record.KindUUT, record.UUT{Field: quantity.Field{Unit: "mmHg"}, Repeatability: "0.2 mmHg"})
	m.events[2] = event(t, 3, record.KindReadout, record.Readout{})
	r = m.compute()
	b = r.budget(t, FigureError, 100, "up")
	if b.Expanded == nil || *b.Standard < 0.2*math.Sqrt2 || *b.Standard > 0.3 {
		t.Errorf("%+v", b)
	}
	codes := ""
	for _, n := range r.NotStated {
		codes += n.Code + " "
	}
	if codes != "reference_corrections reference_drift reference_temperature uut_resolution head timing " {
		t.Errorf("not stated: %s", codes)
	}
}

func event(t *testing.T, n int64, kind string, payload any) record.Event {
	t.Helper()
	e, err := record.NewEvent(n, 0, kind, payload)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// A hysteresis that outweighs everything is a rectangle: U is by Monte Carlo,
// 0.95 of the half-width within what the draws leave, and the seed draws it again.
func TestMonteCarloWhereTheShortcutIsOff(t *testing.T) {
	readings := twoCycles()
	for i := range readings {
		readings[i].cycle = 1 + i/5
		if readings[i].leg == "down" && readings[i].set == 100 {
			readings[i].ut += 20
		}
	}
	r := read(t, readings, "mmHg", true).compute()
	b := r.budget(t, FigureMeanError, 100, "")
	half := (20 + 0.5) / 2
	if b.Sampled == nil || b.Sampled.Draws < 10_000 || *b.Expanded < 0.945*half || *b.Expanded > 0.99*half || b.Sampled.Shortcut < 1.05**b.Expanded {
		t.Errorf("%+v, %+v", b, b.Sampled)
	}
	again := read(t, readings, "mmHg", true).compute().budget(t, FigureMeanError, 100, "")
	if *again.Expanded != *b.Expanded || again.Sampled.Seed != b.Sampled.Seed {
		t.Errorf("drawn again: %+v", again.Sampled)
	}
}
