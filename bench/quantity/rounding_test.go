package quantity

import "testing"

// Expected values are what the decimals give on paper.
func TestRoundTo(t *testing.T) {
	for _, c := range []struct{ x, r, want float64 }{
		{0.15, 0.1, 0.2}, {-0.15, 0.1, -0.2}, {0.25, 0.1, 0.3}, {0.14999, 0.1, 0.1}, {2.675, 0.01, 2.68}, {1.005, 0.01, 1.01},
		{23.95, 0.1, 24}, {23.949, 0.1, 23.9}, {7, 5, 5}, {7.5, 5, 10}, {0, 0.1, 0}, {1e-9, 0.1, 0}, {4.9995, 0.001, 5},
	} {
		if got := RoundTo(c.x, c.r); got != c.want {
			t.Errorf("%v at %v: %v, want %v", c.x, c.r, got, c.want)
		}
	}
	if got := FormatRounded(4.9995, 0.001); got != "5.000" {
		t.Errorf("formatted %s", got)
	}
}
