package quantity

import "testing"

func TestParseFilter(t *testing.T) {
	for s, want := range map[string]Filter{
		"low_pass 200 Hz": {Kind: LowPass, Corner: 200, Order: 1}, "average 4 ms": {Kind: Average, Length: 0.004, Order: 1},
		"average 500 us x3": {Kind: Average, Length: 0.0005, Order: 3}, "delay 2 ms": {Kind: Lag, Length: 0.002, Order: 1},
	} {
		if got, err := ParseFilter(s); err != nil || got != want {
			t.Errorf("%q: %+v, %v", s, got, err)
		}
	}
	for _, s := range []string{"", "low_pass", "low_pass 200", "low_pass 2 ms", "low_pass 0 Hz", "low_pass -3 Hz", "average 4 Hz", "average 4 ms x0", "average 4 ms x9", "average 4 ms xx", "delay 0 s", "delay 2 s", "notch 50 Hz"} {
		if got, err := ParseFilter(s); err == nil || got != (Filter{}) {
			t.Errorf("%q taken for %+v", s, got)
		}
	}
}
