package frames

import (
	"bufio"
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

// chunks is a machine that has the same bytes at once, for ever.
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
		return 0, io.EOF
	}
	n := copy(p, r.data[r.at:])
	r.at += n
	return n, nil
}

// seven is a frame of seven bytes: sync, int32, CRC-16.
func seven() quantity.Frame {
	return quantity.Frame{Length: 7, Sync: "A5", Number: quantity.Layout{Type: "int32", At: 1}, Scale: 0.01,
		Check: "crc-16/modbus", CheckAt: 5, CheckLittle: true}
}

func table(t testing.TB, data []byte, f quantity.Frame, take func(*bench.Reading, error) error) (*line.Memory, *line.Engine) {
	inbox := line.NewMemory(time.Time{})
	inbox.Connect(1, &chunks{data: data, next: 1}, line.MemoryOptions{})
	e := line.NewEngine(inbox)
	c, err := NewPort(e.Open(1, line.Settings{Name: "uut"})).Channel(Settings{Field: quantity.Field{Unit: "uV/V", Frame: f}})
	if err != nil {
		t.Fatal(err)
	}
	c.Watch(take)
	return inbox, e
}

// The same numbers as frames of seven bytes and as lines of text, as much as a
// port delivers at once.
func delivered() (frames, lines []byte) {
	for i := range 560 {
		n := 100000 + i*37%90000
		f := []byte{0xA5, 0, byte(n >> 16), byte(n >> 8), byte(n)}
		c := bitwise(f)
		frames = append(frames, f[0], f[1], f[2], f[3], f[4], byte(c), byte(c>>8))
		lines = append(lines, "+"+strconv.FormatFloat(float64(n)/100, 'f', 2, 64)+"\r\n"...)
	}
	return frames, lines
}

// BenchmarkAgainstScanner finds the numbers in frames, whole and with their CRC
// in order, and lets bufio.Scanner and strconv.ParseFloat find the same numbers
// in lines; and it takes frames through inbox, engine, framing, CRC, number and
// unit to a reading with its bytes that is handed over. All three in turn; it
// reports nanoseconds by the median of the rounds, which a busy machine's
// interruptions leave alone, and how many times as fast as the scanner the
// numbers and the readings come.
func BenchmarkAgainstScanner(b *testing.B) {
	data, lines := delivered()
	readings, numbers, found, last := 0, 0, 0, 0.0
	inbox, e := table(b, data, seven(), func(r *bench.Reading, err error) error {
		readings++
		last = r.Value.SI
		return err
	})
	const rounds = 20
	handed := func() {
		if err := e.Wait(context.Background(), inbox.Now().Add(rounds), func() bool { return false }); !errors.Is(err, line.ErrDeadline) {
			b.Fatal(err)
		}
	}
	reader := must(b, seven())
	var into [64]float64
	frames := func() {
		for range rounds {
			for rest := data; len(rest) >= 8; {
				n := reader.Take(rest, into[:])
				found += n
				rest = rest[7*n:]
			}
			found += reader.Run(data[len(data)-7:])
			last = into[0]
		}
	}
	scanner := func() {
		s := bufio.NewScanner(&repeated{data: lines, left: rounds})
		for s.Scan() {
			x, err := strconv.ParseFloat(s.Text(), 64)
			if err != nil {
				b.Fatal(err)
			}
			numbers++
			last = x
		}
	}
	all := []func(){frames, scanner, handed}
	took := make([][]float64, len(all))
	for _, f := range all {
		f()
	}
	readings, numbers, found = 0, 0, 0
	b.ResetTimer()
	for range b.N {
		for i, f := range all {
			began := time.Now()
			f()
			took[i] = append(took[i], float64(time.Since(began).Nanoseconds())/(rounds*560))
		}
	}
	b.StopTimer()
	if readings != b.N*rounds*560 || numbers != readings || found != readings || last == 0 {
		b.Fatal(readings, numbers, found)
	}
	for _, t := range took {
		slices.Sort(t)
	}
	middle := func(i int) float64 { return took[i][len(took[i])/2] }
	b.ReportMetric(middle(0), "ns/number")
	b.ReportMetric(middle(1), "scanner-ns/number")
	b.ReportMetric(middle(2), "ns/reading")
	b.ReportMetric(middle(1)/middle(0), "times-as-fast/number")
	b.ReportMetric(middle(1)/middle(2), "times-as-fast/reading")
}

// A reading is not allocated: it keeps its bytes where they came.
func TestReadingsAllocateNothing(t *testing.T) {
	data, _ := delivered()
	readings := 0
	inbox, e := table(t, data, seven(), func(r *bench.Reading, err error) error {
		readings++
		return err
	})
	const rounds = 100
	allocations := testing.AllocsPerRun(10, func() {
		if err := e.Wait(context.Background(), inbox.Now().Add(rounds), func() bool { return false }); !errors.Is(err, line.ErrDeadline) {
			t.Fatal(err)
		}
	})
	each := allocations / (rounds * 560)
	if t.Logf("%v allocations for %d readings", allocations, rounds*560); each > 0.001 || readings < 11*rounds*560-10 {
		t.Errorf("%.4f allocations a reading, %d readings", each, readings)
	}
}
