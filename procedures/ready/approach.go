package ready

import "math"

// Approach follows the reference on its way to a set pressure. A point of a leg
// that goes up must be come to from below, one of a leg that goes down from
// above: once the pressure has been beyond, the UUT's hysteresis is that of
// another path, and no waiting mends it.
type Approach struct {
	Set       float64
	Up        bool    // the leg goes up
	Threshold float64 // pressure: so much beyond does not count
	beyond    float64
}

// Add takes a reading of the reference, from when the set pressure was asked
// for until the point is taken. One that is no number is passed over.
func (a *Approach) Add(reference float64) {
	over := a.Set - reference
	if a.Up {
		over = -over
	}
	if !math.IsNaN(over) {
		a.beyond = math.Max(a.beyond, over)
	}
}

// Beyond is how far the pressure has been beyond the set pressure, 0 for not at
// all; and whether that is above the threshold.
func (a *Approach) Beyond() (pressure float64, wrong bool) {
	return a.beyond, a.beyond > a.Threshold
}

// Status says so in words that a person can act on; nothing when all is well.
func (a *Approach) Status() Status {
	if _, wrong := a.Beyond(); !wrong {
		return Status{}
	}
	return Status{Kind: WrongSide, Value: a.beyond, Limit: a.Threshold, Seconds: math.Inf(1)}
}
