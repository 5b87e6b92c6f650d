// Package procedures says what is done to a unit under test and what it is held
// against: a Definition is one procedure, read strictly from a TOML file.
//
// It is not the one who carries a procedure out (procedures/run is) and it
// compares nothing (procedures/verdict does).
//
// Order of use: Load a file's bytes, or Shipped one of those that come with the
// program; hand the Definition to run and to results. Both keep its Source, so
// that a record can be judged again years later from its own bytes.
package procedures

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
	"kymobench/procedures/verdict"
)

// Definition is one procedure as read and found free of contradictions.
type Definition struct {
	ID       string // "incoming"; names the procedure in records and on the command line
	Revision int64  // counted by whoever keeps the file, from 1
	Title    string
	Purpose  string
	UUTKind  UUTKind
	Highest  quantity.Pressure // no stage asks for more than a unit of this kind may be given
	Lowest   quantity.Pressure // nor for less
	Decision Decision
	Limits   []Limit // in the order of the file, no name twice
	Stages   []Stage // in the order in which they are done

	Name   string // the file's name as given to Load
	Source []byte // the file's bytes, unchanged
	SHA256 string // of Source, lower-case hex
}

// UUTKind says what is judged; the limits of a procedure are meant for one kind.
type UUTKind string

// The kinds of unit under test.
const (
	BareTransducer        UUTKind = "bare transducer"
	TransducerWithChannel UUTKind = "transducer with cable and channel"
	Channel               UUTKind = "channel"
)

// PutsOut says why a unit under test of this kind cannot put out the unit that
// the bench file states; nil when it can. A bare transducer puts out a voltage
// or a ratio, which the bench's readout turns into numbers; one with its
// channel, or a channel alone, shows pressure.
func (k UUTKind) PutsOut(unit string) error {
	u, ok := quantity.UnitNamed(unit)
	switch pressure := u.Dimension == quantity.DimPressure; {
	case !ok:
		return fmt.Errorf("%q is no unit known here", unit)
	case k == BareTransducer && pressure:
		return fmt.Errorf("the limits are those of a %s, and the bench file says that the UUT puts out %s, which a %s does", k, unit, TransducerWithChannel)
	case k != BareTransducer && !pressure:
		return fmt.Errorf("the limits are those of a %s, and the bench file says that the UUT puts out %s, which a %s does", k, unit, BareTransducer)
	}
	return nil
}

// Decision is how an uncertainty counts against a limit, and what the middle
// outcomes mean for the verdict of the run.
type Decision struct {
	Rule            verdict.Rule
	GuardFactor     float64 // guard band w = GuardFactor * U; 0 with the simple rule
	ConditionalPass verdict.Verdict
	ConditionalFail verdict.Verdict
}

// LimitName names the figure that a limit is about; the names are those of the
// JSON contract.
type LimitName string

// The figures that can have a limit.
const (
	ZeroOffset    LimitName = "zero_offset"   // mmHg, as read before zeroing
	Sensitivity   LimitName = "sensitivity"   // uV/V/mmHg
	Accuracy      LimitName = "accuracy"      // mmHg, the error after zero at any set pressure
	Hysteresis    LimitName = "hysteresis"    // mmHg, down minus up
	ZeroReturn    LimitName = "zero_return"   // mmHg, at the end of a cycle less at its beginning
	Repeatability LimitName = "repeatability" // mmHg, largest range over the cycles
	Noise         LimitName = "noise"         // mmHg, standard deviation of its readings at a still pressure

	// mmHg, the largest deviation from the line named
	LinearityIndependent  LimitName = "linearity_independent"
	LinearityTerminal     LimitName = "linearity_terminal"
	LinearityZeroBased    LimitName = "linearity_zero_based"
	LinearityLeastSquares LimitName = "linearity_least_squares"

	NaturalFrequency LimitName = "natural_frequency" // Hz
	DampingRatio     LimitName = "damping_ratio"     // 1
)

// Limit is what one figure is held against. Low, High and Resolution are in
// Unit, which is fixed for each name (LimitUnit).
type Limit struct {
	Name       LimitName
	Unit       string
	Low, High  *float64 // nil: no limit on that side; both nil when Bands hold it
	Bands      []Band   // accuracy only, by ascending UpTo; the last has none
	Resolution float64  // results are rounded to it before they are compared

	Origin       string // document, edition, clause; or who in the department set it
	OriginStatus OriginStatus
}

// Band is the half-width that an error may have at pressures up to UpTo:
// Constant plus OfReading times the absolute pressure.
type Band struct {
	UpTo      quantity.Pressure // +Inf in the last band
	Constant  quantity.Pressure
	OfReading float64 // a fraction: 0.03 is 3 %
}

// OriginStatus says how far the source of a limit was seen.
type OriginStatus string

// The ways in which a limit can be known.
const (
	OriginSeen       OriginStatus = "seen"
	OriginSecondHand OriginStatus = "second-hand"
	OriginMemory     OriginStatus = "from memory"
	OriginPractice   OriginStatus = "common practice, no source"
	OriginDepartment OriginStatus = "department"
)

// LimitNames lists every figure that can have a limit.
func LimitNames() []LimitName {
	return []LimitName{ZeroOffset, Sensitivity, Accuracy, Hysteresis, ZeroReturn, Repeatability, Noise, LinearityIndependent,
		LinearityTerminal, LinearityZeroBased, LinearityLeastSquares, NaturalFrequency, DampingRatio}
}

// LimitUnit returns the unit in which the limit of that name is stated,
// compared and reported; false for a name that is none.
func LimitUnit(name LimitName) (string, bool) {
	switch name {
	case ZeroOffset, Accuracy, Hysteresis, ZeroReturn, Repeatability, Noise,
		LinearityIndependent, LinearityTerminal, LinearityZeroBased, LinearityLeastSquares:
		return "mmHg", true
	case Sensitivity:
		return "uV/V/mmHg", true
	case NaturalFrequency:
		return "Hz", true
	case DampingRatio:
		return "1", true
	}
	return "", false
}

// Limit returns the limit of that name, and whether the procedure has one.
func (d *Definition) Limit(name LimitName) (Limit, bool) {
	for _, l := range d.Limits {
		if l.Name == name {
			return l, true
		}
	}
	return Limit{}, false
}

// BandAt returns the band that holds at a pressure in mmHg; false where the
// limit has none.
func (l Limit) BandAt(mmHg *float64) (Band, bool) {
	if mmHg == nil {
		return Band{}, false
	}
	for _, b := range l.Bands {
		if quantity.MmHg(*mmHg) <= b.UpTo {
			return b, true
		}
	}
	return Band{}, false
}

// At returns the limits that hold at pressure p, in Unit; nil on a side that
// has none. Without bands they are the same everywhere. With bands they are
// minus and plus (Constant + OfReading * |p|) of the first band whose UpTo is
// not below p.
func (l Limit) At(p quantity.Pressure) (low, high *float64) {
	for _, b := range l.Bands {
		if p <= b.UpTo {
			w := (float64(b.Constant) + b.OfReading*math.Abs(float64(p))) / float64(quantity.MillimetreOfMercury)
			n := -w
			return &n, &w
		}
	}
	return l.Low, l.High
}
