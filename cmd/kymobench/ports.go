package main

import (
	"errors"

	"kymobench/bench/line"
	"kymobench/bench/serialport"
)

// serialPorts opens ports of this machine.
type serialPorts struct {
	inbox *line.Real
}

func newSerialPorts() *serialPorts { return &serialPorts{inbox: line.NewReal()} }

func (p *serialPorts) Inbox() line.Inbox { return p.inbox }

func (p *serialPorts) Connect(id line.PortID, name string, baud int) error {
	port, err := serialport.Open(name, serialport.Mode{Baud: baud})
	if err != nil {
		return err
	}
	if err := p.inbox.Attach(id, port); err != nil {
		return errors.Join(err, port.Close())
	}
	return nil
}

func (p *serialPorts) Close() error { return p.inbox.Close() }
