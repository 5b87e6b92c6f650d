package simulated

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"slices"
	"strconv"
	"time"

	"kymobench/bench/line"
)

// FaultKind is something that goes wrong on a serial line.
type FaultKind string

// The faults of a line. Each happens once, at an exchange that is stated,
// unless its comment says otherwise.
const (
	Garbled    FaultKind = "garbled"     // one byte changed, in the answer or in the question
	Dropped    FaultKind = "dropped"     // one byte lost, in the answer or in the question
	Doubled    FaultKind = "doubled"     // a line comes twice
	Split      FaultKind = "split"       // an answer comes in pieces
	Stuck      FaultKind = "stuck"       // the same answer for 4 s
	Echo       FaultKind = "echo"        // the question comes back before its answer
	Late       FaultKind = "late"        // an answer comes after its deadline
	Unplugged  FaultKind = "unplugged"   // the port goes away for 1 to 5 s
	Renamed    FaultKind = "renamed"     // the port goes away and comes back under another name
	OverRange  FaultKind = "over-range"  // an answer says that there is too much to measure
	NoNumber   FaultKind = "no-number"   // nan, inf, hexadecimal, too large, underscores
	Comma      FaultKind = "comma"       // a decimal comma
	Endless    FaultKind = "endless"     // 5,000 bytes without an end
	Control    FaultKind = "control"     // bytes that are no text
	Disorder   FaultKind = "disorder"    // an answer comes after that to the next question
	Missing    FaultKind = "missing"     // one answer does not come
	Silent     FaultKind = "silent"      // from there on no answer comes
	Drip       FaultKind = "drip"        // an answer comes a byte a second
	Blocked    FaultKind = "blocked"     // the port takes nothing for 1 to 6 s
	Restarted  FaultKind = "restarted"   // it is switched off and on: banner, 2 s of silence, settings lost
	Lying      FaultKind = "lying"       // a command is confirmed and not carried out
	WrongSpeed FaultKind = "wrong-speed" // from the start every byte is another
	WrongUnit  FaultKind = "wrong-unit"  // from the start every number is in another unit
)

// FaultKinds lists them.
func FaultKinds() []FaultKind {
	return []FaultKind{Garbled, Dropped, Doubled, Split, Stuck, Echo, Late, Unplugged, Renamed, OverRange, NoNumber, Comma,
		Endless, Control, Disorder, Missing, Silent, Drip, Blocked, Restarted, Lying, WrongSpeed, WrongUnit}
}

// Fault is one fault of one machine's line.
type Fault struct {
	Kind     FaultKind
	Exchange int    // from 1: of an asked machine the question or command, of a stream the burst
	Seed     uint64 // of what is random about it
}

// Faulty is a machine behind a line that has a fault.
type Faulty struct {
	machine line.Machine
	fault   Fault
	r       *rand.Rand
	stream  bool

	factor  float64 // of a wrong unit
	count   int     // of exchanges
	armed   bool    // the next answer is the one
	asked   []byte  // the question of the exchange
	queue   []pending
	held    []byte // disorder: an answer held back
	last    []byte // stuck: the answer repeated
	until   line.Instant
	silent  bool
	away    bool
	back    line.Instant
	applied bool
}

type pending struct {
	at   line.Instant
	data []byte
}

// restarting is a machine that can be switched off and on.
type restarting interface{ restart(at line.Instant) }

// WithFault puts a fault on the line of a role of the bench; stream says that
// the machine sends by itself.
func (b *Bench) WithFault(role string, f Fault) (*Faulty, error) {
	m := b.machines[role]
	if m == nil {
		return nil, fmt.Errorf("simulated bench: no role %q", role)
	}
	if !slices.Contains(FaultKinds(), f.Kind) {
		return nil, fmt.Errorf("simulated bench: no fault %q", f.Kind)
	}
	_, stream := m.(*transducer)
	r := streamOf(f)
	// kPa, psi, hPa and cmH2O for mmHg, and the reverse.
	factors := []float64{7.500616, 0.1333224, 51.71493, 0.01933678, 0.7500616, 1.333224, 0.7355592, 1.35951}
	return &Faulty{machine: m, fault: f, r: r, stream: stream, factor: factors[r.IntN(len(factors))]}, nil
}

func streamOf(f Fault) *rand.Rand { return stream(f.Seed, "fault "+string(f.Kind)) }

// Exchanges counts those so far.
func (f *Faulty) Exchanges() int { return f.count }

// Applied says that the fault happened.
func (f *Faulty) Applied() bool { return f.applied }

// Left says that the port is gone.
func (f *Faulty) Left() bool { return f.away }

// Plugged says whether the port can be opened, under its own name or, when it
// came back renamed, under another.
func (f *Faulty) Plugged(at line.Instant, renamed bool) bool {
	if !f.applied || f.fault.Kind != Unplugged && f.fault.Kind != Renamed {
		return !renamed
	}
	if at < f.back || renamed != (f.fault.Kind == Renamed) {
		return false
	}
	f.away = false
	return true
}

// Blocks says for how long the port takes nothing.
func (f *Faulty) Blocks(at line.Instant) time.Duration {
	if f.fault.Kind != Blocked || f.count+1 != f.fault.Exchange || f.applied {
		return 0
	}
	f.applied = true
	return time.Duration(between(f.r, 1, 6) * float64(time.Second))
}

// Receive takes bytes sent by the program.
func (f *Faulty) Receive(at line.Instant, data []byte) {
	if f.stream {
		f.machine.Receive(at, data)
		return
	}
	f.count++
	if f.fault.Kind == WrongUnit && !bytes.Contains(data, []byte("?")) {
		data = f.rescaled(data)
	}
	if f.count != f.fault.Exchange {
		f.machine.Receive(at, data)
		return
	}
	f.asked = slices.Clone(data)
	switch f.fault.Kind {
	case Garbled, Dropped:
		// Half of them hit the question.
		if f.r.Uint64()&1 == 1 || !bytes.Contains(data, []byte("?")) {
			f.applied = true
			f.machine.Receive(at, damage(f.fault.Kind, slices.Clone(data), f.r))
			return
		}
	case Lying:
		if !bytes.Contains(data, []byte("?")) {
			f.applied = true
			return
		}
		f.fault.Exchange++ // the next command
	}
	f.armed = true
	f.begin(at)
	f.machine.Receive(at, data)
}

// begin does what starts with the exchange itself.
func (f *Faulty) begin(at line.Instant) {
	switch f.fault.Kind {
	case Unplugged, Renamed:
		f.applied, f.away = true, true
		f.back = at.Add(time.Duration(between(f.r, 1, 5) * float64(time.Second)))
		f.push(at, nil) // so that the inbox looks
	case Silent:
		f.applied, f.silent = true, true
	case Stuck:
		f.until = at.Add(4 * time.Second)
	case Restarted:
		f.applied = true
		if m, ok := f.machine.(restarting); ok {
			m.restart(at)
		}
		f.until = at.Add(2 * time.Second)
		f.push(at.Add(2*time.Second), []byte("\r\nKymobench simulation ready\r\n"))
	}
}

// Due names the next output's instant.
func (f *Faulty) Due() (line.Instant, bool) {
	at, ok := f.machine.Due()
	if len(f.queue) > 0 && (!ok || f.queue[0].at < at) {
		return f.queue[0].at, true
	}
	return at, ok
}

// Emit returns what comes at an instant, with the fault in it.
func (f *Faulty) Emit(at line.Instant) []byte {
	if len(f.queue) > 0 && f.queue[0].at <= at {
		out := f.queue[0].data
		f.queue = f.queue[1:]
		return out
	}
	out := f.machine.Emit(at)
	if f.away || f.silent || f.fault.Kind == Restarted && f.applied && at < f.until {
		return nil
	}
	if f.fault.Kind == WrongSpeed {
		f.applied = true
		for i := range out {
			out[i] = byte(f.r.Uint32())
		}
		return out
	}
	if len(out) == 0 {
		return nil
	}
	if f.fault.Kind == WrongUnit {
		return f.rescaled(out)
	}
	if f.stream {
		if f.count++; f.count == f.fault.Exchange {
			f.armed = true
			f.begin(at)
			if f.away || f.silent || f.fault.Kind == Restarted {
				return nil
			}
		}
	}
	return f.pass(at, out)
}

func (f *Faulty) push(at line.Instant, data []byte) {
	f.queue = append(f.queue, pending{at, data})
	slices.SortStableFunc(f.queue, func(a, b pending) int { return int(max(-1, min(1, a.at-b.at))) })
}

// pass puts the fault into an answer, or a burst.
func (f *Faulty) pass(at line.Instant, out []byte) []byte {
	if f.fault.Kind == Stuck && at < f.until {
		if f.last == nil {
			f.last = slices.Clone(firstLine(out))
		}
		f.applied = true
		if f.stream {
			return bytes.Repeat(f.last, bytes.Count(out, []byte("\n")))
		}
		return slices.Clone(f.last)
	}
	if f.held != nil {
		out = append(out, f.held...)
		f.held = nil
		return out
	}
	if !f.armed {
		return out
	}
	f.armed, f.applied = false, true
	switch f.fault.Kind {
	case Garbled, Dropped:
		return damage(f.fault.Kind, out, f.r)
	case Doubled:
		one := slices.Clone(firstLine(out))
		return append(one, out...)
	case Echo:
		if f.stream {
			return append([]byte("READ?\r\n"), out...)
		}
		return append(slices.Clone(f.asked), out...)
	case OverRange:
		return f.replace(out, "9.9E37", "OL", "-----", "OVER")
	case NoNumber:
		return f.replace(out, "nan", "inf", "0x1p-2", "1e999", "1_00.0")
	case Comma:
		return f.replace(out, string(bytes.ReplaceAll(bytes.TrimRight(firstLine(out), "\r\n"), []byte("."), []byte(","))))
	case Control:
		i := f.r.IntN(len(out))
		junk := [][]byte{{0}, {0x1b, '[', '2', 'J'}, []byte("\u202e"), {0xff, 0xfe}, {7}}
		return slices.Insert(out, i, junk[f.r.IntN(len(junk))]...)
	case Endless:
		return append(bytes.Repeat([]byte("1"), 5000), out...)
	case Missing:
		return nil
	case Disorder:
		f.held = out
		return nil
	case Late:
		f.push(at.Add(time.Duration(between(f.r, 1.05, 3)*float64(time.Second))), out)
		return nil
	case Split:
		return f.pieces(at, out, time.Duration(between(f.r, 2, 40)*float64(time.Millisecond)))
	case Drip:
		if !f.stream {
			for i := range out {
				f.push(at.Add(time.Duration(i+1)*time.Second), out[i:i+1])
			}
			return nil
		}
		return f.pieces(at, out, 20*time.Millisecond)
	}
	return out
}

// pieces sends an answer in three.
func (f *Faulty) pieces(at line.Instant, out []byte, apart time.Duration) []byte {
	a := f.r.IntN(len(out) + 1)
	b := a + f.r.IntN(len(out)-a+1)
	f.push(at.Add(apart), out[a:b])
	f.push(at.Add(2*apart), out[b:])
	return out[:a]
}

// replace puts another text in the place of the first line's.
func (f *Faulty) replace(out []byte, texts ...string) []byte {
	first := firstLine(out)
	end := first[len(bytes.TrimRight(first, "\r\n")):]
	text := append([]byte(texts[f.r.IntN(len(texts))]), end...)
	return append(text, out[len(first):]...)
}

func firstLine(out []byte) []byte {
	if i := bytes.IndexByte(out, '\n'); i >= 0 {
		return out[:i+1]
	}
	return out
}

// rescaled multiplies the numbers of lines that hold a decimal point, or that
// follow a blank, and keeps their form.
func (f *Faulty) rescaled(out []byte) []byte {
	var b bytes.Buffer
	for _, l := range bytes.SplitAfter(out, []byte("\n")) {
		text := bytes.TrimRight(l, "\r\n")
		end := l[len(text):]
		head := text[:bytes.LastIndexByte(text, ' ')+1]
		x, ok := decimal(string(text[len(head):]))
		if !ok || len(head) == 0 && !bytes.Contains(text, []byte(".")) {
			b.Write(l)
			continue
		}
		f.applied = true
		b.Write(head)
		switch x *= f.factor; {
		case f.stream:
			b.Write(bytes.TrimRight(appendOutput(nil, x), "\r\n"))
		case len(head) > 0:
			b.WriteString(strconv.FormatFloat(x, 'f', 3, 64))
		default:
			b.WriteString(signed(x))
		}
		b.Write(end)
	}
	return b.Bytes()
}

// damage changes or drops one byte.
func damage(kind FaultKind, data []byte, r *rand.Rand) []byte {
	i := r.IntN(len(data))
	if kind == Dropped {
		return slices.Delete(data, i, i+1)
	}
	old := data[i]
	for data[i] == old {
		if r.Uint64()&1 == 1 {
			data[i] = byte(r.Uint32()) // anything
		} else {
			data[i] = "0123456789+-.E\r\n,?: "[r.IntN(20)] // what looks right
		}
	}
	return data
}
