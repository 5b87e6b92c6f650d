package fit

import (
	"errors"
	"math"
	"slices"
	"testing"
)

// reading is one row of a small case.
type reading struct {
	cycle     int
	leg       string
	set, p, y float64
}

func dataOf(rows []reading, stated bool) Data {
	var d Data
	for _, r := range rows {
		d.Cycle, d.Down = append(d.Cycle, r.cycle), append(d.Down, r.leg == "down")
		d.Reference, d.UUT = append(d.Reference, r.p), append(d.UUT, r.y)
		if stated {
			d.Set = append(d.Set, r.set)
		}
	}
	return d
}

func codes(f Figures) []string {
	var out []string
	for _, r := range f.Reservations {
		out = append(out, r.Code)
	}
	return out
}

// same compares pointers to what was worked out by hand; NaN stands for nil.
func same(t *testing.T, name string, got *float64, want float64) {
	t.Helper()
	if (got == nil) != math.IsNaN(want) || got != nil && math.Abs(*got-want) > 1e-12*(1+math.Abs(want)) {
		if got != nil {
			t.Errorf("%s: %v, want %v", name, *got, want)
			return
		}
		t.Errorf("%s: nil, want %v", name, want)
	}
}

func value(l *Located) *float64 {
	if l == nil {
		return nil
	}
	return &l.Value
}

// The expected figures were worked out by hand. Rows of nil have no line.
func TestEdges(t *testing.T) {
	none := math.NaN()
	for name, c := range map[string]struct {
		rows                             []reading
		stated                           bool
		slope, zero, hysteresis, at, top float64 // top: largest error
		back                             []float64
		codes                            []string
	}{
		"one reading": {[]reading{{1, "up", 0, 2, 5}}, true,
			none, 3, none, none, 3, []float64{none}, []string{"one_cycle", "one_leg", "points_not_grouped"}},
		// Read twice before the down leg: the zero offset is their mean.
		"all at one pressure": {[]reading{{1, "up", 0, .1, 1}, {1, "up", 0, .1, 2}, {1, "down", 0, .1, 3}}, true,
			none, 1.4, none, none, 2.9, []float64{none}, []string{"one_cycle", "points_not_grouped"}},
		"one leg": {[]reading{{1, "up", 0, 0, 1}, {1, "up", 100, 100, 102}, {1, "up", 200, 200, 203}}, true,
			1.01, 1, none, none, 3, []float64{none}, []string{"one_cycle", "one_leg"}},
		"top shared, ranked": {[]reading{{1, "up", 0, 0, 0}, {1, "up", 0, 100, 100}, {1, "up", 0, 200, 200}, {1, "down", 0, 100, 100}, {1, "down", 0, 0, 0}}, false,
			1, 0, 0, 0, 0, []float64{0}, []string{"one_cycle"}},
		"bottom missing, ranked": {[]reading{{1, "up", 0, 0, 0}, {1, "up", 0, 100, 100}, {1, "up", 0, 200, 200}, {1, "down", 0, 200, 200}, {1, "down", 0, 100, 100}}, false,
			1, 0, none, none, 0, []float64{none}, []string{"one_cycle", "points_not_grouped"}},
		"middle missing, ranked": {[]reading{{1, "up", 0, 0, 0}, {1, "up", 0, 100, 100}, {1, "up", 0, 200, 200}, {1, "down", 0, 200, 200}, {1, "down", 0, 0, 0}}, false,
			1, 0, none, none, 0, []float64{none}, []string{"one_cycle", "points_not_grouped"}},
		"two missing, ranked": {[]reading{{1, "up", 0, 0, 0}, {1, "up", 0, 100, 100}, {1, "up", 0, 200, 200}, {1, "down", 0, 0, 0}}, false,
			1, 0, none, none, 0, []float64{none}, []string{"one_cycle", "points_not_grouped"}},
		"legs without a pair": {[]reading{{1, "up", 0, 0, 0}, {1, "up", 100, 100, 100}, {1, "down", 50, 50, 50}}, true,
			1, 0, none, none, 0, []float64{none}, []string{"one_cycle", "points_not_grouped"}},
		"cycles without a pair": {[]reading{{1, "up", 0, 0, 0}, {1, "down", 0, 0, 0}, {2, "up", 100, 100, 100}, {2, "down", 100, 100, 100}}, true,
			1, 0, 0, 0, 0, []float64{0, none}, []string{"points_not_grouped"}},
		// The cell (up, 100) averages 99 and 101: its hysteresis is 2, not 1 or 3.
		"several in a cell": {[]reading{{1, "up", 0, 0, 0}, {1, "up", 100, 100, 99}, {1, "up", 100, 100, 101}, {1, "down", 100, 100, 102}, {1, "down", 0, 0, 0}}, true,
			1.00666666666666667, 0, 2, 100, 2, []float64{0}, []string{"one_cycle"}},
		// Not monotonic, rows mixed, no zero: nearest zero is 20. Reading first
		// at 20: up of cycle 1, though it stands last.
		"no zero, mixed rows": {[]reading{{2, "up", 20, 20, 21}, {1, "down", 20, 20, 24}, {1, "down", 80, 80, 82}, {1, "up", 80, 80, 82}, {1, "up", 20, 20, 22}}, true,
			179.0 / 180, 2, 2, 20, 4, []float64{2, none}, nil},
		// +5 and -5 are as near to zero: the one read first counts.
		"two as near zero": {[]reading{{1, "up", -5, -5, -4}, {1, "up", 5, 5, 7}, {1, "down", 5, 5, 7}}, true,
			1.1, 1, 0, 5, 2, []float64{none}, []string{"one_cycle"}},
		// A lowest set pressure below zero is not the zero.
		"vacuum": {[]reading{{1, "up", -100, -100, -97}, {1, "up", 0, 0, 2}, {1, "up", 100, 100, 102}}, true,
			0.995, 2, none, none, 3, []float64{none}, []string{"one_cycle", "one_leg"}},
		// y = 2 p throughout: the second zero at p = 1 is a return to the line.
		"zero off its set pressure": {[]reading{{1, "up", 0, 0, 0}, {1, "up", 100, 100, 200}, {1, "down", 100, 101, 202}, {1, "down", 0, 1, 2}}, true,
			2, 0, 0, 0, 101, []float64{0}, []string{"one_cycle"}},
		// 100 up in one cycle and down in the next are no pair.
		"pair across cycles": {[]reading{{1, "up", 0, 0, 0}, {1, "up", 100, 100, 100}, {2, "down", 100, 100, 100}, {2, "down", 200, 200, 200}}, true,
			1, 0, none, none, 0, []float64{none, none}, []string{"points_not_grouped"}},
	} {
		f, err := Static(dataOf(c.rows, c.stated))
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		var slope, at *float64
		if f.Line != nil {
			slope = &f.Line.Slope
		}
		if f.Hysteresis != nil {
			at = &f.Hysteresis.At
		}
		same(t, name+": slope", slope, c.slope)
		same(t, name+": zero offset", f.ZeroOffset, c.zero)
		same(t, name+": hysteresis", value(f.Hysteresis), c.hysteresis)
		same(t, name+": hysteresis at", at, c.at)
		same(t, name+": largest error", value(f.LargestError), c.top)
		if len(f.ZeroReturn) != len(c.back) {
			t.Errorf("%s: %d zero returns, want %d", name, len(f.ZeroReturn), len(c.back))
			continue
		}
		for k := range c.back {
			same(t, name+": zero return", f.ZeroReturn[k], c.back[k])
		}
		if got := codes(f); !slices.Equal(got, c.codes) {
			t.Errorf("%s: reserved %q, want %q", name, got, c.codes)
		}
	}
}

// Ranks without set pressures: the mean p of a rank is its set pressure, the
// top that one leg lacks is the other leg's own.
func TestRanks(t *testing.T) {
	d := dataOf([]reading{{1, "up", 0, 200, 200}, {1, "up", 0, 0, 0}, {1, "up", 0, 100, 100}, {1, "down", 0, 103, 104}, {1, "down", 0, 2, 1}}, false)
	f, err := Static(d)
	if want := []float64{200, 1, 101.5, 101.5, 1}; err != nil || !slices.Equal(f.Sets, want) {
		t.Fatalf("sets %v, %v; want %v", f.Sets, err, want)
	}
	if f.Hysteresis == nil || f.Hysteresis.At != 101.5 && f.Hysteresis.At != 1 {
		t.Errorf("hysteresis %+v", f.Hysteresis)
	}
}

func TestStaticRefuses(t *testing.T) {
	good := func() Data { return worked() }
	for name, spoil := range map[string]func(*Data){
		"empty":           func(d *Data) { *d = Data{} },
		"uut short":       func(d *Data) { d.UUT = d.UUT[1:] },
		"cycle short":     func(d *Data) { d.Cycle = d.Cycle[1:] },
		"leg short":       func(d *Data) { d.Down = d.Down[1:] },
		"set short":       func(d *Data) { d.Set = d.Set[1:] },
		"not a number":    func(d *Data) { d.UUT[3] = math.NaN() },
		"infinite":        func(d *Data) { d.Reference[3] = math.Inf(-1) },
		"set no number":   func(d *Data) { d.Set[0] = math.NaN() },
		"far too large":   func(d *Data) { d.UUT[3] = -1.1e150 },
		"set beyond hope": func(d *Data) { d.Set[3] = 1e300 },
	} {
		d := good()
		spoil(&d)
		if f, err := Static(d); !errors.Is(err, ErrData) || f.Line != nil || f.LargestError != nil {
			t.Errorf("%s: %+v, %v", name, f, err)
		}
	}
}

// Laws: a change of unit by a power of two changes no digit, out to sizes
// whose squares no double holds; cycles repeated exactly change no line, no
// linearity and no hysteresis, and scatter nothing.
func TestScaleAndRepetition(t *testing.T) {
	one := worked()
	a, err := Static(one)
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range []int{-480, -1, 1, 300, 480} {
		by := math.Ldexp(1, e)
		d := worked()
		for i := range d.UUT {
			d.Reference[i], d.UUT[i], d.Set[i] = d.Reference[i]*by, d.UUT[i]*by, d.Set[i]*by
		}
		b, err := Static(d)
		if err != nil || b.Line == nil {
			t.Fatalf("by 2^%d: %v", e, err)
		}
		want := *a.Line
		want.Intercept, want.UIntercept, want.Residual, want.Covariance = want.Intercept*by, want.UIntercept*by, want.Residual*by, want.Covariance*by
		if *b.Line != want || b.Linearity.Terminal.Value != a.Linearity.Terminal.Value*by || b.Hysteresis.Value != a.Hysteresis.Value*by {
			t.Errorf("by 2^%d: %+v, want %+v", e, *b.Line, want)
		}
	}
	const times = 5_000
	var many Data
	for k := range times {
		for i := range one.UUT {
			many.Reference, many.UUT, many.Set = append(many.Reference, one.Reference[i]), append(many.UUT, one.UUT[i]), append(many.Set, one.Set[i])
			many.Cycle, many.Down = append(many.Cycle, k+1), append(many.Down, one.Down[i])
		}
	}
	for _, stated := range []bool{true, false} {
		if !stated {
			many.Set = nil
		}
		b, err := Static(many)
		if err != nil {
			t.Fatal(err)
		}
		same(t, "intercept", &b.Line.Intercept, a.Line.Intercept)
		same(t, "slope", &b.Line.Slope, a.Line.Slope)
		same(t, "independent", &b.Linearity.Independent.Value, a.Linearity.Independent.Value)
		same(t, "least squares", &b.Linearity.LeastSquares.Value, a.Linearity.LeastSquares.Value)
		same(t, "hysteresis", value(b.Hysteresis), a.Hysteresis.Value)
		same(t, "range", b.Repeatability.LargestRange, 0)
		same(t, "pooled", b.Repeatability.PooledSD, 0)
		if *b.Repeatability.DoF != 14*(times-1) || b.Cycles != times || len(b.ZeroReturn) != times {
			t.Errorf("%d degrees of freedom, %d cycles", *b.Repeatability.DoF, b.Cycles)
		}
		same(t, "last zero return", b.ZeroReturn[times-1], *a.ZeroReturn[0])
	}
}

// 200,000 readings of one leg without set pressures are as many ranks.
func TestManyRanks(t *testing.T) {
	const n = 200_000
	d := Data{Cycle: make([]int, n), Down: make([]bool, n)}
	for i := range n {
		d.Reference, d.UUT = append(d.Reference, float64(i)), append(d.UUT, float64(i)+1)
	}
	f, err := Static(d)
	if err != nil {
		t.Fatal(err)
	}
	same(t, "slope", &f.Line.Slope, 1)
	same(t, "zero offset", f.ZeroOffset, 1)
}

// A pair of legs of which one was come to from the wrong side has no
// hysteresis; everything else is as it was. By hand: the line through what is
// symmetric about 50 is y = p, so h is what was put in.
func TestAstray(t *testing.T) {
	d := Data{
		Reference: []float64{0, 25, 50, 75, 100, 75, 50, 25, 0}, UUT: []float64{0, 25, 50, 75, 100, 75.4, 50.8, 25.4, 0},
		Cycle: []int{1, 1, 1, 1, 1, 1, 1, 1, 1}, Down: []bool{false, false, false, false, false, true, true, true, true},
		Set: []float64{0, 25, 50, 75, 100, 75, 50, 25, 0},
	}
	whole, err := Static(d)
	if err != nil {
		t.Fatal(err)
	}
	d.Astray = []bool{false, false, false, false, false, false, true, false, false}
	f, err := Static(d)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(whole.Hysteresis.Value-0.8) > 1e-12 || whole.Hysteresis.At != 50 || len(whole.EachHysteresis) != 4 {
		t.Errorf("all counted: %+v", whole.Hysteresis)
	}
	if math.Abs(f.Hysteresis.Value-0.4) > 1e-12 || len(f.EachHysteresis) != 3 || f.Points[2].Hysteresis != nil || f.Line.Slope != whole.Line.Slope {
		t.Errorf("50 left out: %+v of %d", f.Hysteresis, len(f.EachHysteresis))
	}
	d.Astray = d.Astray[1:]
	if _, err := Static(d); err == nil {
		t.Error("a mark short is taken")
	}
}
