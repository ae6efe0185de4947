package rowfile

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"io"
	"os"
	"sync"
)

// File reads records. Any number of goroutines may use it.
type File struct {
	layout Layout
	file   *os.File
	mu     sync.Mutex
	sums   map[int][]byte // checksums of rows read lately
}

// knownSums are kept of so many rows: as many as an aperture has, and more.
const knownSums = 256

// Open opens a file of this layout. Errors are ErrOther where it has another one,
// ErrDamaged where its size is not what the layout says, and those of os.
func Open(path string, l Layout) (*File, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	f := &File{layout: l, file: file, sums: map[int][]byte{}}
	if err := f.check(); err != nil {
		file.Close() // only read from
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return f, nil
}

func (f *File) check() error {
	head := make([]byte, headBytes)
	if _, err := io.ReadFull(f.file, head); err != nil {
		return errors.Join(ErrDamaged, err)
	}
	got, err := parseHead(head)
	if err != nil {
		return err
	}
	if !got.equal(f.layout) {
		return ErrOther
	}
	info, err := f.file.Stat()
	if err != nil {
		return err
	}
	if info.Size() != f.layout.Size() {
		return fmt.Errorf("%w: it has %d bytes, not %d", ErrDamaged, info.Size(), f.layout.Size())
	}
	return nil
}

// Close ends the use of the file.
func (f *File) Close() error { return f.file.Close() }

// Path is the file's name.
func (f *File) Path() string { return f.file.Name() }

// ReadRecords reads count records of a section of a row, from the first on, into dst, and
// checks each. The error is ErrDamaged where one is not what was written.
func (f *File) ReadRecords(dst []byte, row, section, first, count int) error {
	s := f.layout.Sections[section]
	if row < 0 || row >= f.layout.Rows || first < 0 || count < 0 || first+count > s.Records || len(dst) != count*s.Bytes {
		panic("internal error: rowfile: records that are not there")
	}
	sums, err := f.checksums(row)
	if err != nil {
		return err
	}
	record, offset := f.layout.place(section)
	at := headBytes + int64(row)*f.layout.rowBytes() + offset + int64(first)*int64(s.Bytes)
	if _, err := f.file.ReadAt(dst, at); err != nil {
		return f.damaged(row, err)
	}
	for r := range count {
		want := binary.LittleEndian.Uint32(sums[4*(record+first+r):])
		if crc32.Checksum(dst[r*s.Bytes:(r+1)*s.Bytes], castagnoli) != want {
			return f.damaged(row, nil)
		}
	}
	return nil
}

// checksums of a row.
func (f *File) checksums(row int) ([]byte, error) {
	f.mu.Lock()
	sums := f.sums[row]
	f.mu.Unlock()
	if sums != nil {
		return sums, nil
	}
	sums = make([]byte, f.layout.sumBytes())
	if _, err := f.file.ReadAt(sums, headBytes+int64(row)*f.layout.rowBytes()); err != nil {
		return nil, f.damaged(row, err)
	}
	last := len(sums) - 4
	if crc32.Checksum(sums[:last], castagnoli) != binary.LittleEndian.Uint32(sums[last:]) {
		return nil, f.damaged(row, nil)
	}
	f.mu.Lock()
	defer f.mu.Unlock()
	if len(f.sums) >= knownSums {
		clear(f.sums)
	}
	f.sums[row] = sums
	return sums, nil
}

func (f *File) damaged(row int, cause error) error {
	err := fmt.Errorf("%s, row %d: %w; remove the file, it will be made again", f.Path(), row, ErrDamaged)
	if cause != nil {
		err = fmt.Errorf("%w: %w", err, cause)
	}
	return err
}
