package main

import (
	"errors"

	"kymobench/bench/line"
	"kymobench/bench/serialport"
	"kymobench/bench/setup"
)

// serialPorts opens ports of this machine.
type serialPorts struct {
	inbox *line.Real
	locks map[line.PortID]*serialport.Lock
	usb   map[line.PortID]string // identity of the adapter, where the system tells it
}

func newSerialPorts() *serialPorts {
	return &serialPorts{inbox: line.NewReal(), locks: map[line.PortID]*serialport.Lock{}, usb: map[line.PortID]string{}}
}

func (p *serialPorts) Inbox() line.Inbox { return p.inbox }

// Connect opens a port that no other run of this program has. The name may be a
// link; the lock is that of the port behind it.
func (p *serialPorts) Connect(id line.PortID, name string, mode setup.PortMode) error {
	real := serialport.Real(name)
	if old := p.locks[id]; old != nil { // the port was gone, and is opened once more
		delete(p.locks, id)
		if err := old.Release(); err != nil {
			return err
		}
	}
	lock, err := serialport.NewLock(real)
	if err != nil {
		return err
	}
	p.locks[id] = lock
	port, err := serialport.Open(name, serialport.Mode{
		Baud: mode.Baud, DataBits: mode.DataBits, Parity: parityOf(mode.Parity), StopBits: mode.StopBits,
	})
	if err != nil {
		return err
	}
	if err := p.inbox.Attach(id, port); err != nil {
		return errors.Join(err, port.Close())
	}
	for _, f := range p.listed() {
		if f.Name == real && f.Identity() != "" {
			p.usb[id] = f.Identity()
		}
	}
	return nil
}

// Moved finds the port where the adapter is now that was plugged there.
func (p *serialPorts) Moved(id line.PortID, name string) (string, bool) {
	identity := p.usb[id]
	for _, f := range p.listed() {
		if identity != "" && f.Identity() == identity && f.Name != serialport.Real(name) {
			return f.Name, true
		}
	}
	return "", false
}

// listed are the ports the system tells of; none when it does not.
func (p *serialPorts) listed() []serialport.Found {
	found, err := serialport.List()
	if err != nil {
		return nil
	}
	return found
}

// Close ends the ports and gives their locks back.
func (p *serialPorts) Close() error {
	errs := []error{p.inbox.Close()}
	for id, lock := range p.locks {
		delete(p.locks, id)
		errs = append(errs, lock.Release())
	}
	return errors.Join(errs...)
}

// parityOf turns a bench file's word into the port's.
func parityOf(word string) serialport.Parity {
	switch word {
	case "odd":
		return serialport.ParityOdd
	case "even":
		return serialport.ParityEven
	case "mark":
		return serialport.ParityMark
	case "space":
		return serialport.ParitySpace
	}
	return serialport.ParityNone
}
