package reports

import (
	"math"
	"strconv"
	"strings"
	"testing"
)

// Values of JCGM 100:2008, 7.2.2 and 7.2.6 (from memory), and cases worked out
// by hand: two significant digits of the uncertainty, the value to the same place.
func TestFigure(t *testing.T) {
	for _, c := range []struct {
		value, expanded float64
		v, u, source    string
	}{
		{10.05762, 0.027, "10.058", "0.027", "JCGM 100:2008, 7.2.6"},
		{100.02147, 0.00079, "100.02147", "0.00079", "JCGM 100:2008, 7.2.4"},
		{11.2431, 0.3149, "11.24", "0.31", "by hand"},
		{11.2431, 0.0996, "11.24", "0.10", "by hand: rounding carries into the next power of ten"},
		{4567.2, 123.4, "4570", "120", "by hand"},
		{4567.2, 99.6, "4570", "100", "by hand"},
		{4567.2, 12.4, "4567", "12", "by hand"},
		{-0.004, 0.12, "0.00", "0.12", "by hand: no negative zero"},
		{-1.25, 0.11, "\u22121.25", "0.11", "by hand"},
		{0.1, 1, "0.1", "1.0", "by hand"},
		{0.1, 0.1, "0.10", "0.10", "by hand"},
		{2, 1000, "0", "1000", "by hand"},
	} {
		if v, u := figure(c.value, &c.expanded, 0); v != c.v || u != c.u {
			t.Errorf("%v ± %v: %s ± %s, want %s ± %s (%s)", c.value, c.expanded, v, u, c.v, c.u, c.source)
		}
	}
}

// Laws: what is printed lies within half a unit of its last place of what was
// computed, value and uncertainty end at the same place, and the uncertainty
// has two significant digits.
func TestFigureLaws(t *testing.T) {
	seed := uint64(1)
	next := func() float64 {
		seed = seed*6364136223846793005 + 1442695040888963407
		return float64(seed>>11) / (1 << 53)
	}
	for range 20000 {
		expanded := math.Pow(10, 8*next()-5)
		value := (next() - 0.5) * math.Pow(10, 8*next()-3)
		v, u := figure(value, &expanded, 0)
		back := func(s string) float64 {
			x, err := strconv.ParseFloat(strings.Replace(s, "\u2212", "-", 1), 64)
			if err != nil {
				t.Fatal(err)
			}
			return x
		}
		p := math.Pow10(place(expanded))
		if math.Abs(back(v)-value) > p*0.5000001 || math.Abs(back(u)-expanded) > p*0.5000001 {
			t.Errorf("%v ± %v: %s ± %s", value, expanded, v, u)
		}
		if digits := math.Round(back(u) / p); digits < 10 || digits > 99 {
			t.Errorf("%v: %s has %v for its digits", expanded, u, digits)
		}
		dot := func(s string) int {
			if i := strings.Index(s, "."); i >= 0 {
				return len(s) - i - 1
			}
			return 0
		}
		if dot(v) != dot(u) {
			t.Errorf("%v ± %v: %s ± %s end at different places", value, expanded, v, u)
		}
	}
}

func TestFigureWithoutUncertainty(t *testing.T) {
	zero, nan, inf := 0.0, math.NaN(), math.Inf(1)
	for _, u := range []*float64{nil, &zero, &nan, &inf} {
		if v, e := figure(1.23456, u, 0.01); v != "1.23" || e != "" {
			t.Errorf("%v: %q ± %q", u, v, e)
		}
	}
	if v, _ := figure(1.23456, nil, 0); v != "1.235" {
		t.Errorf("no resolution: %s", v)
	}
}

func TestNumbersAndUnits(t *testing.T) {
	for got, want := range map[string]string{
		stated(-25):                 "\u221225",
		stated(9.000000000000002):   "9",
		stated(0.1 + 0.2):           "0.3",
		significant(0.00031, 2):     "0.00031",
		significant(1234567, 2):     "1200000",
		significant(1e-12, 2):       "1.0e\u221212",
		significant(0, 3):           "0",
		percent(0.00031):            "0.031\u00a0%",
		percent(0):                  "<\u00a00.01\u00a0%",
		percent(0.99999):            ">\u00a099.99\u00a0%",
		unitText("uV/V/mmHg"):       "µV/V/mmHg",
		unitText("1"):               "",
		quantityText("-5 mmHg"):     "\u22125\u00a0mmHg",
		quantityText("0.05 uV/V"):   "0.05\u00a0µV/V",
		plusMinus("1.2", "0.1", ""): "1.2\u00a0±\u00a00.1",
		oneLine("a\nb\tc +- d"):     "a; b; c ± d",
		sentence("so."):             "so.",
		sentence("so"):              "so.",
		capital("ž"):                "Ž",
	} {
		if got != want {
			t.Errorf("%q, want %q", got, want)
		}
	}
}
