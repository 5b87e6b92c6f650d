package reports

import (
	"fmt"
	"strings"
	"time"
)

// identity is what is known of the UUT.
func (g *gathered) identity() []Row {
	u := g.uut
	var r rows
	r.add("Serial number", u.SerialNumber)
	r.add("Model", u.Model)
	r.add("Lot", u.Lot)
	r.add("Unit under test", u.Is)
	r.add("Output", joined(", ", unitText(u.Field.Unit), before("nominal ", u.NominalSensitivity), before("resolution ", u.Resolution)))
	return r
}

// test is where, when, by whom and by which procedure.
func (g *gathered) test(st Statement, made time.Time) []Row {
	var r rows
	r.add("Run", g.opened.Run)
	r.add("Department", g.opened.Department)
	r.add("Bench", g.opened.Bench)
	r.add("Measured", span(g.first, g.last))
	r.add("Performed by", st.Name)
	if g.opened.Operator != "" && g.opened.Operator != st.Name {
		r.add("At the bench", g.opened.Operator)
	}
	r.add("Signed", made.Format("2006-01-02 15:04:05 ")+zone(made))
	return r
}

// span prints from when to when, and that nobody vouches for the clock.
func span(from, to time.Time) string {
	const day, clock = "2006-01-02", "15:04:05"
	text := from.Format(day + " " + clock)
	if from.Format(day) == to.Format(day) {
		text += " to " + to.Format(clock)
	} else {
		text += " to " + to.Format(day+" "+clock)
	}
	return text + " UTC (computer clock, not verified)"
}

// instruments are those of the bench with certificate and due date.
func (g *gathered) instruments() []Instrument {
	c := g.reference.Certificate
	list := []Instrument{{
		Role: "Reference", Name: g.reference.Name, Identity: identityText(g.reference.Identity),
		Certificate: joined(", ", c.Number, c.Laboratory, c.Date, certified(c.Uncertainty, c.UncertaintyOfReading, c.CoverageFactor)),
		Due:         g.due(c.Due),
	}}
	if r := g.readout; r != nil {
		list = append(list, Instrument{
			Role: "Readout", Name: r.Name, Identity: identityText(r.Identity),
			Certificate: joined(", ", r.Certificate, certified(r.ZeroUncertainty, r.GainUncertainty, r.CoverageFactor)), Due: g.due(r.Due),
		})
	}
	if s := g.source; s != nil {
		list = append(list, Instrument{Role: "Pressure source", Name: s.Name, Identity: identityText(s.Identity), Certificate: "needs none", Due: "\u2013"})
	}
	if v := g.valve; v != nil {
		list = append(list, Instrument{Role: "Valve", Name: v.Name, Identity: identityText(v.Identity), Certificate: "needs none", Due: "\u2013"})
	}
	for i := range list {
		list[i].Name = capital(orNone(list[i].Name, "not named"))
		list[i].Certificate = orNone(list[i].Certificate, "none stated")
	}
	return list
}

func identityText(answered string) string {
	if answered == "" {
		return "cannot be asked"
	}
	return oneLine(answered)
}

// certified puts what a certificate states into words.
func certified(at, share string, k float64) string {
	if k <= 0 {
		return ""
	}
	var parts []string
	if at != "" {
		parts = append(parts, quantityText(at))
	}
	if share != "" {
		parts = append(parts, quantityText(share)+" of reading")
	}
	if len(parts) == 0 {
		return ""
	}
	return "U = " + strings.Join(parts, " and ") + " (k = " + stated(k) + ")"
}

// due prints a due date, and that it had passed when the run began.
func (g *gathered) due(date string) string {
	if date == "" {
		return "none stated"
	}
	if g.overdue(date) {
		return date + ", passed"
	}
	return date
}

func (g *gathered) overdue(date string) bool {
	at, err := time.Parse("2006-01-02", date)
	return err == nil && g.first.After(at.AddDate(0, 0, 1))
}

// conditions under which it was measured, and those that nobody recorded.
func (g *gathered) conditions() []Row {
	u, ref := g.uut, g.reference
	var r rows
	r.add("Ambient temperature, barometer", "not recorded in this run; all pressures are gauge pressures against the vented zero")
	if u.FluidDensity > 0 || u.Fluid != "" {
		density := ""
		if u.FluidDensity > 0 {
			density = stated(u.FluidDensity) + " kg/m³"
		}
		r.add("Fluid in the line", joined(", ", u.Fluid, density))
	}
	if u.Height != "" || ref.Height != "" {
		heights := "UUT " + orUnknown(quantityText(u.Height)) + ", reference " + orUnknown(quantityText(ref.Height)) + " above the bench's datum"
		if u.HeightUncertainty != "" {
			heights += " (standard uncertainty " + quantityText(u.HeightUncertainty) + ")"
		}
		r.add("Heights", heights+"; the head between them is corrected")
	}
	r.add("Excitation", quantityText(u.Excitation))
	if u.SamplePeriod != "" {
		period := quantityText(u.SamplePeriod)
		if u.SamplePeriodTolerance != "" {
			period += " ± " + quantityText(u.SamplePeriodTolerance)
		}
		r.add("Sample period of the UUT", period+", as the bench file states it")
	}
	if g.valve != nil && g.valve.EdgeTime != "" {
		edge := quantityText(g.valve.EdgeTime)
		if g.valve.EdgeTimeTolerance != "" {
			edge += " ± " + quantityText(g.valve.EdgeTimeTolerance)
		}
		r.add("Edge of the step, 10\u201390\u00a0%", edge+", as the bench file states it")
	}
	if ref.ResponseTime != "" {
		r.add("Response time of the reference", quantityText(ref.ResponseTime))
	}
	if ref.Lag != "" {
		r.add("Lag of the reference", quantityText(ref.Lag)+", corrected; standard uncertainty "+quantityText(ref.LagUncertainty))
	}
	r.add("Reference switched on", g.uptime())
	var zeroed []string
	for _, z := range g.zeroings {
		how := z.How
		switch how {
		case "device":
			how = "its own zero function"
		case "arithmetic":
			how = "arithmetic, from the reading before zeroing"
		}
		zeroed = append(zeroed, roleText(z.Role)+" by "+how)
	}
	r.add("Zeroed", strings.Join(zeroed, "; "))
	return r
}

func (g *gathered) uptime() string {
	if g.reference.Uptime == "" {
		return ""
	}
	return g.reference.Uptime + " before the run, as it says itself"
}

func roleText(role string) string {
	if role == "uut" {
		return "UUT"
	}
	return role
}

// procedureRows name the files the run went by.
func (g *gathered) procedureRows() []Row {
	var r rows
	p := g.procedure
	name := p.Title
	if p.ID != "" {
		name += " (" + p.ID + ", revision " + stated(float64(p.Revision)) + ")"
	}
	r.add("Procedure", name)
	r.add("File", p.Name)
	r.add("SHA-256", p.SHA256)
	var done []string
	for _, s := range g.stages {
		if s.ended && s.abandoned == "" {
			done = append(done, kindText(s.kind)+" ("+elapsed(s.end.Sub(s.begin))+")")
		}
	}
	r.add("Stages carried out", strings.Join(done, ", "))
	r.add("Bench file", joined(", SHA-256 ", g.benchFile.Name, g.benchFile.SHA256))
	r.add("Measured and computed by", g.opened.Program)
	if g.warnings != nil {
		answer := g.warnings.Acknowledged
		if answer == "" {
			answer = "acknowledged with the enter key"
		} else {
			answer = "acknowledged with \u201c" + answer + "\u201d"
		}
		r.add("Safety warnings at the start", answer)
	}
	return r
}

// deviations are additions to, deviations and exclusions from the procedure.
func (g *gathered) deviations() []string {
	var list []string
	for _, s := range g.stages {
		switch {
		case s.abandoned != "":
			list = append(list, sentence("Stage "+stated(float64(s.number))+" ("+kindText(s.kind)+") was abandoned: "+oneLine(s.abandoned)))
		case !s.ended:
			list = append(list, sentence("Stage "+stated(float64(s.number))+" ("+kindText(s.kind)+") has no end in the record"))
		}
	}
	if !g.finished.Complete {
		why := oneLine(g.finished.Text)
		if why == "" {
			why = "no reason recorded"
		}
		list = append(list, sentence("The procedure was not carried out to its end: "+why))
	}
	if len(list) == 0 {
		list = append(list, "None: every stage was carried out as the procedure states it.")
	}
	return list
}

// kindText is a stage in words.
func kindText(kind string) string {
	switch kind {
	case "static":
		return "set pressures"
	case "step":
		return "step response"
	case "zero":
		return "zeroing"
	case "leak":
		return "leak test"
	}
	return strings.ReplaceAll(kind, "_", "-")
}

// elapsed prints how long a stage took: "42 s", "3 min 5 s".
func elapsed(d time.Duration) string {
	s := int(d.Round(time.Second).Seconds())
	if s < 60 {
		return fmt.Sprintf("%d\u00a0s", s)
	}
	return fmt.Sprintf("%d\u00a0min\u00a0%d\u00a0s", s/60, s%60)
}

// joined joins the texts that are not empty.
func joined(between string, texts ...string) string {
	var some []string
	for _, t := range texts {
		if t != "" {
			some = append(some, t)
		}
	}
	return strings.Join(some, between)
}

// before puts a word before a quantity that is stated.
func before(word, text string) string {
	if text == "" {
		return ""
	}
	return word + quantityText(text)
}

func orUnknown(text string) string { return orNone(text, "not stated") }

func orNone(text, none string) string {
	if text == "" {
		return none
	}
	return text
}
