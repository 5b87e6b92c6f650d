package serialport

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"kymobench/bench"
	"kymobench/bench/instruments/lines"
	"kymobench/bench/instruments/scpi"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// without skips what this machine lacks, and fails where KYMOBENCH_OUTSIDE=1
// says that nothing is lacking.
func without(t *testing.T, format string, a ...any) {
	t.Helper()
	if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
		t.Fatalf(format, a...)
	}
	t.Skipf(format, a...)
}

// farEnd opens a pseudo-terminal and returns its master, the far end of the
// cable, and the name of the port. The system's own raw mode is not set here:
// the library does that when it opens the port.
func farEnd(t *testing.T) (*os.File, string) {
	t.Helper()
	fd, err := unix.Open("/dev/ptmx", unix.O_RDWR|unix.O_NOCTTY|unix.O_CLOEXEC|unix.O_NONBLOCK, 0)
	if err != nil {
		without(t, "no pseudo-terminals here: %v", err)
	}
	master := os.NewFile(uintptr(fd), "far end")
	t.Cleanup(func() { _ = master.Close() })
	if err := unix.IoctlSetPointerInt(fd, unix.TIOCSPTLCK, 0); err != nil {
		t.Fatal(err)
	}
	n, err := unix.IoctlGetInt(fd, unix.TIOCGPTN)
	if err != nil {
		t.Fatal(err)
	}
	return master, "/dev/pts/" + strconv.Itoa(n)
}

func open(t *testing.T, name string) *Port {
	t.Helper()
	p, err := Open(name, Mode{Baud: 115200})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = p.Close() })
	return p
}

// minute is a deadline that only a hung test meets.
func minute(t *testing.T) context.Context {
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	t.Cleanup(cancel)
	return ctx
}

// A reference answers and a UUT streams, each over a pseudo-terminal and the
// real inbox, with the real drivers.
func TestDriversOnPorts(t *testing.T) {
	const identity, count = "Hollerbrook,gauge,7,1", 5000
	gauge, gaugeName := farEnd(t)
	uut, uutName := farEnd(t)
	inbox := line.NewReal()
	for id, name := range []string{gaugeName, uutName} {
		if err := inbox.Attach(line.PortID(id), open(t, name)); err != nil {
			t.Fatal(err)
		}
	}
	go func() {
		in := bufio.NewScanner(gauge)
		for in.Scan() {
			switch in.Text() {
			case "*IDN?":
				fmt.Fprint(gauge, identity+"\r\n")
			case "MEAS:PRES?":
				fmt.Fprint(gauge, "+100.02\r\n")
			case "SYST:ERR?":
				fmt.Fprint(gauge, "0,\"No error\"\r\n")
			}
		}
	}()
	go func() {
		for n := range count + 1 {
			fmt.Fprintf(uut, "%+08.2f\r\n", float64(n-1))
		}
	}()
	engine := line.NewEngine(inbox)
	reference := scpi.New(engine.Open(0, line.Settings{Name: "reference on " + gaugeName}), scpi.Settings{
		Identify: "*IDN?", Identity: identity, Clear: "*CLS", Errors: "SYST:ERR?", Read: "MEAS:PRES?", Zero: "CAL:ZERO",
		Field: quantity.Field{Unit: "mmHg"}, Within: 30 * time.Second,
	})
	stream, err := lines.New(engine.Open(1, line.Settings{Name: "uut on " + uutName}), lines.Settings{Field: quantity.Field{Width: 8, Unit: "uV/V"}})
	if err != nil {
		t.Fatal(err)
	}
	next := 0
	stream.Watch(func(r *bench.Reading, err error) error {
		if err != nil || r.Value.Stated != float64(next) {
			return fmt.Errorf("%d expected: %+v, %w", next, r, err)
		}
		next++
		return nil
	})
	ctx := minute(t)
	if _, err := reference.Identify(ctx); err != nil {
		t.Fatal(err)
	}
	if err := reference.Zero(ctx); err != nil {
		t.Fatal(err)
	}
	r, err := reference.Read(ctx)
	if err != nil || r.Text != "+100.02" || math.Abs(r.Value.SI-100.02*133.322387415) > 1e-9 || r.At <= r.Sent {
		t.Errorf("%+v, %v", r, err)
	}
	if err := engine.Wait(ctx, inbox.Now().Add(time.Minute), func() bool { return next == count }); err != nil {
		t.Errorf("%d readings of %d: %v", next, count, err)
	}

	// The UUT is unplugged; a question to the reference still works, one that
	// is under way on the lost port ends.
	var gone []line.Event
	engine.Handle(line.KindGone, func(e line.Event) error { gone = append(gone, e); return nil })
	_ = uut.Close()
	if err := engine.Wait(ctx, inbox.Now().Add(time.Minute), func() bool { return len(gone) > 0 }); err != nil {
		t.Fatal(err)
	}
	if gone[0].Port != 1 || !errors.Is(gone[0].Err, line.ErrGone) {
		t.Errorf("%+v", gone[0])
	}
	if _, err := reference.Read(ctx); err != nil {
		t.Error(err)
	}
	_ = gauge.Close()
	if err := engine.Wait(ctx, inbox.Now().Add(time.Minute), func() bool { return len(gone) > 1 }); err != nil {
		t.Fatal(err)
	}
	if _, err := reference.Read(ctx); !errors.Is(err, line.ErrGone) || !strings.HasPrefix(err.Error(), "read reference on "+gaugeName+": the port is gone: ") {
		t.Errorf("%v", err)
	}
	if err := inbox.Close(); err != nil {
		t.Error(err)
	}
}

func TestQuietAndEmptyReads(t *testing.T) {
	master, name := farEnd(t)
	p := open(t, name)
	buffer := make([]byte, 16)
	if n, err := p.Read(buffer); n != 0 || err != nil {
		t.Errorf("a quiet port: %d, %v", n, err)
	}
	fmt.Fprint(master, "abc")
	if n, err := p.Read(nil); n != 0 || err != nil {
		t.Errorf("an empty read with bytes waiting: %d, %v", n, err)
	}
	got := ""
	for ctx := minute(t); len(got) < 3 && ctx.Err() == nil; {
		n, err := p.Read(buffer)
		if err != nil {
			t.Fatal(err)
		}
		got += string(buffer[:n])
	}
	if got != "abc" {
		t.Errorf("%q", got)
	}
}

// What was received before the port was opened is thrown away.
func TestOldBytes(t *testing.T) {
	master, name := farEnd(t)
	fmt.Fprint(master, "old\n")
	p := open(t, name)
	if n, err := p.Read(make([]byte, 16)); n != 0 || err != nil {
		t.Errorf("%d old bytes, %v", n, err)
	}
}

func TestAfterClose(t *testing.T) {
	_, name := farEnd(t)
	p := open(t, name)
	if err := errors.Join(p.Close(), p.Close()); err != nil {
		t.Error(err)
	}
	// Files opened now have the port's old descriptor among them.
	var files []*os.File
	for n := range 8 {
		f, err := os.Create(filepath.Join(t.TempDir(), strconv.Itoa(n)))
		if err != nil {
			t.Fatal(err)
		}
		files = append(files, f)
	}
	if n, err := p.Write([]byte("vent")); n != 0 || !errors.Is(err, ErrClosed) {
		t.Errorf("write: %d, %v", n, err)
	}
	if n, err := p.Read(make([]byte, 4)); n != 0 || !errors.Is(err, ErrClosed) {
		t.Errorf("read: %d, %v", n, err)
	}
	for _, f := range files {
		if info, err := f.Stat(); err != nil || info.Size() != 0 {
			t.Errorf("%s: written to, %v", f.Name(), err)
		}
		_ = f.Close()
	}
}

// A Write that nobody reads blocks; Close comes back all the same, and the
// Write ends when the far end goes.
func TestCloseDuringBlockedWrite(t *testing.T) {
	master, name := farEnd(t)
	p := open(t, name)
	ended := make(chan error, 1)
	begun := make(chan struct{})
	go func() {
		close(begun)
		_, err := p.Write(make([]byte, 1<<20))
		ended <- err
	}()
	<-begun
	if err := p.Close(); err != nil {
		t.Error(err)
	}
	_ = master.Close()
	select {
	case err := <-ended:
		if err == nil {
			t.Error("a million bytes went nowhere, and no error")
		}
	case <-minute(t).Done():
		t.Error("the write never ended")
	}
}

func TestCloseDuringRead(t *testing.T) {
	_, name := farEnd(t)
	p := open(t, name)
	ended := make(chan error, 1)
	go func() {
		for {
			if _, err := p.Read(make([]byte, 4)); err != nil {
				ended <- err
				return
			}
		}
	}()
	if err := p.Close(); err != nil {
		t.Error(err)
	}
	if err := <-ended; !errors.Is(err, ErrClosed) {
		t.Errorf("%v", err)
	}
}

// The system keeps a second program out, though not an administrator: the test
// gives up that power on a thread of its own, which ends with the goroutine.
func TestNoModemLines(t *testing.T) {
	_, name := farEnd(t)
	p := open(t, name)
	if err := p.SetModemLine(line.RTS, true); !errors.Is(err, line.ErrNoModemLines) {
		t.Error(err)
	}
	_ = p.Close()
	if err := p.SetModemLine(line.DTR, true); !errors.Is(err, ErrClosed) {
		t.Error(err)
	}
}

func TestBusy(t *testing.T) {
	_, name := farEnd(t)
	open(t, name)
	opened := make(chan error, 1)
	go func() {
		runtime.LockOSThread()
		header := unix.CapUserHeader{Version: unix.LINUX_CAPABILITY_VERSION_3}
		var none [2]unix.CapUserData
		if err := unix.Capset(&header, &none[0]); err != nil {
			opened <- err
			return
		}
		p, err := Open(name, Mode{})
		if err == nil {
			_ = p.Close()
		}
		opened <- err
	}()
	err := <-opened
	if !errors.Is(err, ErrBusy) || err.Error() != "open "+name+": another program has it open, close that first" {
		t.Errorf("%v", err)
	}
}

func TestNotAPort(t *testing.T) {
	dir := t.TempDir()
	file := filepath.Join(dir, "file")
	if err := os.WriteFile(file, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	for name, want := range map[string]error{file: ErrNotSerial, filepath.Join(dir, "none"): ErrNotFound} {
		if p, err := Open(name, Mode{}); p != nil || !errors.Is(err, want) {
			t.Errorf("%s: %v, want %v", name, err, want)
		}
	}
}

// A descriptor of 1024 or more, on which the library panics, is an error.
func TestTooManyFiles(t *testing.T) {
	var limit syscall.Rlimit
	if err := syscall.Getrlimit(syscall.RLIMIT_NOFILE, &limit); err != nil || limit.Cur < 1200 {
		without(t, "only %d files may be open here, %v", limit.Cur, err)
	}
	_, name := farEnd(t)
	for {
		fd, err := unix.Open("/dev/null", unix.O_RDONLY|unix.O_CLOEXEC, 0)
		if err != nil {
			t.Fatal(err)
		}
		defer unix.Close(fd)
		if fd >= unix.FD_SETSIZE {
			break
		}
	}
	p, err := Open(name, Mode{})
	if err != nil {
		t.Fatal(err)
	}
	if n, err := p.Read(make([]byte, 4)); n != 0 || !errors.Is(err, ErrTooManyFiles) {
		t.Errorf("%d, %v", n, err)
	}
	if err := p.Close(); err != nil {
		t.Error(err)
	}
}
