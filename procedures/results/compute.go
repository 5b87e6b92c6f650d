package results

import (
	"fmt"
	"time"

	"kymobench/procedures"
	"kymobench/procedures/ready"
	"kymobench/procedures/record"
	"kymobench/procedures/uncertainty"
	"kymobench/procedures/verdict"
)

// Compute works out everything that the events of a record say. It is the only
// source of a result. A record that does not hold together is an error; data
// that cannot carry a figure leave it undetermined, with the reason.
func Compute(events []record.Event) (Results, error) {
	g, err := gather(events)
	if err != nil {
		return Results{}, err
	}
	return g.compute()
}

// compute works out what was gathered.
func (g *gathered) compute() (Results, error) {
	s, err := newScale(g)
	if err != nil {
		return Results{}, err
	}
	r := Results{Reasons: []Reason{}, Limits: []Limit{}, Reservations: append([]Reason{}, g.reservations...), Curve: []ErrorPoint{}, Budgets: []Budget{}, Traces: []StepTrace{}}
	st, err := g.staticResults(s)
	if err != nil {
		return Results{}, err
	}
	r.Static = st.static
	dyn, steps, err := g.stepResults(s)
	if err != nil {
		return Results{}, err
	}
	r.Step, r.Traces = steps, traces(dyn.all)
	if r.Leak, err = g.leak(s); err != nil {
		return Results{}, err
	}
	if g.outliers > 0 {
		r.Reservations = append(r.Reservations, Reason{"outliers", fmt.Sprintf("%d readings that lie far from their neighbours, as a byte damaged on the line makes them, were left out", g.outliers)})
	}
	for _, m := range st.measured(s) {
		b, err := m.stated(g.seed())
		if err != nil {
			return Results{}, err
		}
		r.Budgets = append(r.Budgets, b)
	}
	r.NotStated = g.notStated(s)
	if g.definition == nil {
		return r, nil
	}
	j := &judge{g: g, s: s, st: st, dyn: dyn}
	if r.Limits, err = j.limits(); err != nil {
		return Results{}, err
	}
	if r.Curve, err = j.curve(); err != nil {
		return Results{}, err
	}
	r.Verdict, r.Reasons = j.verdict(r.Limits)
	return r, nil
}

// leak fits the hold. The limit is the procedure's.
func (g *gathered) leak(s *scale) (*Leak, error) {
	if len(g.holds) == 0 {
		return nil, nil
	}
	h := g.holds[len(g.holds)-1]
	var t, p []float64
	for _, n := range h.Readings {
		reading, ok := g.readings[n]
		if !ok {
			return nil, fmt.Errorf("the hold names line %d, which is no reading", n)
		}
		value, _, err := s.reference(reading.Text)
		if err != nil {
			return nil, fmt.Errorf("reference reading in line %d: %w", n, err)
		}
		t, p = append(t, reading.middle()), append(p, value/s.perMmHg())
	}
	r := reader{}
	out := &Leak{Set: r.stated(h.Set, mmHg())}
	if r.err != nil {
		return nil, r.err
	}
	if g.definition != nil {
		for _, stage := range g.definition.Stages {
			if l, ok := stage.(procedures.Leak); ok {
				out.Highest = l.HighestRate.MmHg()
			}
		}
	}
	if keep, n := withoutOutliersOfTrend(t, p, s.resolutionReference/s.perMmHg()); n > 0 {
		t, p = kept(t, keep), kept(p, keep)
		g.outliers += n
	}
	fitted, err := ready.LeakRate(t, p)
	if err != nil {
		out.Reason = err.Error()
		return out, nil
	}
	out.Seconds = t[len(t)-1] - t[0]
	u := &budget{}
	u.add("fit of the hold", fromRun, studentT, "mmHg/s", fitted.Standard, 1, fitted.DoF)
	expanded := uncertainty.Combine(u.inputs()).Expanded
	out.Rate, out.Expanded = &fitted.Rate, &expanded
	switch {
	case fitted.Rate-expanded > out.Highest:
		out.Reason = fmt.Sprintf("the pressure falls by %.3f mmHg/s at %.0f mmHg, more than the %.3g mmHg/s allowed; without a bench check rig and UUT cannot be told apart", fitted.Rate, out.Set, out.Highest)
	case fitted.Rate+expanded > out.Highest:
		out.Reason = fmt.Sprintf("the loss of %.3f +- %.3f mmHg/s cannot be told from the %.3g mmHg/s allowed: not separable from warming yet", fitted.Rate, expanded, out.Highest)
	default:
		out.Within = true
	}
	return out, nil
}

// verdict turns outcomes and faults into the run's verdict and its reasons.
func (j *judge) verdict(limits []Limit) (verdict.Verdict, []Reason) {
	reasons := []Reason{}
	fault := false
	for _, f := range j.g.faults {
		fault = true
		reasons = append(reasons, f)
	}
	if f := j.g.finished; f == nil || !f.Complete {
		if !fault {
			reasons = append(reasons, Reason{"incomplete", "the run was not finished"})
		}
		fault = true
	}
	if doubt, ok := j.doubtfulUnit(); ok {
		fault = true
		reasons = append(reasons, doubt)
	}
	outcomes := make([]verdict.Outcome, 0, len(limits))
	for _, l := range limits {
		outcomes = append(outcomes, l.Outcome)
		// What a stopped run did not measure needs no reason of its own.
		if l.Outcome != verdict.Pass && !(fault && l.Outcome == verdict.Undetermined) {
			reasons = append(reasons, Reason{l.Name, l.told()})
		}
	}
	d := j.g.definition.Decision
	v := verdict.Overall(outcomes, fault, d.ConditionalPass, d.ConditionalFail)
	if overdue := j.g.overdue(); len(overdue) > 0 {
		reasons = append(reasons, overdue...)
		if v == verdict.Accepted {
			v = verdict.Inconclusive
		}
	}
	return v, reasons
}

// CertificateOverdue is the code of an override, and of the reason why a run
// with an instrument past its due date is inconclusive at best.
const CertificateOverdue = "certificate_overdue"

// overdue lists the certificates that were past their due date when the run
// began, whether or not somebody gave a reason for it.
func (g *gathered) overdue() []Reason {
	var out []Reason
	for _, c := range g.certificates() {
		day, err := time.Parse(time.DateOnly, c.due)
		if err != nil || g.began.IsZero() || g.began.Before(day.AddDate(0, 0, 1)) {
			continue
		}
		text := fmt.Sprintf("the certificate of the %s was due on %s: inconclusive at best", c.of, c.due)
		out = append(out, Reason{CertificateOverdue, text})
	}
	for _, o := range g.overrides {
		if len(out) == 0 {
			out = append(out, Reason{o.Code, o.Text})
		}
	}
	return out
}

type certificate struct{ of, date, due string }

func (g *gathered) certificates() []certificate {
	var out []certificate
	if g.reference != nil {
		out = append(out, certificate{"reference", g.reference.Certificate.Date, g.reference.Certificate.Due})
	}
	if g.readout != nil {
		out = append(out, certificate{"readout", "", g.readout.Due})
	}
	return out
}

// told says in words how a limit came out.
func (l Limit) told() string {
	if l.Value == nil || l.Outcome == verdict.Undetermined {
		return fmt.Sprintf("%s is undetermined: %s", l.Name, l.Reason)
	}
	return fmt.Sprintf("%s %.4g +- %.2g %s against %s: %s", l.Name, *l.Value, *l.Expanded, l.Unit, l.Bounds, l.Outcome)
}

// String says the bounds in words. Neither side is that of a band, which has
// its limits at each set pressure.
func (b Bounds) String() string {
	switch {
	case b.Low == nil && b.High == nil:
		return "by set pressure"
	case b.Low == nil:
		return fmt.Sprintf("at most %.4g", *b.High)
	case b.High == nil:
		return fmt.Sprintf("at least %.4g", *b.Low)
	}
	return fmt.Sprintf("%.4g to %.4g", *b.Low, *b.High)
}
