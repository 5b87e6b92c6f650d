package lines

import (
	"math/bits"
	"strings"
	"unsafe"

	"kymobench/bench/line"
)

// cutter cuts a stream of text into lines ended by CR, LF or CRLF. Empty lines
// are no lines; one that is longer than the cap is passed over up to its end,
// which is told.
type cutter struct {
	part  string // of a line that has begun
	over  bool   // it is too long already
	skip  bool   // its beginning was lost; it is passed over untold
	texts strings.Builder
}

// lose is told when bytes were lost: what has begun is not whole.
func (c *cutter) lose() { c.part, c.over, c.skip = "", false, true }

// first returns the end of the line that had begun before data came, and the
// rest of data; ok is false while that line goes on.
func (c *cutter) first(data string) (text, rest string, long, ok bool) {
	i := end(data)
	if i < 0 {
		c.begin(data)
		return "", "", false, false
	}
	text, rest, long = data[:i], data[i+1:], c.over
	switch {
	case c.skip:
		text, long = "", false
	case long || len(c.part)+len(text) > line.LongestLine:
		text, long = "", true
	case c.part != "":
		text = c.kept(c.part, text)
	}
	c.part, c.over, c.skip = "", false, false
	return text, rest, long, true
}

// begin keeps the beginning of a line.
func (c *cutter) begin(data string) {
	switch {
	case c.skip || c.over:
	case len(c.part)+len(data) > line.LongestLine:
		c.part, c.over = "", true
	case c.part == "":
		c.part = data
	default:
		c.part = c.kept(c.part, data)
	}
}

// textBlock is how many bytes of texts that were put together share one piece
// of memory.
const textBlock = 4096

// asText makes a text of bytes without copying them: they are the receiver's
// (line.Bytes), and nobody changes them any more. Texts are kept in runs, so
// that little is held for nothing.
func asText(data []byte) string { return unsafe.String(unsafe.SliceData(data), len(data)) }

// kept is two texts in one.
func (c *cutter) kept(a, b string) string {
	from := c.room(len(a) + len(b))
	c.texts.WriteString(a)
	c.texts.WriteString(b)
	return c.texts.String()[from:]
}

func (c *cutter) room(n int) int {
	if c.texts.Cap()-c.texts.Len() < n {
		c.texts = strings.Builder{}
		c.texts.Grow(max(textBlock, n))
	}
	return c.texts.Len()
}

// end returns the place of the first CR or LF, -1 when there is none. It looks
// at eight bytes at once: in x ^ 0x0D... a CR is a zero byte, and a zero byte
// borrows from the one above it, so that the lowest bit set by
// (y - 0x01...) &^ y & 0x80... marks the first one (well known, from memory).
func end(s string) int {
	const ones, high = 0x0101010101010101, 0x8080808080808080
	i := 0
	for ; i+8 <= len(s); i += 8 {
		b := s[i : i+8]
		x := uint64(b[0]) | uint64(b[1])<<8 | uint64(b[2])<<16 | uint64(b[3])<<24 |
			uint64(b[4])<<32 | uint64(b[5])<<40 | uint64(b[6])<<48 | uint64(b[7])<<56
		cr, lf := x^('\r'*ones), x^('\n'*ones)
		if found := ((cr-ones)&^cr | (lf-ones)&^lf) & high; found != 0 {
			return i + bits.TrailingZeros64(found)/8
		}
	}
	for ; i < len(s); i++ {
		if s[i] == '\r' || s[i] == '\n' {
			return i
		}
	}
	return -1
}
