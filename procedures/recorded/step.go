package recorded

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"

	"kymobench/bench/line"
	"kymobench/bench/quantity"
	"kymobench/procedures/record"
)

// Step reads time_s, pressure_UNIT and an optional applied_UNIT.
func Step(file string, r io.Reader, o StepOptions) ([]record.Event, error) {
	if err := o.check(); err != nil {
		return nil, err
	}
	edge := o.Edge
	if edge == "0" {
		edge = "0 s"
	}
	if edge != "" {
		span, err := quantity.ParseSpan(edge)
		if err != nil {
			return nil, fmt.Errorf("edge time: %w", err)
		}
		if span < 0 {
			return nil, fmt.Errorf("edge time %q is below zero", edge)
		}
	}
	t, err := open(file, r)
	if err != nil {
		return nil, err
	}
	clock := slices.Index(t.header, "time_s")
	pressure, unit, err := t.column("pressure", quantity.DimPressure)
	if err != nil {
		return nil, err
	}
	applied, _, err := t.column("applied", quantity.DimPressure)
	if err != nil {
		return nil, err
	}
	if clock < 0 || pressure < 0 {
		return nil, &FileError{file, 1, 1, "the header needs the columns time_s and pressure_UNIT, as pressure_mmHg"}
	}
	var times []float64
	var texts, appliedTexts []string
	for {
		more, err := t.next()
		if err != nil {
			return nil, err
		}
		if !more {
			break
		}
		at, err := t.number(clock)
		if err != nil {
			return nil, err
		}
		seconds, _ := quantity.ParseDecimal(at)
		text, err := t.number(pressure)
		if err != nil {
			return nil, err
		}
		times, texts = append(times, seconds), append(texts, text)
		if applied >= 0 {
			if text, err = t.number(applied); err != nil {
				return nil, err
			}
			appliedTexts = append(appliedTexts, text)
		}
	}
	period, err := t.period(times, clock)
	if err != nil {
		return nil, err
	}
	e := &events{}
	field := quantity.Field{Unit: unit.Name}
	e.add(0, record.KindReference, record.Reference{Field: field})
	e.add(0, record.KindUUT, record.UUT{Field: field})
	e.ignored(t, clock, pressure, applied)
	if o.FiltersStated || len(o.Filters) > 0 {
		e.add(0, record.KindReadout, record.Readout{Filters: o.Filters, FiltersStated: o.FiltersStated})
	}
	capture := record.Capture{Number: 1, Edge: edge, AppliedUnfiltered: o.AppliedUnfiltered}
	start := line.Instant(math.Round(times[0] * 1e9))
	capture.Blocks = e.blocks(texts, start, period)
	if applied >= 0 {
		capture.Applied = e.blocks(appliedTexts, start, period)
	}
	e.add(0, record.KindCapture, capture)
	if o.Line != (record.Line{}) {
		e.add(0, record.KindLine, o.Line)
	}
	e.add(0, record.KindPulse, o.Pulse)
	return e.done()
}

func (e *events) blocks(texts []string, start line.Instant, period float64) []int64 {
	var lines []int64
	for i := 0; i < len(texts); i += record.BlockSize {
		at := start + line.Instant(math.Round(float64(i)*period*1e9))
		lines = append(lines, e.add(0, record.KindBlock, record.Block{
			Role: "uut", Start: at, Period: strconv.FormatFloat(period, 'g', -1, 64) + " s", Samples: texts[i:min(i+record.BlockSize, len(texts))],
		}))
	}
	return lines
}

// period is the mean time step; steps that differ from their median by over
// 1 % are refused with their line.
func (t *table) period(times []float64, clock int) (float64, error) {
	if len(times) < 2 {
		return 0, &FileError{t.file, 2, 1, "there are no two samples below the header"}
	}
	steps := make([]float64, len(times)-1)
	for i := range steps {
		steps[i] = times[i+1] - times[i]
	}
	sorted := slices.Clone(steps)
	slices.Sort(sorted)
	median := sorted[len(sorted)/2]
	for i, d := range steps {
		if !(median > 0) || math.Abs(d-median) > 0.01*median {
			return 0, &FileError{t.file, i + 3, 1, fmt.Sprintf("the time step of %.6g s differs by over 1 %% from the usual %.6g s: samples are missing or the clock is not even", d, median)}
		}
	}
	return (times[len(times)-1] - times[0]) / float64(len(times)-1), nil
}
