package record

import (
	"reflect"
	"testing"
	"time"

	"kymobench/bench/line"
)

// An event as AppendEvent returns it is the one that a reader finds.
func TestAppendEventIsWhatReadGives(t *testing.T) {
	path := t.TempDir() + "/" + testRun + ".record"
	w, err := Create(path, testRun, NewDisk(discard{}))
	if err != nil {
		t.Fatal(err)
	}
	var want []Event
	for i, payload := range []any{Opened{Schema: Schema, Run: testRun}, Vent{Why: "test <&> µ"}} {
		e, err := w.AppendEvent(line.Instant(i), testWall(), []string{KindOpened, KindVent}[i], payload)
		if err != nil {
			t.Fatal(err)
		}
		want = append(want, e)
	}
	if err := w.Leave(t.Context()); err != nil {
		t.Fatal(err)
	}
	run, err := ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(run.Events, want) {
		t.Errorf("read   %+v\nwanted %+v", run.Events, want)
	}
}

type discard struct{}

func (discard) Post(time.Duration, line.Event) {}
