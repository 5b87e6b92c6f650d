package results

import (
	"fmt"
	"math"
	"math/rand/v2"

	"kymobench/bench/quantity"
	"kymobench/procedures/step"
)

// FlushReadings are what somebody reads with a ruler off the strip of a flush
// test, as stated: one period as a time, or as a length with the paper's speed;
// and the heights of two successive extrema from the level it settles at.
type FlushReadings struct {
	Period, Speed string
	Heights       [2]string
	SameSide      bool // both extrema on the same side, a full cycle apart
}

// Flush is what two heights and a period tell of a line.
type Flush struct {
	Ringing   DerivedFigure `json:"ringing_frequency_hz"` // damped
	Ratio     DerivedFigure `json:"amplitude_ratio"`
	Damping   DerivedFigure `json:"damping_ratio"`
	Frequency DerivedFigure `json:"natural_frequency_hz"`
	Misread   float64       `json:"damping_ratio_if_taken_for_the_other_kind"`
	Notes     []Reason      `json:"reservations"`
}

// FlushTest works a strip out. Every reading is taken to be within half of its
// last digit, all values equally likely; the intervals are 95 %. A step
// response fitted whole knows the same line better by an order of magnitude.
//
// Errors: readings that are none, not above zero, or a second extremum that is
// not smaller than the first.
func FlushTest(in FlushReadings) (Flush, error) {
	r := reader{}
	var half [4]float64 // shares
	take := func(i int, what, text string, d quantity.Dimension) float64 {
		v, err := quantity.ParseAs(text, d)
		if err == nil && !(v.SI > 0) {
			err = fmt.Errorf("%q is not above zero", text)
		}
		if err != nil && r.err == nil {
			r.err = fmt.Errorf("%s: %w", what, err)
			return 0
		}
		half[i] = halfDigit(text, v)
		return v.SI
	}
	var period float64
	if in.Speed == "" {
		period = take(0, "period", in.Period, quantity.DimSpan)
	} else {
		// The speed of the paper is the recorder's, and is not read.
		period = take(0, "period", in.Period, quantity.DimLength) / take(3, "speed", in.Speed, quantity.DimSpeed)
		half[3] = 0
	}
	dimension := quantity.DimLength
	if v, err := quantity.Parse(in.Heights[0]); err == nil {
		dimension = v.Unit.Dimension
	}
	first, second := take(1, "first height", in.Heights[0], dimension), take(2, "second height", in.Heights[1], dimension)
	if r.err != nil {
		return Flush{}, r.err
	}
	if !(second < first) {
		return Flush{}, fmt.Errorf("the second extremum, %s, is not smaller than the first, %s", in.Heights[1], in.Heights[0])
	}
	damping, other := step.DampingOfOpposite, step.DampingOfSameSide
	if in.SameSide {
		damping, other = other, damping
	}
	random := rand.New(rand.NewPCG(drawSeed, 0x666c757368))
	either := func(half float64) float64 { return 1 + half*(2*random.Float64()-1) }
	var ringing, ratios, dampings, frequencies []float64
	for range draws {
		p, ratio := period*either(half[0]), math.Min(1, second*either(half[2])/(first*either(half[1])))
		zeta := damping(ratio)
		ringing, ratios, dampings = append(ringing, 1/p), append(ratios, ratio), append(dampings, zeta)
		frequencies = append(frequencies, 1/p/step.DampedFrequency(zeta))
	}
	figure := func(best float64, values []float64) DerivedFigure {
		return derivedFigure(step.Joint{}.Figure(best, values), 1)
	}
	zeta := damping(second / first)
	out := Flush{
		Ringing: figure(1/period, ringing), Ratio: figure(second/first, ratios), Damping: figure(zeta, dampings),
		Frequency: figure(1/period/step.DampedFrequency(zeta), frequencies), Misread: other(second / first), Notes: []Reason{},
	}
	if in.SameSide {
		out.Notes = append(out.Notes, Reason{"kind_of_ratio", fmt.Sprintf("the two heights were stated to be on the same side, a full cycle apart; if they are neighbours on opposite sides the damping ratio is %.3g", out.Misread)})
	} else {
		out.Notes = append(out.Notes, Reason{"kind_of_ratio", fmt.Sprintf("the two heights were taken for neighbours on opposite sides; if they are on the same side, a full cycle apart, the damping ratio is %.3g", out.Misread)})
	}
	if zeta > 0.5 {
		out.Notes = append(out.Notes, Reason{"hardly_rings", "a line damped that much hardly rings: two extrema tell little of it; fit the step"})
	}
	return out, nil
}
