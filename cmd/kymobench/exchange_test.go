package main

import (
	"bytes"
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"kymobench/bench/simulated"
)

// exchanged runs the command on a simulated bench in memory.
func exchanged(t *testing.T, role, change string, o exchangeOptions) (string, error) {
	t.Helper()
	b, err := simulated.New(simulated.Settings{Seed: 5})
	if err != nil {
		t.Fatal(err)
	}
	text := string(b.BenchFile(nil))
	if from, to, ok := strings.Cut(change, "|"); ok {
		text = strings.Replace(text, from, to, 1)
	}
	o.bench = filepath.Join(t.TempDir(), "bench.toml")
	if err := os.WriteFile(o.bench, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	if o.seconds == 0 {
		o.seconds = 0.5
	}
	var out bytes.Buffer
	err = runExchange(t.Context(), role, o, newMemoryPorts(b), streams{out: &out, err: io.Discard})
	return out.String(), err
}

// Raw bytes both ways, what was understood and what was refused, of every role.
func TestExchange(t *testing.T) {
	for _, c := range []struct {
		role, change string
		o            exchangeOptions
		code         int
		want         []string
	}{
		{"reference", "", exchangeOptions{}, 0, []string{`> "MEAS:PRES?\n"`, "mmHg", "refused"}},
		{"reference", "unit_in_text = false|", exchangeOptions{}, 0, []string{"understood"}},
		{"reference", `identity = "Kymobench|identity = "Somebody`, exchangeOptions{}, exitInconclusive, []string{"the bench file expects"}},
		{"uut", "", exchangeOptions{}, 0, []string{`\r\n`, "uV/V"}},
		{"uut", "width = 8|width = 7", exchangeOptions{}, exitInconclusive, []string{"0 readings understood"}},
		{"readout", "", exchangeOptions{}, 0, []string{"as the bench file expects"}},
		{"source", "", exchangeOptions{}, 0, []string{"as the bench file expects"}},
		{"valve", "", exchangeOptions{}, 0, []string{"as the bench file expects"}},
		{"reference", "", exchangeOptions{send: "SYST:UPT?"}, 0, []string{`> "SYST:UPT?\n"`, `< "360`}},
	} {
		out, err := exchanged(t, c.role, c.change, c.o)
		var code ended
		if got := errors.As(err, &code); got != (c.code != 0) || code.code != c.code || err != nil && !got {
			t.Errorf("%s, %s: %v", c.role, c.change, err)
		}
		for _, want := range c.want {
			if !strings.Contains(out, want) {
				t.Errorf("%s, %s: no %s in\n%s", c.role, c.change, want, out)
			}
		}
		if (c.role == "source" || c.role == "valve") && (strings.Contains(out, "SOUR:") || strings.Contains(out, "ROUT:")) {
			t.Errorf("%s was told something:\n%s", c.role, out)
		}
	}
	for _, role := range []string{"gauge", "uut 7", ""} {
		if _, err := exchanged(t, role, "", exchangeOptions{}); err == nil {
			t.Errorf("%q is an instrument", role)
		}
	}
}
