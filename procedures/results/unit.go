package results

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
)

// unitWithin is how near a slope must come to the ratio of two units of
// pressure for the unit to be in doubt, before anything is in doubt of the UUT:
// hardly a transducer is out by just such a factor. hPa and cmH2O are too near
// each other to be told from a wrong sensitivity.
const unitWithin = 0.01

// mistakenUnit names the two units of pressure whose ratio the slope is, UUT
// to reference, "" when it is none. A unit stated wrongly in the bench file, or
// set wrongly on an instrument, is the bench's fault.
func mistakenUnit(slope float64) string {
	names := []string{"mmHg", "kPa", "psi", "hPa", "cmH2O"}
	for _, a := range names {
		for _, b := range names {
			ua, okA := quantity.UnitNamed(a)
			ub, okB := quantity.UnitNamed(b)
			if a == b || !okA || !okB {
				continue
			}
			ratio := ua.Factor / ub.Factor
			if math.Abs(ratio-1) > 0.1 && math.Abs(slope/ratio-1) <= unitWithin {
				return fmt.Sprintf("a pressure in %s taken for one in %s", b, a)
			}
		}
	}
	return ""
}

// doubtfulUnit is the reason that a slope like a ratio of units gives.
func (j *judge) doubtfulUnit() (Reason, bool) {
	st := j.st.static
	if st == nil || st.Slope == nil || j.st.short != "" {
		return Reason{}, false
	}
	pair := mistakenUnit(st.Slope.Value)
	if pair == "" {
		return Reason{}, false
	}
	return Reason{"unit", fmt.Sprintf("unit? The UUT reads %.4g times the reference, as %s would: look at the units in the bench file and on the instruments", st.Slope.Value, pair)}, true
}
