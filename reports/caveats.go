package reports

import (
	"fmt"
	"math"
	"strings"
	"time"

	"kymobench/procedures/results"
)

// reservations are all that weakens a result: of the run, of the static
// figures, of the steps, and what the record itself shows. None is left out.
func (g *gathered) reservations(res results.Results, signed time.Time) []Reservation {
	var list []Reservation
	seen := map[string]bool{}
	add := func(about, text string) {
		if text = sentence(capital(oneLine(text))); text != "" && !seen[about+text] {
			seen[about+text] = true
			list = append(list, Reservation{about, text})
		}
	}
	for _, r := range res.Reservations {
		add("run", textOf(r))
	}
	for _, r := range g.noted {
		add("run", textOf(results.Reason{Code: r.Code, Text: r.Text}))
	}
	if res.Static != nil {
		for _, r := range res.Static.Reservations {
			add("static", textOf(r))
		}
	}
	if res.Step != nil {
		for _, r := range res.Step.Reservations {
			add("step", textOf(r))
		}
	}
	for _, f := range g.faults {
		add("bench", "fault of the bench: "+f.Text)
	}
	for _, r := range g.recovered {
		add("record", fmt.Sprintf("the record was taken up again after it had been left open; %d bytes of an unfinished line were set aside", r.Bytes))
	}
	for _, o := range g.overdueList() {
		add("bench", "the certificate of the "+o.of+" was due on "+o.due+", before this run")
	}
	for _, o := range g.overrides {
		add("override", o.Text+"; used all the same, the reason given: \u201c"+oneLine(o.Reason)+"\u201d")
	}
	if signed.Before(g.last.Truncate(time.Second)) {
		add("signature", "by the clocks used, it was signed before the record was closed")
	}
	return list
}

type overdue struct{ of, due string }

// overdueList is the instruments whose certificates had run out.
func (g *gathered) overdueList() []overdue {
	var list []overdue
	if due := g.reference.Certificate.Due; g.overdue(due) {
		list = append(list, overdue{"reference", due})
	}
	if g.readout != nil && g.overdue(g.readout.Due) {
		list = append(list, overdue{"readout", g.readout.Due})
	}
	return list
}

// stamp is what every page says of a run with an overdue certificate.
func (g *gathered) stamp() string {
	list := g.overdueList()
	if len(list) == 0 {
		if len(g.overrides) == 0 {
			return ""
		}
		return "USED UNDER AN OVERRIDE: INCONCLUSIVE AT BEST"
	}
	var parts []string
	for _, o := range list {
		parts = append(parts, strings.ToUpper(o.of)+" SINCE "+o.due)
	}
	return "CERTIFICATE OVERDUE: " + strings.Join(parts, ", ") + " \u2013 INCONCLUSIVE AT BEST"
}

// textOf is a reason's text, or its code in words when it has none.
func textOf(r results.Reason) string {
	if strings.TrimSpace(r.Text) == "" {
		return strings.ReplaceAll(r.Code, "_", " ")
	}
	return r.Text
}

// notTested says what a reader might take for tested and was not.
func (g *gathered) notTested(res results.Results) []string {
	var list []string
	if len(res.Curve) == 0 {
		list = append(list, "Static accuracy: no set pressure was judged.")
	} else {
		low, high := math.Inf(1), math.Inf(-1)
		for _, p := range res.Curve {
			low, high = math.Min(low, p.Set), math.Max(high, p.Set)
		}
		list = append(list, fmt.Sprintf("Accuracy below %s and above %s.", withUnit(stated(low), "mmHg"), withUnit(stated(high), "mmHg")))
	}
	if res.Static != nil && res.Static.Cycles < 2 {
		list = append(list, "Repeatability: it needs two cycles or more.")
	}
	if res.Leak == nil {
		list = append(list, "Leak of bench and UUT.")
	}
	if res.Step == nil {
		list = append(list, "Dynamic response: no step was captured.")
	} else {
		list = append(list, "Dynamic response with any other tubing, fluid or catheter than that on the bench; amplitude response by a direct sine test.")
	}
	done := map[string]bool{}
	for _, s := range g.stages {
		done[s.kind] = s.ended && s.abandoned == ""
	}
	for _, k := range []struct{ kind, text string }{
		{"drift", "Drift over hours and with temperature."},
		{"disturb", "Behaviour when the cable is moved, tapped or exposed to light."},
		{"enter", "Electrical safety: leakage current, insulation, impedance."},
		{"inspect", "Visual condition."},
	} {
		if !done[k.kind] {
			list = append(list, k.text)
		}
	}
	return append(list, "Overpressure, sterility and biological safety.")
}

// warnings are the usual ones of the trade in this project's own words (common
// practice, no source). They are printed whatever a run showed at its start.
func warnings() []string {
	return []string{
		"The bench is never connected to a patient. A monitor under test is taken off the central feed, its alarms are not relied upon, and its filter and zero are put back before it returns to use.",
		"Learn the decontamination status before handling a unit. After an incident with harm the unit is impounded; nothing that could alter evidence is done without authority.",
		"Rated pressure, high and vacuum, and rated excitation are never exceeded. A relief valve and a vent that opens without power belong in the hardware: a program cannot vent after a power cut.",
		"Only regulated, clean air in a small volume, never oxygen. Liquid trap and catch-pot in place; eyes protected against splashes and breaking glass.",
		"Serial lines to a mains-powered computer are isolated, and unplugged for electrical safety tests, which only licensed persons carry out.",
		"A single-use part that was tested is destroyed or marked not for clinical use. Other parts are drained, dried and disinfected before return.",
		"The manufacturer's instructions and local codes prevail over this report.",
	}
}

// scope says what the report may be used for.
func scope(simulated bool) []string {
	list := []string{
		"The results relate only to the item tested, as it was on the bench at the time of the test. They do not say that it is fit for a given patient.",
		"This report is not to be reproduced except in full without the approval of the issuing department.",
		"The complete record of the run and the signed statement are attached to this file; every figure can be recomputed from them.",
		"All times are those of the computer's clock, not verified.",
	}
	if simulated {
		list = append([]string{"The bench was simulated: no physical item was tested. This report is a demonstration and says nothing about any device."}, list...)
	}
	return list
}
