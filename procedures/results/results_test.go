package results

import (
	"encoding/json"
	"fmt"
	"math"
	"testing"
	"time"

	"kymobench/bench/line"
	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/verdict"
)

// made is a record in the making, with readings whose figures are known.
type made struct {
	t      *testing.T
	events []record.Event
}

func (m *made) add(kind string, payload any) int64 {
	m.t.Helper()
	n := int64(len(m.events) + 1)
	e, err := record.NewEvent(n, line.Instant(n)*1e8, kind, payload)
	if err != nil {
		m.t.Fatal(err)
	}
	m.events = append(m.events, e)
	return n
}

// opening states a bench: reference 0.06 % of reading and 0.04 mmHg, readout
// gain 0.05 % and zero 0.4 uV/V, all with k = 2; head 1 mm of water.
func opening(t *testing.T) *made {
	m := &made{t: t}
	d, err := procedures.Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	m.add(record.KindProcedure, record.File{Name: d.Name, SHA256: d.SHA256, Text: string(d.Source)})
	m.add(record.KindReference, record.Reference{Field: quantity.Field{Unit: "mmHg"}, Height: "0 mm", Certificate: record.Certificate{
		CoverageFactor: 2, Uncertainty: "0.04 mmHg", UncertaintyOfReading: "0.06 %"}})
	m.add(record.KindUUT, record.UUT{Field: quantity.Field{Unit: "uV/V"}, NominalSensitivity: "5 uV/V/mmHg", SamplePeriod: "1 ms",
		Height: "0 mm", HeightUncertainty: "1 mm", FluidDensity: 998.2071})
	m.add(record.KindZeroing, record.Zeroing{Role: "reference", How: "device"})
	m.add(record.KindReadout, record.Readout{CoverageFactor: 2, GainUncertainty: "0.05 %", ZeroUncertainty: "0.4 uV/V"})
	return m
}

// point takes ten readings of the reference and 500 samples of the UUT whose
// noise is +-0.02 mmHg and +-0.1 mmHg in turn.
func (m *made) point(purpose, leg string, set, uut float64) {
	pt := record.Point{Purpose: purpose, Cycle: 1, Leg: leg, Set: fmt.Sprintf("%g mmHg", set)}
	sign := 1.0
	for range 10 {
		sign = -sign
		pt.Readings = append(pt.Readings, m.add(record.KindReading, record.Reading{Role: "reference", Text: fmt.Sprintf("%.4f", set+0.02*sign)}))
	}
	for range 2 {
		b := record.Block{Role: "uut", Period: "1 ms"}
		for range record.BlockSize {
			sign = -sign
			b.Samples = append(b.Samples, fmt.Sprintf("%.4f", 5*(uut+0.1*sign)))
		}
		pt.Blocks = append(pt.Blocks, m.add(record.KindBlock, b))
	}
	m.add(record.KindPoint, pt)
}

// cycle takes the shipped set pressures; the UUT reads offset + set + error(set).
func (m *made) cycle(offset float64, errorAt func(set float64, down bool) float64) {
	m.point("zero", "", 0, offset)
	for i, set := range []float64{0, 50, 100, 200, 300, 200, 100, 50, 0} {
		leg := "up"
		if i > 4 {
			leg = "down"
		}
		m.point("static", leg, set, offset+set+errorAt(set, i > 4))
	}
}

func (m *made) compute() Results {
	m.t.Helper()
	r, err := Compute(m.events)
	if err != nil {
		m.t.Fatal(err)
	}
	return r
}

func (r Results) limit(t *testing.T, name string) Limit {
	t.Helper()
	for _, l := range r.Limits {
		if l.Name == name {
			return l
		}
	}
	t.Fatalf("no limit %s in %v", name, r.Limits)
	return Limit{}
}

// The figures are put in by hand, and the uncertainties added up by hand from
// what the bench states (GUM 5.1.2): zero offset from head (1 mm of water less
// air) and readout zero; sensitivity from shares of 0.03 % and 0.025 % and the
// 0.02 mmHg at each set pressure.
func TestFiguresAndBudgets(t *testing.T) {
	m := opening(t)
	m.cycle(7, func(set float64, down bool) float64 {
		e := -0.001 * set
		if down && set == 200 {
			e += 0.3
		}
		return e
	})
	m.add(record.KindFinished, record.Finished{Complete: true})
	r := m.compute()
	near := func(what string, got, want, tolerance float64) {
		t.Helper()
		if !(math.Abs(got-want) <= tolerance) {
			t.Errorf("%s: %.6g, want %.6g", what, got, want)
		}
	}
	zero := r.limit(t, "zero_offset")
	near("zero offset", *zero.Value, 7, 1e-9)
	head := (998.2071 - 1.2) * 9.80665 * 1e-3 / 133.322387415
	near("its standard uncertainty", *zero.Standard, math.Sqrt(head*head+0.04*0.04), 0.004)
	sensitivity := r.limit(t, "sensitivity")
	// Slope of the line through the nine points, by hand: -0.001 and the 0.3 at
	// one of them: c = (200-1000/9)/Sxx, Sxx = 195000 - 1000^2/9.
	sxx := 195000 - 1e6/9
	near("sensitivity", *sensitivity.Value, 5*(1-0.001+0.3*(200-1000.0/9)/sxx), 2e-6)
	var common float64
	for set, n := range map[float64]float64{50: 2, 100: 2, 200: 2, 300: 1} {
		c := n * (set - 1000.0/9) / sxx
		common += c * c
	}
	u := 5 * math.Sqrt(0.0003*0.0003+0.00025*0.00025+common*0.02*0.02)
	near("its standard uncertainty", *sensitivity.Standard, u, 0.02*u)
	hysteresis := r.limit(t, "hysteresis")
	near("hysteresis", *hysteresis.Value, 0.3, 1e-3)
	near("it is found at", *hysteresis.At, 200, 0)
	accuracy := r.limit(t, "accuracy")
	near("largest error", *accuracy.Value, -0.3, 1e-9)
	near("its limit", *accuracy.Bounds.High, 9, 1e-9)
	for _, name := range []string{"natural_frequency", "damping_ratio"} {
		if l := r.limit(t, name); l.Value != nil || l.Outcome != verdict.Undetermined || l.Reason == "" || l.FalseAccept != nil {
			t.Errorf("%s without a step: %+v", name, l)
		}
	}
	if r.Verdict != verdict.Inconclusive {
		t.Errorf("verdict %v without steps", r.Verdict)
	}
	for _, l := range r.Limits {
		var v float64
		for _, b := range l.Budget {
			v += b.Contribution * b.Contribution
		}
		if l.Standard != nil {
			near(string(l.Name)+": the budget's sum", math.Sqrt(v), *l.Standard, 1e-12)
		}
	}
}

// An error of 2 mmHg at 50 mmHg breaks its limit of 1.5 mmHg while 3 mmHg at
// 300 mmHg keeps its 9: the reading that decides is shown.
func TestAccuracyShowsWhatDecides(t *testing.T) {
	m := opening(t)
	m.cycle(0, func(set float64, _ bool) float64 {
		switch set {
		case 50:
			return 2
		case 300:
			return 3
		}
		return 0
	})
	m.add(record.KindFinished, record.Finished{Complete: true})
	r := m.compute()
	l := r.limit(t, "accuracy")
	if l.Outcome != verdict.Fail || math.Abs(*l.Value-2) > 1e-9 || *l.At != 50 || l.FalseAccept != nil || l.Reason == "" {
		t.Errorf("%+v", l)
	}
	if r.Verdict != verdict.Rejected || len(r.Reasons) == 0 {
		t.Errorf("%v, %v", r.Verdict, r.Reasons)
	}
}

// A fault of the bench leaves the run inconclusive though a limit failed, and
// a cycle that is not whole is not judged.
func TestFaultIsNoRejection(t *testing.T) {
	m := opening(t)
	m.point("zero", "", 0, 60)
	m.point("static", "up", 0, 60)
	m.add(record.KindFault, record.Fault{Code: "leak", Text: "a leak"})
	m.add(record.KindFinished, record.Finished{Code: "leak"})
	r := m.compute()
	if r.Verdict != verdict.Inconclusive || r.Reasons[0].Code != "leak" {
		t.Errorf("%v, %v", r.Verdict, r.Reasons)
	}
	if l := r.limit(t, "zero_offset"); l.Outcome != verdict.Fail || math.Abs(*l.Value-60) > 1e-9 {
		t.Errorf("zero offset %+v", l)
	}
	if l := r.limit(t, "accuracy"); l.Outcome != verdict.Undetermined || l.Value != nil {
		t.Errorf("accuracy from one point: %+v", l)
	}
	m = opening(t)
	if r := m.compute(); r.Verdict != verdict.Inconclusive || r.Reasons[0].Code != "incomplete" {
		t.Errorf("nothing done: %v, %v", r.Verdict, r.Reasons)
	}
}

// The same readings against limits, twice: the stored results are found again,
// and a difference in any figure or word is noticed.
func TestStoreAndCompare(t *testing.T) {
	m := opening(t)
	m.cycle(1, func(set float64, down bool) float64 { return 0.002 * set })
	m.add(record.KindFinished, record.Finished{Complete: true})
	r := m.compute()
	stored, err := Store(r, 1)
	if err != nil {
		t.Fatal(err)
	}
	m.add(record.KindResults, stored)
	back, kept, err := Stored(m.events)
	if err != nil || kept.Layout != 1 || kept.Version != Version {
		t.Fatal(kept, err)
	}
	if d, err := Compare(back, r); d != "" || err != nil {
		t.Fatalf("the same results differ in %s, %v", d, err)
	}
	data, err := json.Marshal(r)
	if err != nil {
		t.Fatal(err)
	}
	change := func(f func(*Results)) string {
		var other Results
		if err := json.Unmarshal(data, &other); err != nil {
			t.Fatal(err)
		}
		f(&other)
		d, err := Compare(r, other)
		if err != nil {
			t.Fatal(err)
		}
		return d
	}
	for what, f := range map[string]func(*Results){
		"value":   func(r *Results) { *r.Limits[0].Value *= 1 + 3e-9 },
		"outcome": func(r *Results) { r.Limits[1].Outcome = verdict.Fail },
		"verdict": func(r *Results) { r.Verdict = verdict.Accepted },
		"limit":   func(r *Results) { r.Limits = r.Limits[1:] },
		"slope":   func(r *Results) { r.Static.Slope.Value += 1e-6 },
		"null":    func(r *Results) { r.Static.Hysteresis = nil },
		"curve":   func(r *Results) { r.Curve[3].Error += 0.001 },
	} {
		if change(f) == "" {
			t.Errorf("a changed %s was not noticed", what)
		}
	}
	if d := change(func(r *Results) { *r.Limits[0].Value *= 1 + 1e-10 }); d != "" {
		t.Errorf("a last bit was taken for a difference in %s", d)
	}
}

// Drift by year counts from the certificate's date to the run, as a rectangle:
// half a year of 0.04 % a year is 0.02 % of the reading, over sqrt 3 (GUM
// 4.3.7), by hand. A certificate past its due date leaves a run that would be
// accepted inconclusive, with or without an override in the record.
func TestCertificateAges(t *testing.T) {
	made := func(certificate record.Certificate) Results {
		m := opening(t)
		m.cycle(0, func(float64, bool) float64 { return 0 })
		m.add(record.KindFinished, record.Finished{Complete: true})
		m.add(record.KindOpened, record.Opened{})
		for i, e := range m.events {
			switch e.Kind {
			case record.KindOpened:
				m.events[i].Wall = time.Date(2026, 7, 1, 12, 0, 0, 0, time.UTC)
			case record.KindReference:
				again, err := record.NewEvent(e.Line, e.At, e.Kind, record.Reference{Field: quantity.Field{Unit: "mmHg"}, Certificate: certificate})
				if err != nil {
					t.Fatal(err)
				}
				m.events[i] = again
			}
		}
		return m.compute()
	}
	r := made(record.Certificate{CoverageFactor: 2, Uncertainty: "0.04 mmHg", Date: "2026-01-01", Due: "2026-12-31", DriftOfReadingPerYear: "0.04 %", DriftPerYear: "0.1 mmHg"})
	years := 181.5 / 365.2425
	found := 0
	for _, b := range r.limit(t, "accuracy").Budget {
		want := map[string]float64{
			"reference, drift since its date": years * 0.0004 / math.Sqrt(3),
			"reference, drift as a pressure":  years * 0.1 / math.Sqrt(3),
		}
		if u, ok := want[b.Name]; ok {
			found++
			if math.Abs(b.Standard-u) > 1e-12 {
				t.Errorf("%s: %g, want %g", b.Name, b.Standard, u)
			}
		}
	}
	if found != 2 {
		t.Errorf("%d contributions of drift in %+v", found, r.limit(t, "accuracy").Budget)
	}
	for due, want := range map[string]bool{"2026-06-30": true, "2026-07-01": false} {
		r := made(record.Certificate{CoverageFactor: 2, Uncertainty: "0.04 mmHg", Date: "2026-01-01", Due: due})
		said := false
		for _, reason := range r.Reasons {
			said = said || reason.Code == CertificateOverdue
		}
		if said != want || said && r.Verdict == verdict.Accepted {
			t.Errorf("due on %s: %v, %v", due, r.Verdict, r.Reasons)
		}
	}
}
