package results

import (
	"math"

	"kymobench/procedures/uncertainty"
)

// budget collects the contributions to one figure's uncertainty.
type budget struct {
	inputs []uncertainty.Input
	units  []string
}

// add puts in one input: its standard uncertainty in its own unit, the
// sensitivity coefficient to the figure's unit, and degrees of freedom (0:
// infinite). An input without uncertainty is left out: nobody stated one.
func (b *budget) add(name, source, distribution, unit string, standard, sensitivity, dof float64) {
	if standard == 0 || sensitivity == 0 {
		return
	}
	b.inputs = append(b.inputs, uncertainty.Input{
		Name: name, Source: source, Distribution: distribution,
		Standard: standard, Sensitivity: sensitivity, DegreesOfFreedom: dof,
	})
	b.units = append(b.units, unit)
}

const (
	fromCertificate = "certificate"
	fromBench       = "bench file"
	fromRun         = "this run"

	normal      = "normal"
	rectangular = "rectangular"
	studentT    = "t"
)

// lines returns the budget for the Results.
func (b *budget) lines() []BudgetLine {
	lines := make([]BudgetLine, 0, len(b.inputs))
	for i, in := range b.inputs {
		l := BudgetLine{
			Name: in.Name, Source: in.Source, Distribution: in.Distribution, Standard: in.Standard, Unit: b.units[i],
			Sensitivity: in.Sensitivity, Contribution: math.Abs(in.Standard * in.Sensitivity),
		}
		if in.DegreesOfFreedom > 0 && !math.IsInf(in.DegreesOfFreedom, 1) {
			l.DoF = &in.DegreesOfFreedom
		}
		lines = append(lines, l)
	}
	return lines
}

// errorBudget is the uncertainty of the UUT's error after zeroing at one
// point, in the scale's unit. What the zeroing takes away (head, zero of
// reference and readout) is not in it; hysteresis is not, since the legs are
// judged apart.
func (s *scale) errorBudget(t taken, zero taken, n noise) *budget {
	u := s.unit.Name
	b := &budget{}
	b.add("reference, share of reading", fromCertificate, normal, "1", s.uShare, t.p, 0)
	b.add("reference, at the set pressure", fromCertificate, normal, u, s.uReference, atPressure(t), 0)
	s.aged(b, t.p, atPressure(t))
	b.add("readout, gain", fromCertificate, normal, "1", s.uGain, t.y-zero.y, 0)
	b.add("readout, excitation", fromCertificate, normal, "1", s.uVolts, t.y-zero.y, 0)
	b.add("noise of the point", fromRun, studentT, u, n.of(t), 1, n.dof(t))
	b.add("noise of the zero", fromRun, studentT, u, n.of(zero), 1, n.dof(zero))
	s.small(b, t, 1)
	return b
}

// aged adds what the reference may have changed by since its certificate's
// date and with the temperature: shares of the reading with sensitivity share,
// and what is the same at every pressure but a zeroed zero with sensitivity at.
func (s *scale) aged(b *budget, share, at float64) {
	const drifted = "reference, drift since its date"
	b.add(drifted, fromCertificate, rectangular, "1", uncertainty.FromHalfWidth(s.drift), share, 0)
	b.add(drifted+", at every pressure", fromCertificate, rectangular, s.unit.Name, uncertainty.FromHalfWidth(s.driftAt), at, 0)
	b.add("reference, temperature", fromCertificate, rectangular, "1", uncertainty.FromHalfWidth(s.warmth), share, 0)
}

// small adds what every difference of UUT and reference has: resolutions and
// the settling left.
func (s *scale) small(b *budget, t taken, times float64) {
	u := s.unit.Name
	b.add("reference, resolution", fromBench, rectangular, u, uncertainty.FromFullWidth(s.resolutionReference), times, 0)
	b.add("UUT, resolution", fromBench, rectangular, u, uncertainty.FromFullWidth(s.resolutionUUT), times, 0)
	b.add("settling left: slope x delay", fromRun, rectangular, u, uncertainty.FromHalfWidth(math.Abs(t.slope)*s.delay), times, 0)
}

// atPressure is 0 at zero pressure, where the reference was itself zeroed in
// the run, and 1 elsewhere.
func atPressure(t taken) float64 {
	if t.hasSet && t.set == 0 {
		return 0
	}
	return 1
}

// zeroBudget is the uncertainty of the zero offset as read before zeroing.
func (s *scale) zeroBudget(t taken, n noise) *budget {
	u := s.unit.Name
	b := &budget{}
	b.add("head: height of the diaphragm", fromBench, normal, u, s.uHead, 1, 0)
	b.add("readout, zero", fromCertificate, normal, u, s.uZero, 1, 0)
	b.add("readout, gain", fromCertificate, normal, "1", s.uGain, t.y, 0)
	b.add("readout, excitation", fromCertificate, normal, "1", s.uVolts, t.y, 0)
	b.add("noise of the reading", fromRun, studentT, u, n.of(t), 1, n.dof(t))
	s.small(b, t, 1)
	return b
}

// slopeBudget is the uncertainty of the slope of the least-squares line over
// the points, relative to the slope. The line over these set pressures is the
// measurand: what the UUT's bow and hysteresis make the readings lie off it is
// no uncertainty of it.
//
// With c_i = (p_i - mean p)/Sum (p_j - mean p)^2 the slope is Sum c_i y_i;
// errors common to a set pressure add within it, noise does not.
func (s *scale) slopeBudget(points []taken, slope float64, n noise) *budget {
	b := &budget{}
	var mp, sxx float64
	for _, t := range points {
		mp += t.p / float64(len(points))
	}
	for _, t := range points {
		sxx += (t.p - mp) * (t.p - mp)
	}
	if !(sxx > 0) || slope == 0 {
		return b
	}
	common := map[float64]float64{}
	var order []float64
	var vNoise, vSquares, vSettling, vAged, cAged float64
	for _, t := range points {
		c := (t.p - mp) / sxx
		key := t.p
		if t.hasSet {
			key = t.set
		}
		if _, seen := common[key]; !seen {
			order = append(order, key)
		}
		common[key] += c * atPressure(t)
		vAged, cAged = vAged+t.p*atPressure(t), cAged+atPressure(t)
		vNoise += c * c * n.of(t) * n.of(t)
		vSquares += c * c
		u := uncertainty.FromHalfWidth(c * t.slope * s.delay)
		vSettling += u * u
	}
	var vCommon float64
	for _, key := range order {
		vCommon += common[key] * common[key]
	}
	u := s.unit.Name
	per := 1 / slope // all as shares of the slope
	b.add("reference, share of reading", fromCertificate, normal, "1", s.uShare, 1, 0)
	b.add("reference, at the set pressures", fromCertificate, normal, u, s.uReference, math.Sqrt(vCommon), 0)
	s.aged(b, 1, (vAged-mp*cAged)/sxx)
	b.add("readout, gain", fromCertificate, normal, "1", s.uGain, 1, 0)
	b.add("readout, excitation", fromCertificate, normal, "1", s.uVolts, 1, 0)
	b.add("noise of the points", fromRun, studentT, "1", math.Sqrt(vNoise), per, n.dofY)
	b.add("reference, resolution", fromBench, rectangular, u, uncertainty.FromFullWidth(s.resolutionReference), math.Sqrt(vSquares), 0)
	b.add("UUT, resolution", fromBench, rectangular, u, uncertainty.FromFullWidth(s.resolutionUUT), math.Sqrt(vSquares)*per, 0)
	b.add("settling left: slope x delay", fromRun, rectangular, "1", math.Sqrt(vSettling), 1, 0)
	return b
}

// hysteresisBudget is the uncertainty of down minus up at one set pressure:
// what the reference's certificate leaves is common to both and cancels.
func (s *scale) hysteresisBudget(up, down taken, n noise) *budget {
	u := s.unit.Name
	b := &budget{}
	b.add("noise of the upward point", fromRun, studentT, u, n.of(up), 1, n.dof(up))
	b.add("noise of the downward point", fromRun, studentT, u, n.of(down), 1, n.dof(down))
	s.small(b, up, 1)
	s.small(b, down, 1)
	return b
}

// scaled returns the budget with every sensitivity multiplied, for a change of
// unit of the figure.
func (b *budget) scaled(by float64) *budget {
	out := &budget{units: b.units}
	for _, in := range b.inputs {
		in.Sensitivity *= by
		out.inputs = append(out.inputs, in)
	}
	return out
}
