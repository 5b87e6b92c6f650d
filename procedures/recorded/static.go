package recorded

import (
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"time"

	"kymobench/bench/quantity"
	"kymobench/procedures/record"
)

// StaticOptions say what a file of static readings does not.
type StaticOptions struct {
	NominalSensitivity string // "5 uV/V/mmHg"; "" when not stated
	// Corrections is "0:0.02,100:0.04": what to add to a reading of the
	// reference, in its unit; linear between.
	Corrections string

	// What a bench file states of the instruments the readings were taken with;
	// nil for nothing. Fields are those of the file.
	Reference *record.Reference
	UUT       *record.UUT
	Readout   *record.Readout
	Date      time.Time // of the readings; zero when not stated
	// ReferenceZeroed says that the reference was zeroed, vented, before the
	// first reading.
	ReferenceZeroed bool
	Repeatability   string // standard deviation of a single reading; "" when not stated
}

// Static reads cycle, leg, set_UNIT (optional), mounting (optional, from 1),
// reference_UNIT and uut_UNIT, uut_mV or uut_uV with excitation_V, in any order
// of columns.
func Static(file string, r io.Reader, o StaticOptions) ([]record.Event, error) {
	t, err := open(file, r)
	if err != nil {
		return nil, err
	}
	cycle, leg, mounting := slices.Index(t.header, "cycle"), slices.Index(t.header, "leg"), slices.Index(t.header, "mounting")
	set, setUnit, err := t.column("set", quantity.DimPressure)
	if err != nil {
		return nil, err
	}
	reference, referenceUnit, err := t.column("reference", quantity.DimPressure)
	if err != nil {
		return nil, err
	}
	uut, uutUnit, err := t.column("uut", quantity.DimPressure, quantity.DimVoltage, quantity.DimRatio)
	if err != nil {
		return nil, err
	}
	excitation, excitationUnit, err := t.column("excitation", quantity.DimVoltage)
	if err != nil {
		return nil, err
	}
	for _, need := range []struct {
		at   int
		name string
	}{{cycle, "cycle"}, {leg, "leg"}, {reference, "reference_UNIT, as reference_mmHg"}, {uut, "uut_UNIT, as uut_mmHg or uut_mV"}} {
		if need.at < 0 {
			return nil, &FileError{file, 1, 1, "the header has no column " + need.name}
		}
	}
	if uutUnit.Dimension == quantity.DimVoltage && excitation < 0 {
		return nil, t.refuse(uut, "a voltage needs the excitation: a column excitation_V")
	}
	e := &events{}
	corrections, err := correctionsOf(o.Corrections, referenceUnit)
	if err != nil {
		return nil, err
	}
	if o.NominalSensitivity != "" {
		s, err := quantity.ParseSensitivity(o.NominalSensitivity)
		if err != nil {
			return nil, fmt.Errorf("nominal sensitivity: %w", err)
		}
		if !(s > 0) {
			return nil, fmt.Errorf("nominal sensitivity %q is not above zero", o.NominalSensitivity)
		}
	}
	if err := o.facts(e, referenceUnit.Name, uutUnit.Name, corrections); err != nil {
		return nil, err
	}
	used := []int{cycle, leg, mounting, set, reference, uut}
	if uutUnit.Dimension == quantity.DimVoltage {
		used = append(used, excitation)
	}
	e.ignored(t, used...)
	rows := 0
	for {
		more, err := t.next()
		if err != nil {
			return nil, err
		}
		if !more {
			break
		}
		rows++
		point := record.Point{Purpose: "static"}
		if point.Cycle, err = t.whole(cycle, "cycle"); err != nil {
			return nil, err
		}
		if mounting >= 0 {
			if point.Mounting, err = t.whole(mounting, "mounting"); err != nil {
				return nil, err
			}
		}
		if point.Leg, err = t.leg(leg); err != nil {
			return nil, err
		}
		if set >= 0 {
			text, err := t.number(set)
			if err != nil {
				return nil, err
			}
			point.Set = text + " " + setUnit.Name
		}
		text, err := t.number(reference)
		if err != nil {
			return nil, err
		}
		if point.UUT, err = t.number(uut); err != nil {
			return nil, err
		}
		if uutUnit.Dimension == quantity.DimVoltage {
			volts, err := t.number(excitation)
			if err != nil {
				return nil, err
			}
			if x, _ := quantity.ParseDecimal(volts); !(x > 0) {
				return nil, t.refuse(excitation, fmt.Sprintf("excitation of %s V is not above zero", volts))
			}
			point.Excitation = volts + " " + excitationUnit.Name
		}
		point.Readings = []int64{e.add(0, record.KindReading, record.Reading{Role: "reference", Text: text})}
		e.add(0, record.KindPoint, point)
	}
	if rows == 0 {
		return nil, &FileError{file, 2, 1, "there are no readings below the header"}
	}
	return e.done()
}

// facts puts what was stated of the instruments before the readings.
func (o *StaticOptions) facts(e *events, referenceUnit, uutUnit string, corrections []record.Correction) error {
	if !o.Date.IsZero() {
		e.add(0, record.KindOpened, record.Opened{Schema: record.Schema})
		e.all[len(e.all)-1].Wall = o.Date
	}
	reference, uut := record.Reference{}, record.UUT{}
	if o.Reference != nil {
		reference = *o.Reference
	}
	if o.UUT != nil {
		uut = *o.UUT
	}
	reference.Field, uut.Field = quantity.Field{Unit: referenceUnit}, quantity.Field{Unit: uutUnit}
	if corrections != nil {
		if reference.Certificate.Corrections != nil {
			return fmt.Errorf("corrections of the reference are stated twice, in the bench file and apart from it")
		}
		reference.Certificate.Corrections = corrections
	}
	if o.NominalSensitivity != "" {
		uut.NominalSensitivity = o.NominalSensitivity
	}
	if o.Repeatability != "" {
		s, err := quantity.ParsePressure(o.Repeatability)
		if err != nil {
			return fmt.Errorf("repeatability: %w", err)
		}
		if !(s > 0) {
			return fmt.Errorf("repeatability %q is not above zero", o.Repeatability)
		}
		uut.Repeatability = o.Repeatability
	}
	e.add(0, record.KindReference, reference)
	e.add(0, record.KindUUT, uut)
	if o.Readout != nil {
		e.add(0, record.KindReadout, *o.Readout)
	}
	if o.ReferenceZeroed {
		e.add(0, record.KindZeroing, record.Zeroing{Role: "reference", How: "device"})
	}
	return nil
}

// whole reads a number that counts from 1.
func (t *table) whole(column int, name string) (int, error) {
	text := strings.TrimSpace(t.row[column])
	n, err := strconv.Atoi(text)
	if err != nil || n < 1 {
		return 0, t.refuse(column, fmt.Sprintf("%s %q is no whole number from 1", name, text))
	}
	return n, nil
}

func (t *table) leg(column int) (string, error) {
	switch text := strings.TrimSpace(t.row[column]); text {
	case "up", "down":
		return strings.Clone(text), nil
	default:
		return "", t.refuse(column, fmt.Sprintf("leg %q is neither up nor down", text))
	}
}

// correctionsOf reads "0:0.02,100:0.04".
func correctionsOf(text string, unit quantity.Unit) ([]record.Correction, error) {
	if text == "" {
		return nil, nil
	}
	var out []record.Correction
	var before float64
	for i, pair := range strings.Split(text, ",") {
		at, add, ok := strings.Cut(strings.TrimSpace(pair), ":")
		x, err := quantity.ParseDecimal(at)
		_, err2 := quantity.ParseDecimal(add)
		if !ok || err != nil || err2 != nil {
			return nil, fmt.Errorf("reference correction %q: reading:correction is expected, as in \"100:0.04\"", pair)
		}
		if i > 0 && x <= before {
			return nil, fmt.Errorf("reference correction %q: readings stand in rising order", pair)
		}
		before = x
		out = append(out, record.Correction{At: at + " " + unit.Name, Correction: add + " " + unit.Name})
	}
	return out, nil
}
