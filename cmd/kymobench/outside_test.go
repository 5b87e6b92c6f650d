package main

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// outside finds a program that a check needs; without it the check is skipped,
// and fails when KYMOBENCH_OUTSIDE=1 says that all of them are there.
func outside(t *testing.T, name string, probe ...string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err == nil && len(probe) > 0 {
		err = exec.Command(path, probe...).Run()
	}
	switch {
	case err == nil:
		return path
	case os.Getenv("KYMOBENCH_OUTSIDE") == "1":
		t.Fatalf("%s %v: %v, and KYMOBENCH_OUTSIDE=1 says it is there", name, probe, err)
	}
	t.Skipf("%s %v: %v", name, probe, err)
	return ""
}

// cables joins pseudo-terminals in pairs, the far one in far, the near one in
// near, until the test ends.
func cables(t *testing.T, far, near string, names ...string) {
	t.Helper()
	socat := outside(t, "socat")
	for _, name := range names {
		one, other := filepath.Join(far, name), filepath.Join(near, name)
		c := exec.Command(socat, "pty,raw,echo=0,link="+one, "pty,raw,echo=0,link="+other)
		if err := c.Start(); err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { _ = c.Process.Kill(); _ = c.Wait() })
		there := func(path string) bool { _, err := os.Stat(path); return err == nil }
		for tries := 0; !there(one) || !there(other); tries++ {
			if tries == 500 {
				t.Fatalf("socat made no %s", one)
			}
			<-time.After(20 * time.Millisecond)
		}
	}
}

// manifold starts the bench of testdata/outside with a reference of a family
// and a UUT of a gain, and returns its ports.
func manifold(t *testing.T, reference, gain string) (ports string) {
	t.Helper()
	python := outside(t, "/usr/bin/python3", "-c", "import serial, serial_asyncio, pymodbus.server")
	far, near := t.TempDir(), t.TempDir()
	cables(t, far, near, "reference", "uut", "source", "valve")
	c := exec.Command(python, "testdata/outside/manifold.py", reference, far, gain)
	said, err := c.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	var wrong bytes.Buffer
	c.Stderr = &wrong
	if _, err := c.StdinPipe(); err != nil {
		t.Fatal(err)
	}
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = c.Process.Kill()
		_ = c.Wait()
		if t.Failed() && wrong.Len() > 0 {
			t.Logf("the bench outside says: %s", wrong.String())
		}
	})
	if line, err := bufio.NewReader(said).ReadString('\n'); err != nil || line != "ready\n" {
		t.Fatalf("the bench outside says %q, %v, %s", line, err, wrong.String())
	}
	return near
}

// outsideReference are the keys of each reference.
func outsideReference(kind string) string {
	switch kind {
	case "modbus":
		return `family = "modbus"
baud = 19200
parity = "even"
station = 5
identify = "holding 100 text16"
identity = "OUTSIDE P-77"
read = "input 0 float32"
zero = "holding 16 uint16 = 1"
`
	case "running":
		return `family = "lines"
mode = "free-running"
baud = 115200
width = 9
unit_in_text = true
zero = "Z"
`
	}
	return `family = "scpi"
baud = 115200
identify = "*IDN?"
identity = "Outside,manometer,scpi,1.0"
clear = "*CLS"
errors = "SYST:ERR?"
read = "MEAS:PRES?"
zero = "CAL:ZERO"
`
}

func outsideBench(kind, ports string, due time.Time) string {
	return fmt.Sprintf(`schema = "kymobench/bench/1"
department = "Clinical engineering"
bench = "Outside bench"
[pressure]
highest = "260 mmHg"
lowest = "-30 mmHg"
[reference]
port = "%[1]s/reference"
%[2]sunit = "mmHg"
resolution = "0.01 mmHg"
response_time = "0.3 s"
range_low = "-50 mmHg"
range_high = "400 mmHg"
height = "0 mm"
[reference.certificate]
number = "made up"
laboratory = "made up"
date = "%[3]s"
due = "%[4]s"
coverage_factor = 2.0
uncertainty = "0.05 mmHg"
uncertainty_of_reading = "0.02 %%"
[uut]
family = "lines"
mode = "free-running"
port = "%[1]s/uut"
baud = 115200
width = 8
unit = "mmHg"
resolution = "0.01 mmHg"
sample_period = "2 ms"
sample_period_tolerance = "0.1 %%"
height = "0 mm"
delay = "10 ms"
delay_uncertainty = "10 ms"
[source]
family = "scpi"
port = "%[1]s/source"
baud = 115200
identify = "*IDN?"
identity = "Outside,source,%[5]s,1.0"
set = "SOUR:PRES {mmHg}"
hold = "SOUR:HOLD"
vent = "SOUR:VENT"
[valve]
family = "scpi"
port = "%[1]s/valve"
baud = 115200
identify = "*IDN?"
identity = "Outside,valve,%[5]s,1.0"
release = "ROUT:OPEN"
shut = "ROUT:CLOS"
edge_time = "2 ms"
edge_time_tolerance = "20 %%"
`, ports, outsideReference(kind), due.AddDate(-1, 0, 0).Format(time.DateOnly), due.AddDate(0, 1, 0).Format(time.DateOnly), kind)
}

// A whole run on instruments that share no code with this program comes to the
// true verdict: a reference of pymodbus, one with the manners of SCPI, and one
// that sends lines by itself.
func TestOutsideBench(t *testing.T) {
	for kind, want := range map[string]struct {
		gain, verdict string
	}{"modbus": {"1.0", "accepted"}, "scpi": {"1.08", "rejected"}, "running": {"1.0", "accepted"}} {
		t.Run(kind, func(t *testing.T) {
			t.Parallel()
			if os.Getenv("KYMOBENCH_OUTSIDE") != "1" {
				t.Skip("a run in real time, with KYMOBENCH_OUTSIDE=1")
			}
			ports := manifold(t, kind, want.gain)
			bench := filepath.Join(t.TempDir(), "bench.toml")
			if err := os.WriteFile(bench, []byte(outsideBench(kind, ports, time.Now())), 0o600); err != nil {
				t.Fatal(err)
			}
			var out, told bytes.Buffer
			o := runOptions{bench: bench, procedure: "testdata/outside/quick.toml", out: t.TempDir(), json: true}
			o.serials = []string{"OUT-1"}
			err := runRun(t.Context(), o, streams{in: strings.NewReader(strings.Repeat("\n", 10)), out: &out, err: &told})
			var d struct{ Verdict string }
			if e := json.Unmarshal(out.Bytes(), &d); e != nil || d.Verdict != want.verdict {
				t.Errorf("%q, not %q: %v, %v\n%s\n%s", d.Verdict, want.verdict, err, e, out.String(), told.String())
			}
		})
	}
}
