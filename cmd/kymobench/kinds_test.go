package main

import (
	"bytes"
	"errors"
	"fmt"
	"strconv"
	"strings"
	"testing"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/simulated"
	"kymobench/procedures"
)

// showing is a UUT with its channel: what the simulated bridge sends in uV/V
// is shown in mmHg, as a channel set to 5 uV/V/mmHg does.
type showing struct{ line.Machine }

func (s showing) Emit(at line.Instant) []byte {
	var out bytes.Buffer
	for text := range strings.Lines(string(s.Machine.Emit(at))) {
		x, err := strconv.ParseFloat(strings.TrimSpace(text), 64)
		if err != nil {
			return []byte(text)
		}
		fmt.Fprintf(&out, "%+08.2f\r\n", x/5)
	}
	return out.Bytes()
}

// A bench whose UUT shows pressure is refused for limits of a bare transducer
// and the other way round, before anything is asked; with the procedure for
// its kind the run goes through.
func TestKindsOfUUT(t *testing.T) {
	j, b := simulatedJob(t, t.TempDir(), 6, simulated.Good)
	var err error
	if j.definition, err = procedures.Shipped("transducer-channel"); err != nil {
		t.Fatal(err)
	}
	var usage usageError
	if _, err := j.carry(t.Context()); !errors.As(err, &usage) || !strings.Contains(err.Error(), "puts out uV/V, which a bare transducer does") {
		t.Errorf("a bare transducer against the limits of one with its channel: %v", err)
	}
	text := string(j.file.Source)
	readout, rest, _ := strings.Cut(text[strings.Index(text, "[readout]"):], "[source]")
	text = strings.Replace(text, readout+"[source]"+rest, "[source]"+rest, 1)
	text = strings.NewReplacer(`unit = "uV/V"`, `unit = "mmHg"`, `resolution = "0.01 uV/V"`, `resolution = "0.01 mmHg"`,
		"excitation = \"5 V\"\nnominal_sensitivity = \"5 uV/V/mmHg\"\n", "").Replace(text)
	if j.file, err = setup.Load("bench.toml", []byte(text)); err != nil {
		t.Fatal(err)
	}
	j.ports = replacing{newMemoryPorts(b), map[string]line.Machine{simulated.RoleUUT: showing{b.Machine(simulated.RoleUUT)}}}
	out, err := j.carry(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	if got := out[0].Results.Verdict.String(); got != "accepted" || len(out[0].Results.Limits) != 3 {
		t.Errorf("%s, %v", got, out[0].Results.Reasons)
	}
	if j.definition, err = procedures.Shipped("incoming"); err != nil {
		t.Fatal(err)
	}
	if _, err := j.carry(t.Context()); !errors.As(err, &usage) || !strings.Contains(err.Error(), "puts out mmHg") {
		t.Errorf("one with its channel against the limits of a bare transducer: %v", err)
	}
}
