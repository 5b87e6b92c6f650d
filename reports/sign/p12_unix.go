//go:build unix

package sign

import (
	"fmt"
	"os"
	"path/filepath"
	"syscall"
)

// placeKeyFile gives the finished file its name; a link fails if that exists.
func placeKeyFile(temporary, path string) error { return os.Link(temporary, path) }

// checkKeyFile looks at the open file and at its folder.
func checkKeyFile(file *os.File) error {
	info, err := file.Stat()
	if err != nil {
		return err
	}
	if err := checkOwned(info); err != nil {
		return err
	}
	folder, err := os.Stat(filepath.Dir(file.Name()))
	if err != nil {
		return err
	}
	if err := checkOwned(folder); err != nil {
		return fmt.Errorf("its folder: %w", err)
	}
	return nil
}

func checkOwned(info os.FileInfo) error {
	if info.Mode().Perm()&0o077 != 0 {
		return fmt.Errorf("open to others (mode %04o)", info.Mode().Perm())
	}
	if stat, ok := info.Sys().(*syscall.Stat_t); !ok || int(stat.Uid) != os.Geteuid() {
		return fmt.Errorf("belongs to another user")
	}
	return nil
}
