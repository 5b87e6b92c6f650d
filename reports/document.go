// Package reports says what a report says: a Document is made from one closed
// record, its stored Results and the statement of who performed the run, and
// from nothing else.
//
// It computes no result and compares no limit, it lays out no page (layout1
// does) and it signs nothing (sign does). All its texts are ready for
// printing; numbers stand beside them only where something is drawn.
//
// Order of use: New, then a layout's Render.
package reports

import (
	"errors"
	"fmt"
	"time"

	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

// Document is everything that one report says.
type Document struct {
	Layout     int    // number of the page layout it is made for
	Run        string // run id
	Title      string // of the procedure
	Subject    string // the UUT in one line
	Department string
	Bench      string
	Simulated  bool
	Mark       string    // stands across every page, "" on a real bench
	Stamp      string    // stands at the head of every page: what weakens the whole run; "" for nothing
	Made       time.Time // the statement's time; the document's own date

	Verdict  string   // "accepted", "rejected", "inconclusive"
	Headline string   // the verdict as a headline
	Deciding string   // the one figure that decided it, in words
	Reasons  []string // further reasons of the verdict
	Counts   string   // how many limits had which outcome

	Identity     []Row // of the UUT
	Test         []Row // where, when, by whom, by which procedure
	Limits       []LimitRow
	Rules        []string // how limits were judged and what the columns mean
	Static       *Static  // nil when nothing static was measured
	Leak         []Row
	Step         *Step // nil when no step was captured
	Budgets      []Budget
	Instruments  []Instrument
	Conditions   []Row
	Procedure    []Row
	Deviations   []string // from the procedure
	Reservations []Reservation
	NotTested    []string
	Warnings     []string
	Scope        []string // what the report may be used for
	Signature    Signature
	EndMark      string
}

// Row is a label and what stands beside it.
type Row struct{ Label, Text string }

// LimitRow is one result held against its limit. The numbers serve the small
// drawing beside the text; they are in the row's unit.
type LimitRow struct {
	Name     string
	Value    string // rounded to the place of Expanded; "not determined"
	Expanded string // "" when Value has none; Note then says why
	Unit     string
	At       string // where it was found, "" for a figure of the whole run
	Limit    string // "−25 to 25", "at least 24"
	Guard    string // width of the guard band, "" for none
	Outcome  string // in words
	Risk     string // of accepting wrongly; "–" where it means nothing
	Origin   string // of the limit, and how it is known
	Note     string // why undetermined, or what decided

	Number      *float64
	U           *float64
	Low, High   *float64
	GuardNumber float64
}

// Static is the static calibration.
type Static struct {
	Unit    string
	Points  []ErrorPoint
	Table   []PointRow
	Figures []FigureRow
}

// ErrorPoint is one point of the error chart, in the chart's unit.
type ErrorPoint struct {
	Set, Pressure, Error, U float64
	Low, High               *float64
	Guard                   float64
	Cycle                   int
	Down                    bool
}

// PointRow is one point of the table of errors.
type PointRow struct{ Cycle, Leg, Set, Pressure, Error, Expanded, Limit string }

// FigureRow is a figure with its uncertainty, or why it has none.
type FigureRow struct{ Name, Value, Uncertainty string }

// Step is the dynamic response.
type Step struct {
	Unit   string
	Traces []Trace
	Table  []StepRow
	Facts  []Row
	Plane  *Plane // nil when nothing was determined; so are those below

	Amplitude *Amplitude
	Derived   []FigureRow
	Pulse     *Pulse
	Opinions  []string // apart from the results
}

// Amplitude is the gain of the line against frequency in hertz.
type Amplitude struct {
	Frequency, Gain, Low, High []float64 // of the fitted line, with its 95 % band
	Points                     []AmplitudePoint
	Caption                    string
}

// AmplitudePoint is the gain found without a model, with the half-width of its
// 95 % interval.
type AmplitudePoint struct{ Frequency, Gain, U float64 }

// Pulse is what the line does to pulse waves.
type Pulse struct {
	Head  [3]string // rates of the columns of errors
	Rows  []PulseRow
	Notes []string
}

// PulseRow is one shape; errors of systolic and diastolic pressure at three
// rates.
type PulseRow struct {
	Name, Pressure, Fastest string
	Errors                  [3]string
}

// Trace is one step as drawn: time from the edge in seconds.
type Trace struct {
	Number   int
	Start    float64
	Period   float64
	Measured []float64
	Fitted   []float64 // empty when undetermined
	Until    float64   // end of what is worth drawing, in seconds
	Note     string    // why undetermined
}

// StepRow is one step, or what all say together.
type StepRow struct {
	Name, Height, Noise, Frequency, Damping, Note string
	Combined                                      bool
}

// Plane is the place of the UUT among natural frequency and damping.
type Plane struct {
	Singles      []PlanePoint
	Combined     *PlanePoint
	FrequencyLow *float64
	DampingLow   *float64
	DampingHigh  *float64
	Contours     []Contour
	Caption      string
}

// Contour bounds the lines that follow a pulse: those of a natural frequency
// not below the curve's at their damping ratio.
type Contour struct {
	Name               string
	Frequency, Damping []float64
}

// PlanePoint is a natural frequency in hertz and a damping ratio, with their
// 95 % intervals.
type PlanePoint struct {
	Frequency, Damping                 float64
	FrequencyInterval, DampingInterval [2]float64
}

// Budget is the uncertainty of one result, line by line.
type Budget struct {
	Title   string
	Unit    string
	Lines   []BudgetLine
	Sum     string // combined and expanded uncertainty, in words
	Missing string // why there is no budget
}

// BudgetLine is one contribution.
type BudgetLine struct {
	Name, Source, Distribution, Standard, Sensitivity, Contribution, DoF string
	Share                                                                float64 // of the variance
}

// Instrument is one instrument of the bench.
type Instrument struct {
	Role, Name, Identity, Certificate, Due string
}

// Reservation is something that weakens a result without stopping it.
type Reservation struct{ About, Text string }

// Signature is what is printed of a signed statement.
type Signature struct {
	Role, Name, Meaning, Date, Time string
	Head                            string
	Record                          string // lines and bytes
}

// ErrNotOne: record, results and statement do not belong together.
var ErrNotOne = errors.New("record and statement do not belong together")

// New makes the document of a closed record. The events are all of the
// record's, head its head, res what its results line holds, layout the page
// layout number of that line, and st the statement signed by who performed it.
//
// It returns an error when the record is not closed, when a payload is not
// what its kind says, or when the statement is about something else.
func New(events []record.Event, head record.Head, res results.Results, layout int, st Statement) (*Document, error) {
	made, err := st.check(head)
	if err != nil {
		return nil, err
	}
	g, err := gather(events, head)
	if err != nil {
		return nil, err
	}
	d := &Document{
		Layout: layout, Run: head.Run, Made: made.UTC(),
		Department: g.opened.Department, Bench: g.opened.Bench, Simulated: g.opened.Simulated,
		Title: g.procedure.Title, Subject: g.subject(),
		EndMark: "End of report " + head.Run,
	}
	if d.Title == "" {
		d.Title = "Test of a unit under test"
	}
	if d.Simulated {
		d.Mark = "SIMULATED BENCH \u2013 DEMONSTRATION"
	}
	d.Stamp = g.stamp()
	d.Identity, d.Test = g.identity(), g.test(st, made)
	d.limits(res)
	d.judged(res)
	d.static(res)
	d.leak(res.Leak)
	d.step(res)
	d.budgets(res.Limits)
	d.Instruments, d.Conditions, d.Procedure = g.instruments(), g.conditions(), g.procedureRows()
	d.Deviations = g.deviations()
	d.Reservations = g.reservations(res, made)
	d.NotTested = g.notTested(res)
	d.Warnings, d.Scope = warnings(), scope(d.Simulated)
	d.Signature = Signature{
		Role: "Performed by", Name: st.Name, Meaning: st.Meaning,
		Date: made.Format("2006-01-02"), Time: made.Format("15:04:05 ") + zone(made),
		Head: head.Hash, Record: fmt.Sprintf("%d lines, %d bytes", head.Lines, head.Bytes),
	}
	return d, nil
}

// zone is how a time's zone is printed: "UTC" or "+02:00".
func zone(t time.Time) string {
	if _, offset := t.Zone(); offset == 0 {
		return "UTC"
	}
	return t.Format("-07:00")
}
