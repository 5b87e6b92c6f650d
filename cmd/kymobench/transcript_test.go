package main

import (
	"bytes"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"kymobench/bench/simulated"
)

// A run played back from its transcript leaves the same record, byte for byte,
// also one that lost a port on the way; with a byte of an answer changed it
// leaves another, and with a byte that was sent changed it says where.
func TestReplay(t *testing.T) {
	for _, conditions := range [][]string{{simulated.Good}, {simulated.AirBubble, simulated.Good}} {
		dir := filepath.Join(t.TempDir(), "demo")
		path := filepath.Join(t.TempDir(), "run.transcript")
		o := demoOptions{seed: 6, uuts: conditions, ports: "memory", out: dir, kept: path}
		if err := runDemo(t.Context(), o, true, streams{out: io.Discard, err: io.Discard}); err != nil {
			if _, ok := err.(ended); !ok {
				t.Fatal(err)
			}
		}
		records, err := filepath.Glob(filepath.Join(dir, "runs", "*.record"))
		if err != nil || len(records) != len(conditions) {
			t.Fatalf("%v, %v", records, err)
		}
		var out bytes.Buffer
		if err := runReplay(t.Context(), path, records, "", streams{out: &out, err: io.Discard}); err != nil {
			t.Errorf("%v: %s", err, out.String())
		}
		if n := strings.Count(out.String(), "the same record"); n != len(conditions) {
			t.Errorf("%s", out.String())
		}
		text, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		for change, want := range map[[2]string]string{
			{`"SOUR:PRES 300`, `"SOUR:PRES 200`}: "does something else",
			{"\nt ", "\nz "}:                     "no line begins with",
		} {
			other := path + "2"
			if err := os.WriteFile(other, []byte(strings.Replace(string(text), change[0], change[1], 1)), 0o600); err != nil {
				t.Fatal(err)
			}
			if err := runReplay(t.Context(), other, records, "", streams{out: io.Discard, err: io.Discard}); err == nil || !strings.Contains(err.Error(), want) {
				t.Errorf("%v: %v", change, err)
			}
		}
	}
}

// An interrupted run is played back with its interruption.
func TestReplayInterrupted(t *testing.T) {
	j, b := simulatedJob(t, t.TempDir(), 12, simulated.Good)
	faulty, err := b.WithFault(simulated.RoleReference, simulated.Fault{Kind: simulated.Renamed, Exchange: 500, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "run.transcript")
	j.ports, err = kept(&faultyPorts{memoryPorts: newMemoryPorts(b), role: simulated.RoleReference, faulty: faulty}, path)
	if err != nil {
		t.Fatal(err)
	}
	out, err := j.carryOne(t.Context())
	if err != nil || out.Results.Verdict.String() != "accepted" || !faulty.Applied() {
		t.Fatalf("%v, %v, %v", out.Results.Verdict, out.Results.Reasons, err)
	}
	if err := runReplay(t.Context(), path, []string{out.record}, "", streams{out: io.Discard, err: io.Discard}); err != nil {
		t.Error(err)
	}
}

// So is a run whose instruments are of other families: registers, frames, a
// modem line.
func TestReplayFamilies(t *testing.T) {
	j, b := simulatedJobAs(t, t.TempDir(), "reference=modbus,uut=frames,source=lines,valve=modem-line", 4, simulated.Good)
	path := filepath.Join(t.TempDir(), "run.transcript")
	var err error
	if j.ports, err = kept(newMemoryPorts(b), path); err != nil {
		t.Fatal(err)
	}
	out, err := j.carryOne(t.Context())
	if err != nil || out.Results.Verdict.String() != "accepted" {
		t.Fatalf("%v, %v, %v", out.Results.Verdict, out.Results.Reasons, err)
	}
	if err := runReplay(t.Context(), path, []string{out.record}, "", streams{out: io.Discard, err: io.Discard}); err != nil {
		t.Error(err)
	}
	text, err := os.ReadFile(path)
	if err != nil || !bytes.Contains(text, []byte("DTR on")) {
		t.Errorf("%v: no modem line in the transcript", err)
	}
}
