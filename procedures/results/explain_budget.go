package results

import (
	"fmt"
	"math"
	"strings"

	"kymobench/procedures"
	"kymobench/procedures/uncertainty"
)

// laid is a figure's points as they were explained.
type laid struct {
	points []taken
	w      []weight
	ps, ys []term
}

// budgeted explains the uncertainty; false when there is none.
func (e *explainer) budgeted(f found, judged Limit) bool {
	if judged.Expanded == nil || len(judged.Budget) == 0 {
		e.section("uncertainty", func(s *sheet) { s.say("undetermined", judged.Reason) })
		return false
	}
	e.section("scatter and sensitivities", func(s *sheet) { e.scattered(s, judged) })
	e.section("uncertainty: stated / divisor x sensitivity", func(s *sheet) {
		var squares, fourths []term
		for _, l := range judged.Budget {
			divisor := figure(l.Divisor)
			if l.Distribution == uncertainty.Rectangular {
				divisor = rectangle(l.Divisor)
			}
			stated, sensitivity := figure(l.Stated), figure(math.Abs(l.Sensitivity))
			if t, ok := e.given[l.Name]; ok {
				stated = t
			}
			if t, ok := e.sens[l.Name]; ok {
				sensitivity = figure(math.Abs(t.v))
			}
			c := s.calculate(fmt.Sprintf("%s (%s, %s)", l.Name, l.Source, l.Distribution), times(over(stated, divisor), sensitivity), e.l.Unit)
			squares = append(squares, power(c, 2))
			if l.DoF != nil {
				fourths = append(fourths, over(power(c, 4), figure(*l.DoF)))
			}
		}
		e.u = s.calculate("combined standard uncertainty", root(plus(squares...)), e.l.Unit)
		u := e.u
		factor := *judged.Coverage
		if m := judged.Sampled; m != nil {
			factor = m.Shortcut / *judged.Standard
		}
		k := figure(factor)
		if len(fourths) > 0 {
			dof := s.calculate("effective degrees of freedom", over(power(u, 4), term{plus(fourths...).text, sum(fourths), 0}), "")
			s.say("k", fmt.Sprintf("%s: the 97.5 %% point of Student's t with %s degrees of freedom, from a table", k.text, plain(dof.v, 6)))
		} else {
			s.say("k", k.text+": the 97.5 % point of the normal distribution")
		}
		if m := judged.Sampled; m != nil {
			s.calculate("expanded uncertainty by the shortcut", times(k, u), e.l.Unit)
			s.say("expanded uncertainty, by Monte Carlo", fmt.Sprintf("%s %s from %d draws with seed %d: the shortcut is more than 5 %% off, and nobody does this by hand",
				plain(m.Expanded, shown), e.l.Unit, m.Draws, m.Seed))
			return
		}
		e.agrees(s, s.calculate("expanded uncertainty", times(k, u), e.l.Unit), *judged.Expanded)
	})
	return true
}

// rectangle writes the divisor of a half or of a full width.
func rectangle(divisor float64) term {
	if math.Abs(divisor*divisor-12) < 1e-9 {
		return term{"(2 x sqrt(3))", divisor, 2}
	}
	if math.Abs(divisor*divisor-3) < 1e-9 {
		return term{"sqrt(3)", divisor, 2}
	}
	return figure(divisor)
}

// scattered explains the sensitivity coefficients, and what this run itself
// says of the scatter.
func (e *explainer) scattered(s *sheet, judged Limit) {
	l := e.laid
	if l.w == nil {
		s.say("sensitivities", "1, but for what is stated as a share: that counts with the figure")
		return
	}
	if e.l.Name == procedures.Sensitivity {
		for _, x := range l.w {
			s.say("how much counts "+pointName(&l.points[x.i])+": its distance from the mean over the sum of their squares", figure(x.g).text)
		}
	}
	for _, b := range judged.Budget {
		t, ok := e.sensitivityOf(s, b.Name)
		if !ok {
			continue
		}
		if k := e.perFigure(); k.text != "1" {
			t = times(t, k)
		}
		e.sens[b.Name] = s.calculate("sensitivity to "+b.Name, t, "")
	}
}

// perFigure turns the scale's unit into the figure's.
func (e *explainer) perFigure() term {
	if e.l.Unit == "uV/V/mmHg" {
		return figure(*e.st.static.NominalUsed)
	}
	return over(figure(1), figure(e.s.perMmHg())).simple()
}

// simple is a number in place of a division that gives it exactly.
func (t term) simple() term {
	if f := figure(t.v); f.v == t.v {
		return f
	}
	return t
}

// sensitivityOf is how much one contribution counts, from the points; false for
// one that counts once.
func (e *explainer) sensitivityOf(s *sheet, name string) (term, bool) {
	l, n := e.laid, e.st.noise
	b := figure(e.factor)
	reference := func(t term) term {
		if e.factor == 1 {
			return t
		}
		return times(b, t)
	}
	squares := func(per func(*taken) float64) term {
		var out []term
		for _, x := range l.w {
			q := power(figure(math.Abs(x.g)), 2)
			if k := per(&l.points[x.i]); k != 1 {
				q = over(q, figure(k))
			}
			out = append(out, q)
		}
		return root(plus(out...))
	}
	one := func(*taken) float64 { return 1 }
	switch name {
	case "reference, share of reading", "reference, drift since its date", "reference, temperature":
		return reference(weighted(l.w, l.ps)), true
	case "readout, gain", "readout, excitation":
		return weighted(l.w, l.ys), true
	case "reference, at the set pressure", "reference, drift as a pressure":
		return e.acrossPressures(s, reference, name)
	case "reference, resolution":
		return reference(squares(one)), true
	case "UUT, resolution":
		return squares(one), true
	case "noise of the reference":
		e.pooled(s, name, "one reading of the reference, scatter about its slope", func(t *taken) (float64, float64) { return t.vP, t.dofP }, math.Sqrt(n.vP))
		return reference(squares(func(t *taken) float64 { return float64(t.nP) })), true
	case "noise of the UUT":
		e.pooled(s, name, fmt.Sprintf("one mean of up to %d samples of the UUT, scatter about its slope", blockMean), func(t *taken) (float64, float64) { return t.vY, t.dofY }, math.Sqrt(n.vY))
		return squares(func(t *taken) float64 { return float64(t.kY) }), true
	case "spread between cycles":
		s.say("spread between cycles", fmt.Sprintf("%s %s beyond the noise, from the pooled standard deviation of %s", plain(math.Sqrt(n.vCell), shown), e.s.unit.Name, plain(*e.st.figures.Repeatability.PooledSD, shown)))
		return e.acrossCells(), true
	case "settling left: slope x delay":
		var parts []term
		for _, x := range l.w {
			t := &l.points[x.i]
			parts = append(parts, power(times(times(figure(math.Abs(x.g)), figure(math.Abs(t.slope))), figure(e.s.delay)), 2))
		}
		e.given[name] = s.calculate("settling left, in "+e.s.unit.Name+": (share x slope in "+e.s.unit.Name+"/s x delay in s)^2 of each point", root(plus(parts...)), e.s.unit.Name)
	}
	if strings.HasPrefix(name, "noise of a reading") {
		s.say(name, plain(math.Sqrt(n.vSingle), shown)+" "+e.s.unit.Name)
		return squares(one), true
	}
	return term{}, false
}

// acrossPressures counts an error that the reference has at each set pressure.
func (e *explainer) acrossPressures(s *sheet, reference func(term) term, name string) (term, bool) {
	m := e.s.sumsOf(e.laid.points, e.laid.w)
	if name == "reference, drift as a pressure" {
		return reference(figure(math.Abs(m.aged))), true
	}
	var out []term
	for _, k := range m.where {
		g := figure(m.at[k])
		s.say("together count the points at the set pressure of "+pointName(&e.laid.points[e.firstAt(k)]), g.text)
		out = append(out, power(figure(math.Abs(g.v)), 2))
	}
	if len(out) == 0 {
		return term{}, false
	}
	return reference(root(plus(out...))), true
}

// firstAt is a point that counts at a set pressure.
func (e *explainer) firstAt(level int) int {
	for _, x := range e.laid.w {
		if e.laid.points[x.i].level == level {
			return x.i
		}
	}
	return 0
}

func (e *explainer) acrossCells() term {
	sums := map[int]float64{}
	var order []int
	for _, x := range e.laid.w {
		c := e.laid.points[x.i].cell
		if _, known := sums[c]; !known {
			order = append(order, c)
		}
		sums[c] += x.g
	}
	var out []term
	for _, c := range order {
		out = append(out, power(figure(math.Abs(sums[c])), 2))
	}
	return root(plus(out...))
}

// pooled explains a standard deviation pooled over all points.
func (e *explainer) pooled(s *sheet, contribution, name string, of func(*taken) (variance, dof float64), used float64) {
	var above, below []term
	points := append([]taken{}, e.st.points...)
	if e.st.zero != nil {
		points = append(points, *e.st.zero)
	}
	for i := range points {
		v, dof := of(&points[i])
		if dof > 0 {
			above, below = append(above, times(figure(dof), figure(v))), append(below, figure(dof))
		}
	}
	if len(above) == 0 {
		return
	}
	sd := s.calculate(name+", pooled over "+fmt.Sprint(len(above))+" points: degrees of freedom x variance",
		root(over(term{plus(above...).text, sum(above), 0}, term{plus(below...).text, sum(below), 0})), e.s.unit.Name)
	if math.Abs(sd.v/used-1) > 1e-9 {
		s.say(name, fmt.Sprintf("%s %s, because neighbours vary together", plain(used, shown), e.s.unit.Name))
		return
	}
	e.given[contribution] = sd
}
