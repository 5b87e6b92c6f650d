package scpi

import (
	"context"
	"errors"
	"math"
	"reflect"
	"strconv"
	"strings"
	"testing"
	"time"

	"kymobench/bench"
	"kymobench/bench/instruments/asked"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// device answers each question with the next of its answers, the last one for
// ever; "" is silence, and an answer that begins with "~" comes 1.5 s late.
type device struct {
	part    []byte
	answers map[string][]string
	heard   []string
	out     []line.Event
}

const (
	usual = 20 * time.Millisecond
	late  = 1500 * time.Millisecond
)

func (d *device) Receive(at line.Instant, data []byte) {
	for _, c := range data {
		if c != '\n' {
			d.part = append(d.part, c)
			continue
		}
		question := string(d.part)
		d.part = nil
		d.heard = append(d.heard, question)
		answers := d.answers[question]
		if len(answers) == 0 {
			continue
		}
		if len(answers) > 1 {
			d.answers[question] = answers[1:]
		}
		text, isLate := strings.CutPrefix(answers[0], "~")
		after := usual
		if isLate {
			after = late
		}
		if text != "" {
			d.out = append(d.out, line.Event{At: at.Add(after), Data: []byte(text + "\r\n")})
		}
	}
}

func (d *device) Due() (line.Instant, bool) {
	if len(d.out) == 0 {
		return 0, false
	}
	return d.out[0].At, true
}

func (d *device) Emit(line.Instant) []byte {
	data := d.out[0].Data
	d.out = d.out[1:]
	return data
}

const identity = "Hollerbrook,gauge,7,1"

func settings() Settings {
	return Settings{
		Identify: "*IDN?", Identity: identity, Uptime: "SYST:UPT?", Clear: "*CLS", Errors: "SYST:ERR?",
		Within: time.Second, Read: "MEAS:PRES?", Field: quantity.Field{Unit: "mmHg"}, Zero: "CAL:ZERO",
	}
}

func wire(answers map[string][]string) (*device, *line.Memory, *line.Line) {
	if answers["*IDN?"] == nil {
		answers["*IDN?"] = []string{identity}
	}
	d := &device{answers: answers}
	inbox := line.NewMemory(time.Time{})
	inbox.Connect(1, d, line.MemoryOptions{})
	return d, inbox, line.NewEngine(inbox).Open(1, line.Settings{Name: "reference on port 1", Latency: 2 * time.Second})
}

func heard(t *testing.T, d *device, want ...string) {
	t.Helper()
	if !reflect.DeepEqual(d.heard, want) {
		t.Errorf("heard %q\n want %q", d.heard, want)
	}
}

func TestIdentify(t *testing.T) {
	ctx := context.Background()
	d, inbox, l := wire(map[string][]string{"SYST:UPT?": {"3600"}})
	i := New(l, settings())
	if got, err := i.Identify(ctx); err != nil || got != identity || inbox.Now() != line.Instant(usual) {
		t.Errorf("%q, %v at %v", got, err, inbox.Now())
	}
	if up, err := i.Uptime(ctx); err != nil || up != time.Hour {
		t.Errorf("%v, %v", up, err)
	}
	heard(t, d, "*CLS", "*IDN?", "SYST:UPT?")

	_, _, l = wire(map[string][]string{"*IDN?": {"0,\"No error\"", identity}})
	if got, err := New(l, settings()).Identify(ctx); err != nil || got != identity {
		t.Errorf("a late answer to another question came first: %q, %v", got, err)
	}
	_, _, l = wire(map[string][]string{"*IDN?": {identity + "2"}})
	var other *asked.IdentityError
	if got, err := New(l, settings()).Identify(ctx); !errors.As(err, &other) || other.Got != strconv.Quote(identity+"2") || got != "" {
		t.Errorf("somebody else: %q, %v", got, err)
	}
	_, _, l = wire(map[string][]string{"*IDN?": {""}})
	if got, err := New(l, settings()).Identify(ctx); !errors.Is(err, line.ErrDeadline) || got != "" {
		t.Errorf("nobody: %q, %v", got, err)
	}
	_, _, l = wire(map[string][]string{"SYST:UPT?": {"-5"}})
	if up, err := New(l, settings()).Uptime(ctx); err == nil || up != 0 {
		t.Errorf("uptime %v", up)
	}
	none := New(l, Settings{})
	_, uptime := none.Uptime(ctx)
	_, read := none.Read(ctx)
	_, identify := none.Identify(ctx)
	for _, err := range []error{uptime, read, identify, none.Zero(ctx)} {
		if !errors.Is(err, bench.ErrNotStated) {
			t.Errorf("nothing stated: %v", err)
		}
	}
}

// The forms of IEEE 488.2 NR1, NR2, NR3 are read; 133.322387415 Pa is one mmHg
// by definition.
func TestRead(t *testing.T) {
	for text, want := range map[string]float64{"12": 12, "-3": -3, "+100.02": 100.02, "1.5E+02": 150, " 7.5": 7.5} {
		_, _, l := wire(map[string][]string{"MEAS:PRES?": {text}})
		r, err := New(l, settings()).Read(context.Background())
		if err != nil || r.Value.Stated != want || math.Abs(r.Value.SI-want*133.322387415) > 1e-9 || r.Text != text {
			t.Errorf("%q: %+v, %v", text, r, err)
		}
		if r.Sent != 0 || r.At != line.Instant(usual) || r.Middle() != line.Instant(usual/2) {
			t.Errorf("%q: sent %v, came %v, middle %v", text, r.Sent, r.At, r.Middle())
		}
	}
	kPa := settings()
	kPa.Field = quantity.Field{Unit: "kPa", UnitInText: true}
	_, _, l := wire(map[string][]string{"MEAS:PRES?": {"40.0 kPa"}})
	if r, err := New(l, kPa).Read(context.Background()); err != nil || r.Value.SI != 40000 {
		t.Errorf("%+v, %v", r, err)
	}
	kPa.Field.Unit = "furlong"
	if _, err := New(l, kPa).Read(context.Background()); err == nil {
		t.Error("a furlong is a unit")
	}
}

func TestOverRange(t *testing.T) {
	for _, text := range []string{"9.9E37", "-9.9E+37", "+9.91E+37", "OL", " -OL", "Overload", "-----"} {
		d, _, l := wire(map[string][]string{"MEAS:PRES?": {text, "1"}})
		r, err := New(l, settings()).Read(context.Background())
		var over *asked.OverRangeError
		if !errors.As(err, &over) || over.Text != strconv.Quote(text) || r.Text != "" {
			t.Errorf("%q: %+v, %v", text, r, err)
		}
		heard(t, d, "MEAS:PRES?")
	}
}

func TestGarbled(t *testing.T) {
	ctx := context.Background()
	d, _, l := wire(map[string][]string{"MEAS:PRES?": {"1x.5", "1e", "12.5"}})
	if r, err := New(l, settings()).Read(ctx); err != nil || r.Text != "12.5" {
		t.Errorf("%+v, %v", r, err)
	}
	heard(t, d, "MEAS:PRES?", "MEAS:PRES?", "*IDN?", "MEAS:PRES?")

	for _, bad := range []string{"0x10", "1,5", "1_0", "--1", ".", identity, "-"} {
		d, _, l := wire(map[string][]string{"MEAS:PRES?": {bad}})
		r, err := New(l, settings()).Read(ctx)
		var garbled *asked.GarbledError
		if !errors.As(err, &garbled) || !reflect.DeepEqual(garbled.Texts, []string{strconv.Quote(bad), strconv.Quote(bad), strconv.Quote(bad)}) || r != (bench.Reading{}) {
			t.Errorf("%q: %+v, %v", bad, r, err)
		}
		if err == nil || !strings.Contains(err.Error(), strconv.Quote(bad)) || len(d.heard) != 4 {
			t.Errorf("%q: %v after %q", bad, err, d.heard)
		}
	}
}

func TestLate(t *testing.T) {
	ctx := context.Background()
	d, _, l := wire(map[string][]string{"MEAS:PRES?": {"~1", "2"}})
	if r, err := New(l, settings()).Read(ctx); err != nil || r.Text != "2" || l.Stale() != 1 {
		t.Errorf("%+v, %v, %d stale", r, err, l.Stale())
	}
	heard(t, d, "MEAS:PRES?", "*IDN?", "MEAS:PRES?")

	d, _, l = wire(map[string][]string{"MEAS:PRES?": {""}})
	_, err := New(l, settings()).Read(ctx)
	if want := `read reference on port 1: no answer to "MEAS:PRES?" within 1 s`; err == nil || err.Error() != want {
		t.Errorf("%v; want %s", err, want)
	}
	heard(t, d, "MEAS:PRES?", "*IDN?", "MEAS:PRES?")

	// The next reading begins with a line made sure.
	d.answers["MEAS:PRES?"], d.heard = []string{"3"}, nil
	if r, err := New(l, settings()).Read(ctx); err != nil || r.Text != "3" {
		t.Errorf("%+v, %v", r, err)
	}
	heard(t, d, "*IDN?", "MEAS:PRES?")
}

func TestErrorsQuestion(t *testing.T) {
	ctx := context.Background()
	d, _, l := wire(map[string][]string{"SYST:ERR?": {`-221,"Settings conflict"`, `-113,"Undefined header"`, `+0,"No error"`}})
	var refused *RefusedError
	if err := New(l, settings()).Zero(ctx); !errors.As(err, &refused) || len(refused.Errors) != 2 || refused.Command != "CAL:ZERO" {
		t.Errorf("%v", err)
	}
	heard(t, d, "CAL:ZERO", "SYST:ERR?", "SYST:ERR?", "SYST:ERR?")

	_, _, l = wire(map[string][]string{"SYST:ERR?": {`0,"No error"`}})
	if err := New(l, settings()).Zero(ctx); err != nil {
		t.Error(err)
	}
	d, _, l = wire(map[string][]string{"SYST:ERR?": {`-350,"Queue overflow"`}})
	if err := New(l, settings()).Zero(ctx); !errors.Is(err, ErrEndless) || !errors.As(err, &refused) || len(d.heard) != 65 {
		t.Errorf("%v after %d", err, len(d.heard))
	}
	for _, bad := range []string{"", "no error", "0x", "10.5,x"} {
		if clean, err := isNoError(bad); err == nil || clean {
			t.Errorf("%q: %v, %v", bad, clean, err)
		}
	}
}

// Pressures are written as plain decimals; 40 kPa is 300.0246 mmHg by the
// definition of the mmHg.
func TestSource(t *testing.T) {
	ctx := context.Background()
	d, _, l := wire(map[string][]string{"SYST:ERR?": {"0"}})
	s, err := NewSource(l, SourceSettings{Settings: settings(), Set: "SOUR:PRES {mmHg}", Hold: "SOUR:HOLD", Vent: "SOUR:VENT", Lowest: quantity.MmHg(-30), Highest: quantity.MmHg(330)})
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range []quantity.Pressure{quantity.MmHg(300), 40000, quantity.MmHg(-12.5), 0, -1e-9} {
		if err := s.Set(ctx, p); err != nil {
			t.Error(err)
		}
	}
	if err := errors.Join(s.Hold(ctx), s.Vent(ctx)); err != nil {
		t.Error(err)
	}
	s.VentNow()
	var sent []string
	for _, h := range d.heard {
		if h != "SYST:ERR?" {
			sent = append(sent, h)
		}
	}
	want := []string{"SOUR:PRES 300", "SOUR:PRES 300.0246", "SOUR:PRES -12.5", "SOUR:PRES 0", "SOUR:PRES 0", "SOUR:HOLD", "SOUR:VENT", "SOUR:VENT"}
	if !reflect.DeepEqual(sent, want) {
		t.Errorf("%q, want %q", sent, want)
	}
	d.heard = nil
	for _, p := range []quantity.Pressure{quantity.MmHg(330.1), quantity.MmHg(-31), quantity.Pressure(math.NaN()), quantity.Pressure(math.Inf(1))} {
		if err := s.Set(ctx, p); err == nil || len(d.heard) != 0 {
			t.Errorf("%v was set: %q", p, d.heard)
		}
	}
	for unit, want := range map[string]string{"Pa": "29997.5", "kPa": "29.9975", "hPa": "299.975", "bar": "0.299975", "psi": "4.35077"} {
		u, _ := quantity.UnitNamed(unit)
		if got := written(29997.5, u); got != want { // 29997.5/6894.757293168 = 4.350770... (psi)
			t.Errorf("29997.5 Pa in %s is written %s, want %s", unit, got, want)
		}
	}
	for _, bad := range []string{"SOUR:PRES", "SOUR:PRES {V}", "SOUR:PRES {mmHg} {mmHg}", "SOUR:PRES {mmHg", "SOUR:PRES }mmHg{"} {
		if _, err := NewSource(l, SourceSettings{Set: bad, Vent: "V"}); err == nil {
			t.Errorf("%q was taken", bad)
		}
	}
	if _, err := NewSource(l, SourceSettings{Set: "P {mmHg}"}); err == nil {
		t.Error("a source that cannot be vented was taken")
	}
}

func TestValve(t *testing.T) {
	ctx := context.Background()
	quiet := settings()
	quiet.Errors = ""
	d, _, l := wire(map[string][]string{})
	v, err := NewValve(l, ValveSettings{Settings: quiet, Release: "ROUT:OPEN", Shut: "ROUT:CLOS"})
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(v.Release(ctx), v.Shut(ctx)); err != nil {
		t.Error(err)
	}
	v.ReleaseNow()
	heard(t, d, "ROUT:OPEN", "ROUT:CLOS", "ROUT:OPEN")
	if _, err := NewValve(l, ValveSettings{Release: "ROUT:OPEN"}); err == nil {
		t.Error("a valve that cannot be shut was taken")
	}
}

// Whatever a line holds, what is read from it is finite and below overflow, or
// an error that is not empty; and the errors question's reader never takes a
// text without a number.
func FuzzRead(f *testing.F) {
	for _, s := range []string{"1", "9.9E37", "OL", "-----", "1e400", "0,\"No error\""} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		if strings.ContainsAny(text, "\r\n") || strings.HasPrefix(text, "~") {
			return
		}
		_, _, l := wire(map[string][]string{"MEAS:PRES?": {text}})
		r, err := New(l, settings()).Read(context.Background())
		if (err == nil) != (r.Text != "") || math.IsNaN(r.Value.SI) || math.Abs(r.Value.Stated) >= 9.9e37 {
			t.Fatalf("%q: %+v, %v", text, r, err)
		}
		if clean, err := isNoError(text); clean && (err != nil || !strings.Contains(text, "0")) {
			t.Fatalf("%q is no error: %v", text, err)
		}
	})
}
