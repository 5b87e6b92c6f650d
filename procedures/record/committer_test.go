package record

import (
	"context"
	"errors"
	"fmt"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"kymobench/bench/line"
)

// TestSyncIsNeverTriedAgain: a committer that did would acknowledge what is lost.
func TestSyncIsNeverTriedAgain(t *testing.T) {
	disk := newMemoryDisk()
	disk.failKind, disk.failAt = opSync, 5
	_, _, err := drive(t, disk, 30)
	if !errors.Is(err, errDisk) || disk.counts[opSync] != 5 || disk.counts[opWrite] != 5 {
		t.Errorf("%v: %d syncs, %d writes", err, disk.counts[opSync], disk.counts[opWrite])
	}
}

// TestHangingDisk: appending never waits for the disk, Close waits no longer
// than its context, and what waits is bounded.
func TestHangingDisk(t *testing.T) {
	disk := newMemoryDisk()
	disk.gate, disk.arrived = make(chan struct{}), make(chan struct{}, 1)
	in := newInbox()
	c := NewDisk(in)
	c.most = 1 << 16
	w, err := create(disk, "r", testRun, c)
	if err != nil {
		t.Fatal(err)
	}
	_, opened := somePayload(1)
	if _, err := w.Append(0, testWall(), KindOpened, opened); err != nil {
		t.Fatal(err)
	}
	<-disk.arrived
	var lines int64
	for err == nil {
		lines++
		_, err = w.Append(line.Instant(lines)*1e9, testWall(), KindPrompt, Prompt{Text: strings.Repeat("a", 1000)})
		if lines > 200 {
			t.Fatal("what waits is not bounded")
		}
	}
	if !errors.Is(err, ErrBehind) || lines < 50 {
		t.Errorf("line %d: %v", lines, err)
	}
	if b := w.Behind(7e9); b != 7*time.Second || b < LongestUnsynced {
		t.Errorf("behind %v", b)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if err := w.Close(ctx, 0, testWall()); !errors.Is(err, ErrBehind) || !errors.Is(err, context.Canceled) {
		t.Errorf("close: %v", err)
	}
	close(disk.gate)
	<-c.done
	for len(in.events) > 0 {
		if e := <-in.events; e.Err == nil {
			t.Errorf("line %d acknowledged after the error", e.Number)
		}
	}
}

// TestSettleHonoursContext: a disk that hangs in the closing does not hang the program.
func TestSettleHonoursContext(t *testing.T) {
	disk := newMemoryDisk()
	disk.gate, disk.arrived = make(chan struct{}), make(chan struct{}, 1)
	c := NewDisk(newInbox())
	w, err := create(disk, "r", testRun, c)
	if err != nil {
		t.Fatal(err)
	}
	_, opened := somePayload(1)
	if _, err := w.Append(0, testWall(), KindOpened, opened); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if err := w.Close(ctx, 0, testWall()); !errors.Is(err, context.Canceled) {
		t.Errorf("close: %v", err)
	}
	close(disk.gate)
	<-c.done
}

// posted is an event a Simulated committer posted, with its delay.
type posted struct {
	delay  time.Duration
	number int64
}

type listInbox struct{ events *[]posted }

func (in listInbox) Post(d time.Duration, e line.Event) {
	*in.events = append(*in.events, posted{d, e.Number})
}

// TestSimulatedCommitter: one durable event is on its way at a time, and it
// stands for all lines appended before it was started.
func TestSimulatedCommitter(t *testing.T) {
	var events []posted
	delay := time.Duration(0)
	latency := func() time.Duration { delay += time.Millisecond; return delay }
	path := filepath.Join(t.TempDir(), "r")
	w, err := Create(path, testRun, NewSimulated(listInbox{&events}, latency))
	if err != nil {
		t.Fatal(err)
	}
	add := func(n int) {
		for range n {
			kind, payload := somePayload(int(w.Head().Lines) + 1)
			if _, err := w.Append(0, testWall(), kind, payload); err != nil {
				t.Fatal(err)
			}
		}
	}
	add(4)
	w.Taken(1)
	add(3)
	w.Taken(4)
	w.Taken(4)
	w.Taken(2)
	w.Taken(99)
	w.Taken(7)
	add(1)
	want := []posted{{1e6, 1}, {2e6, 4}, {3e6, 7}, {4e6, 8}}
	if fmt.Sprint(events) != fmt.Sprint(want) {
		t.Errorf("%v, want %v", events, want)
	}
	if w.Acknowledged() != 7 {
		t.Errorf("acknowledged %d", w.Acknowledged())
	}
	if err := w.Leave(context.Background()); err != nil {
		t.Fatal(err)
	}
	run, err := ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var knew []int64
	for _, e := range run.Events {
		knew = append(knew, e.Durable)
	}
	if fmt.Sprint(knew) != "[0 0 0 0 1 1 1 7]" {
		t.Errorf("d is %v", knew)
	}
}

// TestSimulatedCommitterFails: its errors come as those of the real one do.
func TestSimulatedCommitterFails(t *testing.T) {
	for _, kind := range []string{opWrite, opSync} {
		disk := newMemoryDisk()
		disk.failKind, disk.failAt = kind, 1
		in := newInbox()
		w, err := create(disk, "r", testRun, NewSimulated(in, noLatency))
		if err != nil {
			t.Fatal(err)
		}
		_, opened := somePayload(1)
		if _, err := w.Append(0, testWall(), KindOpened, opened); err != nil {
			t.Fatal(err)
		}
		for n := 0; err == nil && n < 1000; n++ {
			_, err = w.Append(0, testWall(), KindPrompt, Prompt{Text: strings.Repeat("a", 1000)})
		}
		if kind == opWrite && !errors.Is(err, errDisk) {
			t.Errorf("%s: %v", kind, err)
		}
		if err := w.Close(context.Background(), 0, testWall()); !errors.Is(err, errDisk) {
			t.Errorf("%s: close: %v", kind, err)
		}
	}
}
