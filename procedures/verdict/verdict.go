// Package verdict is the only place where a result is compared with a limit.
//
// It computes no result. Order of use: Decide each figure, with its Evaluation
// by package uncertainty, against its limit; then Overall for the run.
//
// Every probability of deciding wrongly is about this one result, given what
// was measured and a flat prior: nothing is taken as known of UUTs like it. It
// is no long-run rate. Rates need a prior: GlobalRisk. With few degrees of
// freedom it is also on the safe side of what is counted over UUTs that share
// one unknown scatter: of those passed by a guard band of U, 0.94 times as many
// as predicted are wrong with 50 degrees of freedom, 0.69 with 9, 0.29 with 3.
package verdict

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
	"kymobench/procedures/uncertainty"
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

// Judgement is how one figure came out. WrongAccept is only of pass and
// conditional pass, WrongReject only of fail and conditional fail; both are 0
// otherwise. Below and Above are the probabilities that the true value lies
// beyond the one and the other side, 0 for a side there is none of.
type Judgement struct {
	Outcome      Outcome
	WrongAccept  float64
	WrongReject  float64
	Below, Above float64
	GuardBand    float64 // the wider of the two, where they differ
	Room         float64 // how far the rounded value lies inside the nearest side
	Reason       string  // why undetermined
	Needed       float64 // the expanded uncertainty at which this value would pass, or fail, with nothing conditional or undetermined; 0 where no uncertainty would do, or none is needed
}

// Decide holds a value against a limit, in one unit; u is the value's
// uncertainty. The guard bands are w = factor x the distance of the ends of the
// 95 % interval, factor x U for most; 0 under the simple rule.
//
//	room = how far the rounded value lies inside the nearest side
//	simple:       pass room >= 0; fail otherwise
//	guarded:      pass room >= w; fail otherwise
//	four_outcome: pass room >= w; conditional pass room >= 0;
//	              conditional fail room >= -w; fail otherwise
//
// Undetermined, with the reason: a value or an uncertainty that is no number,
// an uncertainty of zero or less, degrees of freedom below zero, no side to
// compare with or one that is no number, an unknown rule; and, under every
// rule, an expanded uncertainty, or a guard band, of more than half the width
// of a limit with two sides. No value could pass then; a value outside by more
// than that still fails. Comparisons allow 1e-12 of the largest of the numbers
// compared, for the last bits of decimals.
//
// The probabilities are of the value as measured, not as rounded, and have both
// tails: Below = F(Low - value), Above = 1 - F(High - value), F as
// Evaluation.Below says. Source: ILAC-G8:09/2019, 4.2; JCGM 106:2012, 7 and 8;
// from memory for t.
func Decide(value float64, u *uncertainty.Evaluation, l Limit, rule Rule, factor float64) Judgement {
	down, up := -u.Low, u.High
	if rule == Simple {
		factor = 0
	}
	if reason := unfit(value, u, l, rule, factor); reason != "" {
		return Judgement{Reason: reason}
	}
	j := Judgement{GuardBand: factor * math.Max(down, up)}
	if l.Low != nil {
		j.Below = u.Below(*l.Low - value)
	}
	if l.High != nil {
		j.Above = u.Above(*l.High - value)
	}
	bits := lastBits(value, j.GuardBand, l)
	low, high := rooms(quantity.RoundTo(value, l.Resolution), l)
	j.Room = math.Min(low, high)
	low, high = low+bits, high+bits
	wide := l.Low != nil && l.High != nil && *l.High-*l.Low < math.Max(1, factor)*(up+down)-bits
	switch {
	case wide && low >= -math.Max(1, factor)*up && high >= -math.Max(1, factor)*down:
		j.Reason = tooWide(u.Expanded, math.Max(1, factor), *l.High-*l.Low)
	case !wide && low >= factor*down && high >= factor*up:
		j.Outcome = Pass
	case wide || rule != FourOutcome || low < -factor*up || high < -factor*down:
		j.Outcome = Fail
	case low >= 0 && high >= 0:
		j.Outcome = ConditionalPass
	default:
		j.Outcome = ConditionalFail
	}
	j.risks()
	j.Needed = needed(&j, u, l, factor)
	return j
}

// unfit says why nothing can be decided.
func unfit(value float64, u *uncertainty.Evaluation, l Limit, rule Rule, factor float64) string {
	switch {
	case !finite(value):
		return "there is no value"
	case !(u.Standard >= 0) || !(u.Expanded > 0) || !finite(u.Standard) || !finite(u.Expanded) || !(-u.Low >= 0) || !(u.High >= 0) ||
		u.Standard == 0 && u.Method != uncertainty.MonteCarlo || !(factor >= 0) || !finite(factor*u.Expanded) || !(u.DegreesOfFreedom >= 0):
		return "its uncertainty is not known"
	case l.Low == nil && l.High == nil:
		return "there is no limit to hold it against"
	case l.Low != nil && !finite(*l.Low) || l.High != nil && !finite(*l.High):
		return "its limit is no number"
	case l.Low != nil && l.High != nil && *l.Low > *l.High:
		return "its limit has its sides in the wrong order"
	case rule != Simple && rule != Guarded && rule != FourOutcome:
		return fmt.Sprintf("the decision rule %q is not known", rule)
	}
	return ""
}

// tooWide says what would cure an uncertainty that leaves no value to pass.
func tooWide(expanded, factor, width float64) string {
	most := width / 2 / factor
	return fmt.Sprintf("its uncertainty of ±%.3g leaves no room between the guard bands of a limit %.3g wide, so that no value could pass: "+
		"it would have to be ±%.3g or less, %s of what it is, by a better reference or more readings, or the limit wider",
		expanded, width, most, share(most/expanded))
}

// share writes a part of one as a technician says it.
func share(x float64) string {
	if x < 0.01 {
		return "less than a hundredth"
	}
	return fmt.Sprintf("%.0f %%", math.Floor(100*x))
}

// risks shares the probabilities out to the outcome.
func (j *Judgement) risks() {
	switch j.Outcome {
	case Pass, ConditionalPass:
		j.WrongAccept = j.Below + j.Above
	case Fail, ConditionalFail:
		j.WrongReject = 1 - j.Below - j.Above
		if j.Below > 0.5 || j.Above > 0.5 { // with the digits of a small one
			j.WrongReject = math.Max(0, 1-math.Max(j.Below, j.Above)-math.Min(j.Below, j.Above))
		}
	}
}

// needed is the expanded uncertainty at which the value's guard band is its
// room, or what it lacks of it.
func needed(j *Judgement, u *uncertainty.Evaluation, l Limit, factor float64) float64 {
	if factor == 0 {
		factor = 1 // the simple rule asks only that the limit be wider
		if j.Outcome != Undetermined {
			return 0
		}
	}
	switch j.Outcome {
	case ConditionalPass, ConditionalFail:
		return math.Abs(j.Room) / factor
	case Undetermined:
		most := (*l.High - *l.Low) / 2 / math.Max(1, factor)
		if j.Room < 0 {
			return math.Min(most, -j.Room/factor)
		}
		return math.Min(most, j.Room/factor)
	}
	return 0
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

// rooms is how far x lies inside each side; infinite where there is none.
func rooms(x float64, l Limit) (low, high float64) {
	low, high = math.Inf(1), math.Inf(1)
	if l.Low != nil {
		low = x - *l.Low
	}
	if l.High != nil {
		high = *l.High - x
	}
	return low, high
}

// Decision is a Judgement as Judge gives it.
type Decision struct {
	Outcome     Outcome
	FalseAccept *float64 // only of pass and conditional pass
	GuardBand   float64
	Reason      string // why undetermined
}

// Judge is Decide for an uncertainty given by its numbers: standard uncertainty,
// degrees of freedom (0 or +Inf: infinite) and 95 % half-width expanded.
func Judge(value, expanded, standard, dof float64, l Limit, rule Rule, factor float64) Decision {
	j := Decide(value, Known(standard, dof, expanded), l, rule, factor)
	d := Decision{Outcome: j.Outcome, GuardBand: j.GuardBand, Reason: j.Reason}
	if j.Outcome == Pass || j.Outcome == ConditionalPass {
		d.FalseAccept = &j.WrongAccept
	}
	return d
}

// Known is the Evaluation of an uncertainty that is known by its numbers alone.
func Known(standard, dof, expanded float64) *uncertainty.Evaluation {
	e := uncertainty.Evaluation{Low: -expanded, High: expanded, Method: uncertainty.GUM}
	e.Standard, e.DegreesOfFreedom, e.Coverage, e.Expanded = standard, dof, expanded/standard, expanded
	return &e
}
