package layout1

import (
	"encoding/json"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"kymobench/bench/quantity"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
	"kymobench/reports"
)

// The documents of these tests are made from events and Results written by
// hand; their figures are invented and mean nothing.

func number(x float64) *float64 { return &x }

// made is what a report is made of.
type made struct {
	run       string
	events    []record.Event
	results   results.Results
	statement reports.Statement
}

func (m made) head() record.Head {
	return record.Head{Run: m.run, Lines: int64(len(m.events)), Bytes: 184233, Hash: strings.Repeat("7c1e90ab", 8)}
}

func (m made) document(t testing.TB) *reports.Document {
	t.Helper()
	d, err := reports.New(m.events, m.head(), m.results, Number, m.statement)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

func (m made) attachments() []Attachment {
	return []Attachment{
		{m.run + ".record", "Record of the run", []byte(strings.Repeat("one line of a record\n", 4000))},
		{m.run + ".performed.cms", "Signed statement of who performed the run", []byte("not a statement")},
	}
}

// words are what a person or a file may have typed.
type words struct {
	run, department, bench, operator, name, serial, model, lot, title string
	simulated                                                         bool
}

func plainWords() words {
	return words{
		run: "20260102-030405-000042", department: "Clinical Engineering", bench: "Bench 2", operator: "A. Example", name: "A. Example",
		serial: "KY-000123", model: "Model A", lot: "2026-07", title: "Incoming inspection", simulated: true,
	}
}

func longWords() words {
	return words{
		run: "20260102-030405-000043", department: "Oddělení zdravotnické techniky, Krajská nemocnice Ústí – západní křídlo",
		bench: "Prüfplatz für Druckmessumformer Größe 3, Übergabestelle Süd-Ost II", operator: "Žofie Příkladová-Šťastná ze Středních Čech nad Labem a Vltavou",
		name: "Žofie Příkladová-Šťastná ze Středních Čech nad Labem a Vltavou 1", serial: strings.Repeat("SN0123456789ABCD", 4),
		model: "Μορφοτροπέας πίεσης αίματος μίας χρήσης, ελληνικό υπόδειγμα Ω-64", lot: strings.Repeat("L", 64),
		title: "Eingangsprüfung für Druckaufnehmer der invasiven Blutdruckmessung",
	}
}

type eventList struct {
	t    testing.TB
	list []record.Event
	at   time.Time
}

func (l *eventList) add(kind string, payload any) {
	l.t.Helper()
	e, err := record.NewEvent(int64(len(l.list)+1), 0, kind, payload)
	if err != nil {
		l.t.Fatal(err)
	}
	l.at = l.at.Add(7 * time.Second)
	e.Wall = l.at
	l.list = append(l.list, e)
}

// events are the lines that a report reads; readings and samples are left out.
func events(t testing.TB, w words, stop string, fault *record.Fault) []record.Event {
	l := &eventList{t: t, at: time.Date(2026, 1, 2, 3, 4, 5, 0, time.UTC)}
	sum := strings.Repeat("0123456789abcdef", 4)
	l.add(record.KindOpened, record.Opened{
		Schema: record.Schema, Run: w.run, Counter: 42, Program: "kymobench 0.1.0", Department: w.department, Bench: w.bench,
		Operator: w.operator, Simulated: w.simulated, Seed: 1,
	})
	l.add(record.KindProcedure, record.File{Name: "incoming.toml", ID: "incoming", Revision: 1, Title: w.title, SHA256: sum, Text: "schema = \"kymobench/procedure/1\"\n"})
	l.add(record.KindBenchFile, record.File{Name: "bench.toml", SHA256: sum, Text: "x = 1\n"})
	l.add(record.KindReference, record.Reference{
		Instrument: record.Instrument{Role: "reference", Name: "Reference manometer", Family: "scpi", Port: "memory", Identity: "SIMULATED,REFERENCE,R-17,1.0", Uptime: "1h0m0s"},
		Resolution: "0.01 mmHg", ResponseTime: "20 ms", Height: "0 mm",
		Certificate: record.Certificate{Number: "C-2025-118", Laboratory: "Example laboratory", Date: "2025-09-01", Due: "2026-09-01", CoverageFactor: 2, Uncertainty: "0.05 mmHg", UncertaintyOfReading: "0.02 %"},
	})
	l.add(record.KindUUT, record.UUT{
		SerialNumber: w.serial, Model: w.model, Lot: w.lot, Is: "bare transducer", Field: quantity.Field{Unit: "uV/V"}, Resolution: "0.01 uV/V", Excitation: "5 V",
		NominalSensitivity: "5 uV/V/mmHg", SamplePeriod: "1 ms", SamplePeriodTolerance: "0.01 %", Height: "0 mm", HeightUncertainty: "1 mm",
		Fluid: "water, degassed", FluidDensity: 998.2,
	})
	l.add(record.KindReadout, record.Readout{
		Instrument:  record.Instrument{Role: "readout", Name: "Bridge readout", Family: "lines", Port: "memory"},
		Certificate: "C-2025-119", Due: "2025-12-31", CoverageFactor: 2, GainUncertainty: "0.05 %", ZeroUncertainty: "0.05 uV/V",
	})
	l.add(record.KindSource, record.Instrument{Role: "pressure source", Name: "Pressure controller", Family: "scpi", Port: "memory", Identity: "SIMULATED,SOURCE,P-4,1.0"})
	l.add(record.KindValve, record.Valve{Instrument: record.Instrument{Role: "valve", Name: "Fast valve", Family: "scpi", Port: "memory", Identity: "SIMULATED,VALVE,V-1,1.0"}, EdgeTime: "2 ms", EdgeTimeTolerance: "20 %"})
	l.add(record.KindWarnings, record.Warnings{Lines: []string{"one", "two"}, Acknowledged: "yes"})
	for i, kind := range []string{"warm_up", "zero", "exercise", "leak", "static", "step"} {
		l.add(record.KindStage, record.Stage{Number: i + 1, Kind: kind, Phase: "begin"})
		if kind == stop {
			l.add(record.KindStage, record.Stage{Number: i + 1, Kind: kind, Phase: "abandoned", Why: fault.Text})
			break
		}
		if kind == "zero" {
			l.add(record.KindZeroing, record.Zeroing{Role: "reference", How: "device"})
			l.add(record.KindZeroing, record.Zeroing{Role: "uut", How: "arithmetic"})
		}
		l.add(record.KindStage, record.Stage{Number: i + 1, Kind: kind, Phase: "end"})
	}
	l.add(record.KindReservation, record.Reservation{Code: "lines_refused", Text: "3 lines of the UUT were refused as no number and not used"})
	if fault != nil {
		l.add(record.KindFault, *fault)
		l.add(record.KindFinished, record.Finished{Code: fault.Code, Text: fault.Text})
	} else {
		l.add(record.KindFinished, record.Finished{Complete: true})
	}
	l.add(record.KindResults, record.StoredResults{Version: 1, Layout: Number, JSON: json.RawMessage("{}")})
	l.add(record.KindClosed, record.Closed{Lines: int64(len(l.list) + 1)})
	return l.list
}

func statement(w words, lines int) reports.Statement {
	return reports.Statement{
		Schema: reports.StatementSchema, Run: w.run, Lines: int64(lines), Bytes: 184233, Head: strings.Repeat("7c1e90ab", 8), Role: reports.Performed,
		Name: w.name, Meaning: "I carried out this run and vouch for what I typed.", Time: "2026-01-02T04:21:09+01:00",
	}
}

func budgetLines(contributions ...float64) []results.BudgetLine {
	names := []string{"reference, share of reading", "reference, at the set pressure", "reference, drift since its date", "readout, gain", "noise of the point", "noise of the zero", "reference, resolution", "UUT, resolution", "settling left: slope x delay"}
	var out []results.BudgetLine
	for i, c := range contributions {
		l := results.BudgetLine{Name: names[i%len(names)], Source: "certificate", Distribution: "normal", Standard: c / 2, Unit: "mmHg", Sensitivity: 2, Contribution: c}
		if i == 4 {
			l.Source, l.Distribution, l.DoF = "this run", "t", number(14)
		}
		out = append(out, l)
	}
	return out
}

// text makes a type of another package from its own text form.
func limit(t testing.TB, name string, value, expanded *float64, unit string, low, high *float64, outcome string, risk *float64) results.Limit {
	l := results.Limit{
		Name: name, Value: value, Unit: unit, Expanded: expanded, Bounds: results.Bounds{Low: low, High: high}, FalseAccept: risk,
		Rule: "four_outcome", Resolution: 0.01, Origin: "Made up for this test, edition 1, clause 4.2", Known: "from memory",
	}
	if err := l.Outcome.UnmarshalText([]byte(outcome)); err != nil {
		t.Fatal(err)
	}
	if expanded != nil {
		u := *expanded / 2.05
		l.GuardBand, l.Standard, l.Coverage, l.DoF = *expanded, &u, number(2.05), number(48.2)
		l.Budget = budgetLines(u*0.6, u*0.55, u*0.3, u*0.4, u*0.28, u*0.1, u*0.05, u*0.02, u*0.01)
	}
	return l
}

// trace is a second-order line's answer to a release, with a little noise.
func trace(number int, fn, zeta, height, period float64, n int, fit bool) results.StepTrace {
	tr := results.StepTrace{Number: number, Start: -0.05, Period: period, Measured: []float64{}, Fitted: []float64{}}
	w := 2 * math.Pi * fn
	for i := range n {
		t := tr.Start + float64(i)*period
		y := height
		if t > 0 {
			wd := w * math.Sqrt(1-zeta*zeta)
			y = height * math.Exp(-zeta*w*t) * (math.Cos(wd*t) + zeta/math.Sqrt(1-zeta*zeta)*math.Sin(wd*t))
		}
		noise := 0.25 * math.Sin(float64(i*i%97)+float64(number))
		tr.Measured = append(tr.Measured, y+noise)
		if fit {
			tr.Fitted = append(tr.Fitted, y)
		}
	}
	return tr
}

func steps(fn, zeta float64, count int, missing ...int) (*results.Step, []results.StepTrace) {
	s := &results.Step{Unit: "mmHg", SampleRate: 1000, Reservations: []results.Reason{{Code: "quantised", Text: "the readings are coarse against the noise"}}}
	var traces []results.StepTrace
	estimate := func(v, u float64) *results.Estimate {
		return &results.Estimate{Value: v, Standard: u, Interval: [2]float64{v - 2*u, v + 2.1*u}}
	}
	for i := 1; i <= count; i++ {
		determined := true
		for _, m := range missing {
			determined = determined && m != i
		}
		f := fn * (1 + 0.004*math.Sin(float64(3*i)))
		figure := results.StepFigure{At: 0.5, Determined: determined, Reasons: []string{}, Height: number(-100.2), Noise: number(0.183)}
		if determined {
			figure.Frequency, figure.Damping = estimate(f, 0.004*fn), estimate(zeta, 0.006)
		} else {
			figure.Reasons = []string{"clipped", "uncertainty_too_large"}
		}
		s.Steps = append(s.Steps, figure)
		traces = append(traces, trace(i, f, zeta, 100, 0.001, 700, determined))
	}
	s.Combined = results.Combined{Determined: true, Reasons: []string{}, Frequency: estimate(fn, 0.002*fn), Damping: estimate(zeta, 0.003)}
	follow(s, fn, zeta)
	return s, traces
}

func curve(scale float64, cycles int) []results.ErrorPoint {
	var out []results.ErrorPoint
	for cycle := 1; cycle <= cycles; cycle++ {
		for i, set := range []float64{0, 50, 100, 200, 300, 200, 100, 50, 0} {
			leg := "up"
			if i > 4 {
				leg = "down"
			}
			allowed := 1 + 0.01*set
			if set > 50 {
				allowed = 0.03 * set
			}
			e := scale * (0.0021*set - 0.000004*set*set)
			if leg == "down" {
				e += scale * 0.2 * math.Sin(math.Pi*set/300)
			}
			out = append(out, results.ErrorPoint{
				Set: set, Pressure: set + 0.31, Error: e + 0.01*float64(cycle), Expanded: 0.06 + 0.0004*set,
				Low: number(-allowed), High: number(allowed), Guard: 0.06 + 0.0004*set, Cycle: cycle, Leg: leg,
			})
		}
	}
	return out
}

func static(cycles int) *results.Static {
	at := 300.0
	s := &results.Static{
		Unit: "mmHg", Readings: 9 * cycles, Cycles: cycles,
		Intercept: &results.Figure{Value: 1.2331, Standard: 0.0412}, Slope: &results.Figure{Value: 1.00213, Standard: 0.00031},
		ResidualSD: number(0.0812), Covariance: number(-1e-6), Sensitivity: &results.Sensitivity{Value: 5.0107, Unit: "uV/V/mmHg", Standard: 0.0016},
		ZeroOffset: &results.Value{Value: 1.25}, ZeroReturn: []*float64{number(-0.0213), nil},
		Linearity:  results.Linearity{Independent: number(0.12), Terminal: number(0.2), ZeroBased: number(0.15), LeastSquares: number(0.13)},
		Hysteresis: &results.Located{Largest: 0.213, At: 200}, LargestError: &results.ErrorAt{Value: 1.9, At: &at, Cycle: 1, Leg: "up"},
		ErrorAfterZero: &results.ErrorAt{Value: 0.61, At: &at, Cycle: 1, Leg: "up"},
		Reservations:   []results.Reason{{Code: "one_cycle", Text: "one cycle only: nothing is known of repeatability"}},
	}
	if cycles > 1 {
		dof := 8 * (cycles - 1)
		s.Repeatability = results.Repeatability{LargestRange: number(0.07), PooledSD: number(0.021), DoF: &dof}
	}
	return s
}

func set(t testing.TB, r *results.Results, verdict string) {
	if err := r.Verdict.UnmarshalText([]byte(verdict)); err != nil {
		t.Fatal(err)
	}
}

func accepted(t testing.TB) made {
	w := plainWords()
	e := events(t, w, "", nil)
	s, tr := steps(41.3, 0.21, 5)
	accuracy := limit(t, "accuracy", number(0.61), number(0.18), "mmHg", number(-9), number(9), "pass", number(1e-12))
	accuracy.At = number(300)
	r := results.Results{
		Limits: []results.Limit{
			limit(t, "zero_offset", number(1.2512), number(0.1132), "mmHg", number(-25), number(25), "pass", number(0)),
			limit(t, "sensitivity", number(5.0107), number(0.0124), "uV/V/mmHg", number(4.95), number(5.05), "pass", number(0.00031)),
			accuracy,
			limit(t, "hysteresis", number(-0.213), number(0.091), "mmHg", number(-1), number(1), "pass", number(0)),
			limit(t, "natural_frequency", number(41.3), number(0.17), "Hz", number(24), nil, "pass", number(0)),
			limit(t, "damping_ratio", number(0.2104), number(0.0061), "1", number(0.15), number(1.1), "pass", number(0)),
		},
		Static: static(1), Step: s, Traces: tr, Curve: curve(1, 1),
		Leak: &results.Leak{Set: 300, Rate: number(0.0071), Expanded: number(0.0032), Highest: 0.1, Seconds: 30, Within: true},
	}
	set(t, &r, "accepted")
	return made{w.run, e, r, statement(w, len(e))}
}

func rejected(t testing.TB) made {
	w := longWords()
	e := events(t, w, "", nil)
	s, tr := steps(11.24, 0.34, 9, 2, 5)
	accuracy := limit(t, "accuracy", number(-3.61), number(0.18), "mmHg", number(-9), number(9), "pass", number(1e-12))
	accuracy.At, accuracy.Reason = number(200), "the reading at 200 mmHg decides, though the error at 300 mmHg is larger"
	r := results.Results{
		Limits: []results.Limit{
			limit(t, "zero_offset", number(24.9), number(0.1132), "mmHg", number(-25), number(25), "conditional_pass", number(0.034)),
			limit(t, "sensitivity", number(5.0107), number(0.0124), "uV/V/mmHg", number(4.95), number(5.05), "pass", number(0.00031)),
			accuracy,
			limit(t, "hysteresis", number(1.02), number(0.091), "mmHg", number(-1), number(1), "conditional_fail", nil),
			limit(t, "natural_frequency", number(11.243), number(0.31), "Hz", number(24), nil, "fail", nil),
			limit(t, "damping_ratio", number(0.3404), number(0.0061), "1", number(0.15), number(1.1), "pass", number(0)),
		},
		Reasons: []results.Reason{{Code: "natural_frequency", Text: "natural_frequency 11.24 +- 0.31 Hz against at least 24: fail"}, {Code: "hysteresis", Text: "hysteresis 1.02 +- 0.091 mmHg against -1 to 1: conditional_fail"}},
		Static:  static(3), Step: s, Traces: tr, Curve: curve(-9, 3),
		Leak: &results.Leak{Set: 300, Rate: number(0.0071), Expanded: number(0.0032), Highest: 0.1, Seconds: 30, Within: true},
	}
	set(t, &r, "rejected")
	return made{w.run, e, r, statement(w, len(e))}
}

// leaking is a run that stopped at the leak test, on a bench that is real.
func leaking(t testing.TB) made {
	w := plainWords()
	w.simulated, w.operator = false, "Jörg Beispiel"
	text := "the pressure falls by 0.412 mmHg/s at 300 mmHg, more than the 0.1 mmHg/s allowed; without a bench check rig and UUT cannot be told apart"
	e := events(t, w, "leak", &record.Fault{Code: "leak", Text: text})
	r := results.Results{
		Limits:  []results.Limit{limit(t, "zero_offset", number(1.2512), number(0.1132), "mmHg", number(-25), number(25), "pass", number(0))},
		Reasons: []results.Reason{{Code: "leak", Text: text}},
		Leak:    &results.Leak{Set: 300, Rate: number(0.412), Expanded: number(0.013), Highest: 0.1, Seconds: 30, Reason: text},
	}
	for _, l := range []struct {
		name, unit, why string
		low, high       *float64
	}{
		{"sensitivity", "uV/V/mmHg", "no set pressure was read", number(4.95), number(5.05)},
		{"accuracy", "mmHg", "no set pressure was read", nil, nil},
		{"hysteresis", "mmHg", "no set pressure was read in both legs", number(-1), number(1)},
		{"natural_frequency", "Hz", "no step was captured", number(24), nil},
		{"damping_ratio", "1", "no step was captured", number(0.15), number(1.1)},
	} {
		u := limit(t, l.name, nil, nil, l.unit, l.low, l.high, "undetermined", nil)
		u.Reason = l.why
		r.Limits = append(r.Limits, u)
	}
	set(t, &r, "inconclusive")
	return made{w.run, e, r, statement(w, len(e))}
}

// kinds are the three test documents.
func kinds(t testing.TB) map[string]made {
	return map[string]made{"accepted": accepted(t), "rejected": rejected(t), "leaking": leaking(t)}
}

func render(t testing.TB, m made) []byte {
	t.Helper()
	b, err := Render(m.document(t), m.attachments())
	if err != nil {
		t.Fatal(fmt.Errorf("%s: %w", m.run, err))
	}
	return b
}
