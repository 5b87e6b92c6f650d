package quantity

import (
	"encoding/hex"
	"errors"
	"fmt"
	"math"
	"slices"

	"kymobench/bench/checksum"
)

// Frame says how one number stands in a frame of bytes. Its text, as records
// keep it, is the whole frame in hexadecimal digits.
type Frame struct {
	Length int    `json:"length,omitempty"` // of the whole frame, in bytes; 0: it is no frame
	Sync   string `json:"sync,omitempty"`   // hexadecimal: its first bytes
	End    string `json:"end,omitempty"`    // likewise: its last ones

	Number Layout  `json:"number,omitzero"`
	Scale  float64 `json:"scale,omitempty"`  // the field's number = Scale x Number + Offset; 0 is 1
	Offset float64 `json:"offset,omitempty"` //
	Over   []int64 `json:"over,omitempty"`   // numbers, before scaling, that say "out of range"

	Sequence *Layout `json:"sequence,omitempty"` // counts the frames
	Status   *Layout `json:"status,omitempty"`
	Fine     []int64 `json:"fine,omitempty"` // statuses with which the number is good

	Check       string `json:"check,omitempty"`        // of checksum.Named; "": there is none
	CheckFrom   int    `json:"check_from,omitempty"`   // the first byte checked; the last is that before CheckAt
	CheckAt     int    `json:"check_at,omitempty"`     // where the check value stands
	CheckLittle bool   `json:"check_little,omitempty"` // its least significant byte first
}

// Layout is a number in a frame.
type Layout struct {
	Type  string `json:"type"`            // one of LayoutTypes
	At    int    `json:"at"`              // its first byte, from 0
	Order string `json:"order,omitempty"` // one of LayoutOrders; "": big-endian
}

// LayoutTypes are the types of a number in a frame.
func LayoutTypes() []string {
	return []string{"int8", "uint8", "int16", "uint16", "int24", "uint24", "int32", "uint32", "float32", "float64"}
}

// LayoutOrders are the orders of a number's bytes. The swapped ones exchange
// the two halves of a number of four bytes, as 16-bit registers that hold the
// less significant half first do.
func LayoutOrders() []string {
	return []string{"big-endian", "little-endian", "big-endian-swapped", "little-endian-swapped"}
}

// Size is the number's length in bytes, 0 for an unknown type.
func (l Layout) Size() int {
	switch l.Type {
	case "int8", "uint8":
		return 1
	case "int16", "uint16":
		return 2
	case "int24", "uint24":
		return 3
	case "int32", "uint32", "float32":
		return 4
	case "float64":
		return 8
	}
	return 0
}

// FrameError is a frame that contradicts itself; Part names what is wrong in
// it: "length", "sync", "end", "number", "sequence", "status" or "check".
type FrameError struct{ Part, Text string }

func (e *FrameError) Error() string { return e.Text }

// FrameReader reads frames as one Frame says.
type FrameReader struct {
	length    int
	sync, end []byte
	number    coder
	sequence  coder
	status    coder
	frame     Frame
	divide    float64 // not 0: the number is divided by it, which keeps decimals exact
	scale     float64

	size  int // of the check value, 0: none
	check *checksum.Fixed
	bits  int

	quick  quick
	simple bool // every bit pattern is a finite number and fine
}

// longestFrame is the most bytes of a frame.
const longestFrame = 256

// Reader prepares for reading many frames. Its errors are *FrameError.
func (f Frame) Reader() (*FrameReader, error) {
	r := &FrameReader{length: f.Length, frame: f, scale: f.Scale}
	if f.Length < 2 || f.Length > longestFrame {
		return nil, &FrameError{"length", fmt.Sprintf("a frame has 2 to %d bytes", longestFrame)}
	}
	used := make([]string, f.Length)
	var err error
	if r.sync, err = hex.DecodeString(f.Sync); err != nil || len(r.sync) == 0 {
		return nil, &FrameError{"sync", fmt.Sprintf("%q is not one byte or more in hexadecimal digits", f.Sync)}
	}
	if err := occupy(used, "sync", 0, len(r.sync)); err != nil {
		return nil, err
	}
	if r.end, err = hex.DecodeString(f.End); err != nil {
		return nil, &FrameError{"end", fmt.Sprintf("%q is not bytes in hexadecimal digits", f.End)}
	}
	if err := occupy(used, "end", f.Length-len(r.end), len(r.end)); err != nil {
		return nil, err
	}
	for _, part := range []struct {
		name   string
		layout *Layout
		into   *coder
	}{{"number", &f.Number, &r.number}, {"sequence", f.Sequence, &r.sequence}, {"status", f.Status, &r.status}} {
		if part.layout == nil {
			continue
		}
		if *part.into, err = part.layout.coder(part.name); err != nil {
			return nil, err
		}
		if err := occupy(used, part.name, part.layout.At, part.layout.Size()); err != nil {
			return nil, err
		}
	}
	switch {
	case f.Sequence != nil && !slices.Contains([]string{"uint8", "uint16", "uint24", "uint32"}, f.Sequence.Type):
		return nil, &FrameError{"sequence", "a sequence number is uint8, uint16, uint24 or uint32"}
	case f.Status != nil && (f.Status.Type[0] == 'f' || len(f.Fine) == 0):
		return nil, &FrameError{"status", "a status is a whole number, and one or more of them are stated as fine"}
	case math.IsNaN(f.Scale+f.Offset) || math.IsInf(f.Scale, 0) || math.IsInf(f.Offset, 0):
		return nil, &FrameError{"number", "scale and offset are finite numbers"}
	}
	if r.scale == 0 {
		r.scale = 1
	}
	if inverse := math.Round(1 / r.scale); math.Abs(inverse) < 1e15 && inverse != 0 && 1/inverse == r.scale {
		r.divide = inverse
	}
	r.simple = r.number.kind != 'f' && len(f.Over) == 0 && f.Status == nil && !math.IsInf((1<<32)*math.Abs(r.scale)+math.Abs(f.Offset), 0)
	if err := r.checking(f, used); err != nil {
		return nil, err
	}
	return r, nil
}

// checking prepares for the check value. What it does not cover must be known
// from sync and end, or one changed byte would pass.
func (r *FrameReader) checking(f Frame, used []string) error {
	if f.Check == "" {
		return nil
	}
	a, ok := checksum.Named(f.Check)
	if !ok {
		return &FrameError{"check", fmt.Sprintf("%q is no checksum known here", f.Check)}
	}
	if err := occupy(used, "check", f.CheckAt, a.Size()); err != nil {
		return err
	}
	if f.CheckFrom < 0 || f.CheckFrom > len(r.sync) {
		return &FrameError{"check", "the checksum does not cover everything after the sync bytes"}
	}
	if f.CheckAt <= f.CheckFrom || f.CheckAt+a.Size()+len(r.end) != f.Length {
		return &FrameError{"check", "the check value does not stand at the end of the frame: nothing may follow it but the stated end"}
	}
	r.size, r.bits, r.check = a.Size(), 8*a.Size(), a.Fixed(f.CheckAt-f.CheckFrom)
	r.quick = r.quickly()
	return nil
}

// occupy keeps two parts of a frame from standing in one place.
func occupy(used []string, part string, at, n int) error {
	if at < 0 || n < 0 || at+n > len(used) {
		return &FrameError{part, fmt.Sprintf("the %s does not stand within the %d bytes of the frame", part, len(used))}
	}
	for i := at; i < at+n; i++ {
		if used[i] != "" {
			return &FrameError{part, fmt.Sprintf("the %s stands where the %s does", part, used[i])}
		}
		used[i] = part
	}
	return nil
}

// coder is a Layout made ready.
type coder struct {
	kind   byte // 'i', 'u', 'f'
	size   int
	spare  int    // bits of an int64 that it has not
	plain  bool   // signed, its bytes in the order of places or against it
	places [8]int // of the bytes, most significant first
}

func (l Layout) coder(part string) (coder, error) {
	c := coder{size: l.Size(), spare: 64 - 8*l.Size()}
	if c.size == 0 {
		return c, &FrameError{part, fmt.Sprintf("%q is no type of number known here", l.Type)}
	}
	c.kind = l.Type[0]
	swapped := l.Order == "big-endian-swapped" || l.Order == "little-endian-swapped"
	if l.Order != "" && !slices.Contains(LayoutOrders(), l.Order) || swapped && c.size != 4 {
		return c, &FrameError{part, fmt.Sprintf("%q is no order of the bytes of %s", l.Order, l.Type)}
	}
	for i := range c.size {
		place := i
		switch l.Order {
		case "little-endian":
			place = c.size - 1 - i
		case "big-endian-swapped":
			place = i ^ 2
		case "little-endian-swapped":
			place = i ^ 1
		}
		c.places[i] = l.At + place
	}
	c.plain = c.kind == 'i' && !swapped
	return c, nil
}

// bits are the number's bits as they stand.
func (c *coder) bits(data []byte) uint64 {
	var x uint64
	for _, p := range c.places[:c.size] {
		x = x<<8 | uint64(data[p])
	}
	return x
}

// whole is an integer's value.
func (c *coder) whole(data []byte) int64 {
	x := c.bits(data)
	if c.kind == 'i' {
		return int64(x<<c.spare) >> c.spare
	}
	return int64(x)
}

func (c *coder) float(data []byte) float64 {
	switch {
	case c.kind != 'f':
		return float64(c.whole(data))
	case c.size == 4:
		return float64(math.Float32frombits(uint32(c.bits(data))))
	}
	return math.Float64frombits(c.bits(data))
}

// Length of a frame in bytes.
func (r *FrameReader) Length() int { return r.length }

// Sync returns the bytes that a frame begins with.
func (r *FrameReader) Sync() []byte { return r.sync }

// CheckBits is the size of the check value in bits; 0 when there is none.
func (r *FrameReader) CheckBits() int { return r.bits }

// FixedBits is how many bits of a frame are known beforehand: sync and end.
func (r *FrameReader) FixedBits() int { return 8 * (len(r.sync) + len(r.end)) }

// Whole says that data, which has a frame's length, is one: it begins and ends
// as stated, and the check value belongs to it.
func (r *FrameReader) Whole(data []byte) bool {
	if data[0] != r.sync[0] || len(data) != r.length {
		return false
	}
	for i, b := range r.sync[1:] {
		if data[i+1] != b {
			return false
		}
	}
	for i, b := range r.end {
		if data[r.length-len(r.end)+i] != b {
			return false
		}
	}
	return r.size == 0 || r.check.Of(data[r.frame.CheckFrom:r.frame.CheckAt]) == r.given(data[r.frame.CheckAt:])
}

// given is the check value as it stands.
func (r *FrameReader) given(data []byte) (x uint32) {
	for i := range r.size {
		if r.frame.CheckLittle {
			x |= uint32(data[i]) << (8 * i)
		} else {
			x = x<<8 | uint32(data[i])
		}
	}
	return x
}

// HasSequence says that frames are counted.
func (r *FrameReader) HasSequence() bool { return r.frame.Sequence != nil }

// Sequence returns a frame's sequence number, and after how many it begins
// anew.
func (r *FrameReader) Sequence(data []byte) (number, modulus uint64) {
	return r.sequence.bits(data), 1 << (8 * r.sequence.size)
}

// Number returns the number in a whole frame. It allocates nothing unless it
// refuses.
func (r *FrameReader) Number(data []byte) (float64, error) {
	x := r.number.float(data)
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return 0, fmt.Errorf("% X holds no number", data)
	}
	if len(r.frame.Over) > 0 && r.number.kind != 'f' && slices.Contains(r.frame.Over, r.number.whole(data)) {
		return 0, fmt.Errorf("% X: %w", data, ErrOverRange)
	}
	if r.frame.Status != nil {
		if status := r.status.whole(data); !slices.Contains(r.frame.Fine, status) {
			return 0, fmt.Errorf("% X: status %d: %w", data, status, ErrStatus)
		}
	}
	if x = r.scaled(x); math.IsInf(x, 0) {
		return 0, fmt.Errorf("% X holds a number that is too large", data)
	}
	return x, nil
}

func (r *FrameReader) scaled(x float64) float64 {
	if r.divide != 0 {
		return x/r.divide + r.frame.Offset
	}
	return x*r.scale + r.frame.Offset
}

// errNoFrame is for a text that is no frame of the stated length.
var errNoFrame = errors.New("it is no frame in hexadecimal digits of the stated length")

// text reads the number in a frame kept as hexadecimal digits.
func (r *FrameReader) text(s string) (float64, error) {
	var buffer [longestFrame]byte
	data := buffer[:r.length]
	if len(s) != 2*r.length {
		return 0, fmt.Errorf("%q: %w", s, errNoFrame)
	}
	for i := range data {
		high, low := digit(s[2*i]), digit(s[2*i+1])
		if high > 15 || low > 15 {
			return 0, fmt.Errorf("%q: %w", s, errNoFrame)
		}
		data[i] = high<<4 | low
	}
	if !r.Whole(data) {
		return 0, fmt.Errorf("%q: %w", s, ErrCheck)
	}
	return r.Number(data)
}

// digit is the value of a hexadecimal digit in capitals, 16 or more of others.
func digit(c byte) byte {
	switch {
	case c >= '0' && c <= '9':
		return c - '0'
	case c >= 'A' && c <= 'F':
		return c - 'A' + 10
	}
	return 0xff
}

// AppendText appends a frame as its text.
func AppendText(to, data []byte) []byte {
	const digits = "0123456789ABCDEF"
	for _, b := range data {
		to = append(to, digits[b>>4], digits[b&15])
	}
	return to
}
