package fit

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
)

// Data are static readings, all slices of one length: the corrected reference
// and the UUT in one pressure unit, the cycle (from 1), the leg, and the set
// pressure; Set nil when none was stated.
type Data struct {
	Reference, UUT []float64
	Cycle          []int
	Down           []bool
	Set            []float64
}

// Reservation weakens the figures.
type Reservation struct{ Code, Text string }

// Located is the largest of a figure by magnitude, signed, and where.
type Located struct {
	Value float64
	At    float64 // set pressure; NaN when the readings are not grouped
	Cycle int
	Down  bool
}

// Repeatability is nil where nothing was read twice.
type Repeatability struct {
	LargestRange, PooledSD *float64
	DoF                    *int
}

// Linearities are the largest deviations of the averages at the set pressures
// from four lines; nil when the readings are not grouped.
type Linearities struct{ Independent, Terminal, ZeroBased, LeastSquares *float64 }

// Figures are what static readings give. What they cannot give is nil.
type Figures struct {
	Line           *Straight // of UUT on reference over all readings
	Cycles         int
	ZeroOffset     *float64
	ZeroReturn     []*float64 // one for each cycle in rising order
	Linearity      Linearities
	Hysteresis     *Located
	Repeatability  Repeatability
	LargestError   *Located
	ErrorAfterZero *Located
	Sets           []float64 // set pressure of each reading as used; NaN without one
	Reservations   []Reservation
}

// ErrData: slices of unequal length, none at all, or values that are not finite.
var ErrData = errors.New("static readings not usable")

// Static computes the figures. With y the UUT, p the reference, a + b p the
// least-squares line over all readings and r = y - (a + b p):
//
//	linearity      each reading reduced to its set pressure, y + b (set - p),
//	               averaged over cycles and legs; largest |deviation| of the
//	               averages from each of four lines through them
//	hysteresis     r(down) - r(up) for each cycle and set pressure, the
//	               largest by magnitude; several readings of a cell averaged
//	repeatability  range over cycles of r at one set pressure in one leg, the
//	               largest; pooled SD over those cells
//	zero offset    y - p of the first reading at the set pressure nearest zero
//	zero return    last r less first r there, for each cycle
//	largest error  y - p, by magnitude, as read and less the zero offset
//
// First and last are by cycle, up before down, then in the order given.
// Without set pressures the readings are ranked by p within cycle and leg, and
// a rank's mean p is its set pressure; a leg that lacks the top shares that of
// the others. Legs that differ by more, or by another point than the top,
// cannot be grouped: then hysteresis, repeatability, linearity and zero return
// are nil, and the zero offset is that of the reading nearest zero. Fewer than
// three readings, or all at one p, carry no line and nothing that needs one.
//
// ErrData for slices of unequal length, no reading, and values that are not
// finite or beyond 1e150 in magnitude, whose squares no double holds.
//
// Definitions: facts of practice named in the program's guide (IEC 61298-2 and
// ISA-51.1 terms, from memory).
func Static(d Data) (Figures, error) {
	if err := refuse(d); err != nil {
		return Figures{}, err
	}
	w := work{Data: d, order: order(d)}
	grouped := w.group()
	f := Figures{LargestError: w.largest(0), Sets: w.sets}
	cycles := slices.Clone(d.Cycle)
	slices.Sort(cycles)
	cycles = slices.Compact(cycles)
	f.Cycles = len(cycles)
	if line, err := Line(d.Reference, d.UUT); err == nil {
		f.Line = &line
	}
	w.zeros(&f, cycles)
	if f.Line != nil && grouped {
		w.residuals(*f.Line)
		w.rank()
		cells := w.inCells()
		f.Linearity = w.linearities(f.Line.Slope)
		f.Hysteresis = w.hysteresis(cells)
		f.Repeatability = repeatability(cells)
	}
	f.reserve(d, grouped)
	return f, nil
}

func refuse(d Data) error {
	n := len(d.Reference)
	if n == 0 || len(d.UUT) != n || len(d.Cycle) != n || len(d.Down) != n || d.Set != nil && len(d.Set) != n {
		return fmt.Errorf("%w: columns of unequal length, or no reading", ErrData)
	}
	for _, column := range [][]float64{d.Reference, d.UUT, d.Set} {
		for i, x := range column {
			if !(math.Abs(x) <= 1e150) {
				return fmt.Errorf("%w: reading %d is not finite, or too large to compute with", ErrData, i+1)
			}
		}
	}
	return nil
}

// reserve says why figures are nil.
func (f *Figures) reserve(d Data, grouped bool) {
	add := func(code, text string) { f.Reservations = append(f.Reservations, Reservation{code, text}) }
	oneLeg := !slices.Contains(d.Down, true) || !slices.Contains(d.Down, false)
	if f.Cycles == 1 {
		add("one_cycle", "one cycle shows no repeatability")
	}
	if oneLeg {
		add("one_leg", "one leg shows no hysteresis")
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
}

// work is the data on their way to figures.
type work struct {
	Data
	order  []int     // of time: cycle, up before down, as given
	sets   []float64 // set pressure of each reading, NaN when not grouped
	levels []float64 // set pressures in rising order
	level  []int     // of each reading, in levels
	r      []float64 // residuals about the line
}

func order(d Data) []int {
	o := make([]int, len(d.Reference))
	for i := range o {
		o[i] = i
	}
	slices.SortStableFunc(o, func(a, b int) int {
		if c := cmp.Compare(d.Cycle[a], d.Cycle[b]); c != 0 {
			return c
		}
		switch {
		case d.Down[a] == d.Down[b]:
			return 0
		case d.Down[b]:
			return -1
		}
		return 1
	})
	return o
}

// largest finds the largest |y - p - zero|; of equals the first in time.
func (w *work) largest(zero float64) *Located {
	best := &Located{}
	for k, i := range w.order {
		if e := w.UUT[i] - w.Reference[i] - zero; k == 0 || math.Abs(e) > math.Abs(best.Value) {
			*best = Located{Value: e, At: w.sets[i], Cycle: w.Cycle[i], Down: w.Down[i]}
		}
	}
	return best
}

// zeros fills in what is read at the set pressure nearest zero; of two as
// near, the one read first.
func (w *work) zeros(f *Figures, cycles []int) {
	key := w.sets
	if math.IsNaN(key[0]) {
		key = w.Reference
	}
	nearest := key[w.order[0]]
	for _, i := range w.order {
		if math.Abs(key[i]) < math.Abs(nearest) {
			nearest = key[i]
		}
	}
	f.ZeroReturn = make([]*float64, len(cycles))
	first, c := -1, 0
	for _, i := range w.order {
		if key[i] != nearest {
			continue
		}
		if f.ZeroOffset == nil {
			e := w.UUT[i] - w.Reference[i]
			f.ZeroOffset = &e
		}
		if first < 0 || w.Cycle[i] != w.Cycle[first] {
			first = i
			continue
		}
		for cycles[c] != w.Cycle[i] {
			c++
		}
		if f.Line != nil && !math.IsNaN(w.sets[i]) {
			back := (w.UUT[i] - w.UUT[first]) - f.Line.Slope*(w.Reference[i]-w.Reference[first])
			f.ZeroReturn[c] = &back // the last one stays
		}
	}
	f.ErrorAfterZero = w.largest(*f.ZeroOffset)
}

func (w *work) residuals(l Straight) {
	w.r = make([]float64, len(w.UUT))
	for i := range w.r {
		w.r[i] = w.UUT[i] - l.Intercept - l.Slope*w.Reference[i]
	}
}
