package reports

import (
	"encoding/json"
	"errors"
	"strings"
	"testing"
	"time"

	"kymobench/procedures/record"
	"kymobench/procedures/results"
	"kymobench/procedures/verdict"
)

const (
	testRun  = "20260102-030405-000042"
	testHash = "00112233445566778899aabbccddeeff00112233445566778899aabbccddeeff"
)

func pointer(x float64) *float64 { return &x }

// lines makes a closed record of the payloads between its first and last two
// lines.
func lines(t *testing.T, opened record.Opened, finished record.Finished, between map[string]any, order ...string) []record.Event {
	t.Helper()
	var list []record.Event
	add := func(kind string, payload any) {
		e, err := record.NewEvent(int64(len(list)+1), 0, kind, payload)
		if err != nil {
			t.Fatal(err)
		}
		e.Wall = time.Date(2026, 1, 2, 3, 4, 5+len(list), 0, time.UTC)
		list = append(list, e)
	}
	opened.Schema, opened.Run = record.Schema, testRun
	add(record.KindOpened, opened)
	add(record.KindProcedure, record.File{Name: "incoming.toml", ID: "incoming", Revision: 3, Title: "Incoming inspection", SHA256: testHash})
	add(record.KindUUT, record.UUT{SerialNumber: "KY-1", Is: "bare transducer"})
	for _, name := range order {
		kind, _, _ := strings.Cut(name, "#")
		add(kind, between[name])
	}
	add(record.KindFinished, finished)
	add(record.KindResults, record.StoredResults{Version: 1, Layout: 1, JSON: json.RawMessage("{}")})
	add(record.KindClosed, record.Closed{Lines: int64(len(list) + 1)})
	return list
}

func closed(t *testing.T) []record.Event {
	return lines(t, record.Opened{Department: "Department", Bench: "Bench", Operator: "Somebody"}, record.Finished{Complete: true}, nil)
}

func headOf(events []record.Event) record.Head {
	return record.Head{Run: testRun, Lines: int64(len(events)), Bytes: 4321, Hash: testHash}
}

func signed(events []record.Event) Statement {
	return Statement{
		Schema: StatementSchema, Run: testRun, Lines: int64(len(events)), Bytes: 4321, Head: testHash, Role: Performed,
		Name: "Somebody", Meaning: "I carried out this run.", Time: "2026-01-02T05:00:00+01:00",
	}
}

func document(t *testing.T, events []record.Event, res results.Results) *Document {
	t.Helper()
	d, err := New(events, headOf(events), res, 1, signed(events))
	if err != nil {
		t.Fatal(err)
	}
	return d
}

func judged(name string, value, expanded float64, unit string, low, high *float64, o verdict.Outcome) results.Limit {
	return results.Limit{Name: name, Value: &value, Expanded: &expanded, Unit: unit, Bounds: results.Bounds{Low: low, High: high}, Outcome: o, Resolution: 0.01}
}

// The sentence at the top of page one, for each way in which a run can come out.
func TestDecidingFigure(t *testing.T) {
	slow := judged("natural_frequency", 11.2431, 0.3149, "Hz", pointer(24), nil, verdict.Fail)
	sticky := judged("hysteresis", 1.02, 0.0912, "mmHg", pointer(-1), pointer(1), verdict.ConditionalFail)
	close1 := judged("sensitivity", 5.041, 0.0124, "uV/V/mmHg", pointer(4.95), pointer(5.05), verdict.ConditionalPass)
	wide := judged("damping_ratio", 0.5, 0.01, "1", pointer(0.15), pointer(1.1), verdict.Pass)
	open := results.Limit{Name: "accuracy", Unit: "mmHg", Reason: "no set pressure was read"}
	leak := results.Reason{Code: "leak", Text: "the pressure falls by 0.4 +- 0.1 mmHg/s"}
	for _, c := range []struct {
		name    string
		verdict verdict.Verdict
		limits  []results.Limit
		reasons []results.Reason
		want    string
		others  string
	}{
		{"rejected by one", verdict.Rejected, []results.Limit{wide, slow}, nil, "Natural frequency (11.24 ± 0.31) Hz is below its limit of 24 Hz.", ""},
		{"the worst of two decides", verdict.Rejected, []results.Limit{sticky, slow}, []results.Reason{{Code: "hysteresis", Text: "x"}, {Code: "natural_frequency", Text: "y"}},
			"Natural frequency (11.24 ± 0.31) Hz is below its limit of 24 Hz.", "Hysteresis (1.020 ± 0.091) mmHg is above its limit of 1 mmHg, by less than the guard band."},
		{"rejected without a figure", verdict.Rejected, nil, []results.Reason{{Code: "dead", Text: "the UUT gives no signal"}}, "The UUT gives no signal.", ""},
		{"accepted", verdict.Accepted, []results.Limit{wide, close1}, nil,
			"Nearest to its limit: sensitivity (5.041 ± 0.012) µV/V/mmHg, allowed 4.95 to 5.05 µV/V/mmHg, inside its limit by less than the guard band.", ""},
		{"leaking", verdict.Inconclusive, []results.Limit{wide, open}, []results.Reason{leak}, "The pressure falls by 0.4 ± 0.1 mmHg/s.", ""},
		{"undetermined", verdict.Inconclusive, []results.Limit{wide, open}, nil, "Largest error after zeroing is undetermined: no set pressure was read.", ""},
		{"in the guard band", verdict.Inconclusive, []results.Limit{wide, close1}, []results.Reason{{Code: "sensitivity", Text: "z"}},
			"Sensitivity (5.041 ± 0.012) µV/V/mmHg is inside its limit, 4.95 to 5.05 µV/V/mmHg, by less than the guard band.", ""},
		{"nothing at all", verdict.Inconclusive, nil, nil, "The record gives no reason.", ""},
	} {
		d := document(t, closed(t), results.Results{Verdict: c.verdict, Limits: c.limits, Reasons: c.reasons})
		plain := func(s string) string { return strings.ReplaceAll(s, "\u00a0", " ") }
		if got := plain(d.Deciding); got != c.want {
			t.Errorf("%s: %s\nwant: %s", c.name, got, c.want)
		}
		if c.others != "" && !strings.Contains(plain(strings.Join(d.Reasons, " ")), c.others) {
			t.Errorf("%s: other reasons %q", c.name, d.Reasons)
		}
		if d.Verdict != c.verdict.String() || !strings.EqualFold(d.Headline, d.Verdict) {
			t.Errorf("%s: verdict %s, headline %s", c.name, d.Verdict, d.Headline)
		}
	}
}

// A figure has its uncertainty or a stated reason why it has none.
func TestEveryLimitHasUncertaintyOrReason(t *testing.T) {
	bare := judged("zero_offset", 1.2, 0, "mmHg", pointer(-25), pointer(25), verdict.Undetermined)
	none := bare
	none.Expanded = nil
	open := results.Limit{Name: "accuracy", Unit: "mmHg"}
	d := document(t, closed(t), results.Results{Limits: []results.Limit{bare, none, open, judged("hysteresis", 0.5, 0.1, "mmHg", nil, pointer(1), verdict.Pass)}})
	for _, l := range d.Limits {
		if l.Expanded == "" && l.Note == "" {
			t.Errorf("%s %s: neither uncertainty nor reason", l.Name, l.Value)
		}
	}
	if d.Limits[3].Expanded != "0.10" || d.Limits[3].Limit != "at most 1" || d.Limits[2].Value != "not determined" {
		t.Errorf("%+v", d.Limits)
	}
}

// Every reservation stands in the report once, wherever it was made.
func TestAllReservations(t *testing.T) {
	events := lines(t, record.Opened{}, record.Finished{Complete: true}, map[string]any{
		"reservation":   record.Reservation{Code: "a", Text: "from the record"},
		"reservation#2": record.Reservation{Code: "b", Text: "in both"},
		"fault":         record.Fault{Code: "leak", Text: "a fault\nof two lines"},
		"recovered":     record.Recovered{Bytes: 17},
		"reference":     record.Reference{Certificate: record.Certificate{Due: "2025-12-31"}},
		"readout":       record.Readout{Due: "2026-01-02"},
	}, "reservation", "reservation#2", "fault", "recovered", "reference", "readout")
	res := results.Results{
		Reservations: []results.Reason{{Code: "b", Text: "in both"}, {Code: "no_text"}},
		Static:       &results.Static{Reservations: []results.Reason{{Code: "c", Text: "static"}}},
		Step:         &results.Step{Reservations: []results.Reason{{Code: "d", Text: "step"}}},
	}
	var got []string
	for _, r := range document(t, events, res).Reservations {
		got = append(got, r.About+": "+r.Text)
	}
	want := []string{
		"run: In both.", "run: No text.", "run: From the record.", "static: Static.", "step: Step.", "bench: Fault of the bench: a fault; of two lines.",
		"record: The record was taken up again after it had been left open; 17 bytes of an unfinished line were set aside.",
		"bench: The certificate of the reference was due on 2025-12-31, before this run.",
	}
	late := signed(events)
	late.Time = "2026-01-02T03:04:05Z"
	d, err := New(events, headOf(events), results.Results{}, 1, late)
	if err != nil || d.Reservations[len(d.Reservations)-1].About != "signature" {
		t.Errorf("signed before the record was closed: %v, %v", err, d)
	}
	if strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Errorf("reservations\n%s\nwant\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
}

func TestNotTested(t *testing.T) {
	res := results.Results{Curve: []results.ErrorPoint{{Set: 200}, {Set: -30}, {Set: 300}}}
	list := strings.ReplaceAll(strings.Join(document(t, closed(t), res).NotTested, " "), "\u00a0", " ")
	for _, want := range []string{"below −30 mmHg and above 300 mmHg", "Leak", "no step was captured", "Electrical safety", "Visual condition", "Drift"} {
		if !strings.Contains(list, want) {
			t.Errorf("%q is not said to be untested: %s", want, list)
		}
	}
	events := lines(t, record.Opened{}, record.Finished{Complete: true}, map[string]any{
		"stage":   record.Stage{Number: 1, Kind: "inspect", Phase: "begin"},
		"stage#2": record.Stage{Number: 1, Kind: "inspect", Phase: "end"},
		"stage#3": record.Stage{Number: 2, Kind: "drift", Phase: "begin"},
		"stage#4": record.Stage{Number: 2, Kind: "drift", Phase: "abandoned", Why: "no time"},
	}, "stage", "stage#2", "stage#3", "stage#4")
	d := document(t, events, results.Results{})
	list = strings.Join(d.NotTested, " ")
	if strings.Contains(list, "Visual condition") || !strings.Contains(list, "Drift") || !strings.Contains(list, "no set pressure was judged") {
		t.Errorf("%s", list)
	}
	if got := strings.Join(d.Deviations, " "); got != "Stage 2 (drift) was abandoned: no time." {
		t.Errorf("deviations: %s", got)
	}
}

func TestSimulatedIsMarked(t *testing.T) {
	d := document(t, lines(t, record.Opened{Simulated: true}, record.Finished{Complete: true}, nil), results.Results{})
	if d.Mark == "" || !strings.Contains(d.Scope[0], "simulated") {
		t.Errorf("mark %q, scope %q", d.Mark, d.Scope[0])
	}
	if d := document(t, closed(t), results.Results{}); d.Mark != "" || strings.Contains(strings.Join(d.Scope, " "), "simulated") {
		t.Error("a real bench is marked as simulated")
	}
}

// Times are printed as signed, the document's own date is in UTC.
func TestTimes(t *testing.T) {
	d := document(t, closed(t), results.Results{})
	if s := d.Signature; s.Date != "2026-01-02" || s.Time != "05:00:00 +01:00" || !d.Made.Equal(time.Date(2026, 1, 2, 4, 0, 0, 0, time.UTC)) || d.Made.Location() != time.UTC {
		t.Errorf("%+v, %v", d.Signature, d.Made)
	}
	if got := span(time.Date(2026, 1, 2, 23, 59, 0, 0, time.UTC), time.Date(2026, 1, 3, 0, 1, 0, 0, time.UTC)); got != "2026-01-02 23:59:00 to 2026-01-03 00:01:00 UTC (computer clock, not verified)" {
		t.Error(got)
	}
}

func TestRefused(t *testing.T) {
	good := closed(t)
	change := func(f func(*Statement)) Statement {
		s := signed(good)
		f(&s)
		return s
	}
	for name, s := range map[string]Statement{
		"run":   change(func(s *Statement) { s.Run = "another" }),
		"lines": change(func(s *Statement) { s.Lines++ }),
		"bytes": change(func(s *Statement) { s.Bytes-- }),
		"head":  change(func(s *Statement) { s.Head = strings.Repeat("0", 64) }),
	} {
		if d, err := New(good, headOf(good), results.Results{}, 1, s); !errors.Is(err, ErrNotOne) || d != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
	for name, s := range map[string]Statement{
		"schema":  change(func(s *Statement) { s.Schema = "kymobench/statement/2" }),
		"role":    change(func(s *Statement) { s.Role = "reviewed" }),
		"name":    change(func(s *Statement) { s.Name = "" }),
		"meaning": change(func(s *Statement) { s.Meaning = "" }),
		"time":    change(func(s *Statement) { s.Time = "yesterday" }),
	} {
		if d, err := New(good, headOf(good), results.Results{}, 1, s); err == nil || d != nil {
			t.Errorf("%s was taken", name)
		}
	}
	openEnded := good[:len(good)-1]
	if d, err := New(openEnded, headOf(openEnded), results.Results{}, 1, signed(openEnded)); !errors.Is(err, record.ErrNotClosed) || d != nil {
		t.Errorf("an open record: %v", err)
	}
	for name, events := range map[string][]record.Event{"none": nil, "no opening": good[1:]} {
		if d, err := New(events, headOf(events), results.Results{}, 1, signed(events)); err == nil || d != nil {
			t.Errorf("%s: taken", name)
		}
	}
	short := good[:len(good):len(good)]
	if d, err := New(short, headOf(append(short, short[0])), results.Results{}, 1, signed(append(short, short[0]))); err == nil || d != nil {
		t.Error("a record with fewer lines than its head was taken")
	}
	bad := closed(t)
	bad[1].Payload = json.RawMessage(`{"name":"x","unknown":1}`)
	if d, err := New(bad, headOf(bad), results.Results{}, 1, signed(bad)); !errors.Is(err, record.ErrPayload) || d != nil {
		t.Errorf("a payload that is not its kind's: %v", err)
	}
	other := closed(t)
	h := headOf(other)
	h.Run = "another"
	s := signed(other)
	s.Run = "another"
	if d, err := New(other, h, results.Results{}, 1, s); !errors.Is(err, ErrNotOne) || d != nil {
		t.Errorf("a head of another run: %v", err)
	}
}

// What ISO/IEC 17025:2017, 7.8.2.1 (from memory) lists and a record holds.
func TestItemsOfTheStandard(t *testing.T) {
	events := lines(t, record.Opened{Department: "Department", Bench: "Bench"}, record.Finished{Complete: true}, map[string]any{
		"reference": record.Reference{Certificate: record.Certificate{Number: "C-1", Laboratory: "Laboratory", Due: "2026-05-05"}},
	}, "reference")
	d := document(t, events, results.Results{})
	text := d.Title
	for _, r := range append(append(append([]Row{}, d.Identity...), d.Test...), append(d.Conditions, d.Procedure...)...) {
		text += "\n" + r.Label + ": " + r.Text
	}
	for _, i := range d.Instruments {
		text += "\n" + i.Certificate + " " + i.Due
	}
	text += "\n" + strings.Join(append(append([]string{}, d.Scope...), d.Deviations...), "\n") + "\n" + d.EndMark
	for item, want := range map[string]string{
		"a title": "Incoming inspection", "b name of the laboratory": "Department: Department", "c location": "Bench: Bench", "d unique identification": "Run: " + testRun,
		"d end": "End of report " + testRun, "f method": "incoming, revision 3", "f method's bytes": testHash, "g item": "Serial number: KY-1",
		"i date of the activity": "2026-01-02", "j date of issue": "Signed: 2026-01-02 05:00:00 +01:00", "l only the item": "relate only to the item tested",
		"7.8.2.1 reproduction": "not to be reproduced except in full", "n deviations": "every stage was carried out", "o who": "Performed by: Somebody",
		"traceability": "C-1, Laboratory", "clock": "computer clock, not verified",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("%s: %q is missing from\n%s", item, want, text)
		}
	}
}
