package setup

import (
	"bytes"
	"errors"
	"math"
	"reflect"
	"strings"
	"testing"

	"kymobench/bench/simulated"
	"kymobench/bench/tomlfile"
)

func simulatedFile(t *testing.T, seed uint64) string {
	b, err := simulated.New(simulated.Settings{Seed: seed})
	if err != nil {
		t.Fatal(err)
	}
	return string(b.BenchFile(nil))
}

func TestLoadSimulatedBench(t *testing.T) {
	for seed := range uint64(20) {
		f, err := Load("bench.toml", []byte(simulatedFile(t, seed)))
		if err != nil {
			t.Fatal(err)
		}
		if f.Highest.MmHg() < 329.999 || f.Highest.MmHg() > 330.001 || f.Reference.Field.Unit != "mmHg" || f.UUT.Field.Width != 8 ||
			f.Readout == nil || f.Pressure.Set != "SOUR:PRES {mmHg}" || len(f.Reference.Certificate.Corrections) != 10 {
			t.Fatalf("seed %d read as %+v", seed, f)
		}
	}
}

// Each change to a good file is refused at the line that was changed.
func TestLoadRefuses(t *testing.T) {
	good := simulatedFile(t, 1)
	for _, c := range []struct{ from, to, want string }{
		{`highest = "330 mmHg"`, `highest = "330"`, "unit"},
		{`highest = "330 mmHg"`, `highest = "900 mmHg"`, "above the reference's range"},
		{`read = "MEAS:PRES?"`, `raed = "MEAS:PRES?"`, "raed"},
		{`unit = "mmHg"`, `unit = "mmhg"`, "unit"},
		{`due = "2027-03-01"`, `due = "2025-03-01"`, "before its date"},
		{`baud = 230400`, `baud = 9600`, "do not fit"},
		{`set = "SOUR:PRES {mmHg}"`, `set = "SOUR:PRES"`, "one place for the pressure"},
		{`coverage_factor = 2.0`, `coverage_factor = 0.5`, "coverage factor"},
		{`mode = "free-running"`, `mode = "ask"`, "ask"},
		{`fluid = "water"`, `fluid = "watr"`, "watr"},
		{`port = "valve"`, `port = "source"`, "port"},
		{`edge_time = "2 ms"`, `edge_time = "2 mmHg"`, "2 mmHg"},
	} {
		if strings.Count(good, c.from) == 0 {
			t.Fatalf("the simulated bench file has no %s", c.from)
		}
		at := strings.Index(good, c.from)
		line := 1 + strings.Count(good[:at], "\n")
		f, err := Load("bench.toml", []byte(strings.Replace(good, c.from, c.to, 1)))
		var e *tomlfile.Error
		if !errors.As(err, &e) {
			t.Errorf("%s: taken as %v, %v", c.to, f, err)
			continue
		}
		// A rate is refused where the samples are stated, below the baud rate.
		if e.Line != line && !strings.Contains(c.from, "baud") || e.Column < 1 || !strings.Contains(e.Error(), c.want) {
			t.Errorf("%s: refused as %v, wanted line %d and %q", c.to, e, line, c.want)
		}
	}
}

// No input makes Load panic; what it takes can be watched and is the same again
// from its own Source.
func FuzzLoad(f *testing.F) {
	b, err := simulated.New(simulated.Settings{Seed: 1})
	if err != nil {
		f.Fatal(err)
	}
	good := b.BenchFile(nil)
	f.Add(good)
	f.Add(bytes.ReplaceAll(good, []byte(`"uV/V"`), []byte(`"mmHg"`)))
	f.Add(bytes.ReplaceAll(good, []byte(`00 mmHg"`), []byte(`e306 kPa"`)))
	f.Add(bytes.ReplaceAll(good, []byte("\n"), []byte("\r\n")))
	f.Fuzz(func(t *testing.T, data []byte) {
		file, err := Load("bench.toml", data)
		var e *tomlfile.Error
		if err != nil {
			if !errors.As(err, &e) || file != nil || e.Text == "" || len(e.Text) > 2000 {
				t.Fatalf("refused as %v with %v", err, file)
			}
			return
		}
		again, err := Load("bench.toml", file.Source)
		if err != nil || !reflect.DeepEqual(file, again) {
			t.Fatalf("another bench from its own source: %v", err)
		}
		if !(file.Lowest <= 0 && file.Highest > 0) || math.IsInf(float64(file.Highest-file.Lowest), 0) || file.Pressure.Vent == "" || file.Valve.Release == "" {
			t.Fatalf("%q: %+v", data, file)
		}
	})
}
