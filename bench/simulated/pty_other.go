//go:build !linux && !darwin

package simulated

import (
	"errors"
	"runtime"
)

// Published is a bench whose instruments can be opened as serial ports. There
// is none on this system.
type Published struct{}

// ErrNoPseudoTerminals: this system has none that this package can open.
var ErrNoPseudoTerminals = errors.New("no pseudo-terminals on " + runtime.GOOS + ": the simulated bench runs in memory only")

// Publish needs pseudo-terminals, which this system has not.
func (b *Bench) Publish(string) (*Published, error) { return nil, ErrNoPseudoTerminals }

// Ports is empty here.
func (p *Published) Ports() map[string]string { return nil }

// Close does nothing here.
func (p *Published) Close() error { return nil }
