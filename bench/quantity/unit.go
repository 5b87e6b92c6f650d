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

// UnitNamed returns the unit of that name; "µ" and "μ" are read as "u".
func UnitNamed(name string) (Unit, bool) {
	name = strings.NewReplacer("µ", "u", "μ", "u", "°C", "degC").Replace(name)
	u := func(d Dimension, factor float64) (Unit, bool) { return Unit{name, d, factor, 0}, true }
	switch name {
	case "1":
		return u(DimNone, 1)
	case "%":
		return u(DimNone, 0.01)
	case "Pa":
		return u(DimPressure, 1)
	case "hPa", "mbar":
		return u(DimPressure, 100)
	case "kPa":
		return u(DimPressure, 1e3)
	case "bar":
		return u(DimPressure, 1e5)
	case "mmHg":
		return u(DimPressure, mmHgPa)
	case "torr":
		return u(DimPressure, torrPa)
	case "psi":
		return u(DimPressure, psiPa)
	case "cmH2O":
		return u(DimPressure, cmWaterPa)
	case "cmH2O_4C":
		return u(DimPressure, cmWaterPa*0.999972)
	case "cmH2O_20C":
		return u(DimPressure, cmWaterPa*0.9982071)
	case "inH2O":
		return u(DimPressure, inWaterPa)
	case "inH2O_4C":
		return u(DimPressure, inWaterPa*0.999972)
	case "inH2O_20C":
		return u(DimPressure, inWaterPa*0.9982071)
	case "inH2O_60F":
		return u(DimPressure, inWaterPa*0.999001)
	case "V":
		return u(DimVoltage, 1)
	case "mV":
		return u(DimVoltage, 1e-3)
	case "uV":
		return u(DimVoltage, 1e-6)
	case "V/V":
		return u(DimRatio, 1)
	case "mV/V":
		return u(DimRatio, 1e-3)
	case "uV/V":
		return u(DimRatio, 1e-6)
	case "uV/V/mmHg":
		return u(DimSensitivity, 1e-6/mmHgPa)
	case "Hz":
		return u(DimFrequency, 1)
	case "kHz":
		return u(DimFrequency, 1e3)
	case "K":
		return u(DimTemperature, 1)
	case "degC":
		return Unit{name, DimTemperature, 1, 273.15}, true
	case "m":
		return u(DimLength, 1)
	case "cm":
		return u(DimLength, 1e-2)
	case "mm":
		return u(DimLength, 1e-3)
	case "s":
		return u(DimSpan, 1)
	case "ms":
		return u(DimSpan, 1e-3)
	case "us":
		return u(DimSpan, 1e-6)
	case "min":
		return u(DimSpan, 60)
	case "h":
		return u(DimSpan, 3600)
	case "mmHg/s":
		return u(DimPressureRate, mmHgPa)
	case "mmHg/min":
		return u(DimPressureRate, mmHgPa/60)
	}
	return Unit{}, false
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
// required.
func Parse(s string) (Value, error) {
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
		return Value{}, fmt.Errorf("%q: %q is no unit known here", s, name)
	}
	si := u.ToSI(x)
	if math.IsInf(si, 0) {
		return Value{}, errors.New("a number that is too large")
	}
	return Value{SI: si, Stated: x, Unit: u}, nil
}

// ParseAs is Parse for a value that must be of the dimension d.
func ParseAs(s string, d Dimension) (Value, error) {
	v, err := Parse(s)
	if err != nil {
		return Value{}, err
	}
	if v.Unit.Dimension != d {
		return Value{}, fmt.Errorf("%q: %s is a unit of something else", s, v.Unit.Name)
	}
	return v, nil
}
