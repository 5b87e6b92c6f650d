package record

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
)

// file is what a committer asks of an open record.
type file interface {
	io.Reader
	io.Writer
	Sync() error
	Close() error
}

// files is what a record asks of the file system. It is as narrow as it is so
// that a test can stand in for a disk that fails or loses its power.
type files interface {
	// create makes a file that must not exist, for appending.
	create(path string) (file, error)
	// open opens a record for reading and appending, ErrInUse if it is written.
	open(path string) (file, error)
	remove(path string) error
	// replace puts temporary in the place of path, which held is open on, and
	// closes held.
	replace(temporary, path string, held file) error
	// syncFolder makes the names in path's folder durable.
	syncFolder(path string) error
}

// osFiles are the files of this machine.
type osFiles struct{}

// create does not preallocate: zeros at the end of a file after a power cut
// would have to be told from data.
func (osFiles) create(path string) (file, error) {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_APPEND|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return nil, err
	}
	if err := lock(f); err != nil {
		return nil, errors.Join(fmt.Errorf("%s: %w", path, err), f.Close())
	}
	return f, nil
}

func (osFiles) open(path string) (file, error) {
	before, err := os.Stat(path)
	if err != nil {
		return nil, err
	}
	if !before.Mode().IsRegular() {
		return nil, &fs.PathError{Op: "open record", Path: path, Err: fs.ErrInvalid}
	}
	f, err := os.OpenFile(path, os.O_RDWR|os.O_APPEND, 0)
	if err != nil {
		return nil, err
	}
	if err := lock(f); err != nil {
		return nil, errors.Join(fmt.Errorf("%s: %w", path, err), f.Close())
	}
	// Another process may have put a recovered record in its place between the
	// opening and the lock; what is written to the old one would be lost.
	now, err := os.Stat(path)
	opened, err2 := f.Stat()
	if err := errors.Join(err, err2); err != nil {
		return nil, errors.Join(err, f.Close())
	}
	if !os.SameFile(now, opened) {
		return nil, errors.Join(fmt.Errorf("%s: %w", path, ErrInUse), f.Close())
	}
	return f, nil
}

func (osFiles) remove(path string) error { return os.Remove(path) }

func (osFiles) replace(temporary, path string, held file) error {
	return replaceFile(temporary, path, held)
}

func (osFiles) syncFolder(path string) error { return syncFolder(filepath.Dir(path)) }
