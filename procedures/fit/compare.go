package fit

import (
	"fmt"
	"math"
)

// compare fills in what compares legs, cycles and mountings.
func (w *work) compare(f *Figures) {
	f.Points = make([]AtSet, len(w.levels))
	for l, set := range w.levels {
		f.Points[l].Set = set
	}
	w.hysteresis(f)
	w.repeatability(f)
	w.reproducibility(f)
}

// hysteresis compares the legs of each cycle at each set pressure.
func (w *work) hysteresis(f *Figures) {
	zero := w.zeroLevel()
	sum, n := make([]float64, len(w.levels)), make([]float64, len(w.levels))
	var values []float64
	for k := 1; k < len(w.cells); k++ {
		up, down := w.cells[k-1], w.cells[k]
		if up.cycle != down.cycle || up.level != down.level {
			continue
		}
		h := down.r - up.r
		values = append(values, h)
		f.EachHysteresis = append(f.EachHysteresis, Located{Value: h, At: w.levels[up.level], Cycle: w.cycles[up.cycle], Down: true})
		sum[up.level] += math.Abs(h)
		n[up.level]++
		if up.level == zero {
			f.ZeroReturn[up.cycle] = &h
		}
	}
	if len(values) == 0 {
		return
	}
	largest := f.EachHysteresis[first(values, w.size()*nearlyEqual, math.Abs)]
	f.Hysteresis = &largest
	for l := range sum {
		if n[l] > 0 {
			mean := sum[l] / n[l]
			f.Points[l].Hysteresis = &mean
		}
	}
}

// zeroLevel is the set pressure nearest zero; of two as near, the lower.
func (w *work) zeroLevel() int {
	zero := 0
	for l, set := range w.levels {
		if math.Abs(set) < math.Abs(w.levels[zero]) {
			zero = l
		}
	}
	return zero
}

func (w *work) size() float64 {
	var size float64
	for _, y := range w.UUT {
		size = math.Max(size, math.Abs(y))
	}
	return size
}

// series is the cells of one set pressure, leg and mounting.
type series struct{ n, sum, low, high float64 }

func (s *series) add(x float64) {
	if s.n == 0 {
		s.low, s.high = x, x
	}
	s.n++
	s.sum += x
	s.low, s.high = math.Min(s.low, x), math.Max(s.high, x)
}

// mountings numbers the mounting of each cycle.
func (w *work) mountings() (of []int, n int) {
	of = make([]int, len(w.cycles))
	if w.Mounting == nil {
		return of, 1
	}
	index, values := dense(w.Mounting)
	for i, c := range w.cycle {
		of[c] = index[i]
	}
	return of, len(values)
}

// alike visits the cells of each mounting, set pressure and leg.
func (w *work) alike(mounting []int, mountings int, visit func(cells []int)) {
	n := len(w.cells)
	leg, level, mount := make([]int, n), make([]int, n), make([]int, n)
	for k, c := range w.cells {
		leg[k], level[k], mount[k] = c.leg, c.level, mounting[c.cycle]
	}
	order := sorted(sorted(sorted(counted(n), leg, 2), level, len(w.levels)), mount, mountings)
	from := 0
	for k, c := range order {
		if next := k + 1; next == n || leg[order[next]] != leg[c] || level[order[next]] != level[c] || mount[order[next]] != mount[c] {
			visit(order[from:next])
			from = next
		}
	}
}

// repeatability compares the cycles of one mounting at each set pressure in
// each leg, as read, and less the zero of its own cycle, read before the up leg.
func (w *work) repeatability(f *Figures) {
	mounting, mountings := w.mountings()
	zeros := w.zeros()
	var squares, largest float64
	dof := 0
	w.alike(mounting, mountings, func(cells []int) {
		var all, less series
		for _, k := range cells {
			c := w.cells[k]
			all.add(c.r)
			if x := c.r - zeros[c.cycle]; !math.IsNaN(x) {
				less.add(x)
			}
		}
		at := &f.Points[w.cells[cells[0]].level]
		if less.n > 1 {
			at.Repeatability = larger(at.Repeatability, less.high-less.low)
		}
		if all.n < 2 {
			return
		}
		for _, k := range cells {
			d := w.cells[k].r - all.sum/all.n
			squares += d * d
		}
		dof += len(cells) - 1
		spread := all.high - all.low
		largest = math.Max(largest, spread)
		if w.cells[cells[0]].leg == 0 {
			at.RangeUp = larger(at.RangeUp, spread)
		} else {
			at.RangeDown = larger(at.RangeDown, spread)
		}
	})
	if dof > 0 {
		sd := math.Sqrt(squares / float64(dof))
		f.Repeatability = Repeatability{LargestRange: &largest, PooledSD: &sd, DoF: &dof}
	}
}

func larger(a *float64, b float64) *float64 {
	if a != nil && *a >= b {
		return a
	}
	return &b
}

// zeros is the residual at zero of the up leg of each cycle, NaN without.
func (w *work) zeros() []float64 {
	zero := w.zeroLevel()
	zeros := make([]float64, len(w.cycles))
	for c := range zeros {
		zeros[c] = math.NaN()
	}
	for _, c := range w.cells {
		if c.level == zero && c.leg == 0 {
			zeros[c.cycle] = c.r
		}
	}
	return zeros
}

// reproducibility compares the first cycles of the mountings, each less its own
// zero.
func (w *work) reproducibility(f *Figures) {
	mounting, mountings := w.mountings()
	zeros := w.zeros()
	begins := make([]int, mountings)
	for c := len(mounting) - 1; c >= 0; c-- {
		begins[mounting[c]] = c
	}
	across := make([]series, 2*len(w.levels))
	for _, c := range w.cells {
		if x := c.r - zeros[c.cycle]; !math.IsNaN(x) && begins[mounting[c.cycle]] == c.cycle {
			across[2*c.level+c.leg].add(x)
		}
	}
	for k, s := range across {
		if s.n > 1 {
			at := &f.Points[k/2]
			at.Reproducibility = larger(at.Reproducibility, s.high-s.low)
			f.Reproducibility = larger(f.Reproducibility, s.high-s.low)
		}
	}
}

// reserve says what weakens the figures.
func (f *Figures) reserve(w *work, grouped bool) {
	add := func(code, text string) { f.Reservations = append(f.Reservations, Reservation{code, text}) }
	oneLeg := w.oneLeg()
	if f.Cycles == 1 {
		add("one_cycle", "one cycle shows no repeatability")
	}
	if oneLeg {
		add("one_leg", "one leg shows no hysteresis, and the linearity is that leg's alone")
	}
	switch {
	case !grouped:
		add("points_not_grouped", "without set pressures the readings of up and down legs cannot be matched by rank")
	case f.Line == nil:
		add("points_not_grouped", "fewer than three readings, or all at one pressure: they carry no line, and nothing that needs one")
	case f.Hysteresis == nil && !oneLeg:
		add("points_not_grouped", "no cycle has a set pressure in both legs: nothing shows hysteresis")
	case f.Repeatability.DoF == nil && f.Cycles > 1:
		add("points_not_grouped", "no set pressure was read in the same leg of two cycles: nothing shows repeatability")
	}
	if n, cycle, at := w.missing(); n > 0 && f.Hysteresis != nil {
		add("points_missing", fmt.Sprintf("%d points lack the reading of one leg or both, the first in cycle %d at %.6g: what is compared there is without them", n, cycle, at))
	}
}

// missing counts the set pressures between the ends that lack a leg, over the
// cycles that have both, and names the first. At the ends the legs meet.
func (w *work) missing() (n, cycle int, at float64) {
	between := len(w.levels) - 2
	for from := 0; from < len(w.cells); {
		to := from
		var legs [2]bool
		for to < len(w.cells) && w.cells[to].cycle == w.cells[from].cycle {
			legs[w.cells[to].leg] = true
			to++
		}
		both, next := 0, 1 // set pressures with both legs; the first that may lack one
		for k := from; k+1 < to; k++ {
			if l := w.cells[k].level; l == w.cells[k+1].level && l > 0 && l <= between {
				both++
				if l == next {
					next++
				}
			}
		}
		if legs[0] && legs[1] && both < between {
			if n == 0 {
				cycle, at = w.cycles[w.cells[from].cycle], w.levels[next]
			}
			n += between - both
		}
		from = to
	}
	return n, cycle, at
}

// explain gives every figure that is nil its reason.
func (f *Figures) explain(w *work, grouped bool) {
	add := func(nothing bool, figure, reason string) {
		if !nothing {
			return
		}
		switch {
		case f.Line == nil:
			reason = "fewer than three readings, or all at one pressure: they carry no line"
		case !grouped:
			reason = "the readings of the legs cannot be matched: no set pressures, and the legs differ in number"
		}
		f.Undetermined = append(f.Undetermined, Undetermined{figure, reason})
	}
	oneCycle := "one cycle shows nothing twice"
	add(f.Line == nil, FigureLine, "")
	add(f.Linearity.Independent == nil, FigureLinearity, f.whyNotLinear(w))
	hysteresis := "no cycle has a set pressure in both legs"
	if w.oneLeg() {
		hysteresis = "only one leg was read"
	}
	add(f.Hysteresis == nil, FigureHysteresis, hysteresis)
	repeatability := "no set pressure was read in the same leg of two cycles of one mounting"
	if f.Cycles == 1 {
		repeatability = oneCycle
	}
	add(f.Repeatability.DoF == nil, FigureRepeatability, repeatability)
	_, mountings := w.mountings()
	reproducibility := "the first cycles of the mountings have no set pressure and zero in common"
	if mountings == 1 {
		reproducibility = "the UUT was mounted once"
	}
	add(f.Reproducibility == nil, FigureReproducibility, reproducibility)
	for c, z := range f.ZeroReturn {
		if z == nil {
			add(true, FigureZeroReturn, fmt.Sprintf("cycle %d has no zero in both legs", w.cycles[c]))
			break
		}
	}
	add(f.Curvature == nil, FigureCurvature, "fewer than three set pressures, or no reading to spare")
}

func (f *Figures) whyNotLinear(w *work) string {
	for l := 1; l < len(f.Points)-1; l++ {
		if f.Points[l].Average == nil {
			return fmt.Sprintf("at set pressure %.6g only one leg was read: there is no average of the legs", w.levels[l])
		}
	}
	return "all readings are at one set pressure"
}
