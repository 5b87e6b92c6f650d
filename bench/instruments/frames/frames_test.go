package frames

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// bitwise is CRC-16/MODBUS from its definition, bit by bit, for tests alone.
func bitwise(data []byte) uint16 {
	r := uint16(0xffff)
	for _, b := range data {
		r ^= uint16(b)
		for range 8 {
			if r&1 == 1 {
				r = r>>1 ^ 0xA001
			} else {
				r >>= 1
			}
		}
	}
	return r
}

// kinds are the frames that the tests speak, each with what makes one of a raw
// number and a count.
type kind struct {
	name  string
	frame quantity.Frame
	make  func(raw int32, count uint8) []byte
}

func kinds() []kind {
	number := quantity.Layout{Type: "int24", At: 2}
	count := &quantity.Layout{Type: "uint8", At: 1}
	body := func(raw int32, count uint8) []byte {
		return []byte{0xA5, count, byte(raw >> 16), byte(raw >> 8), byte(raw)}
	}
	return []kind{
		{"crc16", quantity.Frame{Length: 7, Sync: "A5", Number: number, Scale: 0.01, Sequence: count, Check: "crc-16/modbus", CheckAt: 5, CheckLittle: true},
			func(raw int32, count uint8) []byte {
				f := body(raw, count)
				c := bitwise(f)
				return append(f, byte(c), byte(c>>8))
			}},
		{"sum8", quantity.Frame{Length: 6, Sync: "A5", Number: number, Scale: 0.01, Sequence: count, Check: "sum8", CheckAt: 5, CheckFrom: 1},
			func(raw int32, count uint8) []byte {
				f := body(raw, count)
				return append(f, f[1]+f[2]+f[3]+f[4])
			}},
		{"none", quantity.Frame{Length: 7, Sync: "A55A", End: "0D", Number: quantity.Layout{Type: "int24", At: 3}, Scale: 0.01, Sequence: &quantity.Layout{Type: "uint8", At: 2}},
			func(raw int32, count uint8) []byte {
				return []byte{0xA5, 0x5A, count, byte(raw >> 16), byte(raw >> 8), byte(raw), 0x0D}
			}},
	}
}

type got struct {
	x    float64
	seq  uint64
	at   line.Instant
	text string
	err  error
}

// heard gives pieces of a stream to a channel, one a millisecond.
func heard(t testing.TB, f quantity.Frame, pieces [][]byte) (all []got, p *Port) {
	inbox := line.NewMemory(time.Time{})
	e := line.NewEngine(inbox)
	p = NewPort(e.Open(1, line.Settings{Name: "converter on port 1"}))
	c, err := p.Channel(Settings{Field: quantity.Field{Unit: "mmHg", Frame: f}})
	if err != nil {
		t.Fatal(err)
	}
	c.Watch(func(r *bench.Reading, err error) error {
		all = append(all, got{r.Value.Stated, r.Sequence, r.At, r.Received(), err})
		return nil
	})
	for i, piece := range pieces {
		inbox.Post(time.Duration(i)*time.Millisecond, line.Event{Kind: line.KindBytes, Port: 1, Data: piece})
	}
	if err := e.Wait(context.Background(), line.Instant(time.Hour), func() bool { return false }); !errors.Is(err, line.ErrDeadline) {
		t.Fatal(err)
	}
	return all, p
}

func pieces(data []byte, size int) (out [][]byte) {
	for chunk := range slices.Chunk(data, size) {
		out = append(out, slices.Clone(chunk))
	}
	return out
}

func good(all []got) (out []got) {
	for _, g := range all {
		if g.err == nil {
			out = append(out, g)
		}
	}
	return out
}

// raw is the number of frame i, which never stands still.
func raw(i int) int32 { return int32(i*7919%200000 - 100000) }

func stream(k kind, n int) (data []byte) {
	for i := range n {
		data = append(data, k.make(raw(i), uint8(i+250))...)
	}
	return data
}

// Whatever the pieces, every frame comes once, with its number and its count,
// but the last ones, which wait for what proves them.
func TestStream(t *testing.T) {
	const n = 600
	for _, k := range kinds() {
		data := stream(k, n)
		for _, size := range []int{1, 2, 3, 5, 6, 7, 8, 64, 1000, len(data)} {
			all, p := heard(t, k.frame, pieces(data, size))
			first := min(newCutter(must(t, k.frame), nil, nil).ahead, 1) // passed over, for it might be half of a damaged one
			want := n - waiting(t, k.frame) - first
			if len(all) != want || p.Frames() != int64(want) || p.Damaged() != 0 {
				t.Fatalf("%s in pieces of %d: %d readings, %d frames, %d damaged", k.name, size, len(all), p.Frames(), p.Damaged())
			}
			for j, g := range all {
				i := j + first
				// The stamp is that of the piece in which its last byte came.
				at := line.Instant((k.frame.Length*(i+1) - 1) / size * int(time.Millisecond))
				text := fmt.Sprintf("%X", data[i*k.frame.Length:(i+1)*k.frame.Length])
				if g.err != nil || g.x != float64(raw(i))/100 || g.seq != all[0].seq+uint64(j) || g.at != at || g.text != text {
					t.Fatalf("%s in pieces of %d: frame %d is %+v, want at %v, text %s", k.name, size, i, g, at, text)
				}
			}
		}
	}
}

// waiting is how many frames wait for what follows them.
func waiting(t testing.TB, f quantity.Frame) int {
	c := newCutter(must(t, f), nil, nil)
	return c.ahead + min(c.after, 1)
}

// legal is every number that the stream holds.
func legal(n int) map[float64]bool {
	m := map[float64]bool{}
	for i := range n {
		m[float64(raw(i))/100] = true
	}
	return m
}

// One byte changed, lost, doubled or put in, at every place of the stream: no
// number that was not sent, and at most the frames around it are missing.
func TestOneFault(t *testing.T) {
	const n = 40
	r := rand.New(rand.NewPCG(3, 4))
	for _, k := range kinds() {
		data, numbers := stream(k, n), legal(n)
		for at := range data {
			for fault := range 4 {
				var bad []byte
				switch fault {
				case 0:
					bad = slices.Clone(data)
					bad[at] ^= byte(1 + r.IntN(255))
				case 1:
					bad = slices.Delete(slices.Clone(data), at, at+1)
				case 2:
					bad = slices.Insert(slices.Clone(data), at, data[at])
				case 3:
					bad = slices.Insert(slices.Clone(data), at, byte(r.Uint32()))
				}
				all, _ := heard(t, k.frame, pieces(bad, 1+r.IntN(30)))
				last := -1.0
				for _, g := range good(all) {
					// A change inside a frame that nothing proves is a number too.
					if !numbers[g.x] && (k.name != "none" || fault != 0) {
						t.Fatalf("%s, fault %d at byte %d: %v (%s) was never sent", k.name, fault, at, g.x, g.text)
					}
					if g.x == last {
						t.Fatalf("%s, fault %d at byte %d: %v came twice", k.name, fault, at, g.x)
					}
					last = g.x
				}
				// Nothing can be in step before as many frames have come as that needs.
				c := newCutter(must(t, k.frame), nil, nil)
				if edge := c.need * k.frame.Length; at > edge && at < len(data)-2*edge-2*k.frame.Length && len(good(all)) < n-3-2*c.ahead-1 {
					t.Errorf("%s, fault %d at byte %d: only %d of %d frames", k.name, fault, at, len(good(all)), n)
				}
			}
		}
	}
}

func must(t testing.TB, f quantity.Frame) *quantity.FrameReader {
	r, err := f.Reader()
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// A steady pressure, a sync byte that also stands in the number, a checksum of
// eight bits that fits a wrong place too: frames all alike, so that nothing can
// tell the places apart, give no number; as soon as they differ, only the right
// ones come.
func TestStandingStill(t *testing.T) {
	f := quantity.Frame{Length: 4, Sync: "A5", Number: quantity.Layout{Type: "int16", At: 1}, Check: "sum8", CheckAt: 3, CheckFrom: 1}
	// A5 A5 00 A5 | A5 A5 00 A5: at byte 1 stands A5 00 A5 A5, which is whole too.
	still := []byte{0xA5, 0xA5, 0x00, 0xA5}
	other := []byte{0xA5, 0x01, 0x02, 0x03}
	all, _ := heard(t, f, pieces(slices.Repeat(still, 50), 16))
	if len(all) != 0 {
		t.Errorf("%+v", all)
	}
	all, _ = heard(t, f, pieces(append(slices.Repeat(still, 50), slices.Repeat(other, 50)...), 16))
	if len(good(all)) < 40 {
		t.Errorf("%d readings", len(good(all)))
	}
	for _, g := range good(all) {
		if g.x != 0x0102 && g.x != -23296 { // A500
			t.Errorf("%v, %s", g.x, g.text)
		}
	}
}

// The count tells what is missing, over its wraps; a frame that comes again is
// none.
func TestSequence(t *testing.T) {
	k := kinds()[0]
	data := stream(k, 300)
	n := k.frame.Length
	data = slices.Delete(data, 100*n, 117*n)
	data = slices.Insert(data, 50*n, data[49*n:50*n]...)
	all, _ := heard(t, k.frame, pieces(data, 33))
	repeated := 0
	for i, g := range all {
		switch {
		case errors.Is(g.err, ErrRepeated):
			repeated++
			if i != 50 {
				t.Errorf("reading %d is one that came again", i)
			}
		case g.x != float64(raw(int(g.seq-all[0].seq)))/100:
			t.Fatalf("reading %d: count %d, number %v", i, g.seq, g.x)
		}
	}
	if repeated != 1 || len(all) != 300-17+1-1 || all[len(all)-1].seq-all[0].seq != 299-1 {
		t.Errorf("%d repeated of %d", repeated, len(all))
	}
}

// Two channels: one frame, one instant, one count, two numbers in two units.
func TestTwoChannels(t *testing.T) {
	inbox := line.NewMemory(time.Time{})
	e := line.NewEngine(inbox)
	p := NewPort(e.Open(1, line.Settings{Name: "converter on port 1"}))
	frame := quantity.Frame{Length: 9, Sync: "A55A", Number: quantity.Layout{Type: "int16", At: 3}, Scale: 0.1, Sequence: &quantity.Layout{Type: "uint8", At: 2}, Check: "crc-16/modbus", CheckAt: 7, CheckLittle: true}
	uut, err := p.Channel(Settings{Field: quantity.Field{Unit: "uV/V", Frame: frame}})
	if err != nil {
		t.Fatal(err)
	}
	other := frame
	other.Number, other.Scale, other.Offset, other.Over = quantity.Layout{Type: "uint16", At: 5, Order: "little-endian"}, 0, -100, []int64{65535}
	applied, err := p.Channel(Settings{Field: quantity.Field{Unit: "kPa", Frame: other}})
	if err != nil {
		t.Fatal(err)
	}
	var a, b []bench.Reading
	over := 0
	uut.Watch(func(r *bench.Reading, err error) error { a = append(a, *r); return err })
	applied.Watch(func(r *bench.Reading, err error) error {
		if errors.Is(err, quantity.ErrOverRange) {
			over++
		} else if err != nil {
			return err
		}
		b = append(b, *r)
		return nil
	})
	for i := range 21 {
		f := []byte{0xA5, 0x5A, byte(i), 0xff, byte(i), byte(i), 1, 0, 0}
		if i == 10 {
			f[5], f[6] = 0xff, 0xff
		}
		c := bitwise(f[:7])
		f[7], f[8] = byte(c), byte(c>>8)
		inbox.Post(time.Duration(i)*time.Millisecond, line.Event{Kind: line.KindBytes, Port: 1, Data: f})
	}
	if err := e.Wait(context.Background(), line.Instant(time.Second), func() bool { return false }); !errors.Is(err, line.ErrDeadline) {
		t.Fatal(err)
	}
	if len(a) != 20 || len(b) != 20 || over != 1 {
		t.Fatalf("%d and %d readings, %d over range", len(a), len(b), over)
	}
	for i := range a {
		wantA, wantB := float64(int16(0xff00|i))/10, float64(256+i)-100
		if i == 10 {
			wantB = 0
		}
		if a[i].Value.Stated != wantA || b[i].Value.Stated != wantB || a[i].At != b[i].At || a[i].Sequence != b[i].Sequence || a[i].Frame != b[i].Frame {
			t.Errorf("%d: %+v\n%+v", i, a[i], b[i])
		}
	}
	if a[1].Value.Unit.Name != "uV/V" || b[1].Value.SI != 157e3 {
		t.Errorf("%+v %+v", a[1].Value, b[1].Value)
	}
}

func TestRefusedChannels(t *testing.T) {
	k := kinds()[0]
	l := line.NewEngine(line.NewMemory(time.Time{})).Open(1, line.Settings{Name: "converter on port 1"})
	field := quantity.Field{Unit: "furlong", Frame: k.frame}
	p := NewPort(l)
	if _, err := p.Channel(Settings{field}); err == nil || !strings.Contains(err.Error(), "furlong") {
		t.Error(err)
	}
	field.Unit = "mmHg"
	if _, err := p.Channel(Settings{field}); err != nil {
		t.Error(err)
	}
	field.Frame.Sync = "A6"
	if _, err := p.Channel(Settings{field}); err == nil || !strings.Contains(err.Error(), "different frames") {
		t.Error(err)
	}
	field.Frame.Sync = ""
	if _, err := p.Channel(Settings{field}); err == nil || !strings.Contains(err.Error(), "converter on port 1: ") {
		t.Error(err)
	}
}

// Bytes lost on this side of the wire: nothing from before is put together
// with anything after.
func TestHole(t *testing.T) {
	k := kinds()[0]
	inbox := line.NewMemory(time.Time{})
	e := line.NewEngine(inbox)
	p := NewPort(e.Open(1, line.Settings{}))
	c, err := p.Channel(Settings{Field: quantity.Field{Unit: "mmHg", Frame: k.frame}})
	if err != nil {
		t.Fatal(err)
	}
	numbers, n := legal(100), 0
	c.Watch(func(r *bench.Reading, err error) error {
		if n++; err != nil || !numbers[r.Value.Stated] {
			t.Errorf("%+v, %v", *r, err)
		}
		return nil
	})
	data := stream(k, 100)
	inbox.Post(0, line.Event{Kind: line.KindBytes, Port: 1, Data: data[:352]})
	inbox.Post(1, line.Event{Kind: line.KindOverflow})
	inbox.Post(2, line.Event{Kind: line.KindBytes, Port: 1, Data: data[359:]})
	if err := e.Wait(context.Background(), 3, func() bool { return false }); !errors.Is(err, line.ErrDeadline) || n != 50+47 {
		t.Errorf("%v, %d readings", err, n)
	}
}
