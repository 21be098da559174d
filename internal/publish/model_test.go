package publish

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
)

// A model is a filesystem of one directory that remembers, besides what its
// user sees, what would be there after a power cut: of a file what was synced,
// of the directory what was there at its last sync. Every operation counts,
// and one of them can be made to fail.
type model struct {
	names   map[string]*inode // what the user sees
	durable map[string]*inode // as of the last SyncDir
	changes []change          // since then

	count  int // operations so far
	at     int // the operation that goes wrong, from 1
	how    mishap
	halted bool // after a crash nothing happens any more

	aborting int // count when the publication began to clean up
}

type inode struct{ seen, synced []byte }

// A change is one operation on the directory: to appears with node, from goes.
// Either may be "".
type change struct {
	from, to string
	node     *inode
}

type mishap int

const (
	none  mishap = iota
	fail         // the operation does nothing and says so
	short        // a write writes half, and says so; anything else fails
	late         // the operation is done, and yet reported as failed
	crash        // nothing is done from here on
)

func (f mishap) String() string { return [...]string{"none", "fail", "short", "late", "crash"}[f] }

var errCrash = errors.New("the machine is off")

func newModel() *model {
	return &model{names: map[string]*inode{}, durable: map[string]*inode{}}
}

// step counts an operation. do says whether it is to be carried out.
func (m *model) step() (do bool, err error) {
	if m.halted {
		return false, errCrash
	}
	m.count++
	if m.count != m.at {
		return true, nil
	}
	switch m.how {
	case crash:
		m.halted = true
		return false, errCrash
	case late:
		return true, syscall.EIO
	case fail, short:
		return false, syscall.ENOSPC
	}
	return true, nil
}

// change carries out a change of the directory.
func (m *model) change(c change) {
	if c.from != "" {
		delete(m.names, c.from)
	}
	if c.to != "" {
		m.names[c.to] = c.node
	}
	m.changes = append(m.changes, c)
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

// clone returns a copy, switched on again, that shares nothing with m.
func (m *model) clone() *model {
	copies := map[*inode]*inode{nil: nil}
	copyOf := func(n *inode) *inode {
		if _, ok := copies[n]; !ok {
			copies[n] = &inode{bytes.Clone(n.seen), bytes.Clone(n.synced)}
		}
		return copies[n]
	}
	c := newModel()
	for name, n := range m.names {
		c.names[name] = copyOf(n)
	}
	for name, n := range m.durable {
		c.durable[name] = copyOf(n)
	}
	for _, x := range m.changes {
		c.changes = append(c.changes, change{x.from, x.to, copyOf(x.node)})
	}
	return c
}

// A remnant says what a power cut leaves of a file's bytes that were not
// synced.
type remnant int

const (
	lost   remnant = iota // the file as it was synced last
	zeroed                // its size, but zeros
	kept                  // everything
)

// afterCut returns the filesystem after a power cut: of the directory's changes
// since its last sync, those whose bit is set in kept arrived.
func (m *model) afterCut(arrived uint, left remnant) *model {
	disk := maps.Clone(m.durable)
	for i, c := range m.changes {
		if arrived>>i&1 == 1 {
			c.apply(disk)
		}
	}
	after := newModel()
	for name, n := range disk {
		data := n.synced
		switch {
		case left == kept:
			data = n.seen
		case left == zeroed && string(n.seen) != string(n.synced):
			data = make([]byte, len(n.seen))
		}
		copied := &inode{append([]byte{}, data...), append([]byte{}, data...)}
		after.names[name], after.durable[name] = copied, copied
	}
	return after
}

// cuts calls f for the ways in which a power cut could leave m: every subset of
// the unsynced changes, or 200 of them if there are more than 256.
func (m *model) cuts(f func(what string, after *model)) {
	for left := lost; left <= kept; left++ {
		total := uint(1) << len(m.changes)
		random := rand.New(rand.NewPCG(1, uint64(m.count)))
		for i := range min(total, 256) {
			arrived := i
			if total > 256 && i > 1 {
				arrived = random.UintN(total)
			} else if total > 256 && i == 1 {
				arrived = total - 1
			}
			f(fmt.Sprintf("changes %b of %d, bytes %d", arrived, len(m.changes), left), m.afterCut(arrived, left))
		}
	}
}

// read returns a file's content as seen, "-" if there is none.
func (m *model) read(name string) string {
	if n := m.names[name]; n != nil {
		return string(n.seen)
	}
	return "-"
}

// disk is a digest of all files but temporaries.
func (m *model) disk() [32]byte {
	h := sha256.New()
	for _, name := range slices.Sorted(maps.Keys(m.names)) {
		if !strings.HasPrefix(filepath.Base(name), temporaryPrefix) {
			fmt.Fprintf(h, "%q %q ", name, m.names[name].seen)
		}
	}
	return [32]byte(h.Sum(nil))
}

func (m *model) Create(path string) (File, error) {
	do, err := m.step()
	if !do {
		return nil, pathError("create", path, err)
	}
	if m.names[path] != nil {
		return nil, pathError("create", path, fs.ErrExist)
	}
	n := &inode{}
	m.change(change{to: path, node: n})
	if err != nil {
		return nil, pathError("create", path, err)
	}
	return &modelFile{m: m, node: n, path: path}, nil
}

func (m *model) Open(path string) (File, error) {
	if _, err := m.step(); err != nil {
		return nil, pathError("open", path, err)
	}
	n := m.names[path]
	if n == nil {
		return nil, pathError("open", path, fs.ErrNotExist)
	}
	return &modelFile{m: m, node: n, path: path}, nil
}

func (m *model) Rename(from, to string) error {
	do, err := m.step()
	if !do {
		return pathError("rename", from, err)
	}
	n := m.names[from]
	if n == nil {
		return pathError("rename", from, fs.ErrNotExist)
	}
	m.change(change{from, to, n})
	return pathError("rename", from, err)
}

func (m *model) RenameNew(from, to string) error {
	if m.names[to] != nil {
		return pathError("rename", from, fs.ErrExist)
	}
	return m.Rename(from, to)
}

func (m *model) Remove(path string) error {
	do, err := m.step()
	if !do {
		return pathError("remove", path, err)
	}
	n := m.names[path]
	if n == nil {
		return pathError("remove", path, fs.ErrNotExist)
	}
	m.change(change{from: path, node: n})
	return pathError("remove", path, err)
}

func (m *model) SyncDir(string) error {
	do, err := m.step()
	if do {
		for _, c := range m.changes {
			c.apply(m.durable)
		}
		m.changes = nil
	}
	return err
}

func (m *model) Lstat(path string) (fs.FileInfo, error) {
	if _, err := m.step(); err != nil {
		return nil, pathError("lstat", path, err)
	}
	if path == "/d" {
		return modelInfo{path, -1}, nil
	}
	n := m.names[path]
	if n == nil {
		return nil, pathError("lstat", path, fs.ErrNotExist)
	}
	return modelInfo{path, int64(len(n.seen))}, nil
}

func (m *model) ReadDir(string) ([]string, error) {
	if _, err := m.step(); err != nil {
		return nil, err
	}
	var names []string
	for path := range m.names {
		names = append(names, filepath.Base(path))
	}
	return names, nil
}

func (m *model) Mkdir(string) error               { return fs.ErrExist }
func (m *model) Scratch(string) (*os.File, error) { return nil, errors.ErrUnsupported }

func pathError(op, path string, err error) error {
	if err == nil {
		return nil
	}
	return &fs.PathError{Op: op, Path: path, Err: err}
}

type modelFile struct {
	m    *model
	node *inode
	path string
}

func (f *modelFile) Write(p []byte) (int, error) {
	do, err := f.m.step()
	n := 0
	switch {
	case do:
		n = len(p)
	case f.m.how == short && !f.m.halted:
		n = len(p) / 2
	}
	f.node.seen = append(f.node.seen, p[:n]...)
	return n, pathError("write", f.path, err)
}

func (f *modelFile) CopyRange(src *os.File, off, n int64) (int64, error) {
	p := make([]byte, n)
	if _, err := src.ReadAt(p, off); err != nil {
		return 0, err
	}
	done, err := f.Write(p)
	return int64(done), err
}

func (f *modelFile) WriteAt(p []byte, off int64) (int, error) {
	do, err := f.m.step()
	if !do {
		return 0, pathError("write", f.path, err)
	}
	fresh := append([]byte{}, f.node.seen...) // synced may share the old array
	n := copy(fresh[off:], p)
	f.node.seen = fresh
	return n, pathError("write", f.path, err)
}

func (f *modelFile) ReadAt(p []byte, off int64) (int, error) {
	if _, err := f.m.step(); err != nil {
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

func (f *modelFile) Sync() error {
	do, err := f.m.step()
	if do {
		f.node.synced = append([]byte{}, f.node.seen...)
	}
	return pathError("sync", f.path, err)
}

func (f *modelFile) Close() error {
	_, err := f.m.step()
	return pathError("close", f.path, err)
}

func (f *modelFile) Stat() (fs.FileInfo, error) { return f.m.Lstat(f.path) }

type modelInfo struct {
	path string
	size int64 // -1 for the directory
}

func (i modelInfo) Name() string       { return filepath.Base(i.path) }
func (i modelInfo) Size() int64        { return max(i.size, 0) }
func (i modelInfo) ModTime() time.Time { return time.Time{} }
func (i modelInfo) IsDir() bool        { return i.size < 0 }
func (i modelInfo) Sys() any           { return nil }
func (i modelInfo) Mode() fs.FileMode {
	if i.size < 0 {
		return fs.ModeDir | 0o777
	}
	return 0o666
}
