package simulated

import (
	"bufio"
	"errors"
	"os"
	"path/filepath"
	"regexp"
	"runtime"
	"strings"
	"testing"
	"time"

	"golang.org/x/sys/unix"
)

// published puts a bench on pseudo-terminals and opens one of its ports.
func published(t *testing.T, patience time.Duration) *Published {
	t.Helper()
	b, err := New(Settings{Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	p, err := b.publish(filepath.Join(t.TempDir(), "ports"), patience)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := p.Close(); err != nil {
			t.Error(err)
		}
	})
	return p
}

// client opens a port as any program would. Every read has a deadline, so that
// nothing here waits for ever.
func client(t *testing.T, p *Published, role string) *os.File {
	t.Helper()
	f, err := os.OpenFile(p.Ports()[role], os.O_RDWR|unix.O_NOCTTY, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = f.Close() })
	if err := f.SetReadDeadline(time.Now().Add(20 * time.Second)); err != nil {
		t.Fatal(err)
	}
	return f
}

func askPort(t *testing.T, f *os.File, r *bufio.Reader, text string) string {
	t.Helper()
	if _, err := f.WriteString(text + "\n"); err != nil {
		t.Fatal(err)
	}
	answer, err := r.ReadString('\n')
	if err != nil {
		t.Fatalf("%s: %v", text, err)
	}
	return strings.TrimSuffix(answer, "\n")
}

func TestPublishedPortsAnswerAndStream(t *testing.T) {
	p := published(t, patience)
	reference := client(t, p, RoleReference)
	r := bufio.NewReader(reference)
	if got := askPort(t, reference, r, "*IDN?"); got != identityReference {
		t.Errorf("identity %q", got)
	}
	// An unknown command has no answer: the next line is the error's.
	if _, err := reference.WriteString("MEAS:VOLT?\n"); err != nil {
		t.Fatal(err)
	}
	if got := askPort(t, reference, r, "SYST:ERR?"); got != `-113,"Undefined header"` {
		t.Errorf("error %q", got)
	}
	stream := bufio.NewReader(client(t, p, RoleUUT))
	form := regexp.MustCompile(`^[+-]\d{4}\.\d{2}\r\n$`)
	for i := range 200 {
		text, err := stream.ReadString('\n')
		if err != nil {
			t.Fatal(err)
		}
		if !form.MatchString(text) {
			t.Fatalf("line %d of the stream is %q", i, text)
		}
	}
}

func TestPressureIsSeenThroughThePorts(t *testing.T) {
	p := published(t, patience)
	source := client(t, p, RoleSource)
	reference := client(t, p, RoleReference)
	r := bufio.NewReader(reference)
	if _, err := source.WriteString("SOUR:PRES 10\n"); err != nil {
		t.Fatal(err)
	}
	for range 200 { // each takes 20 to 60 ms; the source needs about 1 s
		if text := askPort(t, reference, r, "MEAS:PRES?"); strings.HasPrefix(text, "+9.") || strings.HasPrefix(text, "+10.") {
			return
		}
	}
	t.Error("10 mmHg are not reached")
}

// What nobody read is thrown away, so that who comes late hears the present;
// and the lock of a client that is gone is cleared.
func TestNobodyThere(t *testing.T) {
	p := published(t, 150*time.Millisecond)
	valve := client(t, p, RoleValve)
	if err := unix.IoctlSetInt(int(valve.Fd()), unix.TIOCEXCL, 0); err != nil {
		t.Fatal(err)
	}
	reference := client(t, p, RoleReference)
	r := bufio.NewReader(reference)
	slave := p.pump.terminals[1].slave
	free, emptied, most := false, false, 0
	for i := 0; i < 100 && !(free && emptied); i++ {
		askPort(t, reference, r, "MEAS:PRES?")
		free = !locked(p.pump.terminals[4].slave)
		n, err := unread(slave)
		if err != nil {
			t.Fatal(err)
		}
		emptied = emptied || n < most
		most = max(most, n)
	}
	if !free {
		t.Error("the lock of a silent client stays")
	}
	if !emptied {
		t.Errorf("%d bytes lie unread and stay", most)
	}
}

// While a client takes the stream its other locks stay, however quiet.
func TestLockOfALiveClientStays(t *testing.T) {
	p := published(t, 400*time.Millisecond)
	valve := client(t, p, RoleValve)
	if err := unix.IoctlSetInt(int(valve.Fd()), unix.TIOCEXCL, 0); err != nil {
		t.Fatal(err)
	}
	stream := bufio.NewReader(client(t, p, RoleUUT))
	for range 1000 { // 1 s
		if _, err := stream.ReadString('\n'); err != nil {
			t.Fatal(err)
		}
	}
	if !locked(p.pump.terminals[4].slave) {
		t.Error("the lock is gone while the stream is read")
	}
}

func TestCloseRemovesLinksAndEndsThePump(t *testing.T) {
	before := runtime.NumGoroutine()
	p := published(t, patience)
	f := client(t, p, RoleUUT)
	ports := p.Ports()
	if err := p.Close(); err != nil {
		t.Fatal(err)
	}
	if err := p.Close(); err != nil {
		t.Errorf("second close: %v", err)
	}
	for role, port := range ports {
		if _, err := os.Lstat(port); !os.IsNotExist(err) {
			t.Errorf("%s: link still there (%v)", role, err)
		}
	}
	rest := make([]byte, 1<<16)
	for {
		if _, err := f.Read(rest); errors.Is(err, os.ErrDeadlineExceeded) {
			t.Fatal("the port is silent and not gone")
		} else if err != nil {
			break
		}
	}
	if after := runtime.NumGoroutine(); after > before {
		t.Errorf("%d goroutines before, %d after", before, after)
	}
}

func TestPublishRefusesWhatIsNoLink(t *testing.T) {
	dir := t.TempDir()
	if err := os.WriteFile(filepath.Join(dir, RoleValve), []byte("mine"), 0o600); err != nil {
		t.Fatal(err)
	}
	b, err := New(Settings{})
	if err != nil {
		t.Fatal(err)
	}
	if p, err := b.Publish(dir); err == nil {
		_ = p.Close()
		t.Fatal("a file in the way was replaced")
	}
	left, err := os.ReadDir(dir)
	if err != nil || len(left) != 1 {
		t.Errorf("%v left, %v", left, err)
	}
	// A dangling link of a bench that was killed is replaced.
	dir = t.TempDir()
	if err := os.Symlink("/nowhere", filepath.Join(dir, RoleUUT)); err != nil {
		t.Fatal(err)
	}
	p, err := b.Publish(dir)
	if err != nil {
		t.Fatal(err)
	}
	if err := p.Close(); err != nil {
		t.Error(err)
	}
}
