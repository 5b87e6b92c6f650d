package results

import (
	"fmt"
	"math"
	"slices"

	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/fit"
)

const legDown = "down"

// staticFigures is what the points of a run gave, with what the limits need.
type staticFigures struct {
	static  *Static
	figures fit.Figures
	points  []taken
	levels  []float64 // set pressures, from the lowest
	zeros   []int     // the points of the zero that the errors after zeroing are counted from
	zero    *taken    // read before zeroing, in the zero stage
	noise   noise
	short   string // why the points cannot be judged, though there are some
	slope   float64
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
			t.zeroed = g.zeroedReference
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
		data.Astray = append(data.Astray, t.WrongSide != "")
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
	out.figures, out.slope = figures, 1
	if figures.Line != nil {
		out.slope = figures.Line.Slope
	}
	out.file(g.zeroedReference)
	out.repeated(s.repeatability)
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

// nearZero is the share of the span within which the set pressure nearest zero
// is zero: ranked readings have their mean for a set pressure.
const nearZero = 0.01

// file gives every point its set pressure and its cell, and finds the zero that
// errors after zeroing are counted from: the first cell at the set pressure
// nearest zero, up before down, as fit has it.
func (st *staticFigures) file(zeroed bool) {
	sets := st.figures.Sets
	grouped := !math.IsNaN(sets[0])
	if grouped {
		st.levels = slices.Clone(sets)
		slices.Sort(st.levels)
		st.levels = slices.Compact(st.levels)
	}
	type key struct {
		cycle, level int
		down         bool
	}
	cells := map[key]int{}
	key0, best := key{}, math.Inf(1)
	span := 0.0
	for i := range st.points {
		span = math.Max(span, math.Abs(st.points[i].p))
	}
	for i := range st.points {
		t := &st.points[i]
		t.level = i
		set := t.p
		if grouped {
			set = sets[i]
			t.level, _ = slices.BinarySearch(st.levels, set)
		}
		t.zeroed = zeroed && math.Abs(set) <= nearZero*span
		k := key{t.Cycle, t.level, t.Leg == legDown}
		if !grouped {
			k = key{cycle: i}
		}
		if _, known := cells[k]; !known {
			cells[k] = len(cells)
		}
		t.cell = cells[k]
		earlier := k.cycle < key0.cycle || k.cycle == key0.cycle && !k.down && key0.down
		if d := math.Abs(set); d < best || d == best && k.level == key0.level && earlier {
			best, key0 = d, k
		}
	}
	for i := range st.points {
		if st.points[i].cell == cells[key0] {
			st.zeros = append(st.zeros, i)
		}
	}
}

// repeated completes the noise by what readings of different cycles, or about a
// smooth curve, show. Where points are single readings it is all there is.
func (st *staticFigures) repeated(known float64) {
	n := &st.noise
	within, dofWithin, size := st.within()
	spread, dof := 0.0, 0.0
	if r := st.figures.Repeatability; r.PooledSD != nil {
		spread, dof = *r.PooledSD**r.PooledSD, float64(*r.DoF)
	}
	if single := st.points[0].UUT != ""; !single {
		own := 0.0
		for i := range st.points {
			own += n.of(&st.points[i]) / float64(len(st.points))
		}
		n.vCell, n.dofCell = math.Max(0, spread-own), dof
		return
	}
	n.from = fromRun
	switch {
	case known > 0:
		n.vSingle, n.how, n.from = known*known, "stated", fromStatement
	case dofWithin > 0:
		n.vSingle, n.dofSingle, n.how = within, dofWithin, "in a cell"
		n.vCell, n.dofCell = math.Max(0, spread-within/size), dof
	case dof > 0:
		n.vSingle, n.dofSingle, n.how = spread, dof, "by cycles"
	default:
		if n.vSingle, n.dofSingle = st.aboutCurves(); n.dofSingle > 0 {
			n.how = "by curves"
			return
		}
		n.why = "nothing shows the noise of a single reading: a second cycle would"
	}
}

// within is the pooled variance of readings of one cell, its degrees of freedom,
// and how many readings a cell has on average.
func (st *staticFigures) within() (variance, dof, size float64) {
	cells := 0
	for i := range st.points {
		cells = max(cells, st.points[i].cell+1)
	}
	if cells == len(st.points) {
		return 0, 0, 1
	}
	sum, n := make([]float64, cells), make([]float64, cells)
	residual := func(t *taken) float64 { return t.y - st.slope*t.p }
	for i := range st.points {
		t := &st.points[i]
		sum[t.cell] += residual(t)
		n[t.cell]++
	}
	for i := range st.points {
		t := &st.points[i]
		d := residual(t) - sum[t.cell]/n[t.cell]
		variance += d * d
	}
	dof = float64(len(st.points) - cells)
	return variance / dof, dof, float64(len(st.points)) / float64(cells)
}

// aboutCurves is the variance of single readings about a polynomial through
// each leg of each cycle, of third order or as high as leaves two degrees of
// freedom. What the curve does not follow counts as noise, so that it is the
// most that the noise can be. Common practice, no source.
func (st *staticFigures) aboutCurves() (variance, dof float64) {
	type leg struct{ p, y []float64 }
	legs := map[bool]*leg{false: {}, true: {}}
	for i := range st.points {
		t := &st.points[i]
		l := legs[t.Leg == legDown]
		l.p, l.y = append(l.p, t.p), append(l.y, t.y)
	}
	for _, down := range []bool{false, true} {
		l := legs[down]
		order := min(3, len(l.p)-3)
		if order < 1 {
			continue
		}
		c, err := fit.FitPolynomial(l.p, l.y, order, fit.Noise{})
		if err != nil || c.DoF < 1 {
			continue
		}
		variance += c.Residual * c.Residual * float64(c.DoF)
		dof += float64(c.DoF)
	}
	if dof == 0 {
		return 0, 0
	}
	return variance / dof, dof
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
