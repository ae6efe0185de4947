package rowfile

import (
	"bufio"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"os"
	"path/filepath"
)

// Writer writes a file row by row, in their order. It appears under its name by Commit.
type Writer struct {
	layout Layout
	path   string
	file   *os.File
	out    *bufio.Writer
	rows   int
	sums   []byte
}

// Create begins the file that will be path, whose folder exists. Commit or Abort ends it.
func Create(path string, l Layout) (*Writer, error) {
	head, err := l.head()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	file, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.part")
	if err != nil {
		return nil, err
	}
	w := &Writer{layout: l, path: path, file: file, out: bufio.NewWriterSize(file, 1<<20), sums: make([]byte, l.sumBytes())}
	if _, err := w.out.Write(head); err != nil {
		return nil, errors.Join(err, w.Abort())
	}
	return w, nil
}

// WriteRow writes the next row: the bytes of each section, record by record.
func (w *Writer) WriteRow(sections ...[]byte) error {
	if len(sections) != len(w.layout.Sections) {
		panic("internal error: rowfile: a row of another number of sections")
	}
	at := 0
	for i, s := range w.layout.Sections {
		if len(sections[i]) != s.Records*s.Bytes {
			panic("internal error: rowfile: a section of another size")
		}
		for r := range s.Records {
			sum := crc32.Checksum(sections[i][r*s.Bytes:(r+1)*s.Bytes], castagnoli)
			binary.LittleEndian.PutUint32(w.sums[at:], sum)
			at += 4
		}
	}
	binary.LittleEndian.PutUint32(w.sums[at:], crc32.Checksum(w.sums[:at], castagnoli))
	for _, part := range append([][]byte{w.sums}, sections...) {
		if _, err := w.out.Write(part); err != nil {
			return err
		}
	}
	w.rows++
	return nil
}

// Commit gives the file its name when all rows are written.
func (w *Writer) Commit() error {
	if w.rows != w.layout.Rows {
		panic("internal error: rowfile: some rows were not written")
	}
	if err := errors.Join(w.out.Flush(), w.file.Sync(), w.file.Close()); err != nil {
		return errors.Join(err, w.Abort())
	}
	if err := os.Rename(w.file.Name(), w.path); err != nil {
		return errors.Join(err, w.Abort())
	}
	w.file = nil
	return nil
}

// Abort removes what was written; after Commit it does nothing.
func (w *Writer) Abort() error {
	if w.file == nil {
		return nil
	}
	name := w.file.Name()
	w.file.Close() // may be closed already
	w.file = nil
	return os.Remove(name)
}
