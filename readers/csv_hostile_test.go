package readers_test

import (
	"bytes"
	"context"
	"io"
	"strconv"
	"strings"
	"testing"
	"time"

	"catenrich/internal/fault"
	"catenrich/internal/table"
	"catenrich/readers"
	"catenrich/readers/readertest"
)

func TestDamagedFiles(t *testing.T) {
	text := csvText(readertest.Random(3000, 5))
	gz, zst := gzipped(t, text), zstandard(t, text)
	flip := func(p []byte) []byte {
		p = bytes.Clone(p)
		p[len(p)/2] ^= 0x10
		return p
	}
	for name, content := range map[string][]byte{
		"cut.csv.gz": gz[:len(gz)/2], "flipped.csv.gz": flip(gz), "no.csv.gz": text, "empty.csv.gz": nil, "tail.csv.gz": append(bytes.Clone(gz), "tail"...),
		"cut.csv.zst": zst[:len(zst)/2], "flipped.csv.zst": flip(zst), "no.csv.zst": text, "empty.csv.zst": nil,
	} {
		t.Run(name, func(t *testing.T) {
			path := writeFile(t, t.TempDir(), name, content)
			s, err := readers.OpenCSV(path, readers.CSVOptions{})
			for err == nil {
				defer s.Close()
				_, err = s.Next(context.Background())
			}
			if err == io.EOF || fault.Of(err) != fault.Data || !strings.Contains(err.Error(), path) {
				t.Errorf("class %d, %v, want class 65 with the file's name", fault.Of(err), err)
			}
		})
	}
}

// TestCloseEndsAnIdleRead: a pipe that says nothing must not hold the exit.
func TestCloseEndsAnIdleRead(t *testing.T) {
	r, w := io.Pipe()
	defer w.Close()
	go w.Write([]byte("z\n1\n"))
	opened := make(chan *readers.CSV)
	go func() {
		s, err := readers.NewCSV("in", r, readers.CSVOptions{BlockSize: 2})
		if err != nil {
			t.Error(err)
		}
		opened <- s
	}()
	s := <-opened
	if _, err := s.Next(context.Background()); err != nil {
		t.Fatal(err)
	}
	ctx, stop := context.WithTimeout(context.Background(), 20*time.Millisecond)
	defer stop()
	if _, err := s.Next(ctx); err != context.DeadlineExceeded {
		t.Errorf("Next returns %v, want the end of its context", err)
	}
	ended := make(chan error)
	go func() {
		_, err := s.Next(context.Background())
		ended <- err
	}()
	time.Sleep(10 * time.Millisecond)
	s.Close()
	select {
	case err := <-ended:
		if err == nil {
			t.Error("Next returned a chunk of a closed source")
		}
	case <-time.After(5 * time.Second):
		t.Fatal("Next still waits for a closed source")
	}
}

func TestLongFieldsAndManyColumns(t *testing.T) {
	field := strings.Repeat("0123456789abcdef", 64<<20/16)
	_, cells, _, err := readAll("a,z\n"+field+",1\nb,2\n\"\n"+field+"\",3\n", readers.CSVOptions{}, "z", table.Float)
	if got := strings.Join(cells, "|"); err != nil || got != "2:1|3:2|4:3" {
		t.Errorf("%s, %v, want 2:1|3:2|4:3", got, err)
	}
	names := make([]string, 5000)
	for i := range names {
		names[i] = "c" + strconv.Itoa(i)
	}
	_, cells, _, err = readAll(strings.Join(names, ",")+"\n"+strings.Repeat(",", 4999)+"7\n", readers.CSVOptions{}, "c4999", table.Float)
	if got := strings.Join(cells, "|"); err != nil || got != "2:7" {
		t.Errorf("%s, %v, want 2:7", got, err)
	}
}

// TestLinesThatAreNoRowsCostNothing: the memory of a batch is that of its rows.
func TestLinesThatAreNoRowsCostNothing(t *testing.T) {
	for name, text := range map[string]string{
		"line ends within quotes":      "z,a\n1,\"" + strings.Repeat("\n", 3<<20) + "\"\n",
		"blank lines":                  "z,a\n" + strings.Repeat("\n", 3<<20),
		"blank lines after a long one": "z,a\n1," + strings.Repeat("x", 3<<20) + strings.Repeat("\n", 3<<20) + "1,2\n",
	} {
		t.Run(name, func(t *testing.T) {
			s, err := readers.NewCSV("in", io.NopCloser(strings.NewReader(text)), readers.CSVOptions{})
			if err != nil {
				t.Fatal(err)
			}
			defer s.Close()
			s.Select([]table.Want{{Field: 0, As: table.Float}}, nil)
			var b table.Batch
			lines := int64(1)
			for {
				c, err := s.Next(context.Background())
				if err == io.EOF {
					break
				}
				if err != nil {
					t.Fatal(err)
				}
				if err := s.Decode(c, &b); err != nil {
					t.Fatal(err)
				}
				if cap(b.In[0].Float) > 100 {
					t.Fatalf("chunk %d has room for %d rows, and has %d", c.Seq, cap(b.In[0].Float), b.Rows)
				}
				if c.Line != lines+1 {
					t.Fatalf("chunk %d begins on line %d, want %d", c.Seq, c.Line, lines+1)
				}
				lines += int64(bytes.Count(c.Raw, []byte("\n")))
				s.Release(c)
			}
			if want := int64(strings.Count(text, "\n")); lines != want {
				t.Errorf("%d lines, want %d", lines, want)
			}
		})
	}
}

var xs = bytes.Repeat([]byte("x"), 1<<20)

// endless is a record that never ends.
type endless struct{ head io.Reader }

func (e endless) Read(p []byte) (int, error) {
	if n, err := e.head.Read(p); err == nil {
		return n, nil
	}
	return copy(p, xs), nil
}
func (endless) Close() error { return nil }

func TestRecordTooLong(t *testing.T) {
	for head, want := range map[string]string{
		"z\n1\n2\n":    "in:4: the record that begins here is longer than 128 MiB",
		"z\n1\n\n\"2,": "in:4: a quote opens here that is not closed within 128 MiB",
	} {
		s, err := readers.NewCSV("in", endless{strings.NewReader(head)}, readers.CSVOptions{})
		if err != nil {
			t.Fatal(err)
		}
		if _, err = s.Next(context.Background()); err != nil {
			t.Fatal(err)
		}
		_, err = s.Next(context.Background())
		if fault.Of(err) != fault.Data || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %s", err, want)
		}
		s.Close()
	}
}
