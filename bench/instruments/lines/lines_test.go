package lines

import (
	"context"
	"errors"
	"fmt"
	"math"
	"reflect"
	"strings"
	"testing"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// stream is a machine that sends its bursts one after another, then begins
// again if it goes round.
type stream struct {
	next   line.Instant
	every  time.Duration
	bursts []string
	round  bool
	sent   int
}

func (m *stream) Receive(line.Instant, []byte) {}
func (m *stream) Due() (line.Instant, bool) {
	return m.next, m.round || m.sent < len(m.bursts)
}
func (m *stream) Emit(line.Instant) []byte {
	m.next = m.next.Add(m.every)
	m.sent++
	return []byte(m.bursts[(m.sent-1)%len(m.bursts)])
}

func watch(t testing.TB, m line.Machine, f quantity.Field, until time.Duration, take func(*bench.Reading, error) error) error {
	inbox := line.NewMemory(time.Time{})
	inbox.Connect(1, m, line.MemoryOptions{})
	e := line.NewEngine(inbox)
	i, err := New(e.Open(1, line.Settings{Name: "uut on port 1"}), Settings{Field: f})
	if err != nil {
		t.Fatal(err)
	}
	i.Watch(take)
	return e.Wait(context.Background(), line.Instant(until), func() bool { return false })
}

func TestWatch(t *testing.T) {
	type got struct {
		text string
		uvv  float64
		at   time.Duration
		bad  bool
		long bool
	}
	var all []got
	m := &stream{every: 16 * time.Millisecond, bursts: []string{
		"0.02\r\n+1500.02\r\n-00", "00.50\r\n+150.02\r\n+15X0.02\r\n", strings.Repeat("1", 300) + "\r\n", "+0001.00\r\n"}}
	err := watch(t, m, quantity.Field{Width: 8, Unit: "uV/V"}, time.Second, func(r *bench.Reading, err error) error {
		x, e := r.Value.In(quantity.Unit{Name: "uV/V", Dimension: quantity.DimRatio, Factor: 1e-6})
		if err == nil && e != nil {
			t.Error(e)
		}
		if err == nil && math.Abs(r.Value.SI-x*1e-6) > 1e-18 {
			t.Errorf("%v V/V for %v uV/V", r.Value.SI, x)
		}
		if r.Sent != r.At {
			t.Errorf("sent at %v, came at %v", r.Sent, r.At)
		}
		all = append(all, got{r.Text, r.Value.Stated, time.Duration(r.At), err != nil, errors.Is(err, ErrLong)})
		return nil
	})
	ms := time.Millisecond
	want := []got{
		{"+1500.02", 1500.02, 0, false, false}, {"-0000.50", -0.5, 16 * ms, false, false},
		{"+150.02", 0, 16 * ms, true, false}, {"+15X0.02", 0, 16 * ms, true, false}, {"", 0, 32 * ms, true, true},
		{"+0001.00", 1, 48 * ms, false, false},
	}
	if !errors.Is(err, line.ErrDeadline) || !reflect.DeepEqual(all, want) {
		t.Errorf("%v\n got %v\nwant %v", err, all, want)
	}
}

func TestErrorsNameLineAndText(t *testing.T) {
	over := errors.New("over pressure")
	m := &stream{every: time.Millisecond, bursts: []string{"\nOL\n"}}
	err := watch(t, m, quantity.Field{Unit: "mmHg"}, time.Second, func(r *bench.Reading, err error) error {
		if err == nil || !strings.Contains(err.Error(), "read uut on port 1: ") || !strings.Contains(err.Error(), `"OL"`) {
			t.Errorf("%v", err)
		}
		return over
	})
	if !errors.Is(err, over) {
		t.Errorf("take's error: %v", err)
	}
	e := line.NewEngine(line.NewMemory(time.Time{}))
	if _, err := New(e.Open(1, line.Settings{}), Settings{Field: quantity.Field{Unit: "furlong"}}); err == nil {
		t.Error("a furlong is a unit")
	}
}

// Texts stay what they were however many come after them.
func TestTextsKeep(t *testing.T) {
	burst := ""
	for n := range 2000 {
		burst += fmt.Sprintf("%d\n", n)
	}
	var texts []string
	err := watch(t, &stream{every: time.Millisecond, bursts: []string{"\n" + burst}}, quantity.Field{Unit: "mmHg"}, time.Second,
		func(r *bench.Reading, err error) error { texts = append(texts, r.Text); return err })
	if !errors.Is(err, line.ErrDeadline) || strings.Join(texts, "\n")+"\n" != burst {
		t.Errorf("%v, %d texts", err, len(texts))
	}
}

// Five minutes of 1000 readings a second, in virtual time, with inbox, engine,
// framing and the number.
func BenchmarkFiveMinutes(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		m := &stream{every: 16 * time.Millisecond, bursts: []string{strings.Repeat("+1500.02\r\n", 16)}, round: true}
		n := 0
		err := watch(b, m, quantity.Field{Width: 8, Unit: "uV/V"}, 5*time.Minute, func(r *bench.Reading, err error) error {
			n++
			return err
		})
		if !errors.Is(err, line.ErrDeadline) || n != 300_015 {
			b.Fatal(err, n)
		}
	}
}
