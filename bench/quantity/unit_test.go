package quantity

import (
	"math"
	"slices"
	"strconv"
	"strings"
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

// Every unit has a name of its own, is found by it, and turns numbers there and
// back.
func TestUnits(t *testing.T) {
	seen := map[string]bool{}
	for d := DimNone; d <= DimSpeed; d++ {
		names := UnitNames(d)
		if len(names) == 0 {
			t.Errorf("dimension %d has no unit", d)
		}
		for _, name := range names {
			u, ok := UnitNamed(name)
			if !ok || u.Name != name || u.Dimension != d || !(u.Factor > 0) || seen[name] {
				t.Errorf("%s: %+v, %v", name, u, ok)
			}
			seen[name] = true
			for _, x := range []float64{0, 1, -3.75, 300} {
				if back := u.FromSI(u.ToSI(x)); math.Abs(back-x) > 1e-13*(math.Abs(x)+u.Offset) {
					t.Errorf("%v %s there and back: %v", x, name, back)
				}
			}
		}
	}
	if len(seen) != len(units) || UnitNames(DimSpeed+1) != nil {
		t.Errorf("%d of %d units are listed", len(seen), len(units))
	}
	if got := UnitNames(DimRatio); !slices.Equal(got, []string{"uV/V", "mV/V", "V/V"}) {
		t.Errorf("bridge outputs %q", got)
	}
	for other, name := range map[string]string{"µV": "uV", "μV/V": "uV/V", "°C": "degC", "µV/V/mmHg": "uV/V/mmHg"} {
		if u, ok := UnitNamed(other); !ok || u.Name != name {
			t.Errorf("%s read as %q", other, u.Name)
		}
	}
	// Ice melts at 273.15 K, water boils near 373.15 K: an offset, no factor.
	if c, _ := UnitNamed("degC"); c.ToSI(100) != 373.15 || c.FromSI(273.15) != 0 {
		t.Errorf("100 degC is %v K", c.ToSI(100))
	}
	v, err := Parse("5 V")
	if pa, _ := UnitNamed("Pa"); err != nil {
		t.Error(err)
	} else if x, err := v.In(pa); err == nil || x != 0 {
		t.Errorf("5 V in Pa: %v", x)
	}
}

func TestDidYouMean(t *testing.T) {
	for s, want := range map[string]string{
		"300 mmhg": "mmHg", "300 MMHG": "mmHg", "300 mm Hg": "mmHg", "300 mmHG": "mmHg", "300 mHg": "mmHg", "300 mmHgg": "mmHg", "300 mmgH": "mmHg",
		"1 Kpa": "kPa", "1 kpa": "kPa", "1 PSI": "psi", "1 psig": "psi", "1 Torr": "torr", "1 mBar": "mbar", "1 cmh2o": "cmH2O", "1 inH2O 60F": "inH2O_60F",
		"1 hz": "Hz", "1 degc": "degC", "1 ° C": "degC", "5 µv/v/mmhg": "uV/V/mmHg", "5 uV/V/mmH": "uV/V/mmHg", "1 Min": "min", "0.1 mmHg/sec": "",
		"1 furlong": "", "1 mW": "", "1 x": "", "1 ": "", "1 \xff": "",
	} {
		v, err := Parse(s)
		if err == nil {
			t.Errorf("%q taken for %v", s, v)
			continue
		}
		if like := "did you mean " + strconv.Quote(want); (want != "") != strings.Contains(err.Error(), "did you mean") || want != "" && !strings.Contains(err.Error(), like) {
			t.Errorf("%q: %v, want %q proposed", s, err, want)
		}
	}
	// Only a unit of the quantity wanted is proposed.
	if _, err := ParseFrequency("1 khz"); err == nil || !strings.Contains(err.Error(), `did you mean "kHz"`) {
		t.Errorf("khz: %v", err)
	}
	if _, err := ParseFrequency("1 mmhg"); err == nil || strings.Contains(err.Error(), "did you mean") {
		t.Errorf("a pressure proposed for a frequency: %v", err)
	}
}

// Whatever is read is finite, in a unit known by name, and written out again
// reads the same; on error there is no value.
func FuzzParse(f *testing.F) {
	for _, s := range []string{"300 mmHg", "-1.5e2  kPa", "5 µV/V/mmHg", "21 °C", "300mmHg", "300 mmhg", "1e308 kPa", "nan Pa", "1  ", " 1 Pa", "0 1", "3 %"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		v, err := Parse(s)
		if err != nil {
			if v != (Value{}) {
				t.Fatalf("%q: %+v with %v", s, v, err)
			}
			return
		}
		if math.IsNaN(v.SI) || math.IsInf(v.SI, 0) || math.IsInf(v.Stated, 0) {
			t.Fatalf("%q: %+v", s, v)
		}
		again, err := Parse(strconv.FormatFloat(v.Stated, 'g', -1, 64) + " " + v.Unit.Name)
		if err != nil || again != v {
			t.Errorf("%q: %+v, again %+v, %v", s, v, again, err)
		}
		if x, err := v.In(v.Unit); err != nil || x != v.Stated {
			t.Errorf("%q in its own unit: %v, %v", s, x, err)
		}
		for d := DimNone; d <= DimSpeed; d++ {
			if as, err := ParseAs(s, d); (err == nil) != (d == v.Unit.Dimension) || err == nil && as != v {
				t.Errorf("%q as dimension %d: %+v, %v", s, d, as, err)
			}
		}
	})
}
