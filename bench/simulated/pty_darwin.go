package simulated

import (
	"bytes"
	"fmt"
	"unsafe"

	"golang.org/x/sys/unix"
)

const (
	getTermios = unix.TIOCGETA
	setTermios = unix.TIOCSETA

	fionread = 0x4004667f // sys/filio.h: _IOR('f', 127, int)
	fread    = 1          // sys/fcntl.h: the input queue, for TIOCFLUSH
)

// openMaster opens a new pseudo-terminal's master side, without blocking, and
// names its slave side. Written from the system's header files; it was not run
// on such a machine.
func openMaster() (fd int, slave string, err error) {
	fd, err = unix.Open("/dev/ptmx", unix.O_RDWR|unix.O_NOCTTY|unix.O_CLOEXEC|unix.O_NONBLOCK, 0)
	if err != nil {
		return -1, "", fmt.Errorf("open /dev/ptmx: %w", err)
	}
	var name [128]byte
	if err = unix.IoctlSetInt(fd, unix.TIOCPTYGRANT, 0); err == nil {
		if err = unix.IoctlSetInt(fd, unix.TIOCPTYUNLK, 0); err == nil {
			_, _, errno := unix.Syscall(unix.SYS_IOCTL, uintptr(fd), unix.TIOCPTYGNAME, uintptr(unsafe.Pointer(&name[0])))
			if errno == 0 {
				text, _, _ := bytes.Cut(name[:], []byte{0})
				return fd, string(text), nil
			}
			err = errno
		}
	}
	_ = unix.Close(fd)
	return -1, "", fmt.Errorf("unlock the pseudo-terminal: %w", err)
}

// unread counts the bytes that nobody has taken from a slave yet.
func unread(slave int) (int, error) { return unix.IoctlGetInt(slave, fionread) }

// discard throws them away.
func discard(slave int) error { return unix.IoctlSetPointerInt(slave, unix.TIOCFLUSH, fread) }

// locked cannot be asked here; taking it for locked clears a lock too often
// rather than never.
func locked(int) bool { return true }
