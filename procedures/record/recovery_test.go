package record

import (
	"bufio"
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"testing"
	"time"

	"kymobench/bench/line"
)

func sha256Hex(b []byte) string {
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:])
}

// tear cuts bytes off the end of a record's file and returns what is left.
func tear(t *testing.T, path string, n int) []byte {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	data = data[:len(data)-n]
	if err := os.WriteFile(path, data, 0o600); err != nil {
		t.Fatal(err)
	}
	return data
}

func TestRecoverAndReopen(t *testing.T) {
	ctx := context.Background()
	path := writeRecord(t, 24, false)
	whole, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	// Nothing to recover: nothing changes.
	if run, err := Recover(path, testWall()); err != nil || run.Head.Lines != 24 || run.Head.Bytes != int64(len(whole)) {
		t.Fatalf("clean record: %v", err)
	}
	data := tear(t, path, 30)
	if _, _, err := Reopen(path, NewDisk(newInbox())); !errors.Is(err, ErrTorn) {
		t.Errorf("torn record reopened: %v", err)
	}
	run, err := Recover(path, testWall())
	if err != nil {
		t.Fatal(err)
	}
	if run.Head.Lines != 24 || run.Events[23].Kind != KindRecovered || run.Events[23].Durable != 23 || run.Events[23].At != run.Events[22].At {
		t.Errorf("recovered: %+v", run.Events[23])
	}
	tail := whole[:len(data)][lineEnds(whole)[23]:]
	side, err := os.ReadFile(path + ".tail-1")
	if err != nil || !bytes.Equal(side, tail) {
		t.Errorf("side file: %v, %d bytes, want %d", err, len(side), len(tail))
	}
	// A second crash: another tail, another side file.
	w, sofar, err := Reopen(path, NewSimulated(newInbox(), noLatency))
	if err != nil || sofar.Head != run.Head || w.Head() != run.Head || w.Acknowledged() != 24 {
		t.Fatalf("reopen: %v, %+v", err, sofar.Head)
	}
	if _, err := w.Append(5, testWall(), KindPrompt, Prompt{Text: "again"}); err != nil {
		t.Fatal(err)
	}
	if runtime.GOOS != "windows" { // see lock in files_windows.go
		if _, _, err := Reopen(path, NewDisk(newInbox())); !errors.Is(err, ErrInUse) {
			t.Errorf("second writer: %v", err)
		}
		if _, err := Recover(path, testWall()); !errors.Is(err, ErrInUse) {
			t.Errorf("recovery of a record being written: %v", err)
		}
	}
	if err := w.Leave(ctx); err != nil {
		t.Fatal(err)
	}
	tear(t, path, 1)
	if run, err = Recover(path, testWall()); err != nil {
		t.Fatal(err)
	}
	if r, err := Decode[Recovered](run.Events[24]); err != nil || r.File != filepath.Base(path)+".tail-2" {
		t.Errorf("%+v, %v", r, err)
	}
	in := newInbox()
	w, _, err = Reopen(path, NewDisk(in))
	if err != nil {
		t.Fatal(err)
	}
	n, err := w.Append(5, testWall(), KindPrompt, Prompt{Text: "once more"})
	if err != nil {
		t.Fatal(err)
	}
	in.waitFor(t, w, n)
	if err := w.Close(ctx, 6, testWall()); err != nil {
		t.Fatal(err)
	}
	closed, err := ReadClosed(path)
	if err != nil || closed.Head != w.Head() || closed.Head.Lines != 27 {
		t.Fatalf("%v, %+v", err, closed.Head)
	}
	// A closed record is never repaired.
	if _, err := Recover(path, testWall()); !errors.Is(err, ErrClosed) {
		t.Errorf("closed record recovered: %v", err)
	}
	if _, _, err := Reopen(path, NewDisk(newInbox())); !errors.Is(err, ErrClosed) {
		t.Errorf("closed record reopened: %v", err)
	}
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_APPEND, 0)
	if err != nil {
		t.Fatal(err)
	}
	fmt.Fprint(f, "x")
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	var chain *ChainError
	if _, err := Recover(path, testWall()); !errors.As(err, &chain) || chain.Line != 28 {
		t.Errorf("closed record with a byte more: %v", err)
	}
	if left, err := filepath.Glob(path + "*"); err != nil || len(left) != 3 {
		t.Errorf("files %v", left)
	}
}

func TestRecoverRefusesDamage(t *testing.T) {
	path := writeRecord(t, 24, false)
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	data[lineEnds(data)[10]+50] ^= 1
	if err := os.WriteFile(path, data, 0o600); err != nil {
		t.Fatal(err)
	}
	var chain *ChainError
	if _, err := Recover(path, testWall()); !errors.As(err, &chain) || chain.Line != 11 {
		t.Errorf("damaged record: %v", err)
	}
	if after, err := os.ReadFile(path); err != nil || !bytes.Equal(after, data) {
		t.Error("a refused record was changed")
	}
	if _, err := Recover(path+"x", testWall()); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("no record: %v", err)
	}
	if _, err := Recover(filepath.Dir(path), testWall()); err == nil {
		t.Error("a folder is recovered")
	}
}

// childRecord names the record that TestKilledChild writes when this test
// binary is started again as a process to be killed.
const childRecord = "KYMOBENCH_RECORD_CHILD"

// stdoutInbox acknowledges to the parent process before anybody else.
type stdoutInbox struct{ inbox }

func (in stdoutInbox) Post(d time.Duration, e line.Event) {
	fmt.Println(e.Number)
	in.inbox.Post(d, e)
}

// TestKilledChild is the child's side of TestKill.
func TestKilledChild(t *testing.T) {
	path := os.Getenv(childRecord)
	if path == "" {
		t.Skip("only as the child of TestKill")
	}
	in := newInbox()
	w, err := Create(path, testRun, NewDisk(stdoutInbox{in}))
	if err != nil {
		t.Fatal(err)
	}
	for i := 1; i < 1_000_000; i++ {
		kind, payload := somePayload(i)
		n, err := w.Append(line.Instant(i), testWall(), kind, payload)
		if err != nil {
			t.Fatal(err)
		}
		in.waitFor(t, w, n-20)
	}
}

// TestKill kills a process while it writes: no line that it acknowledged is
// lost, and the record can be taken up again. What is killed leaves its writes
// in the machine's memory, so this proves less than TestPowerCut.
func TestKill(t *testing.T) {
	times := 20
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		times = 2000
	}
	random := rand.New(rand.NewPCG(7, 8))
	acknowledgedInAll := int64(0)
	for k := range times {
		path := filepath.Join(t.TempDir(), "killed.record")
		child := exec.Command(os.Args[0], "-test.run=^TestKilledChild$")
		child.Env = append(os.Environ(), childRecord+"="+path)
		out, err := child.StdoutPipe()
		if err != nil {
			t.Fatal(err)
		}
		if err := child.Start(); err != nil {
			t.Fatal(err)
		}
		var acknowledged int64
		killAfter := 1 + random.IntN(60)
		lines := bufio.NewScanner(out)
		for n := 1; lines.Scan(); n++ {
			number, err := strconv.ParseInt(lines.Text(), 10, 64)
			if err != nil || number <= acknowledged {
				t.Errorf("run %d: child says %q", k, lines.Text())
				break
			}
			acknowledged = number
			if n == killAfter {
				if err := child.Process.Kill(); err != nil {
					t.Fatal(err)
				}
			}
		}
		var exit *exec.ExitError
		if err := child.Wait(); !errors.As(err, &exit) || runtime.GOOS != "windows" && exit.Exited() {
			t.Fatalf("run %d: child was not killed: %v", k, err)
		}
		acknowledgedInAll += acknowledged
		run, err := ReadFile(path)
		if err != nil || run.Closed || run.Head.Lines < acknowledged {
			t.Fatalf("run %d: %v, %d lines of %d acknowledged", k, err, run.Head.Lines, acknowledged)
		}
		for _, e := range run.Events {
			kind, payload := somePayload(int(e.Line))
			if want, err := encodePayload(payload); err != nil || e.Kind != kind || !bytes.Equal(want, e.Payload) {
				t.Fatalf("run %d: line %d is %s %s", k, e.Line, e.Kind, e.Payload)
			}
		}
		if _, err := Recover(path, testWall()); err != nil {
			t.Fatalf("run %d: %v", k, err)
		}
		w, again, err := Reopen(path, NewDisk(newInbox()))
		if err != nil || again.Head.Lines < run.Head.Lines {
			t.Fatalf("run %d: %v", k, err)
		}
		if err := w.Close(context.Background(), 0, testWall()); err != nil {
			t.Fatalf("run %d: %v", k, err)
		}
		if _, err := ReadClosed(path); err != nil {
			t.Fatalf("run %d: %v", k, err)
		}
	}
	t.Logf("%d kills, %d lines acknowledged, 0 lost", times, acknowledgedInAll)
}

// checkScript runs the shell check on a file and returns what it prints and
// whether it accepts.
func checkScript(t *testing.T, data []byte) (string, bool) {
	t.Helper()
	path := filepath.Join(t.TempDir(), "file.record")
	if err := os.WriteFile(path, data, 0o600); err != nil {
		t.Fatal(err)
	}
	out, err := exec.Command("sh", filepath.Join("testdata", "check-record.sh"), path).CombinedOutput()
	var exit *exec.ExitError
	if err != nil && (!errors.As(err, &exit) || exit.ExitCode() != 1) {
		t.Fatalf("%v: %s", err, out)
	}
	return string(out), err == nil
}

// TestScript lets an outside program verify our records: sh with sha256sum.
func TestScript(t *testing.T) {
	for _, program := range []string{"sh", "sha256sum", "sed", "tr", "cut", "wc"} {
		if _, err := exec.LookPath(program); err != nil {
			if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
				t.Fatal(err)
			}
			t.Skip(err)
		}
	}
	script, err := os.ReadFile(filepath.Join("testdata", "check-record.sh"))
	if err != nil || bytes.Count(script, []byte("\n")) != 12 {
		t.Errorf("script of %d lines, %v", bytes.Count(script, []byte("\n")), err)
	}
	data, err := os.ReadFile(writeRecord(t, 8, true))
	if err != nil {
		t.Fatal(err)
	}
	run, err := parse(data, Limit{}.orUsual())
	if err != nil {
		t.Fatal(err)
	}
	want := fmt.Sprintf("run %s, 9 lines, %d bytes, head %s\n", testRun, len(data), run.Head.Hash)
	if out, ok := checkScript(t, data); !ok || out != want {
		t.Fatalf("good record: %q, want %q", out, want)
	}
	ends := lineEnds(data)
	refused := func(name string, number int, data []byte) {
		t.Helper()
		out, ok := checkScript(t, data)
		if ok || !strings.HasPrefix(out, fmt.Sprintf("line %d: ", number)) {
			t.Errorf("%s: accepted %v, %q, want line %d", name, ok, out, number)
		}
	}
	random := rand.New(rand.NewPCG(9, 10))
	for i := range 9 {
		from, to := ends[i], ends[i+1]
		at := from + random.IntN(to-from-1)
		changed := func(b byte) []byte { c := bytes.Clone(data); c[at] = b; return c }
		refused(fmt.Sprint("byte ", at-from), i+1, changed(data[at]^1))
		refused(fmt.Sprint("NUL at ", at-from), i+1, changed(0))
		refused(fmt.Sprint("0xff at ", at-from), i+1, changed(0xff))
		refused("new line within", i+1, changed('\n'))
		refused("tab for the end", i+1, append(append(bytes.Clone(data[:to-1]), '\t'), data[to:]...))
		refused("return before the end", i+1, append(append(bytes.Clone(data[:to-1]), '\r', '\n'), data[to:]...))
		refused("byte left out", i+1, append(bytes.Clone(data[:at]), data[at+1:]...))
		refused("NUL put in", i+1, append(append(bytes.Clone(data[:at]), 0), data[at:]...))
		refused("line twice", i+2, append(bytes.Clone(data[:to]), data[from:]...))
		if i < 8 {
			refused("line left out", i+1, append(bytes.Clone(data[:from]), data[to:]...))
			refused("cut at the line's end", i+2, data[:to])
		}
		refused("cut before the line's end", i+1, data[:to-1])
		refused("cut", i+1, data[:at+1])
	}
	bodies := bodiesOf(t, data)
	refused("repeated and chained", 4, rechain(testRun, append(append(bodies[:3:3], bodies[2]), bodies[3:]...)))
	refused("closed too early", 5, rechain(testRun, append(append(bodies[:3:3], strings.NewReplacer(`"n":9`, `"n":4`, `"lines":9`, `"lines":4`).Replace(bodies[8])), bodies[3:]...)))
	refused("chain of another run", 1, rechain("other", bodies))
	refused("empty", 1, nil)
	refused("a byte after the end", 10, append(bytes.Clone(data), 'x'))
	refused("an empty line after the end", 10, append(bytes.Clone(data), '\n'))
	// As for the reader, a chain made anew is a good chain, of another head.
	bodies[3] = strings.Replace(bodies[3], "6.80", "6.81", 1)
	if out, ok := checkScript(t, rechain(testRun, bodies)); !ok || out == want {
		t.Errorf("chain made anew: %v, %q", ok, out)
	}
}

// BenchmarkAppend measures what the engine waits for: encoding and chaining a
// reading, without the disk.
func BenchmarkAppend(b *testing.B) {
	var events []posted
	w, err := create(newMemoryDisk(), "r", testRun, NewSimulated(listInbox{&events}, noLatency))
	if err != nil {
		b.Fatal(err)
	}
	for i := 1; b.Loop(); i++ {
		if i == 400_000 { // a record holds no more
			b.StopTimer()
			if w, err = create(newMemoryDisk(), "r", testRun, NewSimulated(listInbox{&events}, noLatency)); err != nil {
				b.Fatal(err)
			}
			i = 1
			b.StartTimer()
		}
		kind, payload := somePayload(i)
		if _, err := w.Append(line.Instant(i), testWall(), kind, payload); err != nil {
			b.Fatal(err)
		}
		w.Taken(int64(i))
	}
}

// BenchmarkDurable measures readings appended and waited for one by one, on
// the disk of the temporary folder.
func BenchmarkDurable(b *testing.B) {
	in := newInbox()
	w, err := Create(filepath.Join(b.TempDir(), "r"), testRun, NewDisk(in))
	if err != nil {
		b.Fatal(err)
	}
	for i := 1; b.Loop(); i++ {
		kind, payload := somePayload(i)
		n, err := w.Append(line.Instant(i), testWall(), kind, payload)
		if err != nil {
			b.Fatal(err)
		}
		for w.Acknowledged() < n {
			e := <-in.events
			if e.Err != nil {
				b.Fatal(e.Err)
			}
			w.Taken(e.Number)
		}
	}
	b.StopTimer()
	if err := w.Close(context.Background(), 0, testWall()); err != nil {
		b.Fatal(err)
	}
}

// BenchmarkRead measures reading and checking, in bytes of the record.
func BenchmarkRead(b *testing.B) {
	var bodies []string
	for i := 1; i <= 5000; i++ {
		kind, payload := somePayload(i)
		body, err := encodeEvent(nil, &Event{Line: int64(i), Durable: int64(i - 1), Wall: testWall(), Kind: kind}, payload, testRun)
		if err != nil {
			b.Fatal(err)
		}
		bodies = append(bodies, string(body))
	}
	data := rechain(testRun, bodies)
	b.SetBytes(int64(len(data)))
	for b.Loop() {
		if run, err := parse(data, Limit{}.orUsual()); err != nil || run.Head.Lines != 5000 {
			b.Fatal(err)
		}
	}
}
