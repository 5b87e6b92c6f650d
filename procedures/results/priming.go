package results

import (
	"fmt"
	"strings"

	"kymobench/procedures"
	"kymobench/procedures/tubing"
)

// PrimingTrial is one trial release while a line is being filled.
type PrimingTrial struct {
	Number    int            `json:"number"`
	Reasons   []string       `json:"reasons"` // why undetermined
	Frequency *Estimate      `json:"natural_frequency_hz"`
	Damping   *Estimate      `json:"damping_ratio"`
	Product   *DerivedFigure `json:"frequency_damping_product_hz"`
	Within    bool           `json:"within_limits"` // all of both intervals is
	Advice    Reason         `json:"advice"`
}

// Prime adds a trial to those before it and says what to do next. The limits
// and, where it states one, the clean line are those of the procedure.
func Prime(before []PrimingTrial, s *Step, d *procedures.Definition) PrimingTrial {
	out := PrimingTrial{Number: len(before) + 1, Reasons: []string{}}
	if s == nil || !s.Combined.Determined || s.Derived == nil {
		if s != nil {
			out.Reasons = s.Combined.Reasons
		}
		out.Advice = Reason{"undetermined", "natural frequency and damping are undetermined (" + strings.Join(out.Reasons, ", ") + "): release again; if it stays so, look at valve, cable and readout"}
		return out
	}
	out.Frequency, out.Damping, out.Product = s.Combined.Frequency, s.Combined.Damping, &s.Derived.Product
	target := targetOf(d)
	var trials []tubing.Trial
	for _, t := range append(before[:len(before):len(before)], out) {
		if t.Frequency != nil {
			trials = append(trials, t.trial())
		}
	}
	last := trials[len(trials)-1]
	out.Within = last.FrequencyIn.Low >= target.FrequencyLow && last.DampingIn.Low >= target.DampingLow && (target.DampingHigh == 0 || last.DampingIn.High <= target.DampingHigh)
	advice := tubing.Advise(trials, target)
	out.Advice = Reason{advice.String(), primingText(advice, trials, out.Within)}
	return out
}

func (t PrimingTrial) trial() tubing.Trial {
	in := func(i [2]float64) tubing.Interval { return tubing.Interval{Low: i[0], High: i[1]} }
	return tubing.Trial{
		Frequency: t.Frequency.Value, Damping: t.Damping.Value, Product: *t.Product.Value,
		FrequencyIn: in(t.Frequency.Interval), DampingIn: in(t.Damping.Interval), ProductIn: in(*t.Product.Interval),
	}
}

// targetOf reads the limits and the clean line of a procedure.
func targetOf(d *procedures.Definition) tubing.Target {
	var t tubing.Target
	if l, ok := d.Limit(procedures.NaturalFrequency); ok && l.Low != nil {
		t.FrequencyLow = *l.Low
	}
	if l, ok := d.Limit(procedures.DampingRatio); ok {
		if l.Low != nil {
			t.DampingLow = *l.Low
		}
		if l.High != nil {
			t.DampingHigh = *l.High
		}
	}
	g := gathered{definition: d}
	if c, err := designed(g.stated()); err == nil {
		t.CleanFrequency, t.CleanProduct = c.frequency, c.frequency*c.damping
	}
	return t
}

// primingText says the advice with what it rests on.
func primingText(a tubing.Advice, trials []tubing.Trial, within bool) string {
	last := trials[len(trials)-1]
	changed := ""
	if n := len(trials); n > 1 {
		b := trials[n-2]
		changed = fmt.Sprintf(" (natural frequency %+.0f %%, fn x zeta %+.0f %% since the release before)", 100*(last.Frequency/b.Frequency-1), 100*(last.Product/b.Product-1))
	}
	switch a {
	case tubing.FlushAir:
		if changed != "" {
			return "air: tap the dome and flush, then release again" + changed
		}
		return "air, most likely: tap the dome and flush, then release again"
	case tubing.AirEntered:
		return "air has come in: look for a loose fitting, tap the dome and flush" + changed
	case tubing.Narrowed:
		return "narrowing: look for a kink or a clot and open every stopcock" + changed
	case tubing.StillRising:
		return "within the limits, and air is still leaving: one more flush may gain more" + changed
	case tubing.Done:
		return "within the limits, and as good as it gets" + changed
	case tubing.Settled:
		why := "flushing changes nothing any more"
		if !within {
			why += "; if this is not enough, what yields is not air that can be flushed out: a soft line, the dome, or the unit itself"
		}
		return "as good as it gets: " + why + changed
	}
	if within {
		return "within the limits so far: tap the dome, flush and release again to see whether anything changes"
	}
	return "tap the dome, flush and release again to see what changes"
}
