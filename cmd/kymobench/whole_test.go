package main

import (
	"bytes"
	"context"
	"encoding/json"
	"io"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/simulated"
	"kymobench/procedures/record"
	"kymobench/reports/sign"
	"kymobench/reports/verify"
)

// The same seed gives the same record, byte for byte, also beside others.
func TestSameSeedSameRecord(t *testing.T) {
	const beside = 8
	for seed := range seeds(2) {
		records := make([][]byte, beside)
		var wait sync.WaitGroup
		for i := range records {
			dir := t.TempDir()
			wait.Go(func() {
				out, _ := simulatedRun(t, dir, seed+1, simulated.Good)
				data, err := os.ReadFile(out.record)
				if err != nil {
					t.Error(err)
				}
				records[i] = data
			})
		}
		wait.Wait()
		for i, r := range records {
			if len(r) == 0 || !bytes.Equal(r, records[0]) {
				t.Errorf("seed %d: run %d of %d gave another record", seed+1, i+1, beside)
			}
		}
	}
}

// demonstrated runs the demo and returns its report and the trusted roots.
func demonstrated(t *testing.T) (f folder, report []byte, trust string) {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "demo")
	var out bytes.Buffer
	err := runDemo(t.Context(), demoOptions{seed: 3, uuts: []string{simulated.Good}, ports: "memory", out: dir, json: true}, true, streams{out: &out, err: io.Discard})
	if err != nil {
		t.Fatal(err)
	}
	var d struct {
		Schema, Verdict, Record, Report string
		Limits                          []struct{ Name string }
	}
	if err := json.Unmarshal(out.Bytes(), &d); err != nil {
		t.Fatalf("%v in %s", err, out.Bytes())
	}
	if d.Schema != "kymobench/run/1" || d.Verdict != "accepted" || !filepath.IsAbs(d.Record) || !filepath.IsAbs(d.Report) || len(d.Limits) != 6 {
		t.Fatalf("%+v", d)
	}
	report, err = os.ReadFile(d.Report)
	if err != nil {
		t.Fatal(err)
	}
	return folder{dir}, report, filepath.Join(dir, "trust", "root.pem")
}

// Single bytes of a signed report changed: never verified. KYMOBENCH_FULL=1
// changes every one.
func TestEveryByteOfAReport(t *testing.T) {
	_, report, trust := demonstrated(t)
	roots, err := rootsFor("", trust)
	if err != nil {
		t.Fatal(err)
	}
	if f := verify.Report(report, roots); !f.Verified || f.Pages != "checked" {
		t.Fatalf("%+v", f)
	}
	step := 2741 // a prime
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		step = 1
	}
	tried := 0
	damaged := bytes.Clone(report)
	for i := 0; i < len(report); i += step {
		damaged[i] ^= 1 << (i % 8)
		if f := verify.Report(damaged, roots); f.Verified {
			t.Fatalf("byte %d changed and verified", i)
		}
		damaged[i] = report[i]
		tried++
	}
	t.Logf("%d of %d bytes changed, none verified", tried, len(report))
}

// A report made again from the record is the same outside the gap; one whose
// record was edited and chained anew is not verified, however well it is
// signed by somebody else.
func TestReportMadeAgain(t *testing.T) {
	f, report, trust := demonstrated(t)
	keys, err := demonstrationKeys(f.trust())
	if err != nil {
		t.Fatal(err)
	}
	records, err := filepath.Glob(filepath.Join(f.runs(), "*.record"))
	if err != nil || len(records) != 1 {
		t.Fatal(records, err)
	}
	again := filepath.Join(t.TempDir(), "again.pdf")
	if err := sealReport(records[0], again, keys); err != nil {
		t.Fatal(err)
	}
	if data, err := os.ReadFile(again); err != nil || !bytes.Equal(data, report) {
		t.Errorf("made again it differs, %v", err)
	}
	// Somebody else's root.
	other, err := newDemonstrationKeys(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	foreign, err := rootsFor("", other.root)
	if err != nil {
		t.Fatal(err)
	}
	if f := verify.Report(report, foreign); f.Verified {
		t.Error("verified under a foreign root")
	}
	// The record edited in a word, chained anew, its own signer's signatures.
	edited := rechained(t, records[0], `"verdict":"accepted"`, `"verdict":"rejected"`)
	if f := verify.Record(edited); f.Verified {
		t.Error("a record with an edited verdict was verified")
	}
	path := filepath.Join(t.TempDir(), filepath.Base(records[0]))
	if err := os.WriteFile(path, edited, 0o600); err != nil {
		t.Fatal(err)
	}
	forged := filepath.Join(t.TempDir(), "forged.pdf")
	if err := sealReport(path, forged, keys); err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(forged)
	if err != nil {
		t.Fatal(err)
	}
	roots, err := rootsFor("", trust)
	if err != nil {
		t.Fatal(err)
	}
	if f := verify.Report(data, roots); f.Verified {
		t.Error("a report of an edited record was verified")
	}
	if p, err := sign.ReadSigned(data); err != nil || p.Pages == 0 {
		t.Errorf("the forged report is not even well made: %v", err)
	}
}

// rechained replaces a word in a record and makes its chain anew.
func rechained(t *testing.T, path, from, to string) []byte {
	t.Helper()
	read, err := record.ReadClosed(path)
	if err != nil {
		t.Fatal(err)
	}
	out := filepath.Join(t.TempDir(), "edited.record")
	inbox := line.NewMemory(time.Time{})
	w, err := record.Create(out, read.Head.Run, record.NewSimulated(inbox, func() time.Duration { return 0 }))
	if err != nil {
		t.Fatal(err)
	}
	replaced := false
	for _, e := range read.Events[:len(read.Events)-1] {
		payload := bytes.Replace(e.Payload, []byte(from), []byte(to), 1)
		replaced = replaced || !bytes.Equal(payload, e.Payload)
		if _, err := w.Append(e.At, e.Wall, e.Kind, json.RawMessage(payload)); err != nil {
			t.Fatal(err)
		}
	}
	if !replaced {
		t.Fatalf("the record does not hold %s", from)
	}
	last := read.Events[len(read.Events)-1]
	if err := w.Close(t.Context(), last.At, last.Wall); err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(out)
	if err != nil {
		t.Fatal(err)
	}
	return data
}

// listening is a machine that remembers when it was told to vent.
type listening struct {
	line.Machine
	word   string
	heard  []line.Instant
	events int
	stop   int // cancel at this many messages; 0 never
	cancel context.CancelFunc
	at     line.Instant // of the cancel
}

func (l *listening) Receive(at line.Instant, data []byte) {
	if strings.Contains(string(data), l.word) {
		l.heard = append(l.heard, at)
	}
	l.events++
	if l.events == l.stop {
		l.at = at
		l.cancel()
	}
	l.Machine.Receive(at, data)
}

// Cancelled anywhere, the run vents within 200 ms of virtual time and leaves
// the record open.
func TestCancelVents(t *testing.T) {
	for k := range seeds(40) {
		stop := 1 + int(k*7)
		j, b := simulatedJob(t, t.TempDir(), k, simulated.Good)
		ctx, cancel := context.WithCancel(t.Context())
		source := &listening{Machine: b.Machine(simulated.RoleSource), word: "SOUR:VENT"}
		reference := &listening{Machine: b.Machine(simulated.RoleReference), word: "MEAS", stop: stop, cancel: cancel}
		j.ports = replacing{newMemoryPorts(b), map[string]line.Machine{simulated.RoleSource: source, simulated.RoleReference: reference}}
		out, err := j.carryOne(ctx)
		cancel()
		if err == nil && !out.Stopped {
			t.Errorf("cancelled at message %d, the run went on: %v", stop, out.Results.Verdict)
			continue
		}
		vented := false
		for _, at := range source.heard {
			vented = vented || at >= reference.at && at.Sub(reference.at) <= 200*time.Millisecond
		}
		if !vented {
			t.Errorf("cancelled at message %d, %v: vents heard at %v", stop, reference.at, source.heard)
		}
		if out.record != "" && out.Stopped {
			if read, err := record.ReadFile(out.record); err != nil || read.Closed {
				t.Errorf("cancelled at message %d: record closed %v, %v", stop, read.Closed, err)
			}
		}
	}
}

// replacing puts other machines in the place of some of the bench's.
type replacing struct {
	*memoryPorts
	machines map[string]line.Machine
}

func (r replacing) Connect(id line.PortID, name string, mode setup.PortMode) error {
	if m, ok := r.machines[name]; ok {
		r.inbox.Connect(id, m, line.MemoryOptions{})
		return nil
	}
	return r.memoryPorts.Connect(id, name, mode)
}
