package fit

import (
	"cmp"
	"math"
	"slices"
)

// work is the data on their way to figures.
type work struct {
	Data
	scratch
	cycles []int // in rising order
	cycle  []int // of each reading, in cycles
	leg    []int // of each reading: 0 up, 1 down
	sets   []float64
	levels []float64 // set pressures in rising order
	level  []int     // of each reading, in levels
	time   []int     // of each reading, rising: cycle, up before down, and as the leg goes
	cells  []cell    // in order of cycle, set pressure, up before down
	oneLeg bool      // all readings are of one
	size   float64   // the largest |y|
}

// scratch lends slices of zeros from a few large pieces, for asking the system
// for each by itself takes a third of the time of a small analysis.
type scratch struct {
	whole []int
	real  []float64
	piece int // the least to ask for at a time
}

func (s *scratch) ints(n int) []int {
	if len(s.whole) < n {
		s.whole = make([]int, max(n, 8*s.piece))
	}
	out := s.whole[:n:n]
	s.whole = s.whole[n:]
	return out
}

func (s *scratch) floats(n int) []float64 {
	if len(s.real) < n {
		s.real = make([]float64, max(n, 4*s.piece))
	}
	out := s.real[:n:n]
	s.real = s.real[n:]
	return out
}

// cell is the readings of one cycle, leg and set pressure, by their mean
// residual.
type cell struct {
	cycle, level, leg int
	r                 float64
}

// number replaces cycles and legs by indices.
func (w *work) number() {
	w.cycle, w.cycles = w.dense(w.Cycle)
	w.leg = w.ints(len(w.Down))
	for i, down := range w.Down {
		if down {
			w.leg[i] = 1
		}
		w.size = max(w.size, math.Abs(w.UUT[i]))
	}
	w.oneLeg = !slices.Contains(w.leg, 1-w.leg[0])
}

// dense numbers the values of x from the lowest, 0, up. Linear in len(x) where
// the values lie close, as numbers of cycles do.
func (s *scratch) dense(x []int) (index, values []int) {
	low, high := x[0], x[0]
	for _, v := range x {
		low, high = min(low, v), max(high, v)
	}
	index = s.ints(len(x))
	if span := uint64(high) - uint64(low); span <= uint64(4*len(x)+64) {
		seen := s.ints(int(span) + 1)
		distinct := 0
		for _, v := range x {
			distinct += 1 - seen[v-low]
			seen[v-low] = 1
		}
		values = s.ints(distinct)[:0]
		for k, there := range seen {
			if there == 1 {
				seen[k] = len(values)
				values = append(values, low+k)
			}
		}
		for i, v := range x {
			index[i] = seen[v-low]
		}
		return index, values
	}
	values = slices.Clone(x)
	slices.Sort(values)
	values = slices.Compact(values)
	for i, v := range x {
		index[i], _ = slices.BinarySearch(values, v)
	}
	return index, values
}

// sorted is order, stably sorted by the key of each, 0 to keys-1, in linear
// time.
func sorted(order, key []int, keys int) []int {
	start := make([]int, keys+1)
	for _, i := range order {
		start[key[i]+1]++
	}
	for k := range keys {
		start[k+1] += start[k]
	}
	out := make([]int, len(order))
	for _, i := range order {
		out[start[key[i]]] = i
		start[key[i]]++
	}
	return out
}

func counted(n int) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = i
	}
	return out
}

// group gives every reading its set pressure; false when that is impossible,
// and every set pressure is then NaN.
func (w *work) group() bool {
	if w.Set != nil {
		w.sets = w.Set
		w.rank()
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
	means := w.means(w.Reference, level, len(longest))
	for i, rank := range level {
		w.sets[i] = means[rank]
	}
	w.rank()
	return true
}

// ranked is the readings of each leg from the lowest p up, by y where p is
// equal; the legs in order of time.
func (w *work) ranked() [][]int {
	order := sorted(sorted(counted(len(w.leg)), w.leg, 2), w.cycle, len(w.cycles))
	var legs [][]int
	from := 0
	for k := range order {
		if k+1 == len(order) || w.cycle[order[k+1]] != w.cycle[order[k]] || w.leg[order[k+1]] != w.leg[order[k]] {
			legs = append(legs, order[from:k+1])
			from = k + 1
		}
	}
	for _, ranked := range legs {
		slices.SortFunc(ranked, func(a, b int) int {
			return cmp.Or(compareFloats(w.Reference[a], w.Reference[b]), compareFloats(w.UUT[a], w.UUT[b]))
		})
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
	below, top := math.Abs(highest-w.Reference[longest[n-2]]), math.Abs(highest-w.Reference[longest[n-1]])
	return 2*below <= top*(1+1e-9) // but for rounding; between the two it may be either
}

// means averages x by group, two passes against rounding. Every group has at
// least one x.
func (s *scratch) means(x []float64, group []int, groups int) []float64 {
	m, n, rest := s.floats(groups), s.floats(groups), s.floats(groups)
	for i, g := range group {
		m[g] += x[i]
		n[g]++
	}
	for g := range m {
		m[g] /= n[g]
	}
	for i, g := range group {
		rest[g] += x[i] - m[g]
	}
	for g := range m {
		m[g] += rest[g] / n[g]
	}
	return m
}

// rank numbers the set pressures from the lowest up, equal ones alike. Few
// different ones are gathered without sorting all.
func (w *work) rank() {
	const few = 32
	w.levels = w.floats(len(w.sets))[:0]
	for _, set := range w.sets {
		if slices.Contains(w.levels, set) {
			continue
		}
		if len(w.levels) == few {
			w.levels = append(w.levels[:0], w.sets...)
			break
		}
		w.levels = append(w.levels, set)
	}
	slices.Sort(w.levels)
	w.levels = slices.Compact(w.levels)
	w.level = w.ints(len(w.sets))
	l, last := 0, len(w.levels)-1
	for i, set := range w.sets { // most stand beside the one before
		switch {
		case w.levels[l] == set:
		case l < last && w.levels[l+1] == set:
			l++
		case l > 0 && w.levels[l-1] == set:
			l--
		default:
			l, _ = slices.BinarySearch(w.levels, set)
		}
		w.level[i] = l
	}
}

// inTime numbers the readings by cycle, up before down, an up leg from the
// lowest set pressure, a down leg from the highest. Those of one cell have one
// number, when the readings are grouped.
func (w *work) inTime(grouped bool) {
	w.time = w.ints(len(w.leg))
	if !grouped {
		k := 0
		for _, leg := range w.ranked() {
			if w.leg[leg[0]] == 1 {
				slices.Reverse(leg)
			}
			for _, i := range leg {
				w.time[i] = k
				k++
			}
		}
		return
	}
	n := len(w.levels)
	for i, l := range w.level {
		if w.leg[i] == 1 {
			l = 2*n - 1 - l
		}
		w.time[i] = 2*n*w.cycle[i] + l
	}
}

// inCells averages the residuals of each cell.
func (w *work) inCells(line Straight) {
	key, r := w.ints(len(w.UUT)), w.floats(len(w.UUT))
	n := len(w.levels)
	for i := range key {
		key[i] = (w.cycle[i]*n+w.level[i])*2 + w.leg[i]
		r[i] = w.UUT[i] - line.Intercept - line.Slope*w.Reference[i]
	}
	number, keys := w.dense(key)
	w.cells = make([]cell, len(keys))
	for k, r := range w.means(r, number, len(keys)) {
		w.cells[k] = cell{cycle: keys[k] / 2 / n, level: keys[k] / 2 % n, leg: keys[k] % 2, r: r}
	}
}
