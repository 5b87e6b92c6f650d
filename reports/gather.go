package reports

import (
	"fmt"
	"strings"
	"time"

	"kymobench/procedures/record"
)

// gathered is what the events of a record say about everything but results.
type gathered struct {
	opened      record.Opened
	procedure   record.File
	benchFile   record.File
	uut         record.UUT
	reference   record.Reference
	readout     *record.Readout
	source      *record.Instrument
	valve       *record.Valve
	warnings    *record.Warnings
	finished    record.Finished
	recovered   []record.Recovered
	faults      []record.Fault
	noted       []record.Reservation
	overrides   []record.Override
	zeroings    []record.Zeroing
	stages      []stage
	first, last time.Time
}

// stage is one stage as it went.
type stage struct {
	number     int
	kind       string
	begin, end time.Time
	abandoned  string
	ended      bool
}

// gather sorts the events. The record must be whole and closed.
func gather(events []record.Event, head record.Head) (*gathered, error) {
	n := len(events)
	if n == 0 || int64(n) != head.Lines || events[0].Kind != record.KindOpened {
		return nil, fmt.Errorf("run %q: %d events are not the whole record of %d lines", head.Run, n, head.Lines)
	}
	if events[n-1].Kind != record.KindClosed {
		return nil, fmt.Errorf("run %q: %w", head.Run, record.ErrNotClosed)
	}
	g := &gathered{first: events[0].Wall.UTC(), last: events[n-1].Wall.UTC()}
	for _, e := range events {
		if err := g.take(e); err != nil {
			return nil, err
		}
	}
	if g.opened.Run != head.Run {
		return nil, fmt.Errorf("%w: the record was opened as run %q, its head is of run %q", ErrNotOne, g.opened.Run, head.Run)
	}
	return g, nil
}

func (g *gathered) take(e record.Event) error {
	switch e.Kind {
	case record.KindOpened:
		return keep(e, &g.opened)
	case record.KindProcedure:
		return keep(e, &g.procedure)
	case record.KindBenchFile:
		return keep(e, &g.benchFile)
	case record.KindUUT:
		return keep(e, &g.uut)
	case record.KindReference:
		return keep(e, &g.reference)
	case record.KindReadout:
		return keepPointer(e, &g.readout)
	case record.KindSource:
		return keepPointer(e, &g.source)
	case record.KindValve:
		return keepPointer(e, &g.valve)
	case record.KindWarnings:
		return keepPointer(e, &g.warnings)
	case record.KindFinished:
		return keep(e, &g.finished)
	case record.KindRecovered:
		return add(e, &g.recovered)
	case record.KindFault:
		return add(e, &g.faults)
	case record.KindReservation:
		return add(e, &g.noted)
	case record.KindOverride:
		return add(e, &g.overrides)
	case record.KindZeroing:
		return add(e, &g.zeroings)
	case record.KindStage:
		return g.takeStage(e)
	}
	return nil
}

func (g *gathered) takeStage(e record.Event) error {
	s, err := record.Decode[record.Stage](e)
	if err != nil {
		return err
	}
	if s.Phase == "begin" {
		g.stages = append(g.stages, stage{number: s.Number, kind: s.Kind, begin: e.Wall.UTC()})
		return nil
	}
	for i := len(g.stages) - 1; i >= 0; i-- {
		if st := &g.stages[i]; st.number == s.Number && !st.ended {
			st.end, st.ended, st.abandoned = e.Wall.UTC(), true, s.Why
			if s.Phase == "abandoned" && s.Why == "" {
				st.abandoned = "no reason recorded"
			}
			break
		}
	}
	return nil
}

func keep[T any](e record.Event, into *T) (err error) {
	*into, err = record.Decode[T](e)
	return err
}

func keepPointer[T any](e record.Event, into **T) error {
	v, err := record.Decode[T](e)
	if err == nil {
		*into = &v
	}
	return err
}

func add[T any](e record.Event, into *[]T) error {
	v, err := record.Decode[T](e)
	if err == nil {
		*into = append(*into, v)
	}
	return err
}

// subject is the UUT in one line.
func (g *gathered) subject() string {
	words := g.uut.Is
	if words == "" {
		words = "unit under test"
	}
	if g.uut.Model != "" {
		words += " " + g.uut.Model
	}
	return capital(words) + ", serial number " + g.uut.SerialNumber
}

// rows collects rows that have a text.
type rows []Row

func (r *rows) add(label, text string) {
	if text = strings.TrimSpace(oneLine(text)); text != "" {
		*r = append(*r, Row{label, text})
	}
}
