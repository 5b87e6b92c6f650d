package main

import (
	"bytes"
	"context"
	"encoding/json"
	"io"
	"path/filepath"
	"testing"

	"kymobench/bench/line"
	"kymobench/bench/simulated"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
)

// benchTime is how long a run took on the bench, by its closing line.
func benchTime(t *testing.T, path string) line.Instant {
	t.Helper()
	read, err := record.ReadClosed(path)
	if err != nil {
		t.Fatal(err)
	}
	return read.Events[len(read.Events)-1].At
}

// Six UUTs on one manifold: each has a record and the verdict of its own, and
// together they take at most 1.3 times the bench time of one.
func TestManifold(t *testing.T) {
	conditions := []string{simulated.Good, simulated.Offset, simulated.Good, simulated.AirBubble, simulated.WrongSensitivity, simulated.Good}
	for seed := range seeds(1) {
		one, _ := simulatedRun(t, t.TempDir(), seed+1, simulated.Good)
		j, b := simulatedJob(t, t.TempDir(), seed+1, conditions...)
		all, err := j.carry(t.Context())
		if err != nil || len(all) != len(conditions) {
			t.Fatalf("seed %d: %d outcomes, %v", seed+1, len(all), err)
		}
		for i, out := range all {
			want := "rejected"
			if conditions[i] == simulated.Good {
				want = "accepted"
			}
			if got := out.Results.Verdict.String(); got != want {
				t.Errorf("seed %d, UUT %d, %s: %s, %v", seed+1, i+1, conditions[i], got, out.Results.Reasons)
			}
			read, err := record.ReadClosed(out.record)
			if err != nil {
				t.Fatal(err)
			}
			opened, err := record.Decode[record.Opened](read.Events[0])
			if err != nil || opened.Counter != int64(i+1) {
				t.Errorf("UUT %d is run number %d of the bench, %v", i+1, opened.Counter, err)
			}
			stored, _, err := results.Stored(read.Events)
			if err != nil {
				t.Fatal(err)
			}
			computed, err := results.Compute(read.Events)
			if err != nil {
				t.Fatal(err)
			}
			if difference, err := results.Compare(stored, computed); err != nil || difference != "" {
				t.Errorf("UUT %d: computed again: %s, %v", i+1, difference, err)
			}
			if took := benchTime(t, out.record); float64(took) > 1.3*float64(benchTime(t, one.record)) {
				t.Errorf("seed %d: six UUTs took %v, one %v", seed+1, took, benchTime(t, one.record))
			}
			if u := b.UUTs()[i]; u.SerialNumber != out.serial {
				t.Errorf("UUT %d is %s, its run's %s", i+1, u.SerialNumber, out.serial)
			}
		}
		t.Logf("seed %d: one %v, six %v", seed+1, benchTime(t, one.record), benchTime(t, all[0].record))
	}
}

// The command's document lists every UUT, its reports verify, and one that is
// rejected decides the exit code.
func TestManifoldDemo(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "demo")
	var out bytes.Buffer
	o := demoOptions{seed: 4, uuts: []string{simulated.Good, simulated.Offset}, ports: "memory", out: dir, json: true}
	err := runDemo(t.Context(), o, true, streams{out: &out, err: io.Discard})
	if code, ok := err.(ended); !ok || code.code != exitRejected {
		t.Fatalf("%v", err)
	}
	var d runsDocument
	if err := json.Unmarshal(out.Bytes(), &d); err != nil || d.Schema != "kymobench/runs/1" || len(d.Runs) != 2 {
		t.Fatalf("%s, %v", out.Bytes(), err)
	}
	for i, want := range []string{"accepted", "rejected"} {
		r := d.Runs[i]
		if r.Verdict != want || r.Report == nil || r.Truth == nil || r.SerialNumber == "" {
			t.Errorf("UUT %d: %+v", i+1, r)
			continue
		}
		v := verifyOptions{trust: filepath.Join(dir, "trust", "root.pem")}
		if err := runVerify(*r.Report, v, streams{out: io.Discard, err: io.Discard}); err != nil {
			t.Errorf("verify %s: %v", *r.Report, err)
		}
	}
}

// deaf is a UUT whose stream ends at an instant.
type deaf struct {
	line.Machine
	from line.Instant
}

func (d deaf) Emit(at line.Instant) []byte {
	out := d.Machine.Emit(at)
	if at >= d.from {
		return nil
	}
	return out
}

// A UUT that falls silent is left out as inconclusive; the others go on to
// their own verdicts.
func TestManifoldLosesOne(t *testing.T) {
	j, b := simulatedJob(t, t.TempDir(), 9, simulated.Good, simulated.Good, simulated.Offset)
	j.ports = replacing{newMemoryPorts(b), map[string]line.Machine{"uut2": deaf{b.Machine("uut2"), 60e9}}}
	all, err := j.carry(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []string{"accepted", "inconclusive", "rejected"} {
		if got := all[i].Results.Verdict.String(); got != want || !all[i].Closed {
			t.Errorf("UUT %d: %s, %v", i+1, got, all[i].Results.Reasons)
		}
	}
	if r := all[1].Results.Reasons; len(r) == 0 || r[0].Code != "uut_silent" {
		t.Errorf("the silent one: %v", r)
	}
}
