package verdict

import (
	"math"
	"testing"
)

func side(x float64) *float64 { return &x }

// Conformance probabilities of the JCGM 106 examples (inputs from memory,
// values computed from Phi): 1 - falseAccept.
func TestConformance(t *testing.T) {
	for _, c := range []struct {
		name    string
		y, u    float64
		l       Limit
		conform float64
	}{
		{"one-sided upper", -5.47, 0.05, Limit{High: side(-5.40)}, 0.919243},
		{"one-sided lower", 507, 10, Limit{Low: side(490)}, 0.955435},
		{"two-sided", 13.6, 1.8, Limit{Low: side(12.5), High: side(16.3)}, 0.662630},
	} {
		if _, fa := Judge(c.y, c.u, 0, c.l); math.Abs(1-fa-c.conform) > 1e-6 {
			t.Errorf("%s: conformance %.6f, want %.6f", c.name, 1-fa, c.conform)
		}
	}
}

// The four outcomes of ILAC-G8:09/2019 4.2.3 at and beside their boundaries.
func TestOutcomes(t *testing.T) {
	l := Limit{Low: side(-2), High: side(2)}
	for y, want := range map[float64]Outcome{
		0: Pass, 1.5: Pass, -1.5: Pass, 1.75: ConditionalPass, 2: ConditionalPass, -2: ConditionalPass,
		2.25: ConditionalFail, 2.5: ConditionalFail, 2.75: Fail, -9: Fail, math.Inf(1): Undetermined,
	} {
		if got, _ := Judge(y, 0.25, 0.5, l); got != want {
			t.Errorf("%v: %v, want %v", y, got, want)
		}
	}
	if got, _ := Judge(0, 2, 4, l); got != Undetermined {
		t.Errorf("guard band wider than the limit: %v", got)
	}
	if got, _ := Judge(math.NaN(), 0.25, 0.5, l); got != Undetermined {
		t.Errorf("not a number: %v", got)
	}
}
