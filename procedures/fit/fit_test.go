package fit

import (
	"math"
	"testing"
)

// Source: GUM (JCGM 100:2008) H.3, thermometer calibration; the full digits
// were computed from the printed data in exact rational sums.
func TestLineThermometer(t *testing.T) {
	x := []float64{21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511}
	y := []float64{-.171, -.169, -.166, -.159, -.164, -.165, -.156, -.157, -.159, -.161, -.160}
	for i := range x {
		x[i] -= 20
	}
	l, err := Line(x, y)
	if err != nil {
		t.Fatal(err)
	}
	r := l.Covariance / l.UIntercept / l.USlope
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"y1", l.Intercept, -0.17120379013134998}, {"u(y1)", l.UIntercept, 0.0028775978351599537},
		{"y2", l.Slope, 0.002182697739887278}, {"u(y2)", l.USlope, 0.0006679387732278317},
		{"r", r, -0.9304296030934459}, {"s", l.Residual, 0.003497563963505284},
	} {
		if math.Abs(c.got-c.want) > 1e-12*math.Abs(c.want) {
			t.Errorf("%s: %.16g, want %.16g", c.name, c.got, c.want)
		}
	}
}

func TestLineRefuses(t *testing.T) {
	if l, err := Line([]float64{1, 1, 1}, []float64{1, 2, 3}); err == nil {
		t.Errorf("equal x gave %v", l)
	}
	if l, err := Line([]float64{1, 2}, []float64{1, 2}); err == nil {
		t.Errorf("two readings gave %v", l)
	}
}
