//go:build !linux && !windows

package serialport

import (
	"slices"

	"go.bug.st/serial"
)

// List gives the names of the ports. What USB adapter is behind one is told on
// Linux and Windows only: elsewhere it needs a C compiler.
func List() ([]Found, error) {
	names, err := serial.GetPortsList()
	if err != nil {
		return nil, err
	}
	slices.Sort(names)
	var all []Found
	for _, name := range names {
		all = append(all, Found{Name: name})
	}
	return all, nil
}
