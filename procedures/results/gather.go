package results

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"slices"
	"time"

	"kymobench/bench/line"
	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/record"
)

// gathered is what the events of a record say, sorted by kind, before anything
// is computed.
type gathered struct {
	began        time.Time // on the wall clock; zero for readings of no known day
	opened       *record.Opened
	definition   *procedures.Definition
	reference    *record.Reference
	uut          *record.UUT
	readout      *record.Readout
	valve        *record.Valve
	readings     map[int64]reading
	blocks       map[int64]record.Block
	points       []record.Point
	holds        []record.Hold
	captures     []record.Capture
	lines        takenLines
	faults       []Reason
	reservations []Reason
	overrides    []record.Override
	finished     *record.Finished
	line         *record.Line  // of data without a procedure
	pulse        *record.Pulse // asked for; nil: the program's
	outliers     int           // readings left out

	zeroedReference bool // in the run, by its own function
}

// reading is an asked reading with the time of its line.
type reading struct {
	record.Reading
	at line.Instant
}

// middle is half way between question and answer, in seconds.
func (r reading) middle() float64 { return (r.Sent + (r.at-r.Sent)/2).Seconds() }

// gather sorts the events. A payload that does not decode is an error with its
// line; kinds that say nothing about a result are passed over.
func gather(events []record.Event) (*gathered, error) {
	g := &gathered{readings: map[int64]reading{}, blocks: map[int64]record.Block{}}
	for _, e := range events {
		if err := g.take(e); err != nil {
			return nil, fmt.Errorf("record line %d (%s): %w", e.Line, e.Kind, err)
		}
	}
	return g, nil
}

func (g *gathered) take(e record.Event) error {
	switch e.Kind {
	case record.KindOpened:
		g.began = e.Wall.UTC()
		return keep(e, &g.opened)
	case record.KindProcedure:
		file, err := record.Decode[record.File](e)
		if err != nil {
			return err
		}
		g.definition, err = procedures.Load(file.Name, []byte(file.Text))
		return err
	case record.KindReference:
		return keep(e, &g.reference)
	case record.KindUUT:
		return keep(e, &g.uut)
	case record.KindReadout:
		return keep(e, &g.readout)
	case record.KindValve:
		return keep(e, &g.valve)
	case record.KindReading:
		r, err := record.Decode[record.Reading](e)
		g.readings[e.Line] = reading{Reading: r, at: e.At}
		return err
	case record.KindBlock:
		b, err := record.Decode[record.Block](e)
		g.blocks[e.Line] = b
		return err
	case record.KindPoint:
		g.lines.points = append(g.lines.points, e.Line)
		return add(e, &g.points)
	case record.KindHold:
		g.lines.holds = append(g.lines.holds, e.Line)
		return add(e, &g.holds)
	case record.KindCapture:
		g.lines.captures = append(g.lines.captures, e.Line)
		return add(e, &g.captures)
	case record.KindLine:
		return keep(e, &g.line)
	case record.KindPulse:
		return keep(e, &g.pulse)
	case record.KindVoid:
		v, err := record.Decode[record.Void](e)
		g.void(v.Since)
		return err
	case record.KindFault:
		f, err := record.Decode[record.Fault](e)
		g.faults = append(g.faults, Reason{Code: f.Code, Text: f.Text})
		return err
	case record.KindReservation:
		r, err := record.Decode[record.Reservation](e)
		g.reservations = append(g.reservations, Reason{Code: r.Code, Text: r.Text})
		return err
	case record.KindZeroing:
		z, err := record.Decode[record.Zeroing](e)
		g.zeroedReference = g.zeroedReference || z.Role == "reference"
		return err
	case record.KindOverride:
		return add(e, &g.overrides)
	case record.KindFinished:
		return keep(e, &g.finished)
	}
	return nil
}

// takenLines are the lines in which points, holds and captures stand.
type takenLines struct{ points, holds, captures []int64 }

// void forgets what was taken from a line on.
func (g *gathered) void(since int64) {
	n := before(g.lines.points, since)
	g.points, g.lines.points = g.points[:n], g.lines.points[:n]
	n = before(g.lines.holds, since)
	g.holds, g.lines.holds = g.holds[:n], g.lines.holds[:n]
	n = before(g.lines.captures, since)
	g.captures, g.lines.captures = g.captures[:n], g.lines.captures[:n]
}

// before counts the lines before since; lines rise.
func before(lines []int64, since int64) int {
	n, _ := slices.BinarySearch(lines, since)
	return n
}

func keep[T any](e record.Event, into **T) error {
	v, err := record.Decode[T](e)
	if err != nil {
		return err
	}
	*into = &v
	return nil
}

func add[T any](e record.Event, into *[]T) error {
	v, err := record.Decode[T](e)
	if err != nil {
		return err
	}
	*into = append(*into, v)
	return nil
}

// seed is that of every Monte Carlo over this record: from its run id, so that
// who computes it again draws the same numbers.
func (g *gathered) seed() uint64 {
	if g.opened == nil || g.opened.Run == "" {
		return 1
	}
	sum := sha256.Sum256([]byte(g.opened.Run))
	// Whole numbers up to 2^53 pass through every reader of JSON unharmed.
	return binary.BigEndian.Uint64(sum[:]) >> 11
}

// parsed reads a quantity that a record states as text; an empty text is zero.
func parsed(text string, d quantity.Dimension) (float64, error) {
	if text == "" {
		return 0, nil
	}
	v, err := quantity.ParseAs(text, d)
	if err != nil {
		return 0, err
	}
	return v.SI, nil
}
