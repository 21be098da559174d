package interop

import (
	"database/sql"
	"fmt"
	"math"
	"os"

	"github.com/xitongsys/parquet-go/reader"
	"github.com/xitongsys/parquet-go/source"
)

// judgeXitongsys reads the new columns only: the library has no way to compare
// old ones without a Go struct for each file.
func judgeXitongsys(_ *sql.DB, in, out string) error {
	if err := caught(func() error { _, _, err := openXitongsys(in); return err }); err != nil {
		return errCannot{err}
	}
	r, n, err := openXitongsys(out)
	if err != nil {
		return err
	}
	defer r.ReadStop()
	var cols [3][]any
	for i, f := range added {
		path := r.SchemaHandler.GetRootExName() + "\x01" + f.Name
		if cols[i], _, _, err = r.ReadColumnByPath(path, n); err != nil {
			return fmt.Errorf("column %s: %w", f.Name, err)
		}
		if int64(len(cols[i])) != n {
			return fmt.Errorf("column %s: %d of %d values", f.Name, len(cols[i]), n)
		}
	}
	for row := range n {
		v, isV := cols[0][row].(float64)
		if !isV {
			v = math.NaN()
		}
		flag, has := cols[1][row].(bool)
		status, _ := cols[2][row].(int32)
		if err := check(row, v, flag, has, status); err != nil {
			return err
		}
	}
	return nil
}

func openXitongsys(path string) (*reader.ParquetReader, int64, error) {
	f, err := openLocal(path)
	if err != nil {
		return nil, 0, err
	}
	r, err := reader.NewParquetColumnReader(f, 1)
	if err != nil {
		return nil, 0, err
	}
	return r, r.GetNumRows(), nil
}

// localFile is a source.ParquetFile on disk.
type localFile struct {
	*os.File
	path string
}

func openLocal(path string) (source.ParquetFile, error) {
	f, err := os.Open(path)
	return localFile{f, path}, err
}

func (f localFile) Open(name string) (source.ParquetFile, error) {
	if name == "" {
		name = f.path
	}
	return openLocal(name)
}

func (f localFile) Create(string) (source.ParquetFile, error) { return nil, os.ErrPermission }
