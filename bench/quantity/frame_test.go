package quantity

import (
	"encoding/binary"
	"encoding/hex"
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// Every type in every order, by encoding/binary and by hand for 24 bits.
func TestLayouts(t *testing.T) {
	for _, c := range []struct {
		kind, order, bytes string
		want               float64
	}{
		{"int8", "", "FF", -1}, {"uint8", "", "FF", 255}, {"int16", "", "FFFE", -2}, {"uint16", "little-endian", "0102", 0x0201},
		{"int24", "", "FFFFFD", -3}, {"uint24", "", "010203", 0x010203}, {"int24", "little-endian", "FDFFFF", -3}, {"uint24", "little-endian", "010203", 0x030201},
		{"int32", "big-endian", "FFFFFFFC", -4}, {"uint32", "", "FFFFFFFF", 4294967295}, {"int32", "little-endian", "FCFFFFFF", -4},
		{"uint32", "big-endian-swapped", "03040102", 0x01020304}, {"uint32", "little-endian-swapped", "02010403", 0x01020304},
		{"float32", "", "43962000", 300.25}, {"float32", "little-endian", "00209643", 300.25}, {"float64", "", "4072C40000000000", 300.25},
		{"float64", "little-endian", "000000000000C472" + "40"[:0], 0},
	} {
		if c.kind == "float64" && c.order != "" {
			c.bytes, c.want = hex.EncodeToString(binary.LittleEndian.AppendUint64(nil, math.Float64bits(-7.5))), -7.5
		}
		layout := Layout{Type: c.kind, At: 1, Order: c.order}
		r, err := Frame{Length: 1 + layout.Size(), Sync: "A5", Number: layout}.Reader()
		if err != nil {
			t.Fatal(c, err)
		}
		data, err := hex.DecodeString("A5" + c.bytes)
		if err != nil {
			t.Fatal(err)
		}
		if x, err := r.Number(data); err != nil || x != c.want || !r.Whole(data) {
			t.Errorf("%s %s %s: %v, %v", c.kind, c.order, c.bytes, x, err)
		}
	}
}

func TestFrameNumbers(t *testing.T) {
	f := Frame{Length: 6, Sync: "5A", End: "0D", Number: Layout{Type: "int16", At: 1}, Scale: 0.1, Offset: -50, Over: []int64{32767, -32768},
		Status: &Layout{Type: "uint8", At: 3}, Fine: []int64{0, 2}, Check: "sum8", CheckAt: 4, CheckFrom: 1}
	field := Field{Unit: "mmHg", Frame: f}
	p, err := field.Parser()
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		text string
		want float64
		err  error
	}{
		{"5A00640064" + "0D", -40, nil}, {"5A0064026" + "60D", -40, nil}, {"5A00640165" + "0D", 0, ErrStatus}, {"5A7FFF007E" + "0D", 0, ErrOverRange},
		{"5A00640065" + "0D", 0, ErrCheck}, {"5B006400640D", 0, ErrCheck}, {"5A006400640A", 0, ErrCheck}, {"5A0064006", 0, errAny}, {"5a006400640D", 0, errAny}, {"", 0, errAny}, {"5A006400640G", 0, errAny},
	} {
		x, err := p.Number(c.text)
		if c.err == nil && (err != nil || math.Abs(x-c.want) > 1e-12) || c.err != nil && (err == nil || x != 0 || c.err != errAny && !errors.Is(err, c.err)) {
			t.Errorf("%s: %v, %v, want %v %v", c.text, x, err, c.want, c.err)
		}
	}
	// 150002 hundredths are the decimal 1500.02, not a neighbour of it.
	r, err := Frame{Length: 5, Sync: "01", Number: Layout{Type: "int32", At: 1}, Scale: 0.01}.Reader()
	if err != nil {
		t.Fatal(err)
	}
	for _, n := range []int32{150002, -7, 29, 123456789} {
		if x, err := r.Number(binary.BigEndian.AppendUint32([]byte{1}, uint32(n))); err != nil || x != float64(n)/100 {
			t.Errorf("%d: %v, %v", n, x, err)
		}
	}
	not, err := Frame{Length: 5, Sync: "01", Number: Layout{Type: "float32", At: 1}}.Reader()
	if err != nil {
		t.Fatal(err)
	}
	for _, bits := range []uint32{0x7fc00000, 0x7f800000, 0xff800000} {
		if x, err := not.Number(binary.BigEndian.AppendUint32([]byte{1}, bits)); err == nil || x != 0 {
			t.Errorf("%x is taken for %v", bits, x)
		}
	}
}

func TestFrameRefused(t *testing.T) {
	good := Frame{Length: 8, Sync: "A55A", Number: Layout{Type: "int24", At: 3}, Sequence: &Layout{Type: "uint8", At: 2}, Check: "crc-16/modbus", CheckAt: 6}
	if _, err := good.Reader(); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		change func(*Frame)
		part   string
	}{
		{func(f *Frame) { f.Length = 1 }, "length"}, {func(f *Frame) { f.Length = 257 }, "length"}, {func(f *Frame) { f.Sync = "" }, "sync"}, {func(f *Frame) { f.Sync = "A" }, "sync"},
		{func(f *Frame) { f.End = "0" }, "end"}, {func(f *Frame) { f.Number.Type = "int12" }, "number"}, {func(f *Frame) { f.Number.At = 5 }, "check"}, {func(f *Frame) { f.Number.At = -1 }, "number"},
		{func(f *Frame) { f.Number.At = 7 }, "number"}, {func(f *Frame) { f.Number.At = 1 }, "number"}, {func(f *Frame) { f.Number.Order = "middle" }, "number"},
		{func(f *Frame) { f.Number.Order = "big-endian-swapped" }, "number"}, {func(f *Frame) { f.Sequence.Type = "int8" }, "sequence"}, {func(f *Frame) { f.Sequence.At = 3 }, "sequence"},
		{func(f *Frame) { f.Status = &Layout{Type: "uint8", At: 2} }, "status"}, {func(f *Frame) { f.Check = "crc-16/modbuss" }, "check"}, {func(f *Frame) { f.CheckFrom = 3 }, "check"},
		{func(f *Frame) { f.Check = "crc-8"; f.CheckAt = 6 }, "check"}, {func(f *Frame) { f.Scale = math.Inf(1) }, "number"}, {func(f *Frame) { f.CheckAt = 7 }, "check"},
	} {
		f := good
		sequence := *good.Sequence
		f.Sequence = &sequence
		c.change(&f)
		var e *FrameError
		if r, err := f.Reader(); !errors.As(err, &e) || e.Part != c.part || r != nil || e.Text == "" || strings.HasSuffix(e.Text, ".") {
			t.Errorf("%+v: %v, want %s", f, err, c.part)
		}
	}
	f := good
	f.Status, f.Sequence = &Layout{Type: "uint8", At: 2}, nil
	if _, err := f.Reader(); err == nil {
		t.Error("a status without one that is fine")
	}
}

// The quick ways agree with Whole and Number, over frames of every kind and
// data damaged anywhere.
func TestQuickWays(t *testing.T) {
	rnd := rand.New(rand.NewPCG(11, 12))
	quick, taken := 0, 0
	for range 4000 {
		types, orders := LayoutTypes(), []string{"", "little-endian"}
		number := Layout{Type: types[rnd.IntN(len(types))], At: 1 + rnd.IntN(2), Order: orders[rnd.IntN(2)]}
		sync := "A5"
		if number.At == 2 {
			sync = "A55A"
		}
		f := Frame{Sync: sync, Number: number, Scale: []float64{0, 0.01, -3}[rnd.IntN(3)], Offset: float64(rnd.IntN(2))}
		f.CheckAt = number.At + number.Size()
		f.Length = f.CheckAt
		if k := rnd.IntN(4); k > 0 {
			f.Check = []string{"", "crc-16/xmodem", "crc-16/modbus", "sum8"}[k]
			f.Length += []int{0, 2, 2, 1}[k]
			f.CheckLittle, f.CheckFrom = rnd.IntN(2) == 0, rnd.IntN(number.At+1)
		}
		r, err := f.Reader()
		if err != nil {
			t.Fatal(f, err)
		}
		var data []byte
		for range 20 {
			frame := make([]byte, f.Length)
			for i := range frame {
				frame[i] = byte(rnd.Uint32())
			}
			copy(frame, []byte{0xA5, 0x5A}[:number.At])
			if r.size > 0 {
				x := r.check.Of(frame[f.CheckFrom:f.CheckAt])
				if f.CheckLittle && r.size == 2 {
					x = x&0xff<<8 | x>>8
				}
				copy(frame[f.CheckAt:], binary.BigEndian.AppendUint32(nil, x)[4-r.size:])
			}
			if !r.Whole(frame) {
				t.Fatalf("%+v: % X", f, frame)
			}
			data = append(data, frame...)
		}
		if rnd.IntN(2) == 0 {
			data[rnd.IntN(len(data))] ^= byte(1 + rnd.IntN(255))
		}
		data = data[:len(data)-rnd.IntN(f.Length)]
		want := 0
		for len(data)-want*f.Length >= f.Length && r.Whole(data[want*f.Length:(want+1)*f.Length]) {
			want++
		}
		if got := r.Run(data); got != want {
			t.Fatalf("%+v: %d whole frames, %d counted", f, want, got)
		}
		if !r.CanTake() {
			continue
		}
		quick++
		into := make([]float64, 30)
		n := r.Take(data, into)
		if n > want || n < want-2 && len(data)-n*f.Length >= 8 {
			t.Fatalf("%+v: %d of %d taken", f, n, want)
		}
		for i, x := range into[:n] {
			taken++
			if y, err := r.Number(data[i*f.Length : (i+1)*f.Length]); err != nil || x != y {
				t.Fatalf("%+v: %v, %v, %v", f, x, y, err)
			}
		}
	}
	if quick < 100 || taken < 1000 {
		t.Errorf("%d quick ones, %d numbers", quick, taken)
	}
}

func FuzzFrame(f *testing.F) {
	f.Add("A5000102030405", "A5", "int24", 1, "crc-16/modbus", 5, 7)
	f.Fuzz(func(t *testing.T, text, sync, kind string, at int, check string, checkAt, length int) {
		frame := Frame{Length: length, Sync: sync, Number: Layout{Type: kind, At: at}, Check: check, CheckAt: checkAt}
		x, err := Field{Unit: "mmHg", Frame: frame}.Number(text)
		if err != nil && x != 0 || math.IsNaN(x) || math.IsInf(x, 0) {
			t.Fatalf("%+v on %q: %v, %v", frame, text, x, err)
		}
	})
}
