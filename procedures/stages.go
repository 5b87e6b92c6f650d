package procedures

import (
	"time"

	"kymobench/bench/quantity"
)

// Stage is one step of a procedure: WarmUp, Zero, Exercise, Leak, Static or
// Step. The one who carries it out switches on the type.
type Stage interface {
	// Kind is the word that names the stage in files and records.
	Kind() string
}

// WarmUp waits until every instrument has been on for Minimum.
type WarmUp struct {
	Minimum     time.Duration // since power-on, as each instrument states it
	LongestWait time.Duration // a longer wait ends the run instead
}

// Zero vents, zeroes the reference, reads the UUT as it stands (that is its
// zero offset) and only then takes that reading for its zero, by arithmetic.
type Zero struct {
	For         time.Duration // how long the UUT is averaged
	LongestWait time.Duration // for the vented pressure to be still

	// The vented reference must read within so much of zero, else the volume is
	// not open. The zero is ready by the difference rule, as a point is. A file
	// that leaves these out gets 5 mmHg, 5 %, 0.05 mmHg and 8 readings.
	VentedWithin        quantity.Pressure
	ShareOfLimit        float64
	StandardUncertainty quantity.Pressure
	LeastReadings       int
}

// Exercise takes the UUT up and down, unjudged, before the first cycle.
type Exercise struct {
	Cycles      int
	To          quantity.Pressure
	Dwell       time.Duration // at the top and at the bottom
	LongestWait time.Duration // for one pressure to be reached
}

// Leak holds a pressure with the source shut off and watches it fall.
type Leak struct {
	At          quantity.Pressure
	Settle      time.Duration // unjudged, after the source is shut off
	For         time.Duration
	HighestRate quantity.Pressure // of fall, per second
	LongestWait time.Duration     // for the pressure to be reached

	// The hold goes on to LongestFor while the leak cannot be told from what the
	// gas does as it comes to the temperature of its walls. Of that is believed
	// beforehand that it is within a few times Relaxation, and no slower than
	// LongestTau. A file that leaves these out gets four times For, 5 mmHg, 90 s.
	LongestFor time.Duration
	Relaxation quantity.Pressure
	LongestTau time.Duration
}

// Static takes points up and down. SetPressures is one whole cycle, up leg
// first: 0-50-100-200-300-200-100-50-0; the turning point stands once and
// belongs to the up leg.
type Static struct {
	SetPressures []quantity.Pressure
	Cycles       int
	Window       quantity.Pressure // a point is taken within set pressure +- Window
	Overshoot    quantity.Pressure // a wrong-side approach beyond this is told and kept out of hysteresis

	// A point is ready by the difference rule (package ready).
	ShareOfLimit        float64           // slope times lag may be this fraction of the accuracy limit where that is smallest
	StandardUncertainty quantity.Pressure // asked of the mean difference
	LeastReadings       int               // of the reference
	LongestWait         time.Duration     // for one point
}

// Step releases a pressure to atmosphere and keeps the UUT's answer.
type Step struct {
	Count       int // steps; at most, when Least is above zero
	Least       int // with that many steps and from then on, it ends once every dynamic limit is decided
	Size        quantity.Pressure
	Direction   Direction
	Settle      time.Duration // at Size, before the capture begins
	Before      time.Duration // captured before the valve is told to open
	After       time.Duration // captured after it
	LongestWait time.Duration // for Size to be reached

	// Printed in the report. Results read length, bore and fluid for their
	// opinions where they can be read ("1.2 m", "1.6 mm", "water, degassed").
	Place       string // where the step enters
	LineLength  string
	Bore        string
	Fluid       string
	FlushDevice string

	// Optional, "" when not stated: of a fluid that is not known by name, and of
	// the same line when it was clean and free of air.
	FluidDensity      string
	FluidViscosity    string
	DesignedFrequency string
	DesignedDamping   string
}

// Direction is which way a step goes.
type Direction string

// Release is a step from Size down to atmosphere.
const Release Direction = "release"

// Kind returns "warm_up".
func (WarmUp) Kind() string { return "warm_up" }

// Kind returns "zero".
func (Zero) Kind() string { return "zero" }

// Kind returns "exercise".
func (Exercise) Kind() string { return "exercise" }

// Kind returns "leak".
func (Leak) Kind() string { return "leak" }

// Kind returns "static".
func (Static) Kind() string { return "static" }

// Kind returns "step".
func (Step) Kind() string { return "step" }

// Leg is the direction in which a set pressure is approached.
type Leg string

// The legs of a cycle.
const (
	Up   Leg = "up"
	Down Leg = "down"
)

// Point is one set pressure of a Static stage in its place.
type Point struct {
	Cycle int // 1 ... Cycles
	Leg   Leg
	Set   quantity.Pressure
}

// Points returns every point of the stage in the order in which they are
// taken. The up leg ends with the highest set pressure.
func (s Static) Points() []Point {
	top := 0
	for i, p := range s.SetPressures {
		if p > s.SetPressures[top] {
			top = i
		}
	}
	points := make([]Point, 0, s.Cycles*len(s.SetPressures))
	for cycle := 1; cycle <= s.Cycles; cycle++ {
		for i, p := range s.SetPressures {
			leg := Up
			if i > top {
				leg = Down
			}
			points = append(points, Point{Cycle: cycle, Leg: leg, Set: p})
		}
	}
	return points
}

// HighestPressure returns the highest pressure that any stage asks for.
func (d *Definition) HighestPressure() quantity.Pressure {
	var highest quantity.Pressure
	for _, p := range d.Pressures() {
		highest = max(highest, p)
	}
	return highest
}

// Pressures returns every pressure that a stage asks for, in their order.
func (d *Definition) Pressures() []quantity.Pressure {
	var all []quantity.Pressure
	for _, s := range d.Stages {
		switch s := s.(type) {
		case Exercise:
			all = append(all, s.To)
		case Leak:
			all = append(all, s.At)
		case Static:
			all = append(all, s.SetPressures...)
		case Step:
			all = append(all, s.Size)
		}
	}
	return all
}
