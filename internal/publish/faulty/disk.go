// Package faulty is a filesystem for tests: [Disk] implements publish.FS in
// memory, knows what a power cut would leave of it, and makes the operation of
// a given number go wrong.
package faulty

import (
	"bytes"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"maps"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"time"

	"catenrich/internal/publish"
)

// A Disk is a filesystem of one directory that remembers, besides what its
// user sees, what would be there after a power cut: of a file what was synced,
// of the directory what was there at its last sync. Every operation counts,
// and one of them can be made to fail. It is for one goroutine at a time.
type Disk struct {
	// Before, if it is set, is called before each operation, with its number.
	Before func(n int)

	dir     string
	names   map[string]*inode // what the user sees
	durable map[string]*inode // as of the last SyncDir
	changes []change          // since then

	count  int // operations so far
	at     int // the operation that goes wrong, from 1
	how    Fault
	broke  string
	halted bool // after a crash nothing happens any more
}

var _ publish.FS = (*Disk)(nil)

// New returns an empty disk whose one directory is called dir.
func New(dir string) *Disk {
	return &Disk{dir: dir, names: map[string]*inode{}, durable: map[string]*inode{}}
}

// Break lets the operation of number at, from 1, go wrong. Operations are
// counted from the disk's first.
func (d *Disk) Break(at int, how Fault) { d.at, d.how, d.broke = at, how, "" }

// Count returns how many operations there have been.
func (d *Disk) Count() int { return d.count }

type inode struct {
	seen, synced []byte
	modified     time.Time
}

// A change is one operation on the directory: to appears with node, from goes.
// Either may be "".
type change struct {
	from, to string
	node     *inode
}

// A Fault is a way in which an operation goes wrong.
type Fault int

const (
	None  Fault = iota
	Fail        // the operation does nothing and says so
	Short       // a write writes half, and says so; anything else fails
	Late        // the operation is done, and yet reported as failed
	Crash       // nothing is done from here on
)

func (f Fault) String() string { return [...]string{"none", "fail", "short", "late", "crash"}[f] }

var errCrash = errors.New("the machine is off")

// Broke returns the name of the operation that went wrong, "" if none did yet.
func (d *Disk) Broke() string { return d.broke }

// step counts an operation. do says whether it is to be carried out.
func (d *Disk) step(op string) (do bool, err error) {
	if d.halted {
		return false, errCrash
	}
	d.count++
	if d.Before != nil {
		d.Before(d.count)
	}
	if d.count != d.at || d.how == None {
		return true, nil
	}
	d.broke = op
	switch d.how {
	case Crash:
		d.halted = true
		return false, errCrash
	case Late:
		return true, syscall.EIO
	case Fail, Short:
		return false, syscall.ENOSPC
	}
	return true, nil
}

// change carries out a change of the directory.
func (d *Disk) change(c change) {
	if c.from != "" {
		delete(d.names, c.from)
	}
	if c.to != "" {
		d.names[c.to] = c.node
	}
	d.changes = append(d.changes, c)
}

// apply makes a change durable. It is possible without the ones before it.
func (c change) apply(disk map[string]*inode) {
	if c.from != "" && disk[c.from] == c.node {
		delete(disk, c.from)
	}
	if c.to != "" {
		disk[c.to] = c.node
	}
}

// clone returns a copy, switched on again, that shares nothing with d.
// Clone returns a copy, switched on again and without a fault to come, that
// shares nothing with d.
func (d *Disk) Clone() *Disk {
	copies := map[*inode]*inode{nil: nil}
	copyOf := func(n *inode) *inode {
		if _, ok := copies[n]; !ok {
			copies[n] = &inode{bytes.Clone(n.seen), bytes.Clone(n.synced), n.modified}
		}
		return copies[n]
	}
	c := New(d.dir)
	for name, n := range d.names {
		c.names[name] = copyOf(n)
	}
	for name, n := range d.durable {
		c.durable[name] = copyOf(n)
	}
	for _, x := range d.changes {
		c.changes = append(c.changes, change{x.from, x.to, copyOf(x.node)})
	}
	return c
}

// A Remnant says what a power cut leaves of a file's bytes that were not
// synced.
type Remnant int

const (
	Lost   Remnant = iota // the file as it was synced last
	Zeroed                // its size, but zeros
	Kept                  // everything
)

// AfterCut returns the filesystem after a power cut: of the directory's changes
// since its last sync, those whose bit is set in kept arrived.
func (d *Disk) AfterCut(arrived uint, left Remnant) *Disk {
	disk := maps.Clone(d.durable)
	for i, c := range d.changes {
		if arrived>>i&1 == 1 {
			c.apply(disk)
		}
	}
	after := New(d.dir)
	for name, n := range disk {
		data := n.synced
		switch {
		case left == Kept:
			data = n.seen
		case left == Zeroed && string(n.seen) != string(n.synced):
			data = make([]byte, len(n.seen))
		}
		copied := &inode{append([]byte{}, data...), append([]byte{}, data...), n.modified}
		after.names[name], after.durable[name] = copied, copied
	}
	return after
}

// Cuts calls f for the ways in which a power cut could leave d: every subset of
// the unsynced changes, or 256 of them if there are more.
func (d *Disk) Cuts(f func(what string, after *Disk)) {
	for left := Lost; left <= Kept; left++ {
		total := uint(1) << len(d.changes)
		random := rand.New(rand.NewPCG(1, uint64(d.count)))
		for i := range min(total, 256) {
			arrived := i
			if total > 256 && i > 1 {
				arrived = random.UintN(total)
			} else if total > 256 && i == 1 {
				arrived = total - 1
			}
			f(fmt.Sprintf("changes %b of %d, bytes %d", arrived, len(d.changes), left), d.AfterCut(arrived, left))
		}
	}
}

// Read returns a file's content as seen, "-" if there is none.
func (d *Disk) Read(name string) string {
	if n := d.names[name]; n != nil {
		return string(n.seen)
	}
	return "-"
}

// Names lists the files that the user sees, sorted.
func (d *Disk) Names() []string { return slices.Sorted(maps.Keys(d.names)) }

// Image is a digest of all files but those whose names begin with a dot.
func (d *Disk) Image() [32]byte {
	h := sha256.New()
	for _, name := range d.Names() {
		if !strings.HasPrefix(filepath.Base(name), ".") {
			fmt.Fprintf(h, "%q %q ", name, d.names[name].seen)
		}
	}
	return [32]byte(h.Sum(nil))
}

func (d *Disk) Create(path string) (publish.File, error) {
	do, err := d.step("create")
	if !do {
		return nil, pathError("create", path, err)
	}
	if d.names[path] != nil {
		return nil, pathError("create", path, fs.ErrExist)
	}
	n := &inode{modified: time.Now()}
	d.change(change{to: path, node: n})
	if err != nil {
		return nil, pathError("create", path, err)
	}
	return &file{disk: d, node: n, path: path}, nil
}

func (d *Disk) Open(path string) (publish.File, error) {
	if _, err := d.step("open"); err != nil {
		return nil, pathError("open", path, err)
	}
	n := d.names[path]
	if n == nil {
		return nil, pathError("open", path, fs.ErrNotExist)
	}
	return &file{disk: d, node: n, path: path}, nil
}

func (d *Disk) Rename(from, to string) error {
	do, err := d.step("rename")
	if !do {
		return pathError("rename", from, err)
	}
	n := d.names[from]
	if n == nil {
		return pathError("rename", from, fs.ErrNotExist)
	}
	d.change(change{from, to, n})
	return pathError("rename", from, err)
}

func (d *Disk) RenameNew(from, to string) error {
	if d.names[to] != nil {
		return pathError("rename", from, fs.ErrExist)
	}
	return d.Rename(from, to)
}

func (d *Disk) Remove(path string) error {
	do, err := d.step("remove")
	if !do {
		return pathError("remove", path, err)
	}
	n := d.names[path]
	if n == nil {
		return pathError("remove", path, fs.ErrNotExist)
	}
	d.change(change{from: path, node: n})
	return pathError("remove", path, err)
}

func (d *Disk) SyncDir(string) error {
	do, err := d.step("sync directory")
	if do {
		for _, c := range d.changes {
			c.apply(d.durable)
		}
		d.changes = nil
	}
	return err
}

func (d *Disk) Lstat(path string) (fs.FileInfo, error) {
	if _, err := d.step("stat"); err != nil {
		return nil, pathError("lstat", path, err)
	}
	if path == d.dir {
		return info{path, -1, time.Time{}}, nil
	}
	n := d.names[path]
	if n == nil {
		return nil, pathError("lstat", path, fs.ErrNotExist)
	}
	return info{path, int64(len(n.seen)), n.modified}, nil
}

func (d *Disk) ReadDir(string) ([]string, error) {
	if _, err := d.step("read directory"); err != nil {
		return nil, err
	}
	var names []string
	for path := range d.names {
		names = append(names, filepath.Base(path))
	}
	return names, nil
}

// Mkdir has nothing to make: the one directory is there.
func (d *Disk) Mkdir(string) error { return fs.ErrExist }

// Scratch makes a real file: nothing of it outlives a process.
func (d *Disk) Scratch(string) (*os.File, error) {
	if _, err := d.step("scratch"); err != nil {
		return nil, err
	}
	f, err := os.CreateTemp("", "scratch")
	if err == nil {
		err = os.Remove(f.Name())
	}
	return f, err
}

func pathError(op, path string, err error) error {
	if err == nil {
		return nil
	}
	return &fs.PathError{Op: op, Path: path, Err: err}
}

type file struct {
	disk *Disk
	node *inode
	path string
}

func (f *file) Write(p []byte) (int, error) {
	do, err := f.disk.step("write")
	n := 0
	switch {
	case do:
		n = len(p)
	case f.disk.how == Short && !f.disk.halted:
		n = len(p) / 2
	}
	f.node.seen, f.node.modified = append(f.node.seen, p[:n]...), time.Now()
	return n, pathError("write", f.path, err)
}

func (f *file) CopyRange(src *os.File, off, n int64) (int64, error) {
	p := make([]byte, n)
	if _, err := src.ReadAt(p, off); err != nil {
		return 0, err
	}
	done, err := f.Write(p)
	return int64(done), err
}

func (f *file) WriteAt(p []byte, off int64) (int, error) {
	do, err := f.disk.step("write")
	if !do {
		return 0, pathError("write", f.path, err)
	}
	fresh := append([]byte{}, f.node.seen...) // synced may share the old array
	n := copy(fresh[off:], p)
	f.node.seen, f.node.modified = fresh, time.Now()
	return n, pathError("write", f.path, err)
}

func (f *file) ReadAt(p []byte, off int64) (int, error) {
	if _, err := f.disk.step("read"); err != nil {
		return 0, pathError("read", f.path, err)
	}
	if off >= int64(len(f.node.seen)) {
		return 0, io.EOF
	}
	n := copy(p, f.node.seen[off:])
	if n < len(p) {
		return n, io.EOF
	}
	return n, nil
}

func (f *file) Sync() error {
	do, err := f.disk.step("sync")
	if do {
		f.node.synced = append([]byte{}, f.node.seen...)
	}
	return pathError("sync", f.path, err)
}

func (f *file) Close() error {
	_, err := f.disk.step("close")
	return pathError("close", f.path, err)
}

func (f *file) Stat() (fs.FileInfo, error) { return f.disk.Lstat(f.path) }

type info struct {
	path string
	size int64 // -1 for the directory
	time time.Time
}

func (i info) Name() string       { return filepath.Base(i.path) }
func (i info) Size() int64        { return max(i.size, 0) }
func (i info) ModTime() time.Time { return i.time }
func (i info) IsDir() bool        { return i.size < 0 }
func (i info) Sys() any           { return nil }
func (i info) Mode() fs.FileMode {
	if i.size < 0 {
		return fs.ModeDir | 0o777
	}
	return 0o666
}
