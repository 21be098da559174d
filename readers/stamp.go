package readers

import (
	"os"

	"golang.org/x/sys/unix"

	"catenrich/internal/fault"
)

// A stamp tells one state of a file from another: which file it is, how long,
// and when its content and its inode last changed.
type stamp struct {
	device, inode  uint64
	size           int64
	mtime, ctimeNs int64
}

func stampOf(st *unix.Stat_t) stamp {
	return stamp{
		device: uint64(st.Dev), inode: st.Ino, size: st.Size,
		mtime: st.Mtim.Nano(), ctimeNs: st.Ctim.Nano(),
	}
}

// stampFile returns the stamp of an open file.
func stampFile(f *os.File) (stamp, error) {
	var st unix.Stat_t
	if err := unix.Fstat(int(f.Fd()), &st); err != nil {
		return stamp{}, fault.IO.Errorf("reading the state of %s: %w", f.Name(), err)
	}
	return stampOf(&st), nil
}

// check proves that the open file, and whatever bears its name now, are what
// the stamp was taken of.
func (s stamp) check(f *os.File) error {
	now, err := stampFile(f)
	if err != nil {
		return err
	}
	var named unix.Stat_t
	if err := unix.Stat(f.Name(), &named); err != nil {
		return fault.IO.Errorf("%s was removed or renamed while it was being read: %w", f.Name(), err)
	}
	if now != s || stampOf(&named) != s {
		return fault.IO.Errorf("%s changed while it was being read: run again when it is complete", f.Name())
	}
	return nil
}
