package procedures

import (
	"errors"
	"fmt"
	"math"
	"time"

	"kymobench/bench/quantity"
)

func parsePressure(s string) (quantity.Pressure, error) { return finite(quantity.ParsePressure(s)) }

// finite refuses what is beyond every number once it is in SI: "1e308 kPa".
func finite[Q ~float64](x Q, err error) (Q, error) {
	if err == nil && math.IsInf(float64(x), 0) {
		return 0, errors.New("a number that is too large")
	}
	return x, err
}

// parseRate takes a fall of pressure per second.
func parseRate(s string) (quantity.Pressure, error) {
	r, err := finite(quantity.ParsePressureRate(s))
	return quantity.Pressure(r), err
}

func parseSpan(s string) (time.Duration, error) {
	v, err := quantity.ParseSpan(s)
	if err == nil && (v > 1e9 || v < -1e9) {
		return 0, fmt.Errorf("%q is longer than anybody waits", s)
	}
	return v.Duration(), err
}

// parseShare takes "3 %" or "0.03 1" and gives 0.03.
func parseShare(s string) (float64, error) {
	v, err := quantity.ParseAs(s, quantity.DimNone)
	return finite(v.SI, err)
}

// limitValue is the parser for values of a limit: in the limit's own unit
// whatever unit they are stated in; a damping ratio is a plain number.
func limitValue(name LimitName) func(string) (float64, error) {
	return func(s string) (float64, error) {
		own, ok := LimitUnit(name)
		unit, known := quantity.UnitNamed(own)
		if !ok || !known {
			return 0, fmt.Errorf("%q has no limit", name)
		}
		if unit.Dimension == quantity.DimNone {
			return quantity.ParseDecimal(s)
		}
		v, err := quantity.ParseAs(s, unit.Dimension)
		if err != nil {
			return 0, err
		}
		return finite(v.In(unit))
	}
}
