package fit

import (
	"math"
	"testing"
)

// Source: testdata/sources/four-linearities, readings and values.
func TestFourLinearities(t *testing.T) {
	var d Data
	for _, row := range rowsOf(t, sources+"four-linearities/four_linearities.csv") {
		d.Cycle, d.Down = append(d.Cycle, int(number(t, row[0]))), append(d.Down, row[1] == "down")
		d.Set, d.Reference, d.UUT = append(d.Set, number(t, row[2])), append(d.Reference, number(t, row[3])), append(d.UUT, number(t, row[4]))
	}
	f, err := Static(d)
	if err != nil {
		t.Fatal(err)
	}
	lines := map[string]*Deviation{"independent": f.Linearity.Independent, "terminal": f.Linearity.Terminal, "zero-based": f.Linearity.ZeroBased, "least squares": f.Linearity.LeastSquares}
	rows := rowsOf(t, sources+"four-linearities/four_linearities_values.csv")
	for _, row := range rows {
		l := lines[row[0]]
		compare(t, []figure{
			{row[0] + ", intercept", l.Intercept, number(t, row[1]), 1e-12}, {row[0] + ", slope", l.Slope, number(t, row[2]), 1e-13},
			{row[0], l.Value, number(t, row[3]), 1e-12},
		})
	}
	if len(rows) != 4 {
		t.Errorf("%d lines", len(rows))
	}
}

// What noise leaves in the linearities of the worked table, by hand, for an
// uncertainty of 1 of each average. Independent: 150 against the middle of 0
// and 300; terminal-based: 150 against the chord; zero-based: 150 and 300
// against a line from 0, weights 2/3, -1/3, -1/3; least squares: 1 less the
// leverage 1/7 + 150^2/70000 of 300.
func TestNoiseOfLines(t *testing.T) {
	x := []float64{0, 50, 100, 150, 200, 250, 300}
	y := []float64{0.3, 50.4, 100.7, 150.6, 200.25, 249.6, 298.6}
	l := Lines(x, y, []float64{1, 1, 1, 1, 1, 1, 1})
	compare(t, []figure{
		{"independent", l.Independent.Value, 0.575, 1e-12}, {"its intercept", l.Independent.Intercept, 0.875, 1e-12},
		{"its slope", l.Independent.Slope, 2983. / 3000, 1e-14}, {"its u", l.Independent.Standard, math.Sqrt(0.375), 1e-14},
		{"terminal", l.Terminal.Value, 1.15, 1e-12}, {"its intercept", l.Terminal.Intercept, 0.3, 1e-14},
		{"its slope", l.Terminal.Slope, 2983. / 3000, 1e-14}, {"its u", l.Terminal.Standard, math.Sqrt(1.5), 1e-14},
		{"zero-based", l.ZeroBased.Value, 23. / 30, 1e-12}, {"its intercept", l.ZeroBased.Intercept, 0.3, 1e-14},
		{"its slope", l.ZeroBased.Slope, 2243. / 2250, 1e-14}, {"its u", l.ZeroBased.Standard, math.Sqrt(6. / 9), 1e-14},
		{"least squares", l.LeastSquares.Value, 0.6982142857142857, 1e-12}, {"its intercept", l.LeastSquares.Intercept, 0.8303571428571429, 1e-12},
		{"its slope", l.LeastSquares.Slope, 0.9948928571428571, 1e-14}, {"its u", l.LeastSquares.Standard, math.Sqrt(6./7 - 22500./70000), 1e-13},
	})
	// Without noise stated there is none; in any order; twice at one x.
	m := Lines([]float64{300, 0, 150, 50, 100, 200, 250, 150}, []float64{298.6, 0.3, 150.5, 50.4, 100.7, 200.25, 249.6, 150.7}, nil)
	compare(t, []figure{{"mixed, twice", m.Independent.Value, 0.575, 1e-12}, {"terminal", m.Terminal.Value, 1.15, 1e-12}})
	if !math.IsNaN(m.Independent.Standard) {
		t.Errorf("noise %v of nothing", m.Independent.Standard)
	}
	for name, l := range map[string]Linearities{
		"one x":      Lines([]float64{5, 5, 5}, []float64{1, 2, 3}, nil),
		"nothing":    Lines(nil, nil, nil),
		"unequal":    Lines(x, y[1:], nil),
		"no number":  Lines(x, []float64{0, 1, 2, 3, 4, math.NaN(), 6}, nil),
		"too large":  Lines(x, []float64{0, 1, 2, 3, 4, 1e160, 6}, nil),
		"noise lost": Lines(x, y, []float64{1}),
	} {
		if l != (Linearities{}) {
			t.Errorf("%s: %+v", name, l)
		}
	}
}

// By hand, p at the set pressures: up 100.0 and 100.2, down 100.7 average to
// 100.4, as the legs count alike however often each was read.
func TestLegsCountAlike(t *testing.T) {
	rows := []reading{
		{1, "up", 0, 0, 0}, {1, "up", 100, 100, 100}, {1, "up", 200, 200, 200}, {1, "down", 100, 100, 100.7}, {1, "down", 0, 0, 0},
		{2, "up", 0, 0, 0}, {2, "up", 100, 100, 100.2}, {2, "up", 200, 200, 200},
	}
	f, err := Static(dataOf(rows, true))
	if err != nil {
		t.Fatal(err)
	}
	same(t, "average", f.Points[1].Average, 100.4)
	same(t, "independent", &f.Linearity.Independent.Value, 0.2)
	same(t, "range up", f.Points[1].RangeUp, 0.2)
	same(t, "range down", f.Points[1].RangeDown, math.NaN())
	// Pooled: cells (0 up), (100 up), (200 up) of two cycles, 3 degrees of freedom.
	same(t, "pooled", f.Repeatability.PooledSD, math.Sqrt(0.02/3))
	// u of the average is s/2 sqrt(1/2 + 1), of the ends s/sqrt(3) each way read
	// three times at zero (two up, one down) and s/sqrt(2) at 200.
	s := math.Sqrt(0.02 / 3)
	u0, u1, u2 := s/2*math.Sqrt(1.5), s/2*math.Sqrt(1.5), s/math.Sqrt2
	same(t, "u of the independent", &f.Linearity.Independent.Standard, math.Sqrt(u1*u1/4+(u0*u0+u2*u2)/16))
	// Without the down leg at 100 there is no average of the legs there.
	f, err = Static(dataOf(append(rows[:3:3], rows[4:]...), true))
	if err != nil {
		t.Fatal(err)
	}
	if f.Linearity != (Linearities{}) || f.Points[1].Average != nil || f.Points[0].Average == nil {
		t.Errorf("linearity %+v without a leg at 100", f.Linearity)
	}
	if got := codes(f); len(got) != 1 || got[0] != "points_missing" {
		t.Errorf("reserved %q", got)
	}
}

// By hand: cycles 1 and 2 of one mounting, 3 of another, each less its own
// zero. At 100 up: 100.0, 100.1 and 100.3; down: 100.0, 100.1 and 100.1.
func TestMountedAgain(t *testing.T) {
	d := dataOf([]reading{
		{1, "up", 0, 0, 0.1}, {1, "up", 100, 100, 100.1}, {1, "up", 200, 200, 200.1}, {1, "down", 100, 100, 100.1}, {1, "down", 0, 0, 0.1},
		{2, "up", 0, 0, 0.1}, {2, "up", 100, 100, 100.2}, {2, "down", 100, 100, 100.2}, {2, "down", 0, 0, 0.1},
		{3, "up", 0, 0, 0.6}, {3, "up", 100, 100, 100.9}, {3, "up", 200, 200, 200.6}, {3, "down", 100, 100, 100.7}, {3, "down", 0, 0, 0.6},
	}, true)
	d.Mounting = []int{1, 1, 1, 1, 1, 1, 1, 1, 1, 2, 2, 2, 2, 2}
	f, err := Static(d)
	if err != nil {
		t.Fatal(err)
	}
	same(t, "reproducibility", f.Reproducibility, 0.3)
	same(t, "there", f.Points[1].Reproducibility, 0.3)
	same(t, "at zero", f.Points[0].Reproducibility, 0)
	same(t, "repeatability", f.Points[1].Repeatability, 0.1)
	same(t, "largest range", f.Repeatability.LargestRange, 0.1)
	// Cells read twice in one mounting: 0 up, 0 down, 100 up, 100 down.
	if *f.Repeatability.DoF != 4 || len(f.Undetermined) != 0 {
		t.Errorf("%d degrees of freedom, undetermined %v", *f.Repeatability.DoF, f.Undetermined)
	}
	d.Mounting[3] = 2
	if _, err := Static(d); err == nil {
		t.Error("a cycle in two mountings was taken")
	}
}

// The errors after the one zeroing, and as read, by hand. The zeroing may have
// been read apart from the cycles.
func TestErrorsAfterZero(t *testing.T) {
	d := dataOf([]reading{{1, "up", 0, 0, 2}, {1, "up", 100, 100, 103}, {1, "up", 200, 200, 201.5}, {1, "down", 100, 100, 103.5}, {1, "down", 0, 0, 2.1}}, true)
	zero := 2.2
	for _, c := range []struct {
		zero          *float64
		high, low, at float64
	}{{nil, 1.5, -0.5, 1.5}, {&zero, 1.3, -0.7, 1.3}} {
		d.Zero = c.zero
		f, err := Static(d)
		if err != nil {
			t.Fatal(err)
		}
		same(t, "zero offset", f.ZeroOffset, 2)
		same(t, "highest", &f.AfterZero.Highest.Value, c.high)
		same(t, "lowest", &f.AfterZero.Lowest.Value, c.low)
		same(t, "largest", &f.ErrorAfterZero.Value, c.at)
		same(t, "highest as read", &f.AsRead.Highest.Value, 3.5)
		same(t, "lowest as read", &f.AsRead.Lowest.Value, 1.5)
		if h := f.AfterZero.Highest; h.At != 100 || !h.Down || f.AfterZero.Lowest.At != 200 {
			t.Errorf("highest at %+v", h)
		}
	}
	for _, bad := range []float64{math.NaN(), math.Inf(1)} {
		d.Zero = &bad
		if _, err := Static(d); err == nil {
			t.Errorf("zeroing at %v was taken", bad)
		}
	}
}

// A leg without its top is matched by rank; one whose highest reading lies
// between the two highest of the other leg is not.
func TestTopOrNot(t *testing.T) {
	for highest, grouped := range map[float64]bool{100: true, 130: true, 140: false, 150: false, 170: false, 200: false} {
		f, err := Static(dataOf([]reading{{1, "up", 0, 0, 0}, {1, "up", 0, 100, 100}, {1, "up", 0, 200, 200}, {1, "down", 0, highest, highest}, {1, "down", 0, 0, 0}}, false))
		if err != nil {
			t.Fatal(err)
		}
		if !math.IsNaN(f.Sets[0]) != grouped {
			t.Errorf("down from %v: sets %v", highest, f.Sets)
		}
	}
}

// Curvature by hand: y = 1 + p + p^2/1000 at four pressures, read twice.
func TestCurvatureByHand(t *testing.T) {
	var rows []reading
	for _, leg := range []string{"up", "down"} {
		for _, p := range []float64{0, 100, 200, 300} {
			rows = append(rows, reading{1, leg, p, p, 1 + p + p*p/1000})
		}
	}
	f, err := Static(dataOf(rows, true))
	if err != nil {
		t.Fatal(err)
	}
	for k, want := range []float64{1, 1, 1e-3, 0} {
		if got := f.Curvature.Coefficients[k]; math.Abs(got-want) > 1e-12*math.Pow(300, float64(1-k)) {
			t.Errorf("power %d: %v, want %v", k, got, want)
		}
	}
	if f.Curvature.DoF != 4 || f.Curvature.Residual > 1e-12 {
		t.Errorf("residual %v, %d degrees of freedom", f.Curvature.Residual, f.Curvature.DoF)
	}
	// Three set pressures carry the second order, two none.
	three, err := Static(dataOf(append(rows[:3:3], rows[4:7]...), true))
	if err != nil || len(three.Curvature.Coefficients) != 3 {
		t.Errorf("three set pressures: %+v, %v", three.Curvature, err)
	}
	two, err := Static(dataOf(append(rows[:2:2], rows[4:6]...), true))
	if err != nil || two.Curvature != nil {
		t.Errorf("two set pressures: %+v, %v", two.Curvature, err)
	}
}
