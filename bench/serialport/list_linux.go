package serialport

import (
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// List reads the ports from what the kernel tells under /sys, without opening
// one: opening a port moves its modem lines, which may drive a valve.
// Pseudo-terminals are not listed; any name can be typed all the same.
func List() ([]Found, error) { return list("/sys/class/tty", "/dev") }

func list(class, dev string) ([]Found, error) {
	entries, err := os.ReadDir(class)
	if err != nil {
		return nil, err
	}
	stable := byID(filepath.Join(dev, "serial/by-id"))
	var all []Found
	for _, e := range entries {
		dir := filepath.Join(class, e.Name())
		device, err := filepath.EvalSymlinks(filepath.Join(dir, "device"))
		if err != nil {
			continue // a console or a pseudo-terminal, no device behind it
		}
		if read(dir, "type") == "0" {
			continue // a UART that is not there
		}
		f := Found{Name: filepath.Join(dev, e.Name())}
		f.Stable = stable[f.Name]
		f.usb(device)
		all = append(all, f)
	}
	slices.SortFunc(all, func(a, b Found) int { return strings.Compare(a.Name, b.Name) })
	return all, nil
}

// usb looks for the USB device above a port.
func (f *Found) usb(device string) {
	for dir := device; len(dir) > 1; dir = filepath.Dir(dir) {
		if vendor := read(dir, "idVendor"); vendor != "" {
			f.USB, f.Vendor, f.Product = true, vendor, read(dir, "idProduct")
			f.SerialNumber = read(dir, "serial")
			f.Description = strings.TrimSpace(read(dir, "manufacturer") + " " + read(dir, "product"))
			return
		}
	}
}

// byID maps ports to the names that stay with their adapters.
func byID(dir string) map[string]string {
	names := map[string]string{}
	entries, err := os.ReadDir(dir)
	if err != nil {
		return names // there is none when no adapter is plugged
	}
	for _, e := range entries {
		path := filepath.Join(dir, e.Name())
		if port, err := filepath.EvalSymlinks(path); err == nil {
			names[port] = path
		}
	}
	return names
}

// read gives a short file's text, "" when it is not there.
func read(dir, name string) string {
	text, err := os.ReadFile(filepath.Join(dir, name))
	if err != nil {
		return ""
	}
	return strings.TrimSpace(string(text))
}
