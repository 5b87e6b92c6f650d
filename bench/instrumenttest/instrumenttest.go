// Package instrumenttest holds every instrument driver to the same manners: who
// is there, a reading, zero, garbage, a late answer, an echo, a value out of
// range, another unit, a cable pulled out and put back.
//
// It knows no driver. A family's own test hands it a constructor and what goes
// over the wire, written from the wire's side; Live holds whatever is there, a
// simulated bench, a transcript or a program outside, to the part that needs no
// script.
//
// Order of use: fill a Family, call Run; or open a rig, call Live.
package instrumenttest

import (
	"context"
	"errors"
	"fmt"
	"math"
	"testing"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// Family is a driver and the far end of its wire.
type Family struct {
	// Line sets up the line; Name and Echo are the suite's.
	Line line.Settings
	// New makes the driver on a line that is its own; answers come within a
	// second.
	New func(l *line.Line) (bench.Manometer, error)
	// Field reads what a record keeps of a reading.
	Field quantity.Field

	// What is asked, as it goes over the wire; Read is "" for a family that
	// sends by itself, Who is "" when nobody can be asked.
	Read, Who, Zero string
	// What is answered.
	Reading      func(x float64) []byte
	Me, Somebody []byte   // an identity, and another's
	Zeroed       []byte   // nil when a zeroing has no answer
	OverRange    []byte   // nil when there is no such answer
	OtherUnit    []byte   // nil when the unit is not in the answer
	Garbage      [][]byte // whole answers that are none
	Identity     string
	// Proved: a check value proves every answer.
	Proved bool
	// Resolution of the numbers on the wire.
	Resolution float64
}

// table is one driver on one wire in virtual time.
type table struct {
	t     *testing.T
	f     Family
	inbox *line.Memory
	far   *farEnd
	line  *line.Line
	m     bench.Manometer
}

const port = line.PortID(1)

func (f Family) table(t *testing.T) *table {
	t.Helper()
	b := &table{t: t, f: f, inbox: line.NewMemory(time.Time{}), far: newFarEnd(f)}
	b.inbox.Connect(port, b.far, line.MemoryOptions{})
	s := f.Line
	s.Name = "instrument on port 1"
	s.Latency = 2 * time.Second
	b.line = line.NewEngine(b.inbox).Open(port, s)
	var err error
	if b.m, err = f.New(b.line); err != nil {
		t.Fatal(err)
	}
	return b
}

// read reads and holds the reading against a number.
func (b *table) read(want float64) {
	b.t.Helper()
	r, err := b.m.Read(context.Background())
	if err != nil {
		b.t.Fatalf("read %v: %v", want, err)
	}
	b.is(r, want)
}

func (b *table) is(r bench.Reading, want float64) {
	b.t.Helper()
	unit, _ := quantity.UnitNamed(b.f.Field.Unit)
	if math.Abs(r.Value.Stated-want) > b.f.Resolution/2+1e-9 || r.Value.Unit != unit || math.Abs(r.Value.SI-unit.ToSI(r.Value.Stated)) > 1e-9*math.Abs(r.Value.SI) {
		b.t.Errorf("%v is read as %+v", want, r)
	}
	if r.At < r.Sent || r.Received() == "" {
		b.t.Errorf("%v: sent %v, at %v, received %q", want, r.Sent, r.At, r.Received())
	}
	if x, err := b.f.Field.Number(r.Received()); err != nil || x != r.Value.Stated {
		b.t.Errorf("%q, as a record keeps it, is %v, %v; read was %v", r.Received(), x, err, r.Value.Stated)
	}
}

// refused reads and wants an error, and no reading beside it.
func (b *table) refused() error {
	b.t.Helper()
	r, err := b.m.Read(context.Background())
	if err == nil {
		b.t.Fatalf("%q is taken for %v", r.Received(), r.Value.Stated)
	}
	if r != (bench.Reading{}) {
		b.t.Errorf("a reading %+v comes with the error %v", r, err)
	}
	return err
}

func numbers() []float64 { return []float64{0, 12.5, -30, 300, 99.75, -0.25} }

// Run holds a driver to everything.
func Run(t *testing.T, f Family) {
	t.Run("identity", func(t *testing.T) { identity(f.table(t)) })
	t.Run("reading", func(t *testing.T) { reading(t, f) })
	t.Run("zero", func(t *testing.T) { zero(f.table(t)) })
	t.Run("garbage", func(t *testing.T) { garbage(t, f) })
	t.Run("damage", func(t *testing.T) { damage(t, f) })
	t.Run("silence", func(t *testing.T) { silence(t, f) })
	t.Run("out of range", func(t *testing.T) { outOfRange(f.table(t)) })
	t.Run("another unit", func(t *testing.T) { anotherUnit(f.table(t)) })
	t.Run("unplugged", func(t *testing.T) { unplugged(f.table(t)) })
	if f.Read != "" {
		t.Run("late", func(t *testing.T) { late(f.table(t)) })
		t.Run("echo", func(t *testing.T) { echo(t, f) })
	}
}

func identity(b *table) {
	ctx := context.Background()
	got, err := b.m.Identify(ctx)
	if b.f.Who == "" {
		if !errors.Is(err, bench.ErrNotStated) || got != "" {
			b.t.Errorf("nobody can be asked: %q, %v", got, err)
		}
		return
	}
	if err != nil || got != b.f.Identity {
		b.t.Errorf("%q, %v", got, err)
	}
	b.far.me = b.f.Somebody
	if got, err := b.m.Identify(ctx); err == nil || got != "" {
		b.t.Errorf("somebody else is taken for %q, %v", got, err)
	}
}

// reading reads numbers, whole and in pieces of every size.
func reading(t *testing.T, f Family) {
	for size := range 9 {
		b := f.table(t)
		b.far.pieces = size
		for _, x := range numbers() {
			b.far.x = x
			b.read(x)
		}
	}
}

func zero(b *table) {
	ctx := context.Background()
	err := b.m.Zero(ctx)
	if b.f.Zero == "" {
		if !errors.Is(err, bench.ErrNotStated) {
			b.t.Errorf("nothing zeroes it: %v", err)
		}
		return
	}
	if err != nil || b.far.zeroed != 1 {
		b.t.Errorf("zeroed %d times, %v", b.far.zeroed, err)
	}
	if _, err := b.m.Uptime(ctx); err != nil && !errors.Is(err, bench.ErrNotStated) && !errors.Is(err, line.ErrDeadline) {
		b.t.Errorf("uptime: %v", err)
	}
}

// garbage: what is no answer is refused; one among good ones is got over.
func garbage(t *testing.T, f Family) {
	for _, g := range f.Garbage {
		b := f.table(t)
		b.far.x = 12.5
		b.far.instead = [][]byte{g}
		b.read(12.5)
		b = f.table(t)
		b.far.always = g
		b.refused()
		b.far.always = nil
		b.far.x = 300
		b.read(300)
	}
}

// damage changes, loses, doubles and puts in one byte at every place of an
// answer: the number is the right one, or there is none, where a check value
// proves it; elsewhere there is a number or an error, but not both.
func damage(t *testing.T, f Family) {
	const x = 123.5
	for _, other := range []byte{'\n', '\r', ' ', '.', '-', '5', 0, 0xff} {
		for kind := range 4 {
			for at := range f.Reading(x) {
				bad := append([]byte(nil), f.Reading(x)...)
				switch kind {
				case 0:
					bad[at] = other
				case 1:
					bad = append(bad[:at], bad[at+1:]...)
				case 2:
					bad = append(bad[:at+1], bad[at:]...)
				case 3:
					bad = append(bad[:at], append([]byte{other}, bad[at:]...)...)
				}
				b := f.table(t)
				b.far.x = 12.5
				b.far.instead = [][]byte{bad, bad}
				r, err := b.m.Read(context.Background())
				if (err == nil) == (r == (bench.Reading{})) {
					t.Fatalf("% X: %+v and %v", bad, r, err)
				}
				right := math.Abs(r.Value.Stated-x) <= f.Resolution || math.Abs(r.Value.Stated-12.5) <= f.Resolution
				if err == nil && f.Proved && kind == 0 && !right {
					t.Errorf("% X from % X is taken for %v", bad, f.Reading(x), r.Value.Stated)
				}
			}
		}
	}
}

// silence: no answer is an error within a time, and not for ever.
func silence(t *testing.T, f Family) {
	b := f.table(t)
	b.far.silent = true
	began := b.inbox.Now()
	if err := b.refused(); !errors.Is(err, line.ErrDeadline) {
		t.Errorf("%v", err)
	}
	if took := b.inbox.Now().Sub(began); took > time.Minute {
		t.Errorf("silence was waited for %v", took)
	}
	b.far.silent = false
	b.far.x = 99.75
	b.read(99.75)
}

// late: an answer to an earlier question is not taken for one to this, whether
// it comes long after the deadline or at once.
func late(b *table) {
	for _, lates := range [][]time.Duration{{1500 * time.Millisecond}, {985 * time.Millisecond, 985 * time.Millisecond}} {
		b.far.x, b.far.lates = 300, lates
		r, err := b.m.Read(context.Background())
		if err == nil && math.Abs(r.Value.Stated-300) > b.f.Resolution {
			b.t.Errorf("%+v", r)
		}
		b.far.x = -30
		b.read(-30)
		b.read(-30)
	}
}

// echo: what is sent back is passed over where that is stated, and is no
// reading where it is not.
func echo(t *testing.T, f Family) {
	f.Line.Echo = true
	b := f.table(t)
	b.far.echoes = true
	for _, x := range numbers() {
		b.far.x = x
		b.read(x)
	}
	f.Line.Echo = false
	b = f.table(t)
	b.far.echoes, b.far.x = true, 12.5
	if r, err := b.m.Read(context.Background()); err == nil && math.Abs(r.Value.Stated-12.5) > f.Resolution {
		t.Errorf("an echo is taken for %+v", r)
	}
}

func outOfRange(b *table) {
	if b.f.OverRange == nil {
		return
	}
	b.far.always = b.f.OverRange
	if err := b.refused(); !errors.Is(err, quantity.ErrOverRange) {
		b.t.Errorf("%v", err)
	}
}

func anotherUnit(b *table) {
	if b.f.OtherUnit == nil {
		return
	}
	b.far.always = b.f.OtherUnit
	if err := b.refused(); errors.Is(err, quantity.ErrOverRange) {
		b.t.Errorf("%v", err)
	}
}

// unplugged: the cable is pulled out in the middle of a reading, and put back.
func unplugged(b *table) {
	ctx := context.Background()
	b.far.x = 12.5
	b.read(12.5)
	b.far.silent = true
	b.inbox.Post(30*time.Millisecond, line.Event{Kind: line.KindGone, Port: port, Err: fmt.Errorf("%w: pulled out", line.ErrGone)})
	began := b.inbox.Now()
	if err := b.refused(); !errors.Is(err, line.ErrGone) {
		b.t.Errorf("%v", err)
	}
	if took := b.inbox.Now().Sub(began); took > 100*time.Millisecond {
		b.t.Errorf("a port that is gone was noticed after %v", took)
	}
	if err := b.refused(); !errors.Is(err, line.ErrGone) {
		b.t.Errorf("read on a port that is gone: %v", err)
	}
	b.far.silent = false
	b.line.Again()
	if _, err := b.m.Identify(ctx); err != nil && !errors.Is(err, bench.ErrNotStated) {
		b.t.Errorf("put back: %v", err)
	}
	b.far.x = -0.25
	b.read(-0.25)
}

// Live holds an instrument that is there to what needs no script: it says the
// same of itself twice, its readings are finite and inside low and high, their
// stamps in order, and field finds the same numbers in what a record keeps.
func Live(t *testing.T, m bench.Manometer, field quantity.Field, low, high float64, readings int) {
	t.Helper()
	ctx := context.Background()
	first, err := m.Identify(ctx)
	if err != nil && !errors.Is(err, bench.ErrNotStated) {
		t.Fatal(err)
	}
	if again, e := m.Identify(ctx); again != first || (e == nil) != (err == nil) {
		t.Errorf("it says %q, then %q", first, again)
	}
	if up, err := m.Uptime(ctx); err == nil && up < 0 || err != nil && !errors.Is(err, bench.ErrNotStated) {
		t.Errorf("on for %v, %v", up, err)
	}
	var last line.Instant
	for range readings {
		r, err := m.Read(ctx)
		if err != nil {
			t.Fatal(err)
		}
		if x := r.Value.Stated; !(x >= low && x <= high) {
			t.Errorf("%+v is not between %v and %v", r, low, high)
		}
		if x, err := field.Number(r.Received()); err != nil || x != r.Value.Stated {
			t.Errorf("%q is kept and read as %v, %v", r.Received(), x, err)
		}
		if r.At < r.Sent || r.At < last {
			t.Errorf("sent %v, at %v, the one before at %v", r.Sent, r.At, last)
		}
		last = r.At
	}
}
