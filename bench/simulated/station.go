package simulated

import (
	"encoding/binary"
	"math"
	"math/rand/v2"
	"time"

	"kymobench/bench/line"
)

// station is a Modbus RTU station: it takes functions 03, 04, 06 and 16, and
// answers nothing to messages that are not whole, whose CRC is wrong, or that
// are for others. Source: Modbus application protocol V1.1b3 and Modbus over
// serial line V1.02, from memory.
type station struct {
	v       *volume
	number  byte
	latency *rand.Rand
	takes   [2]time.Duration
	holding map[uint16]func(line.Instant) uint16
	input   map[uint16]func(line.Instant) uint16
	// write carries out what was written from a register on; the exception
	// that refuses it, 0 for none.
	write func(at line.Instant, register uint16, values []uint16) byte

	message  []byte
	last     line.Instant // when a byte came last
	out      []reply
	finished line.Instant
}

type reply struct {
	due  line.Instant
	make func() []byte
}

// betweenFrames is the silence after which a message that is not whole is
// given up. It is far more than three characters: a pseudo-terminal delivers in
// pieces.
const betweenFrames = 50 * time.Millisecond

// Receive takes messages.
func (s *station) Receive(at line.Instant, data []byte) {
	s.v.advance(at)
	if at.Sub(s.last) > betweenFrames {
		s.message = s.message[:0]
	}
	s.last = at
	s.message = append(s.message, data...)
	for {
		n := s.whole()
		if n == 0 || n > len(s.message) {
			return
		}
		m := append([]byte(nil), s.message[:n]...)
		s.message = s.message[:copy(s.message, s.message[n:])]
		if crcModbus(m[:n-2]) == binary.LittleEndian.Uint16(m[n-2:]) && m[0] == s.number {
			s.carryOut(at, m[1:n-2])
		} else {
			s.message = s.message[:0]
		}
	}
}

// whole is the length of the message that has begun, 0 when it is not known.
func (s *station) whole() int {
	switch m := s.message; {
	case len(m) < 2:
		return 0
	case m[1] != 16:
		return 8
	case len(m) < 7:
		return 0
	default:
		return 9 + int(m[6])
	}
}

func (s *station) carryOut(at line.Instant, m []byte) {
	at = max(at, s.finished)
	takes := time.Duration(between(s.latency, float64(s.takes[0]), float64(s.takes[1])))
	s.finished = at.Add(takes)
	middle := at.Add(takes / 2)
	s.out = append(s.out, reply{s.finished, s.answer(middle, m)})
}

// answer carries a message out and returns what makes the answer to it.
func (s *station) answer(at line.Instant, m []byte) func() []byte {
	refuse := func(code byte) func() []byte {
		return func() []byte { return s.sealed(m[0]|0x80, code) }
	}
	first, n := binary.BigEndian.Uint16(m[1:]), int(binary.BigEndian.Uint16(m[3:]))
	switch m[0] {
	case 3, 4:
		registers := s.holding
		if m[0] == 4 {
			registers = s.input
		}
		if n < 1 || n > 125 {
			return refuse(3)
		}
		for i := range n {
			if registers[first+uint16(i)] == nil {
				return refuse(2)
			}
		}
		return func() []byte {
			out := []byte{m[0], byte(2 * n)}
			for i := range n {
				out = binary.BigEndian.AppendUint16(out, registers[first+uint16(i)](at))
			}
			return s.sealed(out...)
		}
	case 6:
		if code := s.write(at, first, []uint16{uint16(n)}); code != 0 {
			return refuse(code)
		}
		return func() []byte { return s.sealed(m...) }
	case 16:
		values := make([]uint16, n)
		if len(m) != 6+2*n {
			return refuse(3)
		}
		for i := range values {
			values[i] = binary.BigEndian.Uint16(m[6+2*i:])
		}
		if code := s.write(at, first, values); code != 0 {
			return refuse(code)
		}
		return func() []byte { return s.sealed(m[:5]...) }
	}
	return refuse(1)
}

func (s *station) sealed(m ...byte) []byte {
	m = append([]byte{s.number}, m...)
	return binary.LittleEndian.AppendUint16(m, crcModbus(m))
}

// Due names the next answer.
func (s *station) Due() (line.Instant, bool) {
	if len(s.out) == 0 {
		return 0, false
	}
	return s.out[0].due, true
}

// Emit returns it.
func (s *station) Emit(at line.Instant) []byte {
	s.v.advance(at)
	if len(s.out) == 0 || s.out[0].due > at {
		return nil
	}
	data := s.out[0].make()
	s.out = s.out[1:]
	return data
}

// texts fills registers with a text, two characters in each, and zero bytes
// after it.
func texts(into map[uint16]func(line.Instant) uint16, at uint16, text string, registers int) {
	for i := range registers {
		var pair [2]byte
		if 2*i < len(text) {
			copy(pair[:], text[2*i:])
		}
		into[at+uint16(i)] = func(line.Instant) uint16 { return binary.BigEndian.Uint16(pair[:]) }
	}
}

// Short identities, as 32 characters hold.
const (
	identityGaugeStation  = "SIM GAUGE 11"
	identitySourceStation = "SIM SOURCE 12"
)

// referenceInRegisters is station 11: the reading as float32 in input registers
// 0 and 1, low half first; its name in holding registers 100 on; seconds since
// power-on in 90 and 91; writing 1 to 16 zeroes it.
func referenceInRegisters(v *volume, d drawn) *station {
	g := newGauge(v, d)
	s := &station{v: v, number: 11, latency: stream(d.seed, RoleReference+" latency"), takes: [2]time.Duration{20 * time.Millisecond, 60 * time.Millisecond},
		holding: map[uint16]func(line.Instant) uint16{}, input: map[uint16]func(line.Instant) uint16{}}
	texts(s.holding, 100, identityGaugeStation, 8)
	on := func(at line.Instant) uint32 { return uint32(poweredBefore + at.Seconds()) }
	s.holding[90] = func(at line.Instant) uint16 { return uint16(on(at)) }
	s.holding[91] = func(at line.Instant) uint16 { return uint16(on(at) >> 16) }
	var bits uint32 // both halves of one reading
	s.input[0] = func(at line.Instant) uint16 {
		bits = math.Float32bits(float32(g.reading(at)))
		return uint16(bits)
	}
	s.input[1] = func(line.Instant) uint16 { return uint16(bits >> 16) }
	s.write = func(at line.Instant, register uint16, values []uint16) byte {
		switch {
		case register != 16 || len(values) != 1:
			return 2
		case values[0] != 1 || g.zero(at) != nil:
			return 3
		}
		return 0
	}
	return s
}

// sourceInRegisters is station 12: the pressure asked for, in mmHg, as float32
// in holding registers 10 and 11; writing 1 to 12 holds, 2 vents.
func sourceInRegisters(v *volume, d drawn) *station {
	s := &station{v: v, number: 12, latency: stream(d.seed, RoleSource+" latency"), takes: [2]time.Duration{2 * time.Millisecond, 8 * time.Millisecond},
		holding: map[uint16]func(line.Instant) uint16{}}
	texts(s.holding, 100, identitySourceStation, 8)
	s.write = func(at line.Instant, register uint16, values []uint16) byte {
		switch {
		case register == 10 && len(values) == 2:
			p := float64(math.Float32frombits(uint32(values[0])<<16 | uint32(values[1])))
			if !(p >= sourceLow && p <= sourceHigh) {
				return 3
			}
			v.set(at, p)
		case register == 12 && len(values) == 1 && values[0] == 1:
			v.hold(at)
		case register == 12 && len(values) == 1 && values[0] == 2:
			v.vent(at)
		default:
			return 2
		}
		return 0
	}
	return s
}

// valveInRegisters is station 13: writing 1 to holding register 5 opens it, 0
// shuts it.
func valveInRegisters(v *volume, d drawn) *station {
	s := &station{v: v, number: 13, latency: stream(d.seed, RoleValve+" latency"), takes: [2]time.Duration{2 * time.Millisecond, 8 * time.Millisecond}}
	s.write = func(at line.Instant, register uint16, values []uint16) byte {
		if register != 5 || len(values) != 1 || values[0] > 1 {
			return 2
		}
		v.strike(at, values[0] == 1)
		return 0
	}
	return s
}

// gaugeFrame is a reading in mmHg as "RF", float32 in kPa, most significant
// byte first, and CRC-16/XMODEM of all before.
func gaugeFrame(x float64) []byte {
	f := binary.BigEndian.AppendUint32([]byte("RF"), math.Float32bits(float32(x/kilopascal)))
	return binary.BigEndian.AppendUint16(f, crcCCITT(0, f))
}

// appendChecked writes "$+1500.02,0*4F": the number, a status that is 0 but at
// the ends of the scale, and the exclusive-or of all between "$" and "*".
func appendChecked(out []byte, x float64) []byte {
	from := len(out)
	out = append(out, '$')
	out = appendOutput(out, x)
	out = out[:len(out)-2]
	status := byte('0')
	if math.Abs(x) >= 9999.99 {
		status = '1'
	}
	out = append(out, ',', status)
	var sum byte
	for _, c := range out[from+1:] {
		sum ^= c
	}
	const digits = "0123456789ABCDEF"
	return append(out, '*', digits[sum>>4], digits[sum&15], '\r', '\n')
}

// appendFrame writes A5 5A, a count, the output in hundredths of 1 uV/V and the
// applied pressure in thousandths of 1 mmHg, three bytes each, the second with
// its least significant byte first, and CRC-16/IBM-3740 of all before.
func appendFrame(out []byte, count uint8, x, applied float64) []byte {
	from := len(out)
	limit := func(x float64) int32 { return int32(math.Round(min(max(x, -1<<23), 1<<23-1))) }
	n, a := limit(x/converterResolution), limit(applied/appliedResolution)
	out = append(out, 0xA5, 0x5A, count, byte(n>>16), byte(n>>8), byte(n), byte(a), byte(a>>8), byte(a>>16))
	return binary.BigEndian.AppendUint16(out, crcCCITT(0xffff, out[from:]))
}

// appliedResolution of the applied pressure in frames, mmHg, and its noise,
// standard deviation in mmHg.
const (
	appliedResolution = 0.001
	appliedNoise      = 0.1
)
