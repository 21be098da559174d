package publish

import (
	"io"
	"io/fs"
	"os"
)

// An FS is the handful of operations on a filesystem that publication stands
// on. [OS] is the real one; tests put faults in its place.
type FS interface {
	Create(path string) (File, error)       // for reading and writing; fails if path exists
	Open(path string) (File, error)         // for reading; follows symbolic links
	Rename(from, to string) error           // replaces to
	RenameNew(from, to string) error        // fails with fs.ErrExist rather than replace to
	Remove(path string) error               // a file, not a directory
	Mkdir(path string) error                // one directory
	SyncDir(path string) error              // makes creations, renames and removals in it durable
	Lstat(path string) (fs.FileInfo, error) // does not follow symbolic links
	ReadDir(path string) ([]string, error)  // names, in any order
	Scratch(dir string) (*os.File, error)   // a nameless file on the same filesystem
}

// A File is an open file of an [FS].
type File interface {
	io.Writer
	io.ReaderAt
	io.WriterAt
	io.Closer
	Sync() error
	Stat() (fs.FileInfo, error)

	// CopyRange appends at most n bytes of src from off, and at least one. It
	// returns how many it wrote. Fewer than n without an error means that the
	// rest is to be asked for, so that a caller can stop in between.
	CopyRange(src *os.File, off, n int64) (int64, error)
}

// OS is the filesystem of the operating system.
var OS FS = osFS{}

type osFS struct{}

func (osFS) Create(path string) (File, error) {
	f, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return nil, err
	}
	return osFile{f, &writeBack{file: f}}, nil
}

func (osFS) Open(path string) (File, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	return osFile{f, nil}, nil
}

func (osFS) Rename(from, to string) error           { return os.Rename(from, to) }
func (osFS) RenameNew(from, to string) error        { return renameNew(from, to) }
func (osFS) Remove(path string) error               { return removeFile(path) }
func (osFS) Mkdir(path string) error                { return os.Mkdir(path, 0o777) }
func (osFS) Lstat(path string) (fs.FileInfo, error) { return os.Lstat(path) }

func (osFS) ReadDir(path string) ([]string, error) {
	d, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer d.Close()
	return d.Readdirnames(-1)
}

func (osFS) SyncDir(path string) error {
	d, err := os.Open(path)
	if err != nil {
		return err
	}
	defer d.Close()
	if err := d.Sync(); err != nil && !cannotSyncDir(err) {
		return err
	}
	return nil
}

func (osFS) Scratch(dir string) (*os.File, error) {
	f, err := os.OpenFile(temporaryPath(dir), os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return nil, err
	}
	if err := os.Remove(f.Name()); err != nil {
		f.Close()
		return nil, err
	}
	return f, nil
}

// copyStep is how much is copied in one go, unless it can be shared.
const copyStep = 16 << 20

type osFile struct {
	*os.File
	back *writeBack // nil for a file that is only read
}

func (f osFile) Write(p []byte) (int, error) {
	n, err := f.File.Write(p)
	f.back.wrote(int64(n))
	return n, err
}

func (f osFile) Close() error {
	f.back.stop()
	return f.File.Close()
}

func (f osFile) CopyRange(src *os.File, off, n int64) (int64, error) {
	done, err := copyInKernel(f.File, src, off, n, f.back.wrote)
	if n = min(n, copyStep); err != nil || done >= n {
		return done, err
	}
	// Not this kernel, or not between these filesystems.
	rest, err := io.CopyBuffer(onlyWriter{f}, onlyReader{io.NewSectionReader(src, off+done, n-done)}, make([]byte, blockSize))
	done += rest
	if err == nil && done < n {
		err = io.ErrUnexpectedEOF
	}
	return done, err
}

// onlyWriter and onlyReader hide ReadFrom and WriteTo, so that io.CopyBuffer
// uses the buffer it is given.
type (
	onlyWriter struct{ io.Writer }
	onlyReader struct{ io.Reader }
)
