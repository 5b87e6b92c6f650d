package results

import (
	"fmt"
	"math"
	"time"

	"kymobench/bench/quantity"
	"kymobench/procedures/fit"
	"kymobench/procedures/record"
	"kymobench/procedures/uncertainty"
)

// AssumedSensitivity is taken for an electrical output whose nominal
// sensitivity nobody stated, with a reservation: 5 uV/V/mmHg.
const AssumedSensitivity = "5 uV/V/mmHg"

// hoursInYear is the mean year of the calendar, 365.2425 days.
const hoursInYear = 365.2425 * 24

// standardGravity in m/s2, exact by convention; airDensity in kg/m3 at about
// 20 degC and 1013 hPa, from memory.
const (
	standardGravity = 9.80665
	airDensity      = 1.2
)

// scale turns texts as received into pressures in the reference's unit and
// knows what the bench states about them. All its fields are in that unit
// unless they say otherwise.
type scale struct {
	unit       quantity.Unit // the reference's
	referenceF *quantity.Parser
	uutField   *quantity.Parser
	uutUnit    quantity.Unit
	excitation float64 // V, 0 when not stated
	nominal    float64 // V/V/Pa, 0 for a pressure output
	assumed    bool    // nominal is AssumedSensitivity
	head       float64 // added to the reference's reading
	curve      fit.Curve
	corrected  bool    // there is a curve
	low, high  float64 // the range of the certificate

	pointwise stated  // of the reference, at each set pressure
	share     stated  // of its reading, common
	drift     float64 // of the reading, half-width
	driftAt   float64 // at each pressure but a zeroed zero, half-width
	warmth    float64 // of the reading, half-width: temperature
	gain      stated  // of the reading, the readout's
	volts     stated  // of the reading, the excitation's
	zeroOf    stated  // the readout's zero
	headOf    stated
	noiseOf   float64 // of the readout, the most its standard deviation may be

	resolutionReference float64
	resolutionUUT       float64
	repeatability       float64 // of a single reading, stated; 0 when not
	lag                 float64 // s: that the readings are corrected for, the reference's less the UUT's
	delay               float64 // s: half-width of what is left of it, and of the skew, for slopes
	periodTolerance     float64 // share, half-width
	edge                string
	edgeTolerance       float64 // share, half-width
}

// perMmHg is how many of the scale's unit make one mmHg.
func (s *scale) perMmHg() float64 {
	return s.unit.FromSI(float64(quantity.MmHg(1)))
}

// newScale reads what the record states about reference, UUT, readout, valve.
func newScale(g *gathered) (*scale, error) {
	if g.reference == nil || g.uut == nil {
		return nil, fmt.Errorf("the record names no reference and UUT")
	}
	s := &scale{}
	var err error
	if s.referenceF, err = g.reference.Field.Parser(); err != nil {
		return nil, fmt.Errorf("the reference: %w", err)
	}
	if s.uutField, err = g.uut.Field.Parser(); err != nil {
		return nil, fmt.Errorf("the UUT: %w", err)
	}
	var ok bool
	if s.unit, ok = quantity.UnitNamed(g.reference.Field.Unit); !ok || s.unit.Dimension != quantity.DimPressure {
		return nil, fmt.Errorf("the reference's unit %q is no unit of pressure", g.reference.Field.Unit)
	}
	if s.uutUnit, ok = quantity.UnitNamed(g.uut.Field.Unit); !ok {
		return nil, fmt.Errorf("the UUT's unit %q is not known", g.uut.Field.Unit)
	}
	r := reader{}
	nominal := g.uut.NominalSensitivity
	if s.uutUnit.Dimension != quantity.DimPressure {
		if nominal == "" {
			nominal, s.assumed = AssumedSensitivity, true
		}
		s.nominal = r.si(nominal, quantity.DimSensitivity)
	}
	s.excitation = r.si(g.uut.Excitation, quantity.DimVoltage)
	per := r.si(nominal, quantity.DimSensitivity)
	s.resolutionUUT = s.equivalent(g.uut.Resolution, per, &r)
	s.repeatability = s.unit.FromSI(r.si(g.uut.Repeatability, quantity.DimPressure))
	s.certificate(g.reference, g.began, &r)
	s.heads(g, &r)
	if g.readout != nil && g.readout.CoverageFactor > 0 {
		k := g.readout.CoverageFactor
		s.gain = certified(r.si(g.readout.GainUncertainty, quantity.DimNone), k)
		s.volts = certified(r.si(g.readout.ExcitationUncertainty, quantity.DimNone), k)
		s.zeroOf = certified(s.equivalent(g.readout.ZeroUncertainty, per, &r), k)
	}
	// A reference whose lag nobody stated follows somewhere within its response
	// time, and is not corrected.
	s.delay = r.si(g.reference.ResponseTime, quantity.DimSpan) + r.si(g.reference.ResponseTimeTolerance, quantity.DimSpan) +
		r.si(g.uut.Delay, quantity.DimSpan) + r.si(g.uut.DelayUncertainty, quantity.DimSpan)
	if g.reference.Lag != "" {
		s.lag = r.si(g.reference.Lag, quantity.DimSpan) - r.si(g.uut.Delay, quantity.DimSpan)
		s.delay = math.Sqrt(3) * math.Hypot(r.si(g.reference.LagUncertainty, quantity.DimSpan), r.si(g.uut.DelayUncertainty, quantity.DimSpan))
	}
	s.periodTolerance = r.si(g.uut.SamplePeriodTolerance, quantity.DimNone)
	if g.valve != nil {
		s.edge = g.valve.EdgeTime
		s.edgeTolerance = r.si(g.valve.EdgeTimeTolerance, quantity.DimNone)
	}
	return s, r.err
}

// certificate reads what the certificate states. Drift by year counts from its
// date to the beginning of the run.
func (s *scale) certificate(ref *record.Reference, began time.Time, r *reader) {
	c := ref.Certificate
	s.pointwise = certified(s.unit.FromSI(r.si(c.Uncertainty, quantity.DimPressure)), c.CoverageFactor)
	s.share = certified(r.si(c.UncertaintyOfReading, quantity.DimNone), c.CoverageFactor)
	years := 0.0
	if date, err := time.Parse(time.DateOnly, c.Date); err == nil && !began.IsZero() {
		years = math.Abs(began.Sub(date).Hours()) / hoursInYear
	}
	s.drift = r.si(c.DriftOfReading, quantity.DimNone) + years*r.si(c.DriftOfReadingPerYear, quantity.DimNone)
	s.driftAt = years * s.unit.FromSI(r.si(c.DriftPerYear, quantity.DimPressure))
	s.warmth = r.si(c.TemperatureOfReading, quantity.DimNone)
	s.resolutionReference = s.unit.FromSI(r.si(ref.Resolution, quantity.DimPressure))
	s.low, s.high = math.Inf(-1), math.Inf(1)
	if ref.RangeLow != "" && ref.RangeHigh != "" {
		s.low, s.high = r.stated(ref.RangeLow, s.unit), r.stated(ref.RangeHigh, s.unit)
	}
	var at, add []float64
	for _, p := range c.Corrections {
		at = append(at, r.stated(p.At, s.unit))
		add = append(add, r.stated(p.Correction, s.unit))
	}
	if len(at) > 0 {
		if len(at) > 1 { // one alone is a constant, for the whole range
			s.low, s.high = math.Max(s.low, at[0]), math.Min(s.high, at[len(at)-1])
		}
		curve, err := fit.NewCurve(at, add)
		if err != nil && r.err == nil {
			r.err = err
		}
		s.curve, s.corrected = curve, err == nil
	}
}

// heads works out the head of the line's fluid between the reference's port
// and the diaphragm: (rho - rho_air) g (z_reference - z_uut).
func (s *scale) heads(g *gathered, r *reader) {
	if g.uut.FluidDensity <= 0 {
		return
	}
	perMetre := s.unit.FromSI((g.uut.FluidDensity - airDensity) * standardGravity)
	s.head = perMetre * (r.si(g.reference.Height, quantity.DimLength) - r.si(g.uut.Height, quantity.DimLength))
	u := math.Abs(perMetre) * r.si(g.uut.HeightUncertainty, quantity.DimLength)
	s.headOf = stated{u, 1, u, uncertainty.Normal}
}

// equivalent is what is stated of the UUT's output as a pressure in the scale's
// unit, whether it is stated as a pressure, a ratio or a voltage: readings that
// were turned into pressure elsewhere still came from a readout. per is the
// sensitivity in SI.
func (s *scale) equivalent(text string, per float64, r *reader) float64 {
	if text == "" {
		return 0
	}
	v, err := quantity.Parse(text)
	si := v.SI
	switch {
	case err != nil:
	case v.Unit.Dimension == quantity.DimPressure:
	case v.Unit.Dimension == quantity.DimRatio && per > 0:
		si /= per
	case v.Unit.Dimension == quantity.DimVoltage && per > 0 && s.excitation > 0:
		si /= s.excitation * per
	default:
		err = fmt.Errorf("%q is no pressure, and without sensitivity and excitation it is the equivalent of none", text)
	}
	if err != nil {
		if r.err == nil {
			r.err = err
		}
		return 0
	}
	return s.unit.FromSI(si)
}

// output turns an electrical output in SI into pressure in the scale's unit.
func (s *scale) output(si, excitation float64) float64 {
	if s.nominal == 0 {
		return s.unit.FromSI(si)
	}
	if s.uutUnit.Dimension == quantity.DimVoltage {
		si /= excitation
	}
	return s.unit.FromSI(si / s.nominal)
}

// uut reads one of the UUT's texts, in the scale's unit. A pressure output in
// the same unit as the reference keeps its digits exactly.
func (s *scale) uut(text, excitation string) (float64, error) {
	x, err := s.uutField.Number(text)
	if err != nil {
		return 0, err
	}
	if s.uutUnit == s.unit {
		return x, nil
	}
	e := s.excitation
	if excitation != "" {
		v, err := quantity.ParseAs(excitation, quantity.DimVoltage)
		if err != nil {
			return 0, err
		}
		e = v.SI
	}
	if s.uutUnit.Dimension == quantity.DimVoltage && !(e > 0) {
		return 0, fmt.Errorf("a voltage needs the excitation, which nobody stated")
	}
	return s.output(s.uutUnit.ToSI(x), e), nil
}

// reference reads one of the reference's texts and corrects it: reading +
// correction(reading) + head. beyond is how far the reading lies outside the
// range of the certificate, where the last correction was kept.
func (s *scale) reference(text string) (p, beyond float64, err error) {
	x, err := s.referenceF.Number(text)
	if err != nil {
		return 0, 0, err
	}
	p = x + s.head
	if s.corrected {
		c, _ := s.curve.At(x)
		p += c
	}
	return p, math.Max(0, math.Max(s.low-x, x-s.high)), nil
}

// reader parses stated quantities and keeps the first error.
type reader struct{ err error }

func (r *reader) si(text string, d quantity.Dimension) float64 {
	v, err := parsed(text, d)
	if err != nil && r.err == nil {
		r.err = err
	}
	return v
}

// stated reads a pressure in the given unit, keeping its digits when it is
// stated in that unit.
func (r *reader) stated(text string, u quantity.Unit) float64 {
	v, err := quantity.ParseAs(text, quantity.DimPressure)
	if err == nil {
		var x float64
		if x, err = v.In(u); err == nil {
			return x
		}
	}
	if r.err == nil {
		r.err = err
	}
	return 0
}
