package record

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"
	"time"
)

// mostTails bounds the side files of one record.
const mostTails = 1000

// Recover makes an open record whole after a crash. Good lines stay as they
// are. If bytes follow them that no line shows to have been durable, these go
// to a side file PATH.tail-N, and a line of kind recovered names their number
// and SHA-256 and the file. Recover returns the record as it then stands; the
// run may be resumed with Reopen.
//
// It is never a partial repair: the side file is durable before the record is
// touched, and the record is replaced whole or not at all. A closed record is
// never repaired (ErrClosed), a damaged one neither (*ChainError), nor one
// that a process still writes (ErrInUse). The caller must not recover a record
// that has a signed head.
func Recover(path string, wall time.Time) (Run, error) {
	return recoverRecord(osFiles{}, path, wall)
}

func recoverRecord(disk files, path string, wall time.Time) (Run, error) {
	f, run, err := openRecord(disk, path)
	switch {
	case err != nil:
	case run.Closed:
		err = errors.Join(ErrClosed, f.Close())
	case len(run.Torn) == 0:
		err = f.Close()
	default:
		run, err = setAside(disk, path, wall, f, run)
	}
	if err != nil {
		return Run{}, fmt.Errorf("recover %s: %w", path, err)
	}
	return run, nil
}

// setAside carries Recover out and closes f.
func setAside(disk files, path string, wall time.Time, f file, run Run) (Run, error) {
	side, err := keepTail(disk, path, run.Torn)
	if err != nil {
		return Run{}, errors.Join(err, f.Close())
	}
	last := run.Events[len(run.Events)-1]
	sum := sha256.Sum256(run.Torn)
	// The line may say that all lines before it are durable, for it becomes
	// part of the record only when the new file, synced whole, takes its place.
	e := Event{Line: run.Head.Lines + 1, Durable: run.Head.Lines, At: last.At, Wall: wall, Kind: KindRecovered}
	body, err := encodeEvent(nil, &e, Recovered{Bytes: int64(len(run.Torn)), SHA256: hex.EncodeToString(sum[:]), File: filepath.Base(side)}, run.Head.Run)
	if err != nil {
		return Run{}, errors.Join(err, f.Close())
	}
	whole := encodeRun(run)
	whole = appendLine(whole, body, chainNext(run.Head.Hash, body))
	again, err := parse(whole, Limit{}.orUsual())
	if err != nil {
		return Run{}, errors.Join(err, f.Close())
	}
	return again, rewrite(disk, path, f, whole)
}

// rewrite puts a file with these bytes, synced, in the place of path, which f
// is open on, and closes f.
func rewrite(disk files, path string, f file, whole []byte) error {
	temporary := path + ".recovering"
	if err := disk.remove(temporary); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return errors.Join(err, f.Close())
	}
	if err := writeWhole(disk, temporary, whole); err != nil {
		return errors.Join(err, f.Close())
	}
	if err := disk.replace(temporary, path, f); err != nil {
		return err
	}
	return disk.syncFolder(path)
}

// keepTail writes a torn tail to a side file of its own. One that an
// interrupted recovery left is not taken again even if it holds the same: its
// bytes may be in the machine's memory only, after a sync that failed.
func keepTail(disk files, path string, tail []byte) (string, error) {
	for n := 1; n <= mostTails; n++ {
		side := fmt.Sprintf("%s.tail-%d", path, n)
		err := writeWhole(disk, side, tail)
		if errors.Is(err, fs.ErrExist) {
			continue
		}
		if err != nil {
			return "", err
		}
		return side, disk.syncFolder(side)
	}
	return "", fmt.Errorf("%s has %d tails already", path, mostTails)
}

// writeWhole writes a new file and syncs it.
func writeWhole(disk files, path string, data []byte) error {
	f, err := disk.create(path)
	if err != nil {
		return err
	}
	if _, err = f.Write(data); err == nil {
		err = f.Sync()
	}
	return errors.Join(err, f.Close())
}

// encodeRun writes the good lines of a run again, byte for byte.
func encodeRun(run Run) []byte {
	data := make([]byte, 0, run.Head.Bytes+longestLine/16)
	hash := chainStart(run.Head.Run)
	var body []byte
	for _, e := range run.Events {
		body = appendBody(body[:0], e)
		hash = chainNext(hash, body)
		data = appendLine(data, body, hash)
	}
	return data
}

// Reopen takes up an open record to append to it: a torn one is refused with
// ErrTorn (Recover it first), a closed one with ErrClosed. It returns the run
// so far. All lines of it count as durable from then on, and to make that true
// the record is first put down anew, whole: what a killed process left is in
// the machine's memory only, and after a sync that failed there a second sync
// says yes without having written anything.
func Reopen(path string, c Committer) (*Writer, Run, error) {
	return reopen(osFiles{}, path, c)
}

func reopen(disk files, path string, c Committer) (*Writer, Run, error) {
	w, run, err := takeUp(disk, path, c)
	if err != nil {
		return nil, Run{}, fmt.Errorf("resume record %s: %w", path, err)
	}
	return w, run, nil
}

func takeUp(disk files, path string, c Committer) (*Writer, Run, error) {
	f, run, err := openRecord(disk, path)
	switch {
	case err != nil:
		return nil, Run{}, err
	case run.Closed:
		return nil, Run{}, errors.Join(ErrClosed, f.Close())
	case len(run.Torn) > 0:
		return nil, Run{}, errors.Join(ErrTorn, f.Close())
	}
	if err := rewrite(disk, path, f, encodeRun(run)); err != nil {
		return nil, Run{}, err
	}
	f, again, err := openRecord(disk, path)
	if err != nil {
		return nil, Run{}, err
	}
	if again.Head != run.Head { // somebody took it up between the two openings
		return nil, Run{}, errors.Join(ErrInUse, f.Close())
	}
	if err := c.begin(f); err != nil {
		return nil, Run{}, errors.Join(err, f.Close())
	}
	return &Writer{path: path, files: disk, committer: c, head: run.Head, taken: run.Head.Lines}, run, nil
}

// openRecord opens a record for appending and reads it.
func openRecord(disk files, path string) (file, Run, error) {
	f, err := disk.open(path)
	if err != nil {
		return nil, Run{}, err
	}
	run, err := Read(io.Reader(f), Limit{})
	if err != nil {
		return nil, Run{}, errors.Join(err, f.Close())
	}
	return f, run, nil
}
