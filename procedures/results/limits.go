package results

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/uncertainty"
	"kymobench/procedures/verdict"
)

// judge holds the figures of a run against the limits of its procedure.
type judge struct {
	g   *gathered
	s   *scale
	st  staticFigures
	dyn *dynamics
}

// found is a figure ready to be held against a limit: its value in the limit's
// unit, its budget, or why there is none.
type found struct {
	value  float64
	budget *budget
	at     *float64 // set pressure, mmHg
	why    string   // undetermined because
}

func (j *judge) limits() ([]Limit, error) {
	out := []Limit{}
	for _, l := range j.g.definition.Limits {
		judged, err := j.limit(l)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", l.Name, err)
		}
		if judged.Outcome == verdict.Undetermined {
			judged.Value, judged.FalseAccept = nil, nil
		}
		out = append(out, judged)
	}
	return out, nil
}

func (j *judge) limit(l procedures.Limit) (Limit, error) {
	if l.Name == procedures.Accuracy {
		return j.accuracy(l), nil
	}
	f, err := j.find(l.Name)
	if err != nil {
		return Limit{}, err
	}
	return j.hold(l, f, l.Low, l.High), nil
}

// find looks up the figure that a limit is about.
func (j *judge) find(name procedures.LimitName) (found, error) {
	per := 1 / j.s.perMmHg()
	switch name {
	case procedures.ZeroOffset:
		return j.zeroOffset(), nil
	case procedures.Sensitivity:
		return j.sensitivity(), nil
	case procedures.Hysteresis:
		return j.hysteresis(per), nil
	case procedures.NaturalFrequency, procedures.DampingRatio:
		return j.dynamic(name), nil
	}
	return found{why: "this program does not measure it"}, nil
}

func (j *judge) zeroOffset() found {
	z := j.st.zero
	if z == nil {
		return found{why: "the UUT was not read vented before its zeroing"}
	}
	per := 1 / j.s.perMmHg()
	return found{value: (z.y - z.p) * per, budget: j.s.zeroBudget(*z, j.st.noise).scaled(per)}
}

func (j *judge) sensitivity() found {
	st := j.st.static
	switch {
	case st == nil:
		return found{why: "no set pressure was read"}
	case j.s.nominal == 0:
		return found{why: "the UUT puts out pressure; its sensitivity is its channel's affair"}
	case st.Sensitivity == nil:
		return found{why: "the readings give no straight line"}
	case j.st.short != "":
		return found{why: j.st.short}
	}
	slope := st.Slope.Value
	return found{value: st.Sensitivity.Value, budget: j.s.slopeBudget(j.st.points, slope, j.st.noise).scaled(st.Sensitivity.Value)}
}

func (j *judge) hysteresis(per float64) found {
	st := j.st.static
	if st == nil || st.Hysteresis == nil {
		return found{why: "no set pressure was read in both legs"}
	}
	if j.st.short != "" {
		return found{why: j.st.short}
	}
	at := st.Hysteresis.At
	var up, down *taken
	for i, t := range j.st.points {
		if t.set != at {
			continue
		}
		if t.Leg == legDown {
			down = &j.st.points[i]
		} else {
			up = &j.st.points[i]
		}
	}
	if up == nil || down == nil {
		return found{why: "no set pressure was read in both legs"}
	}
	atMmHg := at * per
	return found{value: st.Hysteresis.Largest * per, budget: j.s.hysteresisBudget(*up, *down, j.st.noise).scaled(per), at: &atMmHg}
}

func (j *judge) dynamic(name procedures.LimitName) found {
	combined := j.dyn.combined
	switch {
	case len(j.dyn.all) == 0:
		return found{why: "no step was captured"}
	case !combined.Determined:
		return found{why: "the steps do not determine it: " + fmt.Sprint(combined.Reasons)}
	}
	frequency, damping := j.dyn.budgets(j.s)
	if name == procedures.NaturalFrequency {
		return found{value: combined.Frequency.Value, budget: frequency}
	}
	return found{value: combined.Damping.Value, budget: damping}
}

// hold compares one figure with one pair of bounds.
func (j *judge) hold(l procedures.Limit, f found, low, high *float64) Limit {
	d := j.g.definition.Decision
	out := Limit{
		Name: string(l.Name), Unit: l.Unit, Bounds: Bounds{low, high}, At: f.at, Rule: string(d.Rule), Resolution: l.Resolution,
		Origin: l.Origin, Known: string(l.OriginStatus), Budget: []BudgetLine{},
	}
	if f.why != "" {
		out.Reason = f.why
		return out
	}
	u := f.budget.combine()
	out.Budget = f.budget.lines()
	decision := verdict.Judge(f.value, u.Expanded, u.Standard, u.DegreesOfFreedom,
		verdict.Limit{Low: low, High: high, Resolution: l.Resolution}, d.Rule, d.GuardFactor)
	out.Outcome, out.FalseAccept, out.GuardBand, out.Reason = decision.Outcome, decision.FalseAccept, decision.GuardBand, decision.Reason
	out.Value, out.Expanded, out.Standard, out.Coverage = &f.value, &u.Expanded, &u.Standard, &u.Coverage
	if !math.IsInf(u.DegreesOfFreedom, 1) {
		out.DoF = &u.DegreesOfFreedom
	}
	return out
}

// accuracy holds the error after zeroing of every reading against the limit at
// its set pressure. The largest error by magnitude stands for all, unless the
// outcome of another reading is worse: then that reading does, and the reason
// says so.
func (j *judge) accuracy(l procedures.Limit) Limit {
	st := j.st.static
	if st == nil || st.ErrorAfterZero == nil || len(j.st.points) == 0 {
		return j.hold(l, found{why: "no set pressure was read"}, l.Low, l.High)
	}
	if j.st.short != "" {
		return j.hold(l, found{why: j.st.short}, l.Low, l.High)
	}
	var shown, worst Limit
	var largest, risk float64
	for i := range j.st.points {
		one := j.errorAt(l, j.st.points[i])
		if one.FalseAccept != nil {
			risk = math.Max(risk, *one.FalseAccept)
		}
		if i == 0 || math.Abs(*one.Value) > largest {
			largest, shown = math.Abs(*one.Value), one
		}
		if i == 0 || severity(one.Outcome) > severity(worst.Outcome) {
			worst = one
		}
	}
	if severity(worst.Outcome) > severity(shown.Outcome) {
		worst.Reason = fmt.Sprintf("the reading at %.0f mmHg decides, though the error at %.0f mmHg is larger", *worst.At, *shown.At)
		shown = worst
	}
	if shown.FalseAccept != nil {
		shown.FalseAccept = &risk
	}
	return shown
}

func (j *judge) errorAt(l procedures.Limit, t taken) Limit {
	per := 1 / j.s.perMmHg()
	zero := j.st.points[j.st.first]
	value := (t.y - t.p - (zero.y - zero.p)) * per
	b := j.s.errorBudget(t, zero, j.st.noise).scaled(per)
	at := t.p * per
	if t.hasSet {
		at = t.set * per
	}
	low, high := l.At(quantity.MmHg(at))
	return j.hold(l, found{value: value, budget: b, at: &at}, low, high)
}

// severity orders outcomes from good to bad for one figure of many readings.
func severity(o verdict.Outcome) int {
	switch o {
	case verdict.Pass:
		return 0
	case verdict.ConditionalPass:
		return 1
	case verdict.Undetermined:
		return 2
	case verdict.ConditionalFail:
		return 3
	}
	return 4
}

// curve is every static reading for the error chart.
func (j *judge) curve() []ErrorPoint {
	out := []ErrorPoint{}
	l, limited := j.g.definition.Limit(procedures.Accuracy)
	per := 1 / j.s.perMmHg()
	for _, t := range j.st.points {
		one := j.errorAt(l, t)
		p := ErrorPoint{Set: *one.At, Pressure: t.p * per, Error: *one.Value, Expanded: *one.Expanded, Guard: one.GuardBand, Cycle: t.Cycle, Leg: t.Leg}
		if limited {
			p.Low, p.High = one.Bounds.Low, one.Bounds.High
		}
		out = append(out, p)
	}
	return out
}

// combine is the uncertainty that the budget adds up to.
func (b *budget) combine() uncertainty.Combined { return uncertainty.Combine(b.inputs) }
