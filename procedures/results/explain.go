package results

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/verdict"
)

// Explain lays out one limit of a record: from the texts received through unit,
// correction, head, zero and figure to budget, guard band and outcome. rules
// are other limits to judge by; nil for the record's own.
func Explain(events []record.Event, rules *procedures.Rules, name string) (Explanation, error) {
	g, err := gather(events)
	if err != nil {
		return Explanation{}, err
	}
	if rules != nil {
		if err := g.under(rules); err != nil {
			return Explanation{}, err
		}
	}
	if g.definition == nil {
		return Explanation{}, fmt.Errorf("the record names no procedure, so it has no limits")
	}
	l, ok := g.definition.Limit(procedures.LimitName(name))
	if !ok {
		var names []string
		for _, l := range g.definition.Limits {
			names = append(names, string(l.Name))
		}
		return Explanation{}, fmt.Errorf("there is no limit for %q: there are %s", name, strings.Join(names, ", "))
	}
	s, err := newScale(g)
	if err != nil {
		return Explanation{}, err
	}
	st, err := g.staticResults(s)
	if err != nil {
		return Explanation{}, err
	}
	dyn, _, err := g.stepResults(s, &st)
	if err != nil {
		return Explanation{}, err
	}
	j := &judge{g: g, s: s, st: st, dyn: dyn}
	judged, err := j.limit(l)
	if err != nil {
		return Explanation{}, err
	}
	e := &explainer{judge: j, l: l, out: Explanation{Limit: name, Outcome: judged.Outcome.String()}, sens: map[string]term{}, given: map[string]term{}}
	e.explain(judged)
	return e.out, nil
}

// explainer writes an explanation.
type explainer struct {
	*judge
	l      procedures.Limit
	out    Explanation
	laid   laid
	factor float64
	sens   map[string]term // sensitivities as calculated
	given  map[string]term // what this run says of the scatter, as calculated
	u      term            // the combined standard uncertainty, likewise
}

// section writes one section.
func (e *explainer) section(title string, write func(*sheet)) {
	s := &sheet{Section{Title: title, Steps: []Workings{}}}
	write(s)
	e.out.Sections = append(e.out.Sections, s.section)
}

func (e *explainer) explain(judged Limit) {
	f, err := e.explained(judged)
	if err != nil || f.why != "" {
		e.section("outcome", func(s *sheet) { s.say("undetermined", judged.Reason) })
		return
	}
	var value term
	switch {
	case f.weights != nil || f.figure == FigureZeroOffset:
		value = e.readings(f)
	default:
		e.section("figure", func(s *sheet) {
			e.whence(s, f)
			value = figure(f.value)
			s.say("value", value.text+" "+e.l.Unit)
		})
	}
	e.factor = f.factor
	if e.factor == 0 {
		e.factor = 1
	}
	if e.budgeted(f, judged) {
		e.decided(f, judged, value)
	}
}

// explained finds the figure again that the limit was decided by.
func (e *explainer) explained(judged Limit) (found, error) {
	if e.l.Name != procedures.Accuracy {
		return e.find(e.l.Name)
	}
	if why := e.unread(e.l.Name); why != "" {
		return found{why: why}, nil
	}
	if judged.at < 0 {
		return found{why: judged.Reason}, nil
	}
	return e.inMmHg(e.st.errorAt(e.s, judged.at)), nil
}

// whence says where a figure comes from that is no sum over points.
func (e *explainer) whence(s *sheet, f found) {
	switch e.l.Name {
	case procedures.NaturalFrequency, procedures.DampingRatio:
		for i, c := range e.dyn.all {
			for _, st := range c.steps {
				if !st.Determined {
					s.say(fmt.Sprintf("capture %d", i+1), "undetermined: "+strings.Join(st.Reasons, ", "))
					continue
				}
				x := st.Frequency
				if e.l.Name == procedures.DampingRatio {
					x = st.Damping
				}
				s.say(fmt.Sprintf("capture %d, lines %d to %d", i+1, c.Blocks[0], c.Blocks[len(c.Blocks)-1]),
					fmt.Sprintf("a fit to its samples, not by hand: %s %s, standard uncertainty %s", plain(x.Value, shown), e.l.Unit, plain(x.StandardUncertainty, 6)))
			}
		}
		s.say("together", fmt.Sprintf("the captures are combined by their uncertainties and their scatter, not by hand: standard uncertainty %s", plain(f.budget.entries[0].Standard, shown)))
		for _, in := range f.budget.entries[1:] {
			s.say(in.Name, plain(in.Standard, shown))
		}
	case procedures.Noise:
		var terms, dofs []term
		for i := range e.st.points {
			t := &e.st.points[i]
			v := figure(t.vRaw * square(1/e.s.perMmHg()))
			dof := figure(t.dofRaw)
			s.say(pointName(t), fmt.Sprintf("%d samples, variance about their slope %s mmHg^2, %s degrees of freedom", t.nY, v.text, dof.text))
			terms, dofs = append(terms, times(dof, v)), append(dofs, dof)
		}
		sd := s.calculate("pooled standard deviation", root(over(term{plus(terms...).text, sum(terms), 0}, term{plus(dofs...).text, sum(dofs), 0})), e.l.Unit)
		for _, in := range f.budget.entries {
			s.say(in.Name, fmt.Sprintf("divided by %s, the root of twice the degrees of freedom; neighbours that vary together leave fewer than there are samples", plain(in.divisor, shown)))
		}
		if n := e.s.noiseOf / e.s.perMmHg(); n > 0 {
			s.calculate("less half of what the readout's own noise may be, in squares", root(minus(power(sd, 2), over(power(figure(n), 2), figure(2)))), e.l.Unit)
		}
	case procedures.Repeatability:
		s.say("range", "the largest difference of residuals about the least-squares line between cycles, at one set pressure in one leg")
	}
}

func square(x float64) float64 { return x * x }

func pointName(t *taken) string {
	if t.Purpose == "zero" {
		return "the reading before zeroing"
	}
	return fmt.Sprintf("cycle %d, %s at %s", t.Cycle, t.Leg, t.Set)
}

// readings explains a figure that is a sum over points: each from its texts,
// then the sum.
func (e *explainer) readings(f found) term {
	points, w := e.st.points, f.weights
	if f.figure == FigureZeroOffset {
		points, w = []taken{*e.st.zero}, []weight{{0, 1}}
	}
	w = slices.DeleteFunc(slices.Clone(w), func(x weight) bool { return math.Abs(x.g) < 1e-9 })
	ps, ys := make([]term, len(w)), make([]term, len(w))
	e.section("head and correction", func(s *sheet) { e.stated(s) })
	for k, x := range w {
		t := &points[x.i]
		e.section(pointName(t), func(s *sheet) { ps[k], ys[k] = e.point(s, t) })
	}
	var out term
	e.section("figure", func(s *sheet) { out = e.combined(s, f, points, w, ps, ys) })
	e.laid = laid{points, w, ps, ys}
	return out
}

// combined adds the points up to the figure.
func (e *explainer) combined(s *sheet, f found, points []taken, w []weight, ps, ys []term) term {
	unit := e.s.unit.Name
	errors := make([]term, len(w))
	for _, x := range w {
		if g := figure(x.g); math.Abs(g.v) != 1 && f.figure != FigureSensitivity {
			s.say("how much counts "+pointName(&points[x.i]), g.text)
		}
	}
	for k, x := range w {
		errors[k] = s.calculate("UUT less reference, "+pointName(&points[x.i]), minus(ys[k], ps[k]), unit)
	}
	var out term
	switch {
	case f.figure == FigureSensitivity:
		out = e.slopeTerm(s, ps, ys)
	case f.figure == FigureHysteresis || f.figure == FigureZeroReturn:
		b := figure(e.st.slope)
		s.say("slope of the least-squares line", b.text)
		rest := make([]term, len(w))
		for k, x := range w {
			rest[k] = s.calculate("UUT less slope x reference, "+pointName(&points[x.i]), minus(ys[k], times(b, ps[k])), unit)
		}
		out = s.calculate(strings.ReplaceAll(f.figure, "_", " ")+", down less up", weighted(w, rest), unit)
	case strings.HasPrefix(f.figure, "linearity"):
		b := figure(e.st.slope)
		s.say("slope of the least-squares line", b.text)
		rest := make([]term, len(w))
		for k, x := range w {
			t := &points[x.i]
			rest[k] = s.calculate("UUT less slope x (reference less set pressure), "+pointName(t),
				minus(ys[k], times(b, term{minus(ps[k], figure(e.st.levels[t.level])).text, ps[k].v - e.st.levels[t.level], 0})), unit)
		}
		s.say("line", "the points that lie farthest from the line, and those it is drawn through, count as follows")
		out = s.calculate(strings.ReplaceAll(f.figure, "_", " "), weighted(w, rest), unit)
	default:
		out = s.calculate(strings.ReplaceAll(f.figure, "_", " "), weighted(w, errors), unit)
	}
	if unit != e.l.Unit && f.figure != FigureSensitivity {
		out = s.calculate("in "+e.l.Unit, over(out, figure(e.s.perMmHg())), e.l.Unit)
	}
	e.agrees(s, out, f.value)
	return out
}

// agrees says whether the arithmetic gives what the program has.
func (e *explainer) agrees(s *sheet, t term, value float64) {
	word := "agrees"
	if math.Abs(t.v-value) > 1e-6*math.Max(1, math.Abs(value)) {
		word = "DIFFERS"
	}
	s.say("as the program has it", fmt.Sprintf("%s %s: %s", plain(value, shown), e.l.Unit, word))
}

// weighted is Sum g x.
func weighted(w []weight, x []term) term {
	var out []term
	for k := range w {
		switch w[k].g {
		case 1:
			out = append(out, x[k])
		case -1:
			if len(out) > 0 {
				out = []term{minus(plus(out...), x[k])}
				continue
			}
			out = append(out, times(figure(-1), x[k]))
		default:
			out = append(out, times(figure(w[k].g), x[k]))
		}
	}
	return plus(out...)
}

// slopeTerm is the least-squares slope over the points, times the nominal
// sensitivity.
func (e *explainer) slopeTerm(s *sheet, ps, ys []term) term {
	n := figure(float64(len(ps)))
	mp := s.calculate("mean of the reference", over(term{plus(ps...).text, sum(ps), 0}, n), e.s.unit.Name)
	my := s.calculate("mean of the UUT", over(term{plus(ys...).text, sum(ys), 0}, n), e.s.unit.Name)
	var above, below []term
	for k := range ps {
		dp := s.calculate(fmt.Sprintf("reference less its mean, %d", k+1), minus(ps[k], mp), e.s.unit.Name)
		dy := s.calculate(fmt.Sprintf("UUT less its mean, %d", k+1), minus(ys[k], my), e.s.unit.Name)
		above, below = append(above, times(dp, dy)), append(below, power(dp, 2))
	}
	slope := s.calculate("slope", over(term{plus(above...).text, sum(above), 0}, term{plus(below...).text, sum(below), 0}), "1")
	return s.calculate("sensitivity: slope x nominal sensitivity", times(slope, figure(*e.st.static.NominalUsed)), e.l.Unit)
}

// decided explains bounds, guard band, outcome and risk.
func (e *explainer) decided(f found, judged Limit, value term) {
	d := e.g.definition.Decision
	e.section("decision", func(s *sheet) {
		s.say("rule", strings.ReplaceAll(string(d.Rule), "_", " "))
		low, high := e.bounds(s, f, judged)
		rounded := s.calculate(fmt.Sprintf("value, rounded to %s", plain(e.l.Resolution, shown)),
			times(figure(math.Round(value.v/e.l.Resolution)), figure(e.l.Resolution)), e.l.Unit)
		guard := s.calculate("guard band: factor x expanded uncertainty", times(figure(factorOf(d)), figure(*judged.Expanded)), e.l.Unit)
		if low != nil {
			s.calculate("room above the lower side", minus(rounded, *low), e.l.Unit)
		}
		if high != nil {
			s.calculate("room below the upper side", minus(*high, rounded), e.l.Unit)
		}
		s.say("outcome", outcomeSaid(judged, guard.text+" "+e.l.Unit))
		for _, side := range []struct {
			name  string
			bound *term
			sign  float64
		}{{"lower", low, -1}, {"upper", high, 1}} {
			if side.bound == nil || judged.Standard == nil || !(*judged.Standard > 0) {
				continue
			}
			t := minus(*side.bound, value)
			if side.sign < 0 {
				t = minus(value, *side.bound)
			}
			s.calculate("standard uncertainties from the "+side.name+" side", over(term{t.text, t.v, 0}, e.u), "")
		}
		if judged.FalseAccept != nil {
			s.say("risk", fmt.Sprintf("%s: the probability, by Student's t beyond both sides, that the true value lies outside the limit although it was passed; flat prior, about this result alone",
				plain(*judged.FalseAccept, 4)))
		}
	})
}

func factorOf(d procedures.Decision) float64 {
	if d.Rule == verdict.Simple {
		return 0
	}
	return d.GuardFactor
}

// bounds writes the sides of the limit at the figure's set pressure.
func (e *explainer) bounds(s *sheet, f found, judged Limit) (low, high *term) {
	if b, ok := e.l.BandAt(f.set); ok {
		width := s.calculate(fmt.Sprintf("band at %s mmHg: constant + share x pressure", plain(*f.set, shown)),
			plus(figure(b.Constant.MmHg()), times(figure(b.OfReading), figure(math.Abs(*f.set)))), e.l.Unit)
		under := s.calculate("lower side", times(figure(-1), width), e.l.Unit)
		return &under, &width
	}
	for _, side := range []struct {
		name string
		x    *float64
		into **term
	}{{"lower side", judged.Bounds.Low, &low}, {"upper side", judged.Bounds.High, &high}} {
		if side.x != nil {
			t := figure(*side.x)
			s.say(side.name, t.text+" "+e.l.Unit)
			*side.into = &t
		}
	}
	return low, high
}

// outcomeSaid says which comparison decided.
func outcomeSaid(l Limit, guard string) string {
	text := strings.ReplaceAll(l.Outcome.String(), "_", " ")
	switch l.Outcome {
	case verdict.Pass:
		text += ": the least room is the guard band of " + guard + " or more"
	case verdict.ConditionalPass:
		text += ": inside, by less than the guard band of " + guard
	case verdict.ConditionalFail:
		text += ": outside, by less than the guard band of " + guard
	case verdict.Fail:
		text += ": there is less room than the guard band of " + guard + " asks for"
	}
	if l.Reason != "" {
		text += "; " + l.Reason
	}
	return text
}
