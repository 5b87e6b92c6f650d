package main

import (
	"errors"
	"io/fs"
	"os"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/transcript"
)

// keptPorts are ports whose traffic is kept in a transcript.
type keptPorts struct {
	setup.Opener
	keeper *transcript.Keeper
	file   *os.File
}

// kept keeps the traffic of the ports when a file is named for it.
func kept(o setup.Opener, path string) (setup.Opener, error) {
	if path == "" {
		return o, nil
	}
	return keepPorts(o, path)
}

// keepPorts writes the traffic of the ports into a file that is not there yet.
func keepPorts(o setup.Opener, path string) (*keptPorts, error) {
	file, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
	if errors.Is(err, fs.ErrExist) {
		return nil, usagef("%s is there already: name a new file for the transcript", path)
	}
	if err != nil {
		return nil, err
	}
	return &keptPorts{o, transcript.Keep(o.Inbox(), file), file}, nil
}

func (p *keptPorts) Inbox() line.Inbox { return p.keeper }

func (p *keptPorts) Connect(id line.PortID, name string, mode setup.PortMode) error {
	err := p.Opener.Connect(id, name, mode)
	p.keeper.Opened(id, err)
	return err
}

// Moved asks the ports and keeps their answer.
func (p *keptPorts) Moved(id line.PortID, name string) (now string, ok bool) {
	if m, can := p.Opener.(setup.Mover); can {
		now, ok = m.Moved(id, name)
	}
	p.keeper.Moved(id, now)
	return now, ok
}

func (p *keptPorts) Close() error {
	return errors.Join(p.Opener.Close(), p.keeper.Close(), p.file.Close())
}

// playedPorts are those of a transcript.
type playedPorts struct{ player *transcript.Player }

func (p playedPorts) Inbox() line.Inbox { return p.player }

func (p playedPorts) Connect(id line.PortID, _ string, _ setup.PortMode) error {
	return p.player.Opened(id)
}

// Moved is what was known then.
func (p playedPorts) Moved(id line.PortID, _ string) (string, bool) {
	now := p.player.Moved(id)
	return now, now != ""
}

func (p playedPorts) Close() error { return nil }
