package line

import (
	"context"
	"errors"
	"reflect"
	"strings"
	"testing"
	"time"
)

// teller is a machine that answers a message with what its script says, each
// after a time of its own.
type teller struct {
	part   []byte
	script map[string][]said
	heard  []string
	out    []Event
}

type said struct {
	after time.Duration
	text  string
}

func (m *teller) Receive(at Instant, data []byte) {
	for _, c := range data {
		if c != '\n' {
			m.part = append(m.part, c)
			continue
		}
		m.heard = append(m.heard, string(m.part))
		for _, s := range m.script[string(m.part)] {
			m.out = append(m.out, Event{At: at.Add(s.after), Data: []byte(s.text)})
		}
		m.part = nil
	}
}

func (m *teller) Due() (Instant, bool) {
	if len(m.out) == 0 {
		return 0, false
	}
	return m.out[0].At, true
}

func (m *teller) Emit(Instant) []byte {
	data := m.out[0].Data
	m.out = m.out[1:]
	return data
}

// ticker sends a line every so often by itself.
type ticker struct {
	next  Instant
	every time.Duration
	text  string
}

func (m *ticker) Receive(Instant, []byte) {}
func (m *ticker) Due() (Instant, bool)    { return m.next, true }
func (m *ticker) Emit(Instant) []byte {
	m.next = m.next.Add(m.every)
	return []byte(m.text)
}

const ms = time.Millisecond

func table(m Machine, s Settings) (*Memory, *Engine, *Line) {
	inbox := NewMemory(time.Time{})
	inbox.Connect(1, m, MemoryOptions{Transit: ms})
	e := NewEngine(inbox)
	s.Name = "reference on port 1"
	return inbox, e, e.Open(1, s)
}

func TestAsk(t *testing.T) {
	inbox, _, l := table(&teller{script: map[string][]said{
		"READ?": {{30 * ms, "+1.5"}, {31 * ms, "0\r\n"}},
		"LATE?": {{3 * time.Second, "late\n"}},
		"LONG?": {{ms, strings.Repeat("x", 300)}, {2 * ms, "x\n"}},
		"WHO?":  {{5 * ms, "me\r"}},
	}}, Settings{})
	ctx := context.Background()
	a, err := l.Ask(ctx, "READ?", time.Second)
	if want := (Answer{Text: "+1.50", Sent: 0, At: Instant(32 * ms)}); err != nil || a != want {
		t.Fatalf("%+v, %v; want %+v", a, err, want)
	}
	if _, err := l.Ask(ctx, "LONG?", time.Second); !errors.Is(err, ErrLong) || l.Doubtful() || l.Long() != 1 {
		t.Errorf("a long answer: %v, doubtful %v, %d long", err, l.Doubtful(), l.Long())
	}
	before := inbox.Now()
	_, err = l.Ask(ctx, "LATE?", 2*time.Second)
	if want := `read reference on port 1: no answer to "LATE?" within 2 s`; err == nil || err.Error() != want || !errors.Is(err, ErrDeadline) {
		t.Fatalf("%v; want %s", err, want)
	}
	if took := inbox.Now().Sub(before); took != 2*time.Second {
		t.Errorf("the deadline came after %v", took)
	}
	var port *PortError
	if _, err := l.Ask(ctx, "READ?", time.Second); !errors.Is(err, ErrDoubtful) || !errors.As(err, &port) {
		t.Fatalf("asked on a doubtful line: %v", err)
	}
	// The late answer comes while the line is drained and is not taken for the
	// identity.
	if err := l.Resync(ctx, "WHO?", func(s string) bool { return s == "me" }); err != nil || l.Stale() != 1 {
		t.Fatalf("resync: %v, %d stale", err, l.Stale())
	}
	if a, err := l.Ask(ctx, "READ?", time.Second); err != nil || a.Text != "+1.50" {
		t.Errorf("after resync: %+v, %v", a, err)
	}
}

// A second line of the same answer is not taken for the next one, and neither
// is one whose first bytes came before the question.
func TestStale(t *testing.T) {
	inbox, e, l := table(&teller{script: map[string][]said{
		"A?": {{10 * ms, "a\nagain\n"}, {20 * ms, "once more\nha"}},
		"B?": {{10 * ms, "lf\n"}, {20 * ms, "b\n"}},
	}}, Settings{})
	ctx := context.Background()
	if a, err := l.Ask(ctx, "A?", time.Second); err != nil || a.Text != "a" {
		t.Fatalf("%+v, %v", a, err)
	}
	if err := e.Wait(ctx, inbox.Now().Add(100*ms), func() bool { return false }); !errors.Is(err, ErrDeadline) {
		t.Fatal(err)
	}
	if l.Stale() != 2 {
		t.Errorf("%d stale", l.Stale())
	}
	if a, err := l.Ask(ctx, "B?", time.Second); err != nil || a.Text != "b" || l.Stale() != 3 {
		t.Errorf("%+v, %v, %d stale", a, err, l.Stale())
	}
	inbox, _, l = table(&teller{script: map[string][]said{"B?": {{10 * ms, "lf\nb\n"}}}}, Settings{})
	inbox.Post(0, Event{Kind: KindBytes, Port: 1, Data: []byte("ha")})
	if err := l.Send(ctx, "X", time.Second); err != nil {
		t.Fatal(err)
	}
	if a, err := l.Ask(ctx, "B?", time.Second); err != nil || a.Text != "b" || l.Stale() != 1 {
		t.Errorf("both in one piece: %+v, %v, %d stale", a, err, l.Stale())
	}
}

// The end of somebody else's write is not the end of the question's.
func TestOtherWrite(t *testing.T) {
	inbox, _, l := table(&teller{script: map[string][]said{"A?": {{10 * ms, "a\n"}}}}, Settings{})
	inbox.Post(0, Event{Kind: KindWritten, Port: 1, Number: 1000, Err: ErrGone})
	if a, err := l.Ask(context.Background(), "A?", time.Second); err != nil || a.Text != "a" {
		t.Errorf("%+v, %v", a, err)
	}
}

// Half a line that was left behind does not spoil what comes after a Resync,
// which needs to ask only once.
func TestResyncDropsHalfALine(t *testing.T) {
	m := &teller{script: map[string][]said{"A?": {{10 * ms, "ha"}}, "WHO?": {{ms, "me\n"}}}}
	_, _, l := table(m, Settings{})
	ctx := context.Background()
	if _, err := l.Ask(ctx, "A?", time.Second); !errors.Is(err, ErrDeadline) {
		t.Fatal(err)
	}
	err := l.Resync(ctx, "WHO?", func(s string) bool { return s == "me" })
	if want := []string{"A?", "WHO?"}; err != nil || l.Stale() != 1 || !reflect.DeepEqual(m.heard, want) {
		t.Errorf("%v, %d stale, heard %q", err, l.Stale(), m.heard)
	}
}

// Bytes that a real inbox posted before the question, and that are taken after
// it, are no answer.
func TestPostedBefore(t *testing.T) {
	inbox, _, l := table(&teller{script: map[string][]said{"A?": {{10 * ms, "a\n"}}}}, Settings{})
	inbox.now = Instant(time.Second)
	inbox.queue = append(inbox.queue, queued{event: Event{At: Instant(999 * ms), Kind: KindBytes, Port: 1, Data: []byte("old\n")}})
	if a, err := l.Ask(context.Background(), "A?", time.Second); err != nil || a.Text != "a" || l.Stale() != 1 {
		t.Errorf("%+v, %v, %d stale", a, err, l.Stale())
	}
}

// An instrument that is given 8 s for an answer is given them by Resync too.
func TestResyncIsAsPatientAsAsk(t *testing.T) {
	m := &teller{script: map[string][]said{"SLOW?": {{11 * time.Second, "slow\n"}}, "WHO?": {{ms, "me\n"}}}}
	_, _, l := table(m, Settings{})
	ctx := context.Background()
	if _, err := l.Ask(ctx, "SLOW?", 8*time.Second); !errors.Is(err, ErrDeadline) {
		t.Fatal(err)
	}
	err := l.Resync(ctx, "WHO?", func(s string) bool { return s == "me" })
	if want := []string{"SLOW?", "WHO?"}; err != nil || l.Stale() != 1 || !reflect.DeepEqual(m.heard, want) {
		t.Errorf("%v, %d stale, heard %q", err, l.Stale(), m.heard)
	}
}

func TestEcho(t *testing.T) {
	script := map[string][]said{
		"SET 1": {{ms, "SET 1\r\n"}},
		"A?":    {{ms, "A?\r\n"}, {5 * ms, "a\n"}},
		"B?":    {{ms, "b\n"}},
		"C?":    {{ms, "C?\r\nB?\n"}},
	}
	_, _, l := table(&teller{script: script}, Settings{Echo: true})
	ctx := context.Background()
	if err := l.Send(ctx, "SET 1", time.Second); err != nil {
		t.Fatal(err)
	}
	// B? is not echoed, and C?'s answer looks like the echo that was missing.
	for _, c := range []struct{ question, want string }{{"A?", "a"}, {"B?", "b"}, {"C?", "B?"}} {
		if a, err := l.Ask(ctx, c.question, time.Second); err != nil || a.Text != c.want || l.Stale() != 0 {
			t.Errorf("%s: %+v, %v, %d stale", c.question, a, err, l.Stale())
		}
	}
	_, _, l = table(&teller{script: script}, Settings{})
	if a, err := l.Ask(ctx, "A?", time.Second); err != nil || a.Text != "A?" {
		t.Errorf("an echo nobody stated: %+v, %v", a, err)
	}
}

// While one port is asked, another's stream goes on; its callback's error ends
// the wait, and what was asked is then doubtful.
func TestOtherPort(t *testing.T) {
	inbox, e, l := table(&teller{script: map[string][]said{"A?": {{time.Second, "a\n"}}}}, Settings{Latency: 2 * time.Second})
	inbox.Connect(2, &ticker{next: Instant(5 * ms), every: 16 * ms, text: "1\n2\n"}, MemoryOptions{})
	l2 := e.Open(2, Settings{Name: "uut on port 2"})
	count, over := 0, errors.New("over pressure")
	var fail error
	l2.OnFrame(func(f Frame) error {
		count++
		if fail != nil && string(f.Data) == "2" {
			return errors.New("another")
		}
		return fail
	})
	ctx := context.Background()
	if a, err := l.Ask(ctx, "A?", 2*time.Second); err != nil || a.Text != "a" {
		t.Fatalf("%+v, %v", a, err)
	}
	if count != 63*2-1 { // bursts at 5, 21, ... 997 ms; the first line is passed over
		t.Errorf("%d frames went by", count)
	}
	fail = over
	if _, err := l.Ask(ctx, "A?", 2*time.Second); !errors.Is(err, over) || !l.Doubtful() {
		t.Errorf("%v, doubtful %v", err, l.Doubtful())
	}
	if count != 63*2-1+2 {
		t.Errorf("the rest of the bytes was lost: %d frames", count)
	}
	fail = nil
	if _, err := l2.Ask(ctx, "A?", time.Second); !errors.Is(err, ErrFreeRunning) {
		t.Errorf("asked a stream: %v", err)
	}
	if err := l.Resync(ctx, "A?", func(string) bool { return true }); err != nil {
		t.Errorf("resync: %v", err)
	}
}

func TestGone(t *testing.T) {
	inbox, e, l := table(&teller{}, Settings{})
	var told []Event
	e.Handle(KindGone, func(ev Event) error { told = append(told, ev); return nil })
	inbox.Post(100*ms, Event{Kind: KindGone, Port: 1, Err: ErrGone})
	ctx := context.Background()
	_, err := l.Ask(ctx, "A?", time.Second)
	if want := "read reference on port 1: the port is gone"; err == nil || err.Error() != want || inbox.Now() != Instant(100*ms) || len(told) != 1 {
		t.Errorf("%v at %v, told %v", err, inbox.Now(), told)
	}
	for what, err := range map[string]error{
		"send":   l.Send(ctx, "A", time.Second),
		"resync": l.Resync(ctx, "A?", func(string) bool { return true }),
	} {
		if !errors.Is(err, ErrGone) || inbox.Now() != Instant(100*ms) {
			t.Errorf("%s: %v at %v", what, err, inbox.Now())
		}
	}
}

func TestGoneDuringSend(t *testing.T) {
	inbox, _, l := table(&teller{}, Settings{})
	inbox.Post(0, Event{Kind: KindGone, Port: 1})
	if err := l.Send(context.Background(), "A", time.Second); !errors.Is(err, ErrGone) || inbox.Now() != 0 {
		t.Errorf("%v at %v", err, inbox.Now())
	}
}

func TestSend(t *testing.T) {
	m := &teller{}
	inbox, e, l := table(m, Settings{Terminator: "\r\n"})
	ctx, cancel := context.WithCancel(context.Background())
	if err := l.Send(ctx, "OUT 1", time.Second); err != nil || inbox.Now() != Instant(ms) {
		t.Errorf("%v at %v", err, inbox.Now())
	}
	nowhere := e.Open(7, Settings{Name: "valve on port 7"})
	if err := nowhere.Send(ctx, "X", time.Second); err == nil || err.Error() != "write valve on port 7: no such port" {
		t.Errorf("no port: %v", err)
	}
	if _, err := nowhere.Ask(ctx, "X?", time.Second); !errors.Is(err, ErrNoPort) {
		t.Errorf("no port: %v", err)
	}
	cancel()
	if err := l.Send(ctx, "OUT 2", time.Second); !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled: %v", err)
	}
	l.Fire("VENT")
	if err := l.Send(context.WithoutCancel(ctx), "OUT 3", time.Second); err != nil {
		t.Error(err)
	}
	if want := []string{"OUT 1\r", "OUT 2\r", "VENT\r", "OUT 3\r"}; !reflect.DeepEqual(m.heard, want) {
		t.Errorf("heard %q, want %q", m.heard, want)
	}
}

func TestResyncGivesUp(t *testing.T) {
	ctx := context.Background()
	inbox, _, l := table(&ticker{next: 0, every: 50 * ms, text: "x\n"}, Settings{Latency: time.Second})
	if err := l.Resync(ctx, "WHO?", func(string) bool { return true }); !errors.Is(err, ErrNotQuiet) || inbox.Now() > Instant(13*time.Second) {
		t.Errorf("a stream: %v at %v", err, inbox.Now())
	}
	_, _, l = table(&teller{script: map[string][]said{"WHO?": {{ms, "you\n"}}}}, Settings{Latency: time.Second})
	var other *UnrecognisedError
	if err := l.Resync(ctx, "WHO?", func(s string) bool { return s == "me" }); !errors.As(err, &other) || other.Text != "you" || !l.Doubtful() {
		t.Errorf("somebody else: %v", err)
	}
	_, _, l = table(&teller{}, Settings{Latency: time.Second})
	if err := l.Resync(ctx, "WHO?", func(s string) bool { return true }); !errors.Is(err, ErrDeadline) || !l.Doubtful() {
		t.Errorf("nobody: %v", err)
	}
}

// What an overflow may have torn is given up.
func TestOverflow(t *testing.T) {
	inbox, e, l := table(&teller{script: map[string][]said{"WHO?": {{ms, "me\n"}}}}, Settings{})
	inbox.Connect(2, &ticker{next: 0, every: 10 * ms, text: "12\n3"}, MemoryOptions{})
	var got []string
	e.Open(2, Settings{}).OnFrame(func(f Frame) error { got = append(got, string(f.Data)); return nil })
	inbox.Post(15*ms, Event{Kind: KindOverflow})
	ctx := context.Background()
	if err := e.Wait(ctx, Instant(35*ms), func() bool { return false }); !errors.Is(err, ErrDeadline) {
		t.Fatal(err)
	}
	if want := []string{"312", "312"}; !reflect.DeepEqual(got, want) {
		t.Errorf("%q, want %q", got, want) // of four: the first and the torn one are missing
	}
	if !l.Doubtful() {
		t.Error("the asked line is not doubtful")
	}
	if err := l.Resync(ctx, "WHO?", func(s string) bool { return s == "me" }); err != nil {
		t.Error(err)
	}
}

func TestNoWaitInside(t *testing.T) {
	m := &teller{}
	inbox, e, l := table(m, Settings{})
	ctx := context.Background()
	e.Handle(KindStop, func(Event) error {
		_, ask := l.Ask(ctx, "A?", time.Second)
		return errors.Join(ask, l.Send(ctx, "A", time.Second), e.Wait(ctx, 0, func() bool { return true }))
	})
	inbox.Post(0, Event{Kind: KindStop})
	err := e.Wait(ctx, Instant(time.Second), func() bool { return false })
	if joined, ok := err.(interface{ Unwrap() []error }); !ok || len(joined.Unwrap()) != 3 || !errors.Is(err, ErrInside) {
		t.Errorf("waited inside a handler: %v", err)
	}
	if err := e.Wait(ctx, Instant(time.Second), func() bool { return false }); !errors.Is(err, ErrDeadline) || len(m.heard) > 0 {
		t.Errorf("%v, heard %q", err, m.heard)
	}
}

// A stream of 1000 lines a second in bursts of 16 ms, five minutes of virtual
// time: the inbox, the engine and the framing of it.
func BenchmarkFiveMinutes(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		inbox := NewMemory(time.Time{})
		inbox.Connect(1, &ticker{every: 16 * ms, text: strings.Repeat("+1500.02\r\n", 16)}, MemoryOptions{})
		e := NewEngine(inbox)
		n := 0
		e.Open(1, Settings{}).OnFrame(func(f Frame) error { n++; return nil })
		if err := e.Wait(context.Background(), Instant(5*time.Minute), func() bool { return false }); !errors.Is(err, ErrDeadline) || n != 300_000+15 {
			b.Fatal(err, n)
		}
	}
}
