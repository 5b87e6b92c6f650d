package line

import (
	"bytes"
	"context"
	"errors"
	"reflect"
	"strings"
	"testing"
	"time"
)

// counted frames begin with their length.
func counted(data []byte) int { return int(data[0]) }

func TestFramesCut(t *testing.T) {
	stream := []byte{3, 1, 2, 1, 4, 9, 9, 9, 2, 7, 5, 1}
	want := []string{"\x03\x01\x02", "\x01", "\x04\x09\x09\x09", "\x02\x07"}
	for size := 1; size <= len(stream); size++ {
		f := framer{cap: 8, whole: counted}
		var got []string
		for rest := stream; len(rest) > 0; rest = rest[min(size, len(rest)):] {
			f.take(rest[:min(size, len(rest))], func(data []byte, long bool) { got = append(got, string(data)) })
		}
		if !reflect.DeepEqual(got, want) || !f.partial() {
			t.Errorf("in pieces of %d: %q", size, got)
		}
		f.reset()
		f.take([]byte{1}, func(data []byte, _ bool) { got = append(got, "after reset") })
		if f.partial() || len(got) != 5 {
			t.Errorf("reset: %q", got)
		}
	}
	// One that would be too long is told once; then only a reset helps.
	for _, first := range [][]byte{{9, 0}, bytes.Repeat([]byte{0}, 9)} {
		f := framer{cap: 8, whole: counted}
		long, whole := 0, 0
		for range 3 {
			f.take(first, func(data []byte, over bool) {
				if over {
					long++
				} else {
					whole++
				}
			})
			f.take([]byte{1, 1, 1}, func([]byte, bool) { whole++ })
		}
		if long != 1 || whole != 0 {
			t.Errorf("% X: %d long, %d whole", first, long, whole)
		}
	}
}

// binary is a machine that answers each message of a script, split by what it
// was sent at once.
type binary struct {
	script map[string][]said
	heard  []Instant
	out    []Event
}

func (m *binary) Receive(at Instant, data []byte) {
	m.heard = append(m.heard, at)
	for _, s := range m.script[string(data)] {
		m.out = append(m.out, Event{At: at.Add(s.after), Data: []byte(s.text)})
	}
}

func (m *binary) Due() (Instant, bool) {
	if len(m.out) == 0 {
		return 0, false
	}
	return m.out[0].At, true
}

func (m *binary) Emit(Instant) []byte {
	data := m.out[0].Data
	m.out = m.out[1:]
	return data
}

func TestAskFrames(t *testing.T) {
	m := &binary{script: map[string][]said{
		"\x01?":     {{5 * ms, "\x04a"}, {9 * ms, "bc"}},
		"\x02late":  {{3 * time.Second, "\x02x"}},
		"\x03long":  {{ms, "\xffzz"}, {2 * ms, "\x02k"}},
		"\x04who":   {{ms, "\x03me"}},
		"\x05short": {{ms, "\x05me"}},
	}}
	_, e, l := table(m, Settings{Whole: counted, Cap: 16, Silence: 4 * ms})
	ctx := context.Background()
	a, err := l.Ask(ctx, "\x01?", time.Second)
	if err != nil || a.Text != "\x04abc" || a.At != Instant(10*ms) {
		t.Fatalf("%+v, %v", a, err)
	}
	// The next question waits for the silence after the answer.
	if a, err = l.Ask(ctx, "\x01?", time.Second); err != nil || a.Sent != Instant(14*ms) {
		t.Errorf("%+v, %v", a, err)
	}
	known := func(s string) bool { return s == "\x03me" }
	for _, c := range []struct{ question, text string }{
		{"\x02late", "read reference on port 1: no answer to 02 6C 61 74 65 within 2 s"},
		{"\x03long", "read reference on port 1: the answer is too long: 03 6C 6F 6E 67 was answered with over 16 bytes"},
		{"\x05short", "read reference on port 1: no answer to 05 73 68 6F 72 74 within 2 s"},
	} {
		if _, err := l.Ask(ctx, c.question, 2*time.Second); err == nil || err.Error() != c.text || !l.Doubtful() {
			t.Errorf("%v, doubtful %v", err, l.Doubtful())
		}
		if err := l.Resync(ctx, "\x04who", known); err != nil {
			t.Errorf("resync after % X: %v", c.question, err)
		}
		if a, err := l.Ask(ctx, "\x01?", time.Second); err != nil || a.Text != "\x04abc" {
			t.Errorf("after % X: %+v, %v", c.question, a, err)
		}
	}
	err = l.Resync(ctx, "\x01?", known)
	if want := "read reference on port 1: 01 3F was answered 04 61 62 63, which is not the answer expected"; err == nil || err.Error() != want {
		t.Errorf("%v", err)
	}
	if err := e.Wait(ctx, e.Now(), func() bool { return false }); !errors.Is(err, ErrDeadline) {
		t.Error(err)
	}
}

// An echo is taken off only when it is stated, whole and before the answer.
func TestFramesEcho(t *testing.T) {
	m := &binary{script: map[string][]said{"\x03ab": {{ms, "\x03"}, {2 * ms, "ab\x02"}, {3 * ms, "x"}}}}
	_, _, l := table(m, Settings{Whole: counted, Echo: true})
	if a, err := l.Ask(context.Background(), "\x03ab", time.Second); err != nil || a.Text != "\x02x" {
		t.Errorf("%q, %v", a.Text, err)
	}
	m = &binary{script: map[string][]said{"\x03ab": {{ms, "\x03ab\x02x"}}}}
	_, _, l = table(m, Settings{Whole: counted})
	if a, err := l.Ask(context.Background(), "\x03ab", time.Second); err != nil || a.Text != "\x03ab" {
		t.Errorf("%q, %v", a.Text, err)
	}
}

// Bytes are handed over as they come, and told where some were lost.
func TestOnBytes(t *testing.T) {
	inbox := NewMemory(time.Time{})
	inbox.Connect(1, &ticker{every: 10 * ms, text: "\n\x00ab"}, MemoryOptions{})
	e := NewEngine(inbox)
	l := e.Open(1, Settings{Name: "converter on port 1"})
	var got []Bytes
	l.OnBytes(func(b Bytes) error { got = append(got, b); return nil })
	inbox.Post(15*ms, Event{Kind: KindOverflow})
	if err := e.Wait(context.Background(), Instant(25*ms), func() bool { return false }); !errors.Is(err, ErrDeadline) {
		t.Fatal(err)
	}
	want := []Bytes{{[]byte("\n\x00ab"), 0, true}, {[]byte("\n\x00ab"), Instant(10 * ms), false}, {[]byte("\n\x00ab"), Instant(20 * ms), true}}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("%+v", got)
	}
	if _, err := l.Ask(context.Background(), "?", time.Second); !errors.Is(err, ErrFreeRunning) || !strings.Contains(err.Error(), "converter") {
		t.Errorf("asked: %v", err)
	}
}
