package quantity

import (
	"math"
	"testing"
)

// Source: values computed exactly from the definitions (standard gravity
// 9.80665 m/s2, conventional mercury 13595.1 kg/m3, inch 0.0254 m, pound
// 0.45359237 kg, water densities as named); they agree with the seven digits
// of NIST SP 811 appendix B.8 (from memory).
func TestPressureUnits(t *testing.T) {
	for name, want := range map[string]float64{
		"mmHg": 133.322387415, "torr": 133.322368421052631, "cmH2O": 98.0665, "cmH2O_4C": 98.063754138,
		"cmH2O_20C": 97.890676572, "inH2O": 249.08891, "inH2O_4C": 249.0819355, "inH2O_60F": 248.8400702,
		"inH2O_20C": 248.6423185, "psi": 6894.757293168361, "mbar": 100, "hPa": 100, "bar": 1e5, "kPa": 1e3, "Pa": 1,
	} {
		u, ok := UnitNamed(name)
		if !ok || math.Abs(u.Factor-want) > 3e-10*want {
			t.Errorf("%s: %.15g Pa, want %.15g", name, u.Factor, want)
		}
	}
	v, err := Parse("300 mmHg")
	kPa, _ := UnitNamed("kPa")
	if x, e := v.In(kPa); err != nil || e != nil || math.Abs(x-39.9967162245) > 1e-12 {
		t.Errorf("300 mmHg is %.13g kPa, %v, %v", x, err, e)
	}
}

func TestParseRefuses(t *testing.T) {
	for _, s := range []string{"300", "300mmHg", "mmHg", "nan mmHg", "300 mmhg", " 300 mmHg", "300 mmHg ", "1_0 mmHg", "300 ", "1e308 kPa", "-1e308 mmHg"} {
		if v, err := Parse(s); err == nil {
			t.Errorf("%q taken for %v", s, v)
		}
	}
	if _, err := ParseAs("300 Hz", DimPressure); err == nil {
		t.Error("a frequency was taken for a pressure")
	}
}
