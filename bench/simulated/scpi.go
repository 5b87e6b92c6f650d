package simulated

import (
	"fmt"
	"math/rand/v2"
	"strconv"
	"strings"
	"time"

	"kymobench/bench/line"
)

// dialogue is the talking half of an instrument with SCPI commands: it cuts
// bytes into messages, finds the command, keeps the error queue and sends
// answers when they are due.
//
// Understood: one command a message, ended by LF, CR or CR LF; keywords in
// long or short form, upper or lower case, with or without a leading colon;
// one decimal number as a parameter. Not understood, and answered by nothing
// but an entry in the error queue: messages of several commands, suffixes,
// MIN, MAX and DEF. Error numbers and texts are those of SCPI-99 volume 2,
// chapter 21, from memory.
type dialogue struct {
	v        *volume
	identity string
	commands []command
	latency  *rand.Rand

	message  []byte
	overrun  bool
	errors   []string
	answers  []answer
	finished line.Instant // of the last answer
	on       line.Instant // when it was switched on, if not before the start
	forget   func(line.Instant)
}

// restart switches the instrument off and on.
func (d *dialogue) restart(at line.Instant) {
	d.message, d.overrun, d.errors, d.answers = nil, false, nil, nil
	d.on, d.finished = at, at
	if d.forget != nil {
		d.forget(at)
	}
}

// command is one header and what it does. A question has ask, else do is set.
type command struct {
	header string // as the manuals write it: "MEASure:PRESsure?"
	number bool   // it takes a number
	do     func(at line.Instant, x float64) *fault
	ask    func(at line.Instant) func() string // asked at; the text is made when it is due
	takes  [2]time.Duration                    // the answer's time is uniform between these
}

type answer struct {
	due  line.Instant
	text func() string
}

// fault is an entry of the error queue.
type fault struct {
	code int
	text string
}

const (
	messageCap = 256
	queueCap   = 16
)

func newDialogue(v *volume, seed uint64, role, identity string, commands ...command) *dialogue {
	d := &dialogue{v: v, identity: identity, latency: stream(seed, role+" latency")}
	quick := [2]time.Duration{2 * time.Millisecond, 8 * time.Millisecond}
	fixed := func(s string) func() string { return func() string { return s } }
	nextError := func(line.Instant) func() string {
		if len(d.errors) == 0 {
			return fixed(`0,"No error"`)
		}
		first := d.errors[0]
		d.errors = d.errors[1:]
		return fixed(first)
	}
	d.commands = append(commands,
		command{header: "*IDN?", ask: func(line.Instant) func() string { return fixed(d.identity) }, takes: quick},
		command{header: "*CLS", do: func(line.Instant, float64) *fault { d.errors = nil; return nil }},
		command{header: "SYSTem:ERRor?", ask: nextError, takes: quick},
		command{header: "SYSTem:ERRor:NEXT?", ask: nextError, takes: quick},
		command{header: "SYSTem:UPTime?", takes: quick, ask: func(at line.Instant) func() string {
			if d.on > 0 {
				return fixed(strconv.Itoa(int(at.Sub(d.on).Seconds())))
			}
			return fixed(strconv.Itoa(int(poweredBefore + at.Seconds())))
		}},
	)
	return d
}

// Receive takes bytes and carries out every message they end.
func (d *dialogue) Receive(at line.Instant, data []byte) {
	d.v.advance(at)
	for _, b := range data {
		switch {
		case b == '\n' || b == '\r':
			message, overrun := strings.TrimSpace(string(d.message)), d.overrun
			d.message, d.overrun = d.message[:0], false
			switch {
			case overrun:
				d.note(&fault{-363, "Input buffer overrun"})
			case message != "":
				d.note(d.carryOut(at, message))
			}
		case len(d.message) == messageCap:
			d.overrun = true
		default:
			d.message = append(d.message, b)
		}
	}
}

// Due names the first answer's instant.
func (d *dialogue) Due() (line.Instant, bool) {
	if len(d.answers) == 0 {
		return 0, false
	}
	return d.answers[0].due, true
}

// Emit returns the first answer, if it is due.
func (d *dialogue) Emit(at line.Instant) []byte {
	d.v.advance(at)
	if len(d.answers) == 0 || d.answers[0].due > at {
		return nil
	}
	text := d.answers[0].text()
	d.answers = d.answers[1:]
	return append([]byte(text), '\n')
}

func (d *dialogue) note(f *fault) {
	switch {
	case f == nil:
	case len(d.errors) == queueCap:
		d.errors[queueCap-1] = `-350,"Queue overflow"`
	default:
		d.errors = append(d.errors, fmt.Sprintf("%d,%q", f.code, f.text))
	}
}

func (d *dialogue) carryOut(at line.Instant, message string) *fault {
	header, rest, _ := strings.Cut(message, " ")
	rest = strings.TrimSpace(rest)
	for i := 0; i < len(message); i++ {
		if message[i] < ' ' || message[i] > '~' {
			return &fault{-101, "Invalid character"}
		}
	}
	if strings.ContainsRune(message, ';') {
		return &fault{-102, "Syntax error"}
	}
	for _, c := range d.commands {
		if !matches(c.header, header) {
			continue
		}
		var x float64
		switch {
		case !c.number && rest != "":
			return &fault{-108, "Parameter not allowed"}
		case c.number && rest == "":
			return &fault{-109, "Missing parameter"}
		case c.number:
			var ok bool
			if x, ok = decimal(rest); !ok {
				return &fault{-104, "Data type error"}
			}
		}
		if c.do != nil {
			return c.do(at, x)
		}
		d.ask(at, c)
		return nil
	}
	return &fault{-113, "Undefined header"}
}

// ask puts an answer in the queue. An instrument does one thing at a time: a
// question that comes while another is being answered waits.
func (d *dialogue) ask(at line.Instant, c command) {
	if at < d.finished {
		at = d.finished
	}
	takes := time.Duration(between(d.latency, float64(c.takes[0]), float64(c.takes[1])))
	d.finished = at.Add(takes)
	middle := at.Add(takes / 2)
	d.answers = append(d.answers, answer{d.finished, c.ask(middle)})
}

// matches compares a header as sent with one as manuals write it, where the
// capitals are the short form of each keyword.
func matches(written, sent string) bool {
	sent = strings.TrimPrefix(sent, ":")
	ours, theirs := strings.Split(written, ":"), strings.Split(sent, ":")
	if len(ours) != len(theirs) {
		return false
	}
	for i, keyword := range ours {
		short := strings.Map(func(r rune) rune {
			if r >= 'a' && r <= 'z' {
				return -1
			}
			return r
		}, keyword)
		if !strings.EqualFold(theirs[i], keyword) && !strings.EqualFold(theirs[i], short) {
			return false
		}
	}
	return true
}

// decimal reads a plain decimal number, with or without exponent; what else
// strconv takes (nan, inf, hex, underscores) no instrument does.
func decimal(s string) (float64, bool) {
	if s == "" || strings.Trim(s, "+-.0123456789eE") != "" {
		return 0, false
	}
	x, err := strconv.ParseFloat(s, 64)
	return x, err == nil
}
