package setup

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"
	"unicode/utf8"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/simulated"
	"kymobench/bench/tomlfile"
)

// change puts to in the place of from, which has to stand in the file, and
// tells where the mark « in to is: that is where the refusal belongs.
func change(t *testing.T, file, from, to string) (changed string, line, column int) {
	t.Helper()
	before, after, ok := strings.Cut(file, from)
	if !ok {
		t.Fatalf("the file has no %q", from)
	}
	head, tail, ok := strings.Cut(before+to+after, "«")
	if !ok {
		t.Fatalf("%q has no mark", to)
	}
	start := strings.LastIndex(head, "\n") + 1
	return head + tail, 1 + strings.Count(head, "\n"), 1 + utf8.RuneCountInString(head[start:])
}

// The words were read by eye, once, for what an operator is to make of them.
func TestRefusals(t *testing.T) {
	good := simulatedFile(t, 1)
	corrections := "\n[[reference.certificate.correction]]\n"
	firstCorrection := good[strings.Index(good, corrections):]
	firstCorrection = firstCorrection[:strings.Index(firstCorrection[1:], corrections)+1]
	uncertainties := good[strings.Index(good, "\nuncertainty = "):]
	uncertainties = uncertainties[:strings.Index(uncertainties, "\n\n")+1]
	resolution := "resolution = \"0.01 mmHg\"\n"
	for _, c := range []struct{ from, to, text, hint string }{
		{`schema = "kymobench/bench/1"`, `schema = «"kymobench/bench/2"`, `"kymobench/bench/2" is no schema`, `did you mean "kymobench/bench/1"?`},
		{`department = "Clinical engineering, Hollerbrook Infirmary"`, `department = «""`, `key "department" is empty`, ""},
		{`bench = "Pressure bench 2"`, `bench = «"` + strings.Repeat("é", 65) + `"`, `key "bench" has 65 characters, more than 64`, ""},
		{`keys = "trust"`, `keys = «"../trust"`, `"../trust" is no folder beside this file`, ""},
		{`keys = "trust"`, `keys = «"/trust"`, `"/trust" is no folder beside this file`, ""},
		{`[pressure]`, `[«presure]`, `unknown table "presure"`, `did you mean "pressure"?`},
		{`highest = "330 mmHg"`, `highest = «330`, `key "highest" takes text in quotes, not a whole number`, `write it in quotes, with its unit if it has one: "330 mmHg"`},
		{`highest = "330 mmHg"`, `highest = «"330 s"`, `"330 s": s is a unit of something else`, ""},
		{`highest = "330 mmHg"`, `highest = «"1e308 kPa"`, `a number that is too large`, ""},
		{`highest = "330 mmHg"`, `highest = «"900 mmHg"`, `the highest pressure is above the reference's range: nobody would see it`, ""},
		{`lowest = "-30 mmHg"`, `lowest = «"5 mmHg"`, `lowest to highest does not hold atmosphere, where every run begins`, ""},
		{`lowest = "-30 mmHg"`, `lowest = «"-300 mmHg"`, `the lowest pressure is below the reference's range: nobody would see it`, ""},
		{`volume = "60 mL"`, `volume = «"60 ml"`, `"60 ml" is no volume like "60 mL"`, ""},
		{`volume = "60 mL"`, "own_leak = «\"2 mmHg\"", `"2 mmHg" is no loss of pressure like "0.002 mmHg/s"`, ""},
		{`volume = "60 mL"`, "own_leak = «\"-2 mmHg/s\"", `"-2 mmHg/s" is no loss of pressure like "0.002 mmHg/s"`, ""},
		{`volume = "60 mL"`, "volume = «\"60 mL\"\nown_leak = \"0.002 mmHg/s\"", "the bench's own leak and its standard uncertainty are stated together", ""},
		{`volume = "60 mL"`, `volume = «"-60 mL"`, `"-60 mL" is no volume like "60 mL"`, ""},
		{"[pressure]\nhighest = \"330 mmHg\"\n", "[«pressure]\n", `key "highest" is missing in [pressure]`, ""},

		{`name = "reference manometer"`, `name = «" reference"`, `key "name" begins or ends with a blank`, ""},
		{`family = "scpi"`, `family = «"scip"`, `"scip" is no family`, `did you mean "scpi"?`},
		{`baud = 9600`, `baud = «0`, `no serial port has that rate`, "usual rates are 9600 and 115200"},
		{`identify = "*IDN?"`, `identify = «""`, `key "identify" is empty`, ""},
		{`uptime = "SYST:UPT?"`, `uptime = «""`, `key "uptime" is empty`, ""},
		{`clear = "*CLS"`, `«vent = "*CLS"`, `a reference of family scpi has no key "vent"`, ""},
		{`answer_within = "1 s"`, `answer_within = «"0 s"`, `an answer is waited for between 1 ms and 60 s`, ""},
		{`unit = "mmHg"`, `unit = «"uV"`, `"uV" is no unit of the quantity wanted here`, ""},
		{resolution, `resolution = «"0 mmHg"` + "\n", `resolution is not above zero`, ""},
		{`range_low = "`, `range_low = «"1000 mmHg" # "`, `the lowest pressure of the range is not below the highest`, ""},
		{uncertainties, "\nuncertainty = «\"0 mmHg\"\nuncertainty_of_reading = \"0 %\"\n", `a certificate without any uncertainty`, ""},
		{`width = 8`, "separator = \";\"\ncolumn = «-1", `columns are counted from 0 to 64`, ""},
		{`response_time = "0.3 s"`, "response_time = \"0.3 s\"\nlag = «\"-1 s\"", `lag is below zero`, ""},
		{`response_time = "0.3 s"`, "response_time = «\"0.3 s\"\nlag = \"0.1 s\"", "the reference's lag and its standard uncertainty are stated together", ""},
		{`response_time = "0.3 s"`, `response_time = «"-0.3 s"`, `response_time is below zero`, ""},
		{`response_time_tolerance = "0.1 s"`, `response_time_tolerance = «"-0.1 s"`, `response_time_tolerance is below zero`, ""},
		{`date = "2026-03-02"`, `date = «2026-03-02`, `key "date" takes text in quotes, not a date or time`, `write the date in quotes: date = "2026-03-02"`},
		{`date = "2026-03-02"`, `date = «"2 March 2026"`, `"2 March 2026" is no date like 2026-03-02`, ""},
		{`number = "HI-2026-0117"`, "number = \"HI-2026-0117\"\ndrift_per_year = «\"0.1 %\"", `"0.1 %": % is a unit of something else`, ""},
		{`number = "HI-2026-0117"`, "number = \"HI-2026-0117\"\ndrift_per_year = «\"-0.1 mmHg\"", `drift_per_year is below zero`, ""},
		{`number = "HI-2026-0117"`, "number = \"HI-2026-0117\"\ndrift_of_reading = \"0.01 %\"\ndrift_of_reading_per_year = «\"0.01 %\"",
			`the drift of the reading is stated twice, since the date and by year`, "leave one of them out"},
		{`number = "HI-2026-0117"`, "number = \"HI-2026-0117\"\ntemperature_of_reading = «\"1 mmHg\"", `"1 mmHg": mmHg is a unit of something else`, ""},
		{`due = "2027-03-01"`, `due = «"2026-03-02"`, `the certificate is due before its date`, ""},
		{`coverage_factor = 2.0`, `coverage_factor = «0.9`, `a coverage factor is 1 to 4, usually 2`, ""},
		{corrections, "\n[[reference.certificate.correction]]\nat = \"1000 mmHg\"\ncorrection = \"0 mmHg\"\n" +
			strings.Replace(firstCorrection, `at = "`, `at = «"`, 1) + corrections, `corrections stand in the order of rising pressure`, ""},

		{`mode = "free-running"`, `mode = «"askt"`, `"askt" is no mode`, `it is one of: asked, free-running`},
		{`baud = 230400`, `baud = «-1`, `no serial port has that rate`, "usual rates are 9600 and 115200"},
		{`unit = "uV/V"`, `unit = «"uv/v"`, `"uv/v" is no unit of pressure, voltage or bridge output, such as mmHg, kPa, mV or uV/V`, ""},
		{`width = 8`, `width = «-8`, `a number has 1 to 32 characters`, "leave width out if it varies"},
		{`width = 8`, "width = 8\ncolumn = «1", `a column without a separator`, `separator = ","`},
		{`sample_period = "1 ms"`, `sample_period = «"0 ms"`, `sample_period is not above zero`, ""},
		{`sample_period = "1 ms"`, `sample_period = «"0.5 ms"`, `2000 samples a second of 10 bytes do not fit 230400 baud: 1843 at most, at 80 % of the line`, "a higher baud rate or a longer sample period"},
		{`sample_period_tolerance = "`, `sample_period_tolerance = «"-`, `sample_period_tolerance is below zero`, ""},
		{`nominal_sensitivity = "5 uV/V/mmHg"`, `nominal_sensitivity = «"5 uV/V"`, `"5 uV/V": uV/V is a unit of something else`, ""},
		{"nominal_sensitivity = \"5 uV/V/mmHg\"\nheight = \"0 mm\"", "nominal_sensitivity = «\"-5 uV/V/mmHg\"\nheight = \"0 mm\"", `nominal_sensitivity is not above zero`, ""},
		{"height = \"0 mm\"\nheight_uncertainty = \"1 mm\"\nfluid = \"water\"", "height = «\"10 mm\"\nheight_uncertainty = \"1 mm\"", `the UUT is not level with the reference, and no fluid is named`, `fluid = "water"`},
		{`fluid = "water"`, `fluid = «"blood"`, `"blood" is no fluid`, `it is one of: water, saline, air`},
		{`delay = "9 ms"`, `delay = «"-9 ms"`, `delay is below zero`, ""},

		{`gain_uncertainty = "`, `gain_uncertainty = «"-`, `gain_uncertainty is below zero`, ""},
		{`gain_uncertainty = "`, "excitation_uncertainty = «\"-0.1 %\"\ngain_uncertainty = \"", `excitation_uncertainty is below zero`, ""},
		{"filters = []", "filters = [«\"low_pass 200\"]", `"200": a number, a blank and a unit are expected, as in "300 mmHg"`, ""},
		{"filters = []", "filters = [\"delay 2 ms\", «\"notch 50 Hz\"]", `"notch 50 Hz": there is no filter "notch"; there are low_pass, average and delay`, ""},
		{`port = "readout"`, `port = «"uut"`, `the port of the readout is that of the uut`, "one port, one instrument"},

		{`set = "SOUR:PRES {mmHg}"`, `set = «"SOUR:PRES {mmHg} {kPa}"`, `"SOUR:PRES {mmHg} {kPa}" needs one place for the pressure, as in "SOUR:PRES {mmHg}"`, ""},
		{`set = "SOUR:PRES {mmHg}"`, `set = «"SOUR:PRES {psig}"`, `"psig" in "SOUR:PRES {psig}" is no unit of pressure`, ""},
		{`vent = "SOUR:VENT"`, `vent = «""`, `key "vent" is empty`, ""},
		{`shut = "ROUT:CLOS"`, `shut = «"ROUT:OPEN"`, `the valve is shut by the command that opens it`, ""},
		{`edge_time = "2 ms"`, `edge_time = «"-2 ms"`, `edge_time is below zero`, ""},
		{`port = "source"`, `port = «"reference"`, `the port of the source is that of the reference`, "one port, one instrument"},
	} {
		changed, line, column := change(t, good, c.from, c.to)
		refused(t, changed, fmt.Sprintf("bench.toml:%d:%d: %s", line, column, c.text), c.hint)
	}
}

func refused(t *testing.T, file, want, hint string) {
	t.Helper()
	f, err := Load("bench.toml", []byte(file))
	var e *tomlfile.Error
	if !errors.As(err, &e) || f != nil {
		t.Errorf("not refused: want %s", want)
		return
	}
	if strings.HasSuffix(want, `has no key "vent"`) && strings.HasPrefix(e.Hint, "it is one of: name, zero,") {
		hint = e.Hint // a long list
	}
	if e.Error() != want || e.Hint != hint {
		t.Errorf("said %s\nwant %s\nhint %s\nwant %s", e, want, e.Hint, hint)
	}
}

// A table that is left out is missed where the file begins.
func TestMissingTables(t *testing.T) {
	good := simulatedFile(t, 1)
	cut := func(header string) string {
		before, rest, _ := strings.Cut(good, "\n["+header+"]\n")
		if i := strings.Index(rest, "\n["); i >= 0 {
			return before + rest[i:]
		}
		return before
	}
	for _, name := range []string{"pressure", "uut", "source", "valve"} {
		refused(t, cut(name), fmt.Sprintf("bench.toml:1:1: key %q is missing in the file", name), "a table ["+name+"]")
	}
	line := 1 + strings.Count(good[:strings.Index(good, `unit = "uV/V"`)], "\n")
	refused(t, cut("readout"), fmt.Sprintf("bench.toml:%d:8: a UUT that puts out a voltage or a ratio needs a table [readout]: its error is not the UUT's", line), "")
}

// A UUT of another kind: pressure without a readout, millivolts with an
// excitation, a readout that cannot be asked.
func TestOtherUUTs(t *testing.T) {
	good := simulatedFile(t, 1)
	replace := func(file string, pairs ...string) string {
		for i := 0; i < len(pairs); i += 2 {
			if !strings.Contains(file, pairs[i]) {
				t.Fatalf("the file has no %q", pairs[i])
			}
			file = strings.Replace(file, pairs[i], pairs[i+1], 1)
		}
		return file
	}
	millivolts := replace(good, `unit = "uV/V"`, `unit = "mV"`, `resolution = "0.01 uV/V"`, `resolution = "0.1 uV"`,
		`zero_uncertainty = "0.4 uV/V"`, `zero_uncertainty = "2 uV"`)
	if f, err := Load("bench.toml", []byte(millivolts)); err != nil || f.UUT.Excitation != "5 V" {
		t.Errorf("millivolts: %v", err)
	}
	without := replace(millivolts, "excitation = \"5 V\"\n", "")
	at := 1 + strings.Count(without[:strings.Index(without, "[uut]")], "\n")
	refused(t, without, fmt.Sprintf(`bench.toml:%d:2: key "excitation" is missing in [uut]`, at), "")

	mute := replace(good, "family = \"scpi\"\nport = \"readout\"\nidentify = \"*IDN?\"\n", "")
	from := strings.Index(mute, "[readout]") + strings.Index(mute[strings.Index(mute, "[readout]"):], "identity = ")
	to := from + strings.Index(mute[from:], "gain_uncertainty")
	mute = mute[:from] + mute[to:]
	if f, err := Load("bench.toml", []byte(mute)); err != nil || f.Readout == nil || f.Readout.Port != "" || f.Readout.Name != "bridge converter" {
		t.Errorf("a readout that cannot be asked: %v", err)
	}
	asked, line, column := change(t, mute, "gain_uncertainty", "uptime = «\"UPT?\"\ngain_uncertainty")
	refused(t, asked, fmt.Sprintf("bench.toml:%d:%d: uptime of a readout that has no port", line, column), "state its port, or leave this out")

	begin, end := strings.Index(good, "[readout]"), strings.Index(good, "[source]")
	pressure := replace(good[:begin]+good[end:], `unit = "uV/V"`, `unit = "mmHg"`, `resolution = "0.01 uV/V"`, `resolution = "0.1 mmHg"`)
	if f, err := Load("bench.toml", []byte(pressure)); err != nil || f.Readout != nil {
		t.Errorf("a UUT that puts out pressure: %v", err)
	}
	both := replace(good, `unit = "uV/V"`, `unit = "mmHg"`, `resolution = "0.01 uV/V"`, `resolution = "0.1 mmHg"`)
	at = 1 + strings.Count(both[:strings.Index(both, "[readout]")], "\n")
	refused(t, both, fmt.Sprintf("bench.toml:%d:2: a UUT that puts out pressure has no readout of the bench's", at), "leave out [readout]")
}

// memory is an Opener on the simulated bench.
type memory struct {
	inbox  *line.Memory
	bench  *simulated.Bench
	lacks  string
	opened []string
	closed int
}

func (m *memory) Inbox() line.Inbox { return m.inbox }

func (m *memory) Connect(id line.PortID, name string, mode PortMode) error {
	if name == m.lacks {
		return errors.New("no such port")
	}
	m.opened = append(m.opened, fmt.Sprintf("%s %d", name, mode.Baud))
	m.inbox.Connect(id, m.bench.Machine(name), line.MemoryOptions{})
	return nil
}

func (m *memory) Close() error {
	m.closed++
	return nil
}

// The opened rig talks to the simulated instruments: everybody says who it is,
// the reference reads, and the emergency vent brings a set pressure down.
func TestOpen(t *testing.T) {
	b, err := simulated.New(simulated.Settings{Seed: 3})
	if err != nil {
		t.Fatal(err)
	}
	f, err := Load("bench.toml", b.BenchFile(nil))
	if err != nil {
		t.Fatal(err)
	}
	m := &memory{inbox: line.NewMemory(time.Time{}), bench: b}
	rig, err := f.Open(m)
	if err != nil {
		t.Fatal(err)
	}
	if got := strings.Join(m.opened, ", "); got != "reference 9600, uut 230400, readout 9600, source 9600, valve 9600" {
		t.Errorf("opened %s", got)
	}
	ctx := context.Background()
	for role, who := range map[string]interface {
		Identify(context.Context) (string, error)
	}{"reference": rig.Reference, "readout": rig.UUTs[0].Readout, "source": rig.Source, "valve": rig.Valve} {
		if _, err := who.Identify(ctx); err != nil {
			t.Errorf("%s: %v", role, err)
		}
	}
	frames := 0
	rig.UUTs[0].Stream.Watch(func(r *bench.Reading, err error) error {
		if err == nil && r.Text != "" {
			frames++
		}
		return nil
	})
	wait := func(d time.Duration) {
		if err := rig.Engine.Wait(ctx, rig.Engine.Now().Add(d), func() bool { return false }); err != nil && !errors.Is(err, line.ErrDeadline) {
			t.Fatal(err)
		}
	}
	reads := func() float64 {
		r, err := rig.Reference.Read(ctx)
		if err != nil {
			t.Fatal(err)
		}
		return r.Value.Stated
	}
	if err := errors.Join(rig.Valve.Shut(ctx), rig.Source.Set(ctx, f.Highest*3/10)); err != nil {
		t.Fatal(err)
	}
	wait(20 * time.Second)
	if p := reads(); p < 90 || p > 110 {
		t.Errorf("99 mmHg were asked for, the reference reads %v", p)
	}
	if frames < 15000 {
		t.Errorf("%d frames of the UUT in 20 s at 1 kHz", frames)
	}
	rig.EmergencyVent()
	wait(20 * time.Second)
	if p := reads(); p < -5 || p > 5 {
		t.Errorf("vented, the reference reads %v", p)
	}
	if err := rig.Source.Set(ctx, f.Highest*2); err == nil {
		t.Error("twice the highest pressure was asked for")
	}
	if err := rig.Close(); err != nil || m.closed != 1 {
		t.Errorf("closed %d times, %v", m.closed, err)
	}
}

// A port that does not open names its role and its name, and the others close.
func TestOpenWithoutAPort(t *testing.T) {
	b, err := simulated.New(simulated.Settings{Seed: 3})
	if err != nil {
		t.Fatal(err)
	}
	f, err := Load("bench.toml", b.BenchFile(nil))
	if err != nil {
		t.Fatal(err)
	}
	for lacks, role := range map[string]string{"reference": "reference", "uut": "UUT", "readout": "readout", "source": "pressure source", "valve": "valve"} {
		m := &memory{inbox: line.NewMemory(time.Time{}), bench: b, lacks: lacks}
		rig, err := f.Open(m)
		if want := fmt.Sprintf("open the %s on %s: no such port", role, lacks); err == nil || err.Error() != want || rig != nil || m.closed != 1 {
			t.Errorf("%v, want %s; closed %d times", err, want, m.closed)
		}
	}
}
