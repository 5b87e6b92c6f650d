package results

import (
	"fmt"
	"math"
	"strings"
	"time"

	"kymobench/bench/quantity"
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
	dyn, steps, err := g.stepResults(s, &st)
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
	if r.Step != nil {
		r.Step.Stopping = j.open(r.Limits)
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
	settings := ready.LeakSettings{Amplitude: 5, ShortestTau: 0.5, LongestTau: 90}
	if g.definition != nil {
		for _, stage := range g.definition.Stages {
			if l, ok := stage.(procedures.Leak); ok {
				out.Highest = l.HighestRate.MmHg()
				settings.Amplitude, settings.LongestTau = l.Relaxation.MmHg(), l.LongestTau.Seconds()
			}
		}
	}
	settings.Wanted = out.Highest / 4
	settings.Noise = uncertainty.FromFullWidth(s.resolutionReference / s.perMmHg())
	if keep, n := withoutOutliersOfTrend(t, p, s.resolutionReference/s.perMmHg()); n > 0 {
		t, p = kept(t, keep), kept(p, keep)
		g.outliers += n
	}
	fitted, err := ready.LeakRate(t, p, settings)
	if err != nil {
		out.Reason = err.Error()
		return out, nil
	}
	out.Seconds = t[len(t)-1] - t[0]
	return out, out.judge(h, fitted, p)
}

// judge holds the loss against what is allowed, the bench's own taken off. A
// loss that is known less well than to what is allowed is no figure: a straight
// line would make one of warming.
func (l *Leak) judge(h record.Hold, fitted ready.Leak, p []float64) error {
	u := &budget{}
	u.add("fit of the hold", fromRun, studentT, "mmHg/s", fitted.Standard, 1, fitted.DoF)
	net := fitted
	if h.OwnRate != "" {
		own, err := quantity.ParsePressureRate(h.OwnRate)
		if err != nil {
			return fmt.Errorf("the bench's own leak: %w", err)
		}
		uOwn, err := quantity.ParsePressureRate(h.OwnRateUncertainty)
		if err != nil {
			return fmt.Errorf("the uncertainty of the bench's own leak: %w", err)
		}
		rate := quantity.Pressure(own).MmHg()
		l.Own = &rate
		net = fitted.Less(ready.Leak{Rate: rate, Standard: quantity.Pressure(uOwn).MmHg()}, 1, 0)
		u.add("bench's own leak", fromBench, normal, "mmHg/s", quantity.Pressure(uOwn).MmHg(), 1, 0)
	}
	expanded := uncertainty.Combine(u.inputs()).Expanded
	beyond := net.Rate-expanded > l.Highest
	if expanded <= l.Highest || beyond {
		l.Rate, l.Expanded = &net.Rate, &expanded
		l.flow(h, net, p, expanded/net.Standard)
	}
	switch {
	case beyond:
		l.Reason = fmt.Sprintf("the pressure falls by %.3f mmHg/s at %.0f mmHg, more than the %.3g mmHg/s allowed; without a bench check rig and UUT cannot be told apart", net.Rate, l.Set, l.Highest)
	case net.Rate+expanded > l.Highest:
		l.Reason = fmt.Sprintf("the loss is known to %.3f mmHg/s only, where %.3g mmHg/s are allowed: %s", expanded, l.Highest, notSeparable(fitted))
	default:
		l.Within = true
	}
	return nil
}

// notSeparable says what the loss cannot be told from, and what would help.
func notSeparable(f ready.Leak) string {
	from := "noise"
	if f.Warming > 3 {
		from = "warming"
	}
	help := "wait longer before the hold, or make the pressure more slowly"
	if f.LongerHold > 0 && !math.IsInf(f.LongerHold, 1) {
		help = fmt.Sprintf("a hold of %.0f s would do, or a longer wait before it", f.LongerHold)
	}
	return "not separable from " + from + " yet; " + help
}

// atmosphere in mmHg, the standard one, stands for the room's: 5 % of it would
// change a flow at 300 mmHg by 4 %.
const atmosphere = 760.0

// flow puts the loss into gas that leaves, if the volume is stated.
func (l *Leak) flow(h record.Hold, net ready.Leak, p []float64, coverage float64) {
	number, ok := strings.CutSuffix(h.Volume, " mL")
	volume, err := quantity.ParseDecimal(number)
	if !ok || err != nil {
		return
	}
	q, standard := net.VolumeRate(volume, 0, atmosphere+p[0])
	q, standard = q*60, standard*60*coverage
	l.Volume, l.Flow, l.FlowExpanded = &volume, &q, &standard
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
