package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"

	"kymobench/procedures/record"
)

// folder is where a run leaves what it makes: DIR/runs, DIR/reports, DIR/trust.
type folder struct{ dir string }

func (f folder) runs() string    { return filepath.Join(f.dir, "runs") }
func (f folder) reports() string { return filepath.Join(f.dir, "reports") }
func (f folder) trust() string   { return filepath.Join(f.dir, "trust") }

// make creates the folders that are not there.
func (f folder) make() error {
	for _, d := range []string{f.runs(), f.reports()} {
		if err := os.MkdirAll(d, 0o755); err != nil {
			return err
		}
	}
	return nil
}

// latest finds the run with the highest counter: its counter and the hash of
// its last line, so that a dropped run shows. Records that cannot be read are
// named, not passed over.
func (f folder) latest() (counter int64, head string, err error) {
	paths, err := filepath.Glob(filepath.Join(f.runs(), "*.record"))
	if err != nil {
		return 0, "", err
	}
	for _, path := range paths {
		run, err := record.ReadFile(path)
		if errors.Is(err, record.ErrNoOpening) {
			continue
		}
		if err != nil && !errors.Is(err, record.ErrTorn) {
			return 0, "", fmt.Errorf("the run before cannot be read, %s: %w", path, err)
		}
		opened, err := record.Decode[record.Opened](run.Events[0])
		if err != nil {
			return 0, "", fmt.Errorf("%s: %w", path, err)
		}
		if opened.Counter > counter {
			counter, head = opened.Counter, run.Head.Hash
		}
	}
	return counter, head, nil
}

// newFolder makes DIR for a demonstration: it must not exist unless it was
// named and is empty.
func newFolder(dir string, named bool) (folder, error) {
	entries, err := os.ReadDir(dir)
	switch {
	case errors.Is(err, fs.ErrNotExist):
	case err != nil:
		return folder{}, usagef("the folder %s cannot be used: %v", dir, err)
	case !named:
		return folder{}, usagef("the folder %s is there already: move it away, or name another with --out", dir)
	case len(entries) > 0:
		return folder{}, usagef("the folder %s is not empty: name an empty or a new one with --out", dir)
	}
	absolute, err := filepath.Abs(dir)
	if err != nil {
		return folder{}, err
	}
	f := folder{absolute}
	return f, f.make()
}

// writeWhole writes a file whole or not at all.
func writeWhole(path string, data []byte) error {
	t, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+"-*")
	if err != nil {
		return err
	}
	_, err = t.Write(data)
	err = errors.Join(err, t.Chmod(0o644), t.Sync(), t.Close())
	if err == nil {
		err = os.Rename(t.Name(), path)
	}
	if err != nil {
		return errors.Join(err, os.Remove(t.Name()))
	}
	return nil
}
