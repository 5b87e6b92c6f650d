package layout1

import (
	"bytes"
	"errors"
	"fmt"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

// The same document gives the same bytes, also ten at a time, and a document
// made again from the same record does too.
func TestSameBytes(t *testing.T) {
	for name, m := range kinds(t) {
		want := render(t, m)
		got := make([][]byte, 10)
		errs := make([]error, 10)
		var group sync.WaitGroup
		for i := range got {
			d := m.document(t)
			group.Go(func() { got[i], errs[i] = Render(d, m.attachments()) })
		}
		group.Wait()
		for i := range got {
			if errs[i] != nil || !bytes.Equal(got[i], want) {
				t.Errorf("%s: rendering %d differs (%v)", name, i, errs[i])
			}
		}
	}
}

// The order in which attachments are given is no matter; two of one name are.
func TestAttachmentsAreSorted(t *testing.T) {
	m := accepted(t)
	list := m.attachments()
	slices.Reverse(list)
	other, err := Render(m.document(t), list)
	if err != nil || !bytes.Equal(other, render(t, m)) {
		t.Errorf("attachments in another order: %v", err)
	}
	if b, err := Render(m.document(t), append(list, list[0])); err == nil || b != nil {
		t.Error("two attachments of one name were taken")
	}
}

// Another time of signing gives other bytes: the check above can fail.
func TestOtherBytes(t *testing.T) {
	m := accepted(t)
	want := render(t, m)
	m.statement.Time = "2026-01-02T04:21:10+01:00"
	if bytes.Equal(render(t, m), want) {
		t.Error("a report signed a second later has the same bytes")
	}
}

func TestEveryPage(t *testing.T) {
	for name, m := range kinds(t) {
		pages := pagesOf(t, render(t, m))
		if len(pages) < 3 || len(pages) > 8 {
			t.Errorf("%s: %d pages", name, len(pages))
		}
		simulated := m.document(t).Simulated
		for i, p := range pages {
			text := allText(p)
			if !strings.Contains(text, "Run "+m.run) {
				t.Errorf("%s, page %d: no run id", name, i+1)
			}
			if !strings.Contains(text, fmt.Sprintf("page %d of %d", i+1, len(pages))) {
				t.Errorf("%s, page %d: not numbered", name, i+1)
			}
			if marked := strings.Contains(text, "SIMULATED BENCH – DEMONSTRATION"); marked != simulated {
				t.Errorf("%s, page %d: marked %v, simulated %v", name, i+1, marked, simulated)
			}
			if end := strings.Contains(text, "End of report "+m.run); end != (i == len(pages)-1) {
				t.Errorf("%s, page %d: end mark %v", name, i+1, end)
			}
		}
	}
}

// The mark of a simulated bench lies across every page, first of all that is
// drawn, and on no page of a real one.
func TestMarkAcrossEveryPage(t *testing.T) {
	for name, m := range kinds(t) {
		simulated := m.document(t).Simulated
		for i, content := range contentsOf(t, render(t, m)) {
			at := bytes.Index(content, []byte("0.941 0.941 0.941 rg "))
			curves := 0
			if at >= 0 {
				curves = bytes.Count(content[at:at+bytes.IndexByte(content[at:], 'Q')], []byte(" c "))
			}
			if simulated != (curves > 100) || at > 300 {
				t.Errorf("%s, page %d: %d curves of a mark at %d, simulated %v", name, i+1, curves, at, simulated)
			}
		}
	}
}

// A certificate past its due date is stamped on every page, and only then.
func TestStampOnEveryPage(t *testing.T) {
	for name, m := range kinds(t) {
		for _, due := range []string{"2025-12-31", "2026-01-02"} { // the run is of 2 January 2026
			for i, e := range m.events {
				if e.Kind == record.KindReadout {
					m.events[i].Payload = bytes.Replace(e.Payload, []byte(`"due":"2025-12-31"`), []byte(`"due":"`+due+`"`), 1)
				}
			}
			for i, p := range pagesOf(t, render(t, m)) {
				stamped := strings.Contains(allText(p), "CERTIFICATE OVERDUE: READOUT SINCE 2025-12-31")
				if stamped != (due == "2025-12-31") {
					t.Errorf("%s, page %d, due on %s: stamped %v", name, i+1, due, stamped)
				}
			}
		}
	}
}

// Everything that the document says stands on the pages.
func TestEverythingIsPrinted(t *testing.T) {
	for name, m := range kinds(t) {
		d := m.document(t)
		text := ""
		for _, p := range pagesOf(t, render(t, m)) {
			text += allText(p) + " "
		}
		// Words wrapped in the middle are joined by the comparison without blanks.
		squeeze := func(s string) string {
			return strings.NewReplacer(" ", "", "\u00a0", "").Replace(s)
		}
		flat := squeeze(text)
		must := func(what, s string) {
			if s != "" && !strings.Contains(flat, squeeze(s)) {
				t.Errorf("%s: %s %q is not on the pages", name, what, s)
			}
		}
		must("verdict", d.Headline)
		must("deciding figure", d.Deciding)
		for _, l := range d.Limits {
			must("limit", l.Name)
			must("value", l.Value)
			must("uncertainty", l.Expanded)
			must("bounds", l.Limit)
			must("outcome", l.Outcome)
			must("risk", l.Risk)
			must("origin", l.Origin)
			must("note", l.Note)
		}
		for _, r := range d.Reservations {
			must("reservation", r.Text)
		}
		for _, b := range d.Budgets {
			must("budget", b.Title)
			must("sum", b.Sum)
			must("missing budget", b.Missing)
			for _, l := range b.Lines {
				must("contribution", l.Name+" "+l.Source+" "+l.Distribution+" "+l.Standard+" "+l.Sensitivity+" "+l.Contribution+" "+l.DoF)
			}
		}
		for _, list := range [][]string{d.Reasons, d.NotTested, d.Warnings, d.Scope, d.Deviations, d.Rules} {
			for _, s := range list {
				must("text", s)
			}
		}
		for _, i := range d.Instruments {
			must("instrument", i.Name)
			must("due date", i.Due)
		}
		if d.Step != nil {
			for _, r := range d.Step.Table {
				must("step", r.Frequency)
				must("step", r.Note)
			}
		}
		if d.Static != nil {
			for _, r := range d.Static.Table {
				must("point", r.Error+" ± "+r.Expanded)
			}
			for _, f := range d.Static.Figures {
				must("figure", f.Value)
			}
		}
		must("head", d.Signature.Head)
		must("name", d.Signature.Name)
		must("meaning", d.Signature.Meaning)
		must("date", d.Signature.Date+", "+d.Signature.Time)
	}
}

func TestRefusals(t *testing.T) {
	m := accepted(t)
	d := m.document(t)
	d.Layout = Number + 1
	if b, err := Render(d, nil); !errors.Is(err, ErrOtherLayout) || b != nil {
		t.Errorf("another layout: %v", err)
	}
	for _, text := range []string{"emoji 😀", "a\x00b", "\xff", "שלום", "e\u0301", "\u202eabc", "漢字"} {
		d := m.document(t)
		d.Identity[0].Text = text
		b, err := Render(d, nil)
		if err == nil || b != nil {
			t.Errorf("%q was printed", text)
		}
		d = m.document(t)
		if b, err := Render(d, []Attachment{{Name: text}}); err == nil || b != nil {
			t.Errorf("%q was taken for the name of an attachment", text)
		}
	}
}

// Results without anything in them, and the odd shapes that a stopped run or
// other data can leave, are laid out without a panic.
func TestOddDocuments(t *testing.T) {
	odd := map[string]func(m *made){
		"nothing": func(m *made) { m.results = results.Results{} },
		"one point": func(m *made) {
			m.results.Curve = []results.ErrorPoint{{Set: 0, Pressure: 0, Error: 0, Leg: "up", Cycle: 1}}
		},
		"no bounds on the curve": func(m *made) {
			for i := range m.results.Curve {
				m.results.Curve[i].Low, m.results.Curve[i].High = nil, nil
			}
		},
		"many points": func(m *made) { m.results.Curve = curve(3, 24) },
		"many limits": func(m *made) {
			for range 40 {
				m.results.Limits = append(m.results.Limits, m.results.Limits[1])
			}
		},
		"many steps": func(m *made) { m.results.Step, m.results.Traces = steps(200, 0.9, 30) },
		"empty trace": func(m *made) {
			m.results.Traces = []results.StepTrace{{Number: 1}, {Number: 9, Period: 0.001, Measured: []float64{1}}}
		},
		"flat trace": func(m *made) {
			m.results.Traces[0] = results.StepTrace{Number: 1, Start: -0.1, Period: 0.01, Measured: make([]float64, 40)}
		},
		"no step determined": func(m *made) {
			m.results.Step, m.results.Traces = steps(20, 0.2, 3, 1, 2, 3)
			m.results.Step.Combined = results.Combined{Reasons: []string{"no_step"}}
		},
		"no static": func(m *made) { m.results.Static, m.results.Curve = nil, nil },
		"no leak":   func(m *made) { m.results.Leak = nil },
		"zero uncertainty": func(m *made) {
			m.results.Limits[0].Expanded, m.results.Limits[1].Expanded = number(0), nil
		},
		"long reservation": func(m *made) {
			m.results.Reservations = []results.Reason{{Code: "x", Text: strings.Repeat("A reservation that goes on and on. ", 300)}}
		},
		"huge": func(m *made) {
			for i := range m.results.Curve {
				m.results.Curve[i].Error *= 1e306
				m.results.Curve[i].Expanded *= 1e300
			}
			m.results.Limits[0].Value, m.results.Limits[0].Expanded = number(-1.5e300), number(1e299)
			m.results.Limits[1].Value, m.results.Limits[1].Expanded = number(1.5e-300), number(1e-301)
			m.results.Traces[0].Measured[3] = 1e308
			m.results.Traces[0].Measured[4] = -1e308
			m.results.Step.Combined.Frequency.Value = 1e308
			m.results.Step.Combined.Frequency.Interval = [2]float64{-1e308, 1e308}
		},
		"empty department": func(m *made) { m.events = events(t, words{run: m.run, serial: "x", name: "y"}, "", nil) },
		"words without blanks": func(m *made) {
			m.results.Reasons = []results.Reason{{Code: "x", Text: strings.Repeat("W", 900)}}
		},
	}
	for name, change := range odd {
		m := accepted(t)
		change(&m)
		pdf := render(t, m)
		for i, content := range contentsOf(t, pdf) {
			if bytes.Contains(content, []byte("NaN")) || bytes.Contains(content, []byte("Inf")) {
				t.Errorf("%s, page %d: a number that is none", name, i+1)
			}
		}
		pages := pagesOf(t, pdf)
		boxes(t, name, pages)
	}
}

func TestBoxes(t *testing.T) {
	for name, m := range kinds(t) {
		boxes(t, name, pagesOf(t, render(t, m)))
	}
}

// boxes finds text outside the margins and pieces of text that lie on each
// other. Turned text is left out: the mark lies under everything.
func boxes(t *testing.T, name string, pages [][]written) {
	t.Helper()
	for n, page := range pages {
		for i, a := range page {
			if a.turned {
				continue
			}
			if a.outside() {
				t.Errorf("%s, page %d: %q is outside the margins (%.1f to %.1f, at %.1f)", name, n+1, a.text, a.x, a.x+a.w, a.y)
			}
			for _, b := range page[i+1:] {
				if !b.turned && a.on(b) {
					t.Errorf("%s, page %d: %q lies on %q", name, n+1, a.text, b.text)
				}
			}
		}
	}
}

// slack in points, for gofpdf rounds places and widths.
const slack = 0.4

func (w written) outside() bool {
	return w.x < left/perPoint-slack || w.x+w.w > right/perPoint+slack || w.y < (pageHeight-287)/perPoint || w.y > (pageHeight-12)/perPoint
}

func (w written) on(b written) bool {
	return w.x+w.w > b.x+slack && b.x+b.w > w.x+slack && w.y+w.up > b.y-b.descends+slack && b.y+b.up > w.y-w.descends+slack
}

// The checks of boxes can fail.
func TestBoxesNotice(t *testing.T) {
	a := written{text: "a", x: 100, y: 100, w: 50, up: 7, descends: 2}
	for _, c := range []struct {
		x, y        float64
		on, outside bool
	}{{140, 104, true, false}, {140, 110, false, false}, {151, 100, false, false}, {100, 100, true, false}, {520, 100, false, true}, {50, 100, false, true}, {100, 10, false, true}} {
		b := a
		b.x, b.y = c.x, c.y
		if a.on(b) != c.on || b.on(a) != c.on || b.outside() != c.outside {
			t.Errorf("at %v, %v: on %v, outside %v", c.x, c.y, a.on(b), b.outside())
		}
	}
}

// A record that took days, or lines of a stage without an end, are no trouble.
func TestStagesWithoutEnd(t *testing.T) {
	m := accepted(t)
	var kept []record.Event
	for _, e := range m.events {
		if e.Kind == record.KindStage && bytes.Contains(e.Payload, []byte(`"end"`)) {
			continue
		}
		e.Wall = e.Wall.Add(time.Duration(len(kept)) * time.Hour)
		e.Line = int64(len(kept) + 1)
		kept = append(kept, e)
	}
	m.events = kept
	m.statement = statement(plainWords(), len(kept))
	render(t, m)
}
