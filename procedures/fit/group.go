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
	type leg struct {
		cycle int
		down  bool
	}
	legs := map[leg][]int{}
	for _, i := range w.order {
		k := leg{w.Cycle[i], w.Down[i]}
		legs[k] = append(legs[k], i)
	}
	longest, shortest := 0, len(w.Reference)
	for k, ranked := range legs {
		slices.SortStableFunc(ranked, func(a, b int) int { return cmp.Compare(w.Reference[a], w.Reference[b]) })
		legs[k] = ranked
		longest, shortest = max(longest, len(ranked)), min(shortest, len(ranked))
	}
	if longest-shortest > 1 {
		return false
	}
	// Ranks from the bottom: the top, if one leg alone has it, is the last.
	for rank := range longest {
		var sum, n float64
		for _, i := range w.order {
			if ranked := legs[leg{w.Cycle[i], w.Down[i]}]; rank < len(ranked) && ranked[rank] == i {
				sum, n = sum+w.Reference[i], n+1
			}
		}
		for _, ranked := range legs {
			if rank < len(ranked) {
				w.sets[ranked[rank]] = sum / n
			}
		}
	}
	return true
}

// cell is the readings of one cycle, leg and set pressure.
type cell struct {
	cycle int
	down  bool
	set   float64
}

// cells averages the residuals of each cell.
func (w *work) cells() map[cell]float64 {
	sum, n := map[cell]float64{}, map[cell]float64{}
	for i, r := range w.r {
		k := cell{w.Cycle[i], w.Down[i], w.sets[i]}
		sum[k] += r
		n[k]++
	}
	for k := range sum {
		sum[k] /= n[k]
	}
	return sum
}

// levels are the set pressures in rising order.
func (w *work) levels() []float64 {
	s := slices.Clone(w.sets)
	slices.Sort(s)
	return slices.Compact(s)
}

func (w *work) hysteresis(cycles []int) *Located {
	cells := w.cells()
	var best *Located
	for _, cycle := range cycles {
		for _, set := range w.levels() {
			up, ok1 := cells[cell{cycle, false, set}]
			down, ok2 := cells[cell{cycle, true, set}]
			if h := down - up; ok1 && ok2 && (best == nil || math.Abs(h) > math.Abs(best.Value)) {
				best = &Located{Value: h, At: set, Cycle: cycle, Down: true}
			}
		}
	}
	return best
}

func (w *work) repeatability() Repeatability {
	cells := w.cells()
	cycles := slices.Clone(w.Cycle)
	slices.Sort(cycles)
	cycles = slices.Compact(cycles)
	var out Repeatability
	var squares, largest float64
	dof := 0
	for _, set := range w.levels() {
		for _, down := range []bool{false, true} {
			var values []float64
			for _, cycle := range cycles {
				if r, ok := cells[cell{cycle, down, set}]; ok {
					values = append(values, r)
				}
			}
			if len(values) < 2 {
				continue
			}
			m := mean(values)
			for _, v := range values {
				squares += (v - m) * (v - m)
			}
			dof += len(values) - 1
			largest = math.Max(largest, slices.Max(values)-slices.Min(values))
		}
	}
	if dof == 0 {
		return out
	}
	sd := math.Sqrt(squares / float64(dof))
	return Repeatability{LargestRange: &largest, PooledSD: &sd, DoF: &dof}
}

// linearities draws four lines through the averages at the set pressures.
func (w *work) linearities(l Straight) Linearities {
	var x, y []float64
	for _, set := range w.levels() {
		var values []float64
		for i, s := range w.sets {
			if s == set {
				values = append(values, w.UUT[i]+l.Slope*(set-w.Reference[i]))
			}
		}
		x, y = append(x, set), append(y, mean(values))
	}
	return Lines(x, y)
}
