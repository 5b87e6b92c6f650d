package fit

import (
	"fmt"
	"math"
	"slices"
)

// Curve is what to add to a reading: given at points, linear between them.
type Curve struct{ at, add []float64 }

// NewCurve takes points in rising order, none twice; one is enough. It keeps
// copies. ErrData when lengths differ, a point is not above the one before, or
// a number is not finite.
func NewCurve(at, add []float64) (Curve, error) {
	if len(at) == 0 || len(add) != len(at) {
		return Curve{}, fmt.Errorf("%w: a curve needs as many corrections as points", ErrData)
	}
	for i := range at {
		if math.IsNaN(at[i]-at[i]) || math.IsNaN(add[i]-add[i]) || i > 0 && !(at[i] > at[i-1]) {
			return Curve{}, fmt.Errorf("%w: point %d of a curve is not finite or not above the one before", ErrData, i+1)
		}
	}
	return Curve{slices.Clone(at), slices.Clone(add)}, nil
}

// At returns the correction at a reading, exactly as stated at a point. Beyond
// the ends it stays constant, and beyond says so. The zero Curve corrects
// nothing, everywhere. Not-a-number returns itself.
func (c Curve) At(x float64) (add float64, beyond bool) {
	n := len(c.at)
	switch {
	case n == 0:
		return 0, false
	case math.IsNaN(x):
		return x, false
	case x <= c.at[0]:
		return c.add[0], x < c.at[0]
	case x >= c.at[n-1]:
		return c.add[n-1], x > c.at[n-1]
	}
	j, stated := slices.BinarySearch(c.at, x)
	if stated {
		return c.add[j], false
	}
	share := (x - c.at[j-1]) / (c.at[j] - c.at[j-1])
	return c.add[j-1] + share*(c.add[j]-c.add[j-1]), false
}
