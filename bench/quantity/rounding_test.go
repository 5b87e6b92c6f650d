package quantity

import (
	"math"
	"math/big"
	"strconv"
	"testing"
)

// Expected values are what the decimals give on paper.
func TestRoundTo(t *testing.T) {
	for _, c := range []struct{ x, r, want float64 }{
		{0.15, 0.1, 0.2}, {-0.15, 0.1, -0.2}, {0.25, 0.1, 0.3}, {0.14999, 0.1, 0.1}, {2.675, 0.01, 2.68}, {1.005, 0.01, 1.01},
		{23.95, 0.1, 24}, {23.949, 0.1, 23.9}, {7, 5, 5}, {7.5, 5, 10}, {0, 0.1, 0}, {1e-9, 0.1, 0}, {4.9995, 0.001, 5},
		{1.3, 0.25, 1.25}, {-1.375, 0.25, -1.5}, {1e300, 1, 1e300}, {5, 0, 5}, {5, -1, 5}, {5.5, math.NaN(), 5.5}, {5.5, math.Inf(1), 5.5},
	} {
		if got := RoundTo(c.x, c.r); got != c.want {
			t.Errorf("%v at %v: %v, want %v", c.x, c.r, got, c.want)
		}
	}
	if got := RoundTo(math.Inf(-1), 0.1); !math.IsInf(got, -1) || !math.IsNaN(RoundTo(math.NaN(), 0.1)) {
		t.Errorf("infinity rounded to %v", got)
	}
	if got := RoundTo(-0.04, 0.1); math.Signbit(got) {
		t.Error("a zero with a sign")
	}
}

func TestFormat(t *testing.T) {
	for _, c := range []struct {
		x, r float64
		want string
	}{
		{4.9995, 0.001, "5.000"}, {-0.04, 0.1, "0.0"}, {-0.05, 0.1, "-0.1"}, {1234.4, 1, "1234"}, {1235, 20, "1240"}, {1.3, 0.25, "1.25"},
		{0.1, 0, "0.1"}, {0.1, -1, "0.1"}, {299.9999, 0.05, "300.00"}, {2.5, 1, "3"}, {-2.5, 1, "-3"},
	} {
		if got := FormatRounded(c.x, c.r); got != c.want {
			t.Errorf("%v at %v: %s, want %s", c.x, c.r, got, c.want)
		}
	}
	for r, want := range map[float64]int{1: 0, 20: 0, 0.1: 1, 0.05: 2, 2.5: 1, 1e-9: 9, 0.125: 3} {
		if got := DecimalsFor(r); got != want {
			t.Errorf("%v needs %d decimals, not %d", r, want, got)
		}
	}
	for _, c := range []struct {
		x, u float64
		want string
	}{
		{23.4567, 0.1234, "23.46 ± 0.12"}, {23.4567, 0.125, "23.46 ± 0.13"}, {23.4567, 0.0996, "23.46 ± 0.10"}, {23.4567, 0.996, "23.5 ± 1.0"},
		{-0.004, 1.2, "0.0 ± 1.2"}, {1234.5, 123, "1230 ± 120"}, {1234.5, 12.3, "1235 ± 12"}, {5, 0.1, "5.00 ± 0.10"}, {5, 99.6, "10 ± 100"},
		{5.000623e7, 31.66, "50006230 ± 32"}, {1.5e-7, 2e-9, "0.0000001500 ± 0.0000000020"},
		{0.1, 0, "0.1"}, {0.1, -1, "0.1"}, {0.1, math.NaN(), "0.1"}, {0.1, math.Inf(1), "0.1"},
	} {
		if got := FormatWithUncertainty(c.x, c.u); got != c.want {
			t.Errorf("%v with %v: %s, want %s", c.x, c.u, got, c.want)
		}
	}
}

// Laws of rounding, on the decimals themselves: what comes out is a multiple
// of the resolution, no more than half of it away, further from zero at half.
func FuzzRoundTo(f *testing.F) {
	f.Add(0.15, 0.1)
	f.Add(-2.675, 0.01)
	f.Add(7.5, 5.0)
	f.Add(1e17, 0.3)
	decimal := func(x float64) *big.Rat {
		r, _ := new(big.Rat).SetString(strconv.FormatFloat(x, 'g', -1, 64))
		return r
	}
	f.Fuzz(func(t *testing.T, x, resolution float64) {
		got := RoundTo(x, resolution)
		if math.IsNaN(x) || math.IsInf(x, 0) || !(resolution > 0) || math.IsInf(resolution, 0) {
			if got != x && !math.IsNaN(x) {
				t.Fatalf("%v at %v became %v", x, resolution, got)
			}
			return
		}
		if math.Abs(x) > 1e15*resolution || math.Abs(x) > 1e300 || resolution < 1e-290 {
			return // the multiples lie closer than doubles, or beyond them
		}
		if again := RoundTo(got, resolution); again != got {
			t.Errorf("%v at %v: %v, again %v", x, resolution, got, again)
		}
		if minus := RoundTo(-x, resolution); minus != -got {
			t.Errorf("%v at %v: %v, its negative %v", x, resolution, got, minus)
		}
		// The double got is the nearest to a multiple: a bit of room for it.
		off, half := new(big.Rat).Sub(decimal(got), decimal(x)), new(big.Rat).Mul(decimal(resolution), big.NewRat(1, 2))
		room := new(big.Rat).Mul(new(big.Rat).Abs(decimal(got)), big.NewRat(1, 1<<52))
		if off.Abs(off).Cmp(new(big.Rat).Add(half, room)) > 0 {
			t.Errorf("%v at %v: %v is more than half away", x, resolution, got)
		}
	})
}
