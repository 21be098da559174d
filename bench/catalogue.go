package main

import (
	"bufio"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"

	"github.com/apache/arrow-go/v18/parquet"
	"github.com/apache/arrow-go/v18/parquet/compress"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/schema"
)

// narrow and wide are how many columns the two Parquet catalogues have.
const (
	narrowColumns = 8
	wideColumns   = 60
	groupRows     = 122_880 // rows of a row group, what DuckDB makes
)

// catalogue returns the path of a catalogue, made now if it is not there. It is
// made by a process of its own: the peak memory that the system reports of a
// program is never below that of the process that started it.
func (b *bench) catalogue(name string, columns, rows int, suffix string) (string, error) {
	path := filepath.Join(b.dir, fmt.Sprintf("%s-%d-%d%s", name, columns, rows, suffix))
	if _, err := os.Stat(path); err == nil {
		return path, nil
	}
	self, err := os.Executable()
	if err != nil {
		return "", err
	}
	fmt.Fprintf(os.Stderr, "bench: making %s\n", path)
	made := exec.CommandContext(b.ctx, self, "--make", path)
	made.Stderr = os.Stderr
	return path, made.Run()
}

// makeCatalogue makes a file of the columns and rows that its name tells.
func makeCatalogue(path string) error {
	base := filepath.Base(path)
	suffix := filepath.Ext(base)
	parts := strings.Split(strings.TrimSuffix(base, suffix), "-")
	if len(parts) != 3 {
		return fmt.Errorf("%s is not called NAME-COLUMNS-ROWS", path)
	}
	columns, err := strconv.Atoi(parts[1])
	rows, err2 := strconv.Atoi(parts[2])
	if err = errors.Join(err, err2); err != nil {
		return err
	}
	f, err := os.Create(path + ".part")
	if err != nil {
		return err
	}
	defer f.Close()
	if suffix == ".csv" {
		err = writeCSV(f, rows)
	} else {
		err = writeParquet(f, columns, rows)
	}
	if err != nil {
		return err
	}
	return os.Rename(path+".part", path)
}

// An object is one row of the invented survey, to the digits that surveys give.
type object struct {
	ra, dec, z, zErr, g, r, i float64
}

func draw(d *rand.Rand) object {
	o := object{ra: round(360*d.Float64(), 1e6), dec: round(180*d.Float64()-90, 1e6)}
	o.z = round(3*math.Sqrt(d.Float64()*d.Float64()), 1e6)
	o.zErr = round(0.0001+0.001*d.Float64(), 1e6)
	o.r = round(16+8*math.Sqrt(d.Float64()), 1e4)
	o.g, o.i = round(o.r+1.2*d.Float64(), 1e4), round(o.r-0.6*d.Float64(), 1e4)
	return o
}

func round(v, to float64) float64 { return math.Round(v*to) / to }

const seed = 20260301

// writeCSV writes ten columns.
func writeCSV(f *os.File, rows int) error {
	d := rand.New(rand.NewPCG(seed, 1))
	w := bufio.NewWriterSize(f, 1<<20)
	w.WriteString("object,ra,dec,z_best,z_err,mag_g,mag_r,mag_i,zflag,field\n")
	var line []byte
	for n := range rows {
		o := draw(d)
		line = strconv.AppendInt(line[:0], 7_000_000_000+int64(n), 10)
		for _, c := range []struct {
			v      float64
			digits int
		}{{o.ra, 6}, {o.dec, 6}, {o.z, 6}, {o.zErr, 6}, {o.g, 4}, {o.r, 4}, {o.i, 4}} {
			line = append(line, ',')
			line = strconv.AppendFloat(line, c.v, 'f', c.digits, 64)
		}
		line = fmt.Appendf(line, ",%d,QR%04d\n", d.IntN(5), n/500%10000)
		w.Write(line)
	}
	return w.Flush()
}

// writeParquet writes the first columns of: an identifier, position, redshift,
// magnitudes, then fluxes in float32 and float64.
func writeParquet(f *os.File, columns, rows int) error {
	d := rand.New(rand.NewPCG(seed, 2))
	optional := parquet.Repetitions.Optional
	fields := schema.FieldList{schema.NewInt64Node("object", optional, -1)}
	for _, name := range []string{"ra", "dec", "z_best", "z_err", "mag_g", "mag_r", "mag_i"} {
		fields = append(fields, schema.NewFloat64Node(name, optional, -1))
	}
	for k := len(fields); k < columns; k++ {
		if k%4 == 0 {
			fields = append(fields, schema.NewFloat32Node(fmt.Sprintf("error_%02d", k), optional, -1))
		} else {
			fields = append(fields, schema.NewFloat64Node(fmt.Sprintf("flux_%02d", k), optional, -1))
		}
	}
	root, err := schema.NewGroupNode("schema", parquet.Repetitions.Required, fields, -1)
	if err != nil {
		return err
	}
	w := file.NewParquetWriter(f, root, file.WithWriterProps(parquet.NewWriterProperties(
		parquet.WithDictionaryDefault(false), parquet.WithCompression(compress.Codecs.Snappy), parquet.WithDataPageSize(1<<20))))
	for from := 0; from < rows; from += groupRows {
		if err := writeGroup(w, d, from, min(groupRows, rows-from), columns); err != nil {
			return err
		}
	}
	return w.Close()
}

// writeGroup writes one row group.
func writeGroup(w *file.Writer, d *rand.Rand, from, rows, columns int) error {
	g, err := w.AppendRowGroupChecked()
	if err != nil {
		return err
	}
	ids, levels := make([]int64, rows), make([]int16, rows)
	var seven [7][]float64
	for row := range rows {
		ids[row], levels[row] = 7_000_000_000+int64(from+row), 1
		o := draw(d)
		for k, v := range []float64{o.ra, o.dec, o.z, o.zErr, o.g, o.r, o.i} {
			seven[k] = append(seven[k], v)
		}
	}
	wide, narrow := make([]float64, rows), make([]float32, rows)
	for k := range columns {
		c, err := g.NextColumn()
		if err != nil {
			return err
		}
		switch c := c.(type) {
		case *file.Int64ColumnChunkWriter:
			_, err = c.WriteBatch(ids, levels, nil)
		case *file.Float32ColumnChunkWriter:
			for row := range narrow {
				narrow[row] = d.Float32()
			}
			_, err = c.WriteBatch(narrow, levels, nil)
		case *file.Float64ColumnChunkWriter:
			values := wide
			if k <= len(seven) {
				values = seven[k-1]
			} else {
				for row := range wide {
					wide[row] = round(1000*d.Float64(), 1e3)
				}
			}
			_, err = c.WriteBatch(values, levels, nil)
		}
		if err = errors.Join(err, c.Close()); err != nil {
			return err
		}
	}
	return g.Close()
}
