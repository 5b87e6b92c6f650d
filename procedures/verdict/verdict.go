// Package verdict is the only place where a result is compared with a limit.
//
// It computes no result. Order of use: Judge each result against its limit,
// then Overall for the run.
package verdict

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"kymobench/bench/quantity"
)

// Limit has two sides; a nil side is no limit. Results are rounded to
// Resolution before they are compared; 0 does not round.
type Limit struct {
	Low, High  *float64
	Resolution float64
}

// Rule is how an uncertainty counts against a limit.
type Rule string

// The decision rules (ILAC-G8:09/2019, 4.2.1 to 4.2.3).
const (
	Simple      Rule = "simple"       // pass inside the limit, fail outside
	Guarded     Rule = "guarded"      // pass inside by the guard band, fail otherwise
	FourOutcome Rule = "four_outcome" // pass, conditional pass, conditional fail, fail
)

// Decision is how one result came out.
type Decision struct {
	Outcome     Outcome
	FalseAccept *float64 // only of pass and conditional pass
	GuardBand   float64
	Reason      string // why undetermined
}

// Judge holds value, with its standard uncertainty, degrees of freedom (0 or
// +Inf: infinite) and 95 % half-width expanded, against l, all in one unit. The
// guard band is w = factor x expanded, 0 under the simple rule.
//
//	room = how far the rounded value lies inside the nearest side
//	simple:       pass room >= 0; fail otherwise
//	guarded:      pass room >= w; fail otherwise
//	four_outcome: pass room >= w; conditional pass room >= 0;
//	              conditional fail room >= -w; fail otherwise
//
// Undetermined, with the reason: a value or an uncertainty that is no number,
// an uncertainty of zero or less, degrees of freedom below zero, no side to
// compare with or one that is no number, an unknown rule, or a two-sided limit
// that leaves no room between its guard bands. Comparisons allow 1e-12 of the
// largest of the numbers compared, for the last bits of decimals.
//
// FalseAccept is the probability that the true value lies outside l, flat
// prior: F((Low-value)/u) + 1 - F((High-value)/u), F Student's t with the
// degrees of freedom, normal when they are infinite. Source: JCGM 106; from
// memory for t.
func Judge(value, expanded, standard, dof float64, l Limit, rule Rule, factor float64) Decision {
	w := factor * expanded
	if rule == Simple {
		w = 0
	}
	switch {
	case !finite(value):
		return Decision{Reason: "there is no value"}
	case !(standard > 0) || !(expanded > 0) || !finite(standard) || !finite(expanded) || !(w >= 0) || !finite(w) || !(dof >= 0):
		return Decision{Reason: "its uncertainty is not known"}
	case l.Low == nil && l.High == nil:
		return Decision{Reason: "there is no limit to hold it against"}
	case l.Low != nil && !finite(*l.Low) || l.High != nil && !finite(*l.High):
		return Decision{Reason: "its limit is no number"}
	case rule != Simple && rule != Guarded && rule != FourOutcome:
		return Decision{Reason: fmt.Sprintf("the decision rule %q is not known", rule)}
	}
	d := Decision{GuardBand: w}
	bits := lastBits(value, w, l)
	if l.Low != nil && l.High != nil && *l.High-*l.Low < 2*w-bits {
		d.Reason = fmt.Sprintf("its uncertainty of %.3g leaves no room between the guard bands of a limit %.3g wide: a better reference, more readings or a wider limit would", expanded, *l.High-*l.Low)
		return d
	}
	d.Outcome = outcome(room(quantity.RoundTo(value, l.Resolution), l)+bits, w, rule)
	if d.Outcome == Pass || d.Outcome == ConditionalPass {
		p := falseAccept(value, standard, dof, l)
		d.FalseAccept = &p
	}
	return d
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// lastBits is what the comparison allows: a rounded value that stands on a
// limit is inside it, in whatever unit.
func lastBits(value, w float64, l Limit) float64 {
	most := math.Max(math.Abs(value), w)
	for _, side := range []*float64{l.Low, l.High} {
		if side != nil {
			most = math.Max(most, math.Abs(*side))
		}
	}
	return 1e-12 * most
}

// room is how far x lies inside the nearest side.
func room(x float64, l Limit) float64 {
	r := math.Inf(1)
	if l.Low != nil {
		r = x - *l.Low
	}
	if l.High != nil {
		r = math.Min(r, *l.High-x)
	}
	return r
}

func outcome(room, w float64, rule Rule) Outcome {
	switch {
	case room >= w:
		return Pass
	case rule == Simple || rule == Guarded:
		return Fail
	case room >= 0:
		return ConditionalPass
	case room >= -w:
		return ConditionalFail
	}
	return Fail
}

// falseAccept is of the value as measured, not as rounded. From 1e8 degrees of
// freedom on t is the normal distribution to the eighth digit, while the
// library's own t loses its digits and at 1e15 is wrong altogether.
func falseAccept(value, u, dof float64, l Limit) float64 {
	below := func(z float64) float64 { return distuv.UnitNormal.CDF(z) }
	if dof > 0 && dof < 1e8 {
		t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}
		below = t.CDF
	}
	p := 0.0
	if l.Low != nil {
		p += below((*l.Low - value) / u)
	}
	if l.High != nil {
		p += below((value - *l.High) / u)
	}
	return p
}
