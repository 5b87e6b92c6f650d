package verdict

import "fmt"

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

// Verdict of a run; the zero Verdict is Inconclusive.
type Verdict uint8

// The verdicts.
const (
	Inconclusive Verdict = iota
	Accepted
	Rejected
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

// UnmarshalText takes the words that String gives.
func (o *Outcome) UnmarshalText(text []byte) error {
	for _, x := range []Outcome{Undetermined, Pass, ConditionalPass, ConditionalFail, Fail} {
		if x.String() == string(text) {
			*o = x
			return nil
		}
	}
	return fmt.Errorf("%q is no outcome", text)
}

// String gives the word of the JSON contract.
func (v Verdict) String() string {
	switch v {
	case Accepted:
		return "accepted"
	case Rejected:
		return "rejected"
	}
	return "inconclusive"
}

// MarshalText is String.
func (v Verdict) MarshalText() ([]byte, error) { return []byte(v.String()), nil }

// UnmarshalText takes the words that String gives.
func (v *Verdict) UnmarshalText(text []byte) error {
	for _, x := range []Verdict{Inconclusive, Accepted, Rejected} {
		if x.String() == string(text) {
			*v = x
			return nil
		}
	}
	return fmt.Errorf("%q is no verdict", text)
}

// Overall is the verdict of a run over its outcomes. A fault of the bench
// makes it inconclusive whatever else was found; then a fail rejects; then
// what the procedure makes of conditional outcomes counts, rejected before
// inconclusive; an undetermined outcome, or none at all, is inconclusive; only
// when everything else is accepted is the run.
func Overall(outcomes []Outcome, benchFault bool, conditionalPass, conditionalFail Verdict) Verdict {
	if benchFault || len(outcomes) == 0 {
		return Inconclusive
	}
	worst := Accepted
	for _, o := range outcomes {
		v := Inconclusive
		switch o {
		case Pass:
			v = Accepted
		case ConditionalPass:
			v = conditionalPass
		case ConditionalFail:
			v = conditionalFail
		case Fail:
			v = Rejected
		}
		switch v {
		case Accepted:
		case Rejected:
			return Rejected
		default:
			worst = Inconclusive
		}
	}
	return worst
}
