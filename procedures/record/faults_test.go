package record

import (
	"bytes"
	"context"
	"errors"
	"math/rand/v2"
	"os"
	"testing"
	"time"

	"kymobench/bench/line"
)

// drive writes a record through a Disk committer, waiting for the disk after
// each line, and closes it. It returns the highest line acknowledged and the
// first error; after an error it makes sure that nothing works any more and
// nothing is acknowledged any more.
func drive(t *testing.T, disk *memoryDisk, lines int) (acknowledged int64, closed bool, err error) {
	t.Helper()
	ctx := context.Background()
	in := newInbox()
	w, err := create(disk, "r", testRun, NewDisk(in))
	if err != nil {
		return 0, false, err
	}
	defer func() {
		if err == nil {
			return
		}
		if _, again := w.Append(0, testWall(), KindPrompt, Prompt{}); again == nil {
			t.Errorf("append after %v succeeded", err)
		}
		if w.Close(ctx, 0, testWall()) == nil {
			t.Errorf("close after %v succeeded", err)
		}
		for len(in.events) > 0 {
			// The closing line is durable before the folder is synced once more.
			e := <-in.events
			if e.Err == nil && e.Number > acknowledged && (disk.failKind != opFolder || e.Number <= int64(lines)) {
				t.Errorf("line %d acknowledged after %v", e.Number, err)
			}
		}
	}()
	for i := 1; i <= lines; i++ {
		kind, payload := somePayload(i)
		if _, err := w.Append(line.Instant(i), testWall(), kind, payload); err != nil {
			return acknowledged, false, err
		}
		for acknowledged < int64(i) {
			e := <-in.events
			if e.Err != nil {
				return acknowledged, false, e.Err
			}
			acknowledged = e.Number
			w.Taken(e.Number)
		}
	}
	if err := w.Close(ctx, 0, testWall()); err != nil {
		return acknowledged, false, err
	}
	return acknowledged, true, nil
}

// TestEveryFailure makes every write, sync, creation and folder sync of a run
// fail in turn: no acknowledged line is lost in a power cut afterwards, and no
// line is acknowledged after the failure.
func TestEveryFailure(t *testing.T) {
	const lines = 30
	clean := newMemoryDisk()
	if n, closed, err := drive(t, clean, lines); n != lines || !closed || err != nil {
		t.Fatalf("without a failure: %d lines, closed %v, %v", n, closed, err)
	}
	random := rand.New(rand.NewPCG(1, 2))
	runs := 0
	for _, kind := range []string{opWrite, opSync, opCreate, opFolder} {
		if clean.counts[kind] == 0 {
			t.Errorf("no %s in a run", kind)
		}
		for k := 1; k <= clean.counts[kind]; k++ {
			runs++
			disk := newMemoryDisk()
			disk.failKind, disk.failAt = kind, k
			acknowledged, closed, err := drive(t, disk, lines)
			if !disk.failed || !errors.Is(err, errDisk) || closed {
				t.Fatalf("%s %d: %v, closed %v", kind, k, err, closed)
			}
			for range 10 {
				after := disk.afterPowerCut(random)
				if acknowledged == 0 && after.names["r"] == nil {
					continue
				}
				run, err := parse(after.names["r"].content, Limit{}.orUsual())
				if acknowledged == 0 && errors.Is(err, ErrNoOpening) {
					continue
				}
				if err != nil || run.Head.Lines < acknowledged {
					t.Fatalf("%s %d: %v, %d lines of %d acknowledged", kind, k, err, run.Head.Lines, acknowledged)
				}
			}
		}
	}
	// 30 lines and the closing one, a write and a sync each; the name twice.
	if runs != 31+31+1+2 {
		t.Errorf("%d failures", runs)
	}
	t.Logf("%d failures x 10 power cuts: 0 acknowledged lines lost, 0 late acknowledgements", runs)
}

// cutImage is what a power cut left, and what it is held against.
type cutImage struct {
	image, content []byte
	acknowledged   int64
}

// TestPowerCut takes images of what a power cut leaves at every write and sync
// of runs whose lines come in bursts.
func TestPowerCut(t *testing.T) {
	images := 2000
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		images = 100_000
	}
	random := rand.New(rand.NewPCG(3, 4))
	taken, recovered := 0, 0
	found := map[string]int{}
	for taken < images {
		disk := newMemoryDisk()
		in := newInbox()
		acks := countingInbox{in, new(int64)}
		var cuts []cutImage
		disk.before = func(op string, n *memoryNode) { // in the committer's goroutine
			content := bytes.Clone(n.content)
			for range 4 {
				cuts = append(cuts, cutImage{n.image(random), content, *acks.acknowledged})
			}
		}
		w, err := create(disk, "r", testRun, NewDisk(acks))
		if err != nil {
			t.Fatal(err)
		}
		driveOn(t, w, in, 40)
		for _, c := range cuts {
			taken++
			what := checkImage(t, c.image, c.content, c.acknowledged)
			found[what]++
			if what == "torn" && taken%4 == 0 {
				recovered++
				checkRecovery(t, c.image, c.acknowledged)
			}
		}
		if run, err := parse(disk.names["r"].synced, Limit{}.orUsual()); err != nil || !run.Closed || run.Head.Lines != 41 {
			t.Fatalf("closed record: %v", err)
		}
	}
	if found["torn"] < taken/10 || recovered < taken/100 || found["nothing"] == 0 {
		t.Errorf("%d images: %v, %d recovered", taken, found, recovered)
	}
	t.Logf("%d images, %v, %d recovered: 0 acknowledged lost, 0 called damaged, 0 wrong", taken, found, recovered)
}

// countingInbox notes the highest line acknowledged, in the committer's goroutine.
type countingInbox struct {
	inbox
	acknowledged *int64
}

func (in countingInbox) Post(d time.Duration, e line.Event) {
	if e.Err == nil {
		*in.acknowledged = e.Number
	}
	in.inbox.Post(d, e)
}

// driveOn appends lines in bursts, most of the time without waiting.
func driveOn(t *testing.T, w *Writer, in inbox, lines int) {
	t.Helper()
	for i := 1; i <= lines; i++ {
		kind, payload := somePayload(i)
		if _, err := w.Append(line.Instant(i), testWall(), kind, payload); err != nil {
			t.Fatal(err)
		}
		for len(in.events) > 0 {
			w.Taken((<-in.events).Number)
		}
		if i%9 == 0 {
			in.waitFor(t, w, int64(i))
		}
	}
	if err := w.Close(context.Background(), 0, testWall()); err != nil {
		t.Fatal(err)
	}
}

// checkImage holds an image against what was written so far.
func checkImage(t *testing.T, image, content []byte, acknowledged int64) string {
	t.Helper()
	run, err := parse(image, Limit{}.orUsual())
	if errors.Is(err, ErrNoOpening) && acknowledged == 0 {
		return "nothing"
	}
	if err != nil {
		t.Fatalf("image of %d bytes, %d lines acknowledged: %v", len(image), acknowledged, err)
	}
	good := encodeRun(run)
	switch {
	case run.Head.Lines < acknowledged:
		t.Fatalf("%d lines of %d acknowledged", run.Head.Lines, acknowledged)
	case !bytes.HasPrefix(content, good):
		t.Fatalf("%d good lines are not those written", run.Head.Lines)
	case !bytes.Equal(append(good, run.Torn...), image):
		t.Fatal("good lines and tail are not the image")
	case len(run.Torn) == 0 && len(image) > len(content):
		t.Fatal("more than was written and not torn")
	case len(run.Torn) > 0:
		return "torn"
	}
	return "clean"
}

// checkRecovery recovers a torn image, and recovers it again after each single
// failure and power cut on the way.
func checkRecovery(t *testing.T, image []byte, acknowledged int64) {
	t.Helper()
	before, err := parse(image, Limit{}.orUsual())
	if err != nil {
		t.Fatal(err)
	}
	disk := newMemoryDisk()
	disk.names["r"] = &memoryNode{content: image, synced: image}
	run, err := recoverRecord(disk, "r", testWall())
	if err != nil {
		t.Fatal(err)
	}
	checkRecovered(t, disk, run, before)
	if run.Head.Lines <= acknowledged {
		t.Fatalf("%d lines of %d acknowledged, with the recovered one", run.Head.Lines, acknowledged)
	}
}

// checkRecovered holds a recovered record and its side file against the record before.
func checkRecovered(t *testing.T, disk *memoryDisk, run, before Run) {
	t.Helper()
	n := len(before.Events)
	if len(run.Events) != n+1 || run.Closed || len(run.Torn) > 0 {
		t.Fatalf("%d events after %d", len(run.Events), n)
	}
	after, err := parse(disk.names["r"].synced, Limit{}.orUsual())
	if err != nil || after.Head != run.Head {
		t.Fatalf("recovered record on the disk: %v, %+v, want %+v", err, after.Head, run.Head)
	}
	if !bytes.HasPrefix(disk.names["r"].content, encodeRun(before)) {
		t.Fatal("good lines were changed")
	}
	r, err := Decode[Recovered](run.Events[n])
	if err != nil {
		t.Fatal(err)
	}
	side := disk.names[r.File]
	if side == nil || !bytes.Equal(side.synced, before.Torn) || r.Bytes != int64(len(before.Torn)) || r.SHA256 != sha256Hex(before.Torn) {
		t.Fatalf("side file %s does not hold the tail", r.File)
	}
}

// TestEveryFailureOfRecovery: a recovery that fails or loses its power anywhere leaves
// the record as it was or recovers it, and the next one ends the work.
func TestEveryFailureOfRecovery(t *testing.T) {
	data, err := os.ReadFile(writeRecord(t, 24, false))
	if err != nil {
		t.Fatal(err)
	}
	torn := data[:len(data)-40]
	before, err := parse(torn, Limit{}.orUsual())
	if err != nil || len(before.Torn) == 0 {
		t.Fatal(err)
	}
	start := func() *memoryDisk {
		disk := newMemoryDisk()
		disk.names["r"] = &memoryNode{content: torn, synced: torn}
		disk.durable["r"] = disk.names["r"]
		return disk
	}
	clean := start()
	run, err := recoverRecord(clean, "r", testWall())
	if err != nil {
		t.Fatal(err)
	}
	checkRecovered(t, clean, run, before)
	random := rand.New(rand.NewPCG(5, 6))
	failures := 0
	for _, kind := range []string{opWrite, opSync, opCreate, opFolder, opRename} {
		for k := 1; k <= clean.counts[kind]; k++ {
			failures++
			for range 20 {
				disk := start()
				disk.failKind, disk.failAt = kind, k
				if _, err := recoverRecord(disk, "r", testWall()); !errors.Is(err, errDisk) {
					t.Fatalf("%s %d: %v", kind, k, err)
				}
				if random.IntN(2) == 0 {
					disk = disk.afterPowerCut(random)
				}
				disk.failKind = ""
				run, err := recoverRecord(disk, "r", testWall())
				if err != nil {
					t.Fatalf("%s %d: %v", kind, k, err)
				}
				if len(run.Events) != len(before.Events)+1 {
					t.Fatalf("%s %d: %d events", kind, k, len(run.Events))
				}
				checkRecovered(t, disk, run, before)
			}
		}
	}
	// Side file and new record: a creation, a write, a sync each; both names.
	if failures != 2+2+2+2+1 {
		t.Errorf("%d failures", failures)
	}
}

// TestReopenTrustsNoSync: lines that a failed sync left in the machine's memory
// are there when the record is read and gone after a power cut, unless it is
// written anew. Every failure on the way leaves the record as it was.
func TestReopenTrustsNoSync(t *testing.T) {
	random := rand.New(rand.NewPCG(11, 12))
	start := func() *memoryDisk {
		disk := newMemoryDisk()
		disk.failKind, disk.failAt = opSync, 20
		if n, _, err := drive(t, disk, 30); !errors.Is(err, errDisk) || n != 19 {
			t.Fatalf("%d lines, %v", n, err)
		}
		disk.failKind, disk.failed, disk.counts = "", false, map[string]int{}
		return disk
	}
	again := func(disk *memoryDisk) (int64, error) {
		w, run, err := reopen(disk, "r", NewDisk(newInbox()))
		if err != nil {
			return 19, err
		}
		if run.Head.Lines != 20 || w.Acknowledged() != 20 {
			t.Fatalf("%d lines, %d acknowledged", run.Head.Lines, w.Acknowledged())
		}
		return 20, w.Leave(context.Background())
	}
	counts := map[string]int{opWrite: 1, opSync: 1, opCreate: 1, opRename: 1, opFolder: 1, "nothing": 1}
	for kind, most := range counts {
		for k := 1; k <= most; k++ {
			disk := start()
			disk.failKind, disk.failAt = kind, k
			acknowledged, err := again(disk)
			if kind != "nothing" && !errors.Is(err, errDisk) || kind == "nothing" && err != nil {
				t.Fatalf("%s %d: %v", kind, k, err)
			}
			for range 20 {
				checkImage(t, disk.afterPowerCut(random).names["r"].content, disk.names["r"].content, acknowledged)
			}
			if kind == "nothing" {
				for name, n := range disk.counts {
					if counts[name] != n {
						t.Errorf("%d times %s", n, name)
					}
				}
			}
		}
	}
}
