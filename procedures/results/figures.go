package results

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"kymobench/procedures/fit"
)

// zeroOffset is as read before zeroing: in the zero stage, or else the first
// reading at zero. Nothing cancels: the head and the zeros are in it.
func (st *staticFigures) zeroOffset(s *scale) (measured, bool) {
	points, w := st.points, []weight(nil)
	switch {
	case st.zero != nil:
		points, w = []taken{*st.zero}, []weight{{0, 1}}
	case len(st.zeros) > 0:
		for _, i := range st.zeros {
			w = append(w, weight{i, 1 / float64(len(st.zeros))})
		}
	default:
		return measured{}, false
	}
	b := s.linear(points, w, 1, st.noise)
	b.put("head: height of the diaphragm", fromBench, s.unit.Name, s.headOf, 1, 0)
	b.put("readout, zero", fromCertificate, s.unit.Name, s.zeroOf, 1, 0)
	return measured{figure: FigureZeroOffset, unit: s.unit.Name, readings: len(w), value: value(points, w), budget: b}, true
}

// sensitivity is the slope of the least-squares line over the points times the
// nominal sensitivity. The line over these set pressures is the measurand: what
// bow and hysteresis make the readings lie off it is no uncertainty of it. With
// c_i = (p_i - mean p)/Sum (p_j - mean p)^2 the slope is Sum c_i y_i.
func (st *staticFigures) sensitivity(s *scale) (measured, bool) {
	if st.figures.Line == nil {
		return measured{}, false
	}
	var mp, sxx float64
	for i := range st.points {
		mp += st.points[i].p / float64(len(st.points))
	}
	for i := range st.points {
		sxx += (st.points[i].p - mp) * (st.points[i].p - mp)
	}
	if !(sxx > 0) {
		return measured{}, false
	}
	w := make([]weight, len(st.points))
	for i := range st.points {
		w[i] = weight{i, (st.points[i].p - mp) / sxx}
	}
	b := s.linear(st.points, w, st.slope, st.noise)
	m := measured{figure: FigureSensitivity, unit: "1", readings: len(w), value: st.slope, budget: b, weights: w, factor: st.slope}
	if s.nominal > 0 && st.static.Sensitivity != nil {
		m.unit, m.value = st.static.Sensitivity.Unit, st.static.Sensitivity.Value
		m.budget = b.scaled(*st.static.NominalUsed)
	}
	return m, true
}

// errorAt is the error after zeroing of one point, as it was then: neither
// what other cycles showed nor hysteresis is uncertain about it.
func (st *staticFigures) errorAt(s *scale, i int) measured {
	t := &st.points[i]
	w := st.errorOf([]int{i})
	set := t.p
	if t.hasSet {
		set = t.set
	}
	return measured{figure: FigureLargestError, set: &set, leg: t.Leg, cycle: t.Cycle, unit: s.unit.Name, readings: t.nY, value: value(st.points, w),
		budget: s.linear(st.points, w, 1, st.noise), weights: w, factor: 1}
}

func (st *staticFigures) largest(s *scale) *measured {
	e := st.figures.ErrorAfterZero
	if e == nil {
		return nil
	}
	var found *measured
	for i := range st.points {
		t := &st.points[i]
		if t.Cycle != e.Cycle || (t.Leg == legDown) != e.Down || len(st.levels) > 0 && st.levels[t.level] != e.At {
			continue
		}
		m := st.errorAt(s, i)
		if found == nil || math.Abs(m.value-e.Value) < math.Abs(found.value-e.Value) {
			found = &m
		}
	}
	if found != nil {
		found.value = e.Value
	}
	return found
}

// hysteresis is down less up where it is largest; what the reference's
// certificate leaves is common to both and cancels.
func (st *staticFigures) hysteresis(s *scale) (measured, bool) {
	h := st.figures.Hysteresis
	if h == nil {
		return measured{}, false
	}
	w := st.downLessUp(h.Cycle, h.At)
	at := h.At
	return measured{figure: FigureHysteresis, set: &at, cycle: h.Cycle, unit: s.unit.Name, readings: len(w), value: h.Value,
		budget: s.linear(st.points, w, st.slope, st.noise.within()), weights: w, factor: st.slope}, true
}

// downLessUp is the weights of the difference of the legs of one cycle.
func (st *staticFigures) downLessUp(cycle int, set float64) []weight {
	var up, down []int
	for i := range st.points {
		if t := &st.points[i]; t.Cycle == cycle && st.levels[t.level] == set {
			if t.Leg == legDown {
				down = append(down, i)
			} else {
				up = append(up, i)
			}
		}
	}
	return st.apart(up, down)
}

// within is the noise of the readings alone: that cycles differ is a property
// of the UUT, and no uncertainty of what it did in one of them.
func (n noise) within() noise {
	n.vCell, n.dofCell = 0, 0
	return n
}

func (st *staticFigures) zeroReturns(s *scale) []measured {
	var out []measured
	if len(st.levels) == 0 {
		return nil
	}
	zero := 0
	for l, set := range st.levels {
		if math.Abs(set) < math.Abs(st.levels[zero]) {
			zero = l
		}
	}
	cycles := map[int]bool{}
	k := 0
	for _, h := range st.figures.EachHysteresis {
		if h.At != st.levels[zero] || cycles[h.Cycle] || k >= mostPressures {
			continue
		}
		cycles[h.Cycle] = true
		k++
		w := st.downLessUp(h.Cycle, h.At)
		at := h.At
		out = append(out, measured{figure: FigureZeroReturn, set: &at, cycle: h.Cycle, unit: s.unit.Name, readings: len(w), value: h.Value,
			budget: s.linear(st.points, w, st.slope, st.noise.within()), weights: w, factor: st.slope})
	}
	return out
}

// linearities have the weights that the averages at the set pressures have in
// them, found by moving each a little: a deviation is a sum of a few averages.
// They say nothing of the bias that the largest of several noisy deviations has.
func (st *staticFigures) linearities(s *scale) []measured {
	n := len(st.levels)
	y := make([]float64, n)
	if n < 3 || n > mostPressures || len(st.figures.Points) != n {
		return nil
	}
	span := st.levels[n-1] - st.levels[0]
	for l, p := range st.figures.Points {
		if p.Average == nil {
			return nil
		}
		y[l] = *p.Average
	}
	pick := func(l fit.Linearities) [4]*fit.Deviation {
		return [4]*fit.Deviation{l.Independent, l.Terminal, l.ZeroBased, l.LeastSquares}
	}
	found := pick(st.figures.Linearity)
	slopes := [4][]float64{}
	step := 1e-6 * span
	for l := range y {
		was := y[l]
		y[l] = was + step
		above := pick(fit.Lines(st.levels, y, nil))
		y[l] = was - step
		below := pick(fit.Lines(st.levels, y, nil))
		y[l] = was
		for k := range found {
			if above[k] == nil || below[k] == nil {
				return nil
			}
			slopes[k] = append(slopes[k], (above[k].Value-below[k].Value)/(2*step))
		}
	}
	var out []measured
	for k, figure := range []string{"linearity_independent", "linearity_terminal", "linearity_zero_based", "linearity_least_squares"} {
		if found[k] == nil {
			continue
		}
		w := st.averaged(slopes[k])
		out = append(out, measured{figure: figure, unit: s.unit.Name, readings: len(st.points), value: found[k].Value,
			budget: s.linear(st.points, w, st.slope, st.noise), weights: w, factor: st.slope})
	}
	return out
}

// averaged turns weights of the averages at the set pressures into those of
// the points: mean over the cycles, then over the legs.
func (st *staticFigures) averaged(of []float64) []weight {
	counts := make([][2]float64, len(st.levels))
	leg := func(t *taken) int {
		if t.Leg == legDown {
			return 1
		}
		return 0
	}
	for i := range st.points {
		counts[st.points[i].level][leg(&st.points[i])]++
	}
	var w []weight
	for i := range st.points {
		t := &st.points[i]
		n := counts[t.level]
		g := of[t.level] / n[leg(t)]
		if n[0] > 0 && n[1] > 0 {
			g /= 2
		}
		if g != 0 {
			w = append(w, weight{i, g})
		}
	}
	return w
}

// repeatability is the largest range and the pooled standard deviation. The
// range has the noise of two readings; where readings are single theirs cannot
// be told from it. A standard deviation of n degrees of freedom is itself known
// to 1/sqrt(2 n) of it (GUM E.4.3, from memory).
func (st *staticFigures) repeatability(s *scale) []measured {
	r := st.figures.Repeatability
	if r.PooledSD == nil {
		return nil
	}
	u := s.unit.Name
	widest := &budget{}
	if st.points[0].UUT == "" {
		widest = s.linear(st.points, []weight{{0, 1}, {len(st.points) - 1, -1}}, st.slope, st.noise.within())
		widest.cancel("reference, share of reading", "reference, at the set pressure", "reference, drift since its date",
			"reference, drift as a pressure", "reference, temperature", "readout, gain", "readout, excitation")
	} else {
		widest.why = "noise and repeatability of single readings cannot be told apart"
	}
	dof := float64(*r.DoF)
	pooled := &budget{}
	pooled.put("few cycles", fromRun, u, stated{*r.PooledSD, math.Sqrt(2 * dof), *r.PooledSD / math.Sqrt(2*dof), "normal"}, 1, 0)
	return []measured{
		{figure: FigureRepeatability, unit: u, readings: len(st.points), value: *r.LargestRange, budget: widest},
		{figure: FigurePooled, unit: u, readings: len(st.points), value: *r.PooledSD, budget: pooled, interval: ofSpread(*r.PooledSD, dof)},
	}
}

// ofSpread is the 95 % interval of a standard deviation s of normal noise, found
// with so many degrees of freedom: s sqrt(dof/chi2), chi2 the 97.5 and 2.5 %
// quantiles of chi-square (textbook).
func ofSpread(s, dof float64) *[2]float64 {
	chi2 := distuv.ChiSquared{K: dof}
	return &[2]float64{s * math.Sqrt(dof/chi2.Quantile(0.975)), s * math.Sqrt(dof/chi2.Quantile(0.025))}
}

// cancel takes contributions out by name.
func (b *budget) cancel(names ...string) {
	kept := b.entries[:0]
	for _, e := range b.entries {
		out := false
		for _, n := range names {
			out = out || e.Name == n
		}
		if !out {
			kept = append(kept, e)
		}
	}
	b.entries = kept
}

// roughness is the standard deviation of the UUT's own readings while the
// pressure stood still, pooled over the points.
func (st *staticFigures) roughness(s *scale) (measured, bool) {
	var v, dof, lag float64
	n := 0
	for i := range st.points {
		t := &st.points[i]
		v += t.vRaw * t.dofRaw
		dof += t.dofRaw
		lag += t.lagRaw
		n += t.nY
	}
	if dof == 0 || v == 0 {
		return measured{}, false
	}
	r := math.Max(0, math.Min(0.99, lag/v))
	v /= dof
	// Of neighbours that vary together fewer say something of their own.
	dof *= (1 - r*r) / (1 + r*r)
	sd := math.Sqrt(v)
	b := &budget{}
	b.put("few readings", fromRun, s.unit.Name, stated{sd, math.Sqrt(2 * dof), sd / math.Sqrt(2*dof), "normal"}, 1, 0)
	// The readout's own noise is somewhere between none and what is stated: its
	// square is taken for half of that, and may be off by as much.
	value := sd
	if q := s.noiseOf * s.noiseOf / 2; q > 0 {
		value = math.Sqrt(math.Max(v-q, 0))
		if value > s.noiseOf/2 {
			b.put("readout, noise of its own", fromBench, s.unit.Name, halfWidth(q/(2*value)), 1, 0)
		} else {
			b.why = "the UUT's noise cannot be told from that of the readout"
		}
	}
	return measured{figure: FigureNoise, unit: s.unit.Name, readings: n, value: value, budget: b}, true
}
