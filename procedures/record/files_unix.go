//go:build unix

package record

import (
	"errors"
	"os"
	"syscall"
)

// lock keeps two processes from writing one record. The lock belongs to the
// open file, so it ends with the process however the process ends.
func lock(f *os.File) error {
	err := syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
	if errors.Is(err, syscall.EWOULDBLOCK) {
		return ErrInUse
	}
	return err
}

// replaceFile renames while the old file is still held, so that no other
// process gets the lock in between.
func replaceFile(temporary, path string, held file) error {
	return errors.Join(os.Rename(temporary, path), held.Close())
}

func syncFolder(folder string) error {
	d, err := os.Open(folder)
	if err != nil {
		return err
	}
	return errors.Join(d.Sync(), d.Close())
}
