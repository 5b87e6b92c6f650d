package relay

import (
	"context"
	"errors"
	"reflect"
	"testing"
	"time"

	"kymobench/bench"
	"kymobench/bench/line"
)

// coil is a machine that remembers what its modem lines did.
type coil struct{ strokes []Stroke }

func (c *coil) Receive(line.Instant, []byte) {}
func (c *coil) Due() (line.Instant, bool)    { return 0, false }
func (c *coil) Emit(line.Instant) []byte     { return nil }
func (c *coil) Signal(_ line.Instant, which line.ModemLine, on bool) {
	c.strokes = append(c.strokes, Stroke{which, on})
}

// mute is a machine without modem lines.
type mute struct{}

func (mute) Receive(line.Instant, []byte) {}
func (mute) Due() (line.Instant, bool)    { return 0, false }
func (mute) Emit(line.Instant) []byte     { return nil }

func valve(t *testing.T, m line.Machine, s Settings) *Valve {
	inbox := line.NewMemory(time.Time{})
	inbox.Connect(1, m, line.MemoryOptions{})
	v, err := New(line.NewEngine(inbox).Open(1, line.Settings{Name: "valve on port 1"}), s)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func TestValve(t *testing.T) {
	ctx := context.Background()
	c := &coil{}
	v := valve(t, c, Settings{Release: "dtr off", Shut: "dtr on"})
	if err := errors.Join(v.Shut(ctx), v.Release(ctx)); err != nil {
		t.Error(err)
	}
	v.ReleaseNow()
	if want := []Stroke{{line.DTR, true}, {line.DTR, false}, {line.DTR, false}}; !reflect.DeepEqual(c.strokes, want) {
		t.Errorf("%v", c.strokes)
	}
	_, identify := v.Identify(ctx)
	_, uptime := v.Uptime(ctx)
	if !errors.Is(identify, bench.ErrNotStated) || !errors.Is(uptime, bench.ErrNotStated) {
		t.Error(identify, uptime)
	}
	err := valve(t, mute{}, Settings{Release: "rts on", Shut: "RTS off"}).Release(ctx)
	if want := "write valve on port 1: it has no modem lines: a relay needs a port with RTS and DTR"; !errors.Is(err, line.ErrNoModemLines) || err.Error() != want {
		t.Error(err)
	}
}

func TestRefused(t *testing.T) {
	l := line.NewEngine(line.NewMemory(time.Time{})).Open(1, line.Settings{})
	for _, s := range []Settings{{"rts on", "rts on", 0}, {"rts on", "dtr off", 0}, {"rts", "rts off", 0}, {"cts on", "cts off", 0}, {"rts on", "rts of", 0}, {}} {
		if v, err := New(l, s); err == nil || v != nil {
			t.Errorf("%+v was taken", s)
		}
	}
}
