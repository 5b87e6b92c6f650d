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
	zeros := w.zeros()
	mounting, mountings := w.mountings()
	w.repeatability(f, zeros, mounting)
	if mountings > 1 {
		w.reproducibility(f, zeros, mounting, mountings)
	}
}

// hysteresis compares the legs of each cycle at each set pressure.
func (w *work) hysteresis(f *Figures) {
	zero := w.zeroLevel()
	astray := w.astray()
	paired := func(k int) bool {
		return w.paired(k) && !astray[[2]int{w.cells[k].cycle, w.cells[k].level}]
	}
	pairs := 0
	for k := 1; k < len(w.cells); k++ {
		if paired(k) {
			pairs++
		}
	}
	if pairs == 0 {
		return
	}
	f.EachHysteresis = make([]Located, 0, pairs)
	mean, n := make([]float64, len(w.levels)), w.ints(len(w.levels))
	var most float64
	for k := 1; k < len(w.cells); k++ {
		if !paired(k) {
			continue
		}
		c := w.cells[k]
		h := c.r - w.cells[k-1].r
		f.EachHysteresis = append(f.EachHysteresis, Located{Value: h, At: w.levels[c.level], Cycle: w.cycles[c.cycle], Down: true})
		most = max(most, math.Abs(h))
		mean[c.level] += math.Abs(h)
		n[c.level]++
		if c.level == zero {
			f.ZeroReturn[c.cycle] = &f.EachHysteresis[len(f.EachHysteresis)-1].Value
		}
	}
	for k := range f.EachHysteresis {
		if math.Abs(f.EachHysteresis[k].Value) >= most-w.tie(most) {
			largest := f.EachHysteresis[k]
			f.Hysteresis = &largest
			break
		}
	}
	for l := range mean {
		if n[l] > 0 {
			mean[l] /= float64(n[l])
			f.Points[l].Hysteresis = &mean[l]
		}
	}
}

// astray is the cycles and levels with a reading that was come to from the
// wrong side; nil, which holds nothing, when there is none.
func (w *work) astray() map[[2]int]bool {
	var found map[[2]int]bool
	for i, yes := range w.Astray {
		if !yes {
			continue
		}
		if found == nil {
			found = map[[2]int]bool{}
		}
		found[[2]int{w.cycle[i], w.level[i]}] = true
	}
	return found
}

// paired says that cell k is the down leg of the cell before it.
func (w *work) paired(k int) bool {
	return w.cells[k-1].cycle == w.cells[k].cycle && w.cells[k-1].level == w.cells[k].level
}

// tie is by how much figures of this size may differ and be the same but for
// rounding: where the largest lies must not depend on the last bits.
func (w *work) tie(most float64) float64 {
	return max(1e-9*math.Abs(most), 1e-12*w.size)
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

// series is numbers that should be alike.
type series struct{ n, sum, low, high, wide float64 }

func (s *series) spread() *float64 {
	s.wide = s.high - s.low
	return &s.wide
}

func (s *series) add(x float64) {
	if s.n == 0 {
		s.low, s.high = x, x
	}
	s.n++
	s.sum += x
	s.low, s.high = min(s.low, x), max(s.high, x)
}

// mountings numbers the mounting of each cycle.
func (w *work) mountings() (of []int, n int) {
	of = w.ints(len(w.cycles))
	if w.Mounting == nil {
		return of, 1
	}
	index, values := w.dense(w.Mounting)
	for i, c := range w.cycle {
		of[c] = index[i]
	}
	return of, len(values)
}

// repeatability compares the cycles of one mounting at each set pressure in
// each leg, as read, and less the zero of its own cycle, read before the up leg.
func (w *work) repeatability(f *Figures, zeros []float64, mounting []int) {
	key := w.ints(len(w.cells))
	for k, c := range w.cells {
		key[k] = (mounting[c.cycle]*len(w.levels)+c.level)*2 + c.leg
	}
	number, keys := w.dense(key)
	groups := make([]struct {
		as, less series
	}, len(keys))
	for k, c := range w.cells {
		g := &groups[number[k]]
		g.as.add(c.r)
		if x := c.r - zeros[c.cycle]; !math.IsNaN(x) {
			g.less.add(x)
		}
	}
	squares, n := make([]float64, len(w.levels)), w.ints(len(w.levels))
	for k, c := range w.cells {
		g := &groups[number[k]]
		d := c.r - g.as.sum/g.as.n
		squares[c.level] += d * d
	}
	var largest float64
	for k := range groups {
		g := &groups[k]
		at := &f.Points[keys[k]/2%len(w.levels)]
		if g.less.n > 1 {
			at.Repeatability = larger(at.Repeatability, g.less.spread())
		}
		if g.as.n < 2 {
			continue
		}
		n[keys[k]/2%len(w.levels)] += int(g.as.n) - 1
		largest = max(largest, *g.as.spread())
		if keys[k]%2 == 0 {
			at.RangeUp = larger(at.RangeUp, g.as.spread())
		} else {
			at.RangeDown = larger(at.RangeDown, g.as.spread())
		}
	}
	var all float64
	dof := 0
	for l := range squares {
		all += squares[l]
		dof += n[l]
		if n[l] > 0 {
			squares[l] /= float64(n[l]) // a variance
		}
	}
	if dof == 0 {
		return
	}
	sd := math.Sqrt(all / float64(dof))
	f.Repeatability = Repeatability{LargestRange: &largest, PooledSD: &sd, DoF: &dof}
	w.growing(f, squares, n)
	for l := range squares {
		if f.Points[l].DoF = n[l]; n[l] > 0 {
			squares[l] = math.Sqrt(squares[l])
			f.Points[l].SD = &squares[l]
		}
	}
}

func larger(a, b *float64) *float64 {
	if a != nil && *a >= *b {
		return a
	}
	return b
}

// zeros is the residual at zero of the up leg of each cycle, NaN without.
func (w *work) zeros() []float64 {
	zero := w.zeroLevel()
	zeros := w.floats(len(w.cycles))
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
func (w *work) reproducibility(f *Figures, zeros []float64, mounting []int, mountings int) {
	begins := w.ints(mountings)
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
			at.Reproducibility = larger(at.Reproducibility, across[k].spread())
			f.Reproducibility = larger(f.Reproducibility, at.Reproducibility)
		}
	}
}

// reserve says what weakens the figures.
func (f *Figures) reserve(w *work, grouped bool) {
	add := func(code, text string) { f.Reservations = append(f.Reservations, Reservation{code, text}) }
	if f.Cycles == 1 {
		add("one_cycle", "one cycle shows no repeatability")
	}
	if w.oneLeg {
		add("one_leg", "one leg shows no hysteresis, and the linearity is that leg's alone")
	}
	switch {
	case !grouped:
		add("points_not_grouped", "without set pressures the readings of up and down legs cannot be matched by rank")
	case f.Line == nil:
		add("points_not_grouped", "fewer than three readings, or all at one pressure: they carry no line, and nothing that needs one")
	case f.Hysteresis == nil && !w.oneLeg:
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
	if w.oneLeg {
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
