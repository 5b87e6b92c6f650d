package fit

import (
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
	// Mounting numbers the times the UUT was mounted; nil: once. The cycles are
	// numbered on through them: a cycle lies in one.
	Mounting []int
	// Zero is y - p at the one zeroing before the first cycle, where it was read
	// apart from the cycles; nil: the zero offset serves.
	Zero *float64
	// Astray marks readings that were come to from the wrong side; nil: none.
	Astray []bool
}

// Reservation weakens the figures.
type Reservation struct{ Code, Text string }

// Located is a figure, signed, and where it was found.
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

// Extremes are the highest and the lowest of an error.
type Extremes struct{ Highest, Lowest Located }

// AtSet is what was found at one set pressure; nil where nothing shows it.
type AtSet struct {
	Set                float64
	Average            *float64 // of the legs' averages over the cycles, reduced to Set
	Hysteresis         *float64 // |down - up|, averaged over the cycles
	RangeUp, RangeDown *float64 // over the cycles of one mounting
	Repeatability      *float64 // the larger range of the two legs, each cycle less its own zero
	Reproducibility    *float64 // the same over the first cycles of the mountings
	SD                 *float64 // pooled over the legs and mountings, with DoF
	DoF                int
}

// Figures are what static readings give. What they cannot give is nil, and
// Undetermined says why.
type Figures struct {
	Line           *Straight // of UUT on reference over all readings
	Cycles         int
	CycleNumbers   []int // as given, rising; ZeroReturn goes by them
	ZeroOffset     *float64
	ZeroReturn     []*float64 // one for each cycle in rising order
	Linearity      Linearities
	Hysteresis     *Located  // the largest by magnitude
	EachHysteresis []Located // of every cycle and set pressure that has both legs, in order
	Repeatability  Repeatability
	// Reproducibility is the largest of those in Points.
	Reproducibility *float64
	Points          []AtSet
	LargestError    *Located
	ErrorAfterZero  *Located
	AsRead          Extremes  // y - p
	AfterZero       Extremes  // the same, less the error at the zeroing
	Growing         *Growing  // nil unless the scatter shows that the noise grows with the pressure
	Curvature       *Model    // coefficients of the powers of p, from the constant up
	Sets            []float64 // set pressure of each reading as used; NaN without one
	Reservations    []Reservation
	Undetermined    []Undetermined
}

// Undetermined names a figure that is nil, and why.
type Undetermined struct{ Figure, Reason string }

// The names of figures that may be undetermined.
const (
	FigureLine            = "line"
	FigureLinearity       = "linearity"
	FigureHysteresis      = "hysteresis"
	FigureRepeatability   = "repeatability"
	FigureReproducibility = "reproducibility"
	FigureZeroReturn      = "zero return"
	FigureCurvature       = "curvature"
)

// ErrData: slices of unequal length, none at all, or values that are not finite.
var ErrData = errors.New("static readings not usable")

// Static computes the figures. With y the UUT, p the reference, a + b p the
// least-squares line over all readings and r = y - (a + b p), averaged over the
// readings of a cell (one cycle, leg and set pressure):
//
//	linearity      each reading reduced to its set pressure, y + b (set - p);
//	               averaged over the cycles, then over the legs; largest
//	               |deviation| of these averages from each of four lines
//	hysteresis     r(down) - r(up) for each cycle and set pressure, unless one of
//	               its readings was come to from the wrong side
//	repeatability  range over the cycles of r at one set pressure in one leg, the
//	               largest; pooled SD over those cells, with its degrees of freedom
//	zero offset    y - p of the first cell at the set pressure nearest zero
//	zero return    r(down) - r(up) there, for each cycle
//	errors         y - p, as read, and less the error at the one zeroing:
//	               highest, lowest, and the larger of them by magnitude
//	growing noise  where the scatter at the set pressures shows it beyond chance:
//	               the line weighted by it, beside the ordinary one
//	curvature      polynomial of y on p, of third order or as high as the set
//	               pressures carry, over all readings: a description
//
// and at each set pressure the mean hysteresis, and by r less r(up) at zero of
// the same cycle the largest range over the cycles of one mounting
// (repeatability) and over the first cycles of the mountings (reproducibility).
//
// Within a leg readings are taken to follow each other as the leg says, up from
// the lowest: the order in which they are given changes nothing. First is by
// cycle, up before down.
//
// Without set pressures the readings are ranked by p within cycle and leg, and
// a rank's mean p is its set pressure; a leg that lacks the top shares that of
// the others. Legs that differ by more, or by another point than the top,
// cannot be grouped: then all that compares legs or cycles is nil, and the zero
// offset is that of the reading nearest zero. Fewer than three readings, or all
// at one p, carry no line and nothing that needs one. A set pressure between
// the ends that was read in one leg only has no average of the legs, and the
// linearity is nil, unless the whole is of one leg: then it is that leg's.
//
// ErrData for slices of unequal length, no reading, a cycle in two mountings,
// and values that are not finite or beyond 1e150 in magnitude, whose squares no
// double holds.
//
// Definitions: facts of practice named in the program's guide (IEC 61298-2 and
// ISA-51.1 terms, those at each set pressure after DKD-R 6-1; from memory).
func Static(d Data) (Figures, error) {
	if err := refuse(d); err != nil {
		return Figures{}, err
	}
	w := work{Data: d, scratch: scratch{piece: len(d.UUT) + 32}}
	w.number()
	grouped := w.group()
	w.inTime(grouped)
	f := Figures{Sets: w.sets, Cycles: len(w.cycles), CycleNumbers: slices.Clone(w.cycles), ZeroReturn: make([]*float64, len(w.cycles))}
	if line, err := Line(d.Reference, d.UUT); err == nil {
		f.Line = &line
	}
	w.errors(&f)
	if f.Line != nil && grouped {
		w.inCells(*f.Line)
		w.compare(&f)
		w.linearity(&f)
		w.curvature(&f)
	}
	f.reserve(&w, grouped)
	f.explain(&w, grouped)
	return f, nil
}

func refuse(d Data) error {
	n := len(d.Reference)
	if n == 0 || len(d.UUT) != n || len(d.Cycle) != n || len(d.Down) != n || d.Set != nil && len(d.Set) != n || d.Mounting != nil && len(d.Mounting) != n ||
		d.Astray != nil && len(d.Astray) != n {
		return fmt.Errorf("%w: columns of unequal length, or no reading", ErrData)
	}
	for _, column := range [][]float64{d.Reference, d.UUT, d.Set} {
		for i, x := range column {
			if !(math.Abs(x) <= 1e150) {
				return fmt.Errorf("%w: reading %d is not finite, or too large to compute with", ErrData, i+1)
			}
		}
	}
	if d.Zero != nil && finite([]float64{*d.Zero}) != nil {
		return fmt.Errorf("%w: the error at the zeroing is not finite, or too large to compute with", ErrData)
	}
	if d.Mounting == nil {
		return nil
	}
	mounted := map[int]int{}
	for i, m := range d.Mounting {
		if first, known := mounted[d.Cycle[i]]; known && first != m {
			return fmt.Errorf("%w: cycle %d lies in two mountings; number the cycles on through them", ErrData, d.Cycle[i])
		}
		mounted[d.Cycle[i]] = m
	}
	return nil
}

// errors fills in y - p as read and after the zeroing.
func (w *work) errors(f *Figures) {
	offset := w.zeroOffset()
	f.ZeroOffset = &offset
	zero := offset
	if w.Zero != nil {
		zero = *w.Zero
	}
	f.AsRead, f.LargestError = w.extremes(0)
	f.AfterZero, f.ErrorAfterZero = w.extremes(zero)
}

// zeroOffset averages y - p over the first readings at the pressure nearest
// zero. Of two pressures as near, the one that the leg comes to first.
func (w *work) zeroOffset() float64 {
	key := w.sets
	if math.IsNaN(key[0]) {
		key = w.Reference
	}
	first := 0
	for i := range key {
		a, b := math.Abs(key[i]), math.Abs(key[first])
		if a < b || a == b && w.time[i] < w.time[first] {
			first = i
		}
	}
	var sum, n float64
	for i := range key {
		if key[i] == key[first] && w.cycle[i] == w.cycle[first] && w.leg[i] == w.leg[first] {
			sum += w.UUT[i] - w.Reference[i]
			n++
		}
	}
	return sum / n
}

// extremes finds the highest, the lowest and the largest y - p - zero; of
// equals the first in time, of those of one cell the higher.
func (w *work) extremes(zero float64) (Extremes, *Located) {
	high, low := math.Inf(-1), math.Inf(1)
	for i := range w.UUT {
		e := w.UUT[i] - w.Reference[i] - zero
		high, low = max(high, e), min(low, e)
	}
	most := max(high, -low)
	highest, lowest, largest := -1, -1, -1
	tie := w.tie(most)
	for i := range w.UUT {
		e := w.UUT[i] - w.Reference[i] - zero
		take := func(at *int, near bool) {
			if near && (*at < 0 || w.time[i] < w.time[*at] || w.time[i] == w.time[*at] && e > w.UUT[*at]-w.Reference[*at]-zero) {
				*at = i
			}
		}
		take(&highest, e >= high-tie)
		take(&lowest, e <= low+tie)
		take(&largest, math.Abs(e) >= most-tie)
	}
	at := func(i int) Located {
		return Located{Value: w.UUT[i] - w.Reference[i] - zero, At: w.sets[i], Cycle: w.Cycle[i], Down: w.Down[i]}
	}
	l := at(largest)
	return Extremes{Highest: at(highest), Lowest: at(lowest)}, &l
}

// curvature describes the whole, in three terms above the constant or as many
// as there are set pressures for.
func (w *work) curvature(f *Figures) {
	order := min(3, len(w.levels)-1)
	if order < 2 {
		return
	}
	if m, err := describe(w.Reference, w.UUT, order); err == nil {
		f.Curvature = &m
	}
}

// linearity draws four lines through the averages at the set pressures.
func (w *work) linearity(f *Figures) {
	y, u := w.averages(*f.Line)
	whole := true
	for l := range y {
		if math.IsNaN(y[l]) {
			whole = false
			continue
		}
		f.Points[l].Average = &y[l]
		if s := f.Repeatability.PooledSD; s != nil {
			u[l] *= *s
		}
	}
	if f.Repeatability.PooledSD == nil {
		u = nil
	}
	if whole {
		f.Linearity = Lines(w.levels, y, u)
	}
}

// averages over cycles and then legs, reduced to the set pressures, each with
// its standard uncertainty when that of a cell is 1. Not-a-number for a set
// pressure between the ends that was read in one leg only though there are two.
func (w *work) averages(line Straight) (y, u []float64) {
	y, u = make([]float64, len(w.levels)), w.floats(len(w.levels))
	legs := make([]struct{ sum, n float64 }, 2*len(w.levels))
	for _, c := range w.cells {
		leg := &legs[2*c.level+c.leg]
		leg.sum += c.r
		leg.n++
	}
	for l, set := range w.levels {
		up, down := legs[2*l], legs[2*l+1]
		between := l > 0 && l < len(w.levels)-1
		if between && !w.oneLeg && (up.n == 0 || down.n == 0) {
			y[l] = math.NaN()
			continue
		}
		var r float64
		switch {
		case down.n == 0:
			r, u[l] = up.sum/up.n, 1/math.Sqrt(up.n)
		case up.n == 0:
			r, u[l] = down.sum/down.n, 1/math.Sqrt(down.n)
		default:
			r, u[l] = (up.sum/up.n+down.sum/down.n)/2, math.Sqrt(1/up.n+1/down.n)/2
		}
		y[l] = line.Intercept + line.Slope*set + r
	}
	return y, u
}
