// Package checksum computes the check values that instruments put behind
// lines and frames: sums, exclusive-ors and cyclic redundancy checks by name.
//
// It is a leaf. It knows nothing of where a check value stands; the drivers
// do. The simulated bench computes its own and never uses this one: a shared
// mistake must not confirm itself.
//
// Order of use: Named once, then Of for each message, or Fixed once and its Of
// for messages that are all of one length.
package checksum

import "strings"

// Algorithm is one way to compute a check value.
type Algorithm struct {
	name      string
	bits      int
	kind      kind
	reflected bool
	start     uint32 // register before the first byte
	xorout    uint32
	table     [256]uint32 // not reflected: the register stands left in 32 bits
}

type kind uint8

const (
	cyclic kind = iota
	sum
	exclusive
	negative
)

// Named returns the algorithm of a name: "sum8", the sum of all bytes modulo
// 256; "lrc8", what makes that sum zero; "xor8"; or a CRC of the open
// catalogue of CRC algorithms in small letters, "crc-16/modbus", also by
// another name in use, "crc-16/ccitt-false".
//
// Source of the sums: common practice, no source; of lrc8: Modbus over serial
// line V1.02, 6.2.1, from memory.
func Named(name string) (*Algorithm, bool) {
	name = strings.ToLower(name)
	switch name {
	case "sum8":
		return &Algorithm{name: name, bits: 8, kind: sum}, true
	case "xor8":
		return &Algorithm{name: name, bits: 8, kind: exclusive}, true
	case "lrc8":
		return &Algorithm{name: name, bits: 8, kind: negative}, true
	}
	name = known(name)
	for _, p := range catalogue() {
		if p.name == name {
			return newCyclic(p), true
		}
	}
	return nil, false
}

// Names lists every algorithm by its first name.
func Names() []string {
	names := []string{"sum8", "xor8", "lrc8"}
	for _, p := range catalogue() {
		names = append(names, p.name)
	}
	return names
}

func newCyclic(p parameters) *Algorithm {
	a := &Algorithm{name: p.name, bits: p.bits, reflected: p.reflected, xorout: p.xorout}
	left := 32 - p.bits
	poly := p.poly << left
	a.start = p.init << left
	if p.reflected {
		poly, a.start = mirrored(poly), mirrored(a.start)
	}
	for i := range a.table {
		r := uint32(i) << 24
		if p.reflected {
			r = uint32(i)
		}
		for range 8 {
			switch {
			case p.reflected && r&1 == 1:
				r = r>>1 ^ poly
			case p.reflected:
				r >>= 1
			case r>>31 == 1:
				r = r<<1 ^ poly
			default:
				r <<= 1
			}
		}
		a.table[i] = r
	}
	return a
}

func mirrored(x uint32) (y uint32) {
	for range 32 {
		y = y<<1 | x&1
		x >>= 1
	}
	return y
}

// Name is the algorithm's first name.
func (a *Algorithm) Name() string { return a.name }

// Size is the length of the check value in bytes: 1, 2 or 4.
func (a *Algorithm) Size() int { return a.bits / 8 }

// Of returns the check value of data.
func (a *Algorithm) Of(data []byte) uint32 { return of(a, data) }

// OfText is Of for a text.
func (a *Algorithm) OfText(data string) uint32 { return of(a, data) }

func of[T []byte | string](a *Algorithm, data T) uint32 {
	r := a.start
	switch {
	case a.kind == sum, a.kind == negative:
		for i := range len(data) {
			r += uint32(data[i])
		}
		if a.kind == negative {
			r = -r
		}
		return r & 0xff
	case a.kind == exclusive:
		for i := range len(data) {
			r ^= uint32(data[i])
		}
		return r
	case a.reflected:
		for i := range len(data) {
			r = r>>8 ^ a.table[byte(r)^data[i]]
		}
		return r ^ a.xorout
	}
	for i := range len(data) {
		r = r<<8 ^ a.table[byte(r>>24)^data[i]]
	}
	return r>>(32-a.bits) ^ a.xorout
}

// longestFixed bounds the tables of a Fixed to 16 kB, which stay in a
// processor's nearest cache.
const longestFixed = 16

// Fixed computes the check value of messages of one length.
type Fixed struct {
	a      *Algorithm
	zero   uint32        // of a message of zeros
	tables [][256]uint32 // what a byte at each place changes; nil: computed byte by byte
}

// Fixed prepares for messages of n bytes. A CRC is linear in the message: the
// value is that of zeros, exclusive-ored with what each byte at its place
// changes, and these do not wait for each other as the bytes of a loop do.
func (a *Algorithm) Fixed(n int) *Fixed {
	f := &Fixed{a: a}
	if a.kind != cyclic || n > longestFixed {
		return f
	}
	message := make([]byte, n)
	f.zero = a.Of(message)
	f.tables = make([][256]uint32, n)
	for i := range message {
		for b := range 256 {
			message[i] = byte(b)
			f.tables[i][b] = a.Of(message) ^ f.zero
		}
		message[i] = 0
	}
	return f
}

// Tables are what Of computes by, for loops over many messages: the check value
// is zero, exclusive-ored with tables[i][data[i]] for each byte. They are nil
// where it is computed otherwise, and are not to be changed.
func (f *Fixed) Tables() (zero uint32, tables [][256]uint32) { return f.zero, f.tables }

// Of returns the check value of data, which has the length prepared for.
func (f *Fixed) Of(data []byte) uint32 {
	if f.tables == nil {
		return f.a.Of(data)
	}
	r := f.zero
	data = data[:len(f.tables)]
	for i := range f.tables {
		r ^= f.tables[i][data[i]]
	}
	return r
}
