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
		d := Decide(c.y, Known(c.u, 0, 1.96*c.u), c.l, Simple, 0)
		if math.Abs(1-d.Below-d.Above-c.conform) > 1e-6 {
			t.Errorf("%s: %+v, want conformance %.6f", c.name, d, c.conform)
		}
	}
	// At the limit by w = r U, k = 2: ILAC-G8 table, exact worst cases.
	for r, want := range map[float64]float64{
		0: 0.5, 0.82243: 0.05, 0.83: 0.0484572, 1: 0.0227501, 1.5: 0.00135, 3: 9.87e-10,
	} {
		d := Judge(2-r*0.5, 0.5, 0.25, math.Inf(1), Limit{High: side(2)}, Guarded, r)
		if d.Outcome != Pass || math.Abs(*d.FalseAccept-want) > 5e-4*want { // three digits are stated
			t.Errorf("r = %v: %+v, want %v", r, d, want)
		}
	}
	// Two sides, T the width, Cm = T/(4u): the value at the share of T.
	for _, c := range []struct{ cm, share, conform float64 }{
		{1, 0, 0.5}, {1, 0.25, 0.8400}, {1, 0.5, 0.9545}, {4, 0.05, 0.7881}, {4, 0.10, 0.9452},
	} {
		d := Judge(c.share, 0.5/c.cm, 0.25/c.cm, 0, Limit{Low: side(0), High: side(1)}, Simple, 0)
		if math.Abs(1-*d.FalseAccept-c.conform) > 5e-5 {
			t.Errorf("Cm %v at %v: %v, want %v", c.cm, c.share, 1-*d.FalseAccept, c.conform)
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
		"dof below zero": Judge(0, 1, 0.5, -1, l, Simple, 1),
		"dof no number":  Judge(0, 1, 0.5, math.NaN(), l, Simple, 1),
		"side -Inf":      Judge(0, 1, 0.5, 0, Limit{High: side(math.Inf(-1))}, Simple, 1),
		"side NaN":       Judge(0, 1, 0.5, 0, Limit{Low: side(math.NaN())}, Simple, 1),
		"reversed":       Judge(0, 1, 0.5, 0, Limit{Low: side(2), High: side(-2)}, Simple, 1),
		"U infinite":     Judge(0, math.Inf(1), 0.5, 0, l, Simple, 1),
		"U negative":     Judge(0, -1, 0.5, 0, l, Simple, 1),
		"band negative":  Judge(0, 1, 0.5, 0, l, Guarded, -1),
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

// Laws: neither the unit nor the sign of the axis moves an outcome, and
// decimals that stand on a boundary stand on it in every unit.
func TestUnitsAndSigns(t *testing.T) {
	for _, unit := range []float64{1, 0.133322387415, 1e-9, 133322387.415, 1e-13} {
		for tenths := -35; tenths <= 35; tenths++ {
			y := float64(tenths) / 10
			for _, rule := range []Rule{Simple, Guarded, FourOutcome} {
				want := Judge(y, 0.7, 0.35, 5, Limit{Low: side(-2.1), High: side(2.1)}, rule, 1)
				l := Limit{Low: side(-2.1 * unit), High: side(2.1 * unit)}
				for _, sign := range []float64{1, -1} {
					got := Judge(sign*y*unit, 0.7*unit, 0.35*unit, 5, l, rule, 1)
					if got.Outcome != want.Outcome || got.FalseAccept != nil && math.Abs(*got.FalseAccept-*want.FalseAccept) > 1e-12 {
						t.Errorf("%v x %v, %s: %+v, want %+v", y, sign*unit, rule, got, want)
					}
				}
				by := tenths
				if by < 0 {
					by = -by
				}
				exact := [][3]Outcome{{Pass, Pass, Pass}, {Pass, Fail, ConditionalPass}, {Fail, Fail, ConditionalFail}, {Fail, Fail, Fail}}
				column := map[Rule]int{Simple: 0, Guarded: 1, FourOutcome: 2}[rule]
				row := 3
				for k, edge := range []int{14, 21, 28} { // tenths: limit less band, limit, limit and band
					if by <= edge {
						row = k
						break
					}
				}
				if want.Outcome != exact[row][column] {
					t.Errorf("%v under %s: %v, want %v", y, rule, want.Outcome, exact[row][column])
				}
			}
		}
	}
	// Bands that just meet leave one point: 0.1 to 0.3 with a band of 0.1.
	if d := Judge(0.2, 0.1, 0.05, 0, Limit{Low: side(0.1), High: side(0.3)}, Guarded, 1); d.Outcome != Pass {
		t.Errorf("bands that meet: %+v", d)
	}
	// With many degrees of freedom t is the normal distribution, Phi(-2), but
	// for phi(2) (2^3 + 2)/(4 nu), the leading term.
	for _, dof := range []float64{0, 9.99e7, 1e8, 1e9, 1e15, 1e20, 1e300, math.Inf(1)} {
		want := 0.0227501319481792
		if dof > 0 {
			want += 0.05399096651318806 * 10 / (4 * dof)
		}
		if d := Judge(1, 1, 0.5, dof, Limit{High: side(2)}, Simple, 0); math.Abs(*d.FalseAccept-want) > 1e-13 {
			t.Errorf("%v degrees of freedom: %v, want %v", dof, *d.FalseAccept, want)
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
	for _, c := range []struct {
		pass, fail, want Verdict // of a run with a conditional pass and a conditional fail
	}{
		{Accepted, Accepted, Accepted}, {Accepted, Inconclusive, Inconclusive}, {Inconclusive, Accepted, Inconclusive},
		{Accepted, Rejected, Rejected}, {Rejected, Accepted, Rejected}, {Inconclusive, Rejected, Rejected}, {Verdict(9), Accepted, Inconclusive},
	} {
		for _, outcomes := range [][]Outcome{{ConditionalPass, Pass, ConditionalFail}, {ConditionalFail, ConditionalPass}} {
			if got := Overall(outcomes, false, c.pass, c.fail); got != c.want {
				t.Errorf("%v where they count as %v and %v: %v, want %v", outcomes, c.pass, c.fail, got, c.want)
			}
		}
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
