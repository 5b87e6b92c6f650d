// Package verdict is the only place where a result is compared with a limit.
//
// It computes no result. Order of use: Judge each result against its limit.
package verdict

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Outcome of one limit; the zero Outcome is Undetermined.
type Outcome uint8

// The outcomes (terms of ILAC-G8, and undetermined).
const (
	Undetermined Outcome = iota
	Pass
	ConditionalPass
	ConditionalFail
	Fail
)

// String gives the word of the JSON contract.
func (o Outcome) String() string {
	switch o {
	case Pass:
		return "pass"
	case ConditionalPass:
		return "conditional_pass"
	case ConditionalFail:
		return "conditional_fail"
	case Fail:
		return "fail"
	}
	return "undetermined"
}

// MarshalText is String.
func (o Outcome) MarshalText() ([]byte, error) { return []byte(o.String()), nil }

// Limit has two sides; a nil side is no limit.
type Limit struct{ Low, High *float64 }

// Judge holds value, with standard uncertainty u > 0, against l with a guard
// band w >= 0, by ILAC-G8:09/2019 4.2.3 (non-binary): pass inside the limit by
// w or more, conditional pass inside it, conditional fail within w outside,
// fail beyond; w = 0 leaves pass and fail (4.2.1). The value must be rounded
// by the caller as the procedure states. Undetermined: value, u or w is not a
// finite number, there is no side, or a two-sided limit leaves no room between
// its guard bands.
//
// falseAccept is P(the true value lies outside l), normal, flat prior:
// Phi((Low-value)/u) + 1 - Phi((High-value)/u) (JCGM 106); it is meant for
// pass and conditional pass.
func Judge(value, u, w float64, l Limit) (o Outcome, falseAccept float64) {
	if !(u > 0) || !(w >= 0) || math.IsInf(u+w, 0) || math.IsNaN(value) || math.IsInf(value, 0) || l.Low == nil && l.High == nil {
		return Undetermined, 0
	}
	room := math.Inf(1) // how far inside the limit; negative outside
	if l.Low != nil {
		room = value - *l.Low
		falseAccept += distuv.UnitNormal.CDF((*l.Low - value) / u)
	}
	if l.High != nil {
		room = math.Min(room, *l.High-value)
		falseAccept += distuv.UnitNormal.Survival((*l.High - value) / u)
	}
	switch {
	case l.Low != nil && l.High != nil && *l.High-*l.Low < 2*w:
		return Undetermined, 0
	case room >= w:
		return Pass, falseAccept
	case room >= 0:
		return ConditionalPass, falseAccept
	case room >= -w:
		return ConditionalFail, falseAccept
	}
	return Fail, falseAccept
}
