package serialport

import (
	"strings"

	"go.bug.st/serial/enumerator"
)

// List asks the system's device list, without opening a port.
func List() ([]Found, error) {
	ports, err := enumerator.GetDetailedPortsList()
	if err != nil {
		return nil, err
	}
	var all []Found
	for _, p := range ports {
		f := Found{Name: p.Name, USB: p.IsUSB, Description: p.Product}
		if p.IsUSB {
			f.Vendor, f.Product, f.SerialNumber = strings.ToLower(p.VID), strings.ToLower(p.PID), p.SerialNumber
		}
		all = append(all, f)
	}
	return all, nil
}
