package simulated

import (
	"strconv"
	"strings"
	"testing"
	"time"

	"kymobench/bench/line"
)

// session drives the machines of one bench in the order of time, as an
// in-memory inbox or a pump does, and keeps what each put out.
type session struct {
	t    testing.TB
	b    *Bench
	now  line.Instant
	out  map[string][]byte
	seen map[string]int // bytes of out already taken as answers
}

func start(t testing.TB, s Settings) *session {
	t.Helper()
	b, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	return &session{t: t, b: b, out: map[string][]byte{}, seen: map[string]int{}}
}

// step lets the next output happen if it is due by an instant.
func (s *session) step(until line.Instant) bool {
	first, role := until, ""
	for _, r := range Roles() {
		if due, ok := s.b.Machine(r).Due(); ok && due <= first && (role == "" || due < first) {
			first, role = due, r
		}
	}
	if role == "" {
		return false
	}
	if first < s.now {
		s.t.Fatalf("%s is due at %v, before %v", role, first, s.now)
	}
	s.now = first
	s.out[role] = append(s.out[role], s.b.Machine(role).Emit(first)...)
	return true
}

func (s *session) run(d time.Duration) {
	until := s.now.Add(d)
	for s.step(until) {
	}
	s.now = until
}

func (s *session) send(role, text string) {
	s.b.Machine(role).Receive(s.now, []byte(text+"\n"))
}

// answer waits for the next line of a role, at most two seconds.
func (s *session) answer(role string) (string, bool) {
	until := s.now.Add(2 * time.Second)
	for {
		rest := string(s.out[role][s.seen[role]:])
		if text, _, ok := strings.Cut(rest, "\n"); ok {
			s.seen[role] += len(text) + 1
			return text, true
		}
		if !s.step(until) {
			s.now = until
			return "", false
		}
	}
}

func (s *session) ask(role, text string) string {
	s.t.Helper()
	s.send(role, text)
	a, ok := s.answer(role)
	if !ok {
		s.t.Fatalf("%s does not answer %q", role, text)
	}
	return a
}

func (s *session) read() float64 {
	s.t.Helper()
	x, err := strconv.ParseFloat(s.ask(RoleReference, "MEAS:PRES?"), 64)
	if err != nil {
		s.t.Fatal(err)
	}
	return x
}

// samples returns the UUT's values of the last n lines, uV/V.
func (s *session) samples(n int) []float64 {
	s.t.Helper()
	lines := strings.Split(strings.TrimSuffix(string(s.out[RoleUUT]), "\r\n"), "\r\n")
	if len(lines) < n {
		s.t.Fatalf("%d lines, %d asked", len(lines), n)
	}
	var xs []float64
	for _, l := range lines[len(lines)-n:] {
		x, err := strconv.ParseFloat(l, 64)
		if err != nil || len(l) != lineLength-2 {
			s.t.Fatalf("line %q: %v", l, err)
		}
		xs = append(xs, x)
	}
	return xs
}

// usual is what a run does with a bench, 200 s.
func (s *session) usual() {
	s.send(RoleSource, "SOUR:VENT")
	s.reading(50)
	s.send(RoleReference, "CAL:ZERO")
	s.reading(60)
	for range 3 {
		s.send(RoleSource, "SOUR:PRES 300")
		s.reading(30)
		s.send(RoleSource, "SOUR:PRES 0")
		s.reading(30)
	}
	s.send(RoleSource, "SOUR:PRES 300")
	s.reading(30)
	s.send(RoleSource, "SOUR:HOLD")
	s.reading(350)
	for _, p := range cycle() {
		s.send(RoleSource, "SOUR:PRES "+strconv.FormatFloat(p, 'f', 1, 64))
		s.reading(70)
	}
	for range 5 {
		s.send(RoleSource, "SOUR:PRES 100")
		s.reading(35)
		s.send(RoleSource, "SOUR:HOLD")
		s.run(500 * time.Millisecond)
		s.send(RoleValve, "ROUT:OPEN")
		s.run(2 * time.Second)
		s.send(RoleValve, "ROUT:CLOS")
	}
	s.send(RoleSource, "SOUR:VENT")
	s.run(40 * time.Second)
}

// reading asks the reference n times, ten times a second.
func (s *session) reading(n int) {
	for range n {
		next := s.now.Add(100 * time.Millisecond)
		s.read()
		s.run(next.Sub(s.now))
	}
}

func mean(x []float64) float64 {
	m := 0.0
	for _, v := range x {
		m += v / float64(len(x))
	}
	return m
}
