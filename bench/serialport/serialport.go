// Package serialport opens the serial ports of this machine, and is the only
// importer of the serial library, whose traps it keeps from the rest.
//
// It frames nothing, asks nothing and does not find ports; package line and
// the instruments on it do the talking.
//
// Order of use: Open, then give the Port to a line.Real, which owns it.
package serialport

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"sync"
	"sync/atomic"
	"syscall"
	"time"

	"go.bug.st/serial"

	"kymobench/bench/line"
)

// What may be wrong with a port; each comes inside an *Error.
var (
	ErrBusy         = errors.New("another program has it open, close that first")
	ErrNotFound     = errors.New("there is no such port")
	ErrPermission   = errors.New("this user may not open it")
	ErrNotSerial    = errors.New("it is no serial port")
	ErrMode         = errors.New("it cannot be set up like that")
	ErrHungUp       = errors.New("it was unplugged or hung up")
	ErrClosed       = errors.New("it has been closed here")
	ErrTooManyFiles = errors.New("this program has too many files open")
)

// Error is what went wrong on a port: "open /dev/ttyUSB0: there is no such port".
type Error struct {
	Name string
	Op   string // "open", "read", "write" or "close"
	Err  error
}

func (e *Error) Error() string { return e.Op + " " + e.Name + ": " + e.Err.Error() }

// Unwrap returns what went wrong.
func (e *Error) Unwrap() error { return e.Err }

// Parity of a character.
type Parity uint8

// The parities; a pseudo-terminal takes any and applies none.
const (
	ParityNone Parity = iota
	ParityOdd
	ParityEven
	ParityMark
	ParitySpace
)

// Mode of a port; the zero Mode is 9600 baud, 8 data bits, no parity, 1 stop
// bit. There is no flow control.
type Mode struct {
	Baud     int // 0 is 9600
	DataBits int // 5 to 8; 0 is 8
	Parity   Parity
	StopBits int // 1 or 2; 0 is 1
}

// library turns a Mode into the library's.
func (m Mode) library() (*serial.Mode, error) {
	if m.Baud == 0 {
		m.Baud = 9600
	}
	if m.DataBits == 0 {
		m.DataBits = 8
	}
	stop := serial.OneStopBit
	switch m.StopBits {
	case 0, 1:
	case 2:
		stop = serial.TwoStopBits
	default:
		return nil, fmt.Errorf("%w: %d stop bits", ErrMode, m.StopBits)
	}
	parities := [...]serial.Parity{serial.NoParity, serial.OddParity, serial.EvenParity, serial.MarkParity, serial.SpaceParity}
	switch {
	case m.Baud < 50 || m.Baud > 12_000_000:
		return nil, fmt.Errorf("%w: %d baud", ErrMode, m.Baud)
	case m.DataBits < 5 || m.DataBits > 8:
		return nil, fmt.Errorf("%w: %d data bits", ErrMode, m.DataBits)
	case int(m.Parity) >= len(parities):
		return nil, fmt.Errorf("%w: parity %d", ErrMode, m.Parity)
	}
	// InitialStatusBits stay nil: with them a port without modem lines, such as
	// a pseudo-terminal, cannot be opened at all.
	return &serial.Mode{BaudRate: m.Baud, DataBits: m.DataBits, Parity: parities[m.Parity], StopBits: stop}, nil
}

// tick is how long Read waits. It is set once: setting it under a reader is a
// data race in the library.
const tick = 20 * time.Millisecond

// writeGrace is how long Close waits for a Write under way.
const writeGrace = 100 * time.Millisecond

// Port is an open serial port; a line.Port.
type Port struct {
	name    string
	port    serial.Port
	closed  atomic.Bool
	reading sync.Mutex
	writing chan struct{} // holds a token while a Write is under way
}

var (
	_ line.Port       = (*Port)(nil)
	_ line.ModemLines = (*Port)(nil)
)

// Open opens a port for this program alone, as far as the system can keep
// others out (it cannot from an administrator), and throws away what it
// received before.
func Open(name string, mode Mode) (*Port, error) {
	m, err := mode.library()
	if err != nil {
		return nil, &Error{name, "open", err}
	}
	p, err := serial.Open(name, m)
	if err != nil {
		return nil, &Error{name, "open", inWords(err)}
	}
	if err := p.SetReadTimeout(tick); err != nil {
		return nil, &Error{name, "open", errors.Join(inWords(err), p.Close())}
	}
	// Only here: on Windows this would abort a read under way. A port that
	// cannot do it has its old bytes dropped as unasked later.
	_ = p.ResetInputBuffer()
	return &Port{name: name, port: p, writing: make(chan struct{}, 1)}, nil
}

// Read waits 20 ms at most; (0, nil) means that nothing came. Any error means
// that the port is gone.
func (p *Port) Read(data []byte) (n int, err error) {
	p.reading.Lock() // until the read has ended, Close does not close
	defer p.reading.Unlock()
	if p.closed.Load() {
		return 0, &Error{p.name, "read", ErrClosed}
	}
	if len(data) == 0 {
		return 0, nil // the library would take it for the end
	}
	defer func() {
		// The library's select(2) panics on a descriptor of 1024 or more.
		if recover() != nil {
			n, err = 0, &Error{p.name, "read", ErrTooManyFiles}
		}
	}()
	n, err = p.port.Read(data)
	if err != nil {
		return n, &Error{p.name, "read", inWords(err)}
	}
	return n, nil
}

// Write writes all of data unless there is an error. It may block for as long
// as the far end takes nothing.
func (p *Port) Write(data []byte) (int, error) {
	p.writing <- struct{}{}
	defer func() { <-p.writing }()
	written := 0
	for written < len(data) {
		// The library would write to whatever file has the descriptor by now.
		if p.closed.Load() {
			return written, &Error{p.name, "write", ErrClosed}
		}
		n, err := p.port.Write(data[written:])
		written += n
		if n == 0 && err == nil {
			err = io.ErrShortWrite
		}
		if err != nil && !errors.Is(err, syscall.EINTR) {
			return written, &Error{p.name, "write", inWords(err)}
		}
	}
	return written, nil
}

// Close closes the port, once; it returns within some 150 ms. A Write that the
// far end does not let go on stays blocked until it does, on a port that is
// closed for everybody else.
func (p *Port) Close() error {
	if p.closed.Swap(true) {
		return nil
	}
	grace := time.NewTimer(writeGrace)
	defer grace.Stop()
	select {
	case p.writing <- struct{}{}:
		defer func() { <-p.writing }()
	case <-grace.C:
	}
	p.reading.Lock()
	defer p.reading.Unlock()
	if err := p.port.Close(); err != nil {
		return &Error{p.name, "close", inWords(err)}
	}
	return nil
}

// SetModemLine puts RTS or DTR on or off. A port that lacks them, such as a
// pseudo-terminal, says line.ErrNoModemLines.
func (p *Port) SetModemLine(which line.ModemLine, on bool) error {
	p.writing <- struct{}{} // Close waits for it, as for a Write
	defer func() { <-p.writing }()
	if p.closed.Load() {
		return &Error{p.name, "write", ErrClosed}
	}
	set := p.port.SetRTS
	if which == line.DTR {
		set = p.port.SetDTR
	}
	err := set(on)
	switch {
	case err == nil:
		return nil
	case errors.Is(err, syscall.ENOTTY), errors.Is(err, syscall.EINVAL):
		err = line.ErrNoModemLines
	}
	return &Error{p.name, "write", inWords(err)}
}

// Name is the name the port was opened by.
func (p *Port) Name() string { return p.name }

// inWords puts an error of the library or the system in this package's terms.
func inWords(err error) error {
	var e *serial.PortError
	if !errors.As(err, &e) {
		switch {
		case errors.Is(err, fs.ErrNotExist):
			return ErrNotFound
		case errors.Is(err, fs.ErrPermission):
			return ErrPermission
		}
		return err
	}
	switch e.Code() {
	case serial.PortBusy:
		return ErrBusy
	case serial.PortNotFound:
		return ErrNotFound
	case serial.PermissionDenied:
		return ErrPermission
	case serial.InvalidSerialPort:
		return fmt.Errorf("%w (%w)", ErrNotSerial, err)
	case serial.PortClosed:
		return ErrHungUp
	case serial.InvalidSpeed, serial.InvalidDataBits, serial.InvalidParity, serial.InvalidStopBits:
		return fmt.Errorf("%w: %w", ErrMode, err)
	}
	return err
}
