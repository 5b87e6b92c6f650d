package simulated

import (
	"fmt"
	"strconv"

	"golang.org/x/sys/unix"
)

const (
	getTermios = unix.TCGETS
	setTermios = unix.TCSETS
)

// openMaster opens a new pseudo-terminal's master side, without blocking, and
// names its slave side.
func openMaster() (fd int, slave string, err error) {
	fd, err = unix.Open("/dev/ptmx", unix.O_RDWR|unix.O_NOCTTY|unix.O_CLOEXEC|unix.O_NONBLOCK, 0)
	if err != nil {
		return -1, "", fmt.Errorf("open /dev/ptmx: %w", err)
	}
	if err = unix.IoctlSetPointerInt(fd, unix.TIOCSPTLCK, 0); err == nil {
		var n int
		if n, err = unix.IoctlGetInt(fd, unix.TIOCGPTN); err == nil {
			return fd, "/dev/pts/" + strconv.Itoa(n), nil
		}
	}
	_ = unix.Close(fd)
	return -1, "", fmt.Errorf("unlock the pseudo-terminal: %w", err)
}

// unread counts the bytes that nobody has taken from a slave yet.
func unread(slave int) (int, error) { return unix.IoctlGetInt(slave, unix.TIOCINQ) }

// discard throws them away.
func discard(slave int) error { return unix.IoctlSetInt(slave, unix.TCFLSH, unix.TCIFLUSH) }

// locked says that a client has asked for the slave alone.
func locked(slave int) bool {
	n, err := unix.IoctlGetInt(slave, unix.TIOCGEXCL)
	return err != nil || n != 0
}
