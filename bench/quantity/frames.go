package quantity

import (
	"encoding/binary"
	"math/bits"
)

// quick is what is needed to look at frames of up to eight bytes with a check
// value of two, the usual ones of fast converters, a whole frame in one word:
// its first byte the least significant one.
type quick struct {
	can        bool
	mask, sync uint64 // the sync bytes
	from       int    // bits before what is checked behind them
	at         int    // bits before the check value
	little     bool
	zero       uint32 // the check value of the sync bytes and zeros
	tables     [][256]uint32
}

func (r *FrameReader) quickly() quick {
	q := quick{little: r.frame.CheckLittle, at: 8 * r.frame.CheckAt}
	zero, tables := r.check.Tables()
	if tables == nil || r.length > 8 || r.size != 2 || len(r.end) > 0 {
		return q
	}
	for i, b := range r.sync {
		q.mask |= 0xff << (8 * i)
		q.sync |= uint64(b) << (8 * i)
		if i >= r.frame.CheckFrom {
			zero ^= tables[i-r.frame.CheckFrom][b]
		}
	}
	q.can, q.from, q.zero, q.tables = true, 8*len(r.sync), zero, tables[len(r.sync)-r.frame.CheckFrom:]
	return q
}

// Run counts the whole frames that data begins with.
func (r *FrameReader) Run(data []byte) (n int) {
	if r.quick.can {
		n = r.quick.run(data, r.length)
		data = data[n*r.length:]
	}
	for len(data) >= r.length && r.Whole(data[:r.length]) {
		n, data = n+1, data[r.length:]
	}
	return n
}

// run is Run as far as eight bytes can be read.
func (q *quick) run(data []byte, length int) (n int) {
	mask, sync, from, at, tables := q.mask, q.sync, q.from&63, q.at&63, q.tables
	for len(data) >= 8 {
		w := binary.LittleEndian.Uint64(data)
		if w&mask != sync {
			return n
		}
		x, v := q.zero, w>>from
		if len(tables) == 4 {
			x ^= tables[0][byte(v)] ^ tables[1][byte(v>>8)] ^ tables[2][byte(v>>16)] ^ tables[3][byte(v>>24)]
		} else {
			for i := range tables {
				x ^= tables[i][byte(v)]
				v >>= 8
			}
		}
		given := uint16(w >> at)
		if !q.little {
			given = bits.ReverseBytes16(given)
		}
		if uint16(x) != given {
			return n
		}
		n, data = n+1, data[length:]
	}
	return n
}

// CanTake says that Take may be used for these frames.
func (r *FrameReader) CanTake() bool { return r.quick.can && r.simple && r.number.plain }

// Take counts the whole frames that data begins with and reads their numbers,
// as many as into takes and as far as eight bytes can be read: Whole and Number
// in one look at each.
func (r *FrameReader) Take(data []byte, into []float64) (n int) {
	q, c, length := &r.quick, &r.number, r.length
	mask, sync, from, at, tables, zero, big := q.mask, q.sync, q.from&63, q.at&63, q.tables, q.zero, !q.little
	// The number's bits are brought to the top of the word, its most
	// significant byte first, and shifted down with their sign.
	first, turned := c.places[0], true
	if c.size > 1 && c.places[0] > c.places[1] {
		first, turned = c.places[c.size-1], false
	}
	down, spare := (8*first)&63, c.spare&63
	scale, offset, divide := r.scale, r.frame.Offset, r.divide != 0
	if divide {
		scale = r.divide
	}
	for n < len(into) && len(data) >= 8 {
		w := binary.LittleEndian.Uint64(data)
		if w&mask != sync {
			return n
		}
		x, v := zero, w>>from
		if len(tables) == 4 {
			x ^= tables[0][byte(v)] ^ tables[1][byte(v>>8)] ^ tables[2][byte(v>>16)] ^ tables[3][byte(v>>24)]
		} else {
			for i := range tables {
				x ^= tables[i][byte(v)]
				v >>= 8
			}
		}
		given := uint16(w >> at)
		if big {
			given = bits.ReverseBytes16(given)
		}
		if uint16(x) != given {
			return n
		}
		number := w >> down
		if turned {
			number = bits.ReverseBytes64(number)
		} else {
			number <<= spare
		}
		value := float64(int64(number) >> spare)
		if divide {
			into[n] = value/scale + offset
		} else {
			into[n] = value*scale + offset
		}
		n, data = n+1, data[length:]
	}
	return n
}
