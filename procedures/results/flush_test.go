package results

import (
	"math"
	"testing"
)

// The published flush test: 1.7 mm at 25 mm/s, adjacent heights of 24 and 17
// mm; 14.7 Hz ringing, a ratio of 0.71 and a damping ratio of 0.11 (Miller's
// Anesthesia, 6th edition, figure 32-11). 0.1091, 14.794 Hz and 0.0548 as a full
// cycle were computed elsewhere.
func TestPublishedFlushTest(t *testing.T) {
	f, err := FlushTest(FlushReadings{Period: "1.7 mm", Speed: "25 mm/s", Heights: [2]string{"24 mm", "17 mm"}})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name         string
		got          DerivedFigure
		want, within float64
	}{{"ringing", f.Ringing, 14.706, 5e-4}, {"ratio", f.Ratio, 17.0 / 24, 1e-12}, {"damping", f.Damping, 0.1091, 5e-5}, {"natural frequency", f.Frequency, 14.794, 5e-4}} {
		if math.Abs(*c.got.Value-c.want) > c.within || !(c.got.Interval[0] < c.want && c.want < c.got.Interval[1]) {
			t.Errorf("%s: %g in %v, want %g", c.name, *c.got.Value, *c.got.Interval, c.want)
		}
	}
	if math.Abs(f.Misread-0.0548) > 5e-5 || f.Notes[0].Code != "kind_of_ratio" {
		t.Errorf("%+v", f)
	}
	// 1.65 to 1.75 mm: all of the interval of the ringing lies inside its ends.
	if f.Ringing.Interval[0] < 25/1.75 || f.Ringing.Interval[1] > 25/1.65 || f.Ringing.Interval[0] > 25/1.745 {
		t.Errorf("%v", *f.Ringing.Interval)
	}
	same, err := FlushTest(FlushReadings{Period: "68.00 ms", Heights: [2]string{"24 mmHg", "17 mmHg"}, SameSide: true})
	if err != nil || math.Abs(*same.Damping.Value-0.0548) > 5e-5 || math.Abs(*same.Ringing.Value-1/0.068) > 1e-9 {
		t.Errorf("%+v, %v", same, err)
	}
	for _, bad := range []FlushReadings{
		{}, {Period: "1.7 mm", Heights: [2]string{"24 mm", "17 mm"}}, {Period: "68 ms", Heights: [2]string{"17 mm", "24 mm"}},
		{Period: "68 ms", Heights: [2]string{"24 mm", "17 mmHg"}}, {Period: "-68 ms", Heights: [2]string{"24 mm", "17 mm"}}, {Period: "68 ms", Speed: "25 mm/s", Heights: [2]string{"24 mm", "17 mm"}},
	} {
		if f, err := FlushTest(bad); err == nil {
			t.Errorf("%+v: %+v", bad, f)
		}
	}
}
