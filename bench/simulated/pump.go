//go:build linux || darwin

package simulated

import (
	"errors"
	"fmt"
	"time"

	"golang.org/x/sys/unix"

	"kymobench/bench/line"
)

// pump drives all machines of a published bench in real time, from one
// goroutine: they share a volume.
type pump struct {
	terminals []*terminal
	wake      int // read end of a pipe; a byte ends the pump
	start     time.Time
	patience  time.Duration
	looked    time.Duration
	done      chan struct{}
	err       error // valid after done
}

// lookEvery is the time between two looks at what lies unread, and the longest
// the pump sleeps.
const lookEvery = 100 * time.Millisecond

func (p *pump) now() time.Duration { return time.Since(p.start) }

func (p *pump) run() {
	defer close(p.done)
	p.err = p.loop()
}

func (p *pump) loop() error {
	buffer := make([]byte, 4096)
	for {
		now := p.now()
		if err := p.emit(now); err != nil {
			return err
		}
		if now-p.looked >= lookEvery {
			p.look(now)
		}
		ready, err := p.wait(p.sleep(now))
		if err != nil {
			return err
		}
		if ready.IsSet(p.wake) {
			return nil
		}
		for _, t := range p.terminals {
			if !ready.IsSet(t.master) {
				continue
			}
			n, err := unix.Read(t.master, buffer)
			if err != nil {
				if again(err) {
					continue
				}
				return fmt.Errorf("read from %s: %w", t.name, err)
			}
			// What other machines put out before comes first.
			now = p.now()
			if err := p.emit(now); err != nil {
				return err
			}
			t.machine.Receive(line.Instant(now), buffer[:n])
			t.lastIn = now
		}
	}
}

// emit lets every output happen that is due, in the order of time.
func (p *pump) emit(now time.Duration) error {
	for {
		var next *terminal
		var first line.Instant
		for _, t := range p.terminals {
			due, ok := t.machine.Due()
			if ok && due <= line.Instant(now) && (next == nil || due < first) {
				next, first = t, due
			}
		}
		if next == nil {
			return nil
		}
		n, err := unix.Write(next.master, next.machine.Emit(first))
		if err != nil && !again(err) {
			return fmt.Errorf("write to %s: %w", next.name, err)
		}
		// What did not go in is lost, as on a wire that nobody listens to.
		next.written += max(n, 0)
	}
}

// sleep is the time until the next output or look.
func (p *pump) sleep(now time.Duration) time.Duration {
	d := lookEvery
	for _, t := range p.terminals {
		if due, ok := t.machine.Due(); ok {
			d = min(d, time.Duration(due)-now)
		}
	}
	return max(d, 0)
}

func (p *pump) wait(d time.Duration) (*unix.FdSet, error) {
	for {
		var set unix.FdSet
		set.Set(p.wake)
		highest := p.wake
		for _, t := range p.terminals {
			set.Set(t.master)
			highest = max(highest, t.master)
		}
		timeout := unix.NsecToTimeval(int64(d))
		_, err := unix.Select(highest+1, &set, nil, nil, &timeout)
		switch {
		case err == nil:
			return &set, nil
		case !errors.Is(err, unix.EINTR):
			return nil, fmt.Errorf("wait for the simulated ports: %w", err)
		}
		set.Zero()
	}
}

// nearlyFull is what a terminal holds unread when it holds all it can, about
// (4,095 bytes on Linux): then the count says nothing about a reader.
const nearlyFull = 4000

// look finds ports that nobody reads, and throws away what lies in them, so
// that who comes next hears the present and not the past; and it clears the
// exclusive lock that a killed client leaves behind, since the slave held here
// keeps it alive. A lock goes only when its port has been without input for a
// while and the stream is not read either, for a run that is alive reads it
// all the time.
func (p *pump) look(now time.Duration) {
	p.looked = now
	alone := false
	for _, t := range p.terminals {
		n, err := unread(t.slave)
		if err != nil {
			continue
		}
		if n == 0 || n < nearlyFull && n < t.unread+t.written {
			t.lastRead = now
		}
		t.unread, t.written = n, 0
		if now-t.lastRead >= p.patience {
			alone = alone || t.streams
			if discard(t.slave) == nil {
				t.unread = 0
			}
		}
	}
	for _, t := range p.terminals {
		switch {
		case !locked(t.slave):
			t.lockSeen = 0
		case t.lockSeen == 0:
			t.lockSeen = now
		case alone && now-t.lastIn >= p.patience && now-t.lockSeen >= p.patience:
			if unix.IoctlSetInt(t.slave, unix.TIOCNXCL, 0) == nil {
				t.lockSeen = 0
			}
		}
	}
}

func again(err error) bool {
	return errors.Is(err, unix.EAGAIN) || errors.Is(err, unix.EINTR)
}
