package serialport

import (
	"os"
	"path/filepath"
	"testing"
)

// A tree as the kernel makes it: a USB adapter, a UART that is there, one that
// is not, and a console.
func TestList(t *testing.T) {
	root := t.TempDir()
	write := func(path, text string) {
		t.Helper()
		full := filepath.Join(root, path)
		if err := os.MkdirAll(filepath.Dir(full), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(full, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	link := func(target, path string) {
		t.Helper()
		full := filepath.Join(root, path)
		if err := os.MkdirAll(filepath.Dir(full), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.Symlink(filepath.Join(root, target), full); err != nil {
			t.Fatal(err)
		}
	}
	write("sys/devices/usb1/1-2/idVendor", "1a2b\n")
	write("sys/devices/usb1/1-2/idProduct", "3c4d\n")
	write("sys/devices/usb1/1-2/serial", "BENCH-0042\n")
	write("sys/devices/usb1/1-2/manufacturer", "Invented\n")
	write("sys/devices/usb1/1-2/product", "adapter\n")
	write("sys/devices/usb1/1-2/1-2:1.0/ttyUSB0/x", "")
	link("sys/devices/usb1/1-2/1-2:1.0/ttyUSB0", "sys/class/tty/ttyUSB0/device")
	write("sys/devices/platform/serial8250/x", "")
	link("sys/devices/platform/serial8250", "sys/class/tty/ttyS0/device")
	write("sys/class/tty/ttyS0/type", "4\n")
	link("sys/devices/platform/serial8250", "sys/class/tty/ttyS1/device")
	write("sys/class/tty/ttyS1/type", "0\n")
	write("sys/class/tty/tty7/x", "")
	write("dev/ttyUSB0", "")
	link("dev/ttyUSB0", "dev/serial/by-id/usb-adapter")

	dev := filepath.Join(root, "dev")
	got, err := list(filepath.Join(root, "sys/class/tty"), dev)
	if err != nil || len(got) != 2 {
		t.Fatalf("%+v, %v", got, err)
	}
	want := Found{Name: filepath.Join(dev, "ttyUSB0"), Stable: filepath.Join(dev, "serial/by-id/usb-adapter"), USB: true,
		Vendor: "1a2b", Product: "3c4d", SerialNumber: "BENCH-0042", Description: "Invented adapter"}
	if got[0] != (Found{Name: filepath.Join(dev, "ttyS0")}) || got[1] != want {
		t.Errorf("%+v", got)
	}
	if got[1].Identity() != "1a2b:3c4d:BENCH-0042" || got[0].Identity() != "" {
		t.Errorf("identities %q, %q", got[0].Identity(), got[1].Identity())
	}
	if _, err := List(); err != nil { // this machine's, whatever it has
		t.Error(err)
	}
}
