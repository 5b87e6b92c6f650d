//go:build linux || darwin

package simulated

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"time"

	"golang.org/x/sys/unix"

	"kymobench/bench/line"
)

// ErrNoPseudoTerminals: this system has none that this package can open.
var ErrNoPseudoTerminals = errors.New("no pseudo-terminals on this system")

// errTooMany: select(2) takes no descriptor beyond its set.
var errTooMany = errors.New("too many files are open")

// Published is a bench whose instruments can be opened as serial ports, in
// real time, until Close.
type Published struct {
	roles  []string // of the pump's terminals, in their order
	ports  map[string]string
	stops  int // write end of a pipe that wakes the pump
	pump   *pump
	closed sync.Once
	err    error
}

// patience is how long a port's bytes may lie unread, or its lock unused,
// before nobody is taken to be there.
const patience = 2 * time.Second

// Publish opens a pseudo-terminal for each machine and links it as
// dir/reference, dir/uut and so on; dir is made, for its owner alone, if it is
// not there. Links left by an earlier bench are replaced; anything else in
// their place is refused. From here on the bench belongs to one goroutine,
// which ends with Close.
func (b *Bench) Publish(dir string) (*Published, error) { return b.publish(dir, patience) }

func (b *Bench) publish(dir string, patience time.Duration) (*Published, error) {
	dir, err := filepath.Abs(dir)
	if err != nil {
		return nil, fmt.Errorf("publish simulated instruments: %w", err)
	}
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return nil, fmt.Errorf("publish simulated instruments: %w", err)
	}
	p := &Published{ports: map[string]string{}, stops: -1, pump: &pump{wake: -1, patience: patience, start: time.Now()}}
	for _, role := range b.Roles() {
		t, err := openTerminal(b.machines[role])
		if err == nil {
			t.streams = strings.HasPrefix(role, RoleUUT)
			p.roles = append(p.roles, role)
			p.pump.terminals = append(p.pump.terminals, t)
			link := filepath.Join(dir, role)
			if err = relink(t.name, link); err == nil {
				p.ports[role] = link
			}
		}
		if err != nil {
			return nil, fmt.Errorf("publish the simulated %s: %w", role, errors.Join(err, p.release()))
		}
	}
	var pipe [2]int
	if err := unix.Pipe(pipe[:]); err != nil {
		return nil, fmt.Errorf("publish simulated instruments: %w", errors.Join(err, p.release()))
	}
	p.pump.wake, p.stops = pipe[0], pipe[1]
	if pipe[0] >= unix.FD_SETSIZE {
		return nil, fmt.Errorf("publish simulated instruments: %w", errors.Join(errTooMany, p.release()))
	}
	unix.CloseOnExec(pipe[0])
	unix.CloseOnExec(pipe[1])
	p.pump.done = make(chan struct{})
	go p.pump.run()
	return p, nil
}

// Ports names the port of each role, for BenchFile.
func (p *Published) Ports() map[string]string {
	ports := map[string]string{}
	for role, port := range p.ports {
		ports[role] = port
	}
	return ports
}

// Close removes the links, ends the pump and closes the terminals; whoever
// still has one open sees its port go. It returns what the pump died of, if
// it did. A second Close returns the same.
func (p *Published) Close() error {
	p.closed.Do(func() {
		_, err := unix.Write(p.stops, []byte{0})
		if err == nil {
			<-p.pump.done
		}
		p.err = errors.Join(err, p.pump.err, p.release())
	})
	return p.err
}

// release gives back what was opened and linked, as far as it was.
func (p *Published) release() error {
	var errs []error
	for i, role := range p.roles {
		if link, ok := p.ports[role]; ok {
			// Another bench may have taken the name meanwhile: leave it alone.
			if name, err := os.Readlink(link); err == nil && name == p.pump.terminals[i].name {
				errs = append(errs, os.Remove(link))
			}
		}
	}
	for _, t := range p.pump.terminals {
		errs = append(errs, unix.Close(t.master), unix.Close(t.slave))
	}
	for _, fd := range []int{p.pump.wake, p.stops} {
		if fd >= 0 {
			errs = append(errs, unix.Close(fd))
		}
	}
	return errors.Join(errs...)
}

func relink(name, link string) error {
	if info, err := os.Lstat(link); err == nil {
		if info.Mode()&os.ModeSymlink == 0 {
			return fmt.Errorf("%s is in the way and no link", link)
		}
		if err := os.Remove(link); err != nil {
			return err
		}
	}
	return os.Symlink(name, link)
}

// terminal is one pseudo-terminal with the machine at its far end. The slave
// is held open so that a client's closing hangs nothing up, and so that its
// raw mode stays.
type terminal struct {
	machine       line.Machine
	streams       bool // it sends by itself
	name          string
	master, slave int

	lastIn   time.Duration // bytes came from a client
	lastRead time.Duration // a client took bytes, or there were none to take
	unread   int           // at the last look
	written  int           // since
	lockSeen time.Duration // since when it is locked; 0: it is not
}

func openTerminal(m line.Machine) (*terminal, error) {
	master, name, err := openMaster()
	if err != nil {
		return nil, err
	}
	slave, err := unix.Open(name, unix.O_RDWR|unix.O_NOCTTY|unix.O_CLOEXEC, 0)
	if err == nil {
		err = makeRaw(slave)
		if err == nil && master >= unix.FD_SETSIZE {
			err = errTooMany
		}
		if err == nil {
			return &terminal{machine: m, name: name, master: master, slave: slave}, nil
		}
		_ = unix.Close(slave)
	}
	_ = unix.Close(master)
	return nil, fmt.Errorf("prepare %s: %w", name, err)
}

// makeRaw turns off echo, line editing and every translation, before a client
// can open it: a cooked terminal would send the stream back to the machine.
func makeRaw(fd int) error {
	t, err := unix.IoctlGetTermios(fd, getTermios)
	if err != nil {
		return err
	}
	t.Iflag &^= unix.IGNBRK | unix.BRKINT | unix.PARMRK | unix.ISTRIP | unix.INLCR | unix.IGNCR | unix.ICRNL | unix.IXON
	t.Oflag &^= unix.OPOST
	t.Lflag &^= unix.ECHO | unix.ECHONL | unix.ICANON | unix.ISIG | unix.IEXTEN
	t.Cflag &^= unix.CSIZE | unix.PARENB
	t.Cflag |= unix.CS8
	t.Cc[unix.VMIN], t.Cc[unix.VTIME] = 1, 0
	return unix.IoctlSetTermios(fd, setTermios, t)
}
