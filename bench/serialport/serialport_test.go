package serialport

import (
	"errors"
	"path/filepath"
	"strings"
	"testing"

	"go.bug.st/serial"
)

func TestMode(t *testing.T) {
	m, err := Mode{}.library()
	if err != nil || *m != (serial.Mode{BaudRate: 9600, DataBits: 8, Parity: serial.NoParity, StopBits: serial.OneStopBit}) {
		t.Errorf("zero mode: %+v, %v", m, err)
	}
	m, err = Mode{Baud: 230400, DataBits: 7, Parity: ParityEven, StopBits: 2}.library()
	if err != nil || *m != (serial.Mode{BaudRate: 230400, DataBits: 7, Parity: serial.EvenParity, StopBits: serial.TwoStopBits}) {
		t.Errorf("7E2: %+v, %v", m, err)
	}
	for _, bad := range []Mode{{Baud: -1}, {Baud: 49}, {Baud: 1 << 30}, {DataBits: 9}, {DataBits: -8}, {Parity: 5}, {StopBits: 3}, {StopBits: -1}} {
		p, err := Open("nowhere", bad)
		var e *Error
		if p != nil || !errors.Is(err, ErrMode) || !errors.As(err, &e) || e.Op != "open" || e.Name != "nowhere" {
			t.Errorf("%+v: %v", bad, err)
		}
	}
}

func TestOpenNothing(t *testing.T) {
	name := filepath.Join(t.TempDir(), "tty")
	p, err := Open(name, Mode{})
	if p != nil || err == nil || !strings.HasPrefix(err.Error(), "open "+name+": ") {
		t.Errorf("%v", err)
	}
}
