package record

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"reflect"
	"runtime"
	"strings"
	"testing"
	"time"

	"kymobench/bench/line"
)

const testRun = "R-20260102-0007"

func testWall() time.Time { return time.Date(2026, 1, 2, 3, 4, 5, 6, time.UTC) }

// inbox collects what a committer posts, for the test to take. It is a channel
// so that a test of the Disk committer can wait for its goroutine.
type inbox struct{ events chan line.Event }

func newInbox() inbox { return inbox{make(chan line.Event, 1<<16)} }

func (in inbox) Post(_ time.Duration, e line.Event) { in.events <- e }

// waitFor takes events until line number is durable, and tells the writer.
func (in inbox) waitFor(t *testing.T, w *Writer, number int64) {
	t.Helper()
	for w.Acknowledged() < number {
		e := <-in.events
		if e.Err != nil {
			t.Fatalf("durable event: %v", e.Err)
		}
		w.Taken(e.Number)
	}
}

func noLatency() time.Duration { return 0 }

// writeRecord writes a record of about the given number of lines, with the
// payloads a run has, and returns its path. Every fifth line waits to be durable.
func writeRecord(t *testing.T, lines int, close bool) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), testRun+".record")
	in := newInbox()
	w, err := Create(path, testRun, NewSimulated(in, noLatency))
	if err != nil {
		t.Fatal(err)
	}
	appendSome(t, w, in, lines)
	if close {
		err = w.Close(context.Background(), line.Instant(lines)*1e9, testWall())
	} else {
		err = w.Leave(context.Background())
	}
	if err != nil {
		t.Fatal(err)
	}
	return path
}

func appendSome(t *testing.T, w *Writer, in inbox, lines int) {
	t.Helper()
	for i := 1; i <= lines; i++ {
		kind, payload := somePayload(i)
		n, err := w.Append(line.Instant(i)*1e6, testWall().Add(time.Duration(i)*time.Millisecond), kind, payload)
		if err != nil {
			t.Fatal(err)
		}
		if n != int64(i) {
			t.Fatalf("line %d has number %d", i, n)
		}
		if i%5 == 1 {
			in.waitFor(t, w, n)
		}
	}
}

func somePayload(i int) (string, any) {
	switch {
	case i == 1:
		return KindOpened, Opened{Schema: Schema, Run: testRun, Counter: 7, Program: "kymobench test"}
	case i%7 == 0:
		return KindPrompt, Prompt{Text: "open the valve <now> & wait\tµ\u2028\n\x01"}
	case i%7 == 3:
		return KindBlock, Block{Role: "uut", Start: line.Instant(i), Period: "1 ms", Samples: []string{"+0012.34", "+0012.35"}}
	case i%4 != 2:
		return KindReading, Reading{Role: "reference", Sent: line.Instant(i) * 1000, Text: fmt.Sprintf("%.2f", float64(i)*1.7)}
	default:
		return KindReading, Reading{Role: "reference", Sent: line.Instant(i) * 1000, Text: fmt.Sprintf("%.2f", float64(i)*1.7),
			Watch: &Watch{N: i, Mean: float64(i) / 3, SD: 1e-7 * float64(i), Min: -1e21, Max: 5e-324}}
	}
}

func TestRecordRoundTrip(t *testing.T) {
	path := writeRecord(t, 60, true)
	run, err := ReadClosed(path)
	if err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(encodeRun(run), data) {
		t.Error("encoded again, the record differs")
	}
	if run.Head.Lines != 61 || run.Head.Bytes != int64(len(data)) || run.Head.Run != testRun || !run.Closed {
		t.Errorf("head %+v, closed %v", run.Head, run.Closed)
	}
	for i, e := range run.Events[:60] {
		kind, want := somePayload(i + 1)
		got := reflect.New(reflect.TypeOf(want))
		var err error
		switch kind {
		case KindOpened:
			var v Opened
			v, err = Decode[Opened](e)
			got.Elem().Set(reflect.ValueOf(v))
		case KindPrompt:
			var v Prompt
			v, err = Decode[Prompt](e)
			got.Elem().Set(reflect.ValueOf(v))
		case KindBlock:
			var v Block
			v, err = Decode[Block](e)
			got.Elem().Set(reflect.ValueOf(v))
		case KindReading:
			var v Reading
			v, err = Decode[Reading](e)
			got.Elem().Set(reflect.ValueOf(v))
		}
		if err != nil {
			t.Fatal(err)
		}
		if !reflect.DeepEqual(got.Elem().Interface(), want) {
			t.Errorf("line %d: %+v, want %+v", e.Line, got.Elem().Interface(), want)
		}
	}
	if info, err := os.Stat(path); err != nil || runtime.GOOS != "windows" && info.Mode().Perm() != 0o600 {
		t.Errorf("mode %v, %v", info.Mode(), err)
	}
}

// TestRecordByHand checks the chain against its definition, computed here from
// the file's text with nothing of the package.
func TestRecordByHand(t *testing.T) {
	data, err := os.ReadFile(writeRecord(t, 20, true))
	if err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256([]byte("kymobench-record/1\n" + testRun))
	before := hex.EncodeToString(sum[:])
	lines := strings.SplitAfter(string(data), "\n")
	if len(lines) != 22 || lines[21] != "" {
		t.Fatalf("%d lines", len(lines))
	}
	for i, l := range lines[:21] {
		body, hash, ok := strings.Cut(strings.TrimSuffix(l, "\n"), "\t")
		if !ok {
			t.Fatalf("line %d: no tab", i+1)
		}
		sum := sha256.Sum256([]byte(before + body))
		if hash != hex.EncodeToString(sum[:]) {
			t.Fatalf("line %d: hash", i+1)
		}
		before = hash
	}
}

func TestWriterRefuses(t *testing.T) {
	in := newInbox()
	dir := t.TempDir()
	for _, run := range []string{"", "a/b", "..", ".a", "-a", "a b", strings.Repeat("a", 65), "ä"} {
		if _, err := Create(filepath.Join(dir, "x"), run, NewSimulated(in, noLatency)); err == nil {
			t.Errorf("run id %q taken", run)
		}
	}
	path := filepath.Join(dir, "r")
	w, err := Create(path, testRun, NewSimulated(in, noLatency))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Create(path, testRun, NewSimulated(in, noLatency)); !errors.Is(err, os.ErrExist) {
		t.Errorf("second Create: %v", err)
	}
	wall := testWall()
	_, opened := somePayload(1)
	for name, f := range map[string]func() error{
		"first line not opened": func() error { _, err := w.Append(0, wall, KindPrompt, Prompt{}); return err },
		"other run":             func() error { _, err := w.Append(0, wall, KindOpened, Opened{Schema: Schema, Run: "R-2"}); return err },
		"other schema":          func() error { _, err := w.Append(0, wall, KindOpened, Opened{Run: testRun}); return err },
		"before the start":      func() error { _, err := w.Append(-1, wall, KindOpened, opened); return err },
		"year": func() error {
			_, err := w.Append(0, time.Date(10000, 1, 1, 0, 0, 0, 0, time.UTC), KindOpened, opened)
			return err
		},
	} {
		if f() == nil {
			t.Errorf("%s: taken", name)
		}
	}
	if _, err := w.Append(0, wall, KindOpened, opened); err != nil {
		t.Fatal(err)
	}
	head := w.Head()
	for name, f := range map[string]func() error{
		"opened twice":  func() error { _, err := w.Append(0, wall, KindOpened, opened); return err },
		"closed":        func() error { _, err := w.Append(0, wall, KindClosed, Closed{2}); return err },
		"recovered":     func() error { _, err := w.Append(0, wall, KindRecovered, Recovered{}); return err },
		"kind":          func() error { _, err := w.Append(0, wall, "a b", Prompt{}); return err },
		"not an object": func() error { _, err := w.Append(0, wall, KindPrompt, "text"); return err },
		"null":          func() error { _, err := w.Append(0, wall, KindPrompt, nil); return err },
		"not UTF-8":     func() error { _, err := w.Append(0, wall, KindPrompt, Prompt{"\xff"}); return err },
		"not finite": func() error {
			zero := 0.0
			_, err := w.Append(0, wall, KindPrompt, Watch{Mean: 1 / zero})
			return err
		},
		"too long": func() error {
			_, err := w.Append(0, wall, KindPrompt, Prompt{strings.Repeat("a", longestLine)})
			return err
		},
	} {
		if f() == nil {
			t.Errorf("%s: taken", name)
		}
		if w.Head() != head {
			t.Errorf("%s: the record changed", name)
		}
	}
	if err := w.Close(context.Background(), 0, wall); err != nil {
		t.Fatal(err)
	}
	if _, err := w.Append(0, wall, KindPrompt, Prompt{}); !errors.Is(err, ErrEnded) {
		t.Errorf("append after Close: %v", err)
	}
	if err := w.Close(context.Background(), 0, wall); !errors.Is(err, ErrEnded) {
		t.Errorf("second Close: %v", err)
	}
	if run, err := ReadClosed(path); err != nil || run.Head != w.Head() {
		t.Errorf("%v: %+v, writer's head %+v", err, run.Head, w.Head())
	}
}

func TestDecodeIsStrict(t *testing.T) {
	for payload, good := range map[string]bool{
		`{"code":"a","text":"b"}`:       true,
		`{"code":"a","text":"b","x":1}`: false,
		`{"text":"b","code":"a"}`:       false,
		`{"code":"a"}`:                  false,
		`{"Code":"a","text":"b"}`:       false,
		`{"code":1,"text":"b"}`:         false,
		`{"code":null,"text":"b"}`:      false,
	} {
		v, err := Decode[Fault](Event{Line: 2, Kind: KindFault, Payload: []byte(payload)})
		if good != (err == nil) || err != nil && (v != Fault{} || !errors.Is(err, ErrPayload)) {
			t.Errorf("%s: %+v, %v", payload, v, err)
		}
	}
}
