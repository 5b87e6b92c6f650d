package simulated

import (
	"fmt"
	"math/rand/v2"
	"strconv"
	"strings"
	"time"

	"kymobench/bench/line"
)

// kilopascal in mmHg: 1000 Pa / 133.322387415 Pa, the conventional mmHg.
const kilopascal = 1000 / 133.322387415

// talker is an instrument with a dialogue of its own in lines of text: what it
// is sent ends with CR or LF, and so does what it answers.
type talker struct {
	v       *volume
	latency *rand.Rand
	echoes  bool
	end     string
	takes   [2]time.Duration
	// carryOut does what a message says at an instant and returns the answer's
	// text, made when it is due; nil is silence.
	carryOut func(at line.Instant, message string) func() string

	message  []byte
	out      []answer
	finished line.Instant
}

// Receive takes messages.
func (t *talker) Receive(at line.Instant, data []byte) {
	t.v.advance(at)
	for _, c := range data {
		if c != '\n' && c != '\r' {
			if len(t.message) < messageCap {
				t.message = append(t.message, c)
			}
			continue
		}
		message := string(t.message)
		t.message = t.message[:0]
		if message == "" {
			continue
		}
		from := max(at, t.finished)
		if t.echoes {
			t.out = append(t.out, answer{from, func() string { return message }})
		}
		takes := time.Duration(between(t.latency, float64(t.takes[0]), float64(t.takes[1])))
		t.finished = from.Add(takes)
		if text := t.carryOut(from.Add(takes/2), message); text != nil {
			t.out = append(t.out, answer{t.finished, text})
		}
	}
}

// Due names the next answer.
func (t *talker) Due() (line.Instant, bool) {
	if len(t.out) == 0 {
		return 0, false
	}
	return t.out[0].due, true
}

// Emit returns it.
func (t *talker) Emit(at line.Instant) []byte {
	t.v.advance(at)
	if len(t.out) == 0 || t.out[0].due > at {
		return nil
	}
	text := t.out[0].text()
	t.out = t.out[1:]
	return append([]byte(text), t.end...)
}

func says(text string) func() string { return func() string { return text } }

// referenceInLines answers "P?" with a line such as "#P;+0012,34;mmHg;0;1A2B":
// the decimals parted off by a comma, the unit and a status each in a column,
// and at the end a CRC-16/MODBUS of everything before its separator but the
// "#", in hexadecimal digits. It echoes what it is sent, and ends with CR.
func referenceInLines(v *volume, d drawn) *talker {
	g := newGauge(v, d)
	t := &talker{v: v, latency: stream(d.seed, RoleReference+" latency"), echoes: true, end: "\r",
		takes: [2]time.Duration{20 * time.Millisecond, 60 * time.Millisecond}}
	t.carryOut = func(at line.Instant, message string) func() string {
		switch message {
		case "ID?":
			return says(identityReference)
		case "ON?":
			return says(strconv.Itoa(int(poweredBefore + at.Seconds())))
		case "Z":
			if g.zero(at) != nil {
				return says("REFUSED")
			}
			return says("DONE")
		case "P?":
			return func() string {
				x := g.reading(at)
				status := 0
				if x > sourceHigh || x < sourceLow {
					status = 1
				}
				text := fmt.Sprintf("P;%s;mmHg;%d", strings.Replace(fmt.Sprintf("%+08.2f", x), ".", ",", 1), status)
				return fmt.Sprintf("#%s;%04X", text, crcModbus([]byte(text)))
			}
		}
		return says("?")
	}
	return t
}

// sourceInLines is told in kPa and acknowledges.
func sourceInLines(v *volume, d drawn) *talker {
	t := &talker{v: v, latency: stream(d.seed, RoleSource+" latency"), end: "\r\n", takes: [2]time.Duration{2 * time.Millisecond, 8 * time.Millisecond}}
	t.carryOut = func(at line.Instant, message string) func() string {
		word, number, _ := strings.Cut(message, " ")
		switch word {
		case "ID":
			return says(identitySource)
		case "HOLD":
			v.hold(at)
		case "VENT":
			v.vent(at)
		case "P":
			x, ok := decimal(number)
			if p := x * kilopascal; !ok || !(p >= sourceLow && p <= sourceHigh) {
				return says("ERROR")
			}
			v.set(at, x*kilopascal)
		default:
			return says("ERROR")
		}
		return says("OK")
	}
	return t
}

// valveInLines acknowledges.
func valveInLines(v *volume, d drawn) *talker {
	t := &talker{v: v, latency: stream(d.seed, RoleValve+" latency"), end: "\n", takes: [2]time.Duration{2 * time.Millisecond, 8 * time.Millisecond}}
	t.carryOut = func(at line.Instant, message string) func() string {
		switch message {
		case "O", "C":
			v.strike(at, message == "O")
			return says("*")
		case "I":
			return says(identityValve)
		}
		return says("!")
	}
	return t
}

// crcModbus is CRC-16/MODBUS from its definition, bit by bit.
func crcModbus(data []byte) uint16 {
	r := uint16(0xffff)
	for _, b := range data {
		r ^= uint16(b)
		for range 8 {
			low := r & 1
			r >>= 1
			if low == 1 {
				r ^= 0xA001
			}
		}
	}
	return r
}

// crcCCITT is the CRC-16 with polynomial 1021, not reflected, from a start
// value, bit by bit.
func crcCCITT(start uint16, data []byte) uint16 {
	r := start
	for _, b := range data {
		r ^= uint16(b) << 8
		for range 8 {
			high := r >> 15
			r <<= 1
			if high == 1 {
				r ^= 0x1021
			}
		}
	}
	return r
}
