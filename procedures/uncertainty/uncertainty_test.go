package uncertainty

import (
	"math"
	"testing"
)

// budgetOfTwelve is a budget at 200 mmHg: in [4] the repeatability, in [5] the
// hysteresis.
func budgetOfTwelve() []Input {
	var in []Input
	for _, u := range []float64{.05, .0346410162, .0028867513, .0288675135, .0461880215, .0577350269, .0288675135,
		.0346410162, .0847821699, .0115470054, .0057735027, .0230940108} {
		in = append(in, Input{Distribution: Rectangular, Standard: u, Sensitivity: 1})
	}
	in[0].Distribution, in[8].Distribution = Normal, Normal
	in[4].Distribution, in[4].DegreesOfFreedom = StudentT, 12
	return in
}

type figure struct {
	name           string
	got, want, tol float64
}

func compare(t *testing.T, all []figure) {
	t.Helper()
	for _, c := range all {
		if !(math.Abs(c.got-c.want) <= c.tol*math.Abs(c.want)) {
			t.Errorf("%s: %.12g, want %.12g", c.name, c.got, c.want)
		}
	}
}

// Expected values computed elsewhere in double precision from the GUM formulas.
func TestCombine(t *testing.T) {
	got := Combine(budgetOfTwelve())
	compare(t, []figure{
		{"u_c", got.Standard, 0.141172529170, 1e-8}, {"nu_eff", got.DegreesOfFreedom, 1047.284290, 1e-8},
		{"k", got.Coverage, 1.9622317247, 1e-8}, {"U", got.Expanded, 0.2770132154, 1e-8},
	})
}

// Source: GUM (JCGM 100:2008) H.1, end gauge; data as printed, in nm. The
// comparator's inputs make u(d) = 9.7 with 25.6 degrees of freedom; the whole
// prints 32 nm and 16. Full digits computed elsewhere from the printed data.
func TestCombineEndGauge(t *testing.T) {
	comparator := Combine([]Input{
		{Standard: 5.8, Sensitivity: 1, DegreesOfFreedom: 24}, {Standard: 3.9, Sensitivity: 1, DegreesOfFreedom: 5},
		{Standard: 6.7, Sensitivity: 1, DegreesOfFreedom: 8},
	})
	const length = 50e6 // nominal, as printed
	whole := Combine([]Input{
		{Standard: FromExpanded(75, 3), Sensitivity: 1, DegreesOfFreedom: 18},
		{Standard: comparator.Standard, Sensitivity: 1, DegreesOfFreedom: comparator.DegreesOfFreedom},
		{Standard: FromHalfWidth(0.05), Sensitivity: -length * 11.5e-6, DegreesOfFreedom: 2},
		{Standard: FromHalfWidth(1e-6), Sensitivity: length * 0.1, DegreesOfFreedom: 50},
	})
	compare(t, []figure{
		{"u(d)", comparator.Standard, 9.68194195, 1e-8}, {"nu of d", comparator.DegreesOfFreedom, 25.44725, 1e-6},
		{"u_c", whole.Standard, 31.663767411, 1e-9}, {"nu_eff", whole.DegreesOfFreedom, 16.752147509, 1e-9},
	})
}

// Student's t for 95 % (one to ten as tables print them, many degrees of freedom by scipy
// 1.10.1), out to degrees of freedom where the library's own t breaks down.
func TestCoverage(t *testing.T) {
	for dof, want := range map[float64]float64{
		1: 12.706204736432095, 2: 4.302652729749464, 5: 2.570581835636314, 10: 2.2281388519649385, 1e4: 1.960201239890626,
		1e6: 1.9599663568141066, 1e9: 1.959963986912325, 1e15: 1.959963984540054, 1e20: 1.959963984540054, math.Inf(1): 1.959963984540054,
	} {
		compare(t, []figure{{"k", coverage(dof), want, 2e-8}})
	}
	// A noise of a ten-thousandth beside a certificate: nu_eff is 9e16.
	got := Combine([]Input{{Standard: 1, Sensitivity: 1}, {Standard: 1e-4, Sensitivity: 1, DegreesOfFreedom: 9}})
	compare(t, []figure{{"U", got.Expanded, 1.959963984540054, 1e-7}})
	if none := Combine(nil); none.Standard != 0 || none.Expanded != 0 || !math.IsInf(none.DegreesOfFreedom, 1) {
		t.Errorf("an empty budget: %+v", none)
	}
}

// Full and half widths of one rectangle are one thing; a factor of zero is none.
func TestFrom(t *testing.T) {
	compare(t, []figure{
		{"half", FromHalfWidth(3), 1.7320508075688772, 1e-15}, {"full", FromFullWidth(6), 1.7320508075688772, 1e-15},
		{"expanded", FromExpanded(0.1, 2), 0.05, 0},
	})
	for _, k := range []float64{0, -2, math.NaN()} {
		if u := FromExpanded(1, k); !math.IsNaN(u) {
			t.Errorf("k = %v gave %v", k, u)
		}
	}
}
