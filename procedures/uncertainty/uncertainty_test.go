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

// Student's t for 95 % by mpmath 1.3.0, those of one, two, three, twelve also as
// tables print them; out to degrees of freedom where other ways break down
// (1e9 and more: 1.959963984540054 + 2.3722712/dof).
func TestCoverage(t *testing.T) {
	for dof, want := range map[float64]float64{
		1: 12.7062047361747046, 1.3: 7.50052932556203375, 2: 4.30265272974946385, 2.5: 3.57465484200368322,
		3: 3.18244630528370959, 4: 2.77644510519779436, 5: 2.570581835636314, 7.77: 2.31793992989155228, 10: 2.22813885198627475,
		12: 2.17881282966722887, 28: 2.04840714179524516, 100.5: 1.9838506553357998, 1047.28429: 1.96223172468381314,
		1e4: 1.96020123989062626, 1e6: 1.95996635681410704, 1e9: 1.959963986912325, 1e15: 1.959963984540054,
		1e20: 1.959963984540054, math.Inf(1): 1.959963984540054,
	} {
		compare(t, []figure{{"k", coverage(dof), want, 4e-15}})
	}
	// Below one, and where none is.
	compare(t, []figure{{"k", coverage(0.5), 164.55767348048853, 1e-9}})
	for _, dof := range []float64{0, -1, math.NaN()} {
		if k := coverage(dof); !math.IsInf(k, 1) {
			t.Errorf("%v degrees of freedom gave %v", dof, k)
		}
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
