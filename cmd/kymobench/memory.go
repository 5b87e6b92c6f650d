package main

import (
	"fmt"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/simulated"
)

// memoryPorts opens the machines of a simulated bench in virtual time: the
// port's name is the machine's role.
type memoryPorts struct {
	bench *simulated.Bench
	inbox *line.Memory
}

func newMemoryPorts(b *simulated.Bench) *memoryPorts {
	return &memoryPorts{bench: b, inbox: line.NewMemory(b.StartTime())}
}

func (p *memoryPorts) Inbox() line.Inbox { return p.inbox }

func (p *memoryPorts) Connect(id line.PortID, name string, _ setup.PortMode) error {
	machine := p.bench.Machine(name)
	if machine == nil {
		return fmt.Errorf("the simulated bench has no port %q", name)
	}
	p.inbox.Connect(id, machine, line.MemoryOptions{})
	return nil
}

func (p *memoryPorts) Close() error { return nil }
