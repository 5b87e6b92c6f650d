package results

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/fit"
	"kymobench/procedures/verdict"
)

// judge holds the figures of a run against the limits of its procedure.
type judge struct {
	g   *gathered
	s   *scale
	st  staticFigures
	dyn *dynamics
}

// found is a figure ready to be held against a limit: in the limit's unit, its
// set pressure in mmHg, or why there is none.
type found struct {
	measured
	why string // undetermined because
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
		return j.accuracy(l)
	}
	f, err := j.find(l.Name)
	if err != nil {
		return Limit{}, err
	}
	return j.hold(l, f, l.Low, l.High)
}

// find looks up the figure that a limit is about.
func (j *judge) find(name procedures.LimitName) (found, error) {
	switch name {
	case procedures.NaturalFrequency, procedures.DampingRatio:
		return j.dynamic(name), nil
	case procedures.ZeroOffset:
		if j.st.zero == nil {
			return found{why: "the UUT was not read vented before its zeroing"}, nil
		}
		m, _ := j.st.zeroOffset(j.s)
		return j.inMmHg(m), nil
	}
	if why := j.unread(name); why != "" {
		return found{why: why}, nil
	}
	var m measured
	ok := false
	switch name {
	case procedures.Sensitivity:
		if m, ok = j.st.sensitivity(j.s); ok {
			return found{measured: m}, nil
		}
	case procedures.Hysteresis:
		m, ok = j.st.hysteresis(j.s)
	case procedures.Noise:
		m, ok = j.st.roughness(j.s)
	case procedures.ZeroReturn:
		m, ok = farthest(j.st.zeroReturns(j.s))
	case procedures.Repeatability:
		m, ok = named(j.st.repeatability(j.s), FigureRepeatability)
	default:
		m, ok = named(j.st.linearities(j.s), string(name))
	}
	if !ok {
		return found{why: j.missing(name)}, nil
	}
	return j.inMmHg(m), nil
}

// unread says why no static figure can be judged.
func (j *judge) unread(name procedures.LimitName) string {
	st := j.st.static
	switch {
	case st == nil:
		return "no set pressure was read"
	case name == procedures.Sensitivity && j.s.nominal == 0:
		return "the UUT puts out pressure; its sensitivity is its channel's affair"
	}
	return j.st.short
}

// missing says why the readings do not give a figure.
func (j *judge) missing(name procedures.LimitName) string {
	figure := map[procedures.LimitName]string{
		procedures.Sensitivity: fit.FigureLine, procedures.Hysteresis: fit.FigureHysteresis, procedures.ZeroReturn: fit.FigureZeroReturn,
		procedures.Repeatability: fit.FigureRepeatability, procedures.LinearityIndependent: fit.FigureLinearity,
		procedures.LinearityTerminal: fit.FigureLinearity, procedures.LinearityZeroBased: fit.FigureLinearity,
		procedures.LinearityLeastSquares: fit.FigureLinearity,
	}[name]
	for _, u := range j.st.figures.Undetermined {
		if u.Figure == figure {
			return u.Reason
		}
	}
	return "the readings do not give it"
}

// farthest is the figure with the largest value by magnitude.
func farthest(all []measured) (measured, bool) {
	var out measured
	for i, m := range all {
		if i == 0 || math.Abs(m.value) > math.Abs(out.value) {
			out = m
		}
	}
	return out, len(all) > 0
}

func named(all []measured, figure string) (measured, bool) {
	for _, m := range all {
		if m.figure == figure {
			return m, true
		}
	}
	return measured{}, false
}

// inMmHg turns a figure in the scale's unit into one in mmHg.
func (j *judge) inMmHg(m measured) found {
	per := 1 / j.s.perMmHg()
	m.value *= per
	m.budget = m.budget.scaled(per)
	if m.set != nil {
		at := *m.set * per
		m.set = &at
	}
	return found{measured: m}
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
		return found{measured: measured{value: combined.Frequency.Value, budget: frequency}}
	}
	return found{measured: measured{value: combined.Damping.Value, budget: damping}}
}

// hold compares one figure with one pair of bounds.
func (j *judge) hold(l procedures.Limit, f found, low, high *float64) (Limit, error) {
	d := j.g.definition.Decision
	out := Limit{
		at:   -1,
		Name: string(l.Name), Unit: l.Unit, Bounds: Bounds{low, high}, At: f.set, Rule: string(d.Rule), Resolution: l.Resolution,
		Origin: l.Origin, Known: string(l.OriginStatus), Budget: []BudgetLine{},
	}
	if f.why != "" {
		out.Reason = f.why
		return out, nil
	}
	out.Budget = f.budget.lines()
	if f.budget.why != "" {
		out.Reason = f.budget.why
		return out, nil
	}
	u, err := f.budget.sum(j.g.seed())
	if err != nil {
		return out, err
	}
	decision := verdict.Decide(f.value, &u, verdict.Limit{Low: low, High: high, Resolution: l.Resolution}, d.Rule, d.GuardFactor)
	out.Outcome, out.GuardBand, out.Reason = decision.Outcome, decision.GuardBand, decision.Reason
	switch decision.Outcome {
	case verdict.Pass, verdict.ConditionalPass:
		out.FalseAccept = &decision.WrongAccept
	case verdict.Fail, verdict.ConditionalFail:
		out.FalseReject = &decision.WrongReject
	}
	if decision.Needed > 0 {
		out.Needed = &decision.Needed
	}
	out.Value, out.Expanded, out.Standard, out.Coverage, out.Sampled = &f.value, &u.Expanded, &u.Standard, &u.Coverage, sampledOf(u)
	if !math.IsInf(u.DegreesOfFreedom, 1) {
		out.DoF = &u.DegreesOfFreedom
	}
	return out, nil
}

// accuracy holds the error after zeroing of every reading against the limit at
// its set pressure. The largest error by magnitude stands for all, unless the
// outcome of another reading is worse: then that reading does, and the reason
// says so.
func (j *judge) accuracy(l procedures.Limit) (Limit, error) {
	if why := j.unread(l.Name); why != "" {
		return j.hold(l, found{why: why}, l.Low, l.High)
	}
	var shown, worst Limit
	var largest, risk float64
	some := false
	for i := range j.st.points {
		if counts(j.st.errorOf([]int{i})) == 0 {
			continue // the zero, where the error is zero by definition
		}
		one, err := j.errorAt(l, i)
		if err != nil {
			return one, err
		}
		if one.Value == nil {
			return one, nil
		}
		one.at = i
		if one.FalseAccept != nil {
			risk = math.Max(risk, *one.FalseAccept)
		}
		if !some || math.Abs(*one.Value) > largest {
			largest, shown = math.Abs(*one.Value), one
		}
		if !some || severity(one.Outcome) > severity(worst.Outcome) {
			worst = one
		}
		some = true
	}
	if !some {
		return j.hold(l, found{why: "nothing but the zero was read"}, l.Low, l.High)
	}
	if severity(worst.Outcome) > severity(shown.Outcome) {
		text := fmt.Sprintf("the reading at %.0f mmHg decides, though the error at %.0f mmHg is larger", *worst.At, *shown.At)
		if worst.Reason != "" {
			text += ": " + worst.Reason
		}
		worst.Reason = text
		shown = worst
	}
	if shown.FalseAccept != nil {
		shown.FalseAccept = &risk
	}
	return shown, nil
}

// errorAt holds the error of one reading against the limit at its set pressure.
func (j *judge) errorAt(l procedures.Limit, i int) (Limit, error) {
	f := j.inMmHg(j.st.errorAt(j.s, i))
	low, high := l.At(quantity.MmHg(*f.set))
	return j.hold(l, f, low, high)
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
func (j *judge) curve() ([]ErrorPoint, error) {
	out := []ErrorPoint{}
	l, limited := j.g.definition.Limit(procedures.Accuracy)
	d := j.g.definition.Decision
	for i := range j.st.points {
		t := &j.st.points[i]
		f := j.inMmHg(j.st.errorAt(j.s, i))
		p := ErrorPoint{Set: *f.set, Pressure: t.p / j.s.perMmHg(), Error: f.value, Cycle: t.Cycle, Leg: t.Leg}
		if f.budget.why == "" {
			u, err := f.budget.sum(j.g.seed())
			if err != nil {
				return nil, err
			}
			p.Expanded = u.Expanded
		}
		if limited {
			p.Low, p.High = l.At(quantity.MmHg(*f.set))
			p.Guard = d.GuardFactor * p.Expanded
		}
		out = append(out, p)
	}
	return out, nil
}
