package uncertainty

import (
	"errors"
	"math"
	"testing"
)

// Half-widths of 95 % intervals. The closed forms: one rectangle 0.95 a; two
// alike are a triangle, 2a (1 - sqrt 0.05); Student's t and the normal
// distribution by scipy 1.10.1. Four alike, and three of u = 1 with one of 10:
// JCGM 101:2008 9.2.3 and 9.2.4 print 3.88 and 17.0 (from memory). The budget
// of twelve inputs, and the same with a hysteresis of half-width 0.6: 4e6
// draws elsewhere gave 0.27690 and 0.653.
func TestSample(t *testing.T) {
	rectangle := func(u float64) Input { return Input{Distribution: Rectangular, Standard: u, Sensitivity: 1} }
	wide := budgetOfTwelve()
	wide[5].Standard = FromHalfWidth(0.6)
	for _, c := range []struct {
		name      string
		in        []Input
		want, tol float64 // tol beside four standard errors: the digits printed
	}{
		{"rectangle", []Input{rectangle(FromHalfWidth(1))}, 0.95, 0},
		{"triangle", []Input{rectangle(FromHalfWidth(1)), rectangle(FromHalfWidth(1))}, 2 * (1 - math.Sqrt(0.05)), 0},
		{"four alike", []Input{rectangle(1), rectangle(1), rectangle(1), rectangle(1)}, 3.88, 0.005},
		{"one of ten", []Input{rectangle(1), rectangle(1), rectangle(1), rectangle(10)}, 17.0, 0.05},
		{"normal", []Input{{Distribution: Normal, Standard: 2, Sensitivity: -3}}, 6 * 1.959963984540054, 0},
		{"t of 4", []Input{{Distribution: StudentT, Standard: 1, Sensitivity: 1, DegreesOfFreedom: 4}}, 2.7764451051977987, 0},
		{"t of 1.5", []Input{{Distribution: StudentT, Standard: 1, Sensitivity: 1, DegreesOfFreedom: 1.5}}, 6.016663107990447, 0},
		{"twelve", budgetOfTwelve(), 0.27690, 1e-5},
		{"twelve, wide", wide, 0.653, 5e-4},
		{"none", nil, 0, 0},
	} {
		got, err := Sample(c.in, 200_000, 1)
		if err != nil || math.Abs(got.Expanded-c.want) > 4*got.Error+c.tol || got.Error > 0.01*c.want {
			t.Errorf("%s: %+v, %v; want %v", c.name, got, err, c.want)
		}
		again, _ := Sample(c.in, 200_000, 1)
		if other, _ := Sample(c.in, 200_000, 2); again != got || other == got && c.want > 0 {
			t.Errorf("%s: seed 1 %+v and %+v, seed 2 %+v", c.name, got, again, other)
		}
	}
	for name, in := range map[string]Input{
		"no distribution":     {Standard: 1, Sensitivity: 1},
		"negative":            {Distribution: Normal, Standard: -1, Sensitivity: 1},
		"no number":           {Distribution: Normal, Standard: math.NaN(), Sensitivity: 1},
		"infinite":            {Distribution: Rectangular, Standard: math.Inf(1), Sensitivity: 1},
		"dof below zero":      {Distribution: StudentT, Standard: 1, Sensitivity: 1, DegreesOfFreedom: -1},
		"dof that is nothing": {Distribution: StudentT, Standard: 1, Sensitivity: 1, DegreesOfFreedom: math.NaN()},
	} {
		if got, err := Sample([]Input{in}, 1000, 1); !errors.Is(err, ErrSample) || got != (Sampled{}) {
			t.Errorf("%s: %+v, %v", name, got, err)
		}
	}
	if got, err := Sample(nil, 999, 1); !errors.Is(err, ErrSample) {
		t.Errorf("999 draws: %+v, %v", got, err)
	}
}

// At the bound of Dominated, a rectangle and a normal of one variance, Combine
// is 2.2 % too wide: the 97.5 % quantile is 2.711646 (scipy 1.10.1, integrated).
func TestSampleAtTheBound(t *testing.T) {
	in := []Input{{Distribution: Normal, Standard: 1, Sensitivity: 1}, {Distribution: Rectangular, Standard: 1, Sensitivity: 1}}
	got, err := Sample(in, 400_000, 3)
	if err != nil || math.Abs(got.Expanded-2.711646382670163) > 4*got.Error || Combine(in).Expanded < 1.02*got.Expanded {
		t.Errorf("%+v, %v; Combine %v", got, err, Combine(in).Expanded)
	}
}

// The standard error is honest: over seeds, the half-widths scatter as it says.
func TestSampleError(t *testing.T) {
	var sum, squares, stated float64
	const n = 200
	for seed := range uint64(n) {
		s, err := Sample([]Input{{Distribution: Normal, Standard: 1, Sensitivity: 1}}, 4000, seed)
		if err != nil {
			t.Fatal(err)
		}
		d := s.Expanded - 1.959963984540054
		sum, squares, stated = sum+d/n, squares+d*d/n, stated+s.Error/n
	}
	// The scatter of an SD over 200 seeds is 5 %; three of it and the bias of
	// the order statistics make 20 %.
	if sd := math.Sqrt(squares); math.Abs(sd/stated-1) > 0.2 || math.Abs(sum) > 4*stated/math.Sqrt(n) {
		t.Errorf("scatter %v, stated %v, mean off by %v", sd, stated, sum)
	}
}

// The bound is half the variance, whatever the sign of the sensitivity.
func TestDominated(t *testing.T) {
	in := []Input{{Distribution: Normal, Standard: 1, Sensitivity: 1}, {Distribution: Rectangular, Standard: 0.5, Sensitivity: 2.01}}
	if !Dominated(in) || !Dominated(in[1:]) || Dominated(in[:1]) || Dominated(nil) {
		t.Error("a rectangle of more than half the variance")
	}
	in[1].Sensitivity = -1.99
	if Dominated(in) {
		t.Error("a rectangle of less than half the variance")
	}
}
