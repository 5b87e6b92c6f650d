package simulated

import (
	"math"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/pelletier/go-toml/v2"

	"kymobench/bench/line"
)

func TestDialogues(t *testing.T) {
	none := `0,"No error"`
	for _, row := range []struct{ role, send, answer, err string }{
		{RoleReference, "*IDN?", identityReference, none},
		{RoleReference, "*idn?\r", identityReference, none},
		{RoleReadout, "*IDN?", identityOfReadout(1), none},
		{RoleSource, "*IDN?", identitySource, none},
		{RoleValve, "*IDN?", identityValve, none},
		{RoleValve, "SYST:UPT?", "3600", none},
		{RoleSource, "syst:uptime?", "3600", none},
		{RoleReadout, ":SYSTem:UPTime?", "3600", none},
		{RoleReference, "system:error:next?", none, none},
		{RoleReference, "CAL:ZERO", "", none},
		{RoleReference, "calibration:zero", "", none},
		{RoleReference, "CALI:ZERO", "", `-113,"Undefined header"`},
		{RoleReference, "CAL:ZERO 1", "", `-108,"Parameter not allowed"`},
		{RoleReference, "MEAS:PRES", "", `-113,"Undefined header"`},
		{RoleReference, "MEAS:PRES? 5", "", `-108,"Parameter not allowed"`},
		{RoleReference, "*IDN?;*CLS", "", `-102,"Syntax error"`},
		{RoleReference, "MEAS:\x02PRES?", "", `-101,"Invalid character"`},
		{RoleReference, strings.Repeat("A", 300), "", `-363,"Input buffer overrun"`},
		{RoleReadout, "MEAS:PRES?", "", `-113,"Undefined header"`},
		{RoleValve, "ROUT:OPEN", "", none},
		{RoleValve, "route:close", "", none},
		{RoleValve, "ROUT:SHUT", "", `-113,"Undefined header"`},
		{RoleSource, "SOUR:PRES 12.5", "", none},
		{RoleSource, "source:pressure -1.25e1", "", none},
		{RoleSource, "SOUR:PRES", "", `-109,"Missing parameter"`},
		{RoleSource, "SOUR:PRES nan", "", `-104,"Data type error"`},
		{RoleSource, "SOUR:PRES 0x10", "", `-104,"Data type error"`},
		{RoleSource, "SOUR:PRES 1e", "", `-104,"Data type error"`},
		{RoleSource, "SOUR:PRES 400.1", "", `-222,"Data out of range"`},
		{RoleSource, "SOUR:PRES -51", "", `-222,"Data out of range"`},
		{RoleSource, "SOUR:HOLD", "", none},
		{RoleSource, "SOUR:VENT now", "", `-108,"Parameter not allowed"`},
	} {
		s := start(t, Settings{Seed: 1})
		s.send(row.role, row.send)
		if row.answer != "" {
			if got, _ := s.answer(row.role); got != row.answer {
				t.Errorf("%s %q: answer %q, want %q", row.role, row.send, got, row.answer)
			}
		}
		// The next line is the error queue's: what was not understood, and
		// what is no question, has no answer.
		if got := s.ask(row.role, "SYST:ERR?"); got != row.err {
			t.Errorf("%s %q: then %q, want %q", row.role, row.send, got, row.err)
		}
		if got := s.ask(row.role, "SYST:ERR?"); got != none {
			t.Errorf("%s %q: a second error %q", row.role, row.send, got)
		}
		if out := string(s.out[row.role]); !strings.HasSuffix(out, "\n") || strings.Contains(out, "\r") {
			t.Errorf("%s: terminators in %q", row.role, out)
		}
	}
}

func TestErrorQueue(t *testing.T) {
	s := start(t, Settings{})
	for range 40 {
		s.send(RoleValve, "BLA")
	}
	n := 0
	for ; n < 100; n++ {
		e := s.ask(RoleValve, "SYST:ERR?")
		if e == `0,"No error"` {
			break
		}
		if want := n == queueCap-1; (e == `-350,"Queue overflow"`) != want {
			t.Errorf("entry %d is %s", n, e)
		}
	}
	if n != queueCap {
		t.Errorf("%d entries", n)
	}
	s.send(RoleValve, "BLA")
	s.send(RoleValve, "*CLS")
	if e := s.ask(RoleValve, "SYST:ERR?"); e != `0,"No error"` {
		t.Errorf("after *CLS: %s", e)
	}
}

// A message may come in pieces, several in one, and empty ones mean nothing.
func TestFraming(t *testing.T) {
	s := start(t, Settings{})
	m := s.b.Machine(RoleValve)
	for _, part := range []string{"\r\n\n*ID", "N?", "\r\n*IDN?\n*ID", "N?\n"} {
		m.Receive(s.now, []byte(part))
	}
	for i := range 3 {
		if got, ok := s.answer(RoleValve); !ok || got != identityValve {
			t.Errorf("answer %d: %q", i, got)
		}
	}
	if got, ok := s.answer(RoleValve); ok {
		t.Errorf("a fourth answer %q", got)
	}
}

func TestTransactionTime(t *testing.T) {
	s := start(t, Settings{Seed: 4})
	least, most := time.Hour, time.Duration(0)
	for range 300 {
		sent := s.now
		s.read()
		least, most = min(least, s.now.Sub(sent)), max(most, s.now.Sub(sent))
	}
	if least < 20*time.Millisecond || most > 60*time.Millisecond || most-least < 30*time.Millisecond {
		t.Errorf("readings take %v to %v", least, most)
	}
}

func TestZeroing(t *testing.T) {
	for seed := range uint64(10) {
		s := start(t, Settings{Seed: seed})
		average := func() float64 {
			var x []float64
			for range 100 {
				x = append(x, s.read())
			}
			return mean(x)
		}
		// 100 readings of 0.02 mmHg: 0.002, and 0.003 that the zeroing leaves.
		within(t, "before zeroing", average(), s.b.drawn.zeroShift, 0.01)
		s.send(RoleReference, "CAL:ZERO")
		within(t, "after zeroing", average(), 0, 0.015)
		s.send(RoleReference, "CAL:ZERO")
		within(t, "after zeroing twice", average(), 0, 0.015)
		s.send(RoleSource, "SOUR:PRES 20")
		s.run(4 * time.Second)
		s.send(RoleReference, "CAL:ZERO")
		if e := s.ask(RoleReference, "SYST:ERR?"); e != `-221,"Settings conflict"` {
			t.Errorf("zeroing at 20 mmHg: %s", e)
		}
		within(t, "and the zero is as it was", average(), 20, 0.5)
	}
}

// certificate reads the corrections back from the bench file, as a user would.
func certificate(t *testing.T, b *Bench) func(reading float64) float64 {
	t.Helper()
	var file struct {
		Reference struct {
			Certificate struct {
				Correction []struct{ At, Correction string }
			}
		}
	}
	if err := toml.Unmarshal(b.BenchFile(nil), &file); err != nil {
		t.Fatal(err)
	}
	var at, add []float64
	for _, c := range file.Reference.Certificate.Correction {
		for text, into := range map[string]*[]float64{c.At: &at, c.Correction: &add} {
			x, err := strconv.ParseFloat(strings.TrimSuffix(text, " mmHg"), 64)
			if err != nil {
				t.Fatal(err)
			}
			*into = append(*into, x)
			if c.At == c.Correction {
				t.Fatalf("ambiguous row %v", c)
			}
		}
	}
	return func(reading float64) float64 {
		for i := 1; i < len(at); i++ {
			if reading <= at[i] {
				f := (reading - at[i-1]) / (at[i] - at[i-1])
				return reading + add[i-1]*(1-f) + add[i]*f
			}
		}
		t.Fatalf("%g mmHg is beyond the certificate", reading)
		return 0
	}
}

// What the certificate promises holds over many benches: the corrected reading
// misses the true pressure by a normal error with the stated uncertainty.
func TestReferenceIsAsCertified(t *testing.T) {
	const benches = 150
	for _, p := range []float64{50, 100, 300} {
		var squares, beyond float64
		for seed := range uint64(benches) {
			s := start(t, Settings{Seed: seed})
			s.b.machines[RoleUUT].(*transducer).burst = 1 << 62 // not needed here
			s.send(RoleReference, "CAL:ZERO")
			s.send(RoleSource, "SOUR:PRES "+strconv.FormatFloat(p, 'f', 0, 64))
			s.run(8 * time.Second)
			correct := certificate(t, s.b)
			var x []float64
			for range 50 {
				x = append(x, correct(s.read()))
			}
			v := s.b.machines[RoleSource].(*dialogue).v
			u := math.Hypot(math.Hypot(0.04/2, 0.0006/2*p), 0.004) // and noise, zeroing
			z := (mean(x) - v.now(s.now)) / u
			squares += z * z / benches
			if math.Abs(z) > 1.96 {
				beyond += 1. / benches
			}
		}
		within(t, "mean square of error over uncertainty", squares, 1, 4*math.Sqrt(2./benches))
		within(t, "share beyond 1.96", beyond, 0.05, 4*math.Sqrt(0.05*0.95/benches))
	}
}

// The reference lags behind a ramp by slope x lag, once it follows.
func TestReferenceLag(t *testing.T) {
	d := quietly(func(d *drawn) { d.slew = 20; d.approach = 0.3 })
	v := newVolume(d)
	g := &gauge{d: d, cursor: cursor{v: v}}
	v.set(0, 300)
	for _, ms := range []int{4000, 4001, 4003, 9999} {
		at := time.Duration(ms) * time.Millisecond
		within(t, "lagging", g.follow(line.Instant(at)), 20*(at.Seconds()-d.lag), 1e-6)
	}
}

func TestOutputText(t *testing.T) {
	for _, row := range []struct {
		x    float64
		want string
	}{
		{1500.02, "+1500.02"}, {0, "+0000.00"}, {-0.004, "+0000.00"}, {-0.006, "-0000.01"}, {0.005001, "+0000.01"},
		{-37.125, "-0037.13"}, {9999.99, "+9999.99"}, {12345, "+9999.99"}, {-1e9, "-9999.99"},
	} {
		if got := string(appendOutput(nil, row.x)); got != row.want+"\r\n" {
			t.Errorf("%g is written %q, want %q", row.x, got, row.want)
		}
	}
	for x, want := range map[float64]string{0: "+0.00", -0.001: "+0.00", -0.01: "-0.01", 300.126: "+300.13"} {
		if got := signed(x); got != want {
			t.Errorf("%g is written %q, want %q", x, got, want)
		}
	}
}

// The stream has the rate it states, within the clock's tolerance, and comes
// in bursts of 16 ms.
func TestStreamRate(t *testing.T) {
	s := start(t, Settings{Seed: 9})
	s.run(100 * time.Second)
	n := float64(len(s.out[RoleUUT]) / lineLength)
	within(t, "lines in 100 s", n, 100000, 10+18)
	before := len(s.out[RoleUUT])
	due, _ := s.b.Machine(RoleUUT).Due()
	s.run(due.Sub(s.now) - 1)
	if len(s.out[RoleUUT]) != before {
		t.Error("lines between bursts")
	}
	s.run(1)
	if burst := (len(s.out[RoleUUT]) - before) / lineLength; burst < 15 || burst > 17 {
		t.Errorf("%d lines in a burst", burst)
	}
	next, _ := s.b.Machine(RoleUUT).Due()
	if next.Sub(due) != 16*time.Millisecond {
		t.Errorf("bursts every %v", next.Sub(due))
	}
}

// Whatever comes in, an instrument answers in whole lines, at most one for
// each question mark, and afterwards still says who it is.
func FuzzDialogue(f *testing.F) {
	for _, seed := range []string{"*IDN?\n", "SOUR:PRES 1e3\r\n", "MEAS:PRES?\nCAL:ZERO\n", ":::?\n", "\x00\xff?\n", "SOUR:PRES  -5 \nSOUR:HOLD\n"} {
		f.Add([]byte(seed))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		for _, role := range []string{RoleReference, RoleSource, RoleValve} {
			s := start(t, Settings{})
			s.b.machines[RoleUUT].(*transducer).burst = 1 << 62                        // not needed here
			s.b.Machine(role).Receive(s.now, append(data[:len(data):len(data)], '\n')) // ends a message left open
			s.run(time.Duration(1+len(data)) * 100 * time.Millisecond)
			out := string(s.out[role])
			if n := strings.Count(out, "\n"); n > strings.Count(string(data), "?") || out != "" && !strings.HasSuffix(out, "\n") {
				t.Fatalf("%s answers %q with %q", role, data, out)
			}
			s.seen[role] = len(out)
			s.b.Machine(role).Receive(s.now, []byte("*CLS\n"))
			if got := s.ask(role, "*IDN?"); !strings.HasPrefix(got, "Kymobench simulation,") {
				t.Fatalf("%s, after %q: %q", role, data, got)
			}
		}
	})
}
