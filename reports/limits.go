package reports

import (
	"fmt"
	"math"
	"strings"

	"kymobench/procedures/results"
)

// limitText is what a limit is called on paper; its figure's name.
func limitText(name string) string {
	switch name {
	case "accuracy":
		return "Largest error after zeroing"
	case "zero_offset":
		return "Zero offset before zeroing"
	}
	return capital(strings.ReplaceAll(name, "_", " "))
}

// outcomeText is an outcome in words.
func outcomeText(outcome string) string { return strings.ReplaceAll(outcome, "_", " ") }

func (d *Document) limits(res results.Results) {
	rules := map[string]bool{}
	for _, l := range res.Limits {
		d.Limits = append(d.Limits, limitRow(l))
		if l.Rule != "" && !rules[l.Rule] {
			rules[l.Rule] = true
			d.Rules = append(d.Rules, "Decision rule: "+ruleText(l.Rule))
		}
	}
	d.Rules = append(d.Rules,
		"U is the expanded uncertainty, half of an interval that covers the measured quantity with 95 % probability. Results are rounded as the procedure states, then compared.",
		"Risk is the probability that the true value lies outside the limit although the result was passed, from this measurement alone.",
	)
}

// ruleText is a decision rule in words.
func ruleText(rule string) string {
	const guard = "the guard band lies on both sides of each limit. "
	switch rule {
	case "simple":
		return "simple acceptance. A result inside its limit passes, one outside fails, whatever its uncertainty, unless that is wider than the limit."
	case "guard_band", "guarded":
		return "guarded acceptance; " + guard + "Only a result inside its limit by the guard band or more passes."
	case "four_outcome", "four_outcomes":
		return "four outcomes; " + guard + "Pass: inside the limit by the guard band or more. Conditional pass: inside by less. Conditional fail: outside by less. Fail: outside by more."
	}
	return sentence(strings.ReplaceAll(rule, "_", " "))
}

func limitRow(l results.Limit) LimitRow {
	row := LimitRow{
		Name: limitText(l.Name), Unit: unitText(l.Unit), Value: "not determined",
		Limit: boundsText(l.Bounds), Outcome: outcomeText(l.Outcome.String()), Risk: "\u2013",
		Origin: sentence(joined("; known: ", l.Origin, l.Known)), Note: oneLine(l.Reason),
		Number: l.Value, U: l.Expanded, Low: l.Bounds.Low, High: l.Bounds.High, GuardNumber: l.GuardBand,
	}
	if l.Value != nil {
		row.Value, row.Expanded = figure(*l.Value, l.Expanded, l.Resolution)
		if row.Expanded == "" && row.Note == "" {
			row.Note = "no uncertainty could be stated for it"
		}
	} else if row.Note == "" {
		row.Note = "no reason recorded"
	}
	if l.At != nil {
		row.At = "at " + withUnit(stated(*l.At), "mmHg")
	}
	if l.GuardBand > 0 {
		row.Guard = significant(l.GuardBand, 2)
	}
	if l.FalseAccept != nil {
		row.Risk = percent(*l.FalseAccept)
	}
	return row
}

// boundsText is a limit in words, without its unit.
func boundsText(b results.Bounds) string {
	switch {
	case b.Low != nil && b.High != nil && *b.Low == -*b.High:
		return "±" + stated(*b.High)
	case b.Low != nil && b.High != nil:
		return stated(*b.Low) + " to " + stated(*b.High)
	case b.Low != nil:
		return "at least " + stated(*b.Low)
	case b.High != nil:
		return "at most " + stated(*b.High)
	}
	return "\u2013"
}

// room is how far a result lies inside its nearer bound, in expanded
// uncertainties where there is one and else in shares of the bound; negative
// outside. The second result is that bound.
func room(l results.Limit) (float64, float64, bool) {
	if l.Value == nil || l.Bounds.Low == nil && l.Bounds.High == nil {
		return 0, 0, false
	}
	left, bound := math.Inf(1), 0.0
	if l.Bounds.Low != nil {
		left, bound = *l.Value-*l.Bounds.Low, *l.Bounds.Low
	}
	if l.Bounds.High != nil && *l.Bounds.High-*l.Value < left {
		left, bound = *l.Bounds.High-*l.Value, *l.Bounds.High
	}
	if l.Expanded != nil && *l.Expanded > 0 {
		return left / *l.Expanded, bound, true
	}
	if bound != 0 {
		return left / math.Abs(bound), bound, true
	}
	return left, bound, true
}

// tightest returns the limit with the least room among those with one of the
// outcomes.
func tightest(limits []results.Limit, outcomes ...string) (results.Limit, bool) {
	var found results.Limit
	least, any := math.Inf(1), false
	for _, l := range limits {
		for _, o := range outcomes {
			if r, _, ok := room(l); ok && l.Outcome.String() == o && r < least {
				found, least, any = l, r, true
			}
		}
	}
	return found, any
}

// judged says the verdict and the one figure that decided it.
func (d *Document) judged(res results.Results) {
	d.Verdict = res.Verdict.String()
	d.Headline = capital(d.Verdict)
	d.Counts = counts(res.Limits)
	var texts []string
	byName := map[string]results.Limit{}
	for _, l := range res.Limits {
		byName[l.Name] = l
	}
	for _, r := range res.Reasons {
		text := textOf(r)
		if l, ok := byName[r.Code]; ok {
			text = outText(l)
		}
		texts = append(texts, sentence(capital(oneLine(text))))
	}
	switch {
	case d.Verdict == "rejected":
		if l, ok := tightest(res.Limits, "fail", "conditional_fail"); ok {
			d.Deciding = sentence(overText(l))
		}
	case d.Verdict == "accepted":
		if l, ok := tightest(res.Limits, "pass", "conditional_pass", "conditional_fail"); ok {
			d.Deciding = sentence(withinText(l))
		}
	case len(texts) == 0:
		d.Deciding = sentence(openText(res.Limits))
	}
	if d.Deciding == "" && len(texts) > 0 {
		d.Deciding, texts = texts[0], texts[1:]
	}
	if d.Deciding == "" {
		d.Deciding = "The record gives no reason."
	}
	d.Reasons = texts
}

// named is a figure with its name and uncertainty: "natural frequency (11.20 ± 0.31) Hz".
func named(l results.Limit) string {
	row := limitRow(l)
	text := row.Name + " " + plusMinus(row.Value, row.Expanded, row.Unit)
	if row.At != "" {
		text += " " + row.At
	}
	return text
}

func overText(l results.Limit) string {
	_, bound, _ := room(l)
	side := "above"
	if *l.Value < bound {
		side = "below"
	}
	if l.Outcome.String() == "conditional_fail" {
		return named(l) + " is " + side + " its limit of " + withUnit(stated(bound), unitText(l.Unit)) + ", by less than the guard band"
	}
	return named(l) + " is " + side + " its limit of " + withUnit(stated(bound), unitText(l.Unit))
}

func withinText(l results.Limit) string {
	unit := unitText(l.Unit)
	text := "Nearest to its limit: " + lower(named(l)) + ", allowed " + withUnit(boundsText(l.Bounds), unit)
	if l.Outcome.String() == "conditional_pass" {
		text += ", inside its limit by less than the guard band"
	}
	return text
}

// openText says why a run without a stated reason is inconclusive.
func openText(limits []results.Limit) string {
	for _, l := range limits {
		if l.Outcome.String() == "undetermined" {
			return outText(l)
		}
	}
	if l, ok := tightest(limits, "conditional_fail", "conditional_pass"); ok {
		return outText(l)
	}
	return ""
}

// outText says how one limit came out, in words.
func outText(l results.Limit) string {
	_, _, judged := room(l)
	switch o := l.Outcome.String(); {
	case o == "undetermined" || !judged:
		return limitRow(l).Name + " is undetermined: " + limitRow(l).Note
	case o == "fail" || o == "conditional_fail":
		return overText(l)
	case o == "conditional_pass":
		return named(l) + " is inside its limit, " + withUnit(boundsText(l.Bounds), unitText(l.Unit)) + ", by less than the guard band"
	}
	return named(l) + " is inside its limit, " + withUnit(boundsText(l.Bounds), unitText(l.Unit))
}

// counts says how many limits had which outcome.
func counts(limits []results.Limit) string {
	if len(limits) == 0 {
		return "No limit was judged."
	}
	n := map[string]int{}
	for _, l := range limits {
		n[l.Outcome.String()]++
	}
	var parts []string
	for _, o := range []string{"pass", "conditional_pass", "conditional_fail", "fail", "undetermined"} {
		if n[o] > 0 {
			parts = append(parts, fmt.Sprintf("%d %s", n[o], outcomeText(o)))
		}
	}
	if n["pass"] == len(limits) && len(limits) > 1 {
		return fmt.Sprintf("All %d limits passed.", len(limits))
	}
	return "Of " + plural(len(limits), "limit", "limits") + ": " + strings.Join(parts, ", ") + "."
}

// lower gives a text a small first letter.
func lower(s string) string {
	if s == "" {
		return s
	}
	r := []rune(s)
	return strings.ToLower(string(r[0])) + string(r[1:])
}
