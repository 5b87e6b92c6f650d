package quantity

import (
	"errors"
	"fmt"
	"math"
	"strings"
)

// Dimension is what a unit measures.
type Dimension uint8

// The dimensions; the zero Dimension is a plain number.
const (
	DimNone Dimension = iota
	DimPressure
	DimVoltage
	DimRatio
	DimSensitivity
	DimFrequency
	DimTemperature
	DimLength
	DimSpan
	DimPressureRate
	DimDensity
	DimViscosity
	DimSpeed
)

// Unit is a named unit: SI value = x*Factor + Offset (an offset for degC only).
type Unit struct {
	Name      string
	Dimension Dimension
	Factor    float64
	Offset    float64
}

// Pascals in one unit. mmHg is the conventional 13595.1 kg/m3 x 9.80665 m/s2 x
// 1 mm, exact; torr is 101325/760; psi is 0.45359237 kg x 9.80665 m/s2 over a
// square inch of 0.0254 m, exact; water by its stated density (kg/m3: 1000
// conventional, 999.972 at 4 degC, 998.2071 at 20 degC, 999.001 at 60 degF).
const (
	mmHgPa    = 133.322387415
	torrPa    = 101325.0 / 760
	psiPa     = 0.45359237 * 9.80665 / (0.0254 * 0.0254)
	cmWaterPa = 98.0665
	inWaterPa = 249.08891
)

// units is every unit known here, those people mean most often first within a
// dimension.
var units = [...]Unit{
	{"1", DimNone, 1, 0},
	{"%", DimNone, 0.01, 0},
	{"mmHg", DimPressure, mmHgPa, 0},
	{"kPa", DimPressure, 1e3, 0},
	{"Pa", DimPressure, 1, 0},
	{"hPa", DimPressure, 100, 0},
	{"mbar", DimPressure, 100, 0},
	{"bar", DimPressure, 1e5, 0},
	{"psi", DimPressure, psiPa, 0},
	{"torr", DimPressure, torrPa, 0},
	{"cmH2O", DimPressure, cmWaterPa, 0},
	{"cmH2O_4C", DimPressure, cmWaterPa * 0.999972, 0},
	{"cmH2O_20C", DimPressure, cmWaterPa * 0.9982071, 0},
	{"inH2O", DimPressure, inWaterPa, 0},
	{"inH2O_4C", DimPressure, inWaterPa * 0.999972, 0},
	{"inH2O_20C", DimPressure, inWaterPa * 0.9982071, 0},
	{"inH2O_60F", DimPressure, inWaterPa * 0.999001, 0},
	{"V", DimVoltage, 1, 0},
	{"mV", DimVoltage, 1e-3, 0},
	{"uV", DimVoltage, 1e-6, 0},
	{"uV/V", DimRatio, 1e-6, 0},
	{"mV/V", DimRatio, 1e-3, 0},
	{"V/V", DimRatio, 1, 0},
	{"uV/V/mmHg", DimSensitivity, 1e-6 / mmHgPa, 0},
	{"Hz", DimFrequency, 1, 0},
	{"kHz", DimFrequency, 1e3, 0},
	{"1/min", DimFrequency, 1.0 / 60, 0},
	{"degC", DimTemperature, 1, 273.15},
	{"K", DimTemperature, 1, 0},
	{"mm", DimLength, 1e-3, 0},
	{"cm", DimLength, 1e-2, 0},
	{"m", DimLength, 1, 0},
	{"s", DimSpan, 1, 0},
	{"ms", DimSpan, 1e-3, 0},
	{"us", DimSpan, 1e-6, 0},
	{"min", DimSpan, 60, 0},
	{"h", DimSpan, 3600, 0},
	{"mmHg/s", DimPressureRate, mmHgPa, 0},
	{"mmHg/min", DimPressureRate, mmHgPa / 60, 0},
	{"kg/m3", DimDensity, 1, 0},
	{"g/cm3", DimDensity, 1e3, 0},
	{"mPa s", DimViscosity, 1e-3, 0},
	{"Pa s", DimViscosity, 1, 0},
	{"cP", DimViscosity, 1e-3, 0},
	{"mm/s", DimSpeed, 1e-3, 0},
	{"m/s", DimSpeed, 1, 0},
}

// UnitNamed returns the unit of that name; "µ" (both of them) is read as "u",
// "°C" as "degC".
func UnitNamed(name string) (Unit, bool) {
	name = plain(name)
	for _, u := range units {
		if u.Name == name {
			return u, true
		}
	}
	return Unit{}, false
}

// UnitNames lists the units of a dimension, those people mean most often first.
func UnitNames(d Dimension) []string {
	var names []string
	for _, u := range units {
		if u.Dimension == d {
			names = append(names, u.Name)
		}
	}
	return names
}

// plain writes a name in ASCII where it has a spelling in ASCII.
func plain(name string) string {
	for i := range len(name) {
		if name[i] >= 0x80 {
			return strings.NewReplacer("µ", "u", "μ", "u", "°C", "degC").Replace(name)
		}
	}
	return name
}

// ToSI turns x of the unit into SI.
func (u Unit) ToSI(x float64) float64 { return x*u.Factor + u.Offset }

// FromSI is the inverse of ToSI.
func (u Unit) FromSI(si float64) float64 { return (si - u.Offset) / u.Factor }

// Value is a number with the unit it was stated in.
type Value struct {
	SI     float64
	Stated float64 // as stated, in Unit
	Unit   Unit
}

// In returns the value in another unit of the same dimension; in the unit it
// was stated in, exactly the number stated.
func (v Value) In(u Unit) (float64, error) {
	if u.Dimension != v.Unit.Dimension {
		return 0, fmt.Errorf("%s is no unit for a value in %s", u.Name, v.Unit.Name)
	}
	if u == v.Unit {
		return v.Stated, nil
	}
	return u.FromSI(v.SI), nil
}

// Parse reads "300 mmHg": a decimal, one or more blanks, a unit. The unit is
// required. An unknown unit that is spelt nearly like a known one is answered
// with that one.
func Parse(s string) (Value, error) { return parseUnits(s, func(Dimension) bool { return true }) }

// ParseAs is Parse for a value that must be of the dimension d.
func ParseAs(s string, d Dimension) (Value, error) {
	v, err := parseUnits(s, func(other Dimension) bool { return other == d })
	if err != nil {
		return Value{}, err
	}
	if v.Unit.Dimension != d {
		return Value{}, fmt.Errorf("%q: %s is a unit of something else", s, v.Unit.Name)
	}
	return v, nil
}

// parseUnits proposes units of the dimensions wanted alone.
func parseUnits(s string, wanted func(Dimension) bool) (Value, error) {
	number, name, ok := strings.Cut(s, " ")
	if !ok {
		return Value{}, fmt.Errorf("%q: a number, a blank and a unit are expected, as in \"300 mmHg\"", s)
	}
	x, err := ParseDecimal(number)
	if err != nil {
		return Value{}, err
	}
	name = strings.TrimLeft(name, " ")
	u, ok := UnitNamed(name)
	if !ok {
		if like := spelt(name, wanted); like != "" {
			return Value{}, fmt.Errorf("%q: %q is no unit known here; did you mean %q?", s, name, like)
		}
		return Value{}, fmt.Errorf("%q: %q is no unit known here", s, name)
	}
	return valueOf(x, u)
}

// valueOf refuses what is too large for SI.
func valueOf(x float64, u Unit) (Value, error) {
	si := u.ToSI(x)
	if math.IsInf(si, 0) {
		return Value{}, errors.New("a number that is too large")
	}
	return Value{SI: si, Stated: x, Unit: u}, nil
}
