package record

import (
	"bytes"
	"errors"
	"io"
	"io/fs"
	"math/rand/v2"
	"sync"
)

// What a memoryDisk is asked to do; the k-th of a kind can be made to fail.
const (
	opWrite  = "write"
	opSync   = "sync"
	opCreate = "create"
	opFolder = "sync folder"
	opRename = "rename"
)

var errDisk = errors.New("input/output error")

// memoryDisk is a disk that keeps apart what it was told and what is durable,
// as a disk that honours a sync does. A failed sync loses what it should have
// made durable for good, even if a later one succeeds, as Linux does it.
type memoryDisk struct {
	mu       sync.Mutex
	names    map[string]*memoryNode
	durable  map[string]*memoryNode // names, as of the last sync of the folder
	counts   map[string]int
	failKind string
	failAt   int // of failKind, from 1; 0 never
	failed   bool
	before   func(op string, n *memoryNode) // called before a write or sync takes effect, locked
	gate     chan struct{}                  // if not nil, a write waits for it
	arrived  chan struct{}                  // and says so here, if there is room
}

type memoryNode struct {
	content []byte
	synced  []byte // what is durable; content may go on from it or differ from it after a failed sync
	lost    bool   // a sync failed, so no later one makes anything durable
}

type memoryFile struct {
	disk *memoryDisk
	node *memoryNode
	at   int
}

func newMemoryDisk() *memoryDisk {
	return &memoryDisk{names: map[string]*memoryNode{}, durable: map[string]*memoryNode{}, counts: map[string]int{}}
}

// fails counts an operation and tells whether it is the one to fail.
func (d *memoryDisk) fails(kind string) bool {
	d.counts[kind]++
	if kind == d.failKind && d.counts[kind] == d.failAt {
		d.failed = true
		return true
	}
	return false
}

func (d *memoryDisk) create(path string) (file, error) {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.fails(opCreate) {
		return nil, errDisk
	}
	if d.names[path] != nil {
		return nil, &fs.PathError{Op: "open", Path: path, Err: fs.ErrExist}
	}
	d.names[path] = &memoryNode{}
	return &memoryFile{disk: d, node: d.names[path]}, nil
}

func (d *memoryDisk) open(path string) (file, error) {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.names[path] == nil {
		return nil, &fs.PathError{Op: "open", Path: path, Err: fs.ErrNotExist}
	}
	return &memoryFile{disk: d, node: d.names[path]}, nil
}

func (d *memoryDisk) remove(path string) error {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.names[path] == nil {
		return &fs.PathError{Op: "remove", Path: path, Err: fs.ErrNotExist}
	}
	delete(d.names, path)
	return nil
}

func (d *memoryDisk) replace(temporary, path string, held file) error {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.fails(opRename) {
		return errDisk
	}
	d.names[path] = d.names[temporary]
	delete(d.names, temporary)
	return nil
}

func (d *memoryDisk) syncFolder(string) error {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.fails(opFolder) {
		return errDisk
	}
	d.durable = map[string]*memoryNode{}
	for name, n := range d.names {
		d.durable[name] = n
	}
	return nil
}

func (f *memoryFile) Read(p []byte) (int, error) {
	f.disk.mu.Lock()
	defer f.disk.mu.Unlock()
	if f.at >= len(f.node.content) {
		return 0, io.EOF
	}
	n := copy(p, f.node.content[f.at:])
	f.at += n
	return n, nil
}

// Write fails half-way when it fails, as a disk that fills up does.
func (f *memoryFile) Write(p []byte) (int, error) {
	if f.disk.gate != nil {
		select {
		case f.disk.arrived <- struct{}{}:
		default:
		}
		<-f.disk.gate
	}
	f.disk.mu.Lock()
	defer f.disk.mu.Unlock()
	if f.disk.fails(opWrite) {
		f.node.content = append(f.node.content, p[:len(p)/2]...)
		return len(p) / 2, errDisk
	}
	f.node.content = append(f.node.content, p...)
	if f.disk.before != nil {
		f.disk.before(opWrite, f.node)
	}
	return len(p), nil
}

func (f *memoryFile) Sync() error {
	f.disk.mu.Lock()
	defer f.disk.mu.Unlock()
	if f.disk.before != nil {
		f.disk.before(opSync, f.node)
	}
	if f.disk.fails(opSync) {
		f.node.lost = true
		return errDisk
	}
	if !f.node.lost {
		f.node.synced = bytes.Clone(f.node.content)
	}
	return nil
}

func (f *memoryFile) Close() error { return nil }

// afterPowerCut is the disk as it is found afterwards: names as of the last
// sync of the folder or, by chance, as of now; of each file what was synced
// and anything whatever of the rest.
func (d *memoryDisk) afterPowerCut(r *rand.Rand) *memoryDisk {
	d.mu.Lock()
	defer d.mu.Unlock()
	names := d.durable
	if r.IntN(2) == 0 {
		names = d.names
	}
	after := newMemoryDisk()
	for name, n := range names {
		content := n.image(r)
		after.names[name] = &memoryNode{content: content, synced: content}
		after.durable[name] = after.names[name]
	}
	return after
}

// sector is what a disk writes whole.
const sector = 512

// image is what a power cut leaves of a file. It is never longer than what
// was written, for a record is not preallocated.
func (n *memoryNode) image(r *rand.Rand) []byte {
	image := bytes.Clone(n.synced)
	if len(n.content) < len(n.synced) {
		return image
	}
	rest := bytes.Clone(n.content[len(n.synced):])
	switch r.IntN(6) {
	case 0: // cut anywhere
		rest = rest[:r.IntN(len(rest)+1)]
	case 1: // the length was written, the data were not
		clear(rest)
	case 2: // some sectors were written and some were not, in any order
		sectors(rest, len(n.synced), func(s []byte) {
			if r.IntN(2) == 0 {
				clear(s)
			}
		})
	case 3: // a garbled sector here and there
		sectors(rest, len(n.synced), func(s []byte) {
			if r.IntN(2) == 0 {
				for i := range s {
					s[i] = byte(r.Uint32())
				}
			}
		})
	case 4: // sectors of the file's own older data
		sectors(rest, len(n.synced), func(s []byte) {
			if r.IntN(2) == 0 && len(n.synced) > len(s) {
				copy(s, n.synced[r.IntN(len(n.synced)-len(s)):])
			}
		})
	case 5: // all of it was written
	}
	return append(image, rest...)
}

// sectors calls f with the pieces of data, which begins at an offset of its
// file, that lie in one sector each.
func sectors(data []byte, offset int, f func([]byte)) {
	for len(data) > 0 {
		n := min(sector-offset%sector, len(data))
		f(data[:n])
		data, offset = data[n:], offset+n
	}
}
