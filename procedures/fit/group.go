package fit

import (
	"cmp"
	"math"
	"slices"
)

// group gives every reading its set pressure; false when that is impossible,
// and every set pressure is then NaN.
func (w *work) group() bool {
	if w.Set != nil {
		w.sets = w.Set
		return true
	}
	w.sets = make([]float64, len(w.Reference))
	for i := range w.sets {
		w.sets[i] = math.NaN()
	}
	legs := w.ranked()
	longest := slices.MaxFunc(legs, func(a, b []int) int { return cmp.Compare(len(a), len(b)) })
	for _, ranked := range legs {
		if len(ranked) != len(longest) && !w.lacksTop(ranked, longest) {
			return false
		}
	}
	level := make([]int, len(w.sets))
	for _, ranked := range legs {
		for rank, i := range ranked {
			level[i] = rank
		}
	}
	means := means(w.Reference, level, len(longest))
	for i, rank := range level {
		w.sets[i] = means[rank]
	}
	return true
}

// ranked is the readings of each leg from the lowest p up; the legs in order
// of time, for the sums over them must not depend on chance.
func (w *work) ranked() [][]int {
	var legs [][]int
	for k, i := range w.order {
		if k == 0 || w.Cycle[i] != w.Cycle[w.order[k-1]] || w.Down[i] != w.Down[w.order[k-1]] {
			legs = append(legs, nil)
		}
		last := len(legs) - 1
		legs[last] = append(legs[last], i)
	}
	for _, ranked := range legs {
		slices.SortStableFunc(ranked, func(a, b int) int { return cmp.Compare(w.Reference[a], w.Reference[b]) })
	}
	return legs
}

// lacksTop says that a leg has one reading less than the longest and that this
// is the top, read once for both legs. A leg that reaches the top and lacks
// another point would by rank be matched with wrong neighbours.
func (w *work) lacksTop(ranked, longest []int) bool {
	n := len(longest)
	if len(ranked) != n-1 {
		return false
	}
	highest := w.Reference[ranked[n-2]]
	return math.Abs(highest-w.Reference[longest[n-2]]) <= math.Abs(highest-w.Reference[longest[n-1]])
}

// means averages x by level, two passes against rounding. Every level has at
// least one x.
func means(x []float64, level []int, levels int) []float64 {
	n, m, rest := make([]float64, levels), make([]float64, levels), make([]float64, levels)
	for _, l := range level {
		n[l]++
	}
	for i, l := range level {
		m[l] += x[i] / n[l]
	}
	for i, l := range level {
		rest[l] += (x[i] - m[l]) / n[l]
	}
	for l := range m {
		m[l] += rest[l]
	}
	return m
}

// rank numbers the set pressures from the lowest up, equal ones alike.
func (w *work) rank() {
	w.levels = slices.Clone(w.sets)
	slices.Sort(w.levels)
	w.levels = slices.Compact(w.levels)
	w.level = make([]int, len(w.sets))
	for i, set := range w.sets {
		w.level[i], _ = slices.BinarySearch(w.levels, set)
	}
}

// cell is the readings of one cycle, leg and set pressure, by their mean
// residual.
type cell struct {
	cycle, level int
	down         bool
	r            float64
}

// inCells averages the residuals of each cell; in order of cycle, set
// pressure, up before down.
func (w *work) inCells() []cell {
	order := slices.Clone(w.order)
	slices.SortStableFunc(order, func(a, b int) int {
		return cmp.Or(cmp.Compare(w.Cycle[a], w.Cycle[b]), cmp.Compare(w.level[a], w.level[b]))
	}) // stable: up stays before down
	var cells []cell
	number := make([]int, len(order))
	for _, i := range order {
		c := cell{cycle: w.Cycle[i], level: w.level[i], down: w.Down[i]}
		if len(cells) == 0 || c != cells[len(cells)-1] {
			cells = append(cells, c)
		}
		number[i] = len(cells) - 1
	}
	for k, r := range means(w.r, number, len(cells)) {
		cells[k].r = r
	}
	return cells
}

// hysteresis compares the legs of each cycle at each set pressure.
func (w *work) hysteresis(cells []cell) *Located {
	var best *Located
	for k := 1; k < len(cells); k++ {
		up, down := cells[k-1], cells[k]
		if up.cycle != down.cycle || up.level != down.level {
			continue
		}
		if h := down.r - up.r; best == nil || math.Abs(h) > math.Abs(best.Value) {
			best = &Located{Value: h, At: w.levels[up.level], Cycle: up.cycle, Down: true}
		}
	}
	return best
}

// repeatability compares the cycles at each set pressure in each leg.
func repeatability(cells []cell) Repeatability {
	cells = slices.Clone(cells)
	slices.SortStableFunc(cells, func(a, b cell) int {
		switch c := cmp.Compare(a.level, b.level); {
		case c != 0 || a.down == b.down:
			return c
		case b.down:
			return -1
		}
		return 1
	})
	var squares, largest float64
	dof := 0
	for len(cells) > 0 {
		n := 1
		for n < len(cells) && cells[n].level == cells[0].level && cells[n].down == cells[0].down {
			n++
		}
		values := make([]float64, n)
		for k := range values {
			values[k] = cells[k].r
		}
		cells = cells[n:]
		m := mean(values)
		for _, v := range values {
			squares += (v - m) * (v - m)
		}
		dof += n - 1
		largest = math.Max(largest, slices.Max(values)-slices.Min(values))
	}
	if dof == 0 {
		return Repeatability{}
	}
	sd := math.Sqrt(squares / float64(dof))
	return Repeatability{LargestRange: &largest, PooledSD: &sd, DoF: &dof}
}

// linearities draws four lines through the averages at the set pressures.
func (w *work) linearities(slope float64) Linearities {
	reduced := make([]float64, len(w.UUT))
	for i, set := range w.sets {
		reduced[i] = w.UUT[i] + slope*(set-w.Reference[i])
	}
	return Lines(w.levels, means(reduced, w.level, len(w.levels)))
}
