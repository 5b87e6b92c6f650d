package recorded

import (
	"errors"
	"strings"
	"testing"

	"kymobench/procedures/record"
)

const head = "cycle,leg,set_mmHg,reference_mmHg,uut_mmHg\n"

// Every refusal names the place: line and column as an editor counts them.
func TestStaticRefusals(t *testing.T) {
	for _, c := range []struct {
		text         string
		line, column int
		want         string
	}{
		{"", 0, 0, "empty"},
		{head, 2, 1, "no readings"},
		{head + "1,up,0,0,\xff\n", 2, 10, "UTF-8"},
		{"cycle,leg,reference_mmHg\n1,up,0\n", 1, 1, "uut_UNIT"},
		{"cycle,leg,reference_mmHg,uut_mV\n1,up,0,0\n", 1, 26, "excitation"},
		{"cycle,cycle,leg,reference_mmHg,uut_mmHg\n", 1, 7, "second column"},
		{"cycle,leg,reference_mmHg,reference_kPa,uut_mmHg\n", 1, 26, "second column"},
		{"cycle,leg,reference_furlong,uut_mmHg\n", 1, 11, "furlong"},
		{head + "1,up,0,0,0\n1,up,50,nan,50\n", 3, 9, "nan"},
		{head + "1,up,0,0,0x1p3\n", 2, 10, "0x1p3"},
		{head + "1,up,0,0,1_0\n", 2, 10, "1_0"},
		{head + "1,up,0,0,\n", 2, 10, "decimal"},
		{head + "0,up,0,0,0\n", 2, 1, "cycle"},
		{head + "1,sideways,0,0,0\n", 2, 3, "sideways"},
		{head + "1,up,0,0\n", 2, 1, "5 columns"},
		{"cycle,leg,reference_mmHg,uut_mV,excitation_V\n1,up,0,0,0\n", 2, 10, "excitation"},
	} {
		events, err := Static("f.csv", strings.NewReader(c.text), StaticOptions{})
		var e *FileError
		if !errors.As(err, &e) || events != nil {
			t.Errorf("%q: %v, %v", c.text, events, err)
			continue
		}
		if e.Line != c.line || e.Column != c.column || !strings.Contains(e.Error(), c.want) {
			t.Errorf("%q: refused as %v, wanted %d:%d %q", c.text, e, c.line, c.column, c.want)
		}
	}
	for _, o := range []StaticOptions{{NominalSensitivity: "5"}, {NominalSensitivity: "-5 uV/V/mmHg"}, {Corrections: "0"}, {Corrections: "10:1,0:2"}, {Corrections: "0:nan"}} {
		if events, err := Static("f.csv", strings.NewReader(head+"1,up,0,0,0\n"), o); err == nil {
			t.Errorf("%+v taken: %v", o, events)
		}
	}
}

// A mark, semicolons, CRLF, quotes and unknown columns are all legal.
func TestStaticForms(t *testing.T) {
	text := "\ufeffcycle;leg;note;reference_kPa;\"uut_kPa\"\r\n1;up;x;\"0\";0.5\r\n1;up;y;10;10.5\r\n"
	events, err := Static("f.csv", strings.NewReader(text), StaticOptions{})
	if err != nil {
		t.Fatal(err)
	}
	kinds := map[string]int{}
	for _, e := range events {
		kinds[e.Kind]++
	}
	if kinds[record.KindPoint] != 2 || kinds[record.KindReading] != 2 || kinds[record.KindReservation] != 1 {
		t.Errorf("%v", kinds)
	}
}

func TestStepRefusals(t *testing.T) {
	for _, c := range []struct {
		text, edge   string
		line, column int
		want         string
	}{
		{"time_s,pressure_mmHg\n0,1\n", "", 2, 1, "two samples"},
		{"t,pressure_mmHg\n0,1\n", "", 1, 1, "time_s"},
		{"time_s,pressure_mmHg\n0,1\n0.001,inf\n", "", 3, 7, "inf"},
		{"time_s,pressure_mmHg\n0,1\n0.001,1\n0.003,1\n0.004,1\n0.005,1\n", "", 4, 1, "time step"},
		{"time_s,pressure_mmHg\n0,1\n0,1\n0,1\n", "", 3, 1, "time step"},
	} {
		events, err := Step("f.csv", strings.NewReader(c.text), StepOptions{Edge: c.edge})
		var e *FileError
		if !errors.As(err, &e) || events != nil {
			t.Errorf("%q: %v, %v", c.text, events, err)
			continue
		}
		if e.Line != c.line || e.Column != c.column || !strings.Contains(e.Error(), c.want) {
			t.Errorf("%q: refused as %v, wanted %d:%d %q", c.text, e, c.line, c.column, c.want)
		}
	}
	for _, edge := range []string{"2", "-1 ms", "2 mmHg", "nan s"} {
		if events, err := Step("f.csv", strings.NewReader("time_s,pressure_mmHg\n0,1\n0.001,1\n"), StepOptions{Edge: edge}); err == nil {
			t.Errorf("edge %q taken: %v", edge, events)
		}
	}
}

// Whatever the bytes, an error comes without events and events without an error.
func FuzzStatic(f *testing.F) {
	f.Add(head + "1,up,0,0,0\n1,down,50,50,51\n")
	f.Fuzz(func(t *testing.T, text string) {
		events, err := Static("f.csv", strings.NewReader(text), StaticOptions{})
		if (err == nil) == (events == nil) {
			t.Fatalf("%v with %d events", err, len(events))
		}
		events, err = Step("f.csv", strings.NewReader(text), StepOptions{Edge: ""})
		if (err == nil) == (events == nil) {
			t.Fatalf("%v with %d events", err, len(events))
		}
	})
}
