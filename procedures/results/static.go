package results

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/fit"
)

const legDown = "down"

// staticFigures is what the points of a run gave, with what the limits need.
type staticFigures struct {
	static *Static
	points []taken
	first  int    // index in points of the first reading at the pressure nearest zero
	zero   *taken // read before zeroing, in the zero stage
	noise  noise
	short  string // why the points cannot be judged, though there are some
}

// staticResults reads the points and computes their figures.
func (g *gathered) staticResults(s *scale) (staticFigures, error) {
	var out staticFigures
	var data fit.Data
	farthest, sets := 0.0, true
	for i, pt := range g.points {
		t, err := g.takePoint(s, pt)
		if err != nil {
			return out, fmt.Errorf("point %d: %w", i+1, err)
		}
		if pt.Purpose == "zero" {
			out.zero = &t
			continue
		}
		farthest = math.Max(farthest, t.beyond)
		sets = sets && t.hasSet
		out.points = append(out.points, t)
		data.Reference, data.UUT = append(data.Reference, t.p), append(data.UUT, t.y)
		data.Cycle, data.Down = append(data.Cycle, t.Cycle), append(data.Down, t.Leg == legDown)
		data.Set = append(data.Set, t.set)
		data.Mounting = append(data.Mounting, t.Mounting)
	}
	all := out.points
	if out.zero != nil {
		all = append(append([]taken{}, all...), *out.zero)
	}
	out.noise = pool(all)
	if len(out.points) == 0 {
		return out, nil
	}
	if !sets {
		data.Set = nil
	}
	figures, err := fit.Static(data)
	if err != nil {
		return out, err
	}
	for i, t := range out.points {
		if math.Abs(at(t)) < math.Abs(at(out.points[out.first])) {
			out.first = i
		}
	}
	out.static = s.staticOf(figures)
	out.static.Readings = len(out.points)
	if s.assumed {
		out.static.Reservations = append(out.static.Reservations, Reason{"nominal_sensitivity_assumed",
			"nobody stated the nominal sensitivity; " + AssumedSensitivity + " is assumed"})
	}
	if farthest > 0 {
		out.static.Reservations = append(out.static.Reservations, Reason{"correction_extrapolated",
			fmt.Sprintf("readings lie up to %.3g %s outside the range of the reference's certificate, where the last correction was kept", farthest, s.unit.Name)})
	}
	out.short = g.short(s, len(out.points), farthest)
	return out, nil
}

// at is the pressure a point is filed under.
func at(t taken) float64 {
	if t.hasSet {
		return t.set
	}
	return t.p
}

// short says why a run's points cannot be judged: some are missing, or lie
// where the reference's certificate says nothing. A set pressure at the end of
// the certificate's range may be missed by the window of the procedure, or the
// vented zero of a certificate that begins at zero could never be taken.
func (g *gathered) short(s *scale, points int, farthest float64) string {
	if g.definition == nil {
		return ""
	}
	want, window := 0, 0.0
	for _, stage := range g.definition.Stages {
		if st, ok := stage.(procedures.Static); ok {
			want += len(st.Points())
			window = s.unit.FromSI(float64(st.Window))
		}
	}
	if farthest > window {
		return fmt.Sprintf("readings lie up to %.3g %s outside the range of the reference's certificate", farthest, s.unit.Name)
	}
	if points < want {
		return fmt.Sprintf("only %d of %d points were taken", points, want)
	}
	return ""
}

// staticOf puts the figures into the words of the results.
func (s *scale) staticOf(f fit.Figures) *Static {
	out := &Static{
		Unit: s.unit.Name, Cycles: f.Cycles, ZeroReturn: f.ZeroReturn, Reservations: []Reason{},
		Repeatability: Repeatability{LargestRange: f.Repeatability.LargestRange, PooledSD: f.Repeatability.PooledSD, DoF: f.Repeatability.DoF},
		LargestError:  errorAtOf(f.LargestError), ErrorAfterZero: errorAtOf(f.ErrorAfterZero),
	}
	out.conformity(f)
	if f.ZeroOffset != nil {
		out.ZeroOffset = &Value{*f.ZeroOffset}
	}
	if f.Hysteresis != nil {
		out.Hysteresis = &Located{Largest: f.Hysteresis.Value, At: f.Hysteresis.At}
	}
	if l := f.Line; l != nil {
		out.Intercept, out.Slope = &Figure{l.Intercept, l.UIntercept}, &Figure{l.Slope, l.USlope}
		out.ResidualSD, out.ResidualDoF, out.Covariance = &l.Residual, &l.DoF, &l.Covariance
		if s.nominal > 0 {
			nominal := quantity.Sensitivity(s.nominal).MicrovoltPerVoltPerMmHg()
			out.NominalUsed = &nominal
			out.Sensitivity = &Sensitivity{Value: l.Slope * nominal, Unit: "uV/V/mmHg", Standard: l.USlope * nominal}
		}
	}
	for _, r := range f.Reservations {
		out.Reservations = append(out.Reservations, Reason{r.Code, r.Text})
	}
	return out
}

func errorAtOf(l *fit.Located) *ErrorAt {
	if l == nil {
		return nil
	}
	out := &ErrorAt{Value: l.Value, Cycle: l.Cycle, Leg: "up"}
	if l.Down {
		out.Leg = legDown
	}
	if !math.IsNaN(l.At) {
		out.At = &l.At
	}
	return out
}
