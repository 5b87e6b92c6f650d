package layout1

import (
	"bytes"
	"errors"
	"fmt"
	"time"

	"kymobench/reports"
)

// ErrNoStep: there is no step to draw.
var ErrNoStep = errors.New("no step was found, so there is nothing to draw")

// StepChart draws one step with its fit and residuals, the amplitude response
// and the place among natural frequency and damping ratio on one page, in the
// manner of a report: the same drawings, by the same code. As is "pdf" or
// "svg". The same data give the same bytes.
func StepChart(s *reports.Step, title, as string) ([]byte, error) {
	if s == nil || len(s.Traces) == 0 {
		return nil, ErrNoStep
	}
	pdf := blank(time.Unix(0, 0).UTC()) // a chart has no date
	pdf.SetTitle(title, true)
	p := &paper{pdf: pdf, d: &reports.Document{Step: s}, cover: newCoverage()}
	switch as {
	case "svg":
		p.svg = &drawing{}
	case "pdf":
	default:
		return nil, fmt.Errorf("a chart is pdf or svg, not %q", as)
	}
	p.newPage()
	p.font(serif, 14)
	p.colour(ink())
	for _, line := range p.wrap(title, width) {
		p.y += lead(14)
		p.text(left, p.y-2, line)
	}
	for _, row := range s.Table {
		if row.Combined {
			text := row.Note
			if text == "" {
				text = "Natural frequency " + row.Frequency + ", damping ratio " + row.Damping + " (95 % intervals)"
			}
			p.paragraph(left, width, text, sans, 9, ink())
		}
	}
	p.y += 3
	p.mainStep(s, s.Traces[mainTrace(s.Traces)])
	p.y += 3
	if s.Amplitude != nil {
		p.amplitude(s.Amplitude, s.Derived)
	}
	if s.Plane != nil {
		p.plane(s.Plane)
	}
	if p.err != nil {
		return nil, p.err
	}
	if p.svg != nil {
		return p.svg.document(title, (p.y+10)/perPoint), nil
	}
	var out bytes.Buffer
	if err := pdf.Output(&out); err != nil {
		return nil, fmt.Errorf("write the chart: %w", err)
	}
	return out.Bytes(), nil
}
