package fit

import (
	"encoding/csv"
	"errors"
	"math"
	"os"
	"strconv"
	"testing"
)

// Source: testdata/sources/nist-strd-linear, certified values of NIST.
func TestNorris(t *testing.T) {
	file, err := os.Open("../../testdata/sources/nist-strd-linear/norris.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var d Data
	for _, row := range rows[1:] {
		y, err1 := strconv.ParseFloat(row[0], 64)
		x, err2 := strconv.ParseFloat(row[1], 64)
		if err1 != nil || err2 != nil {
			t.Fatal(row)
		}
		d.Reference, d.UUT, d.Cycle, d.Down = append(d.Reference, x), append(d.UUT, y), append(d.Cycle, 1), append(d.Down, false)
	}
	if len(d.Reference) != 36 {
		t.Fatalf("%d readings", len(d.Reference))
	}
	f, err := Static(d)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"intercept", f.Line.Intercept, -0.262323073774029}, {"its sd", f.Line.UIntercept, 0.232818234301152},
		{"slope", f.Line.Slope, 1.00211681802045}, {"its sd", f.Line.USlope, 0.429796848199937e-3},
		{"residual sd", f.Line.Residual, 0.884796396144373},
	} {
		digits := -math.Log10(math.Abs(c.got-c.want) / math.Abs(c.want))
		t.Logf("%s: %.1f certified digits", c.name, digits)
		if digits < 12 {
			t.Errorf("%s: %.15g, certified %.15g", c.name, c.got, c.want)
		}
	}
}

// worked is testdata/sources/four-linearities; its values are held to in
// TestNoiseOfLines.
func worked() Data {
	var d Data
	for i, leg := range [][]float64{{0.2, 50.1, 100.3, 150.2, 199.9, 249.4, 298.6}, {0.4, 50.7, 101.1, 151.0, 200.6, 249.8, 298.6}} {
		for k, y := range leg {
			x := float64(50 * k)
			d.Reference, d.UUT, d.Set = append(d.Reference, x), append(d.UUT, y), append(d.Set, x)
			d.Cycle, d.Down = append(d.Cycle, 1), append(d.Down, i == 1)
		}
	}
	return d
}

func TestWorkedLinearities(t *testing.T) {
	for _, set := range []bool{true, false} {
		d := worked()
		if !set {
			d.Set = nil
		}
		f, err := Static(d)
		if err != nil {
			t.Fatal(err)
		}
		for _, c := range []struct {
			name      string
			got       *float64
			want, tol float64
		}{
			{"terminal", &f.Linearity.Terminal.Value, 1.15, 1e-12}, {"least squares", &f.Linearity.LeastSquares.Value, 0.6982142857142857, 1e-12},
			{"independent", &f.Linearity.Independent.Value, 0.575, 1e-12}, {"zero-based", &f.Linearity.ZeroBased.Value, 23.0 / 30, 1e-12},
			{"hysteresis", &f.Hysteresis.Value, 0.8, 1e-12}, {"zero offset", f.ZeroOffset, 0.2, 1e-12},
			{"zero return", f.ZeroReturn[0], 0.2, 1e-12}, {"largest error", &f.LargestError.Value, -1.4, 1e-12},
			{"after zero", &f.ErrorAfterZero.Value, -1.6, 1e-12},
		} {
			if c.got == nil || math.Abs(*c.got-c.want) > c.tol {
				t.Errorf("set %v, %s: %v, want %v", set, c.name, *c.got, c.want)
			}
		}
		if f.Repeatability.PooledSD != nil || len(f.Reservations) != 1 || f.Reservations[0].Code != "one_cycle" {
			t.Errorf("one cycle: %+v, %v", f.Repeatability, f.Reservations)
		}
	}
}

// Repeatability by hand: two cycles of one point, residuals apart by 0.3 up
// and 0.1 down, none at zero: largest range 0.3, pooled SD sqrt((0.045+0.005+0)/3).
func TestRepeatability(t *testing.T) {
	d := Data{
		Reference: []float64{0, 100, 100, 0, 100, 100}, UUT: []float64{0, 100, 100, 0, 100.3, 100.1},
		Cycle: []int{1, 1, 1, 2, 2, 2}, Down: []bool{false, false, true, false, false, true}, Set: []float64{0, 100, 100, 0, 100, 100},
	}
	f, err := Static(d)
	if err != nil {
		t.Fatal(err)
	}
	r := f.Repeatability
	if r.DoF == nil || *r.DoF != 3 || math.Abs(*r.LargestRange-0.3) > 1e-12 || math.Abs(*r.PooledSD-math.Sqrt(0.05/3)) > 1e-12 {
		t.Errorf("%v %v %v", *r.LargestRange, *r.PooledSD, *r.DoF)
	}
	d.Set = nil
	d.Down = []bool{false, false, false, false, true, true}
	d.Cycle = []int{1, 1, 1, 1, 1, 1}
	if f, err = Static(d); err != nil || f.Hysteresis != nil || f.Linearity.Independent != nil || !math.IsNaN(f.LargestError.At) {
		t.Errorf("four up and two down were grouped: %+v, %v", f, err)
	}
}

func TestCurve(t *testing.T) {
	c, err := NewCurve([]float64{0, 100, 200}, []float64{0, 0.04, 0.02})
	if err != nil {
		t.Fatal(err)
	}
	for _, w := range []struct {
		x, add float64
		beyond bool
	}{{0, 0, false}, {50, 0.02, false}, {150, 0.03, false}, {200, 0.02, false}, {250, 0.02, true}, {-1, 0, true}} {
		if add, beyond := c.At(w.x); math.Abs(add-w.add) > 1e-15 || beyond != w.beyond {
			t.Errorf("at %v: %v, %v", w.x, add, beyond)
		}
	}
	for _, bad := range [][2][]float64{
		{{0, 0}, {1, 2}}, {{1, 0}, {1, 2}}, {{}, {}}, {{0, 1}, {1}}, {{0, math.NaN()}, {1, 2}}, {{0, 1}, {1, math.Inf(1)}},
	} {
		if c, err := NewCurve(bad[0], bad[1]); !errors.Is(err, ErrData) {
			t.Errorf("%v taken: %v, %v", bad, c, err)
		}
	}
	if add, _ := c.At(math.NaN()); !math.IsNaN(add) {
		t.Errorf("at no number: %v", add)
	}
	at, add := []float64{0, 0.1, 0.7}, []float64{0.3, 0.1, 0.7}
	if c, err = NewCurve(at, add); err != nil {
		t.Fatal(err)
	}
	at[1], add[1] = 9, 9 // the curve has its own
	if got, beyond := c.At(0.1); got != 0.1 || beyond {
		t.Errorf("at a stated point: %v, %v", got, beyond)
	}
	if got, beyond := (Curve{}).At(5); got != 0 || beyond {
		t.Errorf("the zero curve: %v, %v", got, beyond)
	}
}
