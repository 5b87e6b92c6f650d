package modbus

import (
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"math"
	"reflect"
	"strings"
	"testing"
	"time"

	"kymobench/bench"
	"kymobench/bench/instruments/asked"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

func bytesOf(t testing.TB, s string) string {
	b, err := hex.DecodeString(strings.ReplaceAll(s, " ", ""))
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

// The messages and answers here were made by pymodbus 3.0.0rc1 (Debian
// python3-pymodbus) for station 17.
func TestMessages(t *testing.T) {
	w, err := newWire("w", 17)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ words, message string }{
		{"holding 107 text6", "11 03 00 6B 00 03 76 87"},
		{"input 0 float32", "11 04 00 00 00 02 73 5B"},
		{"holding 1 uint16 = 3", "11 06 00 01 00 03 9A 9B"},
		{"holding 1 uint32 = 655618", "11 10 00 01 00 02 04 00 0A 01 02 C6 F0"},
	} {
		var got string
		if strings.Contains(c.words, "=") {
			command, err := ParseCommand(c.words)
			if err != nil {
				t.Fatal(err)
			}
			data, err := command.bytes(command.Value, "")
			if err != nil {
				t.Fatal(err)
			}
			got = w.command(command, data)
		} else {
			q, err := ParseQuestion(c.words)
			if err != nil {
				t.Fatal(err)
			}
			got = w.question(q)
		}
		if got != bytesOf(t, c.message) {
			t.Errorf("%q: % X, want %s", c.words, got, c.message)
		}
	}
}

// station answers each message with the next of its answers, the last one for
// ever; none is silence, one that begins with "~" comes 1.5 s late.
type station struct {
	t       testing.TB
	answers map[string][]string
	heard   []string
	at      []line.Instant
	out     []line.Event
}

func (m *station) Receive(at line.Instant, data []byte) {
	question := fmt.Sprintf("% X", data)
	m.heard, m.at = append(m.heard, question), append(m.at, at)
	answers := m.answers[question]
	if len(answers) == 0 {
		return
	}
	if len(answers) > 1 {
		m.answers[question] = answers[1:]
	}
	text, late := strings.CutPrefix(answers[0], "~")
	after := 20 * time.Millisecond
	if late {
		after = 1500 * time.Millisecond
	}
	m.out = append(m.out, line.Event{At: at.Add(after), Data: []byte(bytesOf(m.t, text))})
}

func (m *station) Due() (line.Instant, bool) {
	if len(m.out) == 0 {
		return 0, false
	}
	return m.out[0].At, true
}

func (m *station) Emit(line.Instant) []byte {
	data := m.out[0].Data
	m.out = m.out[1:]
	return data
}

func table(t testing.TB, answers map[string][]string) (*station, *line.Line) {
	m := &station{t: t, answers: answers}
	inbox := line.NewMemory(time.Time{})
	inbox.Connect(1, m, line.MemoryOptions{})
	return m, line.NewEngine(inbox).Open(1, LineSettings("reference on port 1", 9600))
}

// pymodbus 3.0.0rc1: BinaryPayloadBuilder with each byte and word order, in an
// answer to function 04.
func TestNumbers(t *testing.T) {
	for _, c := range []struct {
		order, kind, answer string
		want                float64
	}{
		{"", "float32", "11 04 04 43 96 20 00 06 2D", 300.25}, {"big-endian", "int32", "11 04 04 FF FE 1D C0 B2 A1", -123456},
		{"", "int16", "11 04 02 FB 2E BB DF", -1234}, {"", "uint16", "11 04 02 EA 60 37 BB", 60000},
		{"little-endian", "float32", "11 04 04 00 20 96 43 C5 DE", 300.25}, {"little-endian", "int32", "11 04 04 C0 1D FE FF 46 63", -123456},
		{"little-endian", "int16", "11 04 02 2E FB 24 D0", -1234}, {"little-endian", "uint16", "11 04 02 60 EA D1 7C", 60000},
		{"big-endian-swapped", "float32", "11 04 04 20 00 43 96 50 DB", 300.25}, {"big-endian-swapped", "int32", "11 04 04 1D C0 FF FE 2C 65", -123456},
		{"big-endian-swapped", "int16", "11 04 02 FB 2E BB DF", -1234},
		{"little-endian-swapped", "float32", "11 04 04 96 43 00 20 37 C1", 300.25}, {"little-endian-swapped", "int32", "11 04 04 FE FF C0 1D 7B 94", -123456},
		{"little-endian-swapped", "int16", "11 04 02 2E FB 24 D0", -1234},
	} {
		s := Settings{Station: 17, Order: c.order, Read: "input 0 " + c.kind, Unit: "mmHg"}
		question := "11 04 00 00 00 02 73 5B"
		if strings.HasSuffix(c.kind, "16") {
			question = "11 04 00 00 00 01 33 5A"
		}
		_, l := table(t, map[string][]string{question: {c.answer}})
		i, err := New(l, s)
		if err != nil {
			t.Fatal(err)
		}
		r, err := i.Read(context.Background())
		if err != nil || r.Value.Stated != c.want || r.Text != strings.ReplaceAll(c.answer, " ", "") || math.Abs(r.Value.SI-c.want*133.322387415) > 1e-6 {
			t.Errorf("%s %s: %+v, %v", c.order, c.kind, r, err)
			continue
		}
		// What the record keeps is read again to the same number.
		field, err := s.Field()
		if err != nil {
			t.Fatal(err)
		}
		if x, err := field.Number(r.Text); err != nil || x != c.want {
			t.Errorf("%s: %v, %v", r.Text, x, err)
		}
		// And what is written in that order stands there the same way round.
		command := Command{Type: c.kind}
		if data, err := command.bytes(c.want, c.order); err != nil || !strings.Contains(bytesOf(t, c.answer), string(data)) {
			t.Errorf("%s %s written as % X, %v", c.order, c.kind, data, err)
		}
	}
	s := Settings{Station: 17, Read: "input 0 int16", Unit: "kPa", Scale: 0.1, Offset: -50, OverRange: []int64{-32768}}
	_, l := table(t, map[string][]string{"11 04 00 00 00 01 33 5A": {"11 04 02 FB 2E BB DF"}})
	i, err := New(l, s)
	if err != nil {
		t.Fatal(err)
	}
	if r, err := i.Read(context.Background()); err != nil || math.Abs(r.Value.SI+173400) > 1e-6 {
		t.Errorf("-1234 x 0.1 - 50: %+v, %v", r, err)
	}
}

func settings() Settings {
	return Settings{Station: 17, Identify: "holding 0 text7", Identity: "HOLL-7", Uptime: "holding 9 uint16", Within: time.Second,
		Read: "input 0 float32", Unit: "mmHg", Zero: "holding 1 uint16 = 3"}
}

const (
	who     = "11 03 00 00 00 04 46 99"
	whoIs   = "11 03 08 48 4F 4C 4C 2D 37 20 00 C4 E5"
	reading = "11 04 00 00 00 02 73 5B"
	read300 = "11 04 04 43 96 20 00 06 2D"
	zero    = "11 06 00 01 00 03 9A 9B"
)

func TestIdentifyAndZero(t *testing.T) {
	ctx := context.Background()
	m, l := table(t, map[string][]string{who: {whoIs}, zero: {zero}})
	i, err := New(l, settings())
	if err != nil {
		t.Fatal(err)
	}
	if id, err := i.Identify(ctx); err != nil || id != "HOLL-7" {
		t.Errorf("%q, %v", id, err)
	}
	if err := i.Zero(ctx); err != nil {
		t.Error(err)
	}
	if !reflect.DeepEqual(m.heard, []string{who, zero}) {
		t.Errorf("%q", m.heard)
	}
	// 3.5 characters of eleven bits at 9600 baud are 4.01 ms.
	if gap := m.at[1].Sub(m.at[0].Add(20 * time.Millisecond)); gap < 4010*time.Microsecond || gap > 4020*time.Microsecond {
		t.Errorf("asked again %v after the answer", gap)
	}
	other := settings()
	other.Identity = "HOLL-8"
	_, l = table(t, map[string][]string{who: {whoIs}})
	if i, err = New(l, other); err != nil {
		t.Fatal(err)
	}
	var wrong *asked.IdentityError
	if id, err := i.Identify(ctx); !errors.As(err, &wrong) || id != "" {
		t.Errorf("%q, %v", id, err)
	}
	none, err := New(l, Settings{Station: 1})
	if err != nil {
		t.Fatal(err)
	}
	_, identify := none.Identify(ctx)
	_, uptime := none.Uptime(ctx)
	_, read := none.Read(ctx)
	for _, err := range []error{identify, uptime, read, none.Zero(ctx)} {
		if !errors.Is(err, bench.ErrNotStated) {
			t.Error(err)
		}
	}
}

// What is not the answer is refused, asked for again, and told; a refusal of
// the instrument's own is not asked again.
func TestWrongAnswers(t *testing.T) {
	ctx := context.Background()
	for _, c := range []struct{ answer, says string }{
		{"11 04 04 43 96 20 00 06 2C", "CRC"},
		{"12 04 04 43 96 20 00 06 1E", "comes from station 18, 17 was asked"},
		{"11 03 04 43 96 20 00 B0 2C", "answers function 3, 4 was asked"},
		{"11 04 02 EA 60 37 BB", "holds 2 bytes, 4 were asked for"},
		{"11 03 06 AE 41 56 52 43 40 49 AD", "answers function 3"},
		{"48 65 6C 6C 6F", "is no answer"},
		{"11 04 04 7F C0 00 00 03 DD", "holds no number"},
	} {
		answer := c.answer
		if strings.Contains(c.says, "station") || strings.Contains(c.says, "3, 4 was") || strings.Contains(c.says, "no number") {
			answer = sealed(t, answer) // the CRC as it should be
		}
		m, l := table(t, map[string][]string{who: {whoIs}, reading: {answer}})
		i, err := New(l, settings())
		if err != nil {
			t.Fatal(err)
		}
		r, err := i.Read(ctx)
		if err == nil || r != (bench.Reading{}) || !strings.Contains(err.Error(), c.says) && c.says != "is no answer" {
			t.Errorf("%s: %+v, %v", answer, r, err)
		}
		if !reflect.DeepEqual(m.heard, []string{reading, reading, who, reading}) {
			t.Errorf("%s: heard %q", answer, m.heard)
		}
	}
	m, l := table(t, map[string][]string{reading: {sealed(t, "11 84 02 00 00")}})
	i, err := New(l, settings())
	if err != nil {
		t.Fatal(err)
	}
	_, err = i.Read(ctx)
	if want := "reference on port 1 refused 11 04 00 00 00 02 73 5B: it has no such register (exception 2)"; err == nil || err.Error() != want || len(m.heard) != 1 {
		t.Errorf("%v", err)
	}
}

// sealed replaces the last two bytes by the CRC of the rest, bit by bit.
func sealed(t testing.TB, s string) string {
	b := bytesOf(t, s)
	b = b[:len(b)-2]
	r := uint16(0xffff)
	for i := range len(b) {
		r ^= uint16(b[i])
		for range 8 {
			if r&1 == 1 {
				r = r>>1 ^ 0xA001
			} else {
				r >>= 1
			}
		}
	}
	return fmt.Sprintf("% X %02X %02X", b, byte(r), byte(r>>8))
}

func TestExceptionsAsPublished(t *testing.T) {
	for _, s := range []string{"11 83 01 81 35", "11 83 02 C1 34", "11 83 03 00 F4", "11 83 06 C0 F7"} { // pymodbus 3.0.0rc1
		if got := sealed(t, s); got != s {
			t.Errorf("%s, %s", s, got)
		}
	}
}

// A late answer has no name on it: it is drained, the identity asked, and the
// question asked anew.
func TestLate(t *testing.T) {
	m, l := table(t, map[string][]string{who: {whoIs}, reading: {"~" + sealed(t, "11 04 04 00 00 00 00 00 00"), read300}})
	i, err := New(l, settings())
	if err != nil {
		t.Fatal(err)
	}
	if r, err := i.Read(context.Background()); err != nil || r.Value.Stated != 300.25 || l.Stale() != 1 {
		t.Errorf("%+v, %v, %d stale", r, err, l.Stale())
	}
	if !reflect.DeepEqual(m.heard, []string{reading, who, reading}) {
		t.Errorf("%q", m.heard)
	}
	// An instrument without identity: quiet alone.
	nameless := settings()
	nameless.Identify, nameless.Identity = "", ""
	m, l = table(t, map[string][]string{reading: {"~" + read300, read300}})
	if i, err = New(l, nameless); err != nil {
		t.Fatal(err)
	}
	if r, err := i.Read(context.Background()); err != nil || r.Value.Stated != 300.25 || len(m.heard) != 2 {
		t.Errorf("%+v, %v, %q", r, err, m.heard)
	}
}

func TestSourceAndValve(t *testing.T) {
	ctx := context.Background()
	m, l := table(t, map[string][]string{})
	s, err := NewSource(l, SourceSettings{Settings: Settings{Station: 17}, Set: "holding 10 float32 = {kPa}", Hold: "holding 12 uint16 = 1", Vent: "holding 12 uint16 = 0",
		Lowest: quantity.MmHg(-30), Highest: quantity.MmHg(330)})
	if err != nil {
		t.Fatal(err)
	}
	set := sealed(t, "11 10 00 0A 00 02 04 42 20 00 00 00 00") // 40 kPa: 42200000 in IEEE 754
	m.answers[set] = []string{sealed(t, "11 10 00 0A 00 02 00 00")}
	hold, vent := sealed(t, "11 06 00 0C 00 01 00 00"), sealed(t, "11 06 00 0C 00 00 00 00")
	m.answers[hold], m.answers[vent] = []string{hold}, []string{vent}
	if err := errors.Join(s.Set(ctx, 40e3), s.Hold(ctx), s.Vent(ctx)); err != nil {
		t.Error(err)
	}
	s.VentNow()
	if !reflect.DeepEqual(m.heard, []string{set, hold, vent, vent}) {
		t.Errorf("%q", m.heard)
	}
	for _, p := range []quantity.Pressure{quantity.MmHg(331), quantity.Pressure(math.NaN())} {
		if err := s.Set(ctx, p); err == nil || len(m.heard) != 4 {
			t.Errorf("%v was set", p)
		}
	}
	m.answers[hold] = []string{vent}
	if err := s.Hold(ctx); err == nil || !strings.Contains(err.Error(), "does not confirm") {
		t.Errorf("%v", err)
	}
	tenths, err := ParseCommand("holding 3 int16 = 10 {mmHg}")
	if err != nil || math.Abs(tenths.pressure(quantity.MmHg(-12.34))+123.4) > 1e-9 {
		t.Errorf("%+v, %v", tenths, err)
	}
	if data, err := tenths.bytes(tenths.pressure(quantity.MmHg(-12.34)), ""); err != nil || string(data) != "\xff\x85" { // -123
		t.Errorf("% X, %v", data, err)
	}
	v, err := NewValve(l, ValveSettings{Settings: Settings{Station: 17}, Release: "holding 12 uint16 = 0", Shut: "holding 12 uint16 = 1 by 16"})
	if err != nil {
		t.Fatal(err)
	}
	shut := sealed(t, "11 10 00 0C 00 01 02 00 01 00 00")
	m.answers[shut] = []string{sealed(t, "11 10 00 0C 00 01 00 00")}
	if err := errors.Join(v.Release(ctx), v.Shut(ctx)); err != nil {
		t.Error(err)
	}
}

func TestRefusedWords(t *testing.T) {
	for _, s := range []string{"", "holding 1", "coil 1 int16", "holding -1 int16", "holding 65536 int16", "holding 1 int17", "holding 65535 float32",
		"holding 1 text0", "holding 1 text65", "holding +1 int16", "holding 1 int16 2"} {
		if q, err := ParseQuestion(s); err == nil {
			t.Errorf("%q is taken for %+v", s, q)
		}
	}
	for _, s := range []string{"", "holding 1 int16", "input 1 int16 = 1", "holding 1 int16 = ", "holding 1 int16 = 40000", "holding 1 uint16 = -1", "holding 1 text4 = 1",
		"holding 1 int16 = {V}", "holding 1 int16 = {mmHg} 2", "holding 1 int16 = x", "holding 65535 float32 = 1", "holding 1 float32 = 1e39", "holding 1 int16 = 1 by 17"} {
		if c, err := ParseCommand(s); err == nil {
			t.Errorf("%q is taken for %+v", s, c)
		}
	}
	_, l := table(t, nil)
	if _, err := New(l, Settings{Station: 0}); err == nil {
		t.Error("all stations at once")
	}
	for _, s := range []SourceSettings{{Set: "holding 1 int16 = 1", Vent: "holding 2 int16 = 1"}, {Set: "holding 1 int16 = {mmHg}"},
		{Set: "holding 1 int16 = {mmHg}", Vent: "holding 2 int16 = {mmHg}"}} {
		s.Station = 1
		if o, err := NewSource(l, s); err == nil || o != nil {
			t.Errorf("%+v was taken", s)
		}
	}
}

// Whatever a station sends: no panic, and a number only from a whole answer.
func FuzzAnswer(f *testing.F) {
	f.Add([]byte(bytesOf(f, read300)))
	f.Add([]byte(bytesOf(f, "11 84 02 C2 C4")))
	f.Fuzz(func(t *testing.T, data []byte) {
		_, l := table(t, map[string][]string{reading: {fmt.Sprintf("%X", data)}, who: {whoIs}})
		i, err := New(l, settings())
		if err != nil {
			t.Fatal(err)
		}
		r, err := i.Read(context.Background())
		if (err == nil) != (r.Text != "") || math.IsNaN(r.Value.SI) {
			t.Fatalf("% X: %+v, %v", data, r, err)
		}
	})
}
