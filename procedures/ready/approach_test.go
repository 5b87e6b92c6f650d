package ready

import (
	"math"
	"strings"
	"testing"
)

func TestApproach(t *testing.T) {
	rows := []struct {
		name     string
		a        Approach
		readings []float64
		beyond   float64
		wrong    bool
	}{
		{"from below", Approach{Set: 200, Up: true, Threshold: 1}, []float64{100, 180, 199, 200.3}, 0.3, false},
		{"overshot and come back", Approach{Set: 200, Up: true, Threshold: 1}, []float64{100, 180, 201.4, math.NaN(), 199.9}, 1.4, true},
		{"from above", Approach{Set: 200, Threshold: 1}, []float64{300, 220, 200.5}, 0, false},
		{"fallen too far", Approach{Set: 200, Threshold: 1}, []float64{300, 220, 198.5, 200}, 1.5, true},
		{"at the threshold", Approach{Set: 200, Up: true, Threshold: 1}, []float64{201}, 1, false},
	}
	for _, row := range rows {
		for _, p := range row.readings {
			row.a.Add(p)
		}
		beyond, wrong := row.a.Beyond()
		if math.Abs(beyond-row.beyond) > 1e-9 || wrong != row.wrong {
			t.Errorf("%s: beyond by %g, wrong %v", row.name, beyond, wrong)
		}
		text := row.a.Status().Text("mmHg")
		if strings.Contains(text, "approached from the wrong side") != wrong || (text == "") == wrong {
			t.Errorf("%s: it says %q", row.name, text)
		}
	}
}
