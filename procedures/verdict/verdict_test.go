package verdict

import (
	"math"
	"testing"
)

func side(x float64) *float64 { return &x }

// Conformance probabilities of the JCGM 106 examples (inputs from memory,
// values computed from Phi): 1 - FalseAccept.
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
		d := Judge(c.y, 1.96*c.u, c.u, 0, c.l, Simple, 0)
		if d.FalseAccept == nil || math.Abs(1-*d.FalseAccept-c.conform) > 1e-6 {
			t.Errorf("%s: %+v, want conformance %.6f", c.name, d, c.conform)
		}
	}
	// At the limit by w = r U, k = 2: ILAC-G8 table, exact worst cases.
	for r, want := range map[float64]float64{1: 0.0227501, 0.83: 0.0484572, 1.5: 0.00135} {
		d := Judge(2-r*0.5, 0.5, 0.25, math.Inf(1), Limit{High: side(2)}, Guarded, r)
		if d.Outcome != Pass || math.Abs(*d.FalseAccept-want) > 1e-6 {
			t.Errorf("r = %v: %+v, want %v", r, d, want)
		}
	}
	// Student's t, two degrees of freedom, P(T > 4.302652729749464) = 0.025.
	if d := Judge(2-4.302652729749464, 1, 1, 2, Limit{High: side(2)}, Simple, 0); math.Abs(*d.FalseAccept-0.025) > 1e-9 {
		t.Errorf("t: %v", *d.FalseAccept)
	}
}

// The four outcomes of ILAC-G8:09/2019 4.2.3 at and beside their boundaries.
func TestOutcomes(t *testing.T) {
	l := Limit{Low: side(-2), High: side(2)}
	for y, want := range map[float64][3]Outcome{
		0: {Pass, Pass, Pass}, 1.5: {Pass, Pass, Pass}, -1.5: {Pass, Pass, Pass}, 1.75: {Pass, Fail, ConditionalPass},
		2: {Pass, Fail, ConditionalPass}, -2: {Pass, Fail, ConditionalPass}, 2.25: {Fail, Fail, ConditionalFail},
		2.5: {Fail, Fail, ConditionalFail}, 2.75: {Fail, Fail, Fail}, -9: {Fail, Fail, Fail},
		math.Inf(1): {}, math.NaN(): {},
	} {
		for i, rule := range []Rule{Simple, Guarded, FourOutcome} {
			d := Judge(y, 0.5, 0.25, 0, l, rule, 1)
			if d.Outcome != want[i] {
				t.Errorf("%v under %s: %v, want %v", y, rule, d.Outcome, want[i])
			}
			if passed := d.Outcome == Pass || d.Outcome == ConditionalPass; passed != (d.FalseAccept != nil) {
				t.Errorf("%v under %s: %v with %v", y, rule, d.Outcome, d.FalseAccept)
			}
			if (d.Outcome == Undetermined) != (d.Reason != "") {
				t.Errorf("%v under %s: undetermined without reason or the reverse: %+v", y, rule, d)
			}
		}
	}
	for name, d := range map[string]Decision{
		"no room":        Judge(0, 4, 2, 0, l, FourOutcome, 1),
		"no uncertainty": Judge(0, 0, 0, 0, l, FourOutcome, 1),
		"no side":        Judge(0, 1, 0.5, 0, Limit{}, FourOutcome, 1),
		"no rule":        Judge(0, 1, 0.5, 0, l, "", 1),
	} {
		if d.Outcome != Undetermined || d.Reason == "" {
			t.Errorf("%s: %+v", name, d)
		}
	}
	// 24.04 Hz and 23.96 Hz are 24.0 Hz at a resolution of 0.1; 23.94 is 23.9.
	l = Limit{Low: side(24), Resolution: 0.1}
	for y, want := range map[float64]Outcome{23.96: Pass, 23.94: Fail, 24: Pass} {
		if d := Judge(y, 0.2, 0.1, 0, l, Simple, 0); d.Outcome != want {
			t.Errorf("%v rounded: %v, want %v", y, d.Outcome, want)
		}
	}
}

func TestOverall(t *testing.T) {
	for _, c := range []struct {
		outcomes []Outcome
		fault    bool
		want     Verdict
	}{
		{nil, false, Inconclusive}, {[]Outcome{Pass, Pass}, false, Accepted}, {[]Outcome{Pass, Pass}, true, Inconclusive},
		{[]Outcome{Pass, Fail, Undetermined}, false, Rejected}, {[]Outcome{Fail}, true, Inconclusive},
		{[]Outcome{Pass, Undetermined}, false, Inconclusive}, {[]Outcome{Pass, ConditionalPass}, false, Inconclusive},
		{[]Outcome{ConditionalFail, Pass}, false, Rejected},
	} {
		if got := Overall(c.outcomes, c.fault, Inconclusive, Rejected); got != c.want {
			t.Errorf("%v, fault %v: %v, want %v", c.outcomes, c.fault, got, c.want)
		}
	}
	if got := Overall([]Outcome{ConditionalPass}, false, Accepted, Rejected); got != Accepted {
		t.Errorf("conditional pass taken for a pass: %v", got)
	}
	var o Outcome
	var v Verdict
	for _, w := range []string{"pass", "undetermined", "conditional_fail"} {
		if err := o.UnmarshalText([]byte(w)); err != nil || o.String() != w {
			t.Errorf("%s: %v, %v", w, o, err)
		}
	}
	if err := v.UnmarshalText([]byte("accept")); err == nil {
		t.Errorf("accept read as %v", v)
	}
}
