package results

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
	"kymobench/procedures"
)

// stated says what turns a reading of the reference into a pressure.
func (e *explainer) stated(s *sheet) {
	unit := e.s.unit.Name
	u, ref := e.g.uut, e.g.reference
	if u.FluidDensity > 0 {
		metres := func(text string) term {
			si, err := parsed(text, quantity.DimLength)
			if err != nil {
				return figure(0)
			}
			return figure(si)
		}
		pascals := s.calculate("head in Pa: (density less that of air) x gravity x (height of the reference less that of the diaphragm)",
			times(times(term{minus(figure(u.FluidDensity), figure(airDensity)).text, u.FluidDensity - airDensity, 0}, figure(standardGravity)),
				term{minus(metres(ref.Height), metres(u.Height)).text, metres(ref.Height).v - metres(u.Height).v, 0}), "Pa")
		s.say("one "+unit, figure(e.s.unit.Factor).text+" Pa")
		s.calculate("head in "+unit, over(pascals, figure(e.s.unit.Factor)), unit)
		if e.l.Name == procedures.ZeroOffset && e.s.headOf.standard > 0 {
			e.given["head: height of the diaphragm"] = s.calculate("head of the standard uncertainty of the diaphragm's height, in "+unit, over(times(times(
				term{minus(figure(u.FluidDensity), figure(airDensity)).text, u.FluidDensity - airDensity, 0}, figure(standardGravity)), metres(u.HeightUncertainty)),
				figure(e.s.unit.Factor)), unit)
		}
	} else {
		s.say("head", "no fluid is stated: none")
	}
	if !e.s.corrected {
		s.say("correction", "the certificate states none")
		return
	}
	for _, c := range ref.Certificate.Corrections {
		s.say("correction of a reading of "+c.At, c.Correction+", linear between")
	}
}

// point explains the mean of the reference and of the UUT at one point.
func (e *explainer) point(s *sheet, t *taken) (p, y term) {
	unit := e.s.unit.Name
	var terms []term
	values := make([]float64, 0, len(t.Readings))
	for _, n := range t.Readings {
		x, _, err := e.s.reference(e.g.readings[n].Text)
		if err != nil {
			s.say("reading", err.Error())
			return p, y
		}
		values = append(values, x)
	}
	keep, dropped := withoutOutliers(values, e.s.resolutionReference)
	for k, n := range t.Readings {
		text := e.g.readings[n].Text
		if dropped > 0 && !keep[k] {
			s.say(fmt.Sprintf("reference, line %d", n), fmt.Sprintf("%q lies far from its neighbours and is left out", text))
			continue
		}
		terms = append(terms, s.calculate(fmt.Sprintf("reference, line %d, %q", n, text), e.correctedTerm(text), unit))
	}
	p = s.calculate("reference, mean", over(term{plus(terms...).text, sum(terms), 0}, figure(float64(len(terms)))), unit)
	if e.s.lag != 0 {
		p = s.calculate("reference, its lag made good: mean + (lag less that of the UUT) x slope by least squares over the readings' times",
			plus(p, times(figure(e.s.lag), figure(t.slope))), unit)
	}
	return p, e.output(s, t)
}

func sum(terms []term) float64 {
	var v float64
	for _, t := range terms {
		v += t.v
	}
	return v
}

// correctedTerm is reading + correction by interpolation + head.
func (e *explainer) correctedTerm(text string) term {
	x, err := e.s.referenceF.Number(text)
	if err != nil {
		return figure(math.NaN())
	}
	out := []term{figure(x)}
	if e.s.corrected {
		out = append(out, e.correction(x))
	}
	return plus(append(out, figure(e.s.head))...)
}

// correction interpolates between the certificate's points.
func (e *explainer) correction(x float64) term {
	r := reader{}
	c := e.g.reference.Certificate.Corrections
	at := func(i int) (float64, term) {
		p := r.stated(c[i].At, e.s.unit)
		return p, figure(r.stated(c[i].Correction, e.s.unit))
	}
	before, add := at(0)
	if x <= before {
		return add
	}
	for i := 1; i < len(c); i++ {
		after, next := at(i)
		if x < after {
			share := over(term{minus(figure(x), figure(before)).text, x - before, 0}, term{minus(figure(after), figure(before)).text, after - before, 0})
			return plus(add, times(share, term{minus(next, add).text, next.v - add.v, 0}))
		}
		before, add = after, next
	}
	return add
}

// output explains the UUT's mean in the scale's unit.
func (e *explainer) output(s *sheet, t *taken) term {
	unit, own := e.s.unit.Name, e.s.uutUnit.Name
	if t.UUT != "" {
		x, err := e.s.uutField.Number(t.UUT)
		if err != nil {
			return figure(math.NaN())
		}
		return e.inPressure(s, figure(x), t.Excitation)
	}
	var total float64
	count, left := 0, 0
	var xs []float64
	for _, n := range t.Blocks {
		for _, text := range e.g.blocks[n].Samples {
			if x, err := e.s.uutField.Number(text); err == nil {
				xs = append(xs, x)
			}
		}
	}
	per := e.s.resolutionUUT
	if k := e.s.output(e.s.uutUnit.ToSI(1), e.s.excitation); k != 0 {
		per /= math.Abs(k)
	}
	keep, dropped := withoutOutliers(xs, per)
	for i, x := range xs {
		if dropped > 0 && !keep[i] {
			left++
			continue
		}
		total += x
		count++
	}
	note := fmt.Sprintf("UUT, sum of %d samples in lines %d to %d, from %q to %q", count, t.Blocks[0], t.Blocks[len(t.Blocks)-1],
		e.g.blocks[t.Blocks[0]].Samples[0], last(e.g.blocks[t.Blocks[len(t.Blocks)-1]].Samples))
	if left > 0 {
		note += fmt.Sprintf(", %d that lie far from the others left out", left)
	}
	added := figure(math.Round(total*1e6) / 1e6)
	s.say(note, added.text+" "+own)
	mean := s.calculate("UUT, mean", over(added, figure(float64(count))), own)
	if own == unit {
		return mean
	}
	return e.inPressure(s, mean, "")
}

func last(texts []string) string { return texts[len(texts)-1] }

// inPressure divides an electrical output by excitation and sensitivity, or
// turns one unit of pressure into another.
func (e *explainer) inPressure(s *sheet, x term, excitation string) term {
	unit := e.s.unit.Name
	if e.s.nominal == 0 {
		if e.s.uutUnit == e.s.unit {
			return x
		}
		return s.calculate("UUT in "+unit, over(times(x, figure(e.s.uutUnit.Factor)), figure(e.s.unit.Factor)), unit)
	}
	out := x
	if e.s.uutUnit.Dimension == quantity.DimVoltage {
		volts := e.s.excitation
		if excitation != "" {
			if v, err := parsed(excitation, quantity.DimVoltage); err == nil {
				volts = v
			}
		}
		out = over(out, figure(volts))
	}
	// The sensitivity in the output's own unit, per volt of excitation if it has
	// any, and per unit of pressure.
	per := e.s.nominal * e.s.unit.Factor / e.s.uutUnit.Factor
	return s.calculate("UUT in "+unit+", over the nominal sensitivity", over(out, figure(per)), unit)
}
