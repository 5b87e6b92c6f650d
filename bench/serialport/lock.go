package serialport

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"os"
	"path/filepath"
)

// ErrLocked: another program works with it.
var ErrLocked = errors.New("another run of this program has it")

// Lock keeps other runs of this program away from a thing that a name stands
// for: a port, or an instrument by its identity. The system drops it when the
// process ends, however that ends, so that none is ever left behind. It is a
// lock of this program's own and holds against an administrator too, whom a
// port's own exclusive lock does not keep out.
type Lock struct{ file *os.File }

// NewLock takes the lock of a name; ErrLocked when another process, or this
// one, has it.
func NewLock(name string) (*Lock, error) {
	return newLock(filepath.Join(os.TempDir(), "kymobench-locks"), name)
}

func newLock(dir, name string) (*Lock, error) {
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return nil, fmt.Errorf("lock %s: %w", name, err)
	}
	_ = os.Chmod(dir, 0o777|os.ModeSticky) // for every user of this computer; it is another's to change otherwise
	sum := sha256.Sum256([]byte(name))
	file, err := openLocked(filepath.Join(dir, hex.EncodeToString(sum[:8])+".lock"))
	if err != nil {
		return nil, fmt.Errorf("lock %s: %w", name, err)
	}
	return &Lock{file}, nil
}

// Release gives the lock back.
func (l *Lock) Release() error { return l.file.Close() }

// Real is the file behind a port's name, so that two names of one port are one.
func Real(name string) string {
	if real, err := filepath.EvalSymlinks(name); err == nil {
		return real
	}
	return name
}
