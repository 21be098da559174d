package job

import (
	"fmt"
	"io"
	"os"
)

// maxFile is the largest job file that is read, in bytes.
const maxFile = 4 << 20

// Read reads the text of a job file.
func Read(path string) ([]byte, error) { return readAtMost(path, maxFile) }

// readAtMost reads a file, and no more than most bytes of one that is longer,
// or that has no end, such as a device.
func readAtMost(path string, most int64) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, most+1))
	if err == nil && int64(len(text)) > most {
		err = fmt.Errorf("%s has more than %d bytes", path, most)
	}
	return text, err
}
