//go:build !unix

package sign

import (
	"fmt"
	"os"
)

// placeKeyFile gives the finished file its name. Without links that fail on an
// existing name, a second program could slip in between look and rename; key
// files are written by one person at one time.
func placeKeyFile(temporary, path string) error {
	if _, err := os.Lstat(path); err == nil {
		return fmt.Errorf("%s exists", path)
	}
	return os.Rename(temporary, path)
}

// checkKeyFile accepts: modes and owners mean nothing here, and the folder's
// access list is the administrator's to keep.
func checkKeyFile(*os.File) error { return nil }
