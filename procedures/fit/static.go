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
// a rank's mean p is its set pressure; a down leg that lacks the top shares
// that of the up leg. Legs that differ by more cannot be grouped.
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
	f.reserve(d, grouped)
	w.zeros(&f, cycles)
	if f.Line != nil && grouped {
		w.residuals(*f.Line)
		f.Linearity = w.linearities(*f.Line)
		f.Hysteresis = w.hysteresis(cycles)
		f.Repeatability = w.repeatability()
	}
	return f, nil
}

func refuse(d Data) error {
	n := len(d.Reference)
	if n == 0 || len(d.UUT) != n || len(d.Cycle) != n || len(d.Down) != n || d.Set != nil && len(d.Set) != n {
		return fmt.Errorf("%w: columns of unequal length, or no reading", ErrData)
	}
	for _, column := range [][]float64{d.Reference, d.UUT, d.Set} {
		for i, x := range column {
			if math.IsNaN(x) || math.IsInf(x, 0) {
				return fmt.Errorf("%w: reading %d is not finite", ErrData, i+1)
			}
		}
	}
	return nil
}

func (f *Figures) reserve(d Data, grouped bool) {
	if f.Cycles == 1 {
		f.Reservations = append(f.Reservations, Reservation{"one_cycle", "one cycle shows no repeatability"})
	}
	if !slices.Contains(d.Down, true) || !slices.Contains(d.Down, false) {
		f.Reservations = append(f.Reservations, Reservation{"one_leg", "one leg shows no hysteresis"})
	}
	if !grouped {
		f.Reservations = append(f.Reservations, Reservation{"points_not_grouped",
			"without set pressures the readings of up and down legs cannot be matched by rank"})
	}
}

// work is the data on their way to figures.
type work struct {
	Data
	order []int     // of time: cycle, up before down, as given
	sets  []float64 // set pressure of each reading, NaN when not grouped
	r     []float64 // residuals about the line
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

// zeros fills in what is read at the set pressure nearest zero.
func (w *work) zeros(f *Figures, cycles []int) {
	nearest := math.NaN()
	key := func(i int) float64 {
		if math.IsNaN(w.sets[i]) {
			return w.Reference[i]
		}
		return w.sets[i]
	}
	for _, i := range w.order {
		if k := key(i); math.IsNaN(nearest) || math.Abs(k) < math.Abs(nearest) {
			nearest = k
		}
	}
	f.ZeroReturn = make([]*float64, len(cycles))
	for c, cycle := range cycles {
		first, last := -1, -1
		for _, i := range w.order {
			if key(i) != nearest {
				continue
			}
			if f.ZeroOffset == nil {
				e := w.UUT[i] - w.Reference[i]
				f.ZeroOffset = &e
			}
			if w.Cycle[i] == cycle {
				if first < 0 {
					first = i
				}
				last = i
			}
		}
		if first >= 0 && last != first && f.Line != nil && !math.IsNaN(w.sets[first]) {
			back := (w.UUT[last] - w.UUT[first]) - f.Line.Slope*(w.Reference[last]-w.Reference[first])
			f.ZeroReturn[c] = &back
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
