//go:build windows

package record

import "os"

// lock does nothing on Windows, which has no flock. Its substitute there is
// replaceFile: a record that another process holds open cannot be replaced,
// so Recover is refused. Two resumed runs on one record are not held apart.
func lock(*os.File) error { return nil }

// replaceFile closes the old file first: Windows does not rename over a file
// that is open.
func replaceFile(temporary, path string, held file) error {
	if err := held.Close(); err != nil {
		return err
	}
	return os.Rename(temporary, path)
}

// syncFolder does nothing on Windows, where a folder cannot be opened for
// writing and so not be flushed. NTFS writes a new name to its journal with
// the flush of the file itself; that is all the promise there is.
func syncFolder(string) error { return nil }
