package results

import "math"

// Budget is one figure with all that its uncertainty is made of.
type Budget struct {
	Figure   string   `json:"figure"`
	Set      *float64 `json:"set"`   // the set pressure it is of
	Leg      string   `json:"leg"`   // up, down, or "" for both together
	Cycle    int      `json:"cycle"` // 0: all
	Unit     string   `json:"unit"`
	Readings int      `json:"readings"`
	Value    *float64 `json:"value"`

	Standard *float64     `json:"standard_uncertainty"`
	DoF      *float64     `json:"degrees_of_freedom"` // nil: infinite
	Coverage *float64     `json:"coverage_factor"`
	Expanded *float64     `json:"expanded_uncertainty"` // half-width of the 95 % interval
	Interval *[2]float64  `json:"interval95"`
	Sampled  *MonteCarlo  `json:"monte_carlo"` // set when Expanded is by Monte Carlo
	Lines    []BudgetLine `json:"budget"`
	Reason   string       `json:"reason"` // why there is no interval
}

// MonteCarlo says that the interval was sampled, because the shortcut of the
// GUM is more than 5 % off.
type MonteCarlo struct {
	Draws    int     `json:"draws"`
	Seed     uint64  `json:"seed"`
	Expanded float64 `json:"expanded_uncertainty"`
	Error    float64 `json:"standard_error"`
	Shortcut float64 `json:"shortcut_expanded_uncertainty"`
}

// The figures that have budgets.
const (
	FigureError         = "error_after_zero"         // mean over the cycles, one leg
	FigureMeanError     = "error_after_zero_of_mean" // of the legs' mean
	FigureZeroOffset    = "zero_offset"
	FigureSensitivity   = "sensitivity"
	FigureLargestError  = "largest_error_after_zero"
	FigureHysteresis    = "hysteresis"
	FigureZeroReturn    = "zero_return"
	FigureRepeatability = "repeatability_range"
	FigurePooled        = "repeatability_pooled"
	FigureNoise         = "noise"
)

// mostPressures is up to how many set pressures have budgets of their own.
const mostPressures = 200

// measured is a figure with its budget, in the scale's unit.
type measured struct {
	figure   string
	set      *float64
	leg      string
	cycle    int
	unit     string
	readings int
	value    float64
	budget   *budget
	weights  []weight // over the static points; nil for what is no sum over them
	factor   float64  // of the reference's errors in it
	interval *[2]float64
}

// stated puts a measured figure into the words of the results.
func (m *measured) stated(seed uint64) (Budget, error) {
	out := Budget{Figure: m.figure, Set: m.set, Leg: m.leg, Cycle: m.cycle, Unit: m.unit, Readings: m.readings, Value: &m.value, Lines: m.budget.lines(), Reason: m.budget.why}
	if out.Reason == "" && len(m.budget.entries) == 0 {
		out.Reason = "nothing that makes it uncertain is stated or was seen"
	}
	if out.Reason != "" {
		return out, nil
	}
	u, err := m.budget.sum(seed)
	if err != nil {
		return out, err
	}
	out.Standard, out.Coverage, out.Expanded, out.Sampled = &u.Standard, &u.Coverage, &u.Expanded, sampledOf(u)
	if !math.IsInf(u.DegreesOfFreedom, 1) {
		out.DoF = &u.DegreesOfFreedom
	}
	out.Interval = m.interval
	if out.Interval == nil {
		out.Interval = &[2]float64{m.value - u.Expanded, m.value + u.Expanded}
	}
	return out, nil
}

// measured lists every static figure with its budget: at each set pressure the
// errors of the legs and of their mean, then the figures of the whole.
func (st *staticFigures) measured(s *scale) []measured {
	if len(st.points) == 0 {
		return nil
	}
	var out []measured
	if n := len(st.levels); n > 0 && n <= mostPressures {
		out = st.atPressures(s)
	}
	if z, ok := st.zeroOffset(s); ok {
		out = append(out, z)
	}
	if m, ok := st.sensitivity(s); ok {
		out = append(out, m)
	}
	if e := st.largest(s); e != nil {
		out = append(out, *e)
	}
	out = append(out, st.linearities(s)...)
	if h, ok := st.hysteresis(s); ok {
		out = append(out, h)
	}
	out = append(out, st.zeroReturns(s)...)
	out = append(out, st.repeatability(s)...)
	if n, ok := st.roughness(s); ok {
		out = append(out, n)
	}
	return out
}

// reduced is the error of some points less that of the zero, each brought to
// the set pressure: y + b (set - p) - set.
func (st *staticFigures) reduced(points []int, set float64) float64 {
	mean := func(points []int, set float64) float64 {
		var e float64
		for _, i := range points {
			t := &st.points[i]
			e += (t.y - t.p + (st.slope-1)*(set-t.p)) / float64(len(points))
		}
		return e
	}
	return mean(points, set) - mean(st.zeros, st.levels[st.points[st.zeros[0]].level])
}

// atPressures is the error after zeroing of each leg at each set pressure, mean
// over the cycles, and of the mean of the legs. Both hold the return of zero,
// the second hysteresis, as full widths: what the UUT showed is somewhere
// within them.
func (st *staticFigures) atPressures(s *scale) []measured {
	legs := make([][2][]int, len(st.levels))
	for i := range st.points {
		t := &st.points[i]
		leg := 0
		if t.Leg == legDown {
			leg = 1
		}
		legs[t.level][leg] = append(legs[t.level][leg], i)
	}
	back := st.widestReturn(s)
	var out []measured
	for l := range legs {
		set := st.levels[l]
		add := func(figure, leg string, points []int, w []weight, value, wide float64) {
			b := s.linear(st.points, w, 1, st.noise)
			b.put("return of zero", fromRun, s.unit.Name, fullWidth(back), 1, 0)
			b.put("hysteresis", fromRun, s.unit.Name, fullWidth(wide), 1, 0)
			if counts(w) == 0 {
				b = &budget{why: "zero by definition: errors are counted from here"}
			}
			out = append(out, measured{figure: figure, set: &set, leg: leg, unit: s.unit.Name, readings: len(points), value: value, budget: b, weights: w, factor: 1})
		}
		up, down := legs[l][0], legs[l][1]
		if len(up) > 0 {
			add(FigureError, "up", up, st.errorOf(up), st.reduced(up, set), 0)
		}
		if len(down) > 0 {
			add(FigureError, legDown, down, st.errorOf(down), st.reduced(down, set), 0)
		}
		if len(up) > 0 && len(down) > 0 {
			w := half(st.errorOf(up), st.errorOf(down))
			a, b := st.reduced(up, set), st.reduced(down, set)
			both := append(append([]int{}, up...), down...)
			add(FigureMeanError, "", both, w, (a+b)/2, beyond(b-a, st.scatterOf(s, st.apart(up, down)), 1))
		}
	}
	return out
}

// counts is how many points count in a figure.
func counts(w []weight) int {
	n := 0
	for _, x := range w {
		if x.g != 0 {
			n++
		}
	}
	return n
}

// half is the mean of two figures.
func half(a, b []weight) []weight {
	out := make([]weight, 0, len(a)+len(b))
	place := make(map[int]int, len(a)+len(b))
	for _, w := range [][]weight{a, b} {
		for _, x := range w {
			k, known := place[x.i]
			if !known {
				k = len(out)
				place[x.i] = k
				out = append(out, weight{i: x.i})
			}
			out[k].g += x.g / 2
		}
	}
	return out
}

// apart is down less up, each the mean of its points.
func (st *staticFigures) apart(up, down []int) []weight {
	var w []weight
	for _, i := range down {
		w = append(w, weight{i, 1 / float64(len(down))})
	}
	for _, i := range up {
		w = append(w, weight{i, -1 / float64(len(up))})
	}
	return w
}

// scatterOf is the variance that the scatter of this run leaves in a figure.
func (st *staticFigures) scatterOf(s *scale, w []weight) float64 {
	m, n := s.sumsOf(st.points, w), st.noise
	return m.reference*n.vP + m.blocks*n.vY + m.points*n.vSingle + m.cells*n.vCell
}

// beyond is what a width, the largest of so many alike, has beyond what scatter
// of that variance makes it: the root of width^2 less the mean square of the
// largest of as many normal deviates. The scatter is in the budget already.
func beyond(width, variance float64, of int) float64 {
	// Mean squares of the largest of 1, 2, 3... normal deviates, computed from
	// their distribution with scipy 1.10; from 8 on they grow so slowly that the
	// last one stands for all: too little is taken off then.
	largest := [...]float64{1, 1.6366, 2.1027, 2.4702, 2.7737, 3.0324, 3.2577, 3.4574}
	return math.Sqrt(math.Max(0, width*width-variance*largest[min(max(of, 1), len(largest))-1]))
}

// widestReturn is the largest return of zero over the cycles beyond their
// scatter, 0 when none was seen.
func (st *staticFigures) widestReturn(s *scale) float64 {
	var widest, variance float64
	cycles := 0
	for _, m := range st.zeroReturns(s) {
		cycles++
		widest = math.Max(widest, math.Abs(m.value))
		variance = math.Max(variance, st.scatterOf(s, m.weights))
	}
	return beyond(widest, variance, cycles)
}
