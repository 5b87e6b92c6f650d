package uncertainty

import (
	"math"
	"testing"
)

// A budget at 200 mmHg of twelve inputs, one with 12 degrees of freedom;
// expected values computed elsewhere in double precision from the GUM formulas.
func TestCombine(t *testing.T) {
	var in []Input
	for _, u := range []float64{.05, .0346410162, .0028867513, .0288675135, .0461880215, .0577350269, .0288675135,
		.0346410162, .0847821699, .0115470054, .0057735027, .0230940108} {
		in = append(in, Input{Standard: u, Sensitivity: 1})
	}
	in[4].DegreesOfFreedom = 12
	got := Combine(in)
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"u_c", got.Standard, 0.141172529170}, {"nu_eff", got.DegreesOfFreedom, 1047.284290},
		{"k", got.Coverage, 1.9622317247}, {"U", got.Expanded, 0.2770132154},
	} {
		if math.Abs(c.got-c.want) > 1e-8*c.want {
			t.Errorf("%s: %.12g, want %.12g", c.name, c.got, c.want)
		}
	}
}
