package lines

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"io"
	"slices"
	"strconv"
	"testing"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// chunk is what a port delivers at once: 400 lines of 10 bytes.
func chunk() []byte {
	var b bytes.Buffer
	for i := range 400 {
		b.WriteString("+")
		b.WriteString(strconv.FormatFloat(1000+float64(i*37%9000)/10, 'f', 2, 64))
		b.WriteString("\r\n")
	}
	return b.Bytes()
}

// chunks is a machine that has them at once, for ever.
type chunks struct {
	data []byte
	next line.Instant
}

func (m *chunks) Receive(line.Instant, []byte) {}
func (m *chunks) Due() (line.Instant, bool)    { return m.next, true }
func (m *chunks) Emit(line.Instant) []byte {
	m.next++
	return m.data
}

// BenchmarkAgainstScanner takes the same bytes through inbox, engine, framing,
// number and unit to a reading with its text, and through bufio.Scanner and
// strconv.ParseFloat to a number alone; both in turn, so that a busy machine
// slows both. It reports nanoseconds for a reading and how many times as fast
// the readings come.
func BenchmarkAgainstScanner(b *testing.B) {
	data := chunk()
	inbox := line.NewMemory(time.Time{})
	m := &chunks{data: data, next: 1}
	inbox.Connect(1, m, line.MemoryOptions{})
	e := line.NewEngine(inbox)
	i, err := New(e.Open(1, line.Settings{Name: "uut"}), Settings{Field: quantity.Field{Width: 8, Unit: "uV/V"}})
	if err != nil {
		b.Fatal(err)
	}
	readings, last := 0, 0.0
	i.Watch(func(r *bench.Reading, err error) error {
		readings++
		last = r.Value.SI
		return err
	})
	never := func() bool { return false }
	ours := func(rounds int) time.Duration {
		began := time.Now()
		if err := e.Wait(context.Background(), inbox.Now().Add(time.Duration(rounds)), never); !errors.Is(err, line.ErrDeadline) {
			b.Fatal(err)
		}
		return time.Since(began)
	}
	numbers := 0
	scanner := func(rounds int) time.Duration {
		began := time.Now()
		s := bufio.NewScanner(&repeated{data: data, left: rounds})
		for s.Scan() {
			x, err := strconv.ParseFloat(s.Text(), 64)
			if err != nil {
				b.Fatal(err)
			}
			numbers++
			last = x
		}
		return time.Since(began)
	}
	ours(10)
	scanner(10)
	readings, numbers = 0, 0
	var us, they []time.Duration
	b.ResetTimer()
	for range b.N {
		us = append(us, ours(20))
		they = append(they, scanner(20))
	}
	b.StopTimer()
	if readings < numbers-400*b.N || numbers == 0 || last == 0 {
		b.Fatal(readings, numbers)
	}
	one, other := middle(us)/(20*400), middle(they)/(20*400)
	b.ReportMetric(one, "ns/reading")
	b.ReportMetric(other, "scanner-ns/number")
	b.ReportMetric(other/one, "times-as-fast")
}

// middle is the median in nanoseconds: rounds that the machine interrupted do
// not count.
func middle(d []time.Duration) float64 {
	slices.Sort(d)
	return float64(d[len(d)/2].Nanoseconds())
}

// repeated reads the same bytes again and again.
type repeated struct {
	data []byte
	left int
	at   int
}

func (r *repeated) Read(p []byte) (int, error) {
	if r.at == len(r.data) {
		r.left--
		r.at = 0
	}
	if r.left <= 0 {
		return 0, errEnd
	}
	n := copy(p, r.data[r.at:])
	r.at += n
	return n, nil
}

var errEnd = io.EOF

// A reading is not allocated: texts of some hundred lines share one piece of
// memory.
func TestReadingsAllocateNothing(t *testing.T) {
	inbox := line.NewMemory(time.Time{})
	m := &chunks{data: chunk(), next: 1}
	inbox.Connect(1, m, line.MemoryOptions{})
	e := line.NewEngine(inbox)
	i, err := New(e.Open(1, line.Settings{}), Settings{Field: quantity.Field{Width: 8, Unit: "uV/V"}})
	if err != nil {
		t.Fatal(err)
	}
	readings := 0
	i.Watch(func(r *bench.Reading, err error) error {
		readings++
		return err
	})
	const rounds = 100
	allocations := testing.AllocsPerRun(10, func() {
		if err := e.Wait(context.Background(), inbox.Now().Add(rounds), func() bool { return false }); !errors.Is(err, line.ErrDeadline) {
			t.Fatal(err)
		}
	})
	each := allocations / (rounds * 400)
	if t.Logf("%v allocations for %d readings", allocations, rounds*400); each > 0.01 || readings < 11*rounds*400-400 {
		t.Errorf("%.4f allocations a reading, %d readings", each, readings)
	}
}
