package verdict

import (
	"math"
	"strings"
	"testing"

	"kymobench/procedures/uncertainty"
)

// An uncertainty wider than the limit: no rule lets a value pass, a value
// beyond doubt still fails, and the reason says by how much it must fall.
func TestTooWide(t *testing.T) {
	l := Limit{Low: side(-1), High: side(1)}
	for _, rule := range []Rule{Simple, Guarded, FourOutcome} {
		for y, want := range map[float64]Outcome{0: Undetermined, 1.5: Undetermined, 3: Undetermined, -3: Undetermined, 3.01: Fail, -40: Fail} {
			j := Decide(y, Known(1, 0, 2), l, rule, 1)
			if j.Outcome != want || (j.Reason != "") != (want == Undetermined) || want == Fail && !(j.WrongReject < 0.0228) {
				t.Errorf("%v under %s: %+v, want %v", y, rule, j, want)
			}
			if want == Undetermined && !strings.Contains(j.Reason, "±1 or less, 50 % of what it is") {
				t.Errorf("%v under %s: %q", y, rule, j.Reason)
			}
		}
		// As wide as the limit is not wider.
		if j := Decide(0, Known(0.5, 0, 1), l, rule, 1); j.Outcome != Pass {
			t.Errorf("just as wide under %s: %+v", rule, j)
		}
	}
	// A guard band wider than the uncertainty asks for more.
	if j := Decide(0, Known(0.3, 0, 0.6), l, Guarded, 2); j.Outcome != Undetermined || j.Needed != 0.5 {
		t.Errorf("twice the guard band: %+v", j)
	}
	// A limit of one side always leaves room somewhere.
	if j := Decide(-9, Known(1, 0, 2), Limit{High: side(1)}, Guarded, 1); j.Outcome != Pass {
		t.Errorf("one side: %+v", j)
	}
}

// The uncertainty that would make an outcome plain makes it plain, and a
// thousandth more does not.
func TestNeeded(t *testing.T) {
	l := Limit{Low: side(-1), High: side(1)}
	for _, c := range []struct{ y, u, factor float64 }{{0.8, 0.5, 1}, {-0.9, 0.5, 1.5}, {1.2, 0.5, 1}, {-1.3, 0.9, 0.83}, {0.4, 3, 1}, {1.9, 3, 1}, {0, 5, 2}} {
		j := Decide(c.y, Known(c.u/2, 0, c.u), l, FourOutcome, c.factor)
		at := Decide(c.y, Known(j.Needed/2, 0, j.Needed), l, FourOutcome, c.factor)
		over := Decide(c.y, Known(j.Needed*1.001/2, 0, j.Needed*1.001), l, FourOutcome, c.factor)
		plain := Pass
		if math.Abs(c.y) > 1 {
			plain = Fail
		}
		// On its boundary a value outside is a conditional fail by a hair.
		under := Decide(c.y, Known(j.Needed*0.999/2, 0, j.Needed*0.999), l, FourOutcome, c.factor)
		if !(j.Needed > 0 && j.Needed < c.u) || under.Outcome != plain || plain == Pass && at.Outcome != plain || over.Outcome == plain {
			t.Errorf("%+v: needs %v: %v, %v, %v", c, j.Needed, under.Outcome, at.Outcome, over.Outcome)
		}
	}
}

// Both sides of the risk, by hand: Phi(-1), Phi(-2), Phi(-3) and Student's t.
func TestRisks(t *testing.T) {
	const one, two, three = 0.15865525393145707, 0.022750131948179212, 0.0013498980316300946
	l := Limit{Low: side(-1), High: side(3)}
	for _, c := range []struct {
		y, accept, reject, below, above float64
	}{
		{0, one + three, 0, one, three}, {1, 2 * two, 0, two, two}, {4, 0, one - 2.866515718791939e-07, 2.866515718791939e-07, 1 - one},
		{-3, 0, two - 9.865876450376946e-10, 1 - two, 9.865876450376946e-10},
	} {
		j := Decide(c.y, Known(1, 0, 2), l, Simple, 0)
		for _, x := range [][2]float64{{j.WrongAccept, c.accept}, {j.WrongReject, c.reject}, {j.Below, c.below}, {j.Above, c.above}} {
			if math.Abs(x[0]-x[1]) > 1e-13 {
				t.Errorf("%v: %+v, want %+v", c.y, j, c)
			}
		}
	}
	j := Decide(2+4.302652729749464, Known(1, 2, 4.3), Limit{High: side(2)}, Simple, 0)
	if j.Outcome != Fail || math.Abs(j.WrongReject-0.025) > 1e-12 || math.Abs(j.Above-0.975) > 1e-12 {
		t.Errorf("t: %+v", j)
	}
}

// Where a Monte Carlo gave the interval its draws give the risk: a rectangle
// of half-width 1 cannot lie outside a limit 1.2 away, whatever t would say;
// and an interval with unequal ends has unequal guard bands.
func TestDistributions(t *testing.T) {
	flat, err := uncertainty.Evaluate(uncertainty.Budget{Inputs: []uncertainty.Input{
		{Distribution: uncertainty.Rectangular, Standard: uncertainty.FromHalfWidth(1), Sensitivity: 1}}}, uncertainty.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	j := Decide(0, &flat, Limit{High: side(1.2)}, Guarded, 1)
	if j.Outcome != Pass || j.WrongAccept != 0 || math.Abs(j.GuardBand-0.95) > 0.01 {
		t.Errorf("rectangle: %+v", j)
	}
	if j := Decide(0.5, &flat, Limit{High: side(1.2)}, Simple, 1); math.Abs(j.WrongAccept-0.15) > 0.01 {
		t.Errorf("rectangle: %+v", j)
	}
	skew := *Known(1, 0, 2)
	skew.Low, skew.High = -1, 3
	l := Limit{Low: side(-10), High: side(10)}
	for y, want := range map[float64]Outcome{
		7: Pass, 7.1: ConditionalPass, 10.9: ConditionalFail, 11.1: Fail, -9: Pass, -9.1: ConditionalPass, -12.9: ConditionalFail, -13.1: Fail,
	} {
		if j := Decide(y, &skew, l, FourOutcome, 1); j.Outcome != want {
			t.Errorf("%v with unequal ends: %v, want %v", y, j.Outcome, want)
		}
	}
}

func TestDecideAllocations(t *testing.T) {
	u, l := Known(0.25, 7, 0.59), Limit{Low: side(-2), High: side(2)}
	for _, y := range []float64{0, 1.9, 2.1, 9} {
		if n := testing.AllocsPerRun(100, func() { Decide(y, u, l, FourOutcome, 1) }); n > 0 {
			t.Errorf("%v: %v allocations", y, n)
		}
	}
}

func BenchmarkDecide(b *testing.B) {
	for name, dof := range map[string]float64{"normal": 0, "t": 12, "t_many": 1000} {
		u, l := Known(0.25, dof, 0.5), Limit{Low: side(-2), High: side(2)}
		b.Run(name, func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				Decide(1.3, u, l, FourOutcome, 1)
			}
		})
	}
	l := Limit{Low: side(-2), High: side(2), Resolution: 0.01}
	b.Run("rounded", func(b *testing.B) {
		b.ReportAllocs()
		u := Known(0.25, 0, 0.5)
		for b.Loop() {
			Decide(1.3, u, l, FourOutcome, 1)
		}
	})
}
